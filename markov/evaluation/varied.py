"""A number with its exact slopes: how it varies with each parameter, and how far rounding may have moved each slope.

Value and slopes are fractions, so sums, quotients and roots add no error of their own beyond what is stated; where
contributions cancel, the doubt that they bring stays visible beside what is left.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

#: Digits kept of a root and of a doubt.
_ROOT_ERROR = Fraction(1, 2**100)


@dataclass(frozen=True)
class Varied:
    """A value with its slopes by parameter.

    Attributes
    ----------
    value : Fraction
    doubt : Fraction
        Bound of the error of the value.
    slopes : mapping of name to Fraction
        Derivatives; a parameter without influence is left out.
    doubts : mapping of name to Fraction
        Bounds of the errors of the slopes.
    bent : set of str
        Parameters at whose value there is no slope, since more of them counts otherwise than less.
    """

    value: Fraction
    doubt: Fraction
    slopes: Mapping[str, Fraction]
    doubts: Mapping[str, Fraction]
    bent: frozenset[str] = frozenset()

    def __add__(self, other: Varied, /) -> Varied:
        """Return the sum."""
        return Varied(
            self.value + other.value,
            self.doubt + other.doubt,
            _joined(self.slopes, Fraction(1), other.slopes, Fraction(1)),
            _joined(self.doubts, Fraction(1), other.doubts, Fraction(1)),
            self.bent | other.bent,
        )

    def __truediv__(self, other: Varied, /) -> Varied:
        """Return the quotient, by the quotient rule."""
        least = abs(other.value) - other.doubt
        if least <= 0:
            raise ZeroDivisionError("a divisor that may be zero")
        value = self.value / other.value
        doubt = (self.doubt + abs(value) * other.doubt) / least
        slopes = _joined(self.slopes, 1 / other.value, other.slopes, -value / other.value)
        # (N' - q D') / D: each of the four is off by its own doubt.
        spread = {name: self.doubts.get(name, Fraction(0)) for name in slopes}
        for name in spread:
            over = abs(other.slopes.get(name, Fraction(0)))
            spread[name] += (abs(value) + doubt) * other.doubts.get(name, Fraction(0)) + doubt * over
            inner = abs(self.slopes.get(name, Fraction(0))) + abs(value) * over
            spread[name] = (spread[name] + inner * other.doubt / abs(other.value)) / least
        return Varied(value, doubt, slopes, spread, self.bent | other.bent)

    def times(self, factor: Fraction) -> Varied:
        """Return the value times an exact factor."""
        return Varied(
            self.value * factor,
            self.doubt * abs(factor),
            {name: slope * factor for name, slope in self.slopes.items()},
            {name: doubt * abs(factor) for name, doubt in self.doubts.items()},
            self.bent,
        )

    def product(self, other: Varied) -> Varied:
        """Return the product, by the product rule."""
        slopes = _joined(self.slopes, other.value, other.slopes, self.value)
        doubts = _joined(self.doubts, abs(other.value) + other.doubt, other.doubts, abs(self.value) + self.doubt)
        for name in slopes:
            doubts[name] += other.doubt * abs(self.slopes.get(name, Fraction(0)))
            doubts[name] += self.doubt * abs(other.slopes.get(name, Fraction(0)))
        doubt = self.doubt * abs(other.value) + (abs(self.value) + self.doubt) * other.doubt
        return Varied(self.value * other.value, doubt, slopes, doubts, self.bent | other.bent)

    def root(self) -> Varied:
        """Return the square root of a value above zero."""
        root, error = _root(self.value), self.doubt / self.value
        least = 2 * root * (1 - error - _ROOT_ERROR)
        if least <= 0:
            raise ZeroDivisionError("the root of a number that may be zero")
        doubts = {
            name: (doubt + abs(self.slopes.get(name, Fraction(0))) * (error + 2 * _ROOT_ERROR)) / least
            for name, doubt in self.doubts.items()
        }
        slopes = {name: slope / (2 * root) for name, slope in self.slopes.items()}
        return Varied(root, root * (error + _ROOT_ERROR), slopes, doubts, self.bent)

    def complement_of(self, whole: Fraction) -> Varied:
        """Return what is missing to an exact number."""
        opposite = self.times(Fraction(-1))
        return Varied(whole - self.value, self.doubt, opposite.slopes, opposite.doubts, self.bent)

    def or_sharper(self, other: Varied) -> Varied:
        """Return the same number, each part from the one of two computations that leaves less doubt."""
        value, doubt = min(((self.value, self.doubt), (other.value, other.doubt)), key=lambda each: each[1])
        slopes, doubts = {}, {}
        for name in {**self.slopes, **other.slopes}:
            mine = self.doubts.get(name, Fraction(0)), self.slopes.get(name, Fraction(0))
            its = other.doubts.get(name, Fraction(0)), other.slopes.get(name, Fraction(0))
            doubts[name], slopes[name] = mine if mine[0] <= its[0] else its
        return Varied(value, doubt, slopes, doubts, self.bent | other.bent)


def fixed(value: Fraction) -> Varied:
    """Return an exact number that nothing moves."""
    return Varied(value, Fraction(0), {}, {})


def _joined(
    one: Mapping[str, Fraction], weight: Fraction, other: Mapping[str, Fraction], beside: Fraction
) -> dict[str, Fraction]:
    nothing = Fraction(0)
    return {name: one.get(name, nothing) * weight + other.get(name, nothing) * beside for name in {**one, **other}}


def _root(value: Fraction) -> Fraction:
    """Return the square root to more than 100 binary digits."""
    shift = 240 + value.denominator.bit_length() - value.numerator.bit_length()
    shift += shift % 2
    scaled = math.isqrt(value.numerator * 2**shift // value.denominator if shift >= 0 else 0)
    if shift < 0:
        scaled = math.isqrt(value.numerator // (value.denominator * 2**-shift))
    return Fraction(scaled) / Fraction(2) ** (shift // 2)
