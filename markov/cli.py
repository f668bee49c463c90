"""The command line: one subcommand per public verb."""

from __future__ import annotations

import contextlib
import io
import os
import sys
from collections.abc import Callable
from typing import TYPE_CHECKING

import click

from markov._version import __version__
from markov.errors import MarkovError, NotReached, SpecError, TooLarge, UsageError

if TYPE_CHECKING:
    from rich.console import Console

MET, MISSED, AT_FAULT, UNDECIDED, INTERNAL = 0, 1, 2, 3, 4

_EXAMPLES = """\b
Examples:
  markov draft plant.yaml          write a first spec to start from
  markov check plant.yaml          problems, size, choices left unsaid
  markov solve plant.yaml          measures, verdicts, assumptions
  markov solve plant.yaml --at "10 y" --json
  markov draw plant.yaml plant.svg
\b
Exit status: 0 all targets met; 1 a target missed; 2 the spec or the call is
at fault; 3 undecided, or out of reach; 4 an internal error."""


@click.group(epilog=_EXAMPLES, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="markov", message="%(prog)s %(version)s")
def app() -> None:
    """Exact Markov models of redundant plants.

    Reads a YAML spec of units, repair, switchover and standby, generates the chain, solves it with a proven bound on
    every number and says which targets are met.
    """


_SPEC = click.argument("spec", metavar="SPEC")


@app.command(
    epilog="""\b
Examples:
  markov solve specs/harbour_lock.yaml
  markov solve plant.yaml --at "1000 h" --at "10 y"
  markov solve plant.yaml --json > plant.json
  cat plant.yaml | markov solve -"""
)
@_SPEC
@click.option(
    "--at", "times", multiple=True, metavar="TIME", help='Answer at this time too, such as "1 y"; repeatable.'
)
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
@click.option("--method", metavar="NAME", help="Force a method for values at a time, to check one against another.")
def solve(spec: str, times: tuple[str, ...], as_json: bool, method: str | None) -> int:
    """Solve SPEC (a file, or - for standard input): measures, verdicts, unsaid choices."""
    from markov.evaluation import solve_model
    from markov.progress import progress_line
    from markov.verbs import hours, read

    model = read(spec)
    asked = [hours(time, model) for time in times]
    with progress_line() as tell:
        solution = solve_model(model, asked, method=method, progress=tell)
    if as_json:
        from markov.output.as_json import solution_json

        _emit(solution_json(solution))
    else:
        from markov.output.table import print_solution

        _emit_printed(lambda console: print_solution(solution, console))
    return solution.exit_status


@app.command(
    epilog="""\b
Example:
  markov check plant.yaml"""
)
@_SPEC
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
def check(spec: str, as_json: bool) -> int:
    """Read SPEC and tell its problems, size, unsaid choices and warnings; solve nothing."""
    from markov.evaluation import check_model
    from markov.progress import progress_line
    from markov.verbs import read

    model = read(spec)
    with progress_line() as tell:
        tell("generating the chain")
        found = check_model(model)
    if as_json:
        from markov.output.as_json import check_json

        _emit(check_json(found))
    else:
        from markov.output.table import print_check

        _emit_printed(lambda console: print_check(found, console))
    return MET


@app.command(
    epilog="""\b
Examples:
  markov draw plant.yaml plant.svg
  markov draw plant.yaml plant.pdf --overwrite
  markov draw plant.yaml plant.png --values"""
)
@_SPEC
@click.argument("picture", metavar="FILE")
@click.option("--values", is_flag=True, help="Label arrows with values per hour beside the formulas.")
@click.option("--overwrite", is_flag=True, help="Replace FILE if it exists.")
def draw(spec: str, picture: str, values: bool, overwrite: bool) -> int:
    """Draw the state diagram of SPEC into FILE: .svg, .pdf, .png or .dot by its ending."""
    from pathlib import Path

    from markov.evaluation import build_space
    from markov.output.drawing import check_target, write_diagram
    from markov.output.state_diagram import state_diagram
    from markov.progress import progress_line
    from markov.verbs import read

    check_target(Path(picture), overwrite=overwrite)
    model = read(spec)
    with progress_line() as tell:
        tell("generating the chain")
        space = build_space(model)
        tell(f"drawing {space.size:,} states")
        drawn = write_diagram(state_diagram(model, space, values=values), Path(picture), overwrite=overwrite)
    for note in drawn.notes:
        if not note.endswith(": not found"):  # an engine that is not there is no news where another did the work
            click.echo(f"markov: {note}", err=True)
    engine = "" if drawn.engine == "none" else f", laid out by {drawn.engine}"
    click.echo(f"{drawn.path}: {space.size:,} states{engine}", err=True)
    return MET


