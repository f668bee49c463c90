"""Make, complete or repair the virtual environment in which the scripts run.

Called by scripts/environment.sh with the Python that was found and the name of a list in scripts/requirements. It
uses the standard library alone. A list holds the exact version and hashes of every package. Once all are installed,
a copy of the list is left in .venv: as long as it equals the list, there is nothing to do.
"""

import fcntl
import os
import shutil
import subprocess
import sys
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

CHECKOUT = Path(__file__).resolve().parent.parent
ENVIRONMENT = CHECKOUT / ".venv"
PYTHON = ENVIRONMENT / "bin" / "python"
LEVELS = ("program", "test", "check")
"""Each list holds the packages of the one before it, at the same versions."""

OURS = ENVIRONMENT / "made-by-scripts"
UNFINISHED = ENVIRONMENT / "unfinished"

AT_FAULT = 2
INTERRUPTED = 130


class CannotPrepareError(Exception):
    """The environment cannot be made here; the text says what to do about it."""


def listed(level: str) -> bytes:
    """Return the wanted list of packages."""
    return (CHECKOUT / "scripts" / "requirements" / f"{level}.txt").read_bytes()


def is_current(level: str) -> bool:
    """Tell whether the packages of the list are installed."""
    stamp = ENVIRONMENT / f"{level}.txt"
    return stamp.is_file() and stamp.read_bytes() == listed(level) and os.access(PYTHON, os.X_OK)


def say(text: str) -> None:
    """Tell the user, on standard error, since standard output belongs to the program."""
    print(f"markov set-up: {text}", file=sys.stderr, flush=True)


@contextmanager
def alone() -> Iterator[int]:
    """Hold the lock of the checkout; yields its descriptor.

    The commands that are run inherit the descriptor, so that the lock also stands while one of them outlives a
    set-up that was killed. The system frees the lock with the last of them.
    """
    with (CHECKOUT / ".venv.lock").open("a") as lock:
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            say("another set-up of this checkout is running; waiting for it")
            fcntl.flock(lock, fcntl.LOCK_EX)
        yield lock.fileno()


def run(command: Sequence[str | Path], *, lock: int) -> None:
    """Run one command of the set-up, free of settings that would send packages elsewhere."""
    diverting = {"PIP_PREFIX", "PIP_ROOT", "PIP_TARGET", "PYTHONHOME", "PYTHONPATH"}
    settings = {name: value for name, value in os.environ.items() if name not in diverting}
    settings |= {"PIP_USER": "0", "PIP_DISABLE_PIP_VERSION_CHECK": "1", "PIP_NO_INPUT": "1"}
    done = subprocess.run(command, stdin=subprocess.DEVNULL, stdout=2, env=settings, pass_fds=[lock])
    if done.returncode:
        raise CannotPrepareError("the step above failed; set right what it says, then give the command again")


def check_python() -> None:
    """Make sure that this Python can make a virtual environment."""
    try:
        import venv  # noqa: F401
        from ensurepip import bootstrap  # noqa: F401
    except ImportError as error:
        # Debian splits both from its Python; its package for python3 has no version in the name.
        default = shutil.which("python3")
        is_default = default is not None and os.path.realpath(default) == os.path.realpath(sys.executable)
        package = "python3-venv" if is_default else f"python{sys.version_info[0]}.{sys.version_info[1]}-venv"
        raise CannotPrepareError(
            f"{sys.executable} cannot make a virtual environment. On Debian or Ubuntu type this, then give the "
            f"command again:\n\n    sudo apt install {package}\n"
        ) from error


def clear() -> None:
    """Remove what an interrupted or outdated set-up left, and nothing that somebody else made."""
    if not ENVIRONMENT.exists() and not ENVIRONMENT.is_symlink():
        return
    if not OURS.exists() and any(ENVIRONMENT.iterdir()):
        raise CannotPrepareError(
            f"{ENVIRONMENT} is there already and was not made by these scripts. Move or remove it, then give the "
            "command again"
        )
    shutil.rmtree(ENVIRONMENT)


def make(lock: int) -> None:
    """Make an environment without packages."""
    clear()
    ENVIRONMENT.mkdir()
    OURS.touch()
    UNFINISHED.touch()
    # By its real name: after an upgrade of the system to another Python the environment then fails as a whole and is
    # made anew, where `python3` would start without its packages.
    run([os.path.realpath(sys.executable), "-I", "-m", "venv", ENVIRONMENT], lock=lock)
    site = next(ENVIRONMENT.glob("lib/python*/site-packages"))
    # The checkout itself, by a path relative to this file: it may be moved as a whole.
    (site / "checkout.pth").write_text(os.path.relpath(CHECKOUT, site) + "\n", encoding="utf-8")


def install(level: str, lock: int) -> None:
    """Install the packages of the list, then leave a copy of it as the sign that all are there."""
    levels = LEVELS[: LEVELS.index(level) + 1]
    copies = {name: listed(name) for name in levels}
    UNFINISHED.touch()
    wanted = ENVIRONMENT / "wanted.txt"
    wanted.write_bytes(copies[level])
    options = ["--quiet", "--require-hashes", "--only-binary", ":all:", "--requirement", str(wanted)]
    run([PYTHON, "-I", "-m", "pip", "install", *options], lock=lock)
    wanted.unlink()
    UNFINISHED.unlink()
    for name, content in copies.items():
        part = ENVIRONMENT / f"{name}.part"
        part.write_bytes(content)
        part.replace(ENVIRONMENT / f"{name}.txt")


def prepare(level: str) -> None:
    """Bring the environment to the level, whatever is there."""
    with alone() as lock:
        if is_current(level):
            return
        began = time.monotonic()
        can_grow = not UNFINISHED.exists() and any(is_current(name) for name in LEVELS)
        if can_grow:
            say(f"adding what scripts/requirements/{level}.txt lists")
        else:
            check_python()
            say("installing what is needed into .venv of the checkout, once; this takes about half a minute")
            make(lock)
        install(level, lock)
        say(f"done in {time.monotonic() - began:.0f} s")


def main(arguments: Sequence[str]) -> int:
    """Prepare one level; returns the exit status."""
    try:
        (level,) = arguments
        prepare(level)
    except KeyboardInterrupt:
        say("interrupted; the next start makes it whole")
        return INTERRUPTED
    except (CannotPrepareError, OSError) as error:
        say(str(error))
        return AT_FAULT
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
