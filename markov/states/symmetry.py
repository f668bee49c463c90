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
from markov.states.crews import Columns
from markov.states.layout import Digits, Layout, Node, Slot, Train

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
        name = layout.node.name
        inside = {name, *(train.unit for path in layout.groups for train in path if isinstance(train, Train))}
        if counts[name] > 1 or inside & named:
            continue
        alike = (_of_node(layout.node), tuple(start[:, 0].tolist()), places.get(name))
        classes.setdefault(alike, []).append(number)
    return tuple(tuple(each) for each in classes.values() if len(each) > 1)


def _places(success: Success, path: tuple[int, ...]) -> Iterator[tuple[str, tuple[int, ...]]]:
    """Yield each name with the place of the structure that it hangs from; side by side means the same place."""
    if isinstance(success, Named):
        yield success.name, path[:-1]
        return
    for number, part in enumerate(success.of):
        yield from _places(part, (*path, number))


def _of_node(node: Node) -> Hashable:
    factors = (*node.coverage, node.standby_factor, node.outcome_rate, node.takeover_rate)
    return (
        node.required,
        node.places,
        node.active,
        node.cold,
        node.outcome,
        node.takeover_stages,
        node.return_to_preferred,
        node.start_again,
        node.while_down,
        tuple(_of_factor(factor, node.name) for factor in factors),
        tuple(
            _of_node(entry.node) if isinstance(entry, Train) else _of_slot(entry, node.name) for entry in node.entries
        ),
    )


def _of_slot(slot: Slot, group: str) -> Hashable:
    unit = "" if slot.unit == group else slot.unit
    factors = (slot.failure, slot.start_failure, slot.repair, slot.logistic_delay, slot.capacity)
    return unit, slot.count, slot.repair_stages, tuple(_of_factor(factor, group) for factor in factors)


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


def raw_count(columns: Columns, classes: Classes) -> int:
    """Return how many states the representatives stand for."""
    weights: NDArray[np.float64] = np.ones(columns.shape[1])
    for islands in classes:
        local = columns[list(islands)]
        runs = np.ones(columns.shape[1])
        for row in range(1, len(islands)):
            runs = np.where(local[row] == local[row - 1], runs + 1, 1)
            weights /= runs
        weights *= float(factorial(len(islands)))
    return round(float(weights.sum()))
