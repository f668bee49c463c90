"""Symbolic rates: products of named factors that keep their exact values.

A transition of the chain does not hold a number.  It holds the number of a `Rate` in a `RateTable`; the rate is a
product of `Factor` objects (a failure rate, a coverage, the complement of a coverage …) and the table evaluates each
product once, exactly, in rational arithmetic.  A complement is therefore never formed in floating point.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov.quantities import Quantity


@dataclass(frozen=True)
class Factor:
    """One factor of a rate.

    Parameters
    ----------
    symbol : str
        What the formula prints, such as ``λ(pump)`` or the name of the parameter that was written in the spec.
    exact : Fraction
        Value per hour, or plain for a probability.
    meaning : str
        What the symbol stands for, in words; goes into the legend.
    origin : str
        Where the value stands in the spec, such as ``units.pump.failure_rate``.
    is_share : bool
        Whether it is a probability or another plain factor, not a rate.
    base : Factor or None
        What this factor is the complement of.
    quantity : Quantity or None
        What the spec says, for a factor that is no complement: the factor is `stages` times it, or `stages` divided by
        it where `is_reciprocal`.  Says nothing about which factors are equal.
    stages : int
    is_reciprocal : bool
    """

    symbol: str
    exact: Fraction
    meaning: str
    origin: str
    is_share: bool = False
    base: Factor | None = None
    quantity: Quantity | None = field(default=None, compare=False, repr=False)
    stages: int = field(default=1, compare=False, repr=False)
    is_reciprocal: bool = field(default=False, compare=False, repr=False)

    def complement(self) -> Factor:
        """Return one minus this probability, exact."""
        return Factor(f"(1−{self.symbol})", 1 - self.exact, f"complement of {self.symbol}", self.origin, True, self)


_SUPERSCRIPTS = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")


def _ordered(factors: Iterable[Factor]) -> tuple[Factor, ...]:
    return tuple(sorted(factors, key=lambda factor: (factor.is_share, factor.symbol.removeprefix("(1−"))))


@dataclass(frozen=True)
class Rate:
    """A rational number times a product of factors; rates stand before shares, each by symbol."""

    coefficient: Fraction
    factors: tuple[Factor, ...]

    @property
    def exact(self) -> Fraction:
        """Exact value per hour."""
        value = self.coefficient
        for factor in self.factors:
            value *= factor.exact
        return value

    def formula(self, multiple: int = 1) -> str:
        """Return the formula as it is printed, a whole-number multiple included."""
        coefficient = self.coefficient * multiple
        above, below = [], []
        for factor, power in Counter(self.factors).items():
            symbol = factor.symbol
            raised = str(power).translate(_SUPERSCRIPTS) if power > 1 else ""
            if symbol.startswith("1/"):
                below.append(symbol[2:] + raised)
            else:
                above.append(symbol + raised)
        if coefficient.numerator != 1 or not above:
            above.insert(0, str(coefficient.numerator))
        if coefficient.denominator != 1:
            below.insert(0, str(coefficient.denominator))
        return "/".join(["·".join(above), *below])


@dataclass
class RateTable:
    """All rates of one chain, each stored once and named by its number."""

    rates: list[Rate] = field(default_factory=list)
    _numbers: dict[Rate, int] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.rates)

    def intern(self, rate: Rate) -> int:
        """Return the number of `rate`, adding it if it is new."""
        number = self._numbers.get(rate)
        if number is None:
            number = len(self.rates)
            self.rates.append(rate)
            self._numbers[rate] = number
        return number

    def of(self, *factors: Factor) -> int:
        """Return the number of the product of `factors`."""
        return self.intern(Rate(Fraction(1), _ordered(factors)))

    def times(self, number: int, factor: Factor | Fraction) -> int:
        """Return the number of rate `number` multiplied by one more factor, or by a plain rational."""
        rate = self.rates[number]
        if isinstance(factor, Fraction):
            return self.intern(Rate(rate.coefficient * factor, rate.factors))
        return self.intern(Rate(rate.coefficient, _ordered((*rate.factors, factor))))

    def double_doubles(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the values of all rates as sums of two floats.

        Returns
        -------
        high, low : float64[r]
            ``high + low`` differs from the exact rate by a relative error of at most 2**-104.
        """
        return split_exact([rate.exact for rate in self.rates])


def split_exact(values: Sequence[Fraction]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return exact numbers as unevaluated sums of two floats, each part rounded to nearest."""
    high = np.array([float(value) for value in values], dtype=np.float64)
    low = np.array(
        [float(value - Fraction(part)) for value, part in zip(values, high.tolist(), strict=True)], dtype=np.float64
    )
    return high, low
