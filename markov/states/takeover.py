"""How an empty duty place is filled: start attempts down the rank, filling by rank, return to a preferred member."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice
from markov.states.layout import Digits, Entry, Node, Path, Train, node_of, running


def start_one(dice: Dice, node: Node, branch: Branch, *, timed: bool = True) -> list[Branch]:
    """Try the waiting members in rank order until one starts or none is left.

    Every column of `branch` has one empty duty place that is to be filled.  Each attempt is a draw of its own; an item
    that fails to start is failed from that moment.  With `timed` the switchover time, where the group has one, begins
    with the successful start; otherwise the member is on duty at once.
    """
    done: list[Branch] = []
    work = [(branch, 0)]
    while work:
        todo, rank = work.pop()
        if rank == len(node.entries):
            done.append(todo)
            continue
        entry = node.entries[rank]
        able, unable = todo.split(entry.waiting(todo.x) > 0)
        if len(unable):
            work.append((unable, rank + 1))
        if len(able):
            started, refused = attempt(dice, entry, able)
            work.extend((each, rank) for each in refused)
            for each in started:
                each.x[entry.start[0] if timed and entry.start else entry.duty] += 1
                done.append(each)
    return done


def start_all(dice: Dice, node: Node, branch: Branch, *, timed: bool = True) -> list[Branch]:
    """Start as many waiting members as places are empty, each by an attempt of its own, down the rank."""
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        able, settled = todo.split((empty_places(node, todo.x) > 0) & (node.waiting(todo.x) > 0))
        if len(settled):
            done.append(settled)
        if len(able):
            work.extend(start_one(dice, node, able, timed=timed))
    return done


def attempt(dice: Dice, entry: Entry, branch: Branch) -> tuple[list[Branch], list[Branch]]:
    """Draw the start of one waiting member.

    Returns
    -------
    started, refused : list of Branch
        `started` leaves it to the caller where the member goes; in `refused` the item, or what the train needs, has
        failed.
    """
    if isinstance(entry, Train):
        return _start_train(dice, entry, branch)
    branch = branch.counted_start(entry.name)
    if entry.start_failure is None:
        return [branch.told(f"{entry.unit} starts")], []
    refused, started = dice.draw(branch, entry.start_failure, f"{entry.unit} fails to start", f"{entry.unit} starts")
    if refused is not None:
        refused.x[entry.entry_row] += 1
    return [started] if started is not None else [], [refused] if refused is not None else []


def _start_train(dice: Dice, train: Train, branch: Branch) -> tuple[list[Branch], list[Branch]]:
    """Attempt each item that the train puts on duty; the train starts if its criterion then holds."""
    node = train.node
    tried = _start_every_item(dice, node, branch) if node.active else start_all(dice, node, branch, timed=False)
    started: list[Branch] = []
    refused: list[Branch] = []
    for each in tried:
        runs, fails = each.split(node.on_duty(each.x) >= node.required)
        if len(runs):
            started.append(runs)
        if len(fails):
            stand_down(node, fails.x)
            refused.append(fails)
    return started, refused


def _start_every_item(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Attempt every good member of an active train once; what is refused has failed."""
    done = [branch]
    for entry in node.entries:
        tried: list[Branch] = []
        for each in done:
            good = entry.good(each.x)
            for count in np.unique(good).tolist():
                tried += _attempt_each(dice, entry, int(count), each.only(good == count))
        done = tried
    return done


def _attempt_each(dice: Dice, entry: Entry, count: int, branch: Branch) -> list[Branch]:
    done = [branch]
    for _ in range(count):
        tried: list[Branch] = []
        for each in done:
            started, refused = attempt(dice, entry, each)
            if isinstance(entry, Train):
                for one in started:
                    one.x[entry.duty] = 1
            tried += started + refused
        done = tried
    return done


def return_to_preferred(dice: Dice, path: Path, branch: Branch) -> list[Branch]:
    """Switch back to waiting members, in rank order, while a member listed later carries duty.

    Each is a start attempt, with no draw of coverage and no outage; if it fails, the running member stays and the next
    waiting member is tried.  Nothing happens in an outage, or in a group that does not carry duty itself.
    """
    node = node_of(path[-1])
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        for entry in node.entries:
            later = [other for other in node.entries if other.rank > entry.rank]
            runs_later = np.zeros(len(todo), np.bool_)
            for other in later:
                runs_later |= todo.x[other.duty] > 0
            able = runs_later & (entry.waiting(todo.x) > 0) & ~node.in_outage(todo.x) & running(path, todo.x)
            here, todo = todo.split(able)
            if not len(here):
                continue
            started, refused = attempt(dice, entry, here)
            for each in started:
                _swap(entry, later, each.x)
            work += [each.told(f"duty returns to {entry.unit}") for each in started] + refused
        if len(todo):
            done.append(todo)
    return done


def _swap(entry: Entry, later: list[Entry], x: Digits) -> None:
    """Take the member listed last off duty and put `entry` on; in place."""
    open_columns = np.ones(x.shape[1], np.bool_)
    for other in reversed(later):
        here = open_columns & (x[other.duty] > 0)
        x[other.duty] -= here.astype(np.int32)
        if isinstance(other, Train):
            stand_down(other.node, x, here)
        open_columns &= ~here
    x[entry.duty] += 1


def fill_by_rank(node: Node, x: Digits, where: NDArray[np.bool_] | None = None) -> None:
    """Put good members on duty by rank until every duty place is filled, without a start attempt; in place.

    Starts under way are given up: their members are good and take part like any other.  `where` limits the columns.
    """
    here = np.ones(x.shape[1], np.bool_) if where is None else where
    if not node.active:
        for entry in node.entries:
            for row in entry.start:
                x[row][here] = 0
    for entry in node.entries:
        if not node.active:
            free = np.maximum(node.places - node.on_duty(x), 0)
            added = np.where(here, np.minimum(free, entry.waiting(x)), 0).astype(np.int32)
            x[entry.duty] += added
            if isinstance(entry, Train):
                fill_by_rank(entry.node, x, added > 0)
        elif isinstance(entry, Train):
            added = (here & (entry.waiting(x) > 0)).astype(np.int32)
            x[entry.duty] += added
            fill_by_rank(entry.node, x, added > 0)


def stand_down(node: Node, x: Digits, where: NDArray[np.bool_] | None = None) -> None:
    """Let the good members of a group that is taken off duty wait; in place, in the columns told by `where`."""
    here = np.ones(x.shape[1], np.bool_) if where is None else where
    for row in node.switching:
        x[row][here] = 0
    for entry in node.entries:
        rows = entry.start if entry.duty < 0 else (*entry.start, entry.duty)
        for row in rows:
            x[row][here] = 0
        if isinstance(entry, Train):
            stand_down(entry.node, x, where)


def empty_places(node: Node, x: Digits) -> NDArray[np.int32]:
    """Count duty places that are neither filled nor about to be by a start under way, shape (m,)."""
    return (node.places - node.on_duty(x) - node.starting(x)).astype(np.int32)


def release_surplus_start(node: Node, x: Digits) -> None:
    """Send one start under way back to waiting where a filled place left it nothing to fill; in place.

    The start given up is the one listed last, at its earliest stage.
    """
    surplus = empty_places(node, x) < 0
    for entry in reversed(node.entries):
        for row in entry.start:
            here = surplus & (x[row] > 0)
            x[row] -= here.astype(np.int32)
            if isinstance(entry, Train):
                stand_down(entry.node, x, here)
            surplus &= ~here
