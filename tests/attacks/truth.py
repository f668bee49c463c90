"""An outside truth for small chains: fractions where the answer is rational, 150 digits elsewhere."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from fractions import Fraction

import mpmath

DIGITS = 150


class Chain:
    """A chain by its rates per hour; it starts in state 0."""

    def __init__(self, rates: Mapping[tuple[int, int], Fraction | int | str]) -> None:
        self.rates = {arrow: Fraction(rate) for arrow, rate in rates.items()}
        self.size = 1 + max(max(arrow) for arrow in self.rates)

    def matrix(self, stopped: Collection[int] = ()) -> list[list[Fraction]]:
        """The generator, with the states in `stopped` made final."""
        rows = [[Fraction(0)] * self.size for _ in range(self.size)]
        for (source, target), rate in self.rates.items():
            if source not in stopped:
                rows[source][target] += rate
                rows[source][source] -= rate
        return rows

    def stationary(self) -> list[Fraction]:
        """The long-run shares of a chain that returns to every state."""
        rows = [list(column) for column in zip(*self.matrix(), strict=True)]
        rows[-1] = [Fraction(1)] * self.size
        return _solved(rows, [Fraction(0)] * (self.size - 1) + [Fraction(1)])

    def mean_time_to(self, down: Collection[int]) -> Fraction:
        """The mean time from state 0 to the first of the states `down`."""
        inside = [state for state in range(self.size) if state not in down]
        matrix = self.matrix()
        rows = [[-matrix[source][target] for target in inside] for source in inside]
        return _solved(rows, [Fraction(1)] * len(inside))[inside.index(0)]

    def at(self, hours: Fraction | int, stopped: Collection[int] = ()) -> list[mpmath.mpf]:
        """The probability of each state at a time, to about 100 digits."""
        with mpmath.workdps(DIGITS):
            hours = Fraction(hours)
            entries = [[_mpf(entry * hours) for entry in row] for row in self.matrix(stopped)]
            return list(mpmath.expm(mpmath.matrix(entries))[0, :])


def _mpf(value: Fraction) -> mpmath.mpf:
    return mpmath.mpf(value.numerator) / value.denominator


def _solved(rows: list[list[Fraction]], right: list[Fraction]) -> list[Fraction]:
    """Solve by elimination in fractions: no rounding, so no pivoting for accuracy."""
    rows = [[*row, value] for row, value in zip(rows, right, strict=True)]
    for column in range(len(rows)):
        pivot = next(number for number in range(column, len(rows)) if rows[number][column])
        rows[column], rows[pivot] = rows[pivot], rows[column]
        rows[column] = [entry / rows[column][column] for entry in rows[column]]
        for number, row in enumerate(rows):
            if number != column and row[column]:
                rows[number] = [entry - row[column] * lead for entry, lead in zip(row, rows[column], strict=True)]
    return [row[-1] for row in rows]


def holds(entry: Mapping[str, object], exact: Fraction | mpmath.mpf, width: str = "1e-12") -> bool:
    """Whether an entry of the JSON object encloses the exact value, closer than `width` of it."""
    with mpmath.workdps(DIGITS):
        true = _mpf(exact) if isinstance(exact, Fraction) else exact
        lower, value, upper = (mpmath.mpf(entry[key]) for key in ("lower", "value", "upper"))
        return bool(lower <= true <= upper and upper - lower <= mpmath.mpf(width) * true and lower <= value <= upper)
