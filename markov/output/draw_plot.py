"""From a model to a file with one plot of its results, or with the picture of its structure."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

from markov.errors import IllPosed, UsageError
from markov.evaluation import solve_model
from markov.model import Model
from markov.output.drawing import PICTURES, Drawn, check_target, write_pictures
from markov.output.picture import Picture
from markov.output.plots import PLOTS, Plots
from markov.output.structure_picture import structure_picture

#: What can be plotted, with a word on each.
SUBJECTS: dict[str, str] = {
    "reliability": "R(t) up to the mission time",
    "unreliability": "unreliability and unavailability on logarithmic axes, with the limits of targets",
    "cycle": "unavailability between tests, visits and phase boundaries",
    "dependences": "what makes the unavailability, as bars",
    "ways": "the most frequent ways to failure, as bars",
    "structure": "what must deliver",
}


def draw_plot(
    model: Model,
    path: str | os.PathLike[str],
    *,
    what: str = "unreliability",
    overwrite: bool = False,
    progress: Callable[[str], None] = lambda _: None,
) -> Drawn:
    """Plot results of a model into a file.

    Parameters
    ----------
    model : Model
    path : str or path
        Ends in .svg, .pdf or .png.
    what : str
        One of `SUBJECTS`.
    overwrite : bool
        Whether a file of this name may be replaced.
    progress : callable
        Told what is being done.

    Raises
    ------
    UsageError
        The file is at fault, or there is no such plot.
    IllPosed
        The model has nothing of the kind to plot.
    """
    if what not in SUBJECTS:
        raise UsageError(f"plot {what!r}: expected one of {', '.join(SUBJECTS)}")
    target = Path(path)
    check_target(target, overwrite=overwrite, endings=PICTURES)
    picture = structure_picture(model) if what == "structure" else _plotted(model, what, progress)
    if picture is None:
        raise IllPosed(f"there is no plot {what!r} of this model: {_WHY[what]}")
    return write_pictures((picture,), target, overwrite=overwrite)


def _plotted(model: Model, what: str, progress: Callable[[str], None]) -> Picture | None:
    solution = solve_model(model, progress=progress)
    progress("plotting")
    plot = PLOTS[what](Plots(model, solution))
    return None if plot is None else plot.picture


_WHY = {
    "reliability": "no value of it could be found, or it has too many states",
    "unreliability": "its values are 0 or could not be found, or it has too many states",
    "cycle": "it has no tests, visits or phases",
    "dependences": "nothing in it departs from independent blocks, or no effect could be told",
    "ways": "it cannot fail, has a single way to failure, has tests, visits or phases, or too many states",
    "structure": "a chain written by hand does not say what must deliver",
}
