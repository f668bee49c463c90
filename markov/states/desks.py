"""Crews that finish what they have begun: who is served next, by arrival or by priority alone."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice
from markov.states.layout import Desk, Digits, Lane, Layout
from markov.states.lines import bring_up_to_date, first_of, take_first


def lanes_at(layout: Layout, number: int) -> dict[int, Lane]:
    """Return the lanes that a desk serves, by their numbers."""
    return {at: lane for at, lane in enumerate(layout.lanes) if lane.desk == number}


def settle_desk(dice: Dice, layout: Layout, number: int, desk: Desk, branch: Branch) -> list[Branch]:
    """Give every free crew its next item."""
    lanes = lanes_at(layout, number)
    if desk.first_come:
        urgent = sorted(lanes.items(), key=lambda item: desk.order.index(item[1].unit))  # among those of one instant
        bring_up_to_date(desk.line, {at: branch.x[lane.fresh] for at, lane in urgent}, branch.x)
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        free = desk.size > _sum(todo.x, [row for lane in lanes.values() for row in lane.serve])
        queued = _sum(todo.x, [lane.fresh for lane in lanes.values()]) > 0
        able, settled = todo.split(free & queued)
        if len(settled):
            done.append(settled)
        if len(able):
            work += _serve_next(dice, desk, lanes, able)
    return done


def _serve_next(dice: Dice, desk: Desk, lanes: dict[int, Lane], branch: Branch) -> list[Branch]:
    result: list[Branch] = []
    if desk.first_come:
        first = first_of(desk.line, branch.x)
        for at, lane in lanes.items():
            here = branch.only(first == at)
            if len(here):
                take_first(desk.line, here.x)
                result.append(_served(lane, here))
        return result
    rest = branch
    for unit in desk.order:
        equals = [lane for lane in lanes.values() if lane.unit == unit]
        weights = [rest.x[lane.fresh] for lane in equals]
        if not equals:
            continue
        waits = np.sum(weights, axis=0) > 0
        here, rest = rest.split(waits)
        if len(here):
            for chosen, part in dice.choose(here, [here.x[lane.fresh] for lane in equals]):
                result.append(_served(equals[chosen], part))
        if not len(rest):
            break
    return result


def _served(lane: Lane, branch: Branch) -> Branch:
    branch.x[lane.fresh] -= 1
    branch.x[lane.serve[0]] += 1
    return branch


def _sum(x: Digits, rows: list[int]) -> NDArray[np.int32]:
    return np.asarray(x[rows].sum(axis=0, dtype=np.int32))
