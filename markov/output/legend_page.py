"""A sheet with the symbols of a state diagram, where they do not fit beside the states."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from markov.output.captions import heading, legend
from markov.output.diagram import LegendEntry, StateDiagram
from markov.output.lettering import legible
from markov.output.picture import PAPER, Picture, Shape, rectangle

_MARGIN = 12.0
_WIDTH = 480.0


def legend_picture(diagram: StateDiagram, entries: Sequence[LegendEntry], where: str) -> Picture:
    """Return a sheet with some symbols of `diagram`; `where` tells which page it is."""
    page = replace(diagram, legend=tuple(entries), subtitle=(*diagram.subtitle, where))
    top = heading(page, _MARGIN, _MARGIN, _WIDTH)
    low = legend(page, _MARGIN, top.bottom + 4.0, _WIDTH)
    width, height = _WIDTH + 2 * _MARGIN, low.bottom + _MARGIN
    return Picture(
        width=width,
        height=height,
        marks=(Shape(rectangle(0.0, 0.0, width, height), fill=PAPER), *top.marks, *low.marks),
        title=legible(diagram.title),
        description=legible(
            f"Symbols of the state diagram: {'; '.join(f'{each.symbol}: {each.meaning}' for each in entries)}"
        ),
    )
