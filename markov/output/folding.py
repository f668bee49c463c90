"""Folding of a diagram that is too large to read into one box per level, condition or special state."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from typing import get_args

from markov.errors import UsageError
from markov.output.diagram import ArrowKind, Condition, DiagramArrow, DiagramNode, Labels, StateDiagram, value_text

_ALTERNATIVES_SHOWN = 2
"""Different sums of rates spelt out on one arrow between boxes; more are counted."""
_LONGEST_FORMULA = 60
"""Characters of a formula on one arrow between boxes; in place of a longer one stands its value."""
_NUMBERS_SHOWN = 60
"""Characters of state numbers listed in a box; a longer list gives its first and last number."""


def fold_by_level(diagram: StateDiagram, *, band: int = 1, last: int | None = None) -> StateDiagram:
    """Fold the states into boxes, one per band of levels and condition, with summed rates between the boxes.

    Final states never share a box with others, nor do initial ones. A box says how many states it holds, which ones,
    and how many arrows run inside it; a remark printed in the picture says that the diagram is folded.

    Parameters
    ----------
    diagram
        The diagram to fold; one that is folded already is refused.
    band
        Number of neighbouring levels that share a column, 1 or more.
    last
        Bands beyond this one share its column, where the first is 0; None keeps each apart.

    Returns
    -------
    StateDiagram
        The folded diagram. A box bears the lowest number of the states that it holds.

    Raises
    ------
    UsageError
        A band below 1, or a diagram that is folded already.

    Notes
    -----
    Method: for every state of a box the formulas of its arrows into another box are summed. Where all states of the
    box have the same sum, that sum stands on the arrow, and is the rate between the boxes whatever the shares of
    the states (ordinary lumpability: J. Kemeny, J. L. Snell, Finite Markov Chains, 1960, section 6.3; cited from
    memory). Where they differ, the arrow says that the rate differs by state. Formulas are compared as text.
    """
    if band < 1:
        raise UsageError(f"a band of {band} levels; expected 1 or more")
    if any(node.holds for node in diagram.nodes):
        raise UsageError("the diagram is folded already; expected one whose boxes are single states")
    boxes: dict[tuple[int, int, bool, bool], list[DiagramNode]] = {}
    order = get_args(Condition)

    def column(level: int) -> int:
        return level // band if last is None else min(level // band, last)

    for node in diagram.nodes:
        key = (column(node.level), order.index(node.condition), node.final, not node.initial)
        boxes.setdefault(key, []).append(node)
    members = {
        held[0].number: held for held in (sorted(boxes[key], key=lambda node: node.number) for key in sorted(boxes))
    }
    box_of = {node.number: box for box, held in members.items() for node in held}
    spans: dict[int, tuple[int, int]] = {}
    for node in diagram.nodes:
        low, high = spans.get(column(node.level), (node.level, node.level))
        spans[column(node.level)] = (min(low, node.level), max(high, node.level))

    inside: Counter[int] = Counter()
    between: dict[tuple[int, int, ArrowKind], list[DiagramArrow]] = {}
    for arrow in diagram.arrows:
        source, target = box_of[arrow.source], box_of[arrow.target]
        if source == target:
            inside[source] += 1
        else:
            between.setdefault((source, target, arrow.kind), []).append(arrow)

    return StateDiagram(
        title=diagram.title,
        subtitle=diagram.subtitle,
        nodes=tuple(_folded_box(held, spans[column(held[0].level)], inside[box]) for box, held in members.items()),
        arrows=tuple(
            DiagramArrow(
                source,
                target,
                _rate_between(members[source], arrows, diagram.labels),
                kind,
                _value_between(members[source], arrows),
            )
            for (source, target, kind), arrows in sorted(between.items())
        ),
        legend=diagram.legend,
        alt_text=diagram.alt_text,
        columns=diagram.columns,
        labels=diagram.labels,
        remarks=(
            *diagram.remarks,
            _remark(diagram, len(members), band, len(spans), sum(inside.values()), len(between)),
        ),
    )


def _folded_box(held: list[DiagramNode], span: tuple[int, int], arrows_inside: int) -> DiagramNode:
    low, high = span
    first = held[0]
    if len(held) == 1:
        lines = first.lines
    else:
        numbers = ranges(node.number for node in held)
        if len(numbers) > _NUMBERS_SHOWN:
            numbers = f"{first.number} to {held[-1].number}, in part"
        lines = (f"states {numbers}", f"{_count(arrows_inside, 'arrow')} inside")
    return DiagramNode(
        number=first.number,
        lines=lines,
        condition=first.condition,
        initial=first.initial,
        final=first.final,
        level=low,
        holds=tuple(node.number for node in held) if len(held) > 1 else (),
        top_level=high if high > low else None,
    )


def _value_between(held: list[DiagramNode], arrows: list[DiagramArrow]) -> tuple[float, float] | None:
    """Return the least and the greatest sum of the values of a state's arrows, over all states of a box."""
    if any(arrow.value is None for arrow in arrows):
        return None
    least = {node.number: 0.0 for node in held}
    most = dict(least)
    for arrow in arrows:
        assert arrow.value is not None
        least[arrow.source] += arrow.value[0]
        most[arrow.source] += arrow.value[1]
    return min(least.values()), max(most.values())


