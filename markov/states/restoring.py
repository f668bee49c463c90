"""Restoration of the whole system at once, in place of repair unit by unit."""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice, Event
from markov.states.layout import Digits, Layout
from markov.states.outage import make_all_good
from markov.states.takeover import fill_by_rank


def restoration_events(dice: Dice, layout: Layout) -> Iterator[Event]:
    """Yield the restoration of the system, where the spec has one: everything in it is good again."""
    if layout.restoration is None or layout.paused:
        return
    yield Event(
        "the system is restored",
        "system_down",
        dice.table.of(layout.restoration),
        _always,
        partial(_restored, layout),
    )


def _always(x: Digits) -> NDArray[np.int32]:
    return np.ones(x.shape[1], np.int32)


def _restored(layout: Layout, branch: Branch) -> list[Branch]:
    for node in layout.nodes:
        if layout.in_system(node):
            kept = node.in_outage(branch.x) if node.outcome == "lost" else np.zeros(len(branch), np.bool_)
            make_all_good(node, branch.x, ~kept)
            fill_by_rank(node, branch.x, ~kept)
    return [branch]
