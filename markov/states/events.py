"""The random events of one island: what may happen, at which rate, with which consequences.

One random event stands behind every transition.  Its instant consequences run in a fixed order: fault, draw of
coverage, takeover attempts in rank order, end of outages, the same again in the groups around it, and at last the
crews (see `crews`).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import partial
from itertools import product
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Branch, Dice
from markov.states.faults import duty_fault, idle_fault, start_lost
from markov.states.layout import Digits, Entry, Layout, Node, Path, Slot, Train, designated, node_of, running
from markov.states.outage import TIMED_OUTCOMES, end_outage
from markov.states.repair import good_again
from markov.states.takeover import fill_by_rank, return_to_preferred
from markov.states.trains import carry_upward

Mode = Literal["always", "system_up", "system_down"]
Exposed = Callable[[Digits], NDArray[np.int32]]
Apply = Callable[[Branch], list[Branch]]


@dataclass(frozen=True)
class Event:
    """One random event of an island.

    Attributes
    ----------
    cause : str
        First line of the story in the transition table.
    mode : {"always", "system_up", "system_down"}
        In which states of the whole system the event can happen.
    rate : int
        Number of the rate of one item.
    exposed : callable
        Digits -> number of items that may cause the event, shape (m,).
    apply : callable
        Branch -> branches after all consequences inside the island.
    crew : tuple (slot number, stage) or None
        Set where one item under repair causes the event; how many crews work there is known only to the whole chain.
    is_fault : bool
        Whether the event is the fault of a unit.
    """

    cause: str
    mode: Mode
    rate: int
    exposed: Exposed
    apply: Apply
    crew: tuple[int, int] | None = None
    is_fault: bool = False


def island_events(dice: Dice, layout: Layout) -> list[Event]:
    """List the events of an island in a fixed order."""
    events: list[Event] = []
    for number, (path, slot) in enumerate(layout.paths):
        events.extend(_faults(dice, path, slot))
        events.extend(_repairs(dice, path, slot, number))
    for path in layout.groups:
        events.extend(_switchovers(dice, path))
        events.extend(_outage_ends(dice, path))
    for path in reversed(layout.groups):  # what the groups inside do comes first
        node = node_of(path[-1])
        if node.return_to_preferred and not node.active:
            events = [replace(event, apply=partial(_and_return, dice, path, event.apply)) for event in events]
    return events


def _and_return(dice: Dice, path: Path, apply: Apply, branch: Branch) -> list[Branch]:
    """Let duty go back to preferred members after an event."""
    return [done for after in apply(branch) for done in return_to_preferred(dice, path, after)]


# --- faults ----------------------------------------------------------------------------------------------------------


def _faults(dice: Dice, path: Path, slot: Slot) -> Iterator[Event]:
    """Yield the faults of one slot: on duty, waiting, being switched in, each also within trains that wait."""
    if slot.failure is None:
        return
    node = node_of(path[-1])
    stops: Mode = "system_up" if node.while_down == "stop" else "always"
    for idle in product((False, True), repeat=len(path) - 1):
        factors = _standby_factors(path, idle)
        if factors is None:
            continue
        carries = not any(idle)
        matching = partial(_matching, path, idle)
        on_duty = partial(_times, matching, partial(designated, path, slot))
        if carries:
            yield from _duty_faults(dice, path, slot, on_duty)
        else:
            yield Event(
                f"{slot.unit} fails while {node.name} waits",
                stops,
                dice.table.of(slot.failure, *factors),
                on_duty,
                _upward(dice, path, partial(idle_fault, slot, designated=True)),
                is_fault=True,
            )
        own = _own_standby_factor(node)
        if own is None:
            continue
        rate = dice.table.of(slot.failure, *factors, *own)
        waiting = partial(_times, matching, partial(_waiting, path, slot))
        fails = _upward(dice, path, partial(idle_fault, slot))
        yield Event(f"{slot.unit} fails while waiting", stops, rate, waiting, fails, is_fault=True)
        if carries:
            for stage, row in enumerate(slot.start):
                lost = partial(_lost_start, dice, node, slot, stage)
                yield Event(
                    f"{slot.unit} fails while being switched in",
                    stops,
                    rate,
                    partial(_row, row),
                    _upward(dice, path, lost),
                    is_fault=True,
                )


def _duty_faults(dice: Dice, path: Path, slot: Slot, on_duty: Exposed) -> Iterator[Event]:
    if slot.failure is None:
        raise AssertionError("an item that never fails has no duty faults")
    node = node_of(path[-1])
    mode: Mode = "always" if node.while_down == "continue" else "system_up"
    apply = _upward(dice, path, partial(duty_fault, dice, node, slot))
    cause = f"{slot.unit} fails on duty"
    yield Event(cause, mode, dice.table.of(slot.failure), on_duty, apply, is_fault=True)
    own = _own_standby_factor(node)
    if node.while_down == "standby_rate" and own is not None:
        yield Event(cause, "system_down", dice.table.of(slot.failure, *own), on_duty, apply, is_fault=True)


def _own_standby_factor(node: Node) -> tuple[Factor, ...] | None:
    """Return the factors of a waiting member's rate; None where it cannot fail or never waits."""
    if node.cold or node.active:
        return None
    return () if node.standby_factor is None else (node.standby_factor,)


def _standby_factors(path: Path, idle: tuple[bool, ...]) -> tuple[Factor, ...] | None:
    """Return the dormancy factors of the trains that wait, multiplied down the nesting; None where one is cold."""
    factors: list[Factor] = []
    for step, waits in enumerate(idle):
        if waits:
            own = _own_standby_factor(node_of(path[step]))
            if own is None:
                return None
            factors.extend(own)
    return tuple(factors)


