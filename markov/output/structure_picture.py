"""The picture of what has to deliver: the criterion as nested plates, groups as cards with their members.

A plate says in words how many of what lies on it are needed; a card is a group or a unit.  Small squares are items in
the order of their rank: full ones carry duty while all is well, open ones wait.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import groupby

from markov.model import AllOf, AnyOf, AtLeast, Group, Model, Named, Success
from markov.output.lettering import legible, text_width, wrapped
from markov.output.picture import FAINT, HAIRLINE, INK, PAPER, Picture, Shape, Words, rectangle, straight

_TEXT = 8.0
_NAME = 9.0
_TITLE = 12.0
_LINE = 10.5
_PAD = 8.0
_GAP = 9.0
_MARGIN = 12.0
_WIDTH = 480.0
"""Room within the margins; with them the width of the text on an upright page of A4."""
_CARD_ROOM = 220.0
_LEAST_ROOM = 130.0
"""Deeply nested plates are not made narrower than this."""
_SQUARE = 7.0
_MOST_SQUARES = 16
_SHADES = ("#f6f5f0", PAPER)

Mark = Shape | Words
_Draw = Callable[[float, float], Iterator[Mark]]


@dataclass(frozen=True)
class _Block:
    """A part of the picture: its size, and how it is drawn with its upper left corner at a place."""

    width: float
    height: float
    draw: _Draw


def structure_picture(model: Model) -> Picture | None:
    """Return the picture of the success criterion of a model; None for a chain written by hand."""
    if model.explicit or model.system is None:
        return None
    block = _stacked([_headed(model, heading, system) for heading, system in _criteria(model)])
    key = _key(model)
    title = wrapped(legible(f"{model.title or model.source_name}: what must deliver"), _TITLE, _WIDTH, bold=True)
    widths = [text_width(each, _TITLE, bold=True) for each in title]
    width = max(block.width, _WIDTH * 0.6, text_width(key, _TEXT), *widths)
    top = _MARGIN + _TITLE * 1.15 * len(title)
    marks: list[Mark] = [
        Words(_MARGIN, _MARGIN + _TITLE * 1.15 * (place + 1) - 2.0, line, _TITLE, bold=True)
        for place, line in enumerate(title)
    ]
    top += _GAP
    marks.extend(block.draw(_MARGIN, top))
    below = top + block.height + _GAP
    marks.extend(_key_marks(model, key, _MARGIN, below))
    height = below + (_LINE if key else 0.0) + _MARGIN
    sheet = rectangle(0.0, 0.0, width + 2 * _MARGIN, height)
    description = " ".join(
        f"{heading + ': ' if heading else ''}{criterion_words(model, system)}." for heading, system in _criteria(model)
    )
    return Picture(
        width=width + 2 * _MARGIN,
        height=height,
        marks=(Shape(sheet, fill=PAPER), *marks),
        title=legible(f"{model.title or model.source_name}: what must deliver"),
        description=legible(description),
    )


def criterion_words(model: Model, success: Success) -> str:
    """Return a criterion as one phrase: ``all of: pumps (2 of 3), mains``."""
    match success:
        case Named():
            group = model.groups.get(success.name)
            return success.name if group is None else f"{success.name} ({group.required} of {group.size})"
        case AllOf() | AnyOf() | AtLeast():
            held = [(isinstance(each, Named), criterion_words(model, each)) for each in success.of]
            return f"{_rule(success)}: {', '.join(words if is_name else f'({words})' for is_name, words in held)}"


def _criteria(model: Model) -> Iterator[tuple[str, Success]]:
    """Yield every criterion that holds at some time, with the phases in which it does where there are several."""
    assert model.system is not None
    by_phase = [(phase.name, phase.system or model.system) for phase in model.phases]
    if len({repr(system) for _, system in by_phase}) < 2:
        yield "", by_phase[0][1] if by_phase else model.system
        return
    for _, same in groupby(sorted(by_phase, key=lambda each: repr(each[1])), key=lambda each: repr(each[1])):
        held = list(same)
        yield f"in {', '.join(name for name, _ in held)}", held[0][1]


def _headed(model: Model, heading: str, system: Success) -> _Block:
    inner = _criterion(model, system, _WIDTH, 0)
    if not heading:
        return inner
    line = legible(heading)

    def draw(x: float, y: float) -> Iterator[Mark]:
        yield Words(x, y + _LINE - 2.4, line, _NAME, bold=True)
        yield from inner.draw(x, y + _LINE + 3.0)

    return _Block(max(inner.width, text_width(line, _NAME, bold=True)), inner.height + _LINE + 3.0, draw)


def _rule(success: AllOf | AnyOf | AtLeast) -> str:
    if isinstance(success, AllOf):
        return "all of these" if len(success.of) > 1 else "this one"
    if isinstance(success, AnyOf):
        return f"any one of these {len(success.of)}"
    return f"at least {success.count} of these {len(success.of)}"


def _criterion(model: Model, success: Success, room: float, depth: int) -> _Block:
    if isinstance(success, Named):
        return _card(model, success.name, min(room, _CARD_ROOM))
    inner_room = max(room - 2 * _PAD, _LEAST_ROOM)
    held = _flowed([_criterion(model, each, inner_room, depth + 1) for each in success.of], inner_room)
    rule = _rule(success)
    width = max(held.width, text_width(rule, _TEXT, bold=True)) + 2 * _PAD
    height = held.height + _LINE + 4.0 + 2 * _PAD

    def draw(x: float, y: float) -> Iterator[Mark]:
        yield Shape(rectangle(x, y, width, height), fill=_SHADES[depth % 2], line=HAIRLINE, width=0.8)
        # The heavy edge on the left spans what the words beside it speak of.
        yield Shape(straight((x, y), (x, y + height)), line=INK, width=2.4, dashes=_EDGES[type(success)])
        yield Words(x + _PAD, y + _PAD + _LINE - 2.4, rule, _TEXT, bold=True)
        yield from held.draw(x + _PAD, y + _PAD + _LINE + 4.0)

    return _Block(width, height, draw)


_EDGES: dict[type, tuple[float, ...]] = {AllOf: (), AnyOf: (2.0, 3.0), AtLeast: (7.0, 3.0)}


def _flowed(blocks: Sequence[_Block], room: float) -> _Block:
    """Return blocks side by side, in as many rows as they need."""
    rows: list[list[_Block]] = []
    for block in blocks:
        if rows and sum(each.width + _GAP for each in rows[-1]) + block.width <= room:
            rows[-1].append(block)
        else:
            rows.append([block])
    widths = [sum(each.width for each in row) + _GAP * (len(row) - 1) for row in rows]
    heights = [max(each.height for each in row) for row in rows]

    def draw(x: float, y: float) -> Iterator[Mark]:
        for row, height in zip(rows, heights, strict=True):
            left = x
            for each in row:
                yield from each.draw(left, y)
                left += each.width + _GAP
            y += height + _GAP

    return _Block(max(widths), sum(heights) + _GAP * (len(rows) - 1), draw)


def _stacked(blocks: Sequence[_Block]) -> _Block:
    return blocks[0] if len(blocks) == 1 else _flowed(blocks, 0.0)


def _card(model: Model, name: str, room: float) -> _Block:
    """Return the card of a group, or of a unit that stands alone."""
    group = model.groups.get(name)
    inner = room - 2 * _PAD
    heading = wrapped(legible(name), _NAME, inner, bold=True)
    lines = _unit_lines(model, name) if group is None else _group_lines(model, name, group)
    told = [part for line in lines for part in wrapped(legible(line), _TEXT, inner)]
    rows = [] if group is None else [_member(model, group, place, inner) for place in range(len(group.members))]
    width = max(
        [text_width(line, _NAME, bold=True) for line in heading]
        + [text_width(line, _TEXT) for line in told]
        + [row.width for row in rows]
    )
    width += 2 * _PAD
    height = 2 * _PAD + _LINE * (len(heading) + len(told)) + sum(row.height + 2.0 for row in rows)

    def draw(x: float, y: float) -> Iterator[Mark]:
        yield Shape(rectangle(x, y, width, height), fill=PAPER, line=INK, width=1.2)
        baseline = y + _PAD - 2.4
        for line in heading:
            baseline += _LINE
            yield Words(x + _PAD, baseline, line, _NAME, bold=True)
        for line in told:
            baseline += _LINE
            yield Words(x + _PAD, baseline, line, _TEXT, colour=FAINT)
        below = baseline + 4.4
        for row in rows:
            yield from row.draw(x + _PAD, below)
            below += row.height + 2.0

    return _Block(width, height, draw)


def _member(model: Model, group: Group, place: int, room: float) -> _Block:
    """Return one member of a group: its items as squares with their name; a train as a card of its own."""
    member = group.members[place]
    if member.is_group:
        return _card(model, member.name, room)
    before = sum(each.count for each in group.members[:place])
    on_duty = group.size if group.is_active else group.duty_places
    full = max(0, min(member.count, on_duty - before))
    squares = min(member.count, _MOST_SQUARES)
    text = f"{member.count} × {member.name}" if member.count > 1 else member.name
    across = squares * (_SQUARE + 2.0) + 4.0
    lines = wrapped(legible(text), _TEXT, max(room - across, 40.0))

    def draw(x: float, y: float) -> Iterator[Mark]:
        for number in range(squares):
            left, top = x + number * (_SQUARE + 2.0), y + 1.8
            yield _square(left, top, is_full=number < full)
        for number, line in enumerate(lines):
            yield Words(x + across, y + _LINE * (number + 1) - 2.4, line, _TEXT)

    return _Block(across + max(text_width(line, _TEXT) for line in lines), _LINE * len(lines), draw)


def _square(x: float, y: float, *, is_full: bool) -> Shape:
    return Shape(rectangle(x, y, _SQUARE, _SQUARE), fill=INK if is_full else PAPER, line=INK, width=0.9)


def _group_lines(model: Model, name: str, group: Group) -> Iterator[str]:
    needs = f"needs {group.required} of {group.size}"
    if group.redundancy is not None:
        needs += f", {group.redundancy.replace('_', ' ')}"
    yield needs
    for phase in model.phases:
        if phase.required.get(name, group.required) != group.required:
            yield f"in {phase.name} needs {phase.required[name]}"
    kinds = [member.name for member in group.members if not member.is_group]
    yield from _served(model, name, kinds)


def _unit_lines(model: Model, name: str) -> Iterator[str]:
    yield "one unit"
    yield from _served(model, name, [name])


def _served(model: Model, name: str, kinds: Sequence[str]) -> Iterator[str]:
    """Tell what else is tied to a group: who repairs it, what tests it, which stock it draws on, what strikes it."""
    places = {name, *kinds, *(f"{name}.{kind}" for kind in kinds)}
    for crew, each in model.crews.items():
        if places & set(each.repairs):
            yield f"repaired by {crew} ({each.size})"
    for test, each_test in model.tests.items():
        if places & set(each_test.of):
            yield f"tested: {test}"
    for store, pool in model.spares.items():
        if places & set(pool.for_):
            yield f"spares: {store} ({pool.stock})"
    for cause, each_cause in model.common_causes.items():
        if places & set(each_cause.members):
            yield f"common cause: {cause}"


def _has_waiting(model: Model) -> bool:
    return any(not group.is_active and group.size > group.duty_places for group in model.groups.values())


def _key(model: Model) -> str:
    if not model.groups:
        return ""
    return "carries duty while all is well" + ("      waits" if _has_waiting(model) else "")


def _key_marks(model: Model, key: str, x: float, y: float) -> Iterator[Mark]:
    if not key:
        return
    for number, text in enumerate(key.split("      ")):
        yield _square(x, y + 1.8, is_full=number == 0)
        yield Words(x + _SQUARE + 5.0, y + _LINE - 2.4, text, _TEXT)
        x += _SQUARE + 17.0 + text_width(text, _TEXT)
