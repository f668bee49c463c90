"""Results that carry their own bound: one number as an enclosure, many numbers as a vector.

Rigour in this file rests on two facts.  A float operation is off by at most half a unit in the last place, so one
step of
``nextafter`` outward encloses it; this also holds for subnormal results.  `math.fsum` is correctly rounded.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from markov.chain.doubled import UNIT, Doubled

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


def up(x: float) -> float:
    """Return the next float above."""
    return math.nextafter(x, math.inf)


def down(x: float) -> float:
    """Return the next float below."""
    return math.nextafter(x, -math.inf)


@dataclass(frozen=True)
class Enclosure:
    """One non-negative number with a proven interval around it.

    Attributes
    ----------
    value : float
        The number as computed.
    lower, upper : float or None
        ``lower <= exact <= upper``.  Both None: `value` is an estimate and nothing is proven about it.
    method : str
        How it was computed, for people.
    """

    value: float
    lower: float | None
    upper: float | None
    method: str

    @property
    def certified(self) -> bool:
        """Whether a bound is proven."""
        return self.lower is not None

    @property
    def width(self) -> float:
        """Length of the interval relative to its upper end: 0 for an exact number, inf for an estimate."""
        if self.lower is None or self.upper is None:
            return math.inf
        return 0.0 if self.upper == self.lower else (self.upper - self.lower) / abs(self.upper)

    def _combine(self, other: Enclosure, value: float, lower: float, upper: float) -> Enclosure:
        method = self.method if other.method in self.method else f"{self.method}, {other.method}"
        if self.lower is None or other.lower is None:
            return Enclosure(value, None, None, method)
        return Enclosure(min(max(value, lower), upper), lower, upper, method)

    def __add__(self, other: Enclosure) -> Enclosure:
        lower, upper = _pair(self)
        lower2, upper2 = _pair(other)
        return self._combine(other, self.value + other.value, _sum_down(lower, lower2), _sum_up(upper, upper2))

    def __mul__(self, other: Enclosure) -> Enclosure:
        """Product of two non-negative numbers."""
        lower, upper = _pair(self)
        lower2, upper2 = _pair(other)
        return self._combine(other, self.value * other.value, _product_down(lower, lower2), _product_up(upper, upper2))

    def __truediv__(self, other: Enclosure) -> Enclosure:
        """Quotient of two non-negative numbers; a divisor that may be 0 gives an upper end of inf."""
        lower, upper = _pair(self)
        lower2, upper2 = _pair(other)
        if other.value == 0.0 and upper2 == 0.0:
            raise ZeroDivisionError("quotient with a divisor that is exactly zero")
        value = self.value / other.value if other.value > 0.0 else math.inf
        low = 0.0 if math.isinf(upper2) else _quotient_down(lower, upper2)
        high = 0.0 if upper == 0.0 else math.inf if lower2 == 0.0 else _quotient_up(upper, lower2)
        return self._combine(other, value, low, high)

    def complement(self) -> Enclosure:
        """Return one minus this probability; small results lose digits, and the interval shows it."""
        value = 1.0 - self.value
        if self.lower is None or self.upper is None:
            return Enclosure(value, None, None, self.method)
        lower = max(0.0, _sum_down(1.0, -self.upper))
        upper = min(1.0, _sum_up(1.0, -self.lower))
        return Enclosure(min(max(value, lower), upper), lower, upper, self.method)

    def minus(self, other: Enclosure) -> Enclosure:
        """Return a difference known to be non-negative."""
        lower, upper = _pair(self)
        lower2, upper2 = _pair(other)
        low, high = max(0.0, _sum_down(lower, -upper2)), max(0.0, _sum_up(upper, -lower2))
        return self._combine(other, self.value - other.value, low, high)

    def root(self) -> Enclosure:
        """Return the square root."""
        value = math.sqrt(max(0.0, self.value))
        if self.lower is None or self.upper is None:
            return Enclosure(value, None, None, self.method)
        lower = 0.0 if self.lower <= 0.0 else down(math.sqrt(self.lower))
        upper = 0.0 if self.upper == 0.0 else up(math.sqrt(self.upper))
        return Enclosure(min(max(value, lower), upper), lower, upper, self.method)

    def times(self, factor: float | Fraction) -> Enclosure:
        """Return a multiple by an exact non-negative number."""
        return self * point(Fraction(factor), "")

    def over(self, divisor: float | Fraction) -> Enclosure:
        """Return this number divided by an exact positive number."""
        return self / point(Fraction(divisor), "")

    def capped(self, most: float = 1.0) -> Enclosure:
        """Return the same number with the knowledge that it is at most `most`."""
        value = min(self.value, most)
        if self.lower is None or self.upper is None:
            return replace(self, value=value)
        upper = min(self.upper, most)
        return Enclosure(value, min(self.lower, upper), upper, self.method)

    def meet(self, other: Enclosure) -> Enclosure:
        """Return the common part of two enclosures of the same number; the value is that of the narrower one."""
        if other.lower is None or other.upper is None:
            return self
        if self.lower is None or self.upper is None:
            return other
        better = self if self.upper - self.lower <= other.upper - other.lower else other
        lower, upper = max(self.lower, other.lower), min(self.upper, other.upper)
        if lower > upper:
            raise ArithmeticError(f"two proven intervals do not meet: {self} and {other}")
        return Enclosure(min(max(better.value, lower), upper), lower, upper, better.method)


def _pair(x: Enclosure) -> tuple[float, float]:
    if x.lower is None or x.upper is None:
        return x.value, x.value
    return x.lower, x.upper


def below(x: Fraction) -> float:
    """Return the largest float that is not above x (-inf where there is none)."""
    try:
        nearest = float(x)
    except OverflowError:
        return math.nextafter(math.inf, 0.0) if x > 0 else -math.inf
    return nearest if Fraction(nearest) <= x else down(nearest)


def above(x: Fraction) -> float:
    """Return the smallest float that is not below x (inf where there is none)."""
    return -below(-x)


def _sum_down(a: float, b: float) -> float:
    return a + b if math.isinf(a) or math.isinf(b) else below(Fraction(a) + Fraction(b))


def _sum_up(a: float, b: float) -> float:
    return a + b if math.isinf(a) or math.isinf(b) else above(Fraction(a) + Fraction(b))


def _product_down(a: float, b: float) -> float:
    if a == 0.0 or b == 0.0:
        return 0.0
    return math.inf if math.isinf(a) or math.isinf(b) else below(Fraction(a) * Fraction(b))


def _product_up(a: float, b: float) -> float:
    if a == 0.0 or b == 0.0:
        return 0.0
    return math.inf if math.isinf(a) or math.isinf(b) else above(Fraction(a) * Fraction(b))


def _quotient_down(a: float, b: float) -> float:
    return math.inf if math.isinf(a) else below(Fraction(a) / Fraction(b))


def _quotient_up(a: float, b: float) -> float:
    return math.inf if math.isinf(a) else 0.0 if math.isinf(b) else above(Fraction(a) / Fraction(b))


def point(value: float | Fraction, method: str) -> Enclosure:
    """Return an exactly known number; a fraction that is no float gets the two floats around it."""
    value = Fraction(value)
    return Enclosure(float(value), below(value), above(value), method)


def around(value: float | Fraction, relative: float | None, absolute: float, method: str) -> Enclosure:
    """Return ``value (1 -+ relative) -+ absolute`` rounded outward, cut at 0; None for `relative` gives an estimate."""
    if relative is None:
        return Enclosure(float(value), None, None, method)
    middle = Fraction(value)
    margin = middle * Fraction(relative) + Fraction(absolute)
    return Enclosure(float(value), max(0.0, below(middle - margin)), above(middle + margin), method)


def around_doubled(x: Doubled, relative: float, absolute: float, method: str) -> Enclosure:
    """Return the enclosure of one double-double (arrays of one entry).

    `relative` is relative to the exact number; the rest that rounding to one float drops shifts the interval, so that
    no digit is given away.
    """
    value = Fraction(float(np.reshape(x.high, -1)[0])) + Fraction(float(np.reshape(x.low, -1)[0]))
    return around(value, relative_to_computed(relative), absolute, method)


@dataclass(frozen=True, eq=False)
class Vector:
    """Non-negative numbers, one per state, that share one bound.

    Attributes
    ----------
    values : float64[n]
        The numbers as computed.
    relative_error : float or None
        ``|values - exact| <= relative_error * values + absolute_error`` holds entry by entry.  None: an estimate.
    absolute_error : float
        See above; it counts only where `possible` is true.
    method : str
        How it was computed, for people.
    possible : bool[n] or None
        Where an entry can differ from 0; elsewhere the entry is exactly 0.  None: everywhere.
    total : float or None
        The exact sum of all entries where it is known from the structure, such as 1 for a distribution.
    """

    values: Floats
    relative_error: float | None
    absolute_error: float
    method: str
    possible: Flags | None = None
    total: float | None = None

    def __len__(self) -> int:
        return int(self.values.size)

    def entry(self, number: int) -> Enclosure:
        """Return one entry as an enclosure."""
        if self.possible is not None and not self.possible[number]:
            return Enclosure(0.0, 0.0, 0.0, self.method)
        if self.total is not None and self.possible is not None and np.count_nonzero(self.possible) == 1:
            return Enclosure(self.total, self.total, self.total, self.method)
        found = around(float(self.values[number]), self.relative_error, self.absolute_error, self.method)
        return found if self.total is None else found.capped(self.total)

    def weighted(self, weights: NDArray[Any] | Vector, weight_error: float = 0.0) -> Enclosure:
        """Return the sum of entries times weights.

        Parameters
        ----------
        weights : float64[n], bool[n] or Vector
            Non-negative.  A Vector brings its own error.
        weight_error : float
            Relative error of each weight; 0 takes the floats as exact.

        Returns
        -------
        Enclosure
            Exact 0 where no possible entry carries a weight, and exactly ``total * c`` where every possible entry
            carries the same exact weight c.  Where the sum of all entries is known, the interval from the complement
            ``total * largest - sum entries * (largest - weight)`` is used as well, so that an availability next to 1
            is as narrow as its unavailability allows.
        """
        weight_absolute = 0.0
        weight_relative: float | None = weight_error
        if isinstance(weights, Vector):
            weight_relative, weight_absolute = weights.relative_error, weights.absolute_error
            allowed = weights.possible
            weights = weights.values
        else:
            allowed = None
        values = np.asarray(weights, dtype=np.float64)
        if values.shape != self.values.shape:
            raise ValueError(f"weights of shape {values.shape} for a vector of shape {self.values.shape}")
        if values.size and not (values.min() >= 0.0 and np.isfinite(values).all()):
            raise ValueError("weights must be finite and not negative")
        carried = values > 0.0
        if weight_absolute > 0.0:
            carried = np.ones_like(carried) if allowed is None else allowed
        if self.possible is not None:
            carried = carried & self.possible
        count = int(np.count_nonzero(carried))
        if count == 0:
            return Enclosure(0.0, 0.0, 0.0, self.method)
        if self.relative_error is None or weight_relative is None:
            value = math.fsum((self.values[carried] * values[carried]).tolist())
            most = math.inf if self.total is None else self.total * float(values.max())
            return Enclosure(min(value, most), None, None, self.method)
        exact_weights = weight_relative == 0.0 and weight_absolute == 0.0
        everywhere = count == (values.size if self.possible is None else int(np.count_nonzero(self.possible)))
        chosen, entries = values[carried], self.values[carried]
        if self.total is not None and exact_weights and everywhere and bool((chosen == chosen[0]).all()):
            return point(Fraction(self.total) * Fraction(float(chosen[0])), self.method)
        error = (self.relative_error, self.absolute_error)
        direct = _dot(entries, chosen, *error, weight_relative, weight_absolute, self.method)
        if self.total is None or not exact_weights:
            return direct
        largest = float(chosen.max())
        mask = self._mask()
        others = largest - values[mask]
        if not _differences_exact(largest, values[mask], others):
            return direct
        lacking = _dot(self.values[mask][others > 0], others[others > 0], *error, 0.0, 0.0, self.method)
        return direct.meet(point(Fraction(self.total) * Fraction(largest), self.method).minus(lacking))

    def _mask(self) -> Flags:
        return np.ones(self.values.size, dtype=bool) if self.possible is None else self.possible


def _differences_exact(largest: float, values: Floats, others: Floats) -> bool:
    """Whether ``largest - values`` was formed without rounding (the error term of TwoSum is 0)."""
    t = others - largest
    return bool((((largest - (others - t)) + (-values - t)) == 0.0).all())


def _dot(
    entries: Floats,
    weights: Floats,
    relative: float,
    absolute: float,
    weight_relative: float,
    weight_absolute: float,
    method: str,
) -> Enclosure:
    """Enclose a sum of products of non-negative numbers, each with its relative and absolute error.

    Products are rounded singly (``u`` and the smallest subnormal each), their sum once (fsum); all margins are
    widened by a factor that covers the roundings of the margins themselves.
    """
    if entries.size == 0:
        return Enclosure(0.0, 0.0, 0.0, method)
    products = entries * weights
    value = math.fsum(products.tolist())
    unweighted = bool((weights == 1.0).all())
    rounding = 0.0 if unweighted else UNIT
    pairs = relative * weight_relative + relative * rounding + weight_relative * rounding
    relative_margin = relative + weight_relative + rounding + pairs + relative * weight_relative * rounding
    absolute_margin = 0.0
    if absolute > 0.0:
        weighing = math.fsum(weights.tolist()) * (1.0 + weight_relative) + weight_absolute * entries.size
        absolute_margin += absolute * weighing
    if weight_absolute > 0.0:
        absolute_margin += weight_absolute * math.fsum(entries.tolist()) * (1.0 + relative)
    if not unweighted:
        absolute_margin += entries.size * 2.0**-1074
    if relative_margin == 0.0 and absolute_margin == 0.0 and entries.size == 1:
        return Enclosure(value, value, value, method)
    # One unit for the single rounding of fsum; the factor covers products of errors with it and the roundings of the
    # margin.
    margin = (value * (relative_margin + UNIT) + absolute_margin) * (1.0 + 1e-12)
    return Enclosure(value, max(0.0, down(value - up(margin))), up(value + up(margin)), method)


def vector_from_doubled(
    x: Doubled,
    relative: float,
    absolute: float,
    method: str,
    *,
    possible: Flags | None = None,
    total: float | None = None,
) -> Vector:
    """Return the rounded vector of double-doubles whose relative error (to the exact numbers) is `relative`.

    Rounding adds ``u``; the error is stated relative to the rounded values, hence the division by its complement.
    """
    return Vector(
        x.high + x.low, relative_to_computed(relative + UNIT), absolute * (1.0 + 1e-12), method, possible, total
    )


def relative_to_computed(relative: float) -> float:
    """Turn an error relative to the exact number into one relative to the computed number, with a margin of its own."""
    if not relative < 0.5:
        raise ValueError(f"relative error {relative} is no bound")
    return relative / (1.0 - relative) * (1.0 + 1e-12)


def distribution(values: Sequence[float] | Floats, method: str) -> Vector:
    """Return an exactly given distribution; its sum is taken as 1 where the floats add up to 1 exactly."""
    array = np.array(values, dtype=np.float64)
    whole = math.fsum(array.tolist()) == 1.0
    return Vector(array, 0.0, 0.0, method, array > 0.0, 1.0 if whole else None)
