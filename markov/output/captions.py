"""What stands around a state diagram: heading, key of the marks, legend of the symbols, remarks."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from markov.output.diagram import LegendEntry, StateDiagram
from markov.output.lettering import legible, text_width, wrapped
from markov.output.picture import FAINT, HAIRLINE, INK, Shape, Words, straight
from markov.output.shapes import LINES, arrow_head, condition_outline, initial_pill
from markov.output.skeleton import LINE_HEIGHT, TEXT_SIZE, pill_width

_TITLE_SIZE = 12.0
_SAMPLE_WIDTH = 26.0
_SAMPLE_HEIGHT = 13.0
_COLUMN_GAP = 12.0
_TABLE_GAP = 30.0
_LEAST_ROWS = 3
"""Rows that a column of the legend has before another one is begun."""
_SYMBOL_ROOM = 110.0
_VALUE_ROOM = 140.0

_MEANINGS = (("up", "up"), ("degraded", "degraded, delivers"), ("down", "down"), ("mixed", "everything else"))

Mark = Shape | Words


@dataclass(frozen=True)
class Band:
    """Marks across the sheet, and where they end."""

    marks: tuple[Mark, ...]
    bottom: float


def heading(diagram: StateDiagram, x: float, y: float, width: float) -> Band:
    """Return title and subtitle lines."""
    marks: list[Mark] = []
    for line in wrapped(legible(diagram.title), _TITLE_SIZE, width, bold=True):
        y += _TITLE_SIZE * 1.15
        marks.append(Words(x, y - 2.0, line, _TITLE_SIZE, bold=True))
    y += 1.5
    for text in diagram.subtitle:
        for line in wrapped(legible(text), TEXT_SIZE, width):
            y += LINE_HEIGHT
            marks.append(Words(x, y - 2.0, line, TEXT_SIZE, colour=FAINT))
    y += 5.0
    marks.append(_rule(x, y, width))
    return Band(tuple(marks), y + 6.0)


def key_and_legend(diagram: StateDiagram, x: float, y: float, width: float) -> Band:
    """Return everything below the states: the key of the marks that occur, the symbols, the remarks."""
    marks: list[Mark] = [_rule(x, y, width)]
    y += 8.0
    for band in (_key, legend, _remarks):
        part = band(diagram, x, y, width)
        if part.marks:
            marks.extend(part.marks)
            y = part.bottom + 7.0
    return Band(tuple(marks), y - 7.0)


def _rule(x: float, y: float, width: float) -> Shape:
    return Shape(straight((x, y), (x + width, y)), line=HAIRLINE, width=0.6)


def _key(diagram: StateDiagram, x: float, y: float, width: float) -> Band:
    own = [node for node in diagram.nodes if not node.elsewhere]
    conditions = {node.condition for node in own}
    kinds = {arrow.kind for arrow in diagram.arrows}
    entries: list[tuple[str, float, Callable[[float, float], Sequence[Mark]]]] = []

    def outline(condition: str, final: bool) -> Callable[[float, float], Sequence[Mark]]:
        return lambda left, top: condition_outline(
            condition, final, left + 1.0, top + 1.0, _SAMPLE_WIDTH - 2.0, _SAMPLE_HEIGHT - 2.0
        )

    for condition, meaning in _MEANINGS:
        if condition in conditions:
            entries.append((meaning, _SAMPLE_WIDTH, outline(condition, False)))
    if any(node.final for node in own):
        condition = next(node.condition for node in own if node.final)
        entries.append(("final, never left", _SAMPLE_WIDTH, outline(condition, True)))
    if len(own) < len(diagram.nodes):
        entries.append(("on another page", _SAMPLE_WIDTH, outline("mixed", False)))
    pill = pill_width()
    if any(node.initial for node in own):
        entries.append(("starts here", pill, lambda left, top: initial_pill(left, top + 9.3, pill)))
    for kind, meaning in (("fault", "fault"), ("restoration", "restoration"), ("instant", "at a fixed instant")):
        if kind in kinds:
            entries.append((meaning, _SAMPLE_WIDTH, _arrow_sample(kind)))

    marks: list[Mark] = []
    left = x
    for meaning, sample, draw in entries:
        across = sample + 5.0 + text_width(meaning, TEXT_SIZE)
        if left > x and left + across > x + width:
            left = x
            y += _SAMPLE_HEIGHT + 4.0
        marks.extend(draw(left, y))
        marks.append(Words(left + sample + 5.0, y + 9.3, meaning, TEXT_SIZE))
        left += across + 11.0
    return Band(tuple(marks), y + _SAMPLE_HEIGHT)


def _arrow_sample(kind: str) -> Callable[[float, float], Sequence[Mark]]:
    look = LINES[kind]

    def draw(left: float, top: float) -> Sequence[Mark]:
        y = top + _SAMPLE_HEIGHT / 2
        if kind != "restoration":
            line, tip = straight((left, y), (left + _SAMPLE_WIDTH - 5.0, y)), (left + _SAMPLE_WIDTH, y)
        else:
            line, tip = straight((left + _SAMPLE_WIDTH, y), (left + 5.0, y)), (left, y)
        return (
            Shape(line, line=look.colour, width=look.width, dashes=look.dashes),
            arrow_head(tip, kind == "restoration", look),
        )

    return draw


def legend(diagram: StateDiagram, x: float, y: float, width: float) -> Band:
    """Return the symbols as a table: symbol, meaning, value; in several columns where they fit side by side."""
    if not diagram.legend:
        return Band((), y)
    rows = [_row(entry, width) for entry in diagram.legend]
    across = sum(max(row.width(cell) for row in rows) for cell in range(3)) + 2 * _COLUMN_GAP
    columns = max(1, min(len(rows) // _LEAST_ROWS, int((width + _TABLE_GAP) // (across + _TABLE_GAP))))
    per_column = -(-len(rows) // columns)
    marks: list[Mark] = []
    bottom = y
    left = x
    for first in range(0, len(rows), per_column):
        held = rows[first : first + per_column]
        symbol, meaning, value = (max(row.width(cell) for row in held) for cell in range(3))
        starts = (left, left + symbol + _COLUMN_GAP, left + symbol + meaning + 2 * _COLUMN_GAP)
        line_top = y
        for row in held:
            for cell, (start, lines) in enumerate(zip(starts, row.cells, strict=True)):
                for place, text in enumerate(lines):
                    baseline = line_top + LINE_HEIGHT * (place + 1) - 2.2
                    marks.append(Words(start, baseline, text, TEXT_SIZE, colour=FAINT if cell == 1 else INK))
            line_top += LINE_HEIGHT * max(len(lines) for lines in row.cells) + 1.0
        bottom = max(bottom, line_top)
        left = starts[2] + value + _TABLE_GAP
    return Band(tuple(marks), bottom)


@dataclass(frozen=True)
class _Row:
    cells: tuple[tuple[str, ...], tuple[str, ...], tuple[str, ...]]

    def width(self, cell: int) -> float:
        return max(text_width(line, TEXT_SIZE) for line in self.cells[cell])


def _row(entry: LegendEntry, width: float) -> _Row:
    meaning_room = width - _SYMBOL_ROOM - _VALUE_ROOM - 2 * _COLUMN_GAP
    return _Row(
        (
            wrapped(legible(entry.symbol), TEXT_SIZE, _SYMBOL_ROOM),
            wrapped(legible(entry.meaning), TEXT_SIZE, meaning_room),
            wrapped(legible(entry.value), TEXT_SIZE, _VALUE_ROOM),
        )
    )


def _remarks(diagram: StateDiagram, x: float, y: float, width: float) -> Band:
    marks: list[Mark] = []
    for remark in diagram.remarks:
        for line in wrapped(legible(remark), TEXT_SIZE, width):
            y += LINE_HEIGHT
            marks.append(Words(x, y - 2.2, line, TEXT_SIZE))
    return Band(tuple(marks), y)