def _rate_between(held: list[DiagramNode], arrows: list[DiagramArrow], labels: Labels) -> str:
    """Return what stands on an arrow between boxes: a sum of formulas where it is short, else its value."""
    if arrows[0].kind == "instant":
        named = list(dict.fromkeys(arrow.label for arrow in arrows))
        shown = " or ".join(named[:_ALTERNATIVES_SHOWN])
        return shown if len(named) <= _ALTERNATIVES_SHOWN else f"{shown} or {len(named) - _ALTERNATIVES_SHOWN} more"
    formulas: dict[int, list[str]] = {node.number: [] for node in held}
    for arrow in arrows:
        formulas[arrow.source].append(arrow.label)
    sums = Counter(_summed(texts) for texts in formulas.values())
    ranked = [text for text, _ in sorted(sums.items(), key=lambda item: (-item[1], item[0]))]
    value = _value_between(held, arrows)
    spelt = ranked[0] if len(sums) == 1 else f"by state: {' or '.join(ranked)}"
    if len(sums) <= _ALTERNATIVES_SHOWN and (value is None or len(spelt) <= _LONGEST_FORMULA):
        return spelt
    if value is None:
        return f"{_count(len(arrows), 'arrow')}, {_count(len(sums), 'sum')}"
    counted = _count(len(arrows), "arrow")
    return f"{counted}: {value_text(value, arrows[0].kind)}" if labels == "formulas" else counted


def _summed(labels: list[str]) -> str:
    """Return the sum of the formulas, equal ones gathered; 0 for none."""
    if not labels:
        return "0"
    return " + ".join(text if times == 1 else f"{times}·({text})" for text, times in sorted(Counter(labels).items()))


def _remark(diagram: StateDiagram, boxes: int, band: int, columns_drawn: int, inside: int, between: int) -> str:
    counted = "number of failed units" if diagram.columns == "failed units" else "number of steps"
    columns = counted if band == 1 else f"band of {band} such numbers ({counted})"
    columns = (
        f"column ({counted})" if band == 1 and columns_drawn < len({node.level for node in diagram.nodes}) else columns
    )
    return (
        f"Folded: {_count(len(diagram.nodes), 'state')} and {_count(len(diagram.arrows), 'arrow')} in "
        f"{boxes} boxes, one per {columns} and condition. {_count(inside, 'arrow')} inside boxes are not drawn; "
        f"the other {len(diagram.arrows) - inside} are gathered into {between}. {_DIFFERING[diagram.labels]} "
        "The same diagram as a .dot or .graphml file lists every arrow."
    )


_DIFFERING = {
    "formulas": "A long sum of formulas is told as its value. “By state”, “… to …”, and “60 arrows, 15 sums”: the rate "
    "differs between the states inside the box.",
    "values": "“… to …”: the rate differs between the states inside the box.",
    "both": "“By state”, “… to …”, and “60 arrows, 15 sums”: the rate differs between the states inside the box.",
}


def _count(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def ranges(numbers: Iterable[int]) -> str:
    """Return numbers as text with runs drawn together: ``1–4, 7``."""
    runs: list[list[int]] = []
    for number in sorted(numbers):
        if runs and number == runs[-1][1] + 1:
            runs[-1][1] = number
        else:
            runs.append([number, number])
    return ", ".join(str(low) if low == high else f"{low}–{high}" for low, high in runs)
