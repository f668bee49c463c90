"""The program at a terminal, in a pipe, interrupted."""

import errno
import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from markov.evaluation import solve_model
from tests.cli.program import Program

LAMP = """
title: Lamp
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
system: lamp
mission: {time: 100 h}
targets:
  - {id: M, measure: steady_state_availability, at_least: 0.9}
  - {id: N, measure: steady_state_availability, at_least: 0.999}
"""
MET = LAMP.replace("  - {id: N, measure: steady_state_availability, at_least: 0.999}\n", "")
COLOUR = re.compile(r"\x1b\[[0-9;]*\b(3[0-7]|9[0-7])m")


# --- colour


def test_a_pipe_gets_plain_text(program: Program) -> None:
    assert "\x1b" not in program.table(LAMP).out


def test_a_terminal_gets_colours_unless_they_are_unwanted(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    path = program.file(LAMP)
    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.setattr(type(sys.stdout), "isatty", lambda self: self is sys.stdout)
    assert COLOUR.search(program("solve", path).out)
    monkeypatch.setenv("NO_COLOR", "1")
    assert not COLOUR.search(program("solve", path).out)


def test_verdicts_are_told_in_words_beside_the_colour(program: Program) -> None:
    lines = program.table(LAMP).out.splitlines()
    assert any(re.match(r"  M +.* met ", line) for line in lines)
    assert any(re.match(r"  N +.* missed ", line) for line in lines)


@pytest.mark.parametrize("columns", [72, 80, 250])
def test_a_narrow_terminal_loses_no_word_and_breaks_no_number(
    program: Program, monkeypatch: pytest.MonkeyPatch, columns: int
) -> None:
    path = program.file(LAMP)
    monkeypatch.setenv("NO_COLOR", "1")
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.setenv("COLUMNS", str(columns))
    monkeypatch.setattr(type(sys.stdout), "isatty", lambda self: self is sys.stdout)
    lines = re.sub(r"\x1b\[[0-9;]*m", "", program("solve", path).out).splitlines()
    assert max(map(len, lines)) <= columns
    out = "\n".join(lines)
    assert "…" not in out
    for word in ("0.9900990", "8.67327", "missed", "approval", "exponential", "steady-state"):
        assert word in out


# --- progress


def _lasting(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let the solution wait until something was said on standard error."""

    def solve(model: object, times: object, *, progress: object, **rest: object) -> object:
        progress("weighing the lamps")
        until = time.monotonic() + 20
        while "weighing the lamps" not in sys.stderr.getvalue() and time.monotonic() < until:
            time.sleep(0.005)
        return solve_model(model, times, progress=progress, **rest)

    monkeypatch.setattr("markov.evaluation.solve_model", solve)


@pytest.mark.parametrize("options", [(), ("--json",)])
def test_work_that_lasts_is_told_on_standard_error_and_never_on_standard_output(
    program: Program, monkeypatch: pytest.MonkeyPatch, options: tuple[str, ...]
) -> None:
    silent = program("solve", program.file(LAMP), *options)
    assert silent.err == ""
    monkeypatch.setattr("markov.progress.PATIENCE", 0.0)
    _lasting(monkeypatch)
    told = program("solve", program.file(LAMP), *options)
    assert "markov: weighing the lamps" in told.err
    assert told.out == silent.out
    assert told.status == silent.status


def test_progress_is_removed_from_a_terminal_at_the_end(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("markov.progress.PATIENCE", 0.0)
    _lasting(monkeypatch)
    path = program.file(LAMP)
    monkeypatch.setattr(type(sys.stderr), "isatty", lambda self: self is sys.stderr)
    told = program("solve", path)
    assert "\rmarkov" not in told.out
    assert "weighing the lamps" in told.err
    assert told.err.endswith("\r\x1b[K")


def test_patience_is_two_seconds() -> None:
    from markov import progress

    assert progress.PATIENCE == 2.0


# --- pipes


def _hearing_interrupts() -> None:
    """Undo, in the child, that a run in the background ignores interrupts: what is ignored is inherited."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)


@contextmanager
def _started(folder: Path, checkout: Path, *arguments: str, **options: object) -> Iterator[subprocess.Popen[str]]:
    """The program in a process of its own, which does not outlive the test."""
    environment = {**os.environ, "PYTHONPATH": os.fspath(checkout), **options.pop("env", {})}
    process = subprocess.Popen(
        [sys.executable, "-m", "markov", *arguments],
        cwd=folder,
        env=environment,
        stderr=subprocess.PIPE,
        text=True,
        encoding="utf-8",
        preexec_fn=_hearing_interrupts if os.name == "posix" else None,
        **options,
    )
    with process:
        try:
            yield process
            process.wait(timeout=60)
        finally:
            process.kill()


def _opened_by_its_reader(pipe: Path) -> int:
    """The writing end of a named pipe, as soon as somebody reads it."""
    until = time.monotonic() + 60
    while True:
        try:
            return os.open(pipe, os.O_WRONLY | os.O_NONBLOCK)
        except OSError as nobody_reads:
            if nobody_reads.errno != errno.ENXIO or time.monotonic() > until:
                raise
            time.sleep(0.01)


def _into_a_closed_pipe(folder: Path, checkout: Path, *arguments: str) -> tuple[int, str]:
    reader, writer = os.pipe()
    os.close(reader)
    with _started(folder, checkout, *arguments, stdout=writer) as process:
        os.close(writer)
        _, err = process.communicate(timeout=60)
    return process.returncode, err


CALLS = [("solve", "plant.yaml"), ("solve", "plant.yaml", "--json"), ("schema",), ("--help",)]


@pytest.mark.parametrize("arguments", CALLS, ids=" ".join)
def test_a_reader_that_has_gone_is_no_reason_to_complain(
    program: Program, checkout: Path, arguments: tuple[str, ...]
) -> None:
    program.file(MET)
    _, err = _into_a_closed_pipe(program.folder, checkout, *arguments)
    assert err == ""


@pytest.mark.parametrize("arguments", CALLS, ids=" ".join)
def test_a_reader_that_has_gone_is_no_missed_target(
    program: Program, checkout: Path, arguments: tuple[str, ...]
) -> None:
    program.file(MET)
    status, _ = _into_a_closed_pipe(program.folder, checkout, *arguments)
    assert status != 1


def test_the_first_line_of_a_pipe_is_enough(program: Program, checkout: Path) -> None:
    program.file(LAMP)
    with _started(program.folder, checkout, "solve", "plant.yaml", stdout=subprocess.PIPE) as process:
        assert process.stdout.readline() == "Lamp\n"
        process.stdout.close()
        assert process.stderr.read() == ""


def _under(encoding: str, program: Program, checkout: Path, *options: str) -> tuple[int, str]:
    with _started(
        program.folder,
        checkout,
        "solve",
        "plant.yaml",
        *options,
        stdout=subprocess.PIPE,
        env={"PYTHONIOENCODING": encoding},
    ) as process:
        out, _ = process.communicate(timeout=60)
    return process.returncode, out


@pytest.mark.parametrize("options", [(), ("--json",)], ids=["table", "json"])
def test_names_that_the_terminal_cannot_show_do_not_stop_the_program(
    program: Program, checkout: Path, options: tuple[str, ...]
) -> None:
    program.file(MET.replace("lamp", "фонарь"))
    status, out = _under("ascii", program, checkout, *options)
    assert status == 0
    assert "0.99" in out


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full here")
def test_a_full_disk_is_not_called_a_fault_of_the_program(program: Program, checkout: Path) -> None:
    program.file(MET)
    with (
        open("/dev/full", "w") as full,
        _started(program.folder, checkout, "solve", "plant.yaml", stdout=full) as process,
    ):
        _, err = process.communicate(timeout=60)
    assert process.returncode not in (0, 1)
    assert "No space left" in err
    assert "fault of the program" not in err


@pytest.mark.skipif(os.name != "posix", reason="streams are closed by a POSIX shell")
@pytest.mark.parametrize("call", ["solve plant.yaml >&-", "solve - <&-"])
def test_a_stream_that_is_closed_from_the_start_is_a_fault_of_the_call(
    program: Program, checkout: Path, call: str
) -> None:
    program.file(MET)
    done = subprocess.run(
        ["sh", "-c", f'exec "$0" -m markov {call}', sys.executable],
        cwd=program.folder,
        env={**os.environ, "PYTHONPATH": os.fspath(checkout)},
        capture_output=True,
        text=True,
        timeout=60,
    )
    assert done.returncode in (0, 2), done.stderr
    assert "Traceback" not in done.stderr


# --- interrupts


def _interrupted(process: subprocess.Popen[str]) -> tuple[str, str]:
    """Interrupt until the process ends: one that comes just before it begins to wait for input is heard after that."""
    for _ in range(8):
        process.send_signal(signal.SIGINT)
        try:
            return process.communicate(timeout=5)
        except subprocess.TimeoutExpired:
            continue
    raise AssertionError("no interrupt was heard")


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no named pipes here")
@pytest.mark.parametrize("arguments", [("solve", "slow"), ("draw", "slow", "plant.svg")], ids=" ".join)
def test_an_interrupt_ends_quietly_and_leaves_nothing_behind(
    program: Program, checkout: Path, arguments: tuple[str, ...]
) -> None:
    os.mkfifo(program.folder / "slow")
    with _started(program.folder, checkout, *arguments, stdout=subprocess.PIPE) as process:
        writer = _opened_by_its_reader(program.folder / "slow")
        out, err = _interrupted(process)
        os.close(writer)
    assert process.returncode not in (0, 1, 2, 3, 4)
    assert out == ""
    assert err.strip() == "markov: interrupted; nothing was written"
    assert sorted(path.name for path in program.folder.iterdir()) == ["slow"]


def interrupt(*arguments: object, **options: object) -> object:
    raise KeyboardInterrupt


def test_an_interrupt_while_solving_prints_nothing(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("markov.evaluation.answers.transient", interrupt)
    told = program.solve(LAMP)
    assert told.out == ""
    assert "interrupted" in told.err
    assert told.status not in range(5)


@pytest.mark.parametrize(
    "moment", ["markov.output.paging.place_boxes", "markov.output.svg_writer.svg_text", "os.fsync"]
)
@pytest.mark.parametrize("before", [None, "mine"], ids=["new file", "existing file"])
def test_an_interrupt_while_drawing_leaves_the_folder_as_it_was(
    program: Program, monkeypatch: pytest.MonkeyPatch, moment: str, before: str | None
) -> None:
    path = program.file(LAMP)
    if before is not None:
        Path("lamp.svg").write_text(before, encoding="utf-8")
    files = sorted(program.folder.iterdir())
    with monkeypatch.context() as patch:
        patch.setattr(moment, interrupt)
        told = program("draw", path, "lamp.svg", "--overwrite")
    assert told.status not in range(5)
    assert sorted(program.folder.iterdir()) == files
    assert before is None or Path("lamp.svg").read_text(encoding="utf-8") == before


def test_an_interrupt_while_drafting_leaves_no_file(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("markov.spec.draft.draft_text", interrupt)
    assert program("draft", "plant.yaml").status not in range(5)
    assert not Path("plant.yaml").exists()
