"""The chain as the mathematician sees it: numbered states with the rates between them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import coo_array, csr_array

from markov.chain.bounds import Flags, Floats
from markov.chain.doubled import Doubled, total_error, totals, two_sum
from markov.errors import NotReached, UsageError

Numbers = NDArray[np.int32]

#: Rates outside these limits are refused: the error bounds rest on products and quotients of rates being normal floats.
SMALLEST_RATE = 1e-150
LARGEST_RATE = 1e150

#: What the callers of this room promise: ``high + low`` is within this relative distance of the exact rate.
RATE_ERROR = 2.0**-102


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
    def pointers(self) -> NDArray[np.int64]:
        """Where the transitions of each source begin: int64[n + 1]."""
        return np.concatenate(([0], np.cumsum(np.bincount(self.source, minlength=self.n)))).astype(np.int64)

    @cached_property
    def exits(self) -> Doubled:
        """Sum of the rates out of each state, Doubled[n]; relative error at most `exit_error`."""
        return totals(self.rates, self.source, self.n)

    @cached_property
    def exit_error(self) -> float:
        """Relative error of `exits` against the exact chain."""
        longest = int(np.diff(self.pointers).max()) if self.n else 0
        return (self.rate_error + total_error(longest)) * (1.0 + 1e-12)

    def matrix(self) -> csr_array:
        """Return the rates rounded to floats as a sparse matrix, float64[n, n], zero diagonal."""
        values = self.rates.high + self.rates.low
        return csr_array((values, self.target, self.pointers), shape=(self.n, self.n))

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
        keep = np.ones(self.source.size, dtype=bool) if blocked is None else ~blocked[self.source]
        pattern = csr_array(
            (np.ones(int(keep.sum()), dtype=np.int8), (self.source[keep], self.target[keep])), shape=(self.n, self.n)
        )
        frontier: NDArray[np.integer[Any]] = np.flatnonzero(reached)
        while frontier.size:
            frontier = entered_first(pattern, frontier, reached)
            reached[frontier] = True
        return reached

    def reversed(self) -> Generator:
        """Return the chain with every arrow turned around (for questions of reachability)."""
        order = by_target(self)
        return Generator(self.n, self.target[order], self.source[order], self.rates.at(order), self.rate_error)

    def classes(self) -> tuple[int, Numbers]:
        """Return the number of communicating classes with the class of each state."""
        from scipy.sparse.csgraph import connected_components  # late: it takes long to import

        pattern = csr_array(
            (np.ones(self.source.size, dtype=np.int8), self.target, self.pointers), shape=(self.n, self.n)
        )
        count, label = connected_components(pattern, directed=True, connection="strong")
        return int(count), np.asarray(label, dtype=np.int32)

    def closed_classes(self, start: ArrayLike | None = None) -> list[Numbers]:
        """Return the closed communicating classes, each as ascending state numbers.

        Parameters
        ----------
        start : bool[n], int or list of int, optional
            Only classes that can be reached from there.
        """
        count, label = self.classes()
        closed = np.ones(count, dtype=bool)
        closed[label[self.source[label[self.source] != label[self.target]]]] = False
        if start is not None:
            seen = np.zeros(count, dtype=bool)
            seen[label[self.reachable(start)]] = True
            closed &= seen
        order = np.argsort(label, kind="stable")
        ends = np.cumsum(np.bincount(label, minlength=count))
        found = [order[ends[number - 1] if number else 0 : ends[number]] for number in np.flatnonzero(closed)]
        return sorted((np.sort(members).astype(np.int32) for members in found), key=lambda members: int(members[0]))

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
        number = np.full(self.n, -1, dtype=np.int32)
        number[members] = np.arange(members.size, dtype=np.int32)
        inside = number[self.source] >= 0
        within = inside & (number[self.target] >= 0)
        source, target, rates = number[self.source[within]], number[self.target[within]], self.rates.at(within)
        if bool((np.diff(members) < 0).any()):
            order = np.lexsort((target, source))
            source, target, rates = source[order], target[order], rates.at(order)
        chain = Generator(int(members.size), source, target, rates, self.rate_error)
        out = inside & ~within & (np.asarray(label)[self.target] >= 0)
        owner = number[self.source[out]].astype(np.int64) * count + np.asarray(label)[self.target[out]]
        order = np.argsort(owner, kind="stable")
        owner = owner[order]
        summed = totals(self.rates.at(out).at(order), owner, members.size * count)
        longest = int(np.bincount(owner).max()) if owner.size else 0
        shape = (int(members.size), count)
        return Restriction(
            chain,
            np.asarray(members, dtype=np.int32),
            Doubled(summed.high.reshape(shape), summed.low.reshape(shape)),
            (self.rate_error + total_error(longest)) * (1.0 + 1e-12),
        )


def entered_first(pattern: csr_array, frontier: NDArray[np.integer[Any]], reached: Flags) -> NDArray[np.integer[Any]]:
    """Return the states entered from a frontier that were not reached before."""
    entered = pattern[frontier].indices
    if entered.size * 16 < reached.size:
        entered = np.unique(entered)
        return np.asarray(entered[~reached[entered]])
    flags = np.zeros_like(reached)
    flags[entered] = True
    return np.flatnonzero(flags & ~reached)


def by_target(chain: Generator) -> NDArray[np.int64]:
    """Return the order of the transitions by target then source (a transposition, cheaper than sorting)."""
    index = np.arange(chain.source.size, dtype=np.int64)
    turned = csr_array((index, chain.target, chain.pointers), shape=(chain.n, chain.n)).tocsc()
    return np.asarray(turned.data, dtype=np.int64)


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


def _ascending(n: int, tail: NDArray[np.int64], head: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the stable order by source then target.

    Where no transition is parallel to another, turning into a sparse matrix does it faster than sorting.
    """
    numbered = coo_array((np.arange(tail.size, dtype=np.int64), (tail, head)), shape=(n, n)).tocsr()
    if numbered.nnz == tail.size:
        numbered.sort_indices()
        return np.asarray(numbered.data, dtype=np.int64)
    return np.argsort(tail * n + head, kind="stable")


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
    tail, head = np.asarray(source, dtype=np.int64).reshape(-1), np.asarray(target, dtype=np.int64).reshape(-1)
    first = np.asarray(high, dtype=np.float64).reshape(-1)
    second = np.zeros_like(first) if low is None else np.asarray(low, dtype=np.float64).reshape(-1)
    if not tail.size == head.size == first.size == second.size:
        raise UsageError("transitions given by arrays of unequal length")
    if tail.size and (min(tail.min(), head.min()) < 0 or max(tail.max(), head.max()) >= n):
        raise UsageError(f"a transition names a state outside 0 .. {n - 1}")
    first, second = two_sum(first, second)
    if not (np.isfinite(first).all() and (first >= 0.0).all()):
        raise UsageError("a rate is negative or not finite")
    keep = (first > 0.0) & (tail != head)
    tail, head, first, second = tail[keep], head[keep], first[keep], second[keep]
    if first.size and (first.min() < SMALLEST_RATE or first.max() > LARGEST_RATE):
        raise NotReached(
            f"rates from {first.min():.3g} to {first.max():.3g}: the bounds hold for rates from {SMALLEST_RATE:g} "
            f"to {LARGEST_RATE:g}; change the unit of time"
        )
    pair = tail * n + head
    if not bool((pair[1:] > pair[:-1]).all()):
        order = _ascending(n, tail, head)
        pair, first, second = pair[order], first[order], second[order]
    fresh = np.ones(pair.size, dtype=bool)
    fresh[1:] = pair[1:] != pair[:-1]
    owner = np.cumsum(fresh) - 1
    longest = int(np.bincount(owner).max()) if owner.size else 0
    rates = totals(Doubled(first, second), owner, int(fresh.sum()))
    distinct = pair[fresh]
    return Generator(
        n,
        (distinct // n).astype(np.int32),
        (distinct % n).astype(np.int32),
        rates,
        rate_error + total_error(longest),
    )
