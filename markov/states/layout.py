"""Where each count of a group's state stands: the rows of its digit matrix.

The state of an island (a group of the top level, or a unit that the system names directly) is a column of small
whole numbers.  A `Slot` (the items of one kind in one group) owns the rows that count its items by condition; a
`Node` (one group) owns its slots and the rows for an uncovered outage and for switchovers under way.  Items of one
kind are counted, never told apart.

Conditions of an item, and the rows that count them:

========== ===========================================================================================
``delay``   failed, logistic delay runs, no crew called yet
``down``    failed, crew called, by finished repair stages; whether a crew is there follows from the counts
``fresh``   failed, waiting for a crew, repair never begun            (only where the queue must be told apart)
``held``    failed, waiting after a preemption, by finished stages    (only where the queue must be told apart)
``serve``   failed, a crew at work, by finished stages                (only where the queue must be told apart)
``duty``    carries duty                                              (standby groups)
``start``   switchover under way, by finished stages                  (standby groups with a switchover time)
========== ===========================================================================================

Items in none of these rows are good: on duty in an active group, waiting in a standby group.

A member may be a group itself (a `Train`).  It owns a ``duty`` row and ``start`` rows in its parent like an item; it is
good while its own criterion holds.  While it waits, none of its items is in a ``duty`` row of its own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor

Digits = NDArray[np.int32]
"""Digit matrix, shape (rows, m): one column a state."""


@dataclass(frozen=True)
class Slot:
    """The items of one kind in one group, with their rates and the rows that count them."""

    unit: str
    group: str
    rank: int
    count: int
    failure: Factor | None  # None: never fails (rate zero, or renewed at once)
    start_failure: Factor | None  # None: every start succeeds
    repair: Factor | None  # rate of one repair stage; None: never repaired
    repair_stages: int
    logistic_delay: Factor | None
    capacity: Factor | None  # None: 1/required of the group
    renewed_at_once: bool
    explicit_queue: bool
    preemptible: bool
    delay: int = -1
    down: tuple[int, ...] = ()
    fresh: int = -1
    held: tuple[int, ...] = ()
    serve: tuple[int, ...] = ()
    duty: int = -1
    start: tuple[int, ...] = ()

    @property
    def name(self) -> str:
        """Return ``group.unit``, or the unit alone where it is its own group."""
        return self.unit if self.unit == self.group else f"{self.group}.{self.unit}"

    @property
    def failed_rows(self) -> tuple[int, ...]:
        """Rows whose sum is the number of failed items."""
        single = tuple(row for row in (self.delay, self.fresh) if row >= 0)
        return single + self.down + self.held + self.serve

    @property
    def entry_row(self) -> int:
        """Row that an item enters when it fails."""
        if self.delay >= 0:
            return self.delay
        return self.queue_row

    @property
    def queue_row(self) -> int:
        """Row that an item enters when it calls for a crew."""
        return self.fresh if self.explicit_queue else self.down[0]

    def failed(self, x: Digits) -> Digits:
        """Count failed items, shape (m,)."""
        return total(x, self.failed_rows)

    def good(self, x: Digits) -> Digits:
        """Count items that are not failed, shape (m,)."""
        good: Digits = np.subtract(self.count, self.failed(x), dtype=np.int32)
        return good

    def starting(self, x: Digits) -> Digits:
        """Count items whose switchover is under way, shape (m,)."""
        return total(x, self.start)

    def waiting(self, x: Digits) -> Digits:
        """Count good items that neither carry duty nor are being started, shape (m,); standby groups only."""
        waiting: Digits = np.subtract(self.good(x), x[self.duty] + self.starting(x), dtype=np.int32)
        return waiting

    def calling(self, x: Digits) -> Digits:
        """Count items that wait for a crew or have one, shape (m,)."""
        rows = tuple(row for row in self.failed_rows if row != self.delay)
        return total(x, rows)


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

    def starting(self, x: Digits) -> Digits:
        """Tell where the switchover to the train is under way, shape (m,)."""
        return total(x, self.start)

    def waiting(self, x: Digits) -> Digits:
        """Tell where the train is good, off duty and not being switched in, shape (m,)."""
        idle = (x[self.duty] == 0) & (self.starting(x) == 0)
        return np.where(idle, self.good(x), 0).astype(np.int32)


Entry = Slot | Train


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
    outcome_rate: Factor | None
    takeover_rate: Factor | None  # rate of one switchover stage; None: at once
    takeover_stages: int
    return_to_preferred: bool
    start_again: bool
    while_down: str
    entries: tuple[Entry, ...] = ()
    outage: int = -1
    switching: tuple[int, ...] = ()

    def good(self, x: Digits) -> Digits:
        """Count good members of the group, shape (m,)."""
        return _sum([entry.good(x) for entry in self.entries], x)

    def failed(self, x: Digits) -> Digits:
        """Count failed members of the group, shape (m,)."""
        return _sum([entry.failed(x) for entry in self.entries], x)

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
        enough = self.on_duty(x) >= self.required
        if self.active:
            return enough & ~self.in_outage(x) & ~self.switching_now(x)
        if self.outcome == "lost":
            return enough & ~self.in_outage(x)
        return enough


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
class Layout:
    """The rows of one island: its node, the largest value of each row and a short label of each row."""

    node: Node
    tops: tuple[int, ...]
    labels: tuple[str, ...]

    @cached_property
    def paths(self) -> tuple[tuple[Path, Slot], ...]:
        """All slots of the island, each with the way to its group, outer members first."""
        return tuple(_paths((self.node,)))

    @property
    def slots(self) -> tuple[Slot, ...]:
        """All slots of the island, in the order of `paths`."""
        return tuple(slot for _, slot in self.paths)

    @cached_property
    def groups(self) -> tuple[Path, ...]:
        """The way to every group of the island, the innermost last."""
        return tuple(_groups((self.node,)))

    @property
    def heeds_the_system(self) -> bool:
        """Whether anything here depends on whether the system is down."""
        return any(node_of(path[-1]).while_down != "continue" for path in self.groups)

    def strides(self) -> NDArray[np.int64]:
        """Return the weights that turn a column of digits into one whole number, shape (rows,)."""
        strides = np.ones(len(self.tops), np.int64)
        size = 1
        for row, top in enumerate(self.tops):
            strides[row] = size
            size *= top + 1
            if size > 2**62:
                raise OverflowError("the digits of this group do not fit one 64-bit number")
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
