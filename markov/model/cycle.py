"""The joint period of what recurs at fixed instants, exact."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from math import gcd, lcm

#: A joint period of more shortest intervals than this is refused.
LONGEST_CYCLE = 1000


def joint_period(periods: Iterable[Fraction]) -> Fraction | None:
    """Return the least common multiple of periods.

    Parameters
    ----------
    periods : iterable of Fraction
        Hours, above zero.

    Returns
    -------
    Fraction or None
        Hours; None where there are no periods.  Fractions always have a joint period; it may be very long.
    """
    joint: Fraction | None = None
    for period in periods:
        joint = period if joint is None else _joint(joint, period)
    return joint


def _joint(one: Fraction, other: Fraction) -> Fraction:
    # In lowest terms the least common multiple of a/b and c/d is lcm(a, c) / gcd(b, d).
    return Fraction(lcm(one.numerator, other.numerator), gcd(one.denominator, other.denominator))


def intervals_in_cycle(periods: Iterable[Fraction]) -> Fraction:
    """Return how many of the shortest periods make the joint one; 0 where there are none."""
    listed = list(periods)
    joint = joint_period(listed)
    return Fraction(0) if joint is None else joint / min(listed)
