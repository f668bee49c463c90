"""Islands that are interchangeable, so that only how many of them are in which state matters.

Two islands are interchangeable if they are built alike (the same kinds, counts, rules, parameters and initial state)
and stand side by side at one place of the structure of success, each named once.  Exchanging them then maps the chain
onto itself, and the chain of the sorted states is an exact lumping (J. G. Kemeny, J. L. Snell, Finite Markov Chains,
1960, section 6.3; cited from memory).  A group that a question asks about by name is left out.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Hashable, Iterator
from math import factorial

import numpy as np
from numpy.typing import NDArray

from markov.model import Named, Success
from markov.rates import Factor
from markov.states.blocks import block_of
from markov.states.crews import Columns
from markov.states.layout import Clock, Digits, Layout, Node, Slot, Train

Classes = tuple[tuple[int, ...], ...]
"""Numbers of interchangeable islands, a class a tuple of at least two."""


def interchangeable(
    layouts: tuple[Layout, ...], starts: tuple[Digits, ...], success: Success | None, named: frozenset[str]
) -> Classes:
    """Find the classes of interchangeable islands.

    Parameters
    ----------
    layouts : tuple of Layout
    starts : tuple of int32[rows, 1]
        Initial state of each.
    success : Success or None
    named : set of str
        Groups and units that a question asks about by name.
    """
    places = dict(_places(success, ())) if success is not None else {}
    counts = Counter(name for name, _ in _places(success, ())) if success is not None else Counter()
    classes: dict[Hashable, list[int]] = {}
    for number, (layout, start) in enumerate(zip(layouts, starts, strict=True)):
        if len(layout.nodes) > 1 or layout.shocks or layout.stocks or layout.desks or layout.demand is not None:
            continue
        node = layout.nodes[0]
        name = node.name
        inside = {name, *(train.unit for path in layout.groups for train in path if isinstance(train, Train))}
        if counts[name] > 1 or inside & named:
            continue
        alike = (_of_node(node), tuple(start[:, 0].tolist()), places.get(name))
        classes.setdefault(alike, []).append(number)
    return tuple(tuple(each) for each in classes.values() if len(each) > 1)


def alike_nodes(
    layouts: tuple[Layout, ...], start: Digits, success: tuple[Success | None, ...], named: frozenset[str]
) -> Classes:
    """Find the groups of one island that are interchangeable.

    Parameters
    ----------
    layouts : tuple of Layout
        The island in every phase.
    start : int32[rows, 1]
        Initial state.
    success : tuple of Success or None
        The structure in every phase.
    named : set of str
        Groups and units that a question asks about by name.

    Returns
    -------
    classes : tuple of tuples of int
        Numbers of the nodes.
    """
    first = layouts[0]
    if any(stock.line for stock in first.stocks) or any(desk.line for desk in first.desks):
        return ()  # who waits where in a line tells groups apart
    classes: dict[Hashable, list[int]] = {}
    for number, node in enumerate(first.nodes):
        inside = {node.name, *(path[-1].unit for path in _trains_of(first, node))}
        if node.release == "visits" or inside & named:
            continue
        alike: list[Hashable] = []
        for layout, structure in zip(layouts, success, strict=True):
            spots = [
                place for name, place in (_places(structure, ()) if structure is not None else ()) if name == node.name
            ]
            if len(spots) > 1:
                break
            alike.append((_of_node(layout.nodes[number]), tuple(spots)))
        else:
            shocks = tuple(tuple(entry for at, entry in shock.slots if at == number) for shock in first.shocks)
            rows = list(range(*block_of(first, number)))
            key = tuple(alike), shocks, tuple(start[rows, 0].tolist()), len(rows)
            classes.setdefault(key, []).append(number)
    return tuple(tuple(each) for each in classes.values() if len(each) > 1)


def _trains_of(layout: Layout, node: Node) -> Iterator[tuple[Train, ...]]:
    for path in layout.groups:
        if path[0] is node:
            trains = tuple(step for step in path if isinstance(step, Train))
            if trains:
                yield trains


def _places(success: Success, path: tuple[int, ...]) -> Iterator[tuple[str, tuple[int, ...]]]:
    """Yield each name with the place of the structure that it hangs from; side by side means the same place."""
    if isinstance(success, Named):
        yield success.name, path[:-1]
        return
    for number, part in enumerate(success.of):
        yield from _places(part, (*path, number))


def _of_node(node: Node) -> Hashable:
    switch = node.switch
    return (
        node.required,
        node.places,
        node.active,
        node.cold,
        node.outcome,
        node.return_to_preferred,
        node.start_again,
        node.while_down,
        node.release,
        node.offline,
        tuple((number, factor.exact) for number, factor in node.load),
        _of_clock(node.outcome_clock, node.name),
        _of_clock(node.takeover, node.name),
        tuple(_of_factor(factor, node.name) for factor in (*node.coverage, node.standby_factor)),
        None
        if switch is None
        else (
            switch.latent,
            switch.found_by,
            _of_clock(switch.repair, node.name),
            tuple(
                None if each is None else each.exact
                for each in (switch.refusal, switch.failure, switch.false_operation)
            ),
        ),
        tuple(
            _of_node(entry.node) if isinstance(entry, Train) else _of_slot(entry, node.name) for entry in node.entries
        ),
    )


def _of_slot(slot: Slot, group: str) -> Hashable:
    unit = "" if slot.unit == group else slot.unit
    return (
        unit,
        slot.count,
        slot.bypass,
        tuple(_of_factor(factor, group) for factor in (slot.failure, slot.pace, slot.start_failure, slot.capacity)),
        tuple(
            (kind.lane, kind.hidden, _of_factor(kind.alone, group), tuple(_of_factor(f, group) for f in kind.factors))
            for kind in slot.faults
        ),
        tuple(
            (
                lane.needless,
                lane.explicit_queue,
                lane.preemptible,
                lane.desk,
                lane.stock,
                _of_factor(lane.success, group),
                _of_clock(lane.repair, group),
                _of_clock(lane.delays, group),
            )
            for lane in slot.lanes
        ),
        tuple((each.lane, each.needless, each.found_by, each.by_demand, each.returns) for each in slot.hidden),
    )


def _of_clock(clock: Clock | None, group: str) -> Hashable:
    if clock is None:
        return None
    return tuple(_of_factor(factor, group) for factor in (*clock.rates, *clock.exits))


def _of_factor(factor: Factor | None, group: str) -> Hashable:
    return None if factor is None else (factor.symbol.replace(f"({group})", "()"), factor.exact)


def sort_alike(columns: Columns, classes: Classes) -> Columns:
    """Return the representative of each state: local states of interchangeable islands in ascending order."""
    if not classes:
        return columns
    result = columns.copy()
    for islands in classes:
        members = list(islands)
        result[members] = np.sort(columns[members], axis=0)
    return result


def raw_counts(columns: Columns, classes: Classes) -> NDArray[np.float64]:
    """Return how many states each representative stands for, shape (m,)."""
    weights: NDArray[np.float64] = np.ones(columns.shape[1])
    for islands in classes:
        local = columns[list(islands)]
        runs = np.ones(columns.shape[1])
        for row in range(1, len(islands)):
            runs = np.where(local[row] == local[row - 1], runs + 1, 1)
            weights /= runs
        weights *= float(factorial(len(islands)))
    return weights
