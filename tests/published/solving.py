"""Solves the spec of a published check by the whole program."""

from __future__ import annotations

from decimal import Context, Decimal
from fractions import Fraction
from functools import cache

import markov
from markov import MEASURES, spec
from tests.published.checks import Check, Published

#: Unit of measure of a limit in a target, by what the limit of the measure is.
LIMIT_UNITS = {"share": "", "number": "", "time": " h", "rate": " /h"}

#: By how much of the exact value a limit lies beside it.
CLOSE = Fraction(1, 10**12)

_LONG = Context(prec=60)


def scale(native: str, unit: str, year_hours: Fraction) -> Fraction:
    """Return what a value in the program's unit of measure is multiplied by to be in the unit of the source."""
    factors = {("1/h", "1/month"): year_hours / 12, ("h/y", "min/y"): Fraction(60)}
    return Fraction(1) if native == unit else factors[native, unit]


def _decimal(value: Fraction) -> str:
    return format(_LONG.divide(Decimal(value.numerator), Decimal(value.denominator)), "e")


def _target(check: Check, name: str, value: Fraction, year_hours: Fraction) -> str:
    """Return a target whose limit is `value`, in the unit of measure of the source."""
    measure = MEASURES[check.measure]
    direction = "at_least"
    if check.share_not_waiting_of is not None:
        value, direction = (1 - value) * check.share_not_waiting_of, "at_most"
    limit = _decimal(value / scale(measure.unit, check.unit, year_hours)) + LIMIT_UNITS[measure.limit]
    asked = {"of": check.of, "at": check.at, "state": check.state}
    said = "".join(f"{key}: {given}, " for key, given in asked.items() if given is not None)
    return f"  - {{id: {name}, measure: {check.measure}, {said}{direction}: {limit}}}\n"


def _year(text: str) -> Fraction:
    return Fraction(spec.read_text(text).year_hours)


@cache
def solve(model: Published) -> markov.Solution:
    """Solve the spec of a model, with two targets for each check: just below its exact value and just above."""
    text = model.spec
    if model.is_own_text:
        year, lines = _year(text), []
        for check in model.checks:
            level = Fraction(check.to_reach if check.to_reach is not None else check.exact)
            lines.append(_target(check, f"{check.id} below", level * (1 - CLOSE), year))
            lines.append(_target(check, f"{check.id} above", level * (1 + CLOSE), year))
        text += "targets:\n" + "".join(lines)
    return markov.solve(spec.read_text(text, name=model.name))


def result_of(model: Published, check: Check) -> markov.Result:
    """Return what the program answers to a check, in its own unit of measure."""
    solution = solve(model)
    if not model.is_own_text:
        return solution.result(check.measure, of=check.of)
    return next(target.result for target in solution.targets if target.id == f"{check.id} below")


def bounds(model: Published, check: Check) -> tuple[Fraction, Fraction]:
    """Return the bounds on the answer, in the unit of measure of the source."""
    result = result_of(model, check)
    assert result.reason is None, result.reason
    assert result.is_proven, result.method
    factor = scale(result.unit, check.unit, solve(model).year_hours)
    lower, upper = Fraction(result.lower) * factor, Fraction(result.upper) * factor
    if check.share_not_waiting_of is not None:
        return 1 - upper / check.share_not_waiting_of, 1 - lower / check.share_not_waiting_of
    return lower, upper
