"""The sheet of a state diagram: states and arrows at their places, heading above, legend below."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from markov.output.captions import Band, heading, key_and_legend
from markov.output.diagram import StateDiagram
from markov.output.lettering import legible, text_width
from markov.output.picture import (
    FAINT,
    INK,
    PAPER,
    Picture,
    Shape,
    Step,
    Words,
    straight,
)
from markov.output.placement import line_ends
from markov.output.shapes import LINES, arrow_head, condition_outline, initial_pill
from markov.output.skeleton import (
    LINE_HEIGHT,
    NUMBER_SIZE,
    TEXT_SIZE,
    Route,
    Skeleton,
    pill_width,
)

MARGIN = 12.0
_LEAST_WIDTH = 370.0
_PAGE_WIDTHS = (510.0, 770.0, 1120.0)
"""Widths that fit A4 upright, A4 sideways, A3 sideways: bends are drawn narrow where that gains the smaller page."""
_HEAD_RUN = 10.0
"""Straight run of a line at a state, room for the arrow head."""
_HEAD_INSET = 5.0
"""Distance from the tip of an arrow head at which its line ends."""
_BEND = (14.0, 44.0)
"""Least and greatest width of the bends between two columns."""
_COLUMN_HEAD = 20.0


_Ends = dict[tuple[int, int, int], tuple[float, float]]
"""Heights at which a line leaves its left box and meets its right one, by route and boxes."""


@dataclass(frozen=True)
class _Columns:
    """Left and right edge of every column; empty ones have no width."""

    left: tuple[float, ...]
    right: tuple[float, ...]
    width: float


def compose(diagram: StateDiagram, skeleton: Skeleton, heights: Sequence[float]) -> Picture:
    """Return the picture of `diagram` with the boxes of `skeleton` centred at `heights`."""
    ends = line_ends(skeleton, heights)
    columns = _columns(diagram, skeleton, heights, ends, tightness=0.0)
    tight = _columns(diagram, skeleton, heights, ends, tightness=1.0)
    if any(tight.width + 2 * MARGIN <= page < columns.width + 2 * MARGIN for page in _PAGE_WIDTHS):
        columns = tight
    width = max(columns.width, _LEAST_WIDTH)
    shift = MARGIN + (width - columns.width) / 2
    columns = _Columns(tuple(x + shift for x in columns.left), tuple(x + shift for x in columns.right), columns.width)
    top_band = heading(diagram, MARGIN, MARGIN, width)
    top = top_band.bottom + _COLUMN_HEAD
    heights = [y + top for y in heights]
    depth = max(y + box.height / 2 for y, box in zip(heights, skeleton.boxes, strict=True))
    low_band = key_and_legend(diagram, MARGIN, depth + 14.0, width)
    marks: list[Shape | Words] = [Shape(_whole(width, low_band), fill=PAPER)]
    marks.extend(top_band.marks)
    marks.extend(_column_heads(diagram, skeleton, columns, top))
    marks.extend(_arrows(skeleton, columns, heights, ends))
    for number, box in enumerate(skeleton.boxes):
        target = "" if box.node is None else f"state-{diagram.nodes[box.node].number}"
        held = _box_marks(diagram, skeleton, number, columns, heights[number])
        marks.extend(replace(mark, target=target) for mark in held)
    marks.extend(low_band.marks)
    return Picture(
        width=width + 2 * MARGIN,
        height=low_band.bottom + MARGIN,
        marks=tuple(marks),
        title=legible(diagram.title),
        description=legible(" ".join(" ".join((diagram.described(), *diagram.remarks)).split())),
    )


def _whole(width: float, low_band: Band) -> tuple[Step, ...]:
    right, bottom = width + 2 * MARGIN, low_band.bottom + MARGIN
    return straight((0.0, 0.0), (right, 0.0), (right, bottom), (0.0, bottom), closed=True)


def _columns(
    diagram: StateDiagram,
    skeleton: Skeleton,
    heights: Sequence[float],
    ends: Sequence[tuple[float, float]],
    *,
    tightness: float,
) -> _Columns:
    used = skeleton.columns
    widths = [max((skeleton.boxes[box].width for box in held), default=0.0) for held in used]
    # A column heading may be wider than the states under it.
    for place, level in enumerate(skeleton.levels):
        widths[2 * place + 1] = max(widths[2 * place + 1], text_width(column_title(diagram, level), TEXT_SIZE))
    climb = [0.0] * len(used)
    for link, (left_end, right_end) in zip(skeleton.links, ends, strict=True):
        left = skeleton.boxes[link.left].column
        rise = abs(heights[link.right] + right_end - heights[link.left] - left_end)
        climb[left] = max(climb[left], rise)
    lefts: list[float] = []
    rights: list[float] = []
    x = 0.0
    for column, held in enumerate(used):
        lefts.append(x)
        x += widths[column]
        rights.append(x)
        following = used[column + 1] if column + 1 < len(used) else ()
        if held and following:
            least, most = _BEND
            comfortable = min(max(0.22 * climb[column], least), most)
            x += least + (comfortable - least) * (1.0 - tightness) + _HEAD_RUN
        elif held and column % 2 == 1 and column + 2 < len(used):
            x += 2 * _HEAD_RUN
    return _Columns(tuple(lefts), tuple(rights), max(rights))


def column_title(diagram: StateDiagram, level: int) -> str:
    """Return the heading of the column of a level, or of the several levels folded into it."""
    top = max(node.level if node.top_level is None else node.top_level for node in diagram.nodes if node.level == level)
    if diagram.columns == "steps":
        if top > level:
            return f"{level} to {top} steps"
        return {0: "start", 1: "1 step"}.get(level, f"{level} steps")
    if top > level:
        return f"{level} to {top} units failed"
    return {0: "no unit failed", 1: "1 unit failed"}.get(level, f"{level} units failed")


def _column_heads(diagram: StateDiagram, skeleton: Skeleton, columns: _Columns, top: float) -> list[Shape | Words]:
    marks: list[Shape | Words] = []
    for place, level in enumerate(skeleton.levels):
        left, right = columns.left[2 * place + 1], columns.right[2 * place + 1]
        marks.append(
            Words(
                (left + right) / 2, top - 11.0, column_title(diagram, level), TEXT_SIZE, colour=FAINT, anchor="middle"
            )
        )
    return marks


def _box_marks(
    diagram: StateDiagram, skeleton: Skeleton, number: int, columns: _Columns, y: float
) -> list[Shape | Words]:
    box = skeleton.boxes[number]
    middle = (columns.left[box.column] + columns.right[box.column]) / 2
    marks: list[Shape | Words] = []
    if box.formula:
        route = next(route for route in skeleton.routes if number in route.boxes[1:-1])
        colour = LINES[route.kind].colour
        turned = route.turn
        x = middle - box.width / 2
        for line, text in enumerate(box.formula):
            baseline = y - box.height / 2 + LINE_HEIGHT * (line + 1) - 2.2
            if turned == "right":
                marks.append(Words(x + 4.0, baseline, text, TEXT_SIZE, colour=colour))
            elif turned == "left":
                marks.append(Words(x + box.width - 4.0, baseline, text, TEXT_SIZE, colour=colour, anchor="end"))
            else:
                marks.append(Words(middle, baseline, text, TEXT_SIZE, colour=colour, anchor="middle"))
    if box.text is not None and box.node is not None:
        node = diagram.nodes[box.node]
        left, top = middle - box.width / 2, y - box.height / 2
        reference = node.elsewhere > 0
        marks.extend(
            condition_outline(node.condition, node.final, left, top, box.width, box.height, reference=reference)
        )
        rows = 1 + len(box.text.lines)
        baseline = y - LINE_HEIGHT * rows / 2 + LINE_HEIGHT - 2.4
        marks.append(Words(left + box.text.padding, baseline, box.text.number, NUMBER_SIZE, bold=True))
        if box.text.initial:
            number_width = text_width(box.text.number, NUMBER_SIZE, bold=True)
            marks.extend(initial_pill(left + box.text.padding + number_width + 5.0, baseline, pill_width()))
        marks.append(
            Words(
                left + box.width - box.text.padding, baseline, box.text.condition, TEXT_SIZE, colour=FAINT, anchor="end"
            )
        )
        for text in box.text.lines:
            baseline += LINE_HEIGHT
            marks.append(Words(left + box.text.padding, baseline, text, TEXT_SIZE, colour=INK))
    return marks


def _arrows(
    skeleton: Skeleton, columns: _Columns, heights: Sequence[float], ends: Sequence[tuple[float, float]]
) -> list[Shape | Words]:
    at: _Ends = {
        (link.route, link.left, link.right): (heights[link.left] + left, heights[link.right] + right)
        for link, (left, right) in zip(skeleton.links, ends, strict=True)
    }
    lines: list[Shape | Words] = []
    heads: list[Shape | Words] = []
    for number, route in enumerate(skeleton.routes):
        look = LINES[route.kind]
        if route.turn == "none":
            steps = _through(skeleton, columns, number, route, at)
        else:
            steps = _turning(skeleton, columns, number, route, at)
        # White on both sides keeps two lines that cross apart.
        lines.append(Shape(tuple(steps), line=PAPER, width=look.width + 2.6))
        lines.append(Shape(tuple(steps), line=look.colour, width=look.width, dashes=look.dashes))
        tip, towards_left = _tip(skeleton, columns, number, route, at)
        heads.append(arrow_head(tip, towards_left, look))
    return lines + heads


def _edges(skeleton: Skeleton, columns: _Columns, box: int) -> tuple[float, float]:
    column = skeleton.boxes[box].column
    middle, half = (columns.left[column] + columns.right[column]) / 2, skeleton.boxes[box].width / 2
    return middle - half, middle + half


def _through(skeleton: Skeleton, columns: _Columns, number: int, route: Route, at: _Ends) -> list[Step]:
    """Return the line of an arrow between two levels, broken where its formula stands."""
    steps: list[Step] = []
    last = len(route.boxes) - 2
    for place, (left, right) in enumerate(pairwise(route.boxes)):
        y0, y1 = at[number, left, right]
        start, stop = _edges(skeleton, columns, left)[1], _edges(skeleton, columns, right)[0]
        bend_from = columns.right[skeleton.boxes[left].column]
        bend_to = columns.left[skeleton.boxes[right].column]
        # All lines at a state bend after the same run, head or not: else neighbours would cross in their bends.
        if skeleton.boxes[left].column % 2 == 1:
            bend_from += _HEAD_RUN
        else:
            bend_to -= _HEAD_RUN
        if place == 0 and route.leftward:
            start += _HEAD_INSET
        if place == last and not route.leftward:
            stop -= _HEAD_INSET
        broken = place == 0 or bool(skeleton.boxes[left].formula)
        steps.append(Step("M" if broken else "L", ((start, y0),)))
        steps.extend(_bend(bend_from, y0, bend_to, y1))
        steps.append(Step("L", ((stop, y1),)))
    return steps


def _bend(x0: float, y0: float, x1: float, y1: float) -> list[Step]:
    if abs(y1 - y0) < 0.05:
        return [Step("L", ((x0, y0),)), Step("L", ((x1, y1),))]
    half = (x1 - x0) * 0.55
    return [Step("L", ((x0, y0),)), Step("C", ((x0 + half, y0), (x1 - half, y1), (x1, y1)))]


def _turning(skeleton: Skeleton, columns: _Columns, number: int, route: Route, at: _Ends) -> list[Step]:
    """Return the line of an arrow within one level: out, round the edge of its formula, back."""
    first, formula, last = route.boxes
    side = 1.0 if route.turn == "right" else -1.0
    if side > 0:
        y0, bend0 = at[number, first, formula]
        y3, bend3 = at[number, last, formula]
        near, edge = _edges(skeleton, columns, first)[1], _edges(skeleton, columns, formula)[0]
        border, far = columns.right[skeleton.boxes[first].column], columns.left[skeleton.boxes[formula].column]
    else:
        bend0, y0 = at[number, formula, first]
        bend3, y3 = at[number, formula, last]
        near, edge = _edges(skeleton, columns, first)[0], _edges(skeleton, columns, formula)[1]
        border, far = columns.left[skeleton.boxes[first].column], columns.right[skeleton.boxes[formula].column]
    round_off = min(4.0, abs(bend3 - bend0) / 2)
    down = round_off if bend3 > bend0 else -round_off
    inner = edge - side * 1.5
    steps = [Step("M", ((near, y0),)), *_bend(border + side * _HEAD_RUN, y0, far, bend0)]
    if abs(inner - far) > round_off:
        steps.append(Step("L", ((inner - side * round_off, bend0),)))
    steps.append(Step("C", ((inner, bend0), (inner, bend0), (inner, bend0 + down))))
    steps.append(Step("L", ((inner, bend3 - down),)))
    steps.append(Step("C", ((inner, bend3), (inner, bend3), (inner - side * round_off, bend3))))
    steps.extend(_bend(far, bend3, border + side * _HEAD_RUN, y3))
    steps.append(Step("L", ((near + side * _HEAD_INSET, y3),)))
    return steps


def _tip(
    skeleton: Skeleton, columns: _Columns, number: int, route: Route, at: _Ends
) -> tuple[tuple[float, float], bool]:
    """Return where the arrow ends, and whether its head points to the left."""
    if route.turn == "right":
        state = route.boxes[2]
        return (_edges(skeleton, columns, state)[1], at[number, state, route.boxes[1]][0]), True
    if route.turn == "left":
        state = route.boxes[2]
        return (_edges(skeleton, columns, state)[0], at[number, route.boxes[1], state][1]), False
    if route.leftward:
        state = route.boxes[0]
        return (_edges(skeleton, columns, state)[1], at[number, state, route.boxes[1]][0]), True
    state = route.boxes[-1]
    return (_edges(skeleton, columns, state)[0], at[number, route.boxes[-2], state][1]), False
