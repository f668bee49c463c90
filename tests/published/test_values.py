"""Holds the program to values from the literature, each with its source in checks.yaml."""

from collections.abc import Callable
from dataclasses import replace
from decimal import Decimal
from fractions import Fraction
from typing import Any

import pytest

from markov import MEASURES
from tests.published.checks import MODELS, Check, Published
from tests.published.solving import CLOSE, bounds, results_of, solve

Case = tuple[Published, Check]

CASES = [pytest.param((model, check), id=check.id) for model in MODELS for check in model.checks]


def cases(condition: Callable[[Published, Check], bool]) -> list[Any]:
    """Return the checks that meet a condition."""
    return [case for case in CASES if condition(*case.values[0])]


VALUES = cases(lambda model, check: check.solves_for is None)
REACHED = cases(lambda model, check: check.solves_for is None and check.formula is None)
FORMULAS = cases(lambda model, check: check.formula is not None)
VERDICTS = cases(lambda model, check: model.is_own_text and len(check.terms) == 1 and not check.is_counted)
RATIOS = cases(lambda model, check: check.solves_for is not None and not check.is_counted)
PRINTED_RATIOS = cases(
    lambda model, check: check.solves_for is not None and check.formula is None and not check.is_counted
)
COUNTS = cases(lambda model, check: check.is_counted)


def rounds_to(value: Fraction, published: str) -> bool:
    """Tell whether a value shows as the published one when it is rounded to as many digits."""
    step = Fraction(Decimal((0, (1,), Decimal(published).as_tuple().exponent)))
    return abs(value - Fraction(published)) <= step / 2


def agrees(lower: Fraction, upper: Fraction, published: str) -> bool:
    """Tell whether bounds enclose a published fraction, or round to a published decimal number."""
    if "/" in published:
        return lower <= Fraction(published) <= upper
    return rounds_to(lower, published) and rounds_to(upper, published)


@pytest.mark.parametrize("case", VALUES)
def test_exact_value_is_enclosed(case: Case) -> None:
    model, check = case
    lower, upper = bounds(model, check)
    least, greatest = check.exact_bounds
    assert lower <= greatest
    assert least <= upper


@pytest.mark.parametrize("case", VALUES)
def test_value_and_bounds_are_close_to_the_exact_value(case: Case) -> None:
    model, check = case
    for result in results_of(model, check):
        assert result.lower <= result.value <= result.upper
    for bound in bounds(model, check):
        assert abs(bound - Fraction(check.exact)) <= CLOSE * Fraction(check.exact)


@pytest.mark.parametrize("case", REACHED)
def test_published_value_is_reached_to_its_digits(case: Case) -> None:
    model, check = case
    assert agrees(*bounds(model, check), check.published)


@pytest.mark.parametrize("case", FORMULAS)
def test_published_value_of_an_approximation_is_that_of_its_formula(case: Case) -> None:
    _, check = case
    assert rounds_to(Fraction(check.formula), check.published)


@pytest.mark.parametrize("case", FORMULAS)
def test_approximation_is_off_by_as_much_as_is_said(case: Case) -> None:
    model, check = case
    ends = check.exact_bounds if check.solves_for is not None else bounds(model, check)
    for end in ends:
        assert rounds_to((Fraction(check.formula) / end - 1) * 100, check.formula_off_by)


@pytest.mark.parametrize("case", VALUES)
def test_answer_is_in_the_unit_of_its_measure(case: Case) -> None:
    model, check = case
    assert [each.unit for each in results_of(model, check)] == [MEASURES[term.measure].unit for term in check.terms]


@pytest.mark.parametrize("case", VERDICTS)
def test_limits_beside_the_exact_value_are_met_and_missed(case: Case) -> None:
    model, check = case
    verdicts = {target.id: target.verdict for target in solve(model).targets}
    assert verdicts[f"{check.id} below"] == "met"
    assert verdicts[f"{check.id} above"] == "missed"


def with_parameter(model: Published, check: Check, value: str) -> Published:
    """Return the model with another value of the parameter that a check solves for."""
    line = f"{check.solves_for}: {check.exact}\n"
    assert model.spec.count(line) == 1
    text = model.spec.replace(line, f"{check.solves_for}: {value}\n")
    return replace(model, spec=text, checks=(check,))


@pytest.mark.parametrize("case", RATIOS)
def test_level_is_reached_at_the_exact_ratio(case: Case) -> None:
    model, check = case
    level = Fraction(check.to_reach)
    lower, upper = bounds(model, check)
    assert lower <= level * (1 + CLOSE)
    assert level * (1 - CLOSE) <= upper
    # The measure rises with the parameter, so the value that is asked for lies between these two.
    ends = [f"{Decimal(check.exact) * (1 + Decimal(sign) * Decimal('1e-12'))}" for sign in (-1, 1)]
    below, above = (bounds(with_parameter(model, check, end), check) for end in ends)
    assert below[1] < level < above[0]


@pytest.mark.parametrize("case", PRINTED_RATIOS)
def test_level_is_reached_at_the_published_ratio_to_its_digits(case: Case) -> None:
    model, check = case
    level = Fraction(check.to_reach)
    assert agrees(*bounds(with_parameter(model, check, check.published), check), check.to_reach)
    half = Decimal((0, (5,), Decimal(check.published).as_tuple().exponent - 1))
    below, above = (
        bounds(with_parameter(model, check, f"{Decimal(check.published) + sign * half}"), check) for sign in (-1, 1)
    )
    assert below[1] < level < above[0]


@pytest.mark.parametrize("case", COUNTS)
def test_level_is_reached_with_the_published_number_and_not_with_one_less(case: Case) -> None:
    model, check = case
    assert check.exact == check.published
    level = Fraction(check.to_reach)
    fewer = with_parameter(model, check, str(int(check.exact) - 1))
    assert bounds(fewer, check)[1] < level <= bounds(model, check)[0]


def test_the_lock_meets_one_requirement_of_two() -> None:
    (lock,) = (model for model in MODELS if model.name == "lock")
    solution = solve(lock)
    assert {target.id: target.verdict for target in solution.targets} == {"LOCK-1": "met", "LOCK-2": "missed"}
    assert (solution.states, solution.transitions) == (4, 9)


@pytest.mark.parametrize(
    ("value", "published", "agreement"),
    [
        ("0.54618", "0.55", True),
        ("0.54499", "0.55", False),
        ("0.90496", "0.9050", True),
        ("0.90494", "0.9050", False),
        ("50015499", "5.0015e7", True),
        ("50015501", "5.0015e7", False),
        ("0.5", "1/2", True),
        ("0.5000000000000001", "1/2", False),
    ],
)
def test_a_value_off_by_half_a_digit_would_be_seen(value: str, published: str, agreement: bool) -> None:
    assert agrees(Fraction(value), Fraction(value), published) is agreement
