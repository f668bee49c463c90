"""From a model to the files of its state diagram, or of its dominant ways to failure."""

from __future__ import annotations

import os
from collections.abc import Callable
from fractions import Fraction
from pathlib import Path

from markov.errors import UsageError
from markov.evaluation import build_space
from markov.model import Model
from markov.output.diagram import Labels
from markov.output.drawing import Drawn, check_target, write_diagram
from markov.output.engines import Engine
from markov.output.failure_paths import path_diagram
from markov.output.paging import A4
from markov.output.state_diagram import state_diagram
from markov.quantities import QuantityError, parse_quantity


def draw_model(
    model: Model,
    path: str | os.PathLike[str],
    *,
    labels: Labels = "formulas",
    paths: str | float | Fraction | None = None,
    whole: bool = False,
    one_sheet: bool = False,
    overwrite: bool = False,
    engine: Engine | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Drawn:
    """Draw the state diagram of a model into files; the format follows the ending of the name.

    Parameters
    ----------
    model : Model
    path : str or path
        Ends in .svg, .pdf, .png, .dot or .graphml.
    labels : str
        ``formulas``, ``values`` per hour or ``both`` on the arrows.
    paths : str, float or Fraction, optional
        Draw only the ways to failure that together make this share of all failures, such as ``"95%"``; everything else
        becomes one box.
    whole : bool
        Draw every state by itself, over as many pages of A4 as that takes.
    one_sheet : bool
        Draw one sheet of whatever size in place of pages of A4.
    overwrite : bool
        Whether files of these names may be replaced.
    engine : str, optional
        What places the boxes; see `write_diagram`.
    progress : callable
        Told what is being done.

    Raises
    ------
    UsageError
        The file or the share is at fault.
    DrawingError
        The picture could not be made.
    IllPosed
        Ways to failure were asked for, and there are none to tell.
    TooLarge
        Too many states to draw.
    """
    check_target(Path(path), overwrite=overwrite)
    share = None if paths is None else share_of(paths)
    progress("generating the chain")
    space = build_space(model)
    progress(f"drawing {space.size:,} states")
    if share is None:
        diagram = state_diagram(model, space, labels=labels)
    else:
        diagram = path_diagram(model, space, share, labels=labels)
    paper = None if one_sheet else A4
    return write_diagram(diagram, path, overwrite=overwrite, paper=paper, whole=whole, engine=engine)


def share_of(written: str | float | Fraction) -> Fraction:
    """Return a share above 0 and up to 1, from a number or from text such as ``95%``.

    Raises
    ------
    UsageError
        It is neither, or out of range.
    """
    problem = f"share {written!r}: expected a share above 0, at most 100%; write it as 95% or 0.95"
    try:
        read = parse_quantity(written) if isinstance(written, str) else None
        exact = Fraction(written) if read is None else read.exact
    except (QuantityError, ValueError, OverflowError, TypeError) as error:
        raise UsageError(problem) from error
    if not 0 < exact <= 1 or (read is not None and read.dimension != "share"):
        raise UsageError(problem)
    return exact
