"""The random events of one island: what may happen, at which rate, with which consequences.

One random event stands behind every transition.  Its instant consequences run in a fixed order: fault, draw of
coverage, takeover attempts in rank order, end of outages, the same again in the groups around it, what follows for
repairs, spares and lines (see `following`), and at last the crews (see `crews`).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import partial
from itertools import product

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Apply, Branch, Dice, Event, Exposed, Mode, row_count
from markov.states.clocks import clock_events, staged_flag_events
from markov.states.faults import duty_fault, idle_fault, start_lost
from markov.states.following import follow
from markov.states.layout import Digits, Entry, FaultKind, Layout, Node, Path, Slot, Train, designated, node_of
from markov.states.outage import TIMED_OUTCOMES, end_outage
from markov.states.repair import put_back
from markov.states.restoring import restoration_events
from markov.states.revealing import demand_events
from markov.states.shocks import shock_events
from markov.states.stocks import stock_events
from markov.states.switches import switch_events
from markov.states.takeover import fill_by_rank, return_to_preferred
from markov.states.trains import carry_upward


def island_events(dice: Dice, layout: Layout) -> list[Event]:
    """List the events of an island in a fixed order."""
    events: list[Event] = []
    lane = 0
    paused: Mode = "always" if layout.restoration is None else "system_up"
    for path, slot in layout.paths:
        events.extend(_faults(dice, path, slot))
        for _ in slot.lanes:
            mode = paused if layout.in_system(path[0]) else "always"
            events.extend(_repairs(dice, layout, path, slot, lane, mode))
            lane += 1
    for path in layout.groups:
        events.extend(_switchovers(dice, path))
        events.extend(_outage_ends(dice, path))
        if len(path) == 1:
            events.extend(switch_events(dice, layout, node_of(path[0])))
    events.extend(shock_events(dice, layout))
    events.extend(stock_events(dice, layout))
    events.extend(restoration_events(dice, layout))
    events.extend(demand_events(dice, layout))
    return [replace(event, apply=followed(dice, layout, event.apply)) for event in events]


def followed(dice: Dice, layout: Layout, apply: Apply) -> Apply:
    """Let everything that follows inside the island come after an event, or after what happens at a fixed instant."""
    apply = first = partial(follow, dice, layout, apply)
    for path in reversed(layout.groups):  # what the groups inside do comes first
        node = node_of(path[-1])
        if node.return_to_preferred and not node.active:
            apply = partial(_and_return, dice, path, apply)
    return apply if apply is first else partial(follow, dice, layout, apply)


def _and_return(dice: Dice, path: Path, apply: Apply, branch: Branch) -> list[Branch]:
    """Let duty go back to preferred members after an event."""
    return [done for after in apply(branch) for done in return_to_preferred(dice, path, after)]


# --- faults ----------------------------------------------------------------------------------------------------------


def _faults(dice: Dice, path: Path, slot: Slot) -> Iterator[Event]:
    """Yield the faults of one slot: on duty, waiting, being switched in, each also within trains that wait."""
    if slot.failure is None:
        return
    for kind in slot.faults:
        if kind.hidden >= 0 or not slot.lanes[kind.lane].renewed_at_once:
            yield from _faults_of_kind(dice, path, slot, kind)


def _rate_of(slot: Slot, kind: FaultKind) -> tuple[Factor, ...]:
    """Return the factors of the rate at which an item alone has a fault of a kind, on duty."""
    if slot.failure is None:
        raise AssertionError("an item that never fails has no faults")
    further = tuple(each for each in (slot.pace, kind.alone) if each is not None)
    return (slot.failure, *kind.factors, *further)


def _faults_of_kind(dice: Dice, path: Path, slot: Slot, kind: FaultKind) -> Iterator[Event]:
    node = node_of(path[-1])
    stops: Mode = "system_up" if node.while_down == "stop" else "always"
    base = _rate_of(slot, kind)
    told = f" {kind.label}" if kind.label else ""
    own = () if node.active else _own_standby_factor(node)
    if slot.tested >= 0 and own is not None:
        under = partial(row_count, slot.tested)
        broken = partial(_fails_under_test, slot, kind)
        yield Event(f"{slot.unit} fails{told} under test", stops, dice.table.of(*base, *own), under, broken)
    for idle in product((False, True), repeat=len(path) - 1):
        factors = _standby_factors(path, idle)
        if factors is None:
            continue
        carries = not any(idle)
        matching = partial(_matching, path, idle)
        on_duty = partial(_times, matching, partial(designated, path, slot))
        if carries:
            yield from _duty_faults(dice, path, slot, kind, on_duty)
        else:
            yield Event(
                f"{slot.unit} fails{told} while {node.name} waits",
                stops,
                dice.table.of(*base, *factors),
                on_duty,
                _upward(dice, path, partial(idle_fault, slot, kind, designated=True)),
                is_fault=True,
            )
        own = _own_standby_factor(node)
        if own is None:
            continue
        rate = dice.table.of(*base, *factors, *own)
        waiting = partial(_times, matching, partial(_waiting, path, slot))
        fails = _upward(dice, path, partial(idle_fault, slot, kind))
        yield Event(f"{slot.unit} fails{told} while waiting", stops, rate, waiting, fails, is_fault=True)
        if carries:
            for stage, row in enumerate(slot.start):
                lost = partial(_lost_start, dice, node, slot, kind, stage)
                yield Event(
                    f"{slot.unit} fails{told} while being switched in",
                    stops,
                    rate,
                    partial(row_count, row),
                    _upward(dice, path, lost),
                    is_fault=True,
                )


def _duty_faults(dice: Dice, path: Path, slot: Slot, kind: FaultKind, on_duty: Exposed) -> Iterator[Event]:
    node = node_of(path[-1])
    mode: Mode = "always" if node.while_down == "continue" else "system_up"
    apply = _upward(dice, path, partial(duty_fault, dice, node, slot, kind))
    cause = f"{slot.unit} fails {kind.label} on duty" if kind.label else f"{slot.unit} fails on duty"
    base = _rate_of(slot, kind)
    if node.load:
        last = node.load[-1][0]
        for number, factor in node.load:
            shared = partial(_times, partial(_bearing, node, number, number == last), on_duty)
            rate = dice.table.of(*base, factor)
            yield Event(f"{cause} with {number} on duty", mode, rate, shared, apply, is_fault=True)
    else:
        yield Event(cause, mode, dice.table.of(*base), on_duty, apply, is_fault=True)
    own = _own_standby_factor(node)
    if node.while_down == "standby_rate" and own is not None:
        yield Event(cause, "system_down", dice.table.of(*base, *own), on_duty, apply, is_fault=True)


def _fails_under_test(slot: Slot, kind: FaultKind, branch: Branch) -> list[Branch]:
    """Fail one item that a test has taken out of service."""
    branch.x[slot.tested] -= 1
    if kind.hidden >= 0:
        branch.x[slot.hidden[kind.hidden].held] += 1
    else:
        slot.fail(branch.x, lane=kind.lane)
    return [branch]


def _bearing(node: Node, number: int, or_more: bool, x: Digits) -> NDArray[np.bool_]:
    """Tell where so many members carry duty, shape (m,)."""
    on_duty = node.on_duty(x)
    return np.asarray(on_duty >= number if or_more else on_duty == number)


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


def _lost_start(dice: Dice, node: Node, slot: Slot, kind: FaultKind, stage: int, branch: Branch) -> list[Branch]:
    fallen = idle_fault(slot, kind, branch, stage=stage)
    if kind.hidden >= 0:
        return fallen
    return [done for each in fallen for done in start_lost(dice, node, each)]


# --- repairs ---------------------------------------------------------------------------------------------------------


def _repairs(dice: Dice, layout: Layout, path: Path, slot: Slot, number: int, mode: Mode) -> Iterator[Event]:
    lane = layout.lanes[number]
    of = f"{slot.unit} ({lane.mode})" if lane.mode else slot.unit
    if lane.delays is not None and lane.delay:
        called = partial(_enter, lane.queue_row)
        yield from clock_events(dice, lane.delays, lane.delay, of="logistic delay", ends=of, apply=called)
    if lane.repair is None or lane.stock >= 0 or layout.paused:
        return
    yield from clock_events(
        dice,
        lane.repair,
        lane.working_rows,
        of="repair",
        ends=of,
        apply=_upward(dice, path, partial(_repaired, dice, path, slot, number_in(slot, layout, number))),
        mode=mode,
        crew=number,
    )


def number_in(slot: Slot, layout: Layout, number: int) -> int:
    """Return which lane of the slot a lane of the island is."""
    return slot.lanes.index(layout.lanes[number])


def _repaired(dice: Dice, path: Path, slot: Slot, number: int, branch: Branch) -> list[Branch]:
    """Make one item good whose repair has ended, if the repair succeeds; the item has left its row."""
    lane = slot.lanes[number]
    branch = replace(branch, repaired=slot.name)
    succeeds, fails = dice.draw(branch, lane.success, "", "without success")
    result: list[Branch] = []
    if fails is not None:
        fails.x[lane.working_rows[0]] += 1
        result.append(replace(fails, repaired=""))
    if succeeds is not None:
        result += put_back(dice, path, slot, succeeds)
    return result


# --- what ends by itself ----------------------------------------------------------------------------------------------


def _outage_ends(dice: Dice, path: Path) -> Iterator[Event]:
    node = node_of(path[-1])
    if node.outage >= 0 and node.outcome in TIMED_OUTCOMES and node.outcome_clock is not None:
        yield from staged_flag_events(
            dice,
            node.outcome_clock,
            node.outage,
            cause=f"{node.name}: {node.outcome.replace('_', ' ')} ends the outage",
            apply=_upward(dice, path, partial(end_outage, dice, path)),
        )


def _switchovers(dice: Dice, path: Path) -> Iterator[Event]:
    node = node_of(path[-1])
    if node.takeover is None:
        return
    targets: list[tuple[tuple[int, ...], int, str, Train | None]]
    if node.active:
        targets = [(node.switching, -1, node.name, None)]
    else:
        targets = [(e.start, e.duty, e.unit, e if isinstance(e, Train) else None) for e in node.entries]
    for rows, end, name, train in targets:
        arrives: Apply = partial(_enter, end)
        if train is not None:
            arrives = partial(_train_on_duty, arrives, train)
        for event in clock_events(dice, node.takeover, rows, of="switchover", ends=name, apply=arrives):
            yield replace(event, apply=_upward(dice, path, event.apply))


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


def _times(condition: Callable[[Digits], NDArray[np.bool_]], count: Exposed, x: Digits) -> NDArray[np.int32]:
    return (condition(x) * count(x)).astype(np.int32)


def _enter(row: int, branch: Branch) -> list[Branch]:
    """Let one item enter a row, or none where it is negative."""
    if row >= 0:
        branch.x[row] += 1
    return [branch]
