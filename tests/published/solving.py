"""Solves the spec of a published check by the whole program."""

from __future__ import annotations

from decimal import Context, Decimal
from fractions import Fraction
from functools import cache

import markov
from markov import MEASURES, spec
from tests.published.checks import Check, Published, Term

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


def _line(name: str, term: Term, direction: str, limit: Fraction) -> str:
    """Return a target on what a term asks for; its limit is in the unit of measure of the program."""
    measure = MEASURES[term.measure]
    asked = {"of": term.of, "at": term.at, "state": term.state}
    said = "".join(f"{key}: {given}, " for key, given in asked.items() if given is not None)
    written = _decimal(limit) + LIMIT_UNITS[measure.limit]
    return f"  - {{id: {name}, measure: {term.measure}, {said}{direction}: {written}}}\n"


def _beside(check: Check, name: str, value: Fraction, year_hours: Fraction) -> str:
    """Return a target whose limit is `value`, in the unit of measure of the source."""
    (term,) = check.terms
    limit = (value - check.plus) / term.times / scale(MEASURES[term.measure].unit, check.unit, year_hours)
    return _line(name, term, "at_least" if term.times > 0 else "at_most", limit)


def _lines(check: Check, year_hours: Fraction) -> list[str]:
    asked = [_line(f"{check.id} {number}", term, "at_least", Fraction(0)) for number, term in enumerate(check.terms)]
    if len(check.terms) > 1:
        return asked
    level = Fraction(check.to_reach if check.to_reach is not None else check.exact)
    below = _beside(check, f"{check.id} below", level * (1 - CLOSE), year_hours)
    return [*asked, below, _beside(check, f"{check.id} above", level * (1 + CLOSE), year_hours)]


def _year(text: str) -> Fraction:
    return Fraction(spec.read_text(text).year_hours)


@cache
def solve(model: Published) -> markov.Solution:
    """Solve the spec of a model, with a target for each term, and two just beside the exact value of each check."""
    text = model.spec
    if model.is_own_text:
        year = _year(text)
        text += "targets:\n" + "".join(line for check in model.checks for line in _lines(check, year))
    return markov.solve(spec.read_text(text, name=model.name))


def results_of(model: Published, check: Check) -> tuple[markov.Result, ...]:
    """Return what the program answers to the terms of a check, in its own units of measure."""
    solution = solve(model)
    if not model.is_own_text:
        return tuple(solution.result(term.measure, of=term.of) for term in check.terms)
    results = {target.id: target.result for target in solution.targets}
    return tuple(results[f"{check.id} {number}"] for number in range(len(check.terms)))


def bounds(model: Published, check: Check) -> tuple[Fraction, Fraction]:
    """Return the bounds on the answer, in the unit of measure of the source."""
    lower = upper = check.plus
    for term, result in zip(check.terms, results_of(model, check), strict=True):
        assert result.reason is None, result.reason
        assert result.is_proven, result.method
        alone = len(check.terms) == 1
        factor = term.times * (scale(result.unit, check.unit, solve(model).year_hours) if alone else 1)
        ends = sorted((Fraction(result.lower) * factor, Fraction(result.upper) * factor))
        lower, upper = lower + ends[0], upper + ends[1]
    return lower, upper
