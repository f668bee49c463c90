"""Weights of states on their way through fixed instants, with what was earned on the way.

Unlike a `Vector` the weights keep double-double digits, and their absolute error is one of their SUM: a chain never
enlarges a sum, so however many segments follow each other, absolute errors add and do not grow.

Errors here are relative to the exact numbers: ``|computed - exact| <= relative exact + A`` entry by entry, where A sums
to at most `absolute`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain.bounds import Enclosure, Flags, Floats, Vector, around, relative_to_computed
from markov.chain.doubled import ADD, UNIT, Doubled, add, plain, zeros

#: Covers the rounding of errors, and products of errors with each other while they stay below 1e-7.
SLACK = 1.0 + 1e-6
#: A relative error beyond this is no bound any more.
WIDEST = 0.1


def joined(*errors: float | None) -> float | None:
    """Return the relative error of a product of numbers with these; None if one is an estimate, or no bound is left.

    With S their sum, ``(1 + e_1) (1 + e_2) ... - 1 <= exp(S) - 1 <= S + S**2`` for S up to 1.
    """
    known = [error for error in errors if error is not None]
    if len(known) < len(errors):
        return None
    together = math.fsum(known)
    return together * (1.0 + together) * SLACK if together < WIDEST else None


def computed(relative: float | None) -> float | None:
    """Turn an error relative to the exact number into one relative to the computed one; None where no bound is left."""
    return None if relative is None or relative > WIDEST else relative_to_computed(relative)


@dataclass(frozen=True, eq=False)
class Weights:
    """Weights of n states.

    Attributes
    ----------
    values : Doubled[n]
    relative : float or None
        None: an estimate.
    absolute : float
        Of the sum.
    possible : bool[n]
        Where a weight can differ from 0.
    method : str
        How, for people.
    """

    values: Doubled
    relative: float | None
    absolute: float
    possible: Flags
    method: str

    @property
    def mass(self) -> float:
        """Sum of all weights, rounded up."""
        return float(self.values.high.sum()) * SLACK

    def vector(self, total: float | None = None) -> Vector:
        """Return the weights rounded to floats, with their bound; `total` is their sum where it is known exactly."""
        values = self.values.high + self.values.low
        return Vector(
            values, computed(joined(self.relative, UNIT)), self.absolute * SLACK, self.method, self.possible, total
        )

    def without(self, states: Flags) -> Weights:
        """Return the weights with those of some states taken out."""
        keep = ~states
        values = Doubled(self.values.high * keep, self.values.low * keep)
        possible = self.possible & keep
        return Weights(values, self.relative, self.absolute if possible.any() else 0.0, possible, self.method)


def weights_of(start: Vector) -> Weights:
    """Return a start distribution as weights."""
    possible = np.ones(len(start), dtype=bool) if start.possible is None else start.possible
    relative = start.relative_error
    if relative is not None:
        relative = relative / (1.0 - relative) * SLACK
    absolute = start.absolute_error * float(np.count_nonzero(possible))
    return Weights(plain(start.values), relative, absolute, possible, "")


@dataclass(frozen=True, eq=False)
class Amounts:
    """What was earned on the way: c sums of non-negative terms.

    Attributes
    ----------
    values : Doubled[c]
    relative : float or None
    absolute : float64[c]
    method : str
    """

    values: Doubled
    relative: float | None
    absolute: Floats
    method: str

    def __add__(self, other: Amounts) -> Amounts:
        both = None
        if self.relative is not None and other.relative is not None:
            both = (max(self.relative, other.relative) + ADD) * SLACK
            if not other.values.high.any() and not other.absolute.any():
                both = self.relative
            elif not self.values.high.any() and not self.absolute.any():
                both = other.relative
        off = (self.absolute + other.absolute) * SLACK
        return Amounts(add(self.values, other.values), both, off, _both(self.method, other.method))

    def entry(self, number: int) -> Enclosure:
        """Return one of them as an enclosure; one to which nothing ever came is exactly 0."""
        value = Fraction(float(self.values.high[number])) + Fraction(float(self.values.low[number]))
        absolute = float(self.absolute[number])
        if value == 0 and absolute == 0.0:
            return Enclosure(0.0, 0.0, 0.0, "by structure")
        return around(value, computed(self.relative), absolute * SLACK, self.method)


def _both(one: str, other: str) -> str:
    """Name two methods, each once."""
    if not one or one in other:
        return other
    return one if other in one else f"{one}; {other}"


def nothing(count: int) -> Amounts:
    """Return c amounts of exactly 0."""
    return Amounts(zeros(count), 0.0, np.zeros(count), "")
