"""Names of states: what is out of the ordinary, group by group, in words."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from markov.states.layout import Layout, Path, Slot, Train, node_of

ALL_GOOD = "all good"


def island_label(layout: Layout, column: Sequence[int], ordinary: Sequence[int], *, alone: bool) -> str:
    """Name one local state; empty where it is the ordinary one (all good, duty filled by rank) among others.

    Parameters
    ----------
    layout : Layout
    column, ordinary : sequence of int
        Digits of the state and of the ordinary state.
    alone : bool
        Whether the island is the only one of the chain; then the ordinary state is spelled out too, where it has
        standbys.
    """
    if list(column) == list(ordinary) and (layout.node.active or not alone):
        return ""
    counts = Counter(slot.unit for slot in layout.slots)
    parts = []
    for path, slot in layout.paths:
        text = _slot_label(path, slot, column)
        if text:
            parts.append(f"{slot.unit if counts[slot.unit] == 1 else slot.name}: {text}")
    for path in layout.groups:
        parts += _group_words(path, column, several=len(layout.groups) > 1)
    return ", ".join(parts)


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
    switching = [column[row] for row in node.switching]
    if sum(switching):
        stages = "" if len(switching) == 1 else " " + "+".join(str(number) for number in switching)
        told.append(f"switchover{stages}" if sum(switching) == 1 or stages else f"{sum(switching)} switchovers")
    return [f"{node.name}: {' + '.join(told)}"] if several and told else told


def _slot_label(path: Path, slot: Slot, column: Sequence[int]) -> str:
    node = node_of(path[-1])
    failed = sum(column[row] for row in slot.failed_rows)
    found: list[tuple[int, str]] = []
    if not node.active:
        starting = sum(column[row] for row in slot.start)
        found += [(column[slot.duty], "on duty")]
        found += _staged(slot.start, column, "starting")
        found += [(slot.count - failed - starting - column[slot.duty], "waiting")]
    if slot.delay >= 0:
        found.append((column[slot.delay], "awaiting logistics"))
    found += _staged(slot.down, column, "failed")
    if slot.fresh >= 0:
        found.append((column[slot.fresh], "queued"))
    found += _staged(slot.held, column, "interrupted")
    found += _staged(slot.serve, column, "in repair")
    told = [f"{number} {what}" if slot.count > 1 else what for number, what in found if number]
    return " + ".join(told)


def _staged(rows: tuple[int, ...], column: Sequence[int], what: str) -> list[tuple[int, str]]:
    if len(rows) == 1:
        return [(column[rows[0]], what)]
    return [(column[row], f"{what} (stage {stage})") for stage, row in enumerate(rows, 1)]


def join_labels(parts: Sequence[tuple[str, str]], ambiguous: frozenset[str]) -> str:
    """Join the labels of several islands; an island with an ambiguous label is named before it."""
    told = [f"{island}[{text}]" if island in ambiguous else text for island, text in parts if text]
    return "; ".join(told) if told else ALL_GOOD
