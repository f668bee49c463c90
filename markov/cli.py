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

    from markov.output.diagram import Labels
    from markov.output.drawing import Drawn

MET, MISSED, AT_FAULT, UNDECIDED, INTERNAL = 0, 1, 2, 3, 4

_EXAMPLES = """\b
Examples:
  markov draft plant.yaml          write a first spec to start from
  markov check plant.yaml          problems, size, choices left unsaid
  markov solve plant.yaml          measures, verdicts, assumptions
  markov solve plant.yaml --at "10 y" --json
  markov draw plant.yaml plant.svg
  markov report plant.yaml plant.html
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
  markov draw plant.yaml plant.png --labels both
  markov draw plant.yaml ways.svg --paths 95%"""
)
@_SPEC
@click.argument("picture", metavar="FILE")
@click.option(
    "--labels",
    type=click.Choice(["formulas", "values", "both"]),
    default="formulas",
    help="What stands on the arrows: formulas (the default), values per hour, or both.",
)
@click.option(
    "--paths",
    metavar="SHARE",
    help="Only the ways to failure that together make this share of all failures, such as 95%; the rest in one box.",
)
@click.option("--whole", is_flag=True, help="Every state by itself, over as many pages as that takes.")
@click.option("--one-sheet", is_flag=True, help="One sheet of whatever size, in place of pages of A4.")
@click.option("--overwrite", is_flag=True, help="Replace FILE if it exists.")
def draw(
    spec: str, picture: str, labels: Labels, paths: str | None, whole: bool, one_sheet: bool, overwrite: bool
) -> int:
    """Draw the state diagram of SPEC into FILE: .svg, .pdf, .png, .dot or .graphml by its ending."""
    from pathlib import Path

    from markov.output.draw_model import draw_model
    from markov.output.drawing import check_target
    from markov.progress import progress_line
    from markov.verbs import read

    check_target(Path(picture), overwrite=overwrite)
    model = read(spec)
    with progress_line() as tell:
        drawn = draw_model(
            model,
            picture,
            labels=labels,
            paths=paths,
            whole=whole,
            one_sheet=one_sheet,
            overwrite=overwrite,
            progress=tell,
        )
    _tell_drawn(drawn)
    return MET


@app.command(
    epilog="""\b
Examples:
  markov plot plant.yaml plant.svg
  markov plot plant.yaml cycle.pdf --what cycle"""
)
@_SPEC
@click.argument("picture", metavar="FILE")
@click.option(
    "--what",
    metavar="WORD",
    default="unreliability",
    help="reliability, unreliability (the default, with unavailability and the limits of targets), cycle (between "
    "tests, visits and phase boundaries), dependences or ways (as bars), structure (what must deliver).",
)
@click.option("--overwrite", is_flag=True, help="Replace FILE if it exists.")
def plot(spec: str, picture: str, what: str, overwrite: bool) -> int:
    """Plot results of SPEC, or draw what must deliver, into FILE: .svg, .pdf or .png by its ending."""
    from pathlib import Path

    from markov.output.draw_plot import draw_plot
    from markov.output.drawing import PICTURES, check_target
    from markov.progress import progress_line
    from markov.verbs import read

    check_target(Path(picture), overwrite=overwrite, endings=PICTURES)
    model = read(spec)
    with progress_line() as tell:
        drawn = draw_plot(model, picture, what=what, overwrite=overwrite, progress=tell)
    _tell_drawn(drawn)
    return MET


def _tell_drawn(drawn: Drawn) -> None:
    """Say on standard error which files were drawn, and what there is to know about them."""
    for note in drawn.notes:
        if not note.endswith(": not found"):  # an engine that is not there is no news where another did the work
            click.echo(f"markov: {note}", err=True)
    engine = "" if drawn.engine == "none" else f", laid out by {drawn.engine}"
    pages = f" and {len(drawn.paths) - 1} more" if len(drawn.paths) > 1 else ""
    click.echo(f"{drawn.path}{pages}{engine}", err=True)


