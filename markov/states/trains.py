"""How a change inside a train reaches the group that the train is a member of."""

from __future__ import annotations

from collections.abc import Callable

from markov.states.branching import Branch, Dice
from markov.states.faults import place_emptied, start_lost
from markov.states.layout import Node, Path, Train, node_of, running
from markov.states.repair import good_again
from markov.states.takeover import stand_down

_Answer = Callable[[Dice, Node, Branch], list[Branch]]


def carry_upward(dice: Dice, path: Path, branches: list[Branch]) -> list[Branch]:
    """Tell every group on the way up what became of its train, from the innermost to the top level.

    A train on duty that loses its criterion is a duty fault of its parent, and its good items then wait; a train that
    loses it while being switched in is a lost start; a train that can hold it again is good again.
    """
    for depth in range(len(path) - 1, 0, -1):
        train = path[depth]
        if not isinstance(train, Train):
            raise AssertionError("below the top level every step of a path is a train")
        branches = [done for branch in branches for done in _tell_parent(dice, path[:depth], train, branch)]
    return branches


def _tell_parent(dice: Dice, parents: Path, train: Train, branch: Branch) -> list[Branch]:
    parent = node_of(parents[-1])
    good = train.good(branch.x) > 0
    lost, branch = branch.split((branch.x[train.duty] > 0) & ~good)
    dropped, branch = branch.split((train.starting(branch.x) > 0) & ~(train.good(branch.x) > 0))
    fresh = (train.good(branch.x) > 0) & (train.good(branch.before) == 0) & (branch.x[train.duty] == 0)
    recovered, rest = branch.split(fresh)
    result = [rest] if len(rest) else []
    if len(lost):
        lost.x[train.duty] = 0
        stand_down(train.node, lost.x)
        result += _if_running(dice, parents, parent, lost.told(f"{train.unit} is lost"), place_emptied)
    if len(dropped):
        for row in train.start:
            dropped.x[row] = 0
        stand_down(train.node, dropped.x)
        result += _if_running(dice, parents, parent, dropped.told(f"{train.unit} is lost"), start_lost)
    if len(recovered):
        for part, carries in _by_running(parents, recovered):
            result += good_again(dice, parent, train, part, carries=carries)
    return result


def _if_running(dice: Dice, parents: Path, parent: Node, branch: Branch, answer: _Answer) -> list[Branch]:
    result: list[Branch] = []
    for part, carries in _by_running(parents, branch):
        result += answer(dice, parent, part) if carries else [part]
    return result


def _by_running(path: Path, branch: Branch) -> list[tuple[Branch, bool]]:
    runs, idle = branch.split(running(path, branch.x))
    return [(part, carries) for part, carries in ((runs, True), (idle, False)) if len(part)]
