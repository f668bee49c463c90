"""Charts as pictures: a frame with two scales, lines, limits, shaded stretches; or bars beside their names."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

from markov.output.lettering import legible, text_width, wrapped
from markov.output.picture import (
    FAINT,
    HAIRLINE,
    INK,
    PAPER,
    RETURNING,
    Picture,
    Shape,
    Step,
    Words,
    rectangle,
    straight,
)

TEXT = 8.0
_TITLE = 11.0
_LINE = 10.5
_MARGIN = 12.0
_WIDTH = 480.0
"""Room within the margins; with them the width of the text on an upright page of A4."""
_PLOT_HEIGHT = 210.0
_SHADES = (PAPER, "#efeee8")
_MOST_DECADES = 12
_TICKS_WANTED = 6

Mark = Shape | Words
_LOOKS: tuple[tuple[str, float, tuple[float, ...]], ...] = (
    (INK, 1.5, ()),
    (RETURNING, 1.5, (6.0, 2.4)),
    ("#6b4a1f", 1.5, (1.6, 2.2)),
)
"""Colour, width and dashes of the first, second and third line: told apart without colour, too."""


@dataclass(frozen=True)
class Curve:
    """A line through points in the order of x; its name stands at its end."""

    name: str
    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class Level:
    """A horizontal line with a short tag at it and words below the chart: a limit, or a mean.

    `at` marks the x for which it holds, None everywhere.
    """

    value: float
    tag: str
    words: str
    at: float | None = None
    is_limit: bool = True


@dataclass(frozen=True)
class Stretch:
    """A part of the x axis with a name, such as a phase."""

    begin: float
    end: float
    name: str


@dataclass(frozen=True)
class Chart:
    """Lines in a frame.

    Attributes
    ----------
    title, x_words, y_words : str
    curves : tuple of Curve
    levels : tuple of Level
    stretches : tuple of Stretch
        Shaded in turn, from left to right.
    x_log, y_log : bool
        Whether a scale runs in powers of ten.
    description : str
        What it shows, for those who do not see it.
    subtitle : str
    y_zero : bool
        Whether a plain y scale begins at 0.
    """

    title: str
    x_words: str
    y_words: str
    curves: tuple[Curve, ...]
    levels: tuple[Level, ...] = ()
    stretches: tuple[Stretch, ...] = ()
    x_log: bool = False
    y_log: bool = False
    description: str = ""
    subtitle: str = ""
    y_zero: bool = False


@dataclass(frozen=True)
class _Scale:
    """From values to points along one side."""

    low: float
    high: float
    is_log: bool
    ticks: tuple[float, ...]

    def share(self, value: float) -> float:
        """Return where a value lies between the ends, from 0 to 1."""
        if self.is_log:
            return math.log(value / self.low) / math.log(self.high / self.low)
        return (value - self.low) / (self.high - self.low)

    def holds(self, value: float) -> bool:
        """Tell whether a value lies between the ends, but for rounding."""
        slack = 1e-9 * (self.high - self.low)
        return self.low - slack <= value <= self.high + slack


def chart_picture(chart: Chart) -> Picture:
    """Return a chart as a picture; text of 8 points, told apart without colour."""
    curves = [
        Curve(
            each.name,
            tuple((x, y) for x, y in each.points if (x > 0 or not chart.x_log) and (y > 0 or not chart.y_log)),
        )
        for each in chart.curves
    ]
    curves = [each for each in curves if each.points]
    xs = [x for each in curves for x, _ in each.points]
    ys = [y for each in curves for _, y in each.points]
    ys += [level.value for level in chart.levels if level.value > 0 or not chart.y_log]
    across = _scale(xs, is_log=chart.x_log, tight=True)
    up = _scale(ys, is_log=chart.y_log, tight=False, zero=chart.y_zero)
    words = [_tick_words(tick, up) for tick in up.ticks]
    left = _MARGIN + _LINE + 4.0 + max(text_width(text, TEXT) for text in words) + 6.0
    names_room = max((text_width(legible(each.name), TEXT) for each in curves), default=0.0)
    right = _MARGIN + _WIDTH - names_room - 10.0
    top_marks, top = _heading(chart.title, chart.subtitle)
    top += 14.0 if chart.stretches else 4.0
    bottom = top + _PLOT_HEIGHT

    def place(x: float, y: float) -> tuple[float, float]:
        return left + (right - left) * across.share(x), bottom - _PLOT_HEIGHT * up.share(y)

    marks: list[Mark] = list(top_marks)
    marks.extend(_stretches(chart.stretches, across, left, right, top, bottom))
    marks.extend(_grid(across, up, left, right, top, bottom, words))
    marks.append(Words((left + right) / 2, bottom + 2 * _LINE + 5.0, legible(chart.x_words), TEXT, anchor="middle"))
    marks.append(Words(left, top - (14.0 if chart.stretches else 4.0), legible(chart.y_words), TEXT, colour=FAINT))
    levels = sorted((level for level in chart.levels if up.holds(level.value)), key=lambda level: -level.value)
    for level in levels:
        _, y = place(across.high, level.value)
        marks.append(Shape(straight((left, y), (right, y)), line=INK, width=0.8, dashes=_dashes(level)))
    marks.extend(_curves(curves, up, place, right, top, bottom))
    marks.extend(_tags(levels, across, place, left, top))
    below, bottom_of_all = _level_words(levels, bottom + 2 * _LINE + 12.0)
    marks.extend(below)
    height = bottom_of_all + _MARGIN
    width = _WIDTH + 2 * _MARGIN
    sheet = Shape(rectangle(0.0, 0.0, width, height), fill=PAPER)
    return Picture(width, height, (sheet, *marks), legible(chart.title), legible(chart.description))


def _heading(title: str, subtitle: str) -> tuple[list[Mark], float]:
    marks: list[Mark] = []
    y = _MARGIN
    for line in wrapped(legible(title), _TITLE, _WIDTH, bold=True):
        y += _TITLE * 1.2
        marks.append(Words(_MARGIN, y - 2.0, line, _TITLE, bold=True))
    for line in wrapped(legible(subtitle), TEXT, _WIDTH) if subtitle else ():
        y += _LINE
        marks.append(Words(_MARGIN, y - 2.0, line, TEXT, colour=FAINT))
    return marks, y + _LINE + 6.0


def _scale(values: Sequence[float], *, is_log: bool, tight: bool, zero: bool = False) -> _Scale:
    low, high = min(values), max(values)
    if is_log:
        return _log_scale(low, high, tight=tight)
    if zero:
        low = min(low, 0.0)
    if high <= low:
        low, high = low - 0.5 * (abs(low) or 1.0), high + 0.5 * (abs(high) or 1.0)
    step = _step((high - low) / _TICKS_WANTED)
    if not tight:
        low, high = math.floor(low / step + 1e-9) * step, math.ceil(high / step - 1e-9) * step
    first = math.ceil(low / step - 1e-9)
    ticks = tuple(number * step for number in range(first, math.floor(high / step + 1e-9) + 1))
    return _Scale(low, high, False, ticks)


def _log_scale(low: float, high: float, *, tight: bool) -> _Scale:
    last = math.ceil(math.log10(high) - 1e-9)
    first = max(math.floor(math.log10(low) + 1e-9), last - _MOST_DECADES)
    if last == first:
        last += 1
    every = max(1, math.ceil((last - first) / (_TICKS_WANTED + 2)))
    ticks = tuple(float(f"1e{power}") for power in range(first, last + 1) if (power - first) % every == 0)
    if not tight:
        return _Scale(float(f"1e{first}"), float(f"1e{last}"), True, ticks)
    low = max(low, float(f"1e{first}"))
    return _Scale(low, high, True, tuple(tick for tick in ticks if low * (1 - 1e-9) <= tick <= high * (1 + 1e-9)))


def _step(rough: float) -> float:
    """Return the next larger one of 1, 2 and 5 times a power of ten."""
    power = float(f"1e{math.floor(math.log10(rough))}")
    return next(each * power for each in (1, 2, 5, 10) if each * power >= rough * (1 - 1e-9))


def _tick_words(tick: float, scale: _Scale) -> str:
    if scale.is_log:
        return f"{tick:.0e}" if not 1e-3 <= tick < 1e5 else f"{tick:g}"
    step = scale.ticks[1] - scale.ticks[0] if len(scale.ticks) > 1 else abs(tick) or 1.0
    if abs(scale.high) < 1e-3 or abs(scale.high) >= 1e6:
        return f"{tick:.3g}" if tick else "0"
    return f"{tick:.{max(0, -math.floor(math.log10(step) + 1e-9))}f}"


def _grid(
    across: _Scale, up: _Scale, left: float, right: float, top: float, bottom: float, words: Sequence[str]
) -> Iterator[Mark]:
    for tick, text in zip(up.ticks, words, strict=True):
        y = bottom - (bottom - top) * up.share(tick)
        yield Shape(straight((left, y), (right, y)), line=HAIRLINE, width=0.5)
        yield Words(left - 5.0, y + 2.8, text, TEXT, anchor="end")
    for tick in across.ticks:
        x = left + (right - left) * across.share(tick)
        yield Shape(straight((x, bottom), (x, bottom + 3.5)), line=INK, width=0.8)
        yield Words(x, bottom + _LINE + 2.5, _tick_words(tick, across), TEXT, anchor="middle")
    yield Shape(straight((left, top), (left, bottom), (right, bottom)), line=INK, width=0.9)


def _stretches(
    stretches: Sequence[Stretch], across: _Scale, left: float, right: float, top: float, bottom: float
) -> Iterator[Mark]:
    """Shade stretches in turn; those of one name alike."""
    names = list(dict.fromkeys(each.name for each in stretches))
    for each in stretches:
        begin, end = max(each.begin, across.low), min(each.end, across.high)
        if begin >= end:
            continue
        x0, x1 = (left + (right - left) * across.share(x) for x in (begin, end))
        yield Shape(rectangle(x0, top, x1 - x0, bottom - top), fill=_SHADES[names.index(each.name) % 2])
        text = legible(each.name)
        if text_width(text, TEXT) <= x1 - x0:
            yield Words((x0 + x1) / 2, top - 4.0, text, TEXT, colour=FAINT, anchor="middle")


def _dashes(level: Level) -> tuple[float, ...]:
    return (5.0, 3.0) if level.is_limit else (1.2, 2.4)


def _tags(
    levels: Sequence[Level],
    across: _Scale,
    place: Callable[[float, float], tuple[float, float]],
    left: float,
    top: float,
) -> Iterator[Mark]:
    """Yield a short tag at each level, side by side where levels lie close, and a mark at the time it is for."""
    taken: list[tuple[float, float]] = []
    for level in levels:
        _, y = place(across.high, level.value)
        baseline = y - 3.0 if y - 3.0 > top + TEXT else y + _LINE
        x = max((end for other, end in taken if abs(other - baseline) < _LINE), default=left + 5.0)
        text = legible(level.tag)
        room = text_width(text, TEXT)
        yield Shape(rectangle(x, baseline - 7.6, room + 4.0, 9.8), fill=PAPER)
        yield Words(x + 2.0, baseline, text, TEXT)
        taken.append((baseline, x + room + 12.0))
        if level.at is not None and across.holds(level.at):
            x, _ = place(level.at, level.value)
            outline = straight((x - 3.6, y), (x, y - 3.6), (x + 3.6, y), (x, y + 3.6), closed=True)
            yield Shape(outline, fill=PAPER, line=INK, width=1.0)


def _level_words(levels: Sequence[Level], y: float) -> tuple[list[Mark], float]:
    """Return a line for each level with a piece of its line, and where they end."""
    marks: list[Mark] = []
    for level in levels:
        marks.append(
            Shape(straight((_MARGIN, y + 5.0), (_MARGIN + 24.0, y + 5.0)), line=INK, width=0.8, dashes=_dashes(level))
        )
        for line in wrapped(legible(level.words), TEXT, _WIDTH - 32.0):
            y += _LINE
            marks.append(Words(_MARGIN + 31.0, y - 2.6, line, TEXT))
    return marks, y


def _curves(
    curves: Sequence[Curve],
    up: _Scale,
    place: Callable[[float, float], tuple[float, float]],
    right: float,
    top: float,
    bottom: float,
) -> Iterator[Mark]:
    ends: list[tuple[float, str, str]] = []
    for number, curve in enumerate(curves):
        colour, width, dashes = _LOOKS[number % len(_LOOKS)]
        steps: list[Step] = []
        drawing = False
        for x, y in curve.points:
            inside = up.holds(y)
            if inside:
                steps.append(Step("L" if drawing else "M", (place(x, y),)))
            drawing = inside
        if not steps:
            continue
        yield Shape(tuple(steps), line=PAPER, width=width + 1.6)
        yield Shape(tuple(steps), line=colour, width=width, dashes=dashes)
        ends.append((steps[-1].points[-1][1] + 2.8, legible(curve.name), colour))
    placed: list[float] = []
    for y, name, colour in sorted(ends):
        y = min(max(y, top + TEXT), bottom) if not placed else max(y, placed[-1] + _LINE)
        placed.append(y)
        yield Words(right + 6.0, y, name, TEXT, colour=colour)


@dataclass(frozen=True)
class Bar:
    """One bar: its name, its length from 0 to 1, the words after it."""

    name: str
    share: float
    words: str


def bars_picture(title: str, subtitle: str, bars: Sequence[Bar], description: str) -> Picture:
    """Return bars below each other, a scale of 0 to 100 % above them."""
    marks, top = _heading(title, subtitle)
    rows = [wrapped(legible(bar.name), TEXT, 190.0) for bar in bars]
    names = max(text_width(line, TEXT) for lines in rows for line in lines)
    words = max(text_width(legible(bar.words), TEXT) for bar in bars)
    left = _MARGIN + names + 8.0
    right = max(left + 60.0, _MARGIN + _WIDTH - words - 8.0)
    y = top + 4.0
    heights = [max(_LINE * len(lines), 12.0) + 5.0 for lines in rows]
    for tick in range(0, 101, 25):
        x = left + (right - left) * tick / 100
        marks.append(Shape(straight((x, y), (x, y + sum(heights))), line=HAIRLINE, width=0.5))
        marks.append(Words(x, y - 4.0, f"{tick}%", TEXT, colour=FAINT, anchor="middle"))
    for bar, lines, height in zip(bars, rows, heights, strict=True):
        middle = y + height / 2
        for number, line in enumerate(lines):
            baseline = middle - _LINE * len(lines) / 2 + _LINE * (number + 1) - 2.6
            marks.append(Words(left - 8.0, baseline, line, TEXT, anchor="end"))
        end = left + (right - left) * min(max(bar.share, 0.0), 1.0)
        if end > left:
            marks.append(Shape(rectangle(left, middle - 4.5, end - left, 9.0), fill="#8d96a1", line=INK, width=0.7))
        marks.append(Words(end + 5.0, middle + 2.8, legible(bar.words), TEXT))
        y += height
    marks.append(Shape(straight((left, top + 4.0), (left, y)), line=INK, width=0.9))
    width, bottom = _WIDTH + 2 * _MARGIN, y + _MARGIN
    sheet = Shape(rectangle(0.0, 0.0, width, bottom), fill=PAPER)
    return Picture(width, bottom, (sheet, *marks), legible(title), legible(description))
