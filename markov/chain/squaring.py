"""Scaling then squaring in floats with rows held to sum 1: an estimate, good to many digits but without a proof.

``P = I + Q/L``, one step of one expected jump by its series (all terms non-negative), then squarings.  After the series
and after every squaring, where the off-diagonal sum of a row is under one half the diagonal is taken as one minus it,
then the row is divided by its sum.  This keeps mass from drifting away over many squarings, which is what spoils small
probabilities otherwise.  Observed relative errors are near 1e-15 up to 1e11 expected jumps, yet without normalisation
only ``2**s n u`` can be proven, so results are marked as estimates.

Source: after J. Xue, Q. Ye, Computing exponentials of essentially non-negative matrices entrywise to high relative
accuracy, Math. Comp. 82 (2013).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

import numpy as np

from markov.chain.bounds import Floats
from markov.chain.doubled import Doubled
from markov.chain.generator import Generator

#: Up to this many states a squaring takes a fraction of a second.
LARGEST_SQUARING = 1000
_TERMS = 26


def _held(moves: Floats) -> Floats:
    """Return the matrix with its rows brought back to sum 1."""
    diagonal = np.einsum("ii->i", moves)
    off = moves.sum(axis=1) - diagonal
    # The sum without the diagonal is formed anew where it matters: a difference would carry the diagonal's rounding.
    small = np.flatnonzero(off < 0.5)
    for row in small:
        kept = diagonal[row]
        moves[row, row] = 0.0
        off[row] = moves[row].sum()
        moves[row, row] = 1.0 - off[row] if off[row] < 0.5 else kept
    moves /= moves.sum(axis=1)[:, None]
    return moves


def estimate(
    chain: Generator, absorption: Doubled, rewards: Floats, start: Floats, times: Sequence[Fraction]
) -> tuple[Floats, Floats, Floats]:
    """Return state weights, absorbed weights and integrals of rewards at each time, unproven.

    Parameters
    ----------
    chain : Generator
        Rates among n states.
    absorption : Doubled[n, c]
        Rates into c absorbing classes.
    rewards : float64[n, r]
    start : float64[n]
    times : Fraction[m]

    Returns
    -------
    float64[m, n], float64[m, c], float64[m, r]
    """
    n, classes = absorption.high.shape
    size = n + classes
    rates = np.zeros((size, size))
    rates[chain.source, chain.target] = chain.high + chain.low
    rates[:n, n:] = absorption.high + absorption.low
    exits = rates.sum(axis=1)
    exponent = math.ceil(math.log2(1.25 * float(exits.max()))) if exits.any() else 0
    jumps = np.ldexp(rates, -exponent)
    jumps[np.arange(size), np.arange(size)] = 1.0 - np.ldexp(exits, -exponent)
    earned = np.zeros((size, rewards.shape[1]))
    earned[:n] = rewards
    row = np.concatenate((start, np.zeros(classes)))
    parts = []
    for time in times:
        expected = time * Fraction(2) ** exponent
        parts.append((math.floor(expected), float(expected - math.floor(expected))))
    weights = np.zeros((len(times), size))
    integrals = np.zeros((len(times), rewards.shape[1]))
    walk = [row]
    for _ in range(_TERMS):
        walk.append(walk[-1] @ jumps)
    for number, (_, rest) in enumerate(parts):
        exactly, beyond = _short(rest)
        weights[number] = sum(p * x for p, x in zip(exactly, walk, strict=True))
        integrals[number] = sum(p * (x @ earned) for p, x in zip(beyond, walk, strict=True))
    count = max(whole.bit_length() for whole, _ in parts)
    exactly, beyond = _short(1.0)
    moves, gains, seen = np.zeros((size, size)), np.zeros_like(earned), earned
    power = np.eye(size)
    if count:
        for k in range(_TERMS + 1):
            moves += exactly[k] * power
            gains += beyond[k] * seen
            power, seen = power @ jumps, jumps @ seen
        moves = _held(moves)
    for number in range(count):
        if number:
            gains = gains + moves @ gains
            moves = _held(moves @ moves)
        for index, (whole, _) in enumerate(parts):
            if whole >> number & 1:
                integrals[index] += weights[index] @ gains
                weights[index] = weights[index] @ moves
    return weights[:, :n], weights[:, n:], np.ldexp(integrals, -exponent)


def _short(x: float) -> tuple[list[float], list[float]]:
    exactly = [math.exp(-x) * x**k / math.factorial(k) for k in range(_TERMS + 1)]
    further = [math.exp(-x) * x**k / math.factorial(k) for k in range(_TERMS + 1, 2 * _TERMS)]
    beyond = [math.fsum(exactly[k + 1 :] + further) for k in range(_TERMS + 1)]
    return exactly, beyond
