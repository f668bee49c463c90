"""Holds what the scripts do on a fresh machine, on copies of them with nothing to download."""

import hashlib
import os
import re
import shutil
import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import pytest

PROGRAM = """\
import os, sys
print("standard output:", os.getcwd(), *sys.argv[1:])
sys.exit(3)
"""


def base_python() -> str:
    """The Python from which the environment of this test was made."""
    return os.path.realpath(sys.executable)


def lay_wheel(folder: Path) -> bytes:
    """Put a package named tiny, version 1, into the folder; returns the file's content."""
    path = folder / "tiny-1-py3-none-any.whl"
    with zipfile.ZipFile(path, "w") as wheel:
        wheel.writestr("tiny.py", "")
        wheel.writestr("tiny-1.dist-info/METADATA", "Metadata-Version: 2.1\nName: tiny\nVersion: 1\n")
        wheel.writestr("tiny-1.dist-info/WHEEL", "Wheel-Version: 1.0\nRoot-Is-Purelib: true\nTag: py3-none-any\n")
        wheel.writestr("tiny-1.dist-info/RECORD", "tiny.py,,\n")
    return path.read_bytes()


class Machine:
    """A fresh machine: a clone of a small program with the scripts of this one, and a PATH of its own."""

    def __init__(self, root: Path, checkout: Path) -> None:
        self.clone = root / "a clone"
        self.bin = root / "bin"
        self.work = root / "work"
        for folder in (self.clone / "markov", self.bin, self.work):
            folder.mkdir(parents=True)
        shutil.copytree(checkout / "scripts", self.clone / "scripts", ignore=shutil.ignore_patterns("__pycache__"))
        for level in ("program", "test", "check"):
            self.want(level, "# nothing\n")
        (self.clone / "markov" / "__init__.py").touch()
        (self.clone / "markov" / "__main__.py").write_text(PROGRAM, encoding="utf-8")
        for tool in ("bash", "env", "cmp", "head", "readlink", "rm"):
            found = shutil.which(tool)
            assert found is not None, tool
            (self.bin / tool).symlink_to(found)

    def want(self, level: str, text: str) -> None:
        (self.clone / "scripts" / "requirements" / f"{level}.txt").write_text(text, encoding="utf-8")

    def offer(self, name: str, script: str) -> None:
        """Put a command on PATH."""
        path = self.bin / name
        path.unlink(missing_ok=True)
        path.write_text(f"#!/bin/sh\n{script}\n", encoding="utf-8")
        path.chmod(0o755)

    def offer_python(self, name: str = "python3") -> None:
        self.offer(name, f'exec "{base_python()}" "$@"')

    def start(self, *arguments: str, command: str | Path | None = None) -> subprocess.Popen[str]:
        return subprocess.Popen(
            [command or self.clone / "scripts" / "markov", *arguments],
            cwd=self.work,
            env={
                "PATH": str(self.bin),
                "HOME": str(self.work),
                "PYTHONPATH": "/nowhere",
                "PIP_NO_INDEX": "1",
                "PIP_FIND_LINKS": str(self.work),
            },
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )

    def run(self, *arguments: str, command: str | Path | None = None) -> tuple[int, str, str]:
        with self.start(*arguments, command=command) as process:
            try:
                out, err = process.communicate(timeout=120)
            finally:
                process.kill()
        return process.returncode, out, err

    @property
    def environment(self) -> Path:
        return self.clone / ".venv"

    def promised(self, *arguments: str) -> str:
        """What the small program prints."""
        return " ".join(["standard output:", str(self.work), *arguments]) + "\n"


@pytest.fixture
def machine(tmp_path: Path, checkout: Path) -> Machine:
    return Machine(tmp_path, checkout)


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory, checkout: Path) -> Machine:
    """A machine on which the program ran once; tests leave it whole."""
    machine = Machine(tmp_path_factory.mktemp("made"), checkout)
    machine.offer_python()
    status, out, err = machine.run("solve", "some spec.yaml")
    assert (status, out) == (3, machine.promised("solve", "some spec.yaml")), err
    assert "once" in err
    return machine


def test_second_start_sets_nothing_up_and_passes_everything_through(made: Machine) -> None:
    assert made.run("solve", "a b", "--json", "-") == (3, made.promised("solve", "a b", "--json", "-"), "")


