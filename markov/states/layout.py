"""Where each count of a group's state stands: the rows of its digit matrix.

The state of an island (groups of the top level, or units that the system names directly, that only crews connect with
the rest) is a column of small whole numbers.  A `Slot` (the items of one kind in one group) owns the rows that count
its items by condition; a `Node` (one group) owns its slots and the rows for an uncovered outage, for switchovers under
way and for its switch; a `Stock` owns the rows of a pool of spares, a `Desk` the line before a crew pool that serves
in the order of arrival.  Items of one kind are counted, never told apart.

Conditions of an item, and the rows that count them:

============== =======================================================================================
``deferred``   failed and known to be, repair not released yet
``delay``      logistic delay runs, by finished stages; no crew called yet
``down``       crew called, by finished repair stages; whether a crew is there follows from the counts
``fresh``      waiting for a crew, repair never begun            (only where the queue must be told apart)
``held``       waiting after a preemption, by finished stages    (only where the queue must be told apart)
``serve``      a crew at work, by finished stages                (only where the queue must be told apart)
``short``      waiting for a spare                               (only with spares)
``swap``       being exchanged, by finished stages               (only with spares)
``duty``       carries duty                                      (standby groups)
``start``      switchover under way, by finished stages          (standby groups with a switchover time)
``apart``      hidden fault of a class, off duty
``placed``     hidden fault of a class, in a duty place that seems filled     (standby groups)
``held``       hidden fault of a class, under a test that takes units out of service
``tested``     good, under a test that takes units out of service
============== =======================================================================================

The first eight belong to a `Lane`, one way of being known to be failed; `apart` and `placed` to a `Hidden`, one class
of hidden faults (good items that a test left out of service, unnoticed, are one such class).  Items in none of these
rows are good: on duty in an active group, waiting in a standby group.

A member may be a group itself (a `Train`).  It owns a ``duty`` row and ``start`` rows in its parent like an item; it is
good while its own criterion holds.  While it waits, none of its items is in a ``duty`` row of its own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.model import Success, names
from markov.rates import Factor
from markov.states.structure import structure

Digits = NDArray[np.int32]
"""Digit matrix, shape (rows, m): one column a state."""


@dataclass(frozen=True)
class Clock:
    """A random time that passes in stages; see `markov.states.clocks`.

    Attributes
    ----------
    rates : tuple of Factor
        Rate of each stage.
    exits : tuple of Factor or None
        Chance that the time ends after the stage though more stages follow; None where it never does.
    """

    rates: tuple[Factor, ...]
    exits: tuple[Factor | None, ...]

    @property
    def stages(self) -> int:
        """Number of stages."""
        return len(self.rates)


@dataclass(frozen=True)
class Ordering:
    """Where spares are ordered: rows that count faults, or draws, towards a batch, and open orders."""

    counted: int  # negative where every one is ordered by itself
    orders: int
    batch: int
    most: int

    def order(self, x: Digits, number: NDArray[np.int32] | int) -> None:
        """Order for so many faults, or draws; in place."""
        if self.counted < 0:
            placed = x[self.orders] + number
        else:
            counted = x[self.counted] + number
            placed = x[self.orders] + counted // self.batch
            x[self.counted] = counted % self.batch
        x[self.orders] = np.minimum(placed, self.most)


@dataclass(frozen=True)
class Lane:
    """One way in which an item is known to be failed, and how it is put right."""

    unit: str
    name: str  # ``group.unit``, or the unit alone where it is its own group
    mode: str  # failure mode, where several lanes tell modes apart
    needless: bool  # the item acts needlessly
    repair: Clock | None  # None: never repaired
    success: Factor | None  # chance that a repair succeeds; None: always
    delays: Clock | None
    swap_clock: Clock | None
    renewed_at_once: bool
    explicit_queue: bool
    preemptible: bool
    desk: int = -1
    stock: int = -1
    ordering: Ordering | None = None
    deferred: int = -1
    delay: tuple[int, ...] = ()
    down: tuple[int, ...] = ()
    fresh: int = -1
    held: tuple[int, ...] = ()
    serve: tuple[int, ...] = ()
    short: int = -1
    swap: tuple[int, ...] = ()

    @property
    def rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of items known to be failed in this way."""
        single = tuple(row for row in (self.deferred, self.fresh, self.short) if row >= 0)
        return single + self.delay + self.down + self.held + self.serve + self.swap

    @property
    def released_rows(self) -> tuple[int, ...]:
        """Rows of items whose repair has been released."""
        return tuple(row for row in self.rows if row != self.deferred)

    @property
    def queue_row(self) -> int:
        """Row that an item enters when it calls for a crew, or for a spare."""
        if self.stock >= 0:
            return self.short
        return self.fresh if self.explicit_queue else self.down[0]

    @property
    def released_row(self) -> int:
        """Row that an item enters when its repair is released."""
        return self.delay[0] if self.delay else self.queue_row

    @property
    def entry_row(self) -> int:
        """Row that an item enters when it is known to have failed."""
        return self.deferred if self.deferred >= 0 else self.released_row

    @property
    def working_rows(self) -> tuple[int, ...]:
        """Rows of items under repair, or calling for it, by finished stages."""
        return self.serve if self.explicit_queue else self.down

    def fail(self, x: Digits, number: NDArray[np.int32] | int = 1) -> None:
        """Let items enter the lane, ordering spares where faults do; in place."""
        x[self.entry_row] += number
        if self.ordering is not None:
            self.ordering.order(x, number)

    def calling(self, x: Digits) -> Digits:
        """Count items that wait for a crew or have one, shape (m,)."""
        if self.stock >= 0:
            return np.zeros(x.shape[1], np.int32)
        rows = (self.fresh,) if self.fresh >= 0 else ()
        return total(x, rows + self.down + self.held + self.serve)


