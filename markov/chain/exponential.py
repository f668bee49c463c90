"""Chains of up to a few hundred states over one fixed time: as a matrix, prepared once for many starts and rewards.

With h = t / 2**s so small that ``L h = 1`` bounds 4/3 of every exit rate, the rungs ``E_k = exp(Q h 2**k)`` of
`markov.chain.ladder` end with ``E_s = exp(Q t)``.  An added state that only decays fixes L, so no rest of time is left.
Integrals need no more matrices, only products of rungs with columns or a row: with ``G_k r`` the integral of
``exp(Q u) r`` over ``[0, h 2**k]`` and ``K_k r`` that of ``u exp(Q u) r``,

    G_{k+1} r = G_k r + E_k (G_k r),        K_{k+1} r = K_k r + E_k (h 2**k G_k r + K_k r),
    x G_s = x (I + E_{s-1}) ... (I + E_0) G_0,

and from the series of one expected jump, P = I + Q h,

    G_0 r = h sum_k Pr(N > k) P**k r,       K_0 r = h**2 sum_k (k + 1) Pr(N > k + 1) P**k r.

All terms are non-negative; relative errors are counted as in the ladder, absolute ones come from the cut of the
series.  For K the cut after `last` terms leaves out at most ``sum_{j > last} j Pr(N > j) <= 2 / last!``, since ``Pr(N
> j) <= 1 / (j + 1)!`` for a mean of 1.

Source: derived here, on the sources of `markov.chain.ladder`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np

from markov.chain import ladder
from markov.chain.carried import SLACK
from markov.chain.doubled import (
    ADD,
    MULTIPLY,
    UNDERFLOW,
    Doubled,
    W,
    add,
    exact,
    multiply,
    product,
    product_error,
    scale,
    zeros,
)
from markov.chain.generator import Generator
from markov.chain.ladder import Ladder
from markov.chain.poisson import ShortPoisson, short_poisson
from markov.errors import NotReached

#: Exit rates times h are at most this; the added state has just this much, which makes L h exactly 1.
_LARGEST = 0.75


@dataclass(frozen=True, eq=False)
class Columns:
    """Values per state in c columns, Doubled[n, c], with their errors relative to the exact ones."""

    values: Doubled
    relative: float
    absolute: float  # of one entry

    @property
    def largest(self) -> float:
        """Bound of every exact entry."""
        most = float(self.values.high.max()) if self.values.high.size else 0.0
        return (most + self.absolute) * SLACK


@dataclass(frozen=True, eq=False)
class Exponential:
    """``exp(Q t)`` of n states for one t, with all rungs on the way.

    Attributes
    ----------
    rungs : tuple of Rung
        E_0 to E_s over n + 1 states, the last one having been added.
    step : Doubled
        h, a number.
    """

    n: int
    prepared: Ladder
    step: Doubled

    @property
    def doublings(self) -> int:
        """How often the time h is doubled: s."""
        return len(self.prepared.rungs) - 1

    @property
    def moves(self) -> Doubled:
        """Probabilities of being in each state at the end from each at the beginning, Doubled[n, n]."""
        return self._rung(self.doublings)

    @property
    def relative(self) -> float:
        """Relative error of `moves`."""
        return self.prepared.rungs[-1].moves_relative

    @property
    def absolute(self) -> float:
        """Absolute error of the sum over a row of `moves`."""
        return self.prepared.rungs[-1].moves_absolute

    def _rung(self, number: int) -> Doubled:
        return self.prepared.rungs[number].moves.at((slice(0, self.n), slice(0, self.n)))

    def _series(self) -> tuple[Doubled, ShortPoisson, float]:
        """Return P, the Poisson weights of one expected jump, and the relative error of a sum of powers."""
        last = self.prepared.terms
        poisson = short_poisson(Fraction(1), last)
        own = last * (self.prepared.jumps_relative + product_error(self.n)) + product_error(last + 1) + poisson.error
        return self.prepared.jumps.at((slice(0, self.n), slice(0, self.n))), poisson, own

    def gains(self, rewards: Doubled, error: float) -> Columns:
        """Return the integral of rewards over the time from each state.

        Parameters
        ----------
        rewards : Doubled[n, c]
            Per unit of time, relative error `error`.
        """
        first, _ = self._first(rewards, error, squared=False)
        for number in range(self.doublings):
            first = self._grown(number, first, first)
        return first

    def weighted_gains(self, rewards: Doubled, error: float) -> tuple[Columns, Columns]:
        """Return the integral of the rewards, and that of the time passed times the rewards."""
        once, twice = self._first(rewards, error, squared=True)
        assert twice is not None
        for number in range(self.doublings):
            length = scale(self.step, number)
            passed = Columns(
                add(multiply(once.values, length), twice.values),
                (max(once.relative + MULTIPLY + 2 * W, twice.relative) + ADD) * SLACK,
                (once.absolute * float(length.high) + twice.absolute) * SLACK,
            )
            twice = self._grown(number, twice, passed)
            once = self._grown(number, once, once)
        return once, twice

    @cached_property
    def ages(self) -> Columns:
        """Integral of the time passed over the time before absorption, from each state, Doubled[n, 1]."""
        ones = np.ones((self.n, 1))
        return self.weighted_gains(Doubled(ones, np.zeros_like(ones)), 0.0)[1]

    def _grown(self, number: int, here: Columns, later: Columns) -> Columns:
        """Return ``here + E_k later``."""
        rung, mu = self.prepared.rungs[number], product_error(self.n)
        relative = (max(here.relative, later.relative + rung.moves_relative + mu) + ADD) * SLACK
        spread = rung.moves_absolute * later.largest + later.absolute + self.n * UNDERFLOW
        values = add(here.values, product(self._rung(number), later.values))
        return Columns(values, relative, (here.absolute + spread) * SLACK)

    def _first(self, rewards: Doubled, error: float, *, squared: bool) -> tuple[Columns, Columns | None]:
        n, last = self.n, self.prepared.terms
        jumps, poisson, own = self._series()
        seen = [rewards]
        for _ in range(last):
            seen.append(product(jumps, seen[-1]))
        flat = Doubled(
            np.stack([each.high.reshape(-1) for each in seen]), np.stack([each.low.reshape(-1) for each in seen])
        )
        shape = rewards.high.shape
        most = float(rewards.high.max()) * SLACK if rewards.high.size else 0.0
        lost = (2.0 * last + 10.0) * (last + n) * UNDERFLOW
        length = float(self.step.high) * SLACK
        relative = (own + error + MULTIPLY + 2 * W) * SLACK
        summed = product(poisson.beyond.at((None, slice(None))), flat)
        summed = multiply(Doubled(summed.high.reshape(shape), summed.low.reshape(shape)), self.step)
        once = Columns(summed, relative, ((poisson.missing_beyond * most + lost) * length) * SLACK + 2.0**-1060)
        if not squared:
            return once, None
        counts = np.arange(1.0, last + 1.0)
        times = multiply(Doubled(counts, np.zeros_like(counts)), poisson.beyond.at(slice(1, None)))
        summed = product(times.at((None, slice(None))), flat.at(slice(0, last)))
        summed = multiply(
            Doubled(summed.high.reshape(shape), summed.low.reshape(shape)), multiply(self.step, self.step)
        )
        cut = 2.0 / math.factorial(last)
        off = ((cut * most + lost * last) * length * length) * SLACK + 2.0**-1060
        return once, Columns(summed, (relative + 3 * MULTIPLY + 2 * W) * SLACK, off)

    def spent(self, starts: Doubled) -> tuple[Doubled, float, float]:
        """Return the time spent in each state, Doubled[r, n], from each of several start weights Doubled[r, n].

        With its relative error, that of the start apart, and its absolute error summed over all states, of any of them.
        """
        n, mu, last = self.n, product_error(self.n), self.prepared.terms
        row, relative, absolute = starts, 0.0, 0.0
        mass = float(starts.high.sum(axis=1).max(initial=0.0)) * SLACK
        for number in range(self.doublings - 1, -1, -1):
            rung = self.prepared.rungs[number]
            row = add(row, product(row, self._rung(number)))
            relative = (relative + rung.moves_relative + mu + ADD) * SLACK
            absolute = (2.0 * absolute + mass * rung.moves_absolute + n * n * UNDERFLOW) * SLACK
            mass *= 2.0 * SLACK
        jumps, poisson, own = self._series()
        seen = [row]
        for _ in range(last):
            seen.append(product(seen[-1], jumps))
        walk = Doubled(
            np.stack([each.high.reshape(-1) for each in seen]), np.stack([each.low.reshape(-1) for each in seen])
        )
        summed = product(poisson.beyond.at((None, slice(None))), walk)
        shape = starts.high.shape
        values = multiply(Doubled(summed.high.reshape(shape), summed.low.reshape(shape)), self.step)
        relative = (relative + own + MULTIPLY + 2 * W) * SLACK
        lost = absolute + poisson.missing_beyond * mass + (2.0 * last + 10.0) * n * n * UNDERFLOW
        return values, relative, lost * float(self.step.high) * SLACK + 2.0**-1060


def exponential(chain: Generator, loss: Doubled | None, loss_error: float, time: Fraction) -> Exponential:
    """Return the transition matrix of a chain for one time.

    Parameters
    ----------
    chain : Generator
        n states.
    loss : Doubled[n] or None
        Rate of absorption from each state, relative error `loss_error`.
    time : Fraction
        Exact, positive.

    Raises
    ------
    NotReached
        More doublings than keep any digits.
    """
    exits = chain.exits if loss is None else add(chain.exits, loss)
    jumps = (float(exits.high.max()) if chain.n else 0.0) * float(time) * (1.0 + 1e-9)
    if not jumps < 1e250:
        raise NotReached(f"{jumps:.3g} expected jumps are beyond all bounds")
    doublings = max(0, math.ceil(math.log2(jumps / _LARGEST))) if jumps > 0.0 else 0
    step = exact([time / 2**doublings]).at(0)
    lost = zeros(chain.n + 1)
    if loss is not None:
        scaled = multiply(loss, step)
        lost.high[:-1], lost.low[:-1] = scaled
    lost.high[-1] = _LARGEST
    rates = multiply(chain.rates, step)
    slower = Generator(chain.n + 1, chain.source, chain.target, rates, chain.rate_error + MULTIPLY + 2 * W)
    if rates.high.size and float(rates.high.min()) < 1e-250:
        raise NotReached(f"a rate of which {rates.high.min():.3g} jumps are expected in one step")
    prepared = ladder.build(
        slower, lost, loss_error + MULTIPLY + 2 * W, zeros(chain.n + 1, 0), 0.0, [Fraction(2) ** doublings]
    )
    if prepared.exponent != 0 or len(prepared.rungs) != doublings + 1:
        raise NotReached("the time of a segment could not be divided into doublings")
    return Exponential(chain.n, prepared, step)
