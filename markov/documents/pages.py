"""Which parts of a document stand on A4 pages laid sideways."""

from __future__ import annotations

from dataclasses import dataclass

from markov.documents.numbering import Placed
from markov.documents.tree import Figure, Section

UPRIGHT_MM = 178.0
"""Width of the text on an upright page."""
SIDEWAYS_MM = 265.0
"""Width of the text on a page laid sideways."""
UPRIGHT_HEIGHT_MM = 232.0
"""Greatest height of a picture on an upright page, its caption below."""
SIDEWAYS_HEIGHT_MM = 138.0
"""Greatest height of a picture on a page laid sideways, headings above and its caption below."""


@dataclass(frozen=True)
class Stretch:
    """Blocks that follow each other on pages of one kind."""

    places: tuple[Placed, ...]
    sideways: bool


def stretches(places: tuple[Placed, ...]) -> tuple[Stretch, ...]:
    """Return the blocks by pages: a figure wider than upright text stands sideways, with the headings before it."""
    found: list[Stretch] = []
    upright: list[Placed] = []
    for place in places:
        if isinstance(place.block, Figure) and place.block.width_mm > UPRIGHT_MM:
            start = len(upright)
            while start and isinstance(upright[start - 1].block, Section):
                start -= 1
            if upright[:start]:
                found.append(Stretch(tuple(upright[:start]), sideways=False))
            found.append(Stretch((*upright[start:], place), sideways=True))
            upright = []
        else:
            upright.append(place)
    if upright:
        found.append(Stretch(tuple(upright), sideways=False))
    return tuple(found)


def drawn_size(figure: Figure) -> tuple[float, float]:
    """Return the width and height in mm of a figure on its page: its own, unless the page is smaller."""
    sideways = figure.width_mm > UPRIGHT_MM
    width, height = (SIDEWAYS_MM, SIDEWAYS_HEIGHT_MM) if sideways else (UPRIGHT_MM, UPRIGHT_HEIGHT_MM)
    scale = min(1.0, width / figure.width_mm, height / figure.height_mm)
    return figure.width_mm * scale, figure.height_mm * scale
