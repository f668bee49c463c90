"""How an empty duty place is filled: start attempts down the rank, filling by rank, return to a preferred member."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice
from markov.states.layout import Digits, Entry, Node, Path, Slot, Train, node_of, running


def start_one(dice: Dice, node: Node, branch: Branch, *, timed: bool = True) -> list[Branch]:
    """Try the members that seem to wait, in rank order, until one starts or none is left.

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
        able, unable = todo.split(entry.callable(todo.x) > 0)
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
        able, settled = todo.split((empty_places(node, todo.x) > 0) & (node.callable(todo.x) > 0))
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
    started: list[Branch] = []
    refused: list[Branch] = []
    for called, deceptive in _called(dice, entry, branch.counted_start(entry.name)):
        if deceptive is not None:
            row, lane = deceptive
            called.x[row] -= 1
            entry.fail(called.x, lane=lane)
            refused.append(called.told(f"{entry.unit}, failed unnoticed, does not start"))
        elif entry.start_failure is None:
            started.append(called.told(f"{entry.unit} starts"))
        else:
            told = f"{entry.unit} fails to start", f"{entry.unit} starts"
            fails, starts = dice.draw(called, entry.start_failure, *told)
            if fails is not None:
                entry.fail(fails.x)
                refused.append(fails)
            if starts is not None:
                started.append(starts)
    return started, refused


def _called(dice: Dice, slot: Slot, branch: Branch) -> Iterator[tuple[Branch, tuple[int, int] | None]]:
    """Pick one of the items that seem to wait, which all look alike.

    Yields
    ------
    branch, deceptive
        Row and lane of an item that cannot start, though it seems to be good; None for a good one.
    """
    deceptive = [(each.apart, each.lane) for each in slot.hidden]
    if not deceptive:
        yield branch, None
        return
    weights = [slot.waiting(branch.x), *(branch.x[row] for row, _ in deceptive)]
    for number, part in dice.choose(branch, weights):
        yield part, None if number == 0 else deceptive[number - 1]


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
                runs_later |= on_duty_in_appearance(other, todo.x) > 0
            able = runs_later & (entry.callable(todo.x) > 0) & ~node.in_outage(todo.x) & running(path, todo.x)
            if node.switch is not None:
                able &= ~node.switch.failed(todo.x)
            here, todo = todo.split(able)
            if not len(here):
                continue
            started, refused = attempt(dice, entry, here)
            for each in started:
                for swapped in take_last_off(dice, later, each):
                    swapped.x[entry.duty] += 1
                    work.append(swapped.told(f"duty returns to {entry.unit}"))
            work += refused
        if len(todo):
            done.append(todo)
    return done


def take_last_off(dice: Dice, entries: list[Entry], branch: Branch) -> list[Branch]:
    """Let one member of those listed last, of which one seems to be on duty, wait.

    Items of one kind look alike, whether a hidden fault keeps one from delivering or not.
    """
    done: list[Branch] = []
    rest = branch
    for other in reversed(entries):
        here, rest = rest.split(on_duty_in_appearance(other, rest.x) > 0)
        if not len(here):
            continue
        if isinstance(other, Train):
            here.x[other.duty] = 0
            stand_down(other.node, here.x)
            done.append(here)
            continue
        placed = [each for each in other.hidden if each.placed >= 0]
        weights = [here.x[other.duty].copy(), *(here.x[each.placed].copy() for each in placed)]
        for number, part in dice.choose(here, weights):
            if number == 0:
                part.x[other.duty] -= 1
            else:
                part.x[placed[number - 1].placed] -= 1
                part.x[placed[number - 1].apart] += 1
            done.append(part)
    return [*done, rest] if len(rest) else done


def on_duty_in_appearance(entry: Entry, x: Digits) -> NDArray[np.int32]:
    """Count members that seem to carry duty, shape (m,)."""
    count: NDArray[np.int32] = (x[entry.duty] + entry.seeming(x)).astype(np.int32)
    return count


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
            free = np.maximum(node.places - node.on_duty(x) - node.seeming(x), 0)
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
    """Count duty places that are neither filled, or seem so, nor about to be by a start under way, shape (m,)."""
    return (node.places - node.on_duty(x) - node.seeming(x) - node.starting(x)).astype(np.int32)


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


def swap_in(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Start one standby though nothing failed, as a false operation of the switch does.

    If it starts, it fills an empty place, or the member on duty that is listed last waits; if not, nothing changes.
    """
    done: list[Branch] = []
    work = [branch]
    for entry in node.entries:
        rest: list[Branch] = []
        for todo in work:
            able, unable = todo.split(entry.callable(todo.x) > 0)
            if len(unable):
                rest.append(unable)
            if len(able):
                started, refused = attempt(dice, entry, able)
                for each in started:
                    full, open_place = each.split(empty_places(node, each.x) <= 0)
                    swapped = take_last_off(dice, list(node.entries), full) if len(full) else []
                    for one in [*swapped, *([open_place] if len(open_place) else [])]:
                        one.x[entry.duty] += 1
                        done.append(one)
                done += refused
        work = rest
    return done + work
