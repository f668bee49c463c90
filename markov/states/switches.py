"""The switch of a group: its own faults, its repair, its false operations."""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice, Event, Mode
from markov.states.clocks import clock_events
from markov.states.layout import Digits, Layout, Node, Switch
from markov.states.takeover import start_all, swap_in


def switch_events(dice: Dice, layout: Layout, node: Node) -> Iterator[Event]:
    """Yield what happens by itself to the switch of a group."""
    switch = node.switch
    if switch is None:
        return
    mode: Mode = "system_up" if node.while_down == "stop" else "always"
    if switch.failure is not None:
        told = " unnoticed" if switch.latent else ""
        yield Event(
            f"the switch of {node.name} fails{told}",
            mode,
            dice.table.of(switch.failure),
            partial(_in_order, switch),
            partial(_fails, switch),
        )
    if switch.repair is not None and switch.down:
        yield from clock_events(
            dice,
            switch.repair,
            switch.down,
            of="repair",
            ends=f"the switch of {node.name}",
            apply=partial(_back_in_order, dice, node),
        )
    if switch.false_operation is not None and not node.active:
        yield Event(
            f"the switch of {node.name} acts needlessly",
            mode,
            dice.table.of(switch.false_operation),
            partial(_can_act, node, switch),
            partial(swap_in, dice, node),
        )


def _in_order(switch: Switch, x: Digits) -> NDArray[np.int32]:
    return (~switch.failed(x)).astype(np.int32)


def _fails(switch: Switch, branch: Branch) -> list[Branch]:
    branch.x[switch.hidden if switch.latent else switch.down[0]] += 1
    return [branch]


def _can_act(node: Node, switch: Switch, x: Digits) -> NDArray[np.int32]:
    able = ~switch.failed(x) & (node.callable(x) > 0) & (node.on_duty(x) > 0) & ~node.in_outage(x)
    return able.astype(np.int32)


def _back_in_order(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Let the switch, back in order, try the places that are empty, without a draw of coverage."""
    tries, rests = branch.split(~node.in_outage(branch.x) & np.bool_(not node.active))
    result = [rests] if len(rests) else []
    return result + start_all(dice, node, tries) if len(tries) else result
