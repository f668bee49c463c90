"""Transient values of chains of up to a few hundred states by scaling then squaring in double-double, fully proven.

Let L be a power of two above 1.25 times the largest exit rate and ``P = I + Q/L``: non-negative, row sums at most 1,
diagonal at least 0.2.  One rung of the ladder covers ``h = 1/L``, one expected jump:

    E_0 = exp(Q h)                       = sum_k e**-1 / k! P**k,
    G_0 = integral over [0, h] of exp(Q s) r ds = (1/L) sum_k Pr(more than k jumps) P**k r,
    E_{k+1} = E_k E_k,      G_{k+1} = G_k + E_k G_k      (rung k covers h 2**k).

A time ``t = h (N + f)``, N a whole number and ``0 <= f < 1`` exactly, is climbed by the series for f applied to the
start vector and by the rungs of the binary digits of N.  Absorption into a class is the integral of its absorption
rates, so a probability of 1e-30 is a sum of non-negative terms and never a complement.

Bound.  All data are non-negative.  If ``E^`` is within ``eps E + A`` of E entry by entry, where A has row sums at
most alpha, then since E has row sums at most 1,

    |E^ E^ - E E| <= (2 eps + eps**2) E E + A',     row sums of A' at most (1 + eps) 2 alpha + alpha**2,

and the computed product adds ``mu = product_error(n)`` relatively and the underflow of its terms absolutely:
``eps_{k+1} = 2 eps_k + eps_k**2 + mu``, so ``eps_k`` is about ``2**k (eps_0 + mu)``.  Likewise for G, with
``beta_{k+1} = 2 beta_k + alpha_k (max G_k + beta_k)``.  The first rung has ``eps_0 <= K eps_P + (K + 2 b + 2 c) mu``
for K terms in c blocks of b powers, and alpha_0 the tail of the series, about ``1e-100 / 2**s``.  All three are
carried along as floats with a factor that covers their own rounding.  With ``n = 100`` and ``L t = 1e11`` the
relative error is below 1e-16; rounding the result to floats is then the larger part.

Sources: the entrywise view follows J. Xue, Q. Ye, Computing exponentials of essentially non-negative matrices
entrywise to high relative accuracy, Math. Comp. 82 (2013); blocks of powers: M. S. Paterson, L. J. Stockmeyer, SIAM
J. Comput. 2 (1973). The bound is derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain.doubled import (
    ADD,
    UNDERFLOW,
    Doubled,
    W,
    add,
    difference,
    plain,
    product,
    product_error,
    scale,
    zeros,
)
from markov.chain.generator import Generator
from markov.chain.poisson import needed_terms, short_poisson
from markov.errors import NotReached

#: Each doubling may cost a binary digit of 104; beyond this no bound could hold, and the work would not end.
MOST_DOUBLINGS = 160

#: What truncating all series together may cost absolutely.
_TRUNCATION = 1e-100
#: Covers products of errors and the rounding of the errors themselves while they stay below 1e-10.
_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Rung:
    """What happens during ``2**k / L``: transition probabilities with integrals of the rewards, with their errors."""

    moves: Doubled
    moves_relative: float
    moves_absolute: float  # of the sum over a row
    gains: Doubled
    gains_relative: float
    gains_absolute: float  # of one entry
    gains_largest: float


@dataclass(frozen=True, eq=False)
class Ladder:
    """A chain prepared for transient values over n states with c rewards.

    Attributes
    ----------
    exponent : int
        ``L = 2**exponent``.
    jumps : Doubled[n, n]
        ``P = I + Q/L``, relative error `jumps_relative`.
    rewards : Doubled[n, c]
        Relative error `rewards_relative`.
    terms : int
        Terms of the series.
    rungs : tuple of Rung
        As many as the longest time needs.
    """

    exponent: int
    jumps: Doubled
    jumps_relative: float
    rewards: Doubled
    rewards_relative: float
    terms: int
    rungs: tuple[Rung, ...]

    @property
    def n(self) -> int:
        """Number of states."""
        return int(self.jumps.high.shape[0])


@dataclass(frozen=True, eq=False)
class Climb:
    """State weights with integrals at m times.

    Attributes
    ----------
    weights : Doubled[m, n]
        With ``relative`` and, for the sum over a row, ``absolute`` error of each time.
    integrals : Doubled[m, c]
        With their errors per time.
    """

    weights: Doubled
    relative: tuple[float, ...]
    absolute: tuple[float, ...]
    integrals: Doubled
    integrals_relative: tuple[float, ...]
    integrals_absolute: tuple[float, ...]


def _parts(exponent: int, time: Fraction) -> tuple[int, Fraction]:
    jumps = time * Fraction(2) ** exponent
    whole = math.floor(jumps)
    return whole, jumps - whole


def _uniform(chain: Generator, loss: Doubled | None, loss_error: float) -> tuple[int, Doubled, float]:
    """Return the exponent of L, P = I + Q/L, and the relative error of P."""
    exits = chain.exits if loss is None else add(chain.exits, loss)
    exits_error = max(chain.exit_error, 0.0 if loss is None else loss_error) + ADD
    largest = float(exits.high.max()) if chain.n else 0.0
    exponent = math.ceil(math.log2(1.25 * largest)) if largest > 0.0 else 0
    if chain.high.size and math.ldexp(float(chain.high.min()), -exponent) < 1e-250:
        raise NotReached(
            f"rates from {chain.high.min():.3g} to {chain.high.max():.3g} span more than 250 orders of magnitude"
        )
    off = scale(chain.dense(), -exponent)
    leave = scale(exits, -exponent)
    stay = difference(plain(np.ones(chain.n)), leave)
    index = np.arange(chain.n)
    off.high[index, index], off.low[index, index] = stay
    worst = (leave.high * exits_error + 4 * W * (1.0 + leave.high)) / stay.high
    error = max(chain.rate_error, float(worst.max()) if chain.n else 0.0) * _SLACK
    return exponent, off, error


def build(
    chain: Generator,
    loss: Doubled | None,
    loss_error: float,
    rewards: Doubled,
    rewards_error: float,
    times: Sequence[Fraction],
) -> Ladder:
    """Prepare a chain for given times.

    Parameters
    ----------
    chain : Generator
        Rates among n states.
    loss : Doubled[n] or None
        Rate of absorption from each state, relative error `loss_error`.
    rewards : Doubled[n, c]
        Rewards per unit of time, relative error `rewards_error`.
    times : Fraction[m]
        The times that `climb` and `look_back` may be asked for, exact.

    Raises
    ------
    NotReached
        The bound would exceed 1e-10.
    """
    exponent, jumps, jumps_relative = _uniform(chain, loss, loss_error)
    parts = [_parts(exponent, time) for time in times]
    count = max((whole.bit_length() for whole, _ in parts), default=0)
    if count > MOST_DOUBLINGS:
        raise NotReached(f"a time that takes {count} doublings; at most {MOST_DOUBLINGS} keep any digits")
    furthest = Fraction(1) if count else max((rest for _, rest in parts), default=Fraction(0))
    terms = max(1, needed_terms(furthest, math.ldexp(_TRUNCATION, -count)))
    ladder = Ladder(exponent, jumps, jumps_relative, rewards, rewards_error, terms, ())
    rungs = [_first_rung(ladder)] if count else []
    while len(rungs) < count:
        rungs.append(_next_rung(rungs[-1]))
        if not max(rungs[-1].moves_relative, rungs[-1].gains_relative) < 1e-10:
            raise NotReached(
                f"squaring in double-double cannot bound {count} doublings of {chain.n} states to 1e-10; "
                "split the time or lump the chain"
            )
    return Ladder(exponent, jumps, jumps_relative, rewards, rewards_error, terms, tuple(rungs))


def _first_rung(ladder: Ladder) -> Rung:
    n, last = ladder.n, ladder.terms
    mu, own = product_error(n), ladder.jumps_relative
    poisson = short_poisson(Fraction(1), last)
    block = max(1, math.isqrt(last + 1))
    blocks = -(-(last + 1) // block)
    powers = [plain(np.eye(n)), ladder.jumps]
    while len(powers) <= block:
        powers.append(product(powers[-1], ladder.jumps))
    weights = zeros(blocks, block)
    weights.high.reshape(-1)[: last + 1], weights.low.reshape(-1)[: last + 1] = poisson.exactly
    stacked = Doubled(
        np.stack([power.high.reshape(-1) for power in powers[:block]]),
        np.stack([power.low.reshape(-1) for power in powers[:block]]),
    )
    mixed = product(weights, stacked)
    moves = Doubled(mixed.high[-1].reshape(n, n), mixed.low[-1].reshape(n, n))
    for number in range(blocks - 2, -1, -1):
        moves = product(powers[block], moves)
        moves = add(moves, Doubled(mixed.high[number].reshape(n, n), mixed.low[number].reshape(n, n)))
    relative = last * own + (last + 2 * block + 2 * blocks) * mu + product_error(block) + poisson.error
    relative = (relative + blocks * ADD) * _SLACK
    absolute = (poisson.missing + (2.0 * last + 10.0) * n * n * UNDERFLOW) * _SLACK
    gains, gains_relative, gains_absolute = zeros(n, ladder.rewards.high.shape[1]), 0.0, 0.0
    if gains.high.size:
        seen = [ladder.rewards]
        for _ in range(last):
            seen.append(product(ladder.jumps, seen[-1]))
        flat = Doubled(
            np.stack([each.high.reshape(-1) for each in seen]), np.stack([each.low.reshape(-1) for each in seen])
        )
        summed = product(Doubled(poisson.beyond.high[None, :], poisson.beyond.low[None, :]), flat)
        shape = gains.high.shape
        gains = scale(Doubled(summed.high.reshape(shape), summed.low.reshape(shape)), -ladder.exponent)
        gains_relative = last * (own + mu) + product_error(last + 1) + poisson.error + ladder.rewards_relative
        gains_relative *= _SLACK
        most = float(ladder.rewards.high.max()) * _SLACK
        # Underflow in P**k r is at most k n UNDERFLOW, weighted by probabilities that add up to at most 1.
        lost = poisson.missing_beyond * most + (2.0 * last + 10.0) * (last + n) * UNDERFLOW
        gains_absolute = math.ldexp(lost, -ladder.exponent) * _SLACK + 2.0**-1070
    largest = float(gains.high.max()) if gains.high.size else 0.0
    return Rung(moves, relative, absolute, gains, gains_relative, gains_absolute, largest)


def _next_rung(rung: Rung) -> Rung:
    n = rung.moves.high.shape[0]
    mu = product_error(n)
    moves = product(rung.moves, rung.moves)
    eps, alpha, beta = rung.moves_relative, rung.moves_absolute, rung.gains_absolute
    relative = (2 * eps + eps * eps + mu) * _SLACK
    absolute = (2 * alpha + alpha * alpha + n * n * UNDERFLOW) * _SLACK
    gains, gains_relative, gains_absolute = rung.gains, 0.0, 0.0
    if gains.high.size:
        gains = add(gains, product(rung.moves, gains))
        gains_relative = (rung.gains_relative + eps + mu + ADD) * _SLACK
        gains_absolute = (2 * beta + alpha * (rung.gains_largest + beta) + n * UNDERFLOW) * _SLACK
    largest = float(gains.high.max()) if gains.high.size else 0.0
    return Rung(moves, relative, absolute, gains, gains_relative, gains_absolute, largest)


def climb(ladder: Ladder, start: Doubled, times: Sequence[Fraction], *, start_absolute: float = 0.0) -> Climb:
    """Return the state weights with the integrals of the rewards at each time.

    Parameters
    ----------
    ladder : Ladder
        Built for these times.
    start : Doubled[n]
        Weights at time 0, summing to at most about 1, relatively exact; the caller adds their relative error.
    times : Fraction[m]
        Exact, not negative.
    start_absolute : float
        Absolute error of the sum of the start weights.
    """
    n, last, count = ladder.n, ladder.terms, len(times)
    mu, own = product_error(n), ladder.jumps_relative
    row = Doubled(start.high[None, :], start.low[None, :])
    mass = float(start.high.sum()) * _SLACK
    seen = [row]
    for _ in range(last):
        seen.append(product(seen[-1], ladder.jumps))
    walk = Doubled(np.concatenate([each.high for each in seen]), np.concatenate([each.low for each in seen]))
    earned = product(walk, ladder.rewards)
    parts = [_parts(ladder.exponent, time) for time in times]
    series = [short_poisson(rest, last) for _, rest in parts]
    exactly = Doubled(np.stack([s.exactly.high for s in series]), np.stack([s.exactly.low for s in series]))
    beyond = Doubled(np.stack([s.beyond.high for s in series]), np.stack([s.beyond.low for s in series]))
    weights = product(exactly, walk)
    integrals = scale(product(beyond, earned), -ladder.exponent)
    most = float(ladder.rewards.high.max()) * _SLACK if ladder.rewards.high.size else 0.0
    relative, absolute, gained, off = [], [], [], []
    for s in series:
        relative.append((last * (own + mu) + product_error(last + 1) + s.error) * _SLACK)
        absolute.append((start_absolute + s.missing * mass + (2.0 * last + 10.0) * n * n * UNDERFLOW) * _SLACK)
        gained.append(relative[-1] + (mu + ladder.rewards_relative) * _SLACK)
        lost = (s.missing_beyond * mass + start_absolute) * most + (2.0 * last + 10.0) * n * (
            n * most + 1.0
        ) * UNDERFLOW
        off.append(math.ldexp(lost, -ladder.exponent) * _SLACK + 2.0**-1070)
    for number, rung in enumerate(ladder.rungs):
        climbing = [index for index in range(count) if parts[index][0] >> number & 1]
        if not climbing:
            continue
        now = weights.at(climbing)
        if integrals.high.size:
            more = add(integrals.at(climbing), product(now, rung.gains))
            integrals.high[climbing], integrals.low[climbing] = more
        after = product(now, rung.moves)
        weights.high[climbing], weights.low[climbing] = after
        for index in climbing:
            step = relative[index] + rung.gains_relative + mu
            gained[index] = (max(gained[index], step) + ADD) * _SLACK
            off[index] += absolute[index] * (rung.gains_largest + rung.gains_absolute) + mass * rung.gains_absolute
            off[index] = (off[index] + n * UNDERFLOW) * _SLACK
            relative[index] = (relative[index] + rung.moves_relative + mu) * _SLACK
            spread = absolute[index] + (mass + absolute[index]) * rung.moves_absolute
            absolute[index] = (spread + n * n * UNDERFLOW) * _SLACK
    return Climb(weights, tuple(relative), tuple(absolute), integrals, tuple(gained), tuple(off))


def look_back(ladder: Ladder, final: Doubled, time: Fraction) -> tuple[Doubled, float, float]:
    """Return ``exp(Q t) final`` for final values per state between 0 and 1, with its relative and absolute error.

    Parameters
    ----------
    ladder : Ladder
        Built for this time.
    final : Doubled[n]
        Values at the end, exact.
    time : Fraction
        Exact, not negative.
    """
    n, last = ladder.n, ladder.terms
    mu, own = product_error(n), ladder.jumps_relative
    whole, rest = _parts(ladder.exponent, time)
    series = short_poisson(rest, last)
    seen = [Doubled(final.high[:, None], final.low[:, None])]
    for _ in range(last):
        seen.append(product(ladder.jumps, seen[-1]))
    walk = Doubled(
        np.concatenate([each.high for each in seen], axis=1), np.concatenate([each.low for each in seen], axis=1)
    )
    value = product(walk, Doubled(series.exactly.high[:, None], series.exactly.low[:, None]))
    relative = (last * (own + mu) + product_error(last + 1) + series.error) * _SLACK
    absolute = (series.missing + (2.0 * last + 10.0) * n * UNDERFLOW) * _SLACK
    for number, rung in enumerate(ladder.rungs):
        if whole >> number & 1:
            value = product(rung.moves, value)
            relative = (relative + rung.moves_relative + mu) * _SLACK
            absolute = (absolute + (1.0 + absolute) * rung.moves_absolute + n * UNDERFLOW) * _SLACK
    return Doubled(value.high[:, 0], value.low[:, 0]), relative, absolute