@app.command(
    epilog="""\b
Example:
  markov draft plant.yaml && markov solve plant.yaml"""
)
@click.argument("file", metavar="FILE")
def draft(file: str) -> int:
    """Write a commented first spec to FILE; an existing file is never touched."""
    from markov.verbs import draft as write_draft

    click.echo(f"{write_draft(file)}: a first spec; edit it, then: markov solve {file}", err=True)
    return MET


@app.command(
    epilog="""\b
Example:
  markov schema > markov-spec.schema.json"""
)
def schema() -> int:
    """Print the JSON Schema of the spec language, for completion in an editor."""
    import json

    from markov.model import json_schema

    _emit(json.dumps(json_schema(), indent=2, ensure_ascii=False) + "\n")
    return MET


def _emit(text: str) -> None:
    """Write to standard output; a reader that has gone is no fault, and the exit status stays what it is."""
    if sys.stdout is None:
        raise UsageError("there is no standard output to write to")
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        _silence()
    except OSError as error:
        _silence()
        raise UsageError(f"standard output cannot be written: {error.strerror or error}") from error


def _emit_printed(show: Callable[[Console], None]) -> None:
    """Write what a function prints on a console that suits standard output."""
    from rich.console import Console

    on_terminal = sys.stdout is not None and sys.stdout.isatty()
    width = None if on_terminal else max(120, int(os.environ.get("COLUMNS", "0") or 0))
    page = io.StringIO()
    show(Console(file=page, force_terminal=on_terminal or None, width=width, highlight=False, soft_wrap=False))
    _emit(page.getvalue())


def main(arguments: list[str] | None = None) -> int:
    """Run the command line and return its exit status.

    Errors go to standard error; a faulty spec or call prints nothing on standard output.
    """
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")  # names may hold what the terminal cannot show
    try:
        status = app.main(args=arguments, prog_name="markov", standalone_mode=False)
    except SpecError as error:
        return _failed("\n".join(str(problem) for problem in error.problems), AT_FAULT)
    except (TooLarge, NotReached) as error:
        return _failed(f"markov: {error}", UNDECIDED)
    except MarkovError as error:
        return _failed(f"markov: {error}", AT_FAULT)
    except click.exceptions.Exit as error:
        return error.exit_code
    except click.ClickException as error:
        error.show()
        return AT_FAULT
    except (click.Abort, KeyboardInterrupt):
        return _failed("markov: interrupted; nothing was written", 130)
    except BrokenPipeError:
        _silence()
        return MET
    except SystemExit as error:
        # click ends in this way, with status 1, where the reader of its help has gone
        gone = type(sys.stdout).__name__.endswith("PacifyFlushWrapper")
        return MET if gone else int(error.code or 0)
    except Exception as error:
        return _internal(error)
    return status if isinstance(status, int) else MET


def _failed(message: str, status: int) -> int:
    click.echo(message, err=True)
    return status


def _internal(error: Exception) -> int:
    import traceback

    click.echo(traceback.format_exc(), err=True, nl=False)
    click.echo(
        f"markov: internal error ({type(error).__name__}); this is a fault of the program, not of the spec; "
        "please report it with the spec and the lines above",
        err=True,
    )
    return INTERNAL


def _silence() -> None:
    """Let the interpreter end quietly after the reader of standard output has gone."""
    with contextlib.suppress(OSError, ValueError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