@dataclass(frozen=True)
class Hidden:
    """A class of hidden faults: those that the same tests find."""

    label: str
    lane: int
    needless: bool
    found_by: frozenset[str]  # tests
    by_demand: bool
    by_system_failure: bool
    returns: bool = False  # good, yet left out of service by a test: back at once when found
    apart: int = -1
    placed: int = -1
    held: int = -1

    @property
    def rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of hidden faults of this class."""
        return tuple(row for row in (self.apart, self.placed, self.held) if row >= 0)


@dataclass(frozen=True)
class FaultKind:
    """One kind of fault: a share of the failure rate, and where it leads."""

    label: str  # added to the cause; empty for the ordinary one
    factors: tuple[Factor, ...]  # shares of the failure rate
    lane: int = 0
    hidden: int = -1  # class of hidden fault; negative: detected
    alone: Factor | None = None  # share of the rate that strikes no other item; None: all of it


@dataclass(frozen=True)
class Slot:
    """The items of one kind in one group, with their rates and the rows that count them."""

    unit: str
    group: str
    rank: int
    count: int
    failure: Factor | None  # None: never fails (rate zero, or renewed at once)
    pace: Factor | None  # rate factor of the phase
    start_failure: Factor | None  # None: every start succeeds
    capacity: Factor | None  # None: 1/required of the group
    faults: tuple[FaultKind, ...]
    lanes: tuple[Lane, ...] = ()
    hidden: tuple[Hidden, ...] = ()
    tested: int = -1
    bypass: bool = False  # while tested, the group needs as many units fewer
    duty: int = -1
    start: tuple[int, ...] = ()

    @property
    def name(self) -> str:
        """Return ``group.unit``, or the unit alone where it is its own group."""
        return self.unit if self.unit == self.group else f"{self.group}.{self.unit}"

    @property
    def repair(self) -> Clock | None:
        """Repair of an ordinary fault; None where it is never repaired."""
        return self.lanes[0].repair

    @property
    def renewed_at_once(self) -> bool:
        """Whether a known fault is put right at once, so that no state is entered."""
        return self.lanes[0].renewed_at_once

    @property
    def known_rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of items known to be failed."""
        return tuple(row for lane in self.lanes for row in lane.rows)

    @property
    def failed_rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of failed items, hidden faults included."""
        return self.known_rows + tuple(row for each in self.hidden if not each.returns for row in each.rows)

    @property
    def out_rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of items that are failed, or left out of service."""
        return self.known_rows + tuple(row for each in self.hidden for row in each.rows)

    def fail(self, x: Digits, number: NDArray[np.int32] | int = 1, lane: int = 0) -> None:
        """Let items be known to be failed; in place.  What is renewed at once stays good."""
        if not self.lanes[lane].renewed_at_once:
            self.lanes[lane].fail(x, number)

    def failed(self, x: Digits) -> Digits:
        """Count failed items, hidden faults included, shape (m,)."""
        return total(x, self.failed_rows)

    def known(self, x: Digits) -> Digits:
        """Count items known to be failed, shape (m,)."""
        return total(x, self.known_rows)

    def sound(self, x: Digits) -> Digits:
        """Count items that are neither failed nor left out of service, under test or not, shape (m,)."""
        return np.subtract(self.count, total(x, self.out_rows), dtype=np.int32)

    def good(self, x: Digits) -> Digits:
        """Count items that could deliver, shape (m,)."""
        sound = self.sound(x)
        return sound if self.tested < 0 else (sound - x[self.tested]).astype(np.int32)

    def under_test(self, x: Digits) -> Digits:
        """Count items that a test takes out of service, shape (m,)."""
        rows = (self.tested, *(each.held for each in self.hidden))
        return total(x, tuple(row for row in rows if row >= 0))

    def acting(self, x: Digits) -> Digits:
        """Count items that act needlessly, shape (m,)."""
        rows = [row for lane in self.lanes if lane.needless for row in lane.rows]
        rows += [row for each in self.hidden if each.needless for row in each.rows]
        return total(x, tuple(rows))

    def starting(self, x: Digits) -> Digits:
        """Count items whose switchover is under way, shape (m,)."""
        return total(x, self.start)

    def waiting(self, x: Digits) -> Digits:
        """Count good items that neither carry duty nor are being started, shape (m,); standby groups only."""
        waiting: Digits = np.subtract(self.good(x), x[self.duty] + self.starting(x), dtype=np.int32)
        return waiting

    def seeming(self, x: Digits) -> Digits:
        """Count items in duty places that seem filled, though a hidden fault empties them, shape (m,)."""
        return total(x, tuple(each.placed for each in self.hidden if each.placed >= 0))

    def deceptive(self, x: Digits) -> Digits:
        """Count items that seem to wait, though a hidden fault keeps them from starting, shape (m,)."""
        return total(x, tuple(each.apart for each in self.hidden))

    def callable(self, x: Digits) -> Digits:
        """Count items that seem to wait, shape (m,); standby groups only."""
        if not self.hidden:
            return self.waiting(x)
        return (self.waiting(x) + self.deceptive(x)).astype(np.int32)

    def calling(self, x: Digits) -> Digits:
        """Count items that wait for a crew or have one, shape (m,)."""
        result = self.lanes[0].calling(x)
        for lane in self.lanes[1:]:
            result = (result + lane.calling(x)).astype(np.int32)
        return result


