"""Where one further fault would bring a group down."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from markov.rates import RateTable
from markov.states.branching import Branch, Dice
from markov.states.events import island_events
from markov.states.layout import Digits, Entry, Layout, Node, Train


def critical(layout: Layout, x: Digits) -> NDArray[np.bool_]:
    """Tell in which states one more unit fault would stop the group, shape (k,).

    The fault is taken as covered, every start as a success, every takeover as done at once.  States in which the
    group does not deliver anyway are not critical.
    """
    perfect = Layout(_perfect(layout.node), layout.tops, layout.labels)
    dice = Dice(RateTable())
    delivers = layout.node.delivers(x)
    x = x.copy()
    _finish_switchovers(layout.node, x)
    result = np.zeros(x.shape[1], np.bool_)
    for event in island_events(dice, perfect):
        if not event.is_fault or event.mode == "system_down":
            continue
        exposed = np.flatnonzero((event.exposed(x) > 0) & delivers)
        if not len(exposed):
            continue
        before = x[:, exposed]
        branch = Branch(before.copy(), before, exposed, np.ones(len(exposed), np.int64), event.rate, (event.cause,))
        for after in event.apply(branch):
            result[after.origin[~perfect.node.delivers(after.x)]] = True
    return result


def _finish_switchovers(node: Node, x: Digits) -> None:
    """Put every member on duty whose switchover is under way; in place."""
    for entry in node.entries:
        for row in entry.start:
            x[entry.duty] += x[row]
            x[row] = 0
        if isinstance(entry, Train):
            _finish_switchovers(entry.node, x)


def _perfect(node: Node) -> Node:
    """Return the group without imperfect coverage, failing starts or switchover times."""
    entries: list[Entry] = []
    for entry in node.entries:
        if isinstance(entry, Train):
            entries.append(replace(entry, node=_perfect(entry.node), start=()))
        else:
            entries.append(replace(entry, start_failure=None, start=()))
    return replace(node, coverage=(), takeover_rate=None, switching=(), entries=tuple(entries))
