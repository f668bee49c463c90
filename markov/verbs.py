"""The verbs of the public door, as the command line has them: read, solve, check, draw, report and so on."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import fields
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any

from markov import results
from markov.errors import UsageError

if TYPE_CHECKING:
    from markov.documents.explanation import Explanation
    from markov.documents.revision import Changes
    from markov.documents.writing import Reported
    from markov.model import Model
    from markov.output.drawing import Drawn
    from markov.results import Check


class Solution(results.Solution):
    """A solved model, shown as tables in a notebook; see `markov.results.Solution`."""

    def _repr_html_(self) -> str:
        from markov.output.notebook import solution_html

        return solution_html(self)


def read(source: str | Path) -> Model:
    """Read a spec from a file, or from standard input where `source` is ``-``.

    Raises
    ------
    SpecError
        The spec is at fault; holds every problem found.
    UsageError
        The file cannot be read.
    """
    from markov.spec import read as read_spec

    return read_spec(source)


def solve(
    spec: Model | str | Path, *, at: Iterable[str | float | Fraction] = (), method: str | None = None
) -> Solution:
    """Solve a model and judge its targets.

    Parameters
    ----------
    spec : Model, str or Path
        A model, or the file of a spec.
    at : iterable of str, float or Fraction
        Times beside the mission time: text with a unit of measure (``"1 y"``), or numbers of hours.
    method : str, optional
        Method for values at a time, such as ``"uniformisation"``, to check one against another; chosen by size and time
        if left out.

    Returns
    -------
    Solution
        Results with bounds, verdicts, choices left unsaid, warnings.

    Raises
    ------
    SpecError, UsageError
        The spec or the call is at fault.
    TooLarge
        The chain would be too large.
    """
    from markov.evaluation import solve_model

    model = _model(spec)
    solved = solve_model(model, [hours(time, model) for time in at], method=method)
    return Solution(**{each.name: getattr(solved, each.name) for each in fields(solved)})


def check(spec: Model | str | Path) -> Check:
    """Return the size of the chain, the choices left unsaid and the warnings; solve nothing."""
    from markov.evaluation import check_model

    return check_model(_model(spec))


def draw(spec: Model | str | Path, path: str | Path, *, overwrite: bool = False, **options: Any) -> Drawn:
    """Draw the state diagram into a file; the format follows the ending (.svg, .pdf, .png, .dot, .graphml).

    Parameters
    ----------
    spec : Model, str or Path
    path : str or Path
    overwrite : bool
        Whether files of this name may be replaced.
    **options
        ``labels``: ``"formulas"``, ``"values"`` or ``"both"``; ``paths``: share of all failures, such as ``"95%"``,
        that the ways to failure shown make together; ``whole``: every state by itself; ``one_sheet``: no pages.

    Raises
    ------
    UsageError
        An ending that is none of these, or a file that exists while `overwrite` is false.
    DrawingError
        The picture could not be made.
    """
    from markov.output.draw_model import draw_model

    return draw_model(_model(spec), Path(path), overwrite=overwrite, **options)


def plot(spec: Model | str | Path, path: str | Path, *, what: str = "unreliability", overwrite: bool = False) -> Drawn:
    """Plot results, or draw what must deliver, into a file; the format follows the ending (.svg, .pdf, .png).

    Parameters
    ----------
    spec : Model, str or Path
    path : str or Path
    what : str
        ``reliability``, ``unreliability``, ``cycle``, ``dependences``, ``ways`` or ``structure``.
    overwrite : bool
        Whether a file of this name may be replaced.

    Raises
    ------
    UsageError
        An ending or a word that is none of these, or a file that exists while `overwrite` is false.
    IllPosed
        The model has nothing of the kind to plot.
    """
    from markov.output.draw_plot import draw_plot

    return draw_plot(_model(spec), Path(path), what=what, overwrite=overwrite)


def report(
    spec: Model | str | Path, path: str | Path, *, at: Iterable[str | float | Fraction] = (), overwrite: bool = False
) -> Reported:
    """Solve a model and write the report for a safety case into a file.

    Parameters
    ----------
    spec : Model, str or Path
        A model, or the file of a spec.
    path : str or Path
        The file: .html, .docx, .pdf, .tex, .md, .csv or .zip by its ending; or a folder for CSV files.
    at : iterable of str, float or Fraction
        Times beside the mission time, as in `solve`.
    overwrite : bool
        Whether files of these names may be replaced.

    Returns
    -------
    Reported
        The files that were written, and the solution that they report.

    Raises
    ------
    SpecError, UsageError
        The spec or the call is at fault; a file exists while `overwrite` is false.
    TooLarge
        The chain would be too large.
    """
    from markov.documents.report import make_report
    from markov.documents.writing import check_report_target, write_report

    check_report_target(Path(path), overwrite=overwrite)
    model = _model(spec)
    return write_report(make_report(model, [hours(time, model) for time in at]), path, overwrite=overwrite)


def explain(spec: Model | str | Path, *states: str) -> Explanation:
    """Explain a model, one of its states, or what leads from one state to another.

    Parameters
    ----------
    spec : Model, str or Path
    *states : str
        Nothing for the whole model; one state; two for the arrow between them.  Each by the name or the number that
        `draw` shows.

    Raises
    ------
    SpecError, UsageError
        The spec is at fault; there is no such state or arrow.
    TooLarge
        The chain would be too large.
    """
    from markov.documents.explain import explain as explain_model

    return explain_model(_model(spec), states)


def changes(old: Model | str | Path, new: Model | str | Path) -> Changes:
    """Compare two revisions of a plant, or a hand-written chain with a generated one.

    Raises
    ------
    SpecError
        A spec is at fault.
    TooLarge
        A chain would be too large.
    """
    from markov.documents.changes import compare

    return compare(_model(old), _model(new))


def draft(path: str | Path) -> Path:
    """Write a commented first spec to start from; an existing file is never touched.

    Raises
    ------
    UsageError
        The file exists, or its folder does not.
    """
    from markov.output.storing import store
    from markov.spec.draft import draft_text

    target = Path(path)
    if not target.parent.is_dir():
        raise UsageError(f"{target}: there is no folder {target.parent}; make it first")
    if os.path.lexists(target):
        raise UsageError(f"{target} exists; a draft is never written over a file; choose another name")
    store(draft_text().encode(), target)
    return target


def _model(spec: Model | str | Path) -> Model:
    from markov.model import Model

    return spec if isinstance(spec, Model) else read(spec)


def hours(time: str | float | Fraction, model: Model) -> Fraction:
    """Return a time in hours from text with a unit of measure, or from a number of hours."""
    import math

    from markov.quantities import QuantityError, parse_quantity

    if isinstance(time, str):
        try:
            found = parse_quantity(
                time,
                parameters={name: each.value for name, each in model.parameters.items()},
                year=model.year_hours,
            )
        except QuantityError as error:
            raise UsageError(f"time {time!r}: {error}") from error
        if found.dimension != "time":
            raise UsageError(f"time {time!r}: not a time; write a number with a unit, such as 1 y or 500 h")
        return found.exact
    if isinstance(time, float) and not math.isfinite(time):
        raise UsageError(f"time {time}: expected a finite number of hours")
    if time < 0:
        raise UsageError(f"time {time}: expected a time that is not negative")
    return Fraction(time)