def test_second_start_needs_no_python_on_path(made: Machine) -> None:
    (made.bin / "python3").rename(made.bin / "away")
    try:
        assert made.run() == (3, made.promised(), "")
    finally:
        (made.bin / "away").rename(made.bin / "python3")


def test_command_may_be_linked_into_another_folder(made: Machine) -> None:
    link = made.work / "linked"
    link.symlink_to(Path("..") / "a clone" / "scripts" / "markov")
    assert made.run(command=link) == (3, made.promised(), "")


def test_files_in_the_callers_folder_do_not_stand_in_for_modules(made: Machine) -> None:
    (made.work / "markov.py").write_text("raise SystemExit(9)", encoding="utf-8")
    assert made.run() == (3, made.promised(), "")


def test_clone_may_be_moved(made: Machine) -> None:
    before = made.clone
    made.clone = before.rename(before.with_name("moved"))
    try:
        assert made.run() == (3, made.promised(), "")
    finally:
        made.clone = made.clone.rename(before)


def test_other_levels_are_added_to_what_is_there(made: Machine) -> None:
    made.want("test", "# nothing more\n")
    keep = made.environment / "keep"
    keep.touch()
    status, _, err = made.run(command=made.clone / "scripts" / "test")
    assert status == 1, err  # the small program has no test runner
    assert "No module named pytest" in err
    assert "adding" in err
    assert keep.exists()
    assert made.run() == (3, made.promised(), "")


def test_interrupted_and_outdated_set_ups_are_made_anew(made: Machine) -> None:
    # An interruption leaves the mark of an unfinished set-up, and no copy of the list.
    (made.environment / "unfinished").touch()
    (made.environment / "program.txt").unlink()
    status, out, err = made.run()
    assert (status, out) == (3, made.promised()), err
    assert "once" in err
    assert not (made.environment / "unfinished").exists()

    # A new list, and two starts at once: one sets up while the other waits for it.
    made.want("program", "# nothing, newly\n")
    first, second = made.start("first"), made.start("second")
    told = []
    for process, name in ((first, "first"), (second, "second")):
        out, err = process.communicate(timeout=120)
        assert (process.returncode, out) == (3, made.promised(name)), err
        told.append(err)
    assert sum("once" in err for err in told) == 1, told
    assert made.run() == (3, made.promised(), "")


def test_package_with_another_hash_is_refused_until_the_list_is_mended(made: Machine) -> None:
    content = lay_wheel(made.work)
    made.want("program", f"tiny==1 --hash=sha256:{hashlib.sha256(b'another file').hexdigest()}\n")
    status, out, err = made.run()
    assert (status, out) == (2, "")
    assert "DO NOT MATCH THE HASHES" in err
    made.want("program", "tiny==1\n")
    status, out, err = made.run()
    assert (status, out) == (2, "")
    assert "Hashes are required" in err
    made.want("program", f"tiny==1 --hash=sha256:{hashlib.sha256(content).hexdigest()}\n")
    assert made.run()[:2] == (3, made.promised())
    assert made.run() == (3, made.promised(), "")
    assert len(list(made.environment.glob("lib/*/site-packages/tiny.py"))) == 1


def test_old_python_is_named_with_what_is_needed(machine: Machine) -> None:
    machine.offer("python3", '[ "$1" = --version ] && echo Python 3.9.2 && exit; exit 1')
    status, out, err = machine.run()
    assert (status, out) == (2, "")
    assert "needs Python 3.11 or newer" in err
    assert "python3 is Python 3.9.2" in err
    assert not machine.environment.exists()


def test_missing_python_is_told(machine: Machine) -> None:
    status, out, err = machine.run()
    assert (status, out) == (2, "")
    assert "no Python at all" in err


def test_newer_python_is_found_beside_an_old_one(machine: Machine) -> None:
    machine.offer("python3", "exit 1")
    machine.offer_python("python3.11")
    machine.offer_python("python3.13")
    (machine.clone / "scripts" / "prepare.py").write_text("import sys; print(sys.argv[1:]); sys.exit(2)")
    status, out, err = machine.run()
    assert (status, out, err) == (2, "", "['program']\n")


