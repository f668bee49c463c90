"""Poisson probabilities with proven relative errors: a few in double-double, many in floats.

The few serve one step of at most one expected jump; the many serve uniformisation.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

import numpy as np

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT, Doubled, W, exact
from markov.errors import NotReached

_BITS = 1600  # fixed point: terms down to 1e-300 keep more than 500 bits


def needed_terms(x: Fraction, tolerance: float) -> int:
    """Return the least K with ``sum_{k > K} x**k / k! <= tolerance``, for ``0 <= x <= 1``."""
    bound, count = Fraction(1), 0
    limit = Fraction(tolerance)
    # The tail after K is at most 2 x**(K+1) / (K+1)! for x <= 1.
    while 2 * bound * x > limit * (count + 1):
        count += 1
        bound = _rounded_up(bound * x / count)
    return count


def _rounded_up(x: Fraction) -> Fraction:
    """Keep the fraction short; never below x."""
    shift = 1 << _BITS
    return Fraction(-((-x.numerator * shift) // x.denominator), shift)


@dataclass(frozen=True, eq=False)
class ShortPoisson:
    """Probabilities of k = 0 .. K jumps and of more than k jumps, at most one being expected.

    Attributes
    ----------
    exactly, beyond : Doubled[K + 1]
        ``e**-x x**k / k!`` and ``sum_{j > k} e**-x x**j / j!``; relative error at most `error`.
    missing : float
        Bound of ``sum_{j > K} e**-x x**j / j!``.
    missing_beyond : float
        Bound of the sum of the "more than k" over all k > K.
    """

    exactly: Doubled
    beyond: Doubled
    missing: float
    missing_beyond: float
    error: float = 2 * W


@lru_cache(maxsize=64)
def short_poisson(x: Fraction, count: int) -> ShortPoisson:
    """Return the probabilities for ``0 <= x <= 1`` up to `count` jumps.

    The series are summed in fixed point of 1,600 bits with all terms non-negative; what that loses is below 2**-1500.
    """
    one = 1 << _BITS
    scaled = x.numerator * one // x.denominator
    terms = [one]
    for k in range(1, count + 200):
        terms.append((terms[-1] * scaled >> _BITS) // k)
    series = sum(terms)
    tails = [0] * (count + 1)
    rest = sum(terms[count + 1 :])
    after, beyond_after = rest, 0
    for k in range(count, -1, -1):
        tails[k] = rest
        rest += terms[k]
    for k in range(count + 1, len(terms)):
        after -= terms[k]
        beyond_after += after
    # e**-x = 1 / series; both lists are quotients of fixed point numbers.
    return ShortPoisson(
        exact([Fraction(term, series) for term in terms[: count + 1]]),
        exact([Fraction(tail, series) for tail in tails]),
        float(Fraction(tails[count], series)) * (1.0 + 1e-9) + 1e-300,
        float(Fraction(beyond_after, series)) * (1.0 + 1e-9) + 1e-300,
    )


@dataclass(frozen=True, eq=False)
class LongPoisson:
    """Probabilities of k jumps for ``first <= k <= last``.

    Attributes
    ----------
    exactly : float64[last - first + 1]
        Relative error at most `error`.
    beyond : float64[last + 1]
        Probability of more than k jumps, k = 0 .. last, same relative error, less at most `missing` absolutely.
    missing : float
        Bound of the probability outside ``first .. last``.
    missing_beyond : float
        Bound of what all "more than k" together lack: those for k <= last by the cut, those for k > last altogether.
    """

    first: int
    last: int
    exactly: Floats
    beyond: Floats
    missing: float
    missing_beyond: float
    error: float


def long_poisson(x: Fraction, tolerance: float) -> LongPoisson:
    """Return the probabilities for any x > 0, leaving out at most about `tolerance` on either side.

    From the most likely number m outward by ratios, ``w_{k+1} = w_k x / (k+1)`` and ``w_{k-1} = w_k k / x``; each
    step costs three roundings (x, quotient, product), so ``3 |k - m| u`` in all.  Beyond the ends the ratios fall,
    hence geometric series bound what is left out.  Dividing by the sum of all kept terms normalises them; that sum is
    short by what is missing, which is added to the error.
    """
    if x > 10**9:
        raise NotReached(f"uniformisation over {float(x):.3g} expected jumps is out of reach")
    value = float(x)
    middle = int(x)
    reach = int(4.0 * math.sqrt((value + 1.0) * -math.log(tolerance))) + 4 * int(-math.log(tolerance)) + 20
    upward = np.arange(middle + 1, middle + reach + 1, dtype=np.float64)
    rising = np.concatenate(([1.0], np.cumprod(value / upward)))
    downward = np.arange(middle, max(0, middle - reach), -1, dtype=np.float64)
    falling = np.cumprod(downward / value)
    top = int(np.argmax(rising < tolerance * 1e-3)) if bool((rising < tolerance * 1e-3).any()) else rising.size - 1
    bottom = int(np.argmax(falling < tolerance * 1e-3)) if bool((falling < tolerance * 1e-3).any()) else falling.size
    last, first = middle + top, middle - bottom
    weights = np.concatenate((falling[:bottom][::-1], rising[: top + 1]))
    mass = math.fsum(weights.tolist())
    error = (3 * max(top, bottom) + 4) * UNIT
    ratio = value / (last + 2)
    right = float(rising[top]) * value / (last + 1) / (1.0 - ratio)
    left = 0.0
    if first > 0:
        lowest = float(weights[0])
        left = lowest * first / value / (1.0 - (first - 1) / value) if first - 1 < value else math.inf
    missing = (left + right) / mass * (1.0 + 1e-6)
    if not missing < 1e-3:
        raise NotReached(f"Poisson weights for {value:.3g} expected jumps leave out {missing:.3g}")
    exactly = weights / mass
    beyond = np.empty(last + 1)
    beyond[: max(first, 0)] = 1.0
    sums = np.cumsum(exactly[::-1])[::-1]
    beyond[first:last] = sums[1:]
    beyond[last] = 0.0
    # For k < first the exact value lies between 1 - left and 1; for k >= first each lacks at most what lies right of
    # last.
    return LongPoisson(
        first,
        last,
        exactly,
        beyond,
        missing,
        (left * (first + 1) + right * (last + 1 + 1.0 / (1.0 - ratio))) / mass * (1.0 + 1e-6),
        2 * error + (missing + weights.size * UNIT) * (1.0 + 1e-6),
    )
