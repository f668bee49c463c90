"""Where one further fault would bring a group down."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from markov.rates import RateTable
from markov.states.branching import Branch, Dice
from markov.states.events import island_events
from markov.states.layout import Digits, Entry, Layout, Node, Train


def critical(layout: Layout, name: str, x: Digits) -> NDArray[np.bool_]:
    """Tell in which states one more unit fault would stop a group of the top level, shape (k,).

    The fault is taken as covered, every start as a success, every takeover as done at once.  States in which the
    group does not deliver anyway are not critical.
    """
    node = layout.node_named(name)
    if node is None:
        raise AssertionError(f"{name} is not in this island")
    perfect = Layout((_perfect(node),), layout.tops, layout.labels)
    dice = Dice(RateTable())
    delivers = node.delivers(x)
    x = x.copy()
    _finish_switchovers(node, x)
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
            result[after.origin[~perfect.nodes[0].delivers(after.x)]] = True
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
            detected = replace(entry.faults[0], label="", factors=(), hidden=-1, alone=None)
            hidden = tuple(replace(each, by_system_failure=False) for each in entry.hidden)
            entries.append(replace(entry, start_failure=None, start=(), faults=(detected,), hidden=hidden))
    return replace(
        node, coverage=(), takeover=None, switching=(), switch=None, release="at_once", entries=tuple(entries)
    )
