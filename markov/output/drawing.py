"""A state diagram becomes a file: SVG, PDF, PNG or Graphviz source by the ending of its name."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from markov.errors import DrawingError, UsageError
from markov.output.composition import compose
from markov.output.diagram import StateDiagram
from markov.output.dot_text import dot_text
from markov.output.engines import TIME_LIMIT, Engine, place_boxes
from markov.output.folding import fold_by_level
from markov.output.picture import Picture
from markov.output.skeleton import build_skeleton
from markov.output.storing import store, taken

ENDINGS = (".svg", ".pdf", ".png", ".dot")
STATE_LIMIT = 200
"""States that one picture may hold; a larger diagram is folded by level."""
ARROW_LIMIT = 1000
"""Arrows that one picture may hold; a diagram with more is folded by level."""
_BOXES_WANTED = 40
_COLUMNS_WANTED = 8
_MILLIMETRES_PER_POINT = 25.4 / 72
_PAGES = (("A4", 210.0, 297.0), ("A3", 297.0, 420.0), ("A2", 420.0, 594.0), ("A1", 594.0, 841.0), ("A0", 841.0, 1189.0))
_PAGE_MARGIN = 12.0


@dataclass(frozen=True)
class Drawn:
    """A file that has been written.

    Parameters
    ----------
    path
        Where it is.
    engine
        What placed the boxes: "dot", "graphviz-pure", "own", or "none" for Graphviz source.
    notes
        What the reader should know: engines that failed, folding, the page it fits, characters without a font.
    """

    path: Path
    engine: Engine | Literal["none"]
    notes: tuple[str, ...]


def check_target(target: Path, *, overwrite: bool) -> str:
    """Return the ending of a file that a picture may be written to.

    Raises
    ------
    UsageError
        An unknown ending, a folder that is not there, a file that exists already while `overwrite` is false.
    """
    form = target.suffix.lower()
    if form not in ENDINGS:
        raise UsageError(f"{target}: ending {target.suffix!r}; expected one of {', '.join(ENDINGS)}")
    if not target.parent.is_dir():
        raise UsageError(f"{target}: there is no folder {target.parent}; make it first")
    if target.is_dir():
        raise UsageError(f"{target} is a folder; expected the name of a file")
    if not overwrite and os.path.lexists(target):
        raise UsageError(taken(target))
    return form


def write_diagram(
    diagram: StateDiagram,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    engine: Engine | None = None,
    time_limit: float = TIME_LIMIT,
) -> Drawn:
    """Draw `diagram` into a file; the same diagram and engine give the same bytes.

    Parameters
    ----------
    diagram
        What to draw. More than 200 states or 1,000 arrows are folded by level first, which the picture says;
        Graphviz source is written in full.
    path
        The file, ending in .svg, .pdf, .png (300 dots per inch) or .dot.
    overwrite
        Whether a file of this name may be replaced. The file appears whole or not at all.
    engine
        "dot", "graphviz-pure" or "own"; None tries them in this order.
    time_limit
        Seconds granted to each engine that runs as a process.

    Raises
    ------
    UsageError
        An unknown ending or engine, a folder that is not there, a file that exists already.
    DrawingError
        The named engine failed, the picture is too large for its format, or the file cannot be stored.
    """
    target = Path(path)
    form = check_target(target, overwrite=overwrite)
    if form == ".dot":
        store(dot_text(diagram).encode(), target, overwrite=overwrite)
        return Drawn(target, "none", ())
    drawable, folded = _drawable(diagram)
    skeleton = build_skeleton(drawable)
    placed = place_boxes(skeleton, engine=engine, time_limit=time_limit)
    picture = compose(drawable, skeleton, placed.heights)
    content, lacking = _content(picture, form)
    store(content, target, overwrite=overwrite)
    return Drawn(target, placed.engine, (*placed.notes, *folded, _page(picture), *lacking))


def _drawable(diagram: StateDiagram) -> tuple[StateDiagram, tuple[str, ...]]:
    """Return the diagram, folded where it is beyond the limits, and a note on that."""
    states, arrows = len(diagram.nodes), len(diagram.arrows)
    if states <= STATE_LIMIT and arrows <= ARROW_LIMIT:
        return diagram, ()
    if any(node.holds for node in diagram.nodes):
        raise DrawingError(
            f"a folded diagram of {states} boxes and {arrows} arrows; "
            f"one picture holds {STATE_LIMIT} and {ARROW_LIMIT}: fold into wider bands of levels"
        )
    band = 1
    folded = fold_by_level(diagram, band=band)
    while _is_wide(folded) and band <= max(node.level for node in diagram.nodes):
        band += 1
        folded = fold_by_level(diagram, band=band)
    note = (
        f"{states} states and {arrows} arrows: more than {STATE_LIMIT} or {ARROW_LIMIT} cannot be read in one picture, "
        f"folded into {len(folded.nodes)} boxes by level"
    )
    return folded, (note,)


def _is_wide(folded: StateDiagram) -> bool:
    columns = len({node.level for node in folded.nodes})
    return len(folded.nodes) > _BOXES_WANTED or columns > _COLUMNS_WANTED


def _content(picture: Picture, form: str) -> tuple[bytes, tuple[str, ...]]:
    if form == ".svg":
        from markov.output.svg_writer import svg_text

        return svg_text(picture).encode(), ()
    from markov.output.page_writer import page_bytes

    return page_bytes(picture, "pdf" if form == ".pdf" else "png")


def _page(picture: Picture) -> str:
    width, height = picture.width * _MILLIMETRES_PER_POINT, picture.height * _MILLIMETRES_PER_POINT
    size = f"{width:.0f} × {height:.0f} mm with text of 8 pt"
    for name, short, long in _PAGES:
        inner_short, inner_long = short - 2 * _PAGE_MARGIN, long - 2 * _PAGE_MARGIN
        if width <= inner_short and height <= inner_long:
            return f"{size}: fits {name} upright"
        if width <= inner_long and height <= inner_short:
            return f"{size}: fits {name} sideways"
    return f"{size}: larger than {_PAGES[-1][0]}"
