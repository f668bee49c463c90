"""One elimination plan for many chains of one pattern, carried out over all samples at once.

Chains whose rates differ but whose transitions connect the same states are eliminated by the same steps.
`compile_chain` works the steps out once: in which order the states go (the one that makes fewest new transitions goes
next), which transitions arise, which products are added to which.  `Compiled` then carries them out on arrays with
the samples in the last axis, in blocks that stay in the cache, so that a step costs one pass over a block and nothing
of the pattern is looked at again.

Method (Grassmann, Taksar, Heyman), as in `markov.chain.elimination`: with ``d_k`` the sum of the rates that leave k
for states not yet eliminated or out of the chain,

    N_ij += (N_ik / d_k) N_kj,

all terms non-negative; an exit rate is never formed as a difference.  Rates of zero are welcome where every state
keeps a way out.

Accuracy.  Floats; ``d_k`` is a sum of m_k terms, the reciprocal, two products and one addition follow, so one step is
off by at most ``phi_k = (m_k + 3) u`` entry by entry, u = 2**-53.  By the argument in `markov.chain.elimination`,
which holds for any order of the states, results are off by at most ``sum_k (2 k phi_k + (m_k + 4) u)`` relatively, to
which come ``2 n`` times the relative error of the rates: `Compiled.error`.  That is about 1e-13 for ten states and
2e-12 for fifty; what is observed against exact arithmetic stays below 1e-14.  Underflow is detected, never passed
over.

Sources: W. K. Grassmann, M. I. Taksar, D. P. Heyman, Regenerative analysis and steady state distributions for Markov
chains, Oper. Res. 33 (1985); H. M. Markowitz, The elimination form of the inverse, Management Sci. 3 (1957), for the
order.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT
from markov.errors import IllPosed, NotReached, TooLarge, UsageError

#: Most products of rates in one elimination; beyond it the samples are better solved one by one.
LARGEST_WORK = 2_000_000
#: Most states, for the same reason.
LARGEST_BATCH = 3000

#: Floats of one block of samples: what the last cache holds; smaller blocks lose more to calls than they gain.
_BLOCK = 1 << 20


#: Products ``first .. last - 1`` are added to the values from a place on, side by side: (first, last, place).
_Run = tuple[int, int, int]


@dataclass(frozen=True)
class _Step:
    """Elimination of one state: where its rates stand among the values."""

    state: int
    out: slice  # its rates to states not yet eliminated, then out of the chain
    heads: tuple[int, ...]  # where they lead; n is out of the chain
    inward: tuple[tuple[int, int], ...]  # (state, value) of the rates into it
    products: tuple[tuple[int, tuple[_Run, ...]], ...]  # (value of a rate into it, where its products are added)


@dataclass(frozen=True, eq=False)
class Compiled:
    """A pattern with its elimination worked out; make one with `compile_chain`.

    Attributes
    ----------
    n : int
        Number of states.
    ground : int or None
        State of a closed class that is kept to the last; None for a chain that ends outside.
    size : int
        Number of rates, those that arise on the way included.
    error : float
        Largest relative error of a result, for rates without error.
    """

    n: int
    ground: int | None
    size: int
    error: float
    sources: NDArray[np.int64]  # of the rates of the caller
    given: NDArray[np.int64]  # where each of them stands
    fill: NDArray[np.int64]  # where the rates stand that arise on the way
    steps: tuple[_Step, ...]

    def stationary(self, rates: ArrayLike) -> Floats:
        """Return the stationary distribution of every sample.

        Parameters
        ----------
        rates : float64[k, s]
            Rate of each transition, in the order given to `compile_chain`, in each of s samples; not negative.

        Returns
        -------
        float64[n, s]
            Columns of sum 1.

        Raises
        ------
        IllPosed
            In a sample there is no path from every state to the ground: zero rates change the classes of the chain.
        NotReached
            Numbers beyond what floats hold on the way.
        """
        if self.ground is None:
            raise UsageError("a stationary distribution needs a pattern compiled with its ground")
        result = np.empty((self.n, _samples(rates)))
        for part, block, values, inverse in self._blocks(rates):
            with _watched():
                self._eliminate(part, block, values, inverse)
                found = result[:, part]
                found[self.ground] = 1.0
                for step in reversed(self.steps):
                    _gather(found, step, values, None)
                found /= found.sum(axis=0)
        return result

    def passages(self, rates: ArrayLike, start: ArrayLike, reward: ArrayLike | None = None) -> Passages:
        """Return time spent, visits and mean time until the chain is left, in every sample.

        Parameters
        ----------
        rates : float64[k, s]
        start : float64[n] or float64[n, s]
            Weights of the states at the start.
        reward : float64[n] or float64[n, s], optional
            Reward per unit of time in each state, not negative; 1 where left out, which makes rewards times.

        Raises
        ------
        IllPosed
            In a sample some state has no way out.
        NotReached
            Numbers beyond what floats hold on the way.
        """
        if self.ground is not None:
            raise UsageError("a chain that is left needs a pattern compiled without a ground")
        count = _samples(rates)
        first, earned = per_sample(start, self.n, count), per_sample(1.0 if reward is None else reward, self.n, count)
        spent, visits, rewards = np.empty((3, self.n, count))
        for part, block, values, inverse in self._blocks(rates):
            with _watched():
                visits[:, part] = self._leaving(block)
                self._eliminate(part, block, values, inverse)
                self._spend(values, inverse, first[:, part], spent[:, part])
                self._earn(values, inverse, earned[:, part], rewards[:, part])
                visits[:, part] *= spent[:, part]
        return Passages(spent, visits, rewards)

    def _leaving(self, block: Floats) -> Floats:
        """Return the rate out of each state, from the rates as given."""
        exits = np.zeros((self.n, block.shape[1]))
        for rate, owner in zip(block, self.sources.tolist(), strict=True):
            exits[owner] += rate
        return exits

    def _spend(self, values: Floats, inverse: Floats, first: Floats, into: Floats) -> None:
        into[:] = first
        for step in self.steps:
            here = into[step.state] * inverse[step.state]
            for head, value in zip(step.heads, values[step.out], strict=True):
                if head < self.n:
                    into[head] += here * value
        for step in reversed(self.steps):
            into[step.state] *= inverse[step.state]
            _gather(into, step, values, into[step.state])

    def _earn(self, values: Floats, inverse: Floats, reward: Floats, into: Floats) -> None:
        into[:] = reward
        for step in self.steps:
            for state, number in step.inward:
                into[state] += values[number] * into[step.state]
        for step in reversed(self.steps):
            gathered = into[step.state]
            for head, value in zip(step.heads, values[step.out], strict=True):
                if head < self.n:
                    gathered += value * into[head]
            gathered *= inverse[step.state]

    def _blocks(self, rates: ArrayLike) -> Iterator[tuple[slice, Floats, Floats, Floats]]:
        """Yield blocks of samples: which they are, their rates, room for the values and for the exit rates."""
        given = np.asarray(rates, dtype=np.float64)
        if given.ndim != 2 or given.shape[0] != self.given.size:
            raise UsageError(f"rates of shape {given.shape}; expected {self.given.size} rates by the number of samples")
        if given.size and not (given.min() >= 0.0 and given.max() < np.inf):
            raise UsageError("a rate is negative or not finite")
        count = given.shape[1]
        width = max(1, min(count, 4096, max(512, _BLOCK // max(1, self.size + self.n))))
        room = np.empty((self.size + self.n, width))  # once: fresh memory costs more than the work on it
        for begin in range(0, count, width):
            part = slice(begin, min(begin + width, count))
            here = room[:, : part.stop - begin]
            yield part, given[:, part], here[: self.size], here[self.size :]

    def _eliminate(self, part: slice, block: Floats, values: Floats, inverse: Floats) -> None:
        """Write the values after elimination, and the reciprocals of the exit rates."""
        values[self.fill] = 0.0
        values[self.given] = block
        work = np.empty((max((len(step.heads) for step in self.steps), default=0), block.shape[1]))
        for step in self.steps:
            out, exits = values[step.out], inverse[step.state]
            np.add.reduce(out, axis=0, out=exits)
            if not exits.all():
                raise IllPosed(
                    f"in sample {part.start + int(np.argmin(exits))} some rates are zero and there is no way on from "
                    f"state {step.state}: the classes of the chain are others than those it was compiled for"
                )
            np.reciprocal(exits, out=exits)
            products = work[: len(step.heads)]
            for number, runs in step.products:
                quotient = values[number]
                np.multiply(quotient, exits, out=quotient)
                np.multiply(out, quotient, out=products)
                for first, last, place in runs:
                    into = values[place : place + last - first]
                    np.add(into, products[first:last], out=into)


def _gather(into: Floats, step: _Step, values: Floats, first: Floats | None) -> None:
    """Add up what flows into a state from those eliminated after it."""
    here = into[step.state]
    if first is None:
        here[:] = 0.0
    for state, number in step.inward:
        here += into[state] * values[number]


@contextmanager
def _watched() -> Iterator[None]:
    """Within it underflow, overflow and invalid operations of floats raise NotReached."""
    try:
        with np.errstate(under="raise", over="raise", invalid="raise"):
            yield
    except FloatingPointError as error:
        raise NotReached(f"the rates lie too far apart for floats: {error}") from error


@dataclass(frozen=True, eq=False)
class Passages:
    """What happens until a chain is left, in s samples; float64[n, s] each.

    Attributes
    ----------
    spent : float64[n, s]
        Expected time in each state, from the start weights.
    visits : float64[n, s]
        Expected number of times that each state is left.
    rewards : float64[n, s]
        Expected reward until the chain is left, from each state; the mean time where every reward is 1.
    """

    spent: Floats
    visits: Floats
    rewards: Floats


def _samples(rates: ArrayLike) -> int:
    shape = np.shape(rates)
    if len(shape) != 2:
        raise UsageError(f"rates of shape {shape}; expected rates by samples")
    return int(shape[1])


def per_sample(values: ArrayLike, n: int, count: int) -> Floats:
    """Return values per state, given once or for each sample, as float64[n, s]."""
    given = np.asarray(values, dtype=np.float64)
    if given.ndim == 1:
        given = given[:, None]
    try:
        return np.broadcast_to(given, (n, count))
    except ValueError:
        raise UsageError(f"values of shape {given.shape} for {n} states and {count} samples") from None


def compile_chain(n: int, source: ArrayLike, target: ArrayLike, *, ground: int | None = None) -> Compiled:
    """Work out the elimination of every chain with transitions between the same states.

    Parameters
    ----------
    n : int
        Number of states.
    source, target : int[k]
        Where each transition leaves and enters, without duplicates; a target of n is out of the chain.
    ground : int, optional
        For one closed class: the state that is kept to the last, best a likely one.  Left out: the chain is left in the
        end, from every state.

    Raises
    ------
    UsageError
        Transitions that are no pattern of such a chain.
    TooLarge
        More than `LARGEST_BATCH` states or `LARGEST_WORK` products.
    """
    if n > LARGEST_BATCH:
        raise TooLarge(f"batches are made for {LARGEST_BATCH:,} states, not {n:,}; solve the samples one by one")
    tail, head = np.asarray(source, np.int64).reshape(-1), np.asarray(target, np.int64).reshape(-1)
    if tail.size != head.size:
        raise UsageError("transitions given by arrays of unequal length")
    if tail.size and (min(tail.min(), head.min()) < 0 or tail.max() >= n or head.max() > n or (tail == head).any()):
        raise UsageError(f"a transition names a state outside 0 .. {n - 1} or leads back to its source")
    if np.unique(tail * (n + 1) + head).size != tail.size:
        raise UsageError("two transitions between the same states; add them up first")
    if ground is not None and not (0 <= ground < n and (head < n).all()):
        raise UsageError("a closed class has a ground among its states and no way out of the chain")
    into: list[set[int]] = [set() for _ in range(n + 1)]
    out: list[set[int]] = [set() for _ in range(n)]
    for i, j in zip(tail.tolist(), head.tolist(), strict=True):
        out[i].add(j)
        into[j].add(i)
    order, heads, tails = _order(n, out, into, ground)
    return _laid_out(n, tail, head, ground, order, heads, tails)


def _order(
    n: int, out: list[set[int]], into: list[set[int]], ground: int | None
) -> tuple[list[int], list[list[int]], list[list[int]]]:
    """Return the states in the order in which they go, each with where it leads and what leads to it at that moment."""
    left = set(range(n)) - ({ground} if ground is not None else set())
    order, heads, tails = [], [], []
    work = 0
    while left:
        state = min(left, key=lambda each: (len(into[each]) * len(out[each]), -each))
        left.remove(state)
        before, after = into[state], out[state]
        for i in before:
            out[i].discard(state)
            fresh = after - out[i] - {i}
            out[i] |= fresh
            for j in fresh:
                into[j].add(i)
        for j in after:
            into[j].discard(state)
        work += len(before) * len(after)
        if work > LARGEST_WORK:
            raise TooLarge(f"elimination of {n} states takes more than {LARGEST_WORK:,} products a sample")
        order.append(state)
        heads.append(sorted(after))
        tails.append(sorted(before))
    return order, heads, tails


def _laid_out(
    n: int,
    tail: NDArray[np.int64],
    head: NDArray[np.int64],
    ground: int | None,
    order: list[int],
    heads: list[list[int]],
    tails: list[list[int]],
) -> Compiled:
    """Give every rate its place: those of one state side by side, in the order in which their heads go, last first."""
    rank = {state: number for number, state in enumerate(order)}
    rank[n] = n
    if ground is not None:
        rank[ground] = n - 1
    rows: dict[int, list[int]] = {state: list(after) for state, after in zip(order, heads, strict=True)}
    if ground is not None:
        rows[ground] = []
    for state, before in zip(order, tails, strict=True):
        for i in before:
            rows[i].append(state)
    place: dict[tuple[int, int], int] = {}
    for state, row in rows.items():
        for j in sorted(row, key=lambda each: rank[each], reverse=True):
            place[state, j] = len(place)
    steps = []
    bound = 0.0
    for number, (state, after, before) in enumerate(zip(order, heads, tails, strict=True)):
        ahead = sorted(after, key=lambda each: rank[each], reverse=True)
        first = place[state, ahead[0]] if ahead else 0
        products = tuple((place[i, state], _runs([-1 if j == i else place[i, j] for j in ahead])) for i in before)
        inward = tuple((i, place[i, state]) for i in before)
        steps.append(_Step(state, slice(first, first + len(ahead)), tuple(ahead), inward, products))
        terms = len(ahead)
        bound += 2 * (n - number) * (terms + 3) * UNIT + (max(terms, len(before)) + 4) * UNIT
    given = np.array([place[pair] for pair in zip(tail.tolist(), head.tolist(), strict=True)], np.int64)
    fill = np.setdiff1d(np.arange(len(place)), given)
    return Compiled(n, ground, len(place), bound * (1.0 + 1e-9), tail, given, fill, tuple(steps))


def _runs(places: list[int]) -> tuple[_Run, ...]:
    """Return the stretches of places that follow each other; -1 stands for a product that is dropped."""
    runs: list[_Run] = []
    for number, place in enumerate(places):
        if place < 0:
            continue
        if runs and runs[-1][1] == number and runs[-1][2] + number - runs[-1][0] == place:
            runs[-1] = (runs[-1][0], number + 1, runs[-1][2])
        else:
            runs.append((number, number + 1, place))
    return tuple(runs)
