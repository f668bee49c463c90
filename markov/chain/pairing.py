"""The chain seen from both ends of a period at once: what derivatives of values at a time are made of.

Let a be start weights, r final values, ``p(s) = a exp(Q s)`` and ``u(s) = exp(Q s) r``.  The value ``p(t) r`` reacts
to a change of the rate from i to j by

    integral over [0, t] of p_i(s) (u_j(t - s) - u_i(t - s)) ds = K_ij - K_ii,

so one matrix K of pair integrals holds its derivatives by every rate (variation of constants; C. F. Van Loan,
Computing integrals involving the matrix exponential, IEEE Trans. Automat. Control 23 (1978), for the block form).
All entries of K are sums of non-negative terms and keep their digits; only the last difference may cancel, and of
both sides enough digits are kept, in double-double, for what is left.

Method.  With ``R = r a`` (column times row) the transpose of K is the corner of the exponential of a matrix of
blocks:

    X(t) = integral of exp(Q s) R exp(Q (t - s)) ds,      X(2h) = E(h) X(h) + X(h) E(h),      E(2h) = E(h) E(h).

A step ``h = t / 2**s`` of at most one expected jump is formed by the series: with ``P = I + Q/L``, ``x = L h`` and
w_k the chance of k jumps, ``X(h) = (1/L) sum_{l,m} w_{l+m+1} (P**l r) (a P**m)``.  A further state that nothing
leaves may collect rewards: its column is reached at the rate of the reward, which no exit rate pays for, so integrals
of rewards are values like others.

Errors are carried as in `markov.chain.ladder`: relative ones add, double with each doubling of E, and stay below
1e-15 for any time that can be asked for; what the series leave out is below 1e-100.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain.doubled import ADD, Doubled, W, add, difference, plain, product, product_error, scale, zeros
from markov.chain.poisson import needed_terms, short_poisson
from markov.errors import NotReached, TooLarge

#: Up to this many states a time takes seconds; the work grows with the third power.
LARGEST_PAIRING = 300

_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Pairing:
    """What lies between the start and the end of a period of n states.

    Attributes
    ----------
    weights : Doubled[n]
        ``p(t)``.
    values : Doubled[n]
        ``u(t)``.
    pairs : Doubled[n, n]
        ``K_ij``, the integral of ``p_i(s) u_j(t - s)``.
    error : float
        Relative error of all of these, start weights and final values being exact.
    """

    weights: Doubled
    values: Doubled
    pairs: Doubled
    error: float


def pair(rates: Doubled, exits: Doubled, rate_error: float, start: Doubled, final: Doubled, time: Fraction) -> Pairing:
    """Return the pair integrals of a chain over a period.

    Parameters
    ----------
    rates : Doubled[n, n]
        Rates between states, zero diagonal; a column of rewards where a state collects them.
    exits : Doubled[n]
        Rate at which each state is left; rewards do not count.
    rate_error : float
        Relative error of both.
    start, final : Doubled[n]
        Not negative, at most about 1 each.
    time : Fraction
        Not negative.

    Raises
    ------
    TooLarge
        More than `LARGEST_PAIRING` states.
    NotReached
        The error would exceed 1e-10.
    """
    n = exits.high.size
    if n > LARGEST_PAIRING:
        raise TooLarge(f"derivatives over time are made for {LARGEST_PAIRING} states, not {n}")
    if time == 0 or n == 0:
        return Pairing(start, final, zeros(n, n), 0.0)
    exponent, jumps, own = _jumps(rates, exits, rate_error)
    expected = time * Fraction(2) ** exponent
    doublings = max(0, math.ceil(math.log2(expected)) if expected > 1 else 0)
    moves, pairs, error = _first(jumps, own, start, final, expected / 2**doublings, doublings)
    mu = product_error(n)
    moves_error = error
    for _ in range(doublings):
        pairs = add(product(moves, pairs), product(pairs, moves))
        error = (error + moves_error + mu + ADD) * _SLACK
        moves = product(moves, moves)
        moves_error = (2.0 * moves_error + moves_error**2 + mu) * _SLACK
        if not max(error, moves_error) < 1e-10:
            raise NotReached(f"{doublings} doublings of {n} states cannot be held to 1e-10")
    weights = product(Doubled(start.high[None, :], start.low[None, :]), moves)
    values = product(moves, Doubled(final.high[:, None], final.low[:, None]))
    turned = Doubled(np.ascontiguousarray(pairs.high.T), np.ascontiguousarray(pairs.low.T))
    return Pairing(
        Doubled(weights.high[0], weights.low[0]),
        Doubled(values.high[:, 0], values.low[:, 0]),
        scale(turned, -exponent),
        (max(error, moves_error) + mu) * _SLACK,
    )


def _jumps(rates: Doubled, exits: Doubled, rate_error: float) -> tuple[int, Doubled, float]:
    """Return the exponent of L, ``P = I + Q/L`` and the relative error of P."""
    largest = float(exits.high.max(initial=0.0))
    exponent = math.ceil(math.log2(1.25 * largest)) if largest > 0.0 else 0
    jumps = scale(Doubled(rates.high.copy(), rates.low.copy()), -exponent)
    smallest = jumps.high[jumps.high > 0.0]
    if smallest.size and float(smallest.min()) < 1e-250:
        raise NotReached("rates span more than 250 orders of magnitude")
    leave = scale(exits, -exponent)
    stay = difference(plain(np.ones(exits.high.size)), leave)
    index = np.arange(exits.high.size)
    jumps.high[index, index], jumps.low[index, index] = stay
    worst = (leave.high * rate_error + 4 * W * (1.0 + leave.high)) / stay.high
    return exponent, jumps, max(rate_error, float(worst.max(initial=0.0))) * _SLACK


def _first(
    jumps: Doubled, own: float, start: Doubled, final: Doubled, expected: Fraction, doublings: int
) -> tuple[Doubled, Doubled, float]:
    """Return E and L X over a step of `expected` jumps, at most 1, with their relative error."""
    n = start.high.size
    last = max(2, needed_terms(expected, math.ldexp(1e-100, -doublings)))
    chances = short_poisson(expected, 2 * last + 1).exactly
    ahead, behind = (
        [Doubled(final.high[:, None], final.low[:, None])],
        [Doubled(start.high[None, :], start.low[None, :])],
    )
    for _ in range(last):
        ahead.append(product(jumps, ahead[-1]))
        behind.append(product(behind[-1], jumps))
    steps = np.arange(last + 1)
    table = chances.at(steps[:, None] + steps[None, :] + 1)
    columns = Doubled(np.concatenate([x.high for x in ahead], axis=1), np.concatenate([x.low for x in ahead], axis=1))
    rows = Doubled(np.concatenate([x.high for x in behind]), np.concatenate([x.low for x in behind]))
    pairs = product(product(columns, table), rows)
    # Horner's rule with the chances of ever fewer jumps: E = w_0 + P (w_1 + P (w_2 + ...)) in blocks of powers.
    block = max(1, math.isqrt(last + 1))
    powers = [plain(np.eye(n)), jumps]
    while len(powers) <= block:
        powers.append(product(powers[-1], jumps))
    blocks = -(-(last + 1) // block)
    weights = zeros(blocks, block)
    weights.high.reshape(-1)[: last + 1] = chances.high[: last + 1]
    weights.low.reshape(-1)[: last + 1] = chances.low[: last + 1]
    stacked = Doubled(
        np.stack([power.high.reshape(-1) for power in powers[:block]]),
        np.stack([power.low.reshape(-1) for power in powers[:block]]),
    )
    mixed = product(weights, stacked)
    moves = Doubled(mixed.high[-1].reshape(n, n), mixed.low[-1].reshape(n, n))
    for number in range(blocks - 2, -1, -1):
        moves = product(powers[block], moves)
        moves = add(moves, Doubled(mixed.high[number].reshape(n, n), mixed.low[number].reshape(n, n)))
    mu = product_error(n)
    error = 2 * last * (own + mu) + 2 * (block + blocks) * (mu + ADD) + 2 * product_error(last + 1) + 3 * W
    return moves, pairs, error * _SLACK