@app.command(
    epilog="""\b
Examples:
  markov report plant.yaml plant.html
  markov report plant.yaml plant.docx --overwrite
  markov report plant.yaml tables.zip"""
)
@_SPEC
@click.argument("file", metavar="FILE")
@click.option(
    "--at", "times", multiple=True, metavar="TIME", help='Answer at this time too, such as "1 y"; repeatable.'
)
@click.option("--overwrite", is_flag=True, help="Replace FILE, and the files beside it, if they exist.")
def report(spec: str, file: str, times: tuple[str, ...], overwrite: bool) -> int:
    """Solve SPEC and write the report for a safety case into FILE.

    The ending decides: .html, .docx, .pdf; .tex or .md with further files beside it; .csv, .zip or a folder for all
    tables in full.
    """
    from pathlib import Path

    from markov.documents.report import make_report
    from markov.documents.spec_lines import read_with_lines
    from markov.documents.writing import check_report_target, write_report
    from markov.progress import progress_line
    from markov.verbs import hours

    target = Path(file)
    check_report_target(target, overwrite=overwrite)
    model, lines = read_with_lines(spec)
    asked = [hours(time, model) for time in times]
    with progress_line() as tell:
        made = make_report(model, asked, lines=lines, progress=tell)
        tell(f"writing {target.name}")
        written = write_report(made, target, overwrite=overwrite)
    beside = len(written.paths) - 1
    more = f" and {beside} further file{'s' if beside > 1 else ''} beside it" if beside and not target.is_dir() else ""
    click.echo(f"{target}{f': {len(written.paths)} files' if target.is_dir() else more}", err=True)
    return written.solution.exit_status


@app.command(
    epilog="""\b
Examples:
  markov explain plant.yaml
  markov explain plant.yaml 3
  markov explain plant.yaml 0 3 --json"""
)
@_SPEC
@click.argument("states", nargs=-1, metavar="[STATE [STATE]]")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
def explain(spec: str, states: tuple[str, ...], as_json: bool) -> int:
    """Explain SPEC in a paragraph; one STATE of its chain; or what leads from one STATE to another, and why so often.

    States go by the names or the numbers that `markov draw` shows.
    """
    from markov.documents.explain import explain as explain_model
    from markov.documents.explain_words import explanation_json, explanation_text
    from markov.documents.spec_lines import read_with_lines
    from markov.progress import progress_line

    model, lines = read_with_lines(spec)
    with progress_line() as tell:
        found = explain_model(model, states, lines=lines, progress=tell)
    _emit(explanation_json(found) if as_json else explanation_text(found))
    return MET


@app.command(
    epilog="""\b
Examples:
  markov changes old.yaml new.yaml
  markov changes by_hand.yaml plant.yaml --json
\b
Exit status: 0 no verdict flipped; 1 one did, or a hand-written chain and a
generated one differ; 3 a verdict became or ceased to be undecided, or a
target was removed."""
)
@click.argument("old", metavar="OLD")
@click.argument("new", metavar="NEW")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
def changes(old: str, new: str, as_json: bool) -> int:
    """Tell what changed from the spec OLD to NEW: states, arrows, parameters, assumptions, results, verdicts."""
    from markov.documents.changes import compare
    from markov.documents.changes_words import changes_json, changes_text
    from markov.documents.spec_lines import read_with_lines
    from markov.progress import progress_line

    if old == new == "-":
        raise UsageError("both specs from standard input; expected a file for one of them at least")
    (before, lines_before), (after, lines_after) = read_with_lines(old), read_with_lines(new)
    with progress_line() as tell:
        found = compare(before, after, old_lines=lines_before, new_lines=lines_after, progress=tell)
    _emit(changes_json(found) if as_json else changes_text(found))
    return found.exit_status


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
