"""The chain as the mathematician sees it: numbered states with the rates between them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import coo_array, csr_array

from markov.chain.bounds import Flags, Floats
from markov.chain.doubled import Doubled, run_error, run_totals, two_sum, zeros
from markov.errors import NotReached, UsageError

Numbers = NDArray[np.int32]

#: Rates outside these limits are refused: the error bounds rest on products and quotients of rates being normal floats.
SMALLEST_RATE = 1e-150
LARGEST_RATE = 1e150

#: What the callers of this room promise: ``high + low`` is within this relative distance of the exact rate.
RATE_ERROR = 2.0**-102

_PIECE = 1 << 18  # transitions looked at together, so that what lies between stays small
_ROWS = 1 << 15  # states whose exits are looked at together


@dataclass(frozen=True, eq=False)
class Generator:
    """Rates between n states, off the diagonal, sorted by source and target, without duplicates, all positive.

    Make one with `aggregate`, which establishes what is promised here.

    Attributes
    ----------
    n : int
        Number of states.
    source, target : int32[k]
        Where each transition leaves and enters.
    rates : Doubled[k]
        Rate of each transition as a sum of two floats.
    rate_error : float
        Relative distance of each rate from the exact one, at most.
    """

    n: int
    source: Numbers
    target: Numbers
    rates: Doubled
    rate_error: float = RATE_ERROR

    @property
    def high(self) -> Floats:
        """Leading parts of the rates, float64[k]."""
        return self.rates.high

    @property
    def low(self) -> Floats:
        """Trailing parts of the rates, float64[k]."""
        return self.rates.low

    @cached_property
    def pointers(self) -> NDArray[np.integer[Any]]:
        """Where the transitions of each source begin: int32[n + 1], int64 where there are too many for that."""
        found = np.searchsorted(self.source, np.arange(self.n + 1, dtype=self.source.dtype))
        return found.astype(np.int32 if self.source.size < 2**31 else np.int64)

    @cached_property
    def exits(self) -> Doubled:
        """Sum of the rates out of each state, Doubled[n]; relative error at most `exit_error`."""
        return run_totals(self.rates, self.pointers)

    @cached_property
    def exit_error(self) -> float:
        """Relative error of `exits` against the exact chain."""
        longest = int(np.diff(self.pointers).max()) if self.n else 0
        return (self.rate_error + run_error(longest)) * (1.0 + 1e-12)

    def matrix(self) -> csr_array:
        """Return the rates rounded to floats as a sparse matrix, float64[n, n], zero diagonal.

        It shares its arrays with this chain: nobody may write into it.
        """
        # A leading part is the float nearest to its sum.
        return csr_array((self.rates.high, self.target, self.pointers), shape=(self.n, self.n))

    def dense(self) -> Doubled:
        """Return the rates as a dense matrix, Doubled[n, n], zero diagonal."""
        high, low = np.zeros((self.n, self.n)), np.zeros((self.n, self.n))
        high[self.source, self.target] = self.rates.high
        low[self.source, self.target] = self.rates.low
        return Doubled(high, low)

    def reachable(self, start: ArrayLike, blocked: Flags | None = None) -> Flags:
        """Return which states can be entered from `start`; paths do not go on from `blocked` states.

        Parameters
        ----------
        start : bool[n], int or list of int
            The states that paths begin at; they count as reached.
        blocked : bool[n], optional
            States that may be entered but not left.
        """
        reached = as_flags(start, self.n)
        pattern = self.matrix()
        frontier: NDArray[np.integer[Any]] = np.flatnonzero(reached)
        while True:
            if blocked is not None:
                frontier = frontier[~blocked[frontier]]
            if not frontier.size:
                return reached
            frontier = entered_first(pattern, frontier, reached)
            reached[frontier] = True

    def distances(self, start: int) -> NDArray[np.integer[Any]]:
        """Return how many jumps each state is away from `start`, int16[n] or int32[n]; -1 where no path leads."""
        kept: dict[int, NDArray[np.integer[Any]]] = self.__dict__.setdefault("_distances", {})
        if start not in kept:
            pattern = self.matrix()
            level: NDArray[np.integer[Any]] = np.full(self.n, -1, dtype=np.int16)
            reached = np.zeros(self.n, dtype=bool)
            frontier: NDArray[np.integer[Any]] = np.array([start])
            depth = 0
            while frontier.size:
                if depth == 2**15 - 1:  # rarely: one more for those that are never entered must fit as well
                    level = level.astype(np.int32)
                level[frontier], reached[frontier] = depth, True
                frontier = entered_first(pattern, frontier, reached)
                depth += 1
            kept.clear()  # one is enough
            kept[start] = level
        return kept[start]

    def leading_to(self, goal: Flags, blocked: Flags | None = None) -> Flags:
        """Return from which states those of `goal` can be entered, themselves included; bool[n].

        Paths do not go on from `blocked` states, as in `reachable`.
        """
        ones = np.ones(self.source.size, dtype=np.int8)
        turned = csr_array((ones, self.target, self.pointers), shape=(self.n, self.n)).tocsc()
        pattern = csr_array((turned.data, turned.indices, turned.indptr), shape=(self.n, self.n))
        reached = goal.copy()
        left_out = reached.copy() if blocked is None else reached | blocked
        frontier: NDArray[np.integer[Any]] = np.flatnonzero(goal)
        while frontier.size:
            frontier = entered_first(pattern, frontier, left_out)
            reached[frontier] = left_out[frontier] = True
        return reached

    def reversed(self) -> Generator:
        """Return the chain with every arrow turned around (for questions of reachability)."""
        order = by_target(self)
        return Generator(self.n, self.target[order], self.source[order], self.rates.at(order), self.rate_error)

    def classes(self) -> tuple[int, Numbers]:
        """Return the number of communicating classes with the class of each state."""
        if self._is_one_class:
            return 1, np.zeros(self.n, dtype=np.int32)
        from scipy.sparse.csgraph import connected_components  # late: it takes long to import

        count, label = connected_components(self.matrix(), directed=True, connection="strong")
        return int(count), np.asarray(label, dtype=np.int32)

    @cached_property
    def _is_one_class(self) -> bool:
        """Whether it is easily seen that all states communicate.

        Where every state but the first can jump to a lower number, each has a path to the first; then it is enough
        that all are reached from there.
        """
        if self.n < 2:
            return self.n == 1
        begin, end = self.pointers[1:-1], self.pointers[2:]
        if not bool((end > begin).all()) or not bool((self.target[begin] < np.arange(1, self.n)).all()):
            return False
        return bool((self.distances(0) >= 0).all())

    def closed_classes(self, start: ArrayLike | None = None, *, outside: Flags | None = None) -> list[Numbers]:
        """Return the closed communicating classes, each as ascending state numbers, ordered by the first of them.

        Parameters
        ----------
        start : bool[n], int or list of int, optional
            Only classes that can be reached from there.
        outside : bool[n], optional
            Only classes without any of these states.
        """
        count, label = self.classes()
        if count == 1:
            barred = outside is not None and bool(outside.any())
            return [] if barred else [np.arange(self.n, dtype=np.int32)]
        closed = np.ones(count, dtype=bool)
        closed[label[self.source[label[self.source] != label[self.target]]]] = False
        if start is not None:
            seen = np.zeros(count, dtype=bool)
            seen[label[self.reachable(start)]] = True
            closed &= seen
        if outside is not None:
            closed[label[outside]] = False
        members = np.flatnonzero(closed[label])
        if not members.size:
            return []
        # Stable: members of one class stay in ascending order.
        members = members[np.argsort(label[members], kind="stable")].astype(np.int32)
        found: list[Numbers] = np.split(members, np.flatnonzero(np.diff(label[members])) + 1)
        return sorted(found, key=lambda each: int(each[0]))

    def without_exits(self, stopped: Flags) -> Generator:
        """Return the chain in which the `stopped` states absorb."""
        keep = ~stopped[self.source]
        return Generator(self.n, self.source[keep], self.target[keep], self.rates.at(keep), self.rate_error)

    def restricted(self, members: NDArray[np.integer[Any]], label: NDArray[np.integer[Any]], count: int) -> Restriction:
        """Return the chain on `members`, with the rates into each class of absorbing states.

        Parameters
        ----------
        members : int[k]
            States that are kept; they are numbered in this order.
        label : int[n]
            Class of absorption of each state that is not kept, in ``0 .. count - 1``; -1 where transitions vanish
            without being counted.
        count : int
            Number of classes.
        """
        chosen: Numbers = np.asarray(members, dtype=np.int32)
        descending = bool((np.diff(chosen) < 0).any())
        if chosen.size == self.n and not descending:
            return Restriction(self, chosen, zeros(self.n, count), self.rate_error * (1.0 + 1e-12))
        number = np.full(self.n, -1, dtype=np.int32)
        number[chosen] = np.arange(chosen.size, dtype=np.int32)
        kept = number >= 0
        inside = np.repeat(kept, np.diff(self.pointers))
        within = kept[self.target]
        within &= inside
        source, target, rates = number[self.source[within]], number[self.target[within]], self.rates.at(within)
        if descending:
            order = np.lexsort((target, source))
            source, target, rates = source[order], target[order], rates.at(order)
        chain = Generator(int(chosen.size), source, target, rates, self.rate_error)
        counted = np.asarray(label) >= 0
        out = counted[self.target]
        out &= inside
        out &= ~within
        absorption, error = self._absorbed(np.flatnonzero(out), number, np.asarray(label), count, int(chosen.size))
        return Restriction(chain, chosen, absorption, error)

    def _absorbed(
        self, out: NDArray[np.int64], number: Numbers, label: NDArray[np.integer[Any]], count: int, size: int
    ) -> tuple[Doubled, float]:
        """Return the rates of some transitions summed by source and class, Doubled[size, count], with their error."""
        owner = number[self.source[out]].astype(np.int64) * count + label[self.target[out]]
        if not bool((owner[1:] >= owner[:-1]).all()):
            order = np.argsort(owner, kind="stable")
            owner, out = owner[order], out[order]
        pointers = np.searchsorted(owner, np.arange(size * count + 1))
        summed = run_totals(self.rates.at(out), pointers)
        longest = int(np.diff(pointers).max(initial=0))
        shape = (size, count)
        return (
            Doubled(summed.high.reshape(shape), summed.low.reshape(shape)),
            (self.rate_error + run_error(longest)) * (1.0 + 1e-12),
        )

    def crossing(self, leaving: Flags, entering: Flags) -> tuple[Doubled, float]:
        """Return the total rate from each state of some into any of others, Doubled[n], with its relative error."""
        out = entering[self.target]
        out &= np.repeat(leaving, np.diff(self.pointers))
        number = np.arange(self.n, dtype=np.int32)
        summed, error = self._absorbed(np.flatnonzero(out), number, np.zeros(self.n, dtype=np.int8), 1, self.n)
        return Doubled(summed.high[:, 0], summed.low[:, 0]), error


def entered_first(pattern: csr_array, frontier: NDArray[np.integer[Any]], reached: Flags) -> NDArray[np.integer[Any]]:
    """Return the states entered from a frontier that were not reached before, ascending."""
    entered: NDArray[np.integer[Any]]
    if frontier.size * 64 < reached.size:
        entered = pattern[frontier].indices
        if entered.size * 16 < reached.size:
            entered = np.unique(entered)
            return np.asarray(entered[~reached[entered]])
    flags = np.zeros_like(reached)
    for begin in range(0, frontier.size, _ROWS):
        flags[_entered(pattern, frontier[begin : begin + _ROWS])] = True
    flags &= ~reached
    return np.flatnonzero(flags)


def _entered(pattern: csr_array, frontier: NDArray[np.integer[Any]]) -> NDArray[np.integer[Any]]:
    """Return what some ascending states enter, with repetitions."""
    first, last = int(frontier[0]), int(frontier[-1]) + 1
    if last - first > 4 * frontier.size:
        found: NDArray[np.integer[Any]] = pattern[frontier].indices
        return found
    # Hardly any gaps: a stretch of the matrix is read as it lies.
    entered: NDArray[np.integer[Any]] = pattern.indices[pattern.indptr[first] : pattern.indptr[last]]
    if last - first == frontier.size:
        return entered
    here = np.zeros(last - first, dtype=bool)
    here[frontier - first] = True
    return np.asarray(entered[np.repeat(here, np.diff(pattern.indptr[first : last + 1]))])


def stretch(matrix: csr_array, first: int, last: int) -> csr_array:
    """Return the rows ``first .. last - 1`` of a sparse matrix; values and columns stay shared with it."""
    here = slice(int(matrix.indptr[first]), int(matrix.indptr[last]))
    rows = csr_array((last - first, matrix.shape[1]), dtype=matrix.dtype)
    # Given to the constructor, stretches of a larger array would be copied.
    rows.data, rows.indices = matrix.data[here], matrix.indices[here]
    rows.indptr = matrix.indptr[first : last + 1] - matrix.indptr[first]
    return rows


def by_target(chain: Generator) -> NDArray[np.integer[Any]]:
    """Return the order of the transitions by target then source (a transposition, cheaper than sorting)."""
    index = np.arange(chain.source.size, dtype=chain.pointers.dtype)
    return np.asarray(csr_array((index, chain.target, chain.pointers), shape=(chain.n, chain.n)).tocsc().data)


@dataclass(frozen=True, eq=False)
class Restriction:
    """A chain on some states of a larger one, with the rates out of it.

    Attributes
    ----------
    chain : Generator
        The rates among the k kept states.
    members : int32[k]
        Their numbers in the larger chain.
    absorption : Doubled[k, c]
        Rates into each of c classes of absorbing states.
    absorption_error : float
        Relative error of each of these.
    """

    chain: Generator
    members: Numbers
    absorption: Doubled
    absorption_error: float


def _ascending(n: int, tail: Numbers, head: Numbers) -> tuple[Numbers, Numbers, NDArray[np.integer[Any]]]:
    """Return transitions in order of source then target, with where each stood.

    Turning into a sparse matrix does it faster than sorting.
    """
    place: NDArray[Any] = np.arange(tail.size, dtype=np.int32 if tail.size < 2**31 else np.int64)
    numbered = coo_array((place, (tail, head)), shape=(n, n))
    numbered.has_canonical_format = True  # nothing may be added up here
    rows = numbered.tocsr()
    rows.has_sorted_indices = False
    rows.sort_indices()
    sources = np.repeat(np.arange(n, dtype=np.int32), np.diff(rows.indptr))
    return sources, rows.indices.astype(np.int32, copy=False), np.asarray(rows.data)


def _pieces(size: int) -> Iterator[slice]:
    return (slice(begin, begin + _PIECE) for begin in range(0, size, _PIECE))


def _normalised(high: Floats, low: Floats) -> Doubled:
    """Return sums of two floats with the nearest float in front; what is so already is not copied."""
    if all(bool((high[part] + low[part] == high[part]).all()) for part in _pieces(high.size)):
        return Doubled(high, low)
    found = Doubled(np.empty_like(high), np.empty_like(high))
    for part in _pieces(high.size):
        found.high[part], found.low[part] = two_sum(high[part], low[part])
    return found


def _ascend(tail: Numbers, head: Numbers) -> bool:
    """Whether transitions are sorted by source then target, parallel ones next to each other."""
    for part in _pieces(tail.size - 1):
        after = slice(part.start + 1, min(part.stop + 1, tail.size))
        now = slice(part.start, after.stop - 1)
        same = tail[after] == tail[now]
        if not bool(((tail[after] > tail[now]) | (same & (head[after] >= head[now]))).all()):
            return False
    return True


def as_flags(states: ArrayLike, n: int) -> Flags:
    """Return a fresh array of flags from flags, one number or a list of numbers."""
    given = np.asarray(states)
    if given.dtype == np.bool_:
        if given.shape != (n,):
            raise UsageError(f"flags of shape {given.shape} for {n} states; expected one flag per state")
        return given.copy()
    flags = np.zeros(n, dtype=bool)
    numbers = given.reshape(-1).astype(np.int64)
    if numbers.size and (numbers.min() < 0 or numbers.max() >= n):
        raise UsageError(f"state number outside 0 .. {n - 1}")
    flags[numbers] = True
    return flags


def aggregate(
    n: int,
    source: ArrayLike,
    target: ArrayLike,
    high: ArrayLike,
    low: ArrayLike | None = None,
    *,
    rate_error: float = RATE_ERROR,
) -> Generator:
    """Return the generator of raw transitions: parallel ones added, rates of zero and self loops left out.

    Parameters
    ----------
    n : int
        Number of states.
    source, target : int[k]
        Where each transition leaves and enters.
    high, low : float64[k]
        Rate of each as a sum of two floats, not negative.
    rate_error : float
        Relative distance of ``high + low`` from the exact rate, at most.  Ordinary floats taken as exact have 0.

    Raises
    ------
    UsageError
        Arrays of unequal length, a state number out of range, a negative or non-finite rate.
    NotReached
        A rate outside 1e-150 .. 1e150 (see `SMALLEST_RATE`).
    """
    tail, head = np.asarray(source).reshape(-1), np.asarray(target).reshape(-1)
    first = np.asarray(high, dtype=np.float64).reshape(-1)
    second = np.zeros_like(first) if low is None else np.asarray(low, dtype=np.float64).reshape(-1)
    if not tail.size == head.size == first.size == second.size:
        raise UsageError("transitions given by arrays of unequal length")
    if tail.size and (min(tail.min(), head.min()) < 0 or max(tail.max(), head.max()) >= n):
        raise UsageError(f"a transition names a state outside 0 .. {n - 1}")
    tail, head = tail.astype(np.int32, copy=False), head.astype(np.int32, copy=False)
    rates = _normalised(first, second)
    if first.size and not (np.isfinite(rates.high.max()) and rates.high.min() >= 0.0):
        raise UsageError("a rate is negative or not finite")
    keep = rates.high > 0.0
    keep &= tail != head
    if not keep.all():
        tail, head, rates = tail[keep], head[keep], rates.at(keep)
    least, most = rates.high.min(initial=1.0), rates.high.max(initial=1.0)
    if least < SMALLEST_RATE or most > LARGEST_RATE:
        raise NotReached(
            f"rates from {least:.3g} to {most:.3g}: the bounds hold for rates from {SMALLEST_RATE:g} "
            f"to {LARGEST_RATE:g}; change the unit of time"
        )
    if not _ascend(tail, head):
        tail, head, order = _ascending(n, tail, head)
        rates = rates.at(order)
    fresh = np.ones(tail.size, dtype=bool)
    np.not_equal(head[1:], head[:-1], out=fresh[1:])
    fresh[1:] |= tail[1:] != tail[:-1]
    if fresh.all():
        return Generator(n, tail, head, rates, rate_error)
    pointers = np.append(np.flatnonzero(fresh), tail.size)
    summed = run_totals(rates, pointers)
    return Generator(n, tail[fresh], head[fresh], summed, rate_error + run_error(int(np.diff(pointers).max())))
