"""What happens when a member is good again: its next place, the end of an outage."""

from __future__ import annotations

import numpy as np

from markov.states.branching import Branch, Dice
from markov.states.faults import blocked
from markov.states.layout import Entry, Node, Path, Slot, Train, node_of, running
from markov.states.outage import repair_ends_outage
from markov.states.takeover import attempt, empty_places, fill_by_rank, release_surplus_start


def put_back(dice: Dice, path: Path, slot: Slot, branch: Branch) -> list[Branch]:
    """Place one item that has just become good."""
    node = node_of(path[-1])
    result: list[Branch] = []
    runs, idle = branch.split(running(path, branch.x))
    for part, carries in ((runs, True), (idle, False)):
        if len(part):
            result.extend(good_again(dice, node, slot, part, carries=carries))
    return result


def good_again(dice: Dice, node: Node, entry: Entry, branch: Branch, *, carries: bool) -> list[Branch]:
    """Place a member that has just become good.

    Parameters
    ----------
    dice : Dice
    node : Node
        The group.
    entry : Slot or Train
        The member; its digits already say that it is good.
    branch : Branch
        Owned by the caller, given up here.
    carries : bool
        Whether the group itself carries duty; a train that waits places nothing.
    """
    outage, normal = branch.split(node.in_outage(branch.x))
    result: list[Branch] = []
    if len(outage):
        result.extend(_during_outage(dice, node, entry, outage, carries))
    if len(normal):
        result.extend(_in_normal_order(dice, node, entry, normal, carries))
    return result


def _during_outage(dice: Dice, node: Node, entry: Entry, branch: Branch, carries: bool) -> list[Branch]:
    if node.active:
        _join_active(node, entry, branch, carries)
    if node.active or not carries or node.outcome in ("until_repair", "restart", "lost"):
        return repair_ends_outage(dice, node, branch, carries=carries)
    result: list[Branch] = []
    for placed in _take_empty_place(dice, node, entry, branch, during_outage=True):
        result.extend(repair_ends_outage(dice, node, placed, carries=carries))
    return result


def _in_normal_order(dice: Dice, node: Node, entry: Entry, branch: Branch, carries: bool) -> list[Branch]:
    if node.active:
        _join_active(node, entry, branch, carries)
        return [branch]
    if not carries:
        return [branch]
    return _take_empty_place(dice, node, entry, branch, during_outage=False)


def _join_active(node: Node, entry: Entry, branch: Branch, carries: bool) -> None:
    """Let a good member share the duty of an active group; a repair that suffices ends switchovers; in place."""
    if isinstance(entry, Train) and carries:
        branch.x[entry.duty] = 1
        fill_by_rank(entry.node, branch.x)
    enough = node.good(branch.x) >= node.required
    for row in node.switching:
        branch.x[row][enough] = 0


def _take_empty_place(dice: Dice, node: Node, entry: Entry, branch: Branch, *, during_outage: bool) -> list[Branch]:
    """Put the member on duty where a place is empty; it waits otherwise."""
    if node.start_again:
        tried, waits = branch.split(empty_places(node, branch.x) > 0)
        result = [waits] if len(waits) else []
        if len(tried):
            tried, stuck = tried.split(~blocked(node, tried.x))
            if len(stuck):
                result.append(stuck)
            started, refused = attempt(dice, entry, tried) if len(tried) else ([], [])
            for each in started:
                each.x[entry.duty if during_outage or not entry.start else entry.start[0]] += 1
            result += started + refused
        return result
    place = node.on_duty(branch.x) + node.seeming(branch.x) < node.places
    branch.x[entry.duty] += place.astype(np.int32)
    if isinstance(entry, Train):
        fill_by_rank(entry.node, branch.x, place)
    release_surplus_start(node, branch.x)
    return [branch]