@dataclass(frozen=True)
class Train:
    """A group that is a member of another group: one item of its parent, good while its own criterion holds."""

    node: Node
    rank: int
    duty: int = -1
    start: tuple[int, ...] = ()
    count: int = 1

    @property
    def unit(self) -> str:
        """Name, as an item of the parent."""
        return self.node.name

    @property
    def start_rows(self) -> tuple[int, ...]:
        """Rows that count switchovers under way; empty where there are none."""
        return self.start

    def good(self, x: Digits) -> Digits:
        """Tell where the train's own criterion holds: carried out on duty, possible while it waits; shape (m,)."""
        node = self.node
        able = (node.good(x) >= node.required) & ~node.in_outage(x) & ~node.switching_now(x)
        return np.asarray(np.where(x[self.duty] > 0, node.delivers(x), able), np.int32)

    def failed(self, x: Digits) -> Digits:
        """Tell where the criterion is lost, shape (m,)."""
        return (1 - self.good(x)).astype(np.int32)

    def known(self, x: Digits) -> Digits:
        """Tell where the criterion is known to be lost, shape (m,)."""
        return self.failed(x)

    def acting(self, x: Digits) -> Digits:
        """Tell where the train acts needlessly, shape (m,)."""
        return self.node.acts(x).astype(np.int32)

    def seeming(self, x: Digits) -> Digits:
        """Return zeros: a train knows its faults, shape (m,)."""
        return np.zeros(x.shape[1], np.int32)

    def starting(self, x: Digits) -> Digits:
        """Tell where the switchover to the train is under way, shape (m,)."""
        return total(x, self.start)

    def waiting(self, x: Digits) -> Digits:
        """Tell where the train is good, off duty and not being switched in, shape (m,)."""
        idle = (x[self.duty] == 0) & (self.starting(x) == 0)
        return np.where(idle, self.good(x), 0).astype(np.int32)

    def callable(self, x: Digits) -> Digits:
        """Tell where the train seems to wait, shape (m,)."""
        return self.waiting(x)


Entry = Slot | Train


