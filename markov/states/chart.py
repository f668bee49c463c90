"""The chart of one island: its own states and what every event does to them.

The rules run here, on whole frontiers of the island's states.  The chain of the whole system is put together from the
charts by looking up, so each consequence is worked out once, however often it occurs in the whole chain.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.errors import TooLarge
from markov.states.arrows import ArrowKind, ArrowKinds
from markov.states.blocks import Blocks
from markov.states.branching import Apply, Branch, Dice, Event, Mode
from markov.states.events import island_events
from markov.states.layout import Digits, Layout
from markov.states.outage import drop_idle_outage

Index = NDArray[np.int32]
Keys = NDArray[np.int64] | NDArray[np.bytes_]

#: Largest number of states of one island that is worked out; of one in which several groups stand.
ISLAND_LIMIT = 5_000_000
JOINED_LIMIT = 1_000_000


@dataclass(frozen=True)
class Layer:
    """At most one transition of each local state; shape (k,) each.

    `leaves` tells which states have one, `step` is the state reached minus the state left.
    """

    leaves: NDArray[np.bool_]
    step: NDArray[np.int64]
    kind: Index
    multiple: Index


@dataclass(frozen=True)
class Table:
    """Local transitions sorted by the state they leave.

    Attributes
    ----------
    first : int64[k + 1]
        Transitions ``first[i]`` to ``first[i + 1] - 1`` leave state i.
    target, kind, multiple : int32[transitions]
        State reached, number of the arrow kind, number of alike items.
    """

    first: NDArray[np.int64]
    target: Index
    kind: Index
    multiple: Index

    def __len__(self) -> int:
        return len(self.target)

    @cached_property
    def layers(self) -> tuple[Layer, ...]:
        """The transitions once more, in layers that hold at most one of each state."""
        count = np.diff(self.first)
        size = len(count)
        found = []
        for depth in range(int(count.max(initial=0))):
            states = np.flatnonzero(count > depth)
            at = self.first[states] + depth
            layer = Layer(
                np.zeros(size, np.bool_), np.zeros(size, np.int64), np.zeros(size, np.int32), np.zeros(size, np.int32)
            )
            layer.leaves[states] = True
            layer.step[states] = self.target[at].astype(np.int64) - states
            layer.kind[states] = self.kind[at]
            layer.multiple[states] = self.multiple[at]
            found.append(layer)
        return tuple(found)


@dataclass(frozen=True)
class Laws:
    """What happens at random in one phase.

    Attributes
    ----------
    layout : Layout
    spontaneous : dict
        Mode -> transitions that happen by themselves, multiples included.
    crew_driven : dict
        (lane number, stage) -> in which states of the system, and the transitions per item that a crew works on.
    """

    layout: Layout
    spontaneous: dict[Mode, Table]
    crew_driven: dict[tuple[int, int], tuple[Mode, Table]]


@dataclass(frozen=True)
class Chart:
    """All states of one island and its transitions.

    Attributes
    ----------
    laws : tuple of Laws
        One a phase; a single one without phases.
    digits : int32[rows, k]
        The k states; column 0 is the initial state.
    start : int
        Number of the initial state.
    instants : tuple of Table
        What each fixed instant does; the rate of an arrow kind is its chance, and chances of one state add up to one.
    takes, preempts : dict
        (lane number, stage) -> state reached when a crew takes a waiting item, or leaves one; -1 where impossible.
        Stage -1 of `takes` is an item whose repair never began.
    alike : tuple of tuples of int
        Nodes that are interchangeable: only how many of them are in which condition matters.
    orbits : float64[k], optional
        How many states each stands for.
    """

    laws: tuple[Laws, ...]
    digits: Digits
    start: int
    instants: tuple[Table, ...]
    takes: dict[tuple[int, int], Index]
    preempts: dict[tuple[int, int], Index]
    alike: tuple[tuple[int, ...], ...] = ()
    orbits: NDArray[np.float64] | None = None

    @property
    def layout(self) -> Layout:
        """The rows, with the rules of the first phase."""
        return self.laws[0].layout

    @property
    def size(self) -> int:
        """Number of states of the island."""
        return int(self.digits.shape[1])


@dataclass
class _Raw:
    """Transitions while the island is explored: where from, key of where to, kind, multiple."""

    source: list[NDArray[np.int64]]
    key: list[Keys]
    kind: list[NDArray[np.int32]]
    multiple: list[NDArray[np.int64]]

    @classmethod
    def new(cls) -> _Raw:
        return cls([], [], [], [])


Move = Callable[[Digits], tuple[NDArray[np.bool_], Digits]]


@dataclass(frozen=True)
class Moment:
    """A fixed instant, with the rules that hold from then on and what it does."""

    cause: str
    layout: Layout
    apply: Apply


def build_chart(
    layouts: tuple[Layout, ...],
    kinds: ArrowKinds,
    start: Digits,
    local_crews: frozenset[int] = frozenset(),
    moments: tuple[Moment, ...] = (),
    alike: tuple[tuple[int, ...], ...] = (),
) -> Chart:
    """Explore one island from its initial state.

    Parameters
    ----------
    layouts : tuple of Layout
        The island in every phase.
    kinds : ArrowKinds
        Receives the arrow kinds.
    start : int32[rows, 1]
        Initial state.
    local_crews : set of int
        Lanes whose every failed item has a crew at once, or is told to have one by the digits; their repairs happen by
        themselves.
    moments : tuple of Moment
        What happens at fixed instants.
    alike : tuple of tuples of int
        Numbers of nodes that are interchangeable.
    """
    layout = layouts[0]
    strides = layout.strides()
    dice = Dice(kinds.rates)
    phases = [(each, island_events(dice, each)) for each in layouts]
    raw = [[_Raw.new() for _ in events] for _, events in phases]
    instants = [_Raw.new() for _ in moments]
    certain = kinds.rates.of()
    moves = _crew_moves(layout)
    moved: dict[tuple[str, int, int], list[tuple[NDArray[np.int64], Keys]]] = {key: [] for key in moves}
    known = _Known(strides, Blocks(layout, alike) if alike else None)
    frontier = known.add(start.copy())
    done = 0
    while frontier.shape[1]:
        number = np.arange(done, done + frontier.shape[1], dtype=np.int64)
        done += frontier.shape[1]
        if len(layout.nodes) == 1 and done > ISLAND_LIMIT:
            raise TooLarge(f"group {layout.name} alone has more than {ISLAND_LIMIT:,} states")
        if len(layout.nodes) > 1 and done > JOINED_LIMIT:
            raise TooLarge(
                f"{len(layout.nodes)} groups that more than crews connects have more than {JOINED_LIMIT:,} states; "
                "fewer groups under one cause, pool of spares, restoration or timetable would help"
            )
        reached: list[Digits] = []
        for (rules, events), stores in zip(phases, raw, strict=True):
            for event, store in zip(events, stores, strict=True):
                reached.extend(_apply(event, rules, kinds, known, frontier, number, store, local_crews))
        for moment, store in zip(moments, instants, strict=True):
            one = np.ones(frontier.shape[1], np.int64)
            branch = Branch(frontier.copy(), frontier, number, one, certain, (moment.cause,))
            reached.extend(_settled(moment.apply(branch), moment.layout, kinds, known, store))
        for name, move in moves.items():
            able, after = move(frontier)
            if able.any():
                moved[name].append((number[able], known.keys_of(after)))
                reached.append(after)
        frontier = known.add(np.concatenate(reached, axis=1)) if reached else frontier[:, :0]
    chart = _finished(phases, kinds, known, raw, instants, moved, local_crews)
    return replace(chart, alike=alike, orbits=known.blocks.orbits(chart.digits)) if known.blocks else chart


def _apply(
    event: Event,
    layout: Layout,
    kinds: ArrowKinds,
    known: _Known,
    frontier: Digits,
    number: NDArray[np.int64],
    store: _Raw,
    local_crews: frozenset[int],
) -> list[Digits]:
    exposed = event.exposed(frontier)
    able = exposed > 0
    if not able.any():
        return []
    by_crew = event.crew is not None and event.crew[0] not in local_crews
    multiple = np.ones(int(able.sum()), np.int64) if by_crew else exposed[able].astype(np.int64)
    before = frontier[:, able]
    branch = Branch(before.copy(), before, number[able], multiple, event.rate, (event.cause,))
    return _settled(event.apply(branch), layout, kinds, known, store)


def _settled(results: list[Branch], layout: Layout, kinds: ArrowKinds, known: _Known, store: _Raw) -> list[Digits]:
    """Store what an event or an instant leads to; return the states reached."""
    reached: list[Digits] = []
    for result in results:
        for node in layout.nodes:
            drop_idle_outage(node, result.x)
        if not len(result):
            continue
        kind = kinds.intern(
            ArrowKind(
                _told(result.story),
                result.rate,
                tuple(sorted(result.starts)),
                result.repaired,
                layout.name,
                tuple(sorted(result.repairs)),
                tuple(sorted(result.drawn)),
            )
        )
        store.source.append(result.origin)
        store.key.append(known.keys_of(result.x))
        store.kind.append(np.full(len(result), kind, np.int32))
        store.multiple.append(result.multiple)
        reached.append(result.x)
    return reached


def _told(story: tuple[str, ...]) -> str:
    """Return the story of a branch as one line."""
    return story[0] if len(story) == 1 else f"{story[0]}: {', '.join(story[1:])}"


def _crew_moves(layout: Layout) -> dict[tuple[str, int, int], Move]:
    """List what crews may do to waiting items where the queue is told apart."""
    moves: dict[tuple[str, int, int], Move] = {}
    for number, lane in enumerate(layout.lanes):
        if not lane.explicit_queue or lane.desk >= 0:
            continue
        moves["take", number, -1] = _mover(lane.fresh, lane.serve[0])
        for stage, row in enumerate(lane.serve):
            if lane.preemptible:
                moves["take", number, stage] = _mover(lane.held[stage], row)
                moves["preempt", number, stage] = _mover(row, lane.held[stage])
    return moves


def _mover(source: int, target: int) -> Move:
    def move(x: Digits) -> tuple[NDArray[np.bool_], Digits]:
        able = x[source] > 0
        after = x[:, able].copy()
        after[source] -= 1
        after[target] += 1
        return able, after

    return move


class _Known:
    """The states found so far, in the order of discovery, with a sorted index of their keys.

    A key is a whole number; where the digits do not fit one, the digits themselves as bytes (two each, of one length,
    so that the zeros that such keys drop at their end tell nothing).
    """

    def __init__(self, strides: NDArray[np.int64] | None, blocks: Blocks | None) -> None:
        self._strides = strides
        self.blocks = blocks
        self._sorted: Keys = np.empty(0, np.int64)
        self._numbers = np.empty(0, np.int64)
        self._columns: list[Digits] = []
        self._size = 0

    def keys_of(self, x: Digits) -> Keys:
        if self.blocks is not None:
            x = self.blocks.sorted(x)
        if self._strides is None:
            digits = np.ascontiguousarray(x.T.astype(">u2"))
            return digits.view(f"S{2 * x.shape[0]}")[:, 0]
        return np.asarray(self._strides @ x.astype(np.int64))

    def add(self, x: Digits) -> Digits:
        """Add the columns not known yet and return them, without repetition."""
        if self.blocks is not None:
            x = self.blocks.sorted(x)
        keys, first = np.unique(self.keys_of(x), return_index=True)
        if len(self._sorted):
            at = np.minimum(np.searchsorted(self._sorted, keys), len(self._sorted) - 1)
            new = self._sorted[at] != keys
            keys, first = keys[new], first[new]
        order = np.argsort(first, kind="stable")  # keep the order in which the events found them
        columns = x[:, first[order]]
        numbers = np.empty(len(keys), np.int64)
        numbers[order] = np.arange(self._size, self._size + len(keys))
        merged: Keys = np.concatenate((self._sorted, keys)) if len(self._sorted) else keys  # type: ignore[assignment]
        place = np.argsort(merged, kind="stable")
        self._sorted = merged[place]
        self._numbers = np.concatenate((self._numbers, numbers))[place]
        self._columns.append(columns)
        self._size += len(keys)
        return columns

    def numbers_of(self, keys: Keys) -> Index:
        return self._numbers[np.searchsorted(self._sorted, keys)].astype(np.int32)

    def all(self) -> Digits:
        return np.concatenate(self._columns, axis=1)


def _finished(
    phases: list[tuple[Layout, list[Event]]],
    kinds: ArrowKinds,
    known: _Known,
    raw: list[list[_Raw]],
    instants: list[_Raw],
    moved: dict[tuple[str, int, int], list[tuple[NDArray[np.int64], Keys]]],
    local_crews: frozenset[int],
) -> Chart:
    digits = known.all()
    size = digits.shape[1]
    laws = []
    for (layout, events), stores in zip(phases, raw, strict=True):
        by_mode: dict[Mode, list[_Raw]] = {"always": [], "system_up": [], "system_down": []}
        crew_driven: dict[tuple[int, int], tuple[Mode, Table]] = {}
        for event, store in zip(events, stores, strict=True):
            if event.crew is not None and event.crew[0] not in local_crews:
                crew_driven[event.crew] = event.mode, _table([store], kinds, known, size)
            else:
                by_mode[event.mode].append(store)
        spontaneous = {mode: _table(each, kinds, known, size) for mode, each in by_mode.items() if each}
        laws.append(Laws(layout, spontaneous, crew_driven))
    takes: dict[tuple[int, int], Index] = {}
    preempts: dict[tuple[int, int], Index] = {}
    for (what, lane, stage), found in moved.items():
        reached = np.full(size, -1, np.int32)
        for number, keys in found:
            reached[number] = known.numbers_of(keys)
        (takes if what == "take" else preempts)[lane, stage] = reached
    at_instants = tuple(_table([store], kinds, known, size, keep_all=True) for store in instants)
    return Chart(tuple(laws), digits, 0, at_instants, takes, preempts)


def _table(stores: list[_Raw], kinds: ArrowKinds, known: _Known, size: int, *, keep_all: bool = False) -> Table:
    """Sort transitions by origin; drop those that lead back to where they started, unless they count something."""
    if not any(store.source for store in stores):
        empty = np.empty(0, np.int32)
        return Table(np.zeros(size + 1, np.int64), empty, empty, empty)
    source = np.concatenate([part for store in stores for part in store.source])
    target = known.numbers_of(np.concatenate([part for store in stores for part in store.key]))
    kind = np.concatenate([part for store in stores for part in store.kind])
    multiple = np.concatenate([part for store in stores for part in store.multiple]).astype(np.int32)
    counts = np.array([each.counts for each in kinds.kinds], np.bool_)
    kept = (source != target) | counts[kind] | keep_all
    order = np.flatnonzero(kept)[np.argsort(source[kept], kind="stable")]
    first = np.zeros(size + 1, np.int64)
    np.cumsum(np.bincount(source[order], minlength=size), out=first[1:])
    return Table(first, target[order], kind[order], multiple[order])
