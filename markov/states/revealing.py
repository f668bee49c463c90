"""What reveals hidden faults besides tests: a demand, the failure of the system."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import partial

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice, Event
from markov.states.faults import reveal_aside, reveal_in_place
from markov.states.layout import Digits, Hidden, Layout, Slot, node_of, total

Chosen = Callable[[Slot, Hidden], bool]


def reveal_some(dice: Dice, layout: Layout, branch: Branch, chosen: Chosen) -> list[Branch]:
    """Reveal the hidden faults of the chosen classes: first those off duty, then those in duty places, one by one."""
    found = [
        (node_of(path[-1]), slot, number)
        for path, slot in layout.paths
        for number, each in enumerate(slot.hidden)
        if chosen(slot, each)
    ]
    for node, slot, number in found:
        reveal_aside(node, slot, number, branch.x)
    done = [branch]
    for node, slot, number in found:
        done = [after for todo in done for after in reveal_in_place(dice, node, slot, number, todo)]
    return done


def demand_events(dice: Dice, layout: Layout) -> Iterator[Event]:
    """Yield the demand as far as it changes anything: it reveals hidden faults of units that it can reveal."""
    rows = tuple(row for slot in layout.slots for each in slot.hidden if each.by_demand for row in each.rows)
    if layout.demand is None or not rows:
        return
    yield Event(
        "a demand comes",
        "always",
        dice.table.of(layout.demand),
        partial(_any_of, rows),
        partial(_demanded, dice, layout),
    )


def _demanded(dice: Dice, layout: Layout, branch: Branch) -> list[Branch]:
    return reveal_some(dice, layout, branch, lambda slot, each: each.by_demand)


def _any_of(rows: tuple[int, ...], x: Digits) -> NDArray[np.int32]:
    return (total(x, rows) > 0).astype(np.int32)
