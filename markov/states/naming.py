"""Names of states: what is out of the ordinary, group by group, in words."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from markov.states.blocks import block_of
from markov.states.layout import Lane, Layout, Node, Path, Slot, Stock, Train, node_of

ALL_GOOD = "all good"


def island_label(
    layout: Layout,
    column: Sequence[int],
    ordinary: Sequence[int],
    *,
    alone: bool,
    alike: tuple[tuple[int, ...], ...] = (),
) -> str:
    """Name one local state; empty where it is the ordinary one (all good, duty filled by rank) among others.

    Parameters
    ----------
    layout : Layout
    column, ordinary : sequence of int
        Digits of the state and of the ordinary state.
    alone : bool
        Whether the island is the only one of the chain; then the ordinary state is spelled out too, where it has
        standbys.
    alike : tuple of tuples of int
        Nodes that are interchangeable: the label says how many of them are in which condition.
    """
    if list(column) == list(ordinary) and (all(node.active for node in layout.nodes) or not alone):
        return ""
    merged = {number for numbers in alike for number in numbers}
    parts: list[str] = []
    for number, node in enumerate(layout.nodes):
        if number not in merged:
            parts += _slot_words(layout, node, column)
    for number, node in enumerate(layout.nodes):
        if number not in merged:
            parts += _node_words(layout, node, column)
    for numbers in alike:
        parts += _alike_words(layout, numbers, column, ordinary)
    for stock in layout.stocks:
        parts += _stock_words(layout, stock, column)
    for desk in layout.desks:
        parts += _line_words(layout, f"line for {desk.name}", desk.line, column)
    return ", ".join(parts) if parts else ALL_GOOD if alone else ""


def _slot_words(layout: Layout, node: Node, column: Sequence[int]) -> list[str]:
    counts = Counter(slot.unit for slot in layout.slots)
    parts = []
    for path, slot in layout.paths:
        text = _slot_label(path, slot, column) if path[0] is node else ""
        if text:
            parts.append(f"{slot.unit if counts[slot.unit] == 1 else slot.name}: {text}")
    return parts


def _node_words(layout: Layout, node: Node, column: Sequence[int]) -> list[str]:
    parts: list[str] = []
    for path in layout.groups:
        if path[0] is node:
            parts += _group_words(path, column, several=len(layout.groups) > 1)
    return parts


def _alike_words(layout: Layout, numbers: tuple[int, ...], column: Sequence[int], ordinary: Sequence[int]) -> list[str]:
    """Tell how many of some interchangeable groups are in which condition, in the words of the first of them."""
    first = numbers[0]
    begin, end = block_of(layout, first)
    counts: Counter[tuple[int, ...]] = Counter()
    for number in numbers:
        low, high = block_of(layout, number)
        counts[tuple(column[low:high])] += 1
    told = []
    for block, count in counts.items():
        if block == tuple(ordinary[begin:end]):
            continue
        there = [*column[:begin], *block, *column[end:]]
        node = layout.nodes[first]
        words = [*_slot_words(layout, node, there), *_node_words(layout, node, there)]
        text = ", ".join(word.replace(f"{node.name}.", "").removeprefix(f"{node.name}: ") for word in words)
        told.append(f"{count} of {len(numbers)} like {node.name}[{text}]")
    return told


def _stock_words(layout: Layout, stock: Stock, column: Sequence[int]) -> list[str]:
    told = [] if column[stock.shelf] == stock.stock else [f"{column[stock.shelf]} on the shelf"]
    told += [f"{number} {what}" for number, what in _staged(stock.orders, column, "on order") if number]
    counted = stock.ordering.counted
    if counted >= 0 and column[counted]:
        told.append(f"{column[counted]} towards the next order")
    for lane in stock.removed:
        told += [what if number == 1 else f"{number} {what}" for number, what in _lane_words(lane, column) if number]
    words = [f"{stock.name}: {' + '.join(told)}"] if told else []
    return words + _line_words(layout, f"line for {stock.name}", stock.line, column)


def _line_words(layout: Layout, what: str, line: Sequence[int], column: Sequence[int]) -> list[str]:
    """Tell who stands in a line, where more than one does."""
    standing = [layout.lanes[column[row] - 1].name for row in line if column[row]]
    return [f"{what}: {', '.join(standing)}"] if len(set(standing)) > 1 else []


def _group_words(path: Path, column: Sequence[int], *, several: bool) -> list[str]:
    node = node_of(path[-1])
    told: list[str] = []
    train = path[-1]
    if isinstance(train, Train):
        if column[train.duty]:
            told.append("on duty")
        told += [
            what if number == 1 else f"{number} {what}"
            for number, what in _staged(train.start, column, "starting")
            if number
        ]
    if node.outage >= 0 and column[node.outage]:
        told.append("lost" if node.outcome == "lost" else "uncovered")
    if node.switch is not None:
        if node.switch.hidden >= 0 and column[node.switch.hidden]:
            told.append("switch failed unnoticed")
        told += [what for number, what in _staged(node.switch.down, column, "switch failed") if number]
    switching = [column[row] for row in node.switching]
    if sum(switching):
        stages = "" if len(switching) == 1 else " " + "+".join(str(number) for number in switching)
        told.append(f"switchover{stages}" if sum(switching) == 1 or stages else f"{sum(switching)} switchovers")
    return [f"{node.name}: {' + '.join(told)}"] if several and told else told


def _slot_label(path: Path, slot: Slot, column: Sequence[int]) -> str:
    node = node_of(path[-1])
    failed = sum(column[row] for row in slot.out_rows)
    found: list[tuple[int, str]] = []
    if not node.active:
        starting = sum(column[row] for row in slot.start)
        found += [(column[slot.duty], "on duty")]
        found += _staged(slot.start, column, "starting")
        found += [(slot.count - failed - starting - column[slot.duty], "waiting")]
    for each in slot.hidden:
        if each.placed >= 0:
            found.append((column[each.placed], f"{each.label} in a duty place"))
        found.append((column[each.apart], each.label))
        if each.held >= 0:
            found.append((column[each.held], f"{each.label}, under test"))
    for lane in slot.lanes:
        found += _lane_words(lane, column)
    if slot.tested >= 0 and column[slot.tested]:
        return " + ".join(
            ["under test", *(f"{number} {what}" for number, what in found if number and what != "waiting")]
        )
    told = [f"{number} {what}" if slot.count > 1 else what for number, what in found if number]
    return " + ".join(told)


def _lane_words(lane: Lane, column: Sequence[int]) -> list[tuple[int, str]]:
    mode = f" ({lane.mode})" if lane.mode else ""
    found: list[tuple[int, str]] = []
    if lane.deferred >= 0:
        found.append((column[lane.deferred], f"failed, repair not begun{mode}"))
    found += _staged(lane.delay, column, f"awaiting logistics{mode}")
    if lane.short >= 0:
        found.append((column[lane.short], f"waiting for a spare{mode}"))
    found += _staged(lane.swap, column, f"being exchanged{mode}")
    found += _staged(lane.down, column, f"failed{mode}")
    if lane.fresh >= 0:
        found.append((column[lane.fresh], f"queued{mode}"))
    found += _staged(lane.held, column, f"interrupted{mode}")
    found += _staged(lane.serve, column, f"in repair{mode}")
    return found


def _staged(rows: tuple[int, ...], column: Sequence[int], what: str) -> list[tuple[int, str]]:
    if len(rows) == 1:
        return [(column[rows[0]], what)]
    return [(column[row], f"{what} (stage {stage})") for stage, row in enumerate(rows, 1)]


def join_labels(parts: Sequence[tuple[str, str]], ambiguous: frozenset[str]) -> str:
    """Join the labels of several islands; an island with an ambiguous label is named before it."""
    told = [f"{island}[{text}]" if island in ambiguous else text for island, text in parts if text]
    return "; ".join(told) if told else ALL_GOOD