@dataclass(frozen=True)
class Switch:
    """The switch of a group: how it can refuse, fail and act by itself, and the rows that tell its condition."""

    refusal: Factor | None
    failure: Factor | None
    latent: bool
    repair: Clock | None  # None: a refusal leaves it as it was, a failure is for good
    false_operation: Factor | None
    found_by: frozenset[str]  # tests
    down: tuple[int, ...] = ()  # known to be failed, by finished stages of its repair
    hidden: int = -1

    def failed(self, x: Digits) -> NDArray[np.bool_]:
        """Tell where the switch is failed, known or hidden, shape (m,)."""
        rows = self.down if self.hidden < 0 else (*self.down, self.hidden)
        return total(x, rows) > 0


@dataclass(frozen=True)
class Node:
    """One group: its members in rank order, its rules and the rows for what belongs to the group as a whole."""

    name: str
    required: int
    places: int
    active: bool
    standby_factor: Factor | None  # rate of a waiting item over its duty rate; None with hot (1) or cold (0)
    cold: bool
    coverage: tuple[Factor, ...]
    outcome: str
    outcome_clock: Clock | None
    takeover: Clock | None  # None: at once
    return_to_preferred: bool
    start_again: bool
    while_down: str
    load: tuple[tuple[int, Factor], ...] = ()  # units on duty -> rate factor, from one unit on
    release: str | int = "at_once"  # when repair begins: at_once, system_down, visits, or a number of failed units
    offline: bool = False  # repair stops the group
    crews_rest: bool = False  # in this phase
    entries: tuple[Entry, ...] = ()
    outage: int = -1  # 1 + finished stages of an outcome that takes time
    switching: tuple[int, ...] = ()
    switch: Switch | None = None

    def good(self, x: Digits) -> Digits:
        """Count good members of the group, shape (m,)."""
        return _sum([entry.good(x) for entry in self.entries], x)

    def failed(self, x: Digits) -> Digits:
        """Count failed members of the group, shape (m,)."""
        return _sum([entry.failed(x) for entry in self.entries], x)

    def known(self, x: Digits) -> Digits:
        """Count members known to be failed, shape (m,)."""
        return _sum([entry.known(x) for entry in self.entries], x)

    def seeming(self, x: Digits) -> Digits:
        """Count duty places that seem filled, though a hidden fault empties them, shape (m,)."""
        return _sum([entry.seeming(x) for entry in self.entries], x)

    def acts(self, x: Digits) -> NDArray[np.bool_]:
        """Tell where the group acts needlessly: `required` members do, shape (m,)."""
        return np.asarray(_sum([entry.acting(x) for entry in self.entries], x) >= self.required)

    def needed(self, x: Digits) -> NDArray[np.int32] | int:
        """Return how many members the function needs; fewer while a test bypasses some, shape (m,) or one number."""
        needed: NDArray[np.int32] | int = self.required
        for entry in self.entries:
            if isinstance(entry, Slot) and entry.bypass and entry.tested >= 0:
                needed = needed - entry.under_test(x)
        return np.maximum(needed, 0) if isinstance(needed, np.ndarray) else needed

    def stopped(self, x: Digits) -> NDArray[np.bool_]:
        """Tell where a repair under way keeps the group from delivering, shape (m,)."""
        result = np.zeros(x.shape[1], np.bool_)
        for entry in self.entries if self.offline else ():
            if isinstance(entry, Slot):
                for lane in entry.lanes:
                    if lane.repair is not None or lane.swap:
                        result |= total(x, lane.swap if self.crews_rest else lane.working_rows + lane.swap) > 0
        return result

    def on_duty(self, x: Digits) -> Digits:
        """Count members that carry duty, shape (m,); in an active group every good one."""
        if self.active:
            return self.good(x)
        return _sum([x[entry.duty] for entry in self.entries], x)

    def starting(self, x: Digits) -> Digits:
        """Count members whose switchover is under way, shape (m,)."""
        return _sum([entry.starting(x) for entry in self.entries], x)

    def waiting(self, x: Digits) -> Digits:
        """Count good members that wait to be called, shape (m,); zero in an active group."""
        if self.active:
            return np.zeros(x.shape[1], np.int32)
        return _sum([entry.waiting(x) for entry in self.entries], x)

    def callable(self, x: Digits) -> Digits:
        """Count members that seem to wait to be called, shape (m,); zero in an active group."""
        if self.active:
            return np.zeros(x.shape[1], np.int32)
        return _sum([entry.callable(x) for entry in self.entries], x)

    def in_outage(self, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states an uncovered outage lasts, shape (m,)."""
        if self.outage < 0:
            return np.zeros(x.shape[1], np.bool_)
        return np.asarray(x[self.outage] > 0)

    def switching_now(self, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states an active group waits for a switchover, shape (m,)."""
        return total(x, self.switching) > 0

    def delivers(self, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states the group delivers, shape (m,)."""
        enough = np.asarray(self.on_duty(x) >= self.needed(x)) & ~self.stopped(x)
        if self.has_needless:
            enough &= ~self.acts(x)
        if self.active:
            return enough & ~self.in_outage(x) & ~self.switching_now(x)
        if self.outcome == "lost":
            return enough & ~self.in_outage(x)
        return enough

    @cached_property
    def has_needless(self) -> bool:
        """Whether any item can act needlessly."""
        return any(
            entry.node.has_needless if isinstance(entry, Train) else any(lane.needless for lane in entry.lanes)
            for entry in self.entries
        )


Path = tuple[Node | Train, ...]
"""The way from the group of the top level (a Node) down to a group inside it (Trains)."""


def node_of(step: Node | Train) -> Node:
    """Return the group at one step of a path."""
    return step.node if isinstance(step, Train) else step


def running(path: Path, x: Digits) -> NDArray[np.bool_]:
    """Tell where the group at the end of a path carries duty: every train on the way is on duty, shape (m,)."""
    result = np.ones(x.shape[1], np.bool_)
    for step in path:
        if isinstance(step, Train):
            result &= x[step.duty] > 0
    return result


def designated(path: Path, entry: Entry, x: Digits) -> Digits:
    """Count the items of an entry that carry duty, or would if their group, which waits itself, were put on duty.

    Parameters
    ----------
    path : Path
        The way to the group that the entry is a member of.
    """
    node = node_of(path[-1])
    if node.active:
        return entry.good(x)
    placed = running(path, x) | (node.on_duty(x) > 0)  # also a train that is being switched in
    before = _sum([other.good(x) for other in node.entries if other.rank < entry.rank], x)
    by_rank = np.clip(node.places - before, 0, entry.good(x))
    return np.where(placed, x[entry.duty], by_rank).astype(np.int32)


@dataclass(frozen=True)
class Stock:
    """A pool of spares, with the rows of what is on the shelf, on order and under repair."""

    name: str
    stock: int
    kinds: tuple[str, ...]
    lead: Clock
    batch: int
    when_failed: bool
    ordering: Ordering
    shelf: int = -1
    orders: tuple[int, ...] = ()
    line: tuple[int, ...] = ()  # 1 + number of the lane that waits at each place, the longest-waiting first
    removed: tuple[Lane, ...] = ()  # removed units under repair, one lane a kind that is repaired


@dataclass(frozen=True)
class Desk:
    """A crew pool whose crews finish what they have begun: who is next depends on arrival, or on priority alone."""

    name: str
    size: int
    first_come: bool
    order: tuple[str, ...]
    line: tuple[int, ...] = ()  # 1 + number of the lane that waits at each place, the longest-waiting first


@dataclass(frozen=True)
class Shock:
    """One common cause: named sets of items that fail together.

    Attributes
    ----------
    name : str
    slots : tuple of (int, int)
        Numbers of the node and of its entry, for every slot whose items are members.
    sizes : tuple of (int, Factor)
        Number of items of a set, and the share of the failure rate that strikes each set of that size.
    base : Factor
        Failure rate that the shares are taken of.
    on_duty_only : bool
    sizes_hidden : tuple of (int, Factor), optional
        The same for hidden faults, where they have shares of their own.
    """

    name: str
    slots: tuple[tuple[int, int], ...]
    base: Factor
    sizes: tuple[tuple[int, Factor], ...]
    on_duty_only: bool
    sizes_hidden: tuple[tuple[int, Factor], ...] | None = None


@dataclass(frozen=True)
class Layout:
    """The rows of one island: its nodes, the largest value of each row and a short label of each row."""

    nodes: tuple[Node, ...]
    tops: tuple[int, ...]
    labels: tuple[str, ...]
    stocks: tuple[Stock, ...] = ()
    desks: tuple[Desk, ...] = ()
    shocks: tuple[Shock, ...] = ()
    success: Success | None = None  # where the whole system stands in this island
    restoration: Factor | None = None
    demand: Factor | None = None
    paused: bool = False  # crews and restoration rest in this phase

    @property
    def name(self) -> str:
        """Name of the island: that of its group or unit, or those of all of them."""
        return " + ".join(node.name for node in self.nodes)

    def node_named(self, name: str) -> Node | None:
        """Return the node of the top level of that name; None where it is not here."""
        return next((node for node in self.nodes if node.name == name), None)

    def top_of(self, slot: Slot) -> str:
        """Return the name of the node of the top level that a slot stands in."""
        return next(node_of(path[0]).name for path, each in self.paths if each is slot)

    @cached_property
    def paths(self) -> tuple[tuple[Path, Slot], ...]:
        """All slots of the island, each with the way to its group, outer members first."""
        return tuple(each for node in self.nodes for each in _paths((node,)))

    @cached_property
    def slots(self) -> tuple[Slot, ...]:
        """All slots of the island, in the order of `paths`."""
        return tuple(slot for _, slot in self.paths)

    @cached_property
    def lanes(self) -> tuple[Lane, ...]:
        """All lanes of the island: those of the slots in the order of `paths`, then those of removed units."""
        lanes = [lane for slot in self.slots for lane in slot.lanes]
        return (*lanes, *(lane for stock in self.stocks for lane in stock.removed))

    @cached_property
    def groups(self) -> tuple[Path, ...]:
        """The way to every group of the island, the innermost last."""
        return tuple(path for node in self.nodes for path in _groups((node,)))

    @property
    def heeds_the_system(self) -> bool:
        """Whether anything here depends on whether the system is down."""
        return self.restoration is not None or any(node_of(path[-1]).while_down != "continue" for path in self.groups)

    def in_system(self, step: Node | Train) -> bool:
        """Tell whether a node of the top level belongs to the system; asked where all of the system is here."""
        return self.success is not None and node_of(step).name in names(self.success)

    def up(self, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states the system delivers, shape (m,); asked where all of the system is here."""
        if self.success is None:
            raise AssertionError("the system is spread over several islands")
        up = structure(self.success, lambda name: self.delivers(name, x))
        if any(node.has_needless for node in self.nodes):
            up &= ~structure(self.success, lambda name: self.acts(name, x))
        return up

    def acts(self, name: str, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states a node of the top level acts needlessly, shape (m,)."""
        node = self.node_named(name)
        if node is None:
            raise AssertionError(f"{name} is not in this island")
        return node.acts(x)

    def delivers(self, name: str, x: Digits) -> NDArray[np.bool_]:
        """Tell in which states a node of the top level delivers, shape (m,)."""
        node = self.node_named(name)
        if node is None:
            raise AssertionError(f"{name} is not in this island")
        return node.delivers(x)

    def strides(self) -> NDArray[np.int64] | None:
        """Return the weights that turn a column of digits into one 64-bit number, shape (rows,); None beyond that."""
        strides = np.ones(len(self.tops), np.int64)
        size = 1
        for row, top in enumerate(self.tops):
            strides[row] = size
            size *= top + 1
            if size > 2**62:
                return None
        return strides

    def empty(self) -> Digits:
        """Return one column of zeros, shape (rows, 1)."""
        return np.zeros((len(self.tops), 1), np.int32)


@dataclass
class RowCounter:
    """Hands out rows while a layout is drawn up."""

    tops: list[int] = field(default_factory=list)
    labels: list[str] = field(default_factory=list)

    def row(self, label: str, top: int) -> int:
        """Add a row whose digit runs from 0 to `top`; return its number."""
        self.tops.append(top)
        self.labels.append(label)
        return len(self.tops) - 1

    def rows(self, label: str, top: int, count: int) -> tuple[int, ...]:
        """Add `count` rows for the stages of one condition."""
        return tuple(self.row(f"{label} stage {stage + 1}" if count > 1 else label, top) for stage in range(count))


def total(x: Digits, rows: tuple[int, ...]) -> Digits:
    """Sum some rows, shape (m,)."""
    if not rows:
        return np.zeros(x.shape[1], np.int32)
    return np.asarray(x[rows[0]] if len(rows) == 1 else x[list(rows)].sum(axis=0, dtype=np.int32))


def _sum(parts: list[Digits], x: Digits) -> Digits:
    if not parts:
        return np.zeros(x.shape[1], np.int32)
    result = parts[0]
    for part in parts[1:]:
        result = (result + part).astype(np.int32)
    return result


def _paths(path: Path) -> Iterator[tuple[Path, Slot]]:
    for entry in node_of(path[-1]).entries:
        if isinstance(entry, Train):
            yield from _paths((*path, entry))
        else:
            yield path, entry


def _groups(path: Path) -> Iterator[Path]:
    yield path
    for entry in node_of(path[-1]).entries:
        if isinstance(entry, Train):
            yield from _groups((*path, entry))