def _matching(path: Path, idle: tuple[bool, ...], x: Digits) -> NDArray[np.bool_]:
    """Tell where exactly the trains marked in `idle` wait, seen from the group around each, shape (m,)."""
    result = np.ones(x.shape[1], np.bool_)
    for step, waits in enumerate(idle):
        train = path[step + 1]
        if not isinstance(train, Train):
            raise AssertionError("below the top level every step of a path is a train")
        chosen = _stands_where_duty_is(path[: step + 1], train, x)
        result &= ~chosen if waits else chosen
    return result


def _stands_where_duty_is(path: Path, train: Train, x: Digits) -> NDArray[np.bool_]:
    """Tell where a train carries duty, or would; one that has lost its criterion waits, except in an active group."""
    if node_of(path[-1]).active:
        return np.ones(x.shape[1], np.bool_)
    return np.asarray(designated(path, train, x) > 0)


def _waiting(path: Path, entry: Entry, x: Digits) -> NDArray[np.int32]:
    return (entry.good(x) - designated(path, entry, x) - entry.starting(x)).astype(np.int32)


def _lost_start(dice: Dice, node: Node, slot: Slot, stage: int, branch: Branch) -> list[Branch]:
    return [done for fallen in idle_fault(slot, branch, stage=stage) for done in start_lost(dice, node, fallen)]


# --- repairs ---------------------------------------------------------------------------------------------------------


def _repairs(dice: Dice, path: Path, slot: Slot, number: int) -> Iterator[Event]:
    if slot.repair is None:
        return
    if slot.logistic_delay is not None:
        yield Event(
            f"logistic delay of {slot.unit} ends",
            "always",
            dice.table.of(slot.logistic_delay),
            partial(_row, slot.delay),
            partial(_move, slot.delay, slot.queue_row),
        )
    rows = slot.serve if slot.explicit_queue else slot.down
    rate = dice.table.of(slot.repair)
    for stage, row in enumerate(rows):
        final = stage == len(rows) - 1
        if final:
            apply = _upward(dice, path, partial(_repaired, dice, path, slot, row))
        else:
            apply = partial(_move, row, rows[stage + 1])
        cause = f"repair of {slot.unit} ends" if final else f"repair stage {stage + 1} of {slot.unit} ends"
        yield Event(cause, "always", rate, partial(_row, row), apply, (number, stage))


def _repaired(dice: Dice, path: Path, slot: Slot, row: int, branch: Branch) -> list[Branch]:
    """Make one item good whose last repair stage in `row` has ended."""
    branch = replace(branch, repaired=slot.name)
    branch.x[row] -= 1
    node = node_of(path[-1])
    runs, idle = branch.split(running(path, branch.x))
    result: list[Branch] = []
    for part, carries in ((runs, True), (idle, False)):
        if len(part):
            result.extend(good_again(dice, node, slot, part, carries=carries))
    return result


# --- what ends by itself ----------------------------------------------------------------------------------------------


def _outage_ends(dice: Dice, path: Path) -> Iterator[Event]:
    node = node_of(path[-1])
    if node.outage >= 0 and node.outcome in TIMED_OUTCOMES and node.outcome_rate is not None:
        yield Event(
            f"{node.name}: {node.outcome.replace('_', ' ')} ends the outage",
            "always",
            dice.table.of(node.outcome_rate),
            partial(_row, node.outage),
            _upward(dice, path, partial(end_outage, dice, path)),
        )


def _switchovers(dice: Dice, path: Path) -> Iterator[Event]:
    node = node_of(path[-1])
    if node.takeover_rate is None:
        return
    rate = dice.table.of(node.takeover_rate)
    targets: list[tuple[tuple[int, ...], int, str, Train | None]]
    if node.active:
        targets = [(node.switching, -1, node.name, None)]
    else:
        targets = [(e.start, e.duty, e.unit, e if isinstance(e, Train) else None) for e in node.entries]
    for rows, end, name, train in targets:
        for stage, row in enumerate(rows):
            final = stage == len(rows) - 1
            cause = f"switchover of {name} ends" if final else f"switchover stage {stage + 1} of {name} ends"
            step: Apply = partial(_move, row, end if final else rows[stage + 1])
            if final and train is not None:
                step = partial(_train_on_duty, step, train)
            yield Event(cause, "always", rate, partial(_row, row), _upward(dice, path, step))


def _train_on_duty(step: Apply, train: Train, branch: Branch) -> list[Branch]:
    """Put a train on duty after its switchover; places that emptied meanwhile are filled by rank."""
    done = step(branch)
    for each in done:
        fill_by_rank(train.node, each.x)
    return done


# --- small steps ---------------------------------------------------------------------------------------------------


def _upward(dice: Dice, path: Path, apply: Apply) -> Apply:
    """Let the groups around a group answer what an event did inside it."""
    if len(path) == 1:
        return apply

    def both(branch: Branch) -> list[Branch]:
        return carry_upward(dice, path, apply(branch))

    return both


def _row(row: int, x: Digits) -> NDArray[np.int32]:
    return np.asarray(x[row])


def _times(condition: Callable[[Digits], NDArray[np.bool_]], count: Exposed, x: Digits) -> NDArray[np.int32]:
    return (condition(x) * count(x)).astype(np.int32)


def _move(source: int, target: int, branch: Branch) -> list[Branch]:
    """Move one item from a row to another, or out of all rows where `target` is negative."""
    branch.x[source] -= 1
    if target >= 0:
        branch.x[target] += 1
    return [branch]
