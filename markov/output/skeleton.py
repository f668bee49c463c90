"""What has to be placed on the paper: boxes in columns, joined by lines between neighbouring columns.

Columns alternate: gap, level, gap, level, …, gap. States stand in the level columns. Every arrow becomes a route
through a box in each column that it crosses; the box in one gap holds its formula, so no formula can run into another
one or into a state, whoever places the boxes. An arrow between two states of one column turns back at its formula in
the gap beside them.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

from markov.output.diagram import ArrowKind, DiagramArrow, DiagramNode, StateDiagram, arrow_lines
from markov.output.lettering import legible, text_width, wrapped

TEXT_SIZE = 8.0
"""Type size in points of all text but the heading."""
NUMBER_SIZE = 9.5
LINE_HEIGHT = 10.5
PADDING = 6.0
FINAL_PADDING = 9.0
"""Room around the text of a final state, whose second line takes some of it."""
PILL_PADDING = 3.5
_TEXT_ROOM = 116.0
_FORMULA_ROOM = 104.0
_FOLDED_ROOM = 80.0
"""Room for a formula between folded boxes, whose columns would else not fit a page."""
_PORT_PITCH = 8.0
"""Least distance between two arrow ends on one side of a state."""
PORT_MARGIN = 9.0
"""Least distance of an arrow end from the upper and lower edge, so that it stays clear of the corners."""
_PASSING_HEIGHT = 5.0

Turn = Literal["none", "left", "right"]


@dataclass(frozen=True)
class StateText:
    """What is written in the box of a state."""

    number: str
    condition: str
    padding: float
    initial: bool
    lines: tuple[str, ...]


@dataclass(frozen=True)
class Box:
    """A rectangle to be placed: a state (`node` set), a formula (`formula` not empty) or the passage of a line."""

    column: int
    width: float
    height: float
    node: int | None = None
    text: StateText | None = None
    formula: tuple[str, ...] = ()


@dataclass(frozen=True)
class Route:
    """An arrow as a chain of boxes from left to right.

    `leftward` says that the arrow points at the first box. With a `turn` the chain is (upper or lower state, formula,
    other state), both states in one column, the formula to the named side of it, and the arrow runs from first to last.
    """

    boxes: tuple[int, ...]
    kind: ArrowKind
    leftward: bool = False
    turn: Turn = "none"


@dataclass(frozen=True)
class Link:
    """A line between two boxes of neighbouring columns."""

    left: int
    right: int
    route: int


@dataclass(frozen=True)
class Skeleton:
    """Boxes, routes and links of one diagram; column 1, 3, 5 … hold the states of `levels` in order."""

    boxes: tuple[Box, ...]
    routes: tuple[Route, ...]
    links: tuple[Link, ...]
    levels: tuple[int, ...]

    @property
    def columns(self) -> tuple[tuple[int, ...], ...]:
        """The numbers of the boxes in each column."""
        held: list[list[int]] = [[] for _ in range(2 * len(self.levels) + 1)]
        for number, box in enumerate(self.boxes):
            held[box.column].append(number)
        return tuple(tuple(column) for column in held)


@dataclass(frozen=True)
class _Bundle:
    """All arrows of one kind between the same two states."""

    source: int
    target: int
    kind: ArrowKind
    lines: tuple[str, ...]


def build_skeleton(diagram: StateDiagram) -> Skeleton:
    """Return the boxes and routes of `diagram`; the boxes of the states come first, in the order of its nodes."""
    levels = tuple(sorted({node.level for node in diagram.nodes}))
    column = [2 * levels.index(node.level) + 1 for node in diagram.nodes]
    bundles = _bundled(diagram)
    gaps = _gaps(bundles, column)
    plans = [_columns_crossed(bundle, column, gap) for bundle, gap in zip(bundles, gaps, strict=True)]
    sides: Counter[tuple[int, bool]] = Counter()
    for bundle, gap in zip(bundles, gaps, strict=True):
        for end, other in ((bundle.source, bundle.target), (bundle.target, bundle.source)):
            beside = gap if column[end] == column[other] else column[other]
            sides[end, beside > column[end]] += 1
    boxes = [
        _state_box(diagram.nodes[place], column[place], max(sides[place, False], sides[place, True]), place)
        for place in range(len(diagram.nodes))
    ]
    widest: dict[int, float] = {}
    for box in boxes:
        widest[box.column] = max(widest.get(box.column, 0.0), box.width)
    boxes = [Box(box.column, widest[box.column], box.height, node=box.node, text=box.text) for box in boxes]
    is_folded = any(node.holds and node.condition != "mixed" for node in diagram.nodes)
    room = _FOLDED_ROOM if is_folded else _FORMULA_ROOM
    routes: list[Route] = []
    links: list[Link] = []
    for number, (bundle, gap, crossed) in enumerate(zip(bundles, gaps, plans, strict=True)):
        formula = _formula_lines(bundle.lines, room)
        between: list[int] = []
        for place in crossed:
            between.append(len(boxes))
            boxes.append(_formula_box(place, formula) if place == gap else Box(place, 0.0, _PASSING_HEIGHT))
        route = _route(bundle, column, gap, between)
        routes.append(route)
        links.extend(_links(route, number))
    return Skeleton(tuple(boxes), tuple(routes), tuple(links), levels)


def _bundled(diagram: StateDiagram) -> list[_Bundle]:
    place = {node.number: index for index, node in enumerate(diagram.nodes)}
    together: dict[tuple[int, int, ArrowKind], list[DiagramArrow]] = {}
    for arrow in diagram.arrows:
        together.setdefault((place[arrow.source], place[arrow.target], arrow.kind), []).append(arrow)
    return [_Bundle(*ends, arrow_lines(held, diagram.labels)) for ends, held in together.items()]


def _gaps(bundles: list[_Bundle], column: list[int]) -> list[int]:
    """Return the gap that holds the formula of each bundle: the emptiest of those crossed, the nearest on a tie."""
    filled: Counter[int] = Counter()
    chosen: dict[int, int] = {}
    last = max(column)
    by_freedom = sorted(
        range(len(bundles)), key=lambda index: abs(column[bundles[index].source] - column[bundles[index].target])
    )
    for index in by_freedom:
        bundle = bundles[index]
        source, target = column[bundle.source], column[bundle.target]
        if source == target:
            # Restorations point back to the left, so they turn on the left where there is a column to that side.
            choices = [source - 1 if bundle.kind != "fault" and source > 1 else source + 1]
            if source == last > 1:
                choices = [source - 1]
        else:
            step = 1 if source < target else -1
            choices = list(range(source + step, target, 2 * step))
        chosen[index] = min(choices, key=lambda gap: (filled[gap], abs(gap - source)))
        filled[chosen[index]] += 1
    return [chosen[index] for index in range(len(bundles))]


def _columns_crossed(bundle: _Bundle, column: list[int], gap: int) -> list[int]:
    low, high = sorted((column[bundle.source], column[bundle.target]))
    return [gap] if low == high else list(range(low + 1, high))


def _route(bundle: _Bundle, column: list[int], gap: int, between: list[int]) -> Route:
    source, target = column[bundle.source], column[bundle.target]
    if source == target:
        turn: Turn = "right" if gap > source else "left"
        return Route((bundle.source, *between, bundle.target), bundle.kind, turn=turn)
    if source < target:
        return Route((bundle.source, *between, bundle.target), bundle.kind)
    return Route((bundle.target, *between, bundle.source), bundle.kind, leftward=True)


def _links(route: Route, number: int) -> list[Link]:
    if route.turn == "none":
        return [Link(left, right, number) for left, right in pairwise(route.boxes)]
    first, formula, last = route.boxes
    if route.turn == "right":
        return [Link(first, formula, number), Link(last, formula, number)]
    return [Link(formula, first, number), Link(formula, last, number)]


def _state_box(node: DiagramNode, column: int, ends: int, place: int) -> Box:
    room = _FOLDED_ROOM if node.holds else _TEXT_ROOM
    lines = tuple(part for line in node.lines for part in wrapped(legible(line), TEXT_SIZE, room))
    condition = f"page {node.elsewhere}" if node.elsewhere else node.condition
    text = StateText(
        number=f"{len(node.holds)} states" if node.holds else str(node.number),
        condition=f"{condition}, final" if node.final else condition,
        padding=FINAL_PADDING if node.final else PADDING,
        initial=node.initial,
        lines=lines,
    )
    head = text_width(text.number, NUMBER_SIZE, bold=True) + 10.0 + text_width(text.condition, TEXT_SIZE)
    if node.initial:
        head += pill_width() + 5.0
    width = 2 * text.padding + max([head, *(text_width(line, TEXT_SIZE) for line in lines)])
    height = 2 * text.padding + LINE_HEIGHT * (1 + len(lines))
    return Box(column, width, max(height, (ends - 1) * _PORT_PITCH + 2 * PORT_MARGIN), node=place, text=text)


def pill_width() -> float:
    """Return the width of the mark of an initial state."""
    return text_width("initial", TEXT_SIZE) + 2 * PILL_PADDING


def _formula_lines(texts: tuple[str, ...], room: float) -> tuple[str, ...]:
    lines: list[str] = []
    for text in texts:
        lines.extend(wrapped(legible(text), TEXT_SIZE, room, break_before="+=", break_late="·/"))
    return tuple(lines)


def _formula_box(column: int, formula: tuple[str, ...]) -> Box:
    if not formula:
        return Box(column, 0.0, _PASSING_HEIGHT)
    width = max(text_width(line, TEXT_SIZE) for line in formula) + 5.0
    return Box(column, width, LINE_HEIGHT * len(formula) + 1.0, formula=formula)
