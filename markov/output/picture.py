"""A picture as a list of shapes with words on them, before it becomes a file of some format.

Conventions: lengths in points (1/72 inch), origin at the top left, y downwards; colours as ``#rrggbb``.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

INK = "#1d2530"
FAINT = "#59636f"
RETURNING = "#2b5f86"
AT_ONCE = "#6b4a1f"
PAPER = "#ffffff"
HAIRLINE = "#b9c0c8"

Anchor = Literal["start", "middle", "end"]


@dataclass(frozen=True)
class Step:
    """One step of an outline: "M" go to, "L" line to, "C" curve to (two control points first), "Z" close."""

    kind: Literal["M", "L", "C", "Z"]
    points: tuple[tuple[float, float], ...] = ()


@dataclass(frozen=True)
class Shape:
    """An outline with fill, line or both; `target` names what it is part of, such as ``state-3``."""

    steps: tuple[Step, ...]
    fill: str | None = None
    line: str | None = None
    width: float = 1.0
    dashes: tuple[float, ...] = ()
    target: str = ""


@dataclass(frozen=True)
class Words:
    """One line of text at its baseline; `target` as for a shape."""

    x: float
    y: float
    text: str
    size: float
    colour: str = INK
    bold: bool = False
    anchor: Anchor = "start"
    target: str = ""


@dataclass(frozen=True)
class Picture:
    """All marks of a picture in the order in which they are drawn, with what it is called and what it shows."""

    width: float
    height: float
    marks: tuple[Shape | Words, ...]
    title: str
    description: str


def straight(*points: tuple[float, float], closed: bool = False) -> tuple[Step, ...]:
    """Return the steps of a line, or of a closed outline, with corners at `points`."""
    steps = [Step("M", (points[0],)), *(Step("L", (point,)) for point in points[1:])]
    return (*steps, Step("Z")) if closed else tuple(steps)


def rectangle(x: float, y: float, width: float, height: float) -> tuple[Step, ...]:
    """Return a rectangle with its upper left corner at (x, y)."""
    return straight((x, y), (x + width, y), (x + width, y + height), (x, y + height), closed=True)


def chamfered(x: float, y: float, width: float, height: float, cut: float) -> tuple[Step, ...]:
    """Return a rectangle whose corners are cut off by `cut`."""
    right, low = x + width, y + height
    cut = min(cut, width / 3, height / 3)
    return straight(
        (x + cut, y),
        (right - cut, y),
        (right, y + cut),
        (right, low - cut),
        (right - cut, low),
        (x + cut, low),
        (x, low - cut),
        (x, y + cut),
        closed=True,
    )


def rounded(x: float, y: float, width: float, height: float, radius: float) -> tuple[Step, ...]:
    """Return a rectangle whose corners are rounded with `radius`."""
    right, low = x + width, y + height
    r = min(radius, width / 2, height / 2)
    k = r * 0.44771525  # control point of a quarter circle as a cubic curve: 1 − 4/3·(√2 − 1)
    return (
        Step("M", ((x + r, y),)),
        Step("L", ((right - r, y),)),
        Step("C", ((right - k, y), (right, y + k), (right, y + r))),
        Step("L", ((right, low - r),)),
        Step("C", ((right, low - k), (right - k, low), (right - r, low))),
        Step("L", ((x + r, low),)),
        Step("C", ((x + k, low), (x, low - k), (x, low - r))),
        Step("L", ((x, y + r),)),
        Step("C", ((x, y + k), (x + k, y), (x + r, y))),
        Step("Z"),
    )
