"""The marks by which states and arrows are told apart, in colour as in grey.

Up: rounded corners, thin line. Degraded: cut corners, light tint. Down: square corners, heavy line, darker tint. Final:
a second line inside. A box of several conditions, and a reference to another page: broken line. Every state also says
so in words. Faults: solid line, full head. Restorations: broken line, open head. Instants: dotted line, bar as head.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from markov.output.picture import (
    AT_ONCE,
    INK,
    PAPER,
    RETURNING,
    Shape,
    Step,
    Words,
    chamfered,
    rectangle,
    rounded,
    straight,
)
from markov.output.skeleton import PILL_PADDING, TEXT_SIZE

_TINTS = {"up": PAPER, "degraded": "#f3f1e9", "down": "#dcdee2", "mixed": PAPER}
_LINE_WIDTHS = {"up": 0.8, "degraded": 0.9, "down": 2.0, "mixed": 0.9}
_BROKEN = (2.4, 2.0)
_CORNER = 7.0
_INNER = 2.6


@dataclass(frozen=True)
class LineLook:
    """How the line and the head of an arrow are drawn."""

    colour: str
    width: float
    dashes: tuple[float, ...]
    head: Literal["full", "open", "bar"]


LINES = {
    "fault": LineLook(INK, 0.9, (), "full"),
    "restoration": LineLook(RETURNING, 0.9, (3.6, 1.8), "open"),
    "instant": LineLook(AT_ONCE, 1.3, (1.3, 1.7), "bar"),
}


def condition_outline(
    condition: str, final: bool, x: float, y: float, width: float, height: float, *, reference: bool = False
) -> list[Shape]:
    """Return the outline of a state with its upper left corner at (x, y); broken for a reference to another page."""
    line = _LINE_WIDTHS[condition]
    dashes = _BROKEN if reference or condition == "mixed" else ()
    outline = _corners(condition, x, y, width, height, 0.0)
    shapes = [Shape(outline, fill=PAPER if reference else _TINTS[condition], line=INK, width=line, dashes=dashes)]
    if final:
        inset = line / 2 + _INNER
        shapes.append(Shape(_corners(condition, x, y, width, height, inset), line=INK, width=0.7))
    return shapes


def _corners(condition: str, x: float, y: float, width: float, height: float, inset: float) -> tuple[Step, ...]:
    place = (x + inset, y + inset, width - 2 * inset, height - 2 * inset)
    if condition == "up":
        return rounded(*place, radius=_CORNER - 0.6 * inset)
    if condition == "degraded":
        return chamfered(*place, cut=_CORNER - 0.6 * inset)
    return rectangle(*place)


def initial_pill(x: float, baseline: float, width: float) -> list[Shape | Words]:
    """Return the mark of an initial state, its left end at `x`, its word on `baseline`."""
    return [
        Shape(rounded(x, baseline - 7.6, width, 10.0, 5.0), fill=INK),
        Words(x + PILL_PADDING, baseline, "initial", TEXT_SIZE, colour=PAPER),
    ]


def arrow_head(tip: tuple[float, float], towards_left: bool, look: LineLook) -> Shape:
    """Return the head of an arrow that ends at `tip`."""
    x, y = tip
    back = x + 6.4 if towards_left else x - 6.4
    if look.head == "bar":
        return Shape(straight((back, y), (x, y), (x, y - 3.6), (x, y + 3.6)), line=look.colour, width=1.3)
    if look.head == "open":
        return Shape(
            straight((back, y - 2.7), (x, y), (back, y + 2.7), closed=True), fill=PAPER, line=look.colour, width=0.8
        )
    notch = x + 4.9 if towards_left else x - 4.9
    return Shape(straight((back, y - 2.7), (x, y), (back, y + 2.7), (notch, y), closed=True), fill=look.colour)