def test_missing_venv_prints_the_line_to_type(machine: Machine) -> None:
    # A Python that cannot import ensurepip, as Debian's without its package python3-venv.
    bare = machine.work / "bare"
    subprocess.run([base_python(), "-m", "venv", "--without-pip", bare], check=True)
    site = next(bare.glob("lib/python*/site-packages"))
    (site / "without.pth").write_text("import sys; sys.modules['ensurepip'] = None\n", encoding="utf-8")
    machine.offer("python3", f'exec "{bare}/bin/python" "$@"')
    status, out, err = machine.run()
    assert (status, out) == (2, "")
    lines = [line.strip() for line in err.splitlines()]
    assert any(re.fullmatch(r"sudo apt install python3(\.\d+)?-venv", line) for line in lines), err
    assert not machine.environment.exists()


def test_environment_of_somebody_else_is_left_alone(machine: Machine) -> None:
    machine.offer_python()
    (machine.environment / "bin").mkdir(parents=True)
    status, out, err = machine.run()
    assert (status, out) == (2, "")
    assert "not made by these scripts" in err
    assert (machine.environment / "bin").is_dir()


def pinned(text: str) -> dict[str, list[str]]:
    """Every requirement of a list with its hashes."""
    found: dict[str, list[str]] = {}
    for block in re.sub(r"\\\n\s*", "", text).splitlines():
        if not block.startswith("#"):
            requirement, *hashes = block.split("--hash=")
            found[requirement.strip()] = hashes
    return found


def lists(checkout: Path) -> dict[str, str]:
    folder = checkout / "scripts" / "requirements"
    return {path.stem: path.read_text(encoding="utf-8") for path in sorted(folder.glob("*.txt"))}


def test_every_package_is_pinned_by_version_and_hash(checkout: Path) -> None:
    for level, text in lists(checkout).items():
        packages = pinned(text)
        assert packages, level
        for requirement, hashes in packages.items():
            assert re.match(r"[a-z0-9-]+==[^ ;]+( ;|$)", requirement), requirement
            assert hashes, requirement
            assert all(re.fullmatch(r"sha256:[0-9a-f]{64}\s*", one) for one in hashes), requirement


def test_lists_name_no_index_and_no_place(checkout: Path) -> None:
    for text in lists(checkout).values():
        assert "://" not in text
        assert not re.search(r"^\s*-(?!-hash)", text, flags=re.MULTILINE)
        assert not re.search(r"(^|\s)/", text)


def test_each_list_holds_the_one_before_it(checkout: Path) -> None:
    packages = {level: pinned(text) for level, text in lists(checkout).items()}
    assert set(packages) == {"program", "test", "check"}
    assert packages["program"].items() <= packages["test"].items() <= packages["check"].items()


def test_lists_hold_every_declared_package(checkout: Path) -> None:
    content = tomllib.loads((checkout / "pyproject.toml").read_text(encoding="utf-8"))
    groups = content["dependency-groups"]
    declared = {
        "program": content["project"]["dependencies"],
        "test": groups["test"],
        "check": [line for line in groups["check"] if isinstance(line, str)],
    }
    for level, lines in declared.items():
        names = {requirement.split("==")[0] for requirement in pinned(lists(checkout)[level])}
        for line in lines:
            assert re.split(r"[\[>;]", line)[0].lower() in names, line


def test_wheel_holds_every_file_and_the_command(tmp_path: Path, checkout: Path) -> None:
    source = tmp_path / "source"
    shutil.copytree(checkout / "markov", source / "markov", ignore=shutil.ignore_patterns("__pycache__", ".*"))
    shutil.copy(checkout / "pyproject.toml", source)
    (source / "README.md").write_text("The real one is tested elsewhere.\n", encoding="utf-8")
    build = "import setuptools.build_meta as backend; backend.build_wheel('..')"
    done = subprocess.run([sys.executable, "-c", build], cwd=source, capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
    (path,) = tmp_path.glob("markov-*.whl")
    with zipfile.ZipFile(path) as wheel:
        names = set(wheel.namelist())
        (commands,) = (name for name in names if name.endswith("entry_points.txt"))
        assert "markov = markov.cli:main" in wheel.read(commands).decode()
    assert "markov/py.typed" in names
    files = {str(path.relative_to(source)) for path in (checkout_files(source / "markov"))}
    assert files == {name for name in names if name.startswith("markov/")}


def checkout_files(folder: Path) -> list[Path]:
    return [path for path in folder.rglob("*") if path.is_file() and "__pycache__" not in path.parts]
