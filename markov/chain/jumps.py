"""Jumps: what happens to a chain at one fixed instant, as a map of chances.

A jump moves every state to others with given chances; a state that it does not list stays.  Weights of states are
mapped forwards in double-double: each entry is a sum of non-negative products, so its relative error is that of one
product and of one tree of additions, whatever the chances are.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.chain.bounds import Flags, Floats
from markov.chain.doubled import MULTIPLY, UNIT, Doubled, add, multiply, total_error, totals
from markov.chain.generator import RATE_ERROR
from markov.errors import UsageError

#: How far the chances of one state may be from adding up to 1: they are rounded numbers.
_SUM = 1e-12


@dataclass(frozen=True, eq=False)
class Jump:
    """Chances between n states at one instant, sorted by target; states that stay are listed as well.

    Make one with `jump`, which establishes what is promised here.

    Attributes
    ----------
    n : int
        Number of states.
    source, target : int64[k]
        Where each chance leads from and to.
    chance : Doubled[k]
    error : float
        Relative distance of each chance from the exact one, at most.
    """

    n: int
    source: NDArray[np.int64]
    target: NDArray[np.int64]
    chance: Doubled
    error: float

    @cached_property
    def rounding(self) -> float:
        """Relative error of `forwards` beside that of the weights."""
        longest = int(np.bincount(self.target, minlength=1).max())
        return (self.error + MULTIPLY + total_error(longest)) * (1.0 + 1e-9)

    def forwards(self, weights: Doubled) -> Doubled:
        """Return weights after the jump, Doubled[n], of those before it; relative error `rounding` on top."""
        return totals(multiply(weights.at(self.source), self.chance), self.target, self.n)

    def dense(self) -> Doubled:
        """Return the chances as a matrix, Doubled[n, n]."""
        high, low = np.zeros((self.n, self.n)), np.zeros((self.n, self.n))
        high[self.source, self.target], low[self.source, self.target] = self.chance
        return Doubled(high, low)

    def reach(self, flags: Flags) -> Flags:
        """Return which states can be entered from some others, bool[n]."""
        entered = np.zeros(self.n, dtype=bool)
        entered[self.target[flags[self.source]]] = True
        return entered

    def reach_back(self, flags: Flags) -> Flags:
        """Return from which states some others can be entered, bool[n]."""
        before = np.zeros(self.n, dtype=bool)
        before[self.source[flags[self.target]]] = True
        return before

    def passages(self, leaving: Flags, entering: Flags) -> tuple[Floats, float]:
        """Return the chance to pass from each of some states into any of some others, with its relative error.

        Parameters
        ----------
        leaving, entering : bool[n]
            A state outside `leaving` gets 0.  The two may overlap: their meaning may change at the instant.
        """
        counted = leaving[self.source] & entering[self.target]
        order = np.argsort(self.source[counted], kind="stable")
        owner = self.source[counted][order]
        summed = totals(self.chance.at(counted).at(order), owner, self.n)
        longest = int(np.bincount(owner, minlength=1).max())
        return np.minimum(summed.high + summed.low, 1.0), self.error + total_error(longest) + 2 * UNIT

    def only_into(self, allowed: Flags) -> Jump:
        """Return the jump with chances into other states left out (for chains that are stopped)."""
        keep = allowed[self.target]
        return Jump(self.n, self.source[keep], self.target[keep], self.chance.at(keep), self.error)


def jump(
    n: int,
    source: ArrayLike,
    target: ArrayLike,
    high: ArrayLike,
    low: ArrayLike | None = None,
    *,
    error: float = RATE_ERROR,
) -> Jump:
    """Return a jump from raw chances: parallel ones added, states without any staying.

    Parameters
    ----------
    n : int
        Number of states.
    source, target : int[k]
        Where each chance leads from and to; the two may agree.
    high, low : float64[k]
        Each chance as a sum of two floats, not negative; those of one state add up to 1.
    error : float
        Relative distance of ``high + low`` from the exact chance, at most.

    Raises
    ------
    UsageError
        Arrays of unequal length, a state out of range, a chance that is negative, or chances that do not add up to 1.
    """
    tail, head = np.asarray(source, dtype=np.int64).reshape(-1), np.asarray(target, dtype=np.int64).reshape(-1)
    first = np.asarray(high, dtype=np.float64).reshape(-1)
    second = np.zeros_like(first) if low is None else np.asarray(low, dtype=np.float64).reshape(-1)
    if not tail.size == head.size == first.size == second.size:
        raise UsageError("chances given by arrays of unequal length")
    if tail.size and (min(tail.min(), head.min()) < 0 or max(tail.max(), head.max()) >= n):
        raise UsageError(f"a chance names a state outside 0 .. {n - 1}")
    if not (np.isfinite(first).all() and (first >= 0.0).all()):
        raise UsageError("a chance is negative or not finite")
    listed = np.bincount(tail, minlength=n) > 0
    sums = np.bincount(tail, weights=first, minlength=n)
    if bool((np.abs(sums[listed] - 1.0) > _SUM).any()):
        state = int(np.flatnonzero(listed & (np.abs(sums - 1.0) > _SUM))[0])
        raise UsageError(f"the chances of state {state} add up to {sums[state]}, not to 1")
    stay = np.flatnonzero(~listed)
    tail, head = np.concatenate((tail, stay)), np.concatenate((head, stay))
    given = add(Doubled(first, np.zeros_like(first)), Doubled(second, np.zeros_like(second)))
    chance = Doubled(np.concatenate((given.high, np.ones(stay.size))), np.concatenate((given.low, np.zeros(stay.size))))
    keep = chance.high > 0.0
    tail, head, chance = tail[keep], head[keep], chance.at(keep)
    order = np.lexsort((tail, head))
    tail, head, chance = tail[order], head[order], chance.at(order)
    fresh = np.ones(tail.size, dtype=bool)
    fresh[1:] = (tail[1:] != tail[:-1]) | (head[1:] != head[:-1])
    owner = np.cumsum(fresh) - 1
    longest = int(np.bincount(owner, minlength=1).max())
    summed = totals(chance, owner, int(fresh.sum()))
    return Jump(n, tail[fresh], head[fresh], summed, error + total_error(longest))
