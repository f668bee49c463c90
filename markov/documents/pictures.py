"""Pictures as figures of a document: structure, states, ways to failure, plots."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from markov.documents.tree import Figure
from markov.errors import DrawingError, IllPosed, NotReached, TooLarge
from markov.model import Model
from markov.output.diagram import Labels
from markov.output.engines import Engine
from markov.output.failure_paths import path_diagram
from markov.output.page_writer import page_bytes
from markov.output.paging import IN_TEXT, Sheets, lay_out
from markov.output.picture import Picture
from markov.output.plots import Plots
from markov.output.state_diagram import state_diagram
from markov.output.structure_picture import structure_picture
from markov.output.svg_writer import svg_text
from markov.results import Solution
from markov.states import StateSpace

_MILLIMETRES = 25.4 / 72
_MOST_WAYS = 12
"""Ways to failure in a document: as many as can be taken in."""


def figure_of(picture: Picture, name: str, caption: str) -> Figure:
    """Return a picture as a figure, in every form; its anchor is ``figure-`` and its name.

    Raises
    ------
    DrawingError
        It is too large for a PNG.
    """
    return Figure(
        name=name,
        caption=caption,
        alt=picture.description,
        svg=svg_text(picture),
        png=page_bytes(picture, "png")[0],
        pdf=page_bytes(picture, "pdf")[0],
        width_mm=picture.width * _MILLIMETRES,
        height_mm=picture.height * _MILLIMETRES,
        anchor=f"figure-{name}",
    )


def structure_figure(model: Model) -> Figure | None:
    """Return the picture of what must deliver; None for a chain written by hand."""
    picture = structure_picture(model)
    return (
        None
        if picture is None
        else figure_of(picture, "structure", "What must deliver, with its groups and their members")
    )


def state_figures(
    model: Model,
    space: StateSpace,
    *,
    labels: Labels = "formulas",
    called: str = "the plant",
    suffix: str = "",
    engine: Engine | None = None,
) -> tuple[Figure, ...]:
    """Return the state diagram on as many pages as it takes, folded where it is large; none where it cannot be drawn.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain, or that of a part.
    labels : str
        What stands on the arrows.
    called, suffix : str
        What the caption calls the chain; what is added to the names of the figures.
    engine : str, optional
        What places the boxes.
    """
    try:
        sheets = lay_out(state_diagram(model, space, labels=labels), IN_TEXT, engine=engine)
        folded = ", folded by the number of failed units" if sheets.is_folded else ""
        return _figures(sheets, f"states{suffix}", f"State diagram of {called}: {space.size:,} states{folded}")
    except (DrawingError, TooLarge):
        return ()


def path_figures(
    model: Model,
    space: StateSpace,
    share: Fraction | float = Fraction(95, 100),
    *,
    labels: Labels = "formulas",
    called: str = "the plant",
    suffix: str = "",
    engine: Engine | None = None,
) -> tuple[Figure, ...]:
    """Return the dominant ways to failure; none where there are fixed instants, nothing fails, or it cannot be drawn.

    Parameters as for `state_figures`; `share` is that of all failures which the ways are to make together.
    """
    try:
        sheets = lay_out(path_diagram(model, space, share, labels=labels, most=_MOST_WAYS), IN_TEXT, engine=engine)
    except (DrawingError, TooLarge, IllPosed, NotReached):
        return ()
    return _figures(sheets, f"ways{suffix}", f"Dominant ways to failure of {called}; everything else in one box")


def plot_figures(model: Model, solution: Solution, space: StateSpace | None = None) -> tuple[Figure, ...]:
    """Return the plots that mean something for a model: over time, over the cycle of tests, contributions as bars."""
    return tuple(figure_of(plot.picture, plot.name, plot.caption) for plot in Plots(model, solution, space).every())


def _figures(sheets: Sheets, name: str, caption: str) -> tuple[Figure, ...]:
    pictures: Sequence[Picture] = sheets.pictures
    if len(pictures) == 1:
        return (figure_of(pictures[0], name, caption),)
    return tuple(
        figure_of(picture, name if number == 1 else f"{name}-{number}", f"{caption}, page {number} of {len(pictures)}")
        for number, picture in enumerate(pictures, 1)
    )
