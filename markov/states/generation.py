"""From the charts of the islands to the chain of the whole system, over whole frontiers of states.

A state of the chain is the tuple of the local states of all islands, packed into one 64-bit number.  The explorer takes
a chunk of the frontier, lets every island and every crew act on all of its states at once, packs the states reached
and numbers the new ones.  No step looks at one state alone.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from markov.errors import TooLarge
from markov.states.arrows import ArrowKinds
from markov.states.branching import Mode
from markov.states.chart import Chart, Table
from markov.states.crews import Columns, CrewDesk
from markov.states.space import Arrows
from markov.states.symmetry import Classes, sort_alike

Keys = NDArray[np.int64]

#: States beyond which no chain is generated unless the caller asks for more.
STATE_LIMIT = 5_000_000

#: What a user can do about a chain that is too large.
WHAT_HELPS = (
    "fewer units or repair stages, one kind for units that are alike, separate specs for what shares no crew would help"
)

#: States taken from the frontier at once; small enough for the caches, large enough to keep Python out of the way.
CHUNK = 1 << 16

#: Largest packed range for which a plain table numbers the states (4 bytes an entry).
_TABLE_LIMIT = 1 << 26


@dataclass(frozen=True)
class Explored:
    """What an exploration found: packed states in the order of discovery, transitions, initial states.

    `regimes` holds the transitions of every phase, `instants` what each fixed instant does (the rate of a kind is a
    chance there).
    """

    keys: Keys
    regimes: tuple[Arrows, ...]
    instants: tuple[Arrows, ...]
    start: tuple[tuple[int, int, int], ...]  # state, weight, choices: probability weight / choices


class Packing:
    """Packs local state numbers into one 64-bit number and back."""

    def __init__(self, charts: tuple[Chart, ...]) -> None:
        self.strides: list[int] = []
        self.sizes = [chart.size for chart in charts]
        size = 1
        for each in self.sizes:
            self.strides.append(size)
            size *= each
        self.range = size
        if size >= 2**62:
            raise TooLarge(
                f"the groups of this model have {size:.2g} joint states at most, beyond what can be numbered; "
                "fewer units, fewer kinds that share a crew, or parts solved apart would help"
            )

    def pack(self, columns: Columns) -> Keys:
        """Return the packed states of local state numbers of shape (islands, m); shape (m,)."""
        keys = np.zeros(columns.shape[1], np.int64)
        for stride, local in zip(self.strides, columns, strict=True):
            keys += local.astype(np.int64) * stride
        return keys

    def unpack(self, keys: Keys) -> Columns:
        """Return local state numbers, shape (islands, m)."""
        columns = np.empty((len(self.sizes), len(keys)), np.int32)
        rest = keys
        for island, size in enumerate(self.sizes):
            rest, columns[island] = np.divmod(rest, size)
        return columns


def explore(
    charts: tuple[Chart, ...],
    desk: CrewDesk,
    kinds: ArrowKinds,
    up: tuple[Callable[[Columns], NDArray[np.bool_]], ...],
    *,
    classes: Classes = (),
    limit: int = STATE_LIMIT,
) -> Explored:
    """Explore the chain from its initial state.

    Parameters
    ----------
    charts, desk, kinds
        What acts on the states, what receives the arrow kinds.
    up : tuple of callable
        For every phase: local state numbers -> in which states the system is up.
    classes : tuple of tuples of int
        Interchangeable islands; states that differ by their order only are one state.
    limit : int
        Largest number of states.

    Raises
    ------
    TooLarge
        More than `limit` states were found.
    """
    packing = Packing(charts)
    numbering = _numbering(packing.range)
    phases = range(len(charts[0].laws)) if charts else range(1)
    heeds = [
        any(
            mode != "always" and len(table)
            for chart in charts
            for mode, table in (*chart.laws[phase].spontaneous.items(), *chart.laws[phase].crew_driven.values())
        )
        for phase in phases
    ]

    first = np.array([[chart.start] for chart in charts], np.int32)
    start = tuple(
        (
            int(numbering.number(packing.pack(sort_alike(share.columns, classes)))[0]),
            int(share.weight[0]),
            share.choices,
        )
        for share in desk.assign(first)
    )
    regimes = [_Collected() for _ in phases]
    instants = [_Collected() for _ in (charts[0].instants if charts else ())]
    done = 0
    while done < numbering.size:
        keys = numbering.keys_from(done, CHUNK)
        columns = packing.unpack(keys)
        for phase in phases:
            is_up = up[phase](columns) if heeds[phase] else None
            for found in _chunk(charts, phase, desk, packing, keys, columns, is_up):
                for part in _settled(found, desk, packing, kinds, classes):
                    regimes[phase].add(part, done, numbering)
        for number, collected in enumerate(instants):
            for found in _expand(charts[0].instants[number], columns[0], keys, packing.strides[0], None):
                for part in _settled(found, desk, packing, kinds, classes):
                    collected.add(part, done, numbering)
        done += len(keys)
        if numbering.size > limit:
            raise TooLarge(f"more than {limit:,} states; {WHAT_HELPS}")
    return Explored(
        numbering.all(), tuple(each.arrows() for each in regimes), tuple(each.arrows() for each in instants), start
    )


class _Collected:
    """Transitions of one phase, or of one instant, while they are found."""

    def __init__(self) -> None:
        self._source: list[NDArray[np.int32]] = []
        self._target: list[NDArray[np.int32]] = []
        self._kind: list[NDArray[np.int32]] = []
        self._multiple: list[NDArray[np.int32]] = []

    def add(self, part: _Found, done: int, numbering: _TableNumbering) -> None:
        self._source.append((part.row + done).astype(np.int32))
        self._target.append(numbering.number(part.key))
        self._kind.append(part.kind)
        self._multiple.append(part.multiple)

    def arrows(self) -> Arrows:
        """Return all of them as columns, giving up the parts."""
        return Arrows(_joined(self._source), _joined(self._target), _joined(self._kind), _joined(self._multiple))


@dataclass(frozen=True)
class _Found:
    """Transitions out of one chunk: row of the chunk, packed state reached, kind, multiple; shape (a,) each."""

    row: NDArray[np.int64]
    key: Keys
    kind: NDArray[np.int32]
    multiple: NDArray[np.int32]


def _chunk(
    charts: tuple[Chart, ...],
    phase: int,
    desk: CrewDesk,
    packing: Packing,
    keys: Keys,
    columns: Columns,
    is_up: NDArray[np.bool_] | None,
) -> Iterator[_Found]:
    for island, chart in enumerate(charts):
        for mode, table in chart.laws[phase].spontaneous.items():
            allowed = _allowed(mode, is_up)
            yield from _expand(table, columns[island], keys, packing.strides[island], allowed)
    for pool in desk.pools:
        for (island, number, stage), served in desk.served(pool, columns):
            event = charts[island].laws[phase].crew_driven.get((number, stage))
            if event is None:
                continue
            mode, table = event
            allowed = _allowed(mode, is_up)
            at_work = served > 0 if allowed is None else (served > 0) & allowed
            for found in _expand(table, columns[island], keys, packing.strides[island], at_work):
                yield _Found(found.row, found.key, found.kind, found.multiple * served[found.row])


def _allowed(mode: Mode, is_up: NDArray[np.bool_] | None) -> NDArray[np.bool_] | None:
    if mode == "always" or is_up is None:
        return None
    return is_up if mode == "system_up" else ~is_up


def _expand(
    table: Table, local: NDArray[np.int32], keys: Keys, stride: int, allowed: NDArray[np.bool_] | None
) -> Iterator[_Found]:
    """Look up the transitions of one island in the states of a chunk (only those `allowed`, where it is given)."""
    for layer in table.layers:
        leaving = layer.leaves[local]
        row = np.flatnonzero(leaving if allowed is None else leaving & allowed)
        if len(row):
            here = local[row]
            key = layer.step[here]
            key *= stride
            key += keys[row]
            yield _Found(row, key, layer.kind[here], layer.multiple[here])


def _settled(found: _Found, desk: CrewDesk, packing: Packing, kinds: ArrowKinds, classes: Classes) -> Iterator[_Found]:
    """Let the crews move on after the events of one batch, and take the representative of each state reached."""
    if not desk.assigns:
        if classes:
            key = packing.pack(sort_alike(packing.unpack(found.key), classes))
            yield _Found(found.row, key, found.kind, found.multiple)
        else:
            yield found
        return
    for share in desk.assign(packing.unpack(found.key)):
        kind = found.kind[share.row]
        if share.choices > 1:
            each, where = np.unique(kind, return_inverse=True)
            kind = np.array([kinds.shared(int(number), share.choices) for number in each], np.int32)[where]
        weight = (found.multiple[share.row] * share.weight).astype(np.int32)
        yield _Found(found.row[share.row], packing.pack(sort_alike(share.columns, classes)), kind, weight)


class _TableNumbering:
    """Numbers packed states by a plain table over the whole packed range."""

    def __init__(self, size: int) -> None:
        self._table = np.full(size, -1, np.int32)
        self._keys = np.empty(1024, np.int64)
        self.size = 0

    def number(self, keys: Keys) -> NDArray[np.int32]:
        """Return the numbers of packed states, giving the next numbers to new ones in order of appearance."""
        numbers = self._table[keys]
        unknown = np.flatnonzero(numbers < 0)
        if len(unknown):
            new = keys[unknown]
            order = np.arange(len(new), dtype=np.int32)
            self._table[new[::-1]] = order[::-1]  # of equal entries the last written stays: the first appearance
            firsts = new[self._table[new] == order]
            self._table[firsts] = np.arange(self.size, self.size + len(firsts), dtype=np.int32)
            numbers[unknown] = self._table[new]
            self._append(firsts)
        return numbers

    def _append(self, keys: Keys) -> None:
        needed = self.size + len(keys)
        if needed > len(self._keys):
            grown = np.empty(max(needed, 2 * len(self._keys)), np.int64)
            grown[: self.size] = self._keys[: self.size]
            self._keys = grown
        self._keys[self.size : needed] = keys
        self.size = needed

    def keys_from(self, first: int, count: int) -> Keys:
        """Return up to `count` packed states from number `first` on."""
        return self._keys[first : min(first + count, self.size)].copy()

    def all(self) -> Keys:
        """Return all packed states by number."""
        return self._keys[: self.size].copy()


class _SortedNumbering(_TableNumbering):
    """Numbers packed states by a sorted list, for packed ranges far larger than the chain."""

    def __init__(self) -> None:
        super().__init__(0)
        self._sorted = np.empty(0, np.int64)
        self._numbers = np.empty(0, np.int32)

    def number(self, keys: Keys) -> NDArray[np.int32]:
        """Return the numbers of packed states, giving the next numbers to new ones in order of appearance."""
        distinct, first, where = np.unique(keys, return_index=True, return_inverse=True)
        at = np.minimum(np.searchsorted(self._sorted, distinct), max(len(self._sorted) - 1, 0))
        known = self._sorted[at] == distinct if len(self._sorted) else np.zeros(len(distinct), np.bool_)
        numbers = np.empty(len(distinct), np.int32)
        numbers[known] = self._numbers[at[known]]
        new = np.flatnonzero(~known)
        if len(new):
            order = new[np.argsort(first[new], kind="stable")]
            numbers[order] = np.arange(self.size, self.size + len(order), dtype=np.int32)
            self._append(distinct[order])
            place = np.searchsorted(self._sorted, distinct[new])
            self._sorted = np.insert(self._sorted, place, distinct[new])
            self._numbers = np.insert(self._numbers, place, numbers[new])
        return numbers[where]


def _numbering(size: int) -> _TableNumbering:
    return _TableNumbering(size) if size <= _TABLE_LIMIT else _SortedNumbering()


def _joined(parts: list[NDArray[np.int32]]) -> NDArray[np.int32]:
    """Join columns and free the parts while they are copied, so that no second full copy exists."""
    if not parts:
        return np.empty(0, np.int32)
    joined = np.empty(sum(len(part) for part in parts), np.int32)
    at = len(joined)
    while parts:
        part = parts.pop()
        at -= len(part)
        joined[at : at + len(part)] = part
    return joined
