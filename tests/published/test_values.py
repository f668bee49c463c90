"""Holds the program to values from the literature, each with its source in checks.yaml."""

from dataclasses import replace
from decimal import Decimal
from fractions import Fraction

import pytest

from markov import MEASURES
from tests.published.checks import MODELS, Check, Published
from tests.published.solving import CLOSE, bounds, result_of, solve

Case = tuple[Published, Check]

CASES = [pytest.param((model, check), id=check.id) for model in MODELS for check in model.checks]
VALUES = [case for case in CASES if case.values[0][1].solves_for is None]
VERDICTS = [case for case in CASES if case.values[0][0].is_own_text]
RATIOS = [case for case in CASES if case.values[0][1].solves_for is not None]


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
    result = result_of(model, check)
    assert result.lower <= result.value <= result.upper
    for bound in bounds(model, check):
        assert abs(bound - Fraction(check.exact)) <= CLOSE * Fraction(check.exact)


@pytest.mark.parametrize("case", VALUES)
def test_published_value_is_reached_to_its_digits(case: Case) -> None:
    model, check = case
    assert agrees(*bounds(model, check), check.published)


@pytest.mark.parametrize("case", VALUES)
def test_answer_is_in_the_unit_of_its_measure(case: Case) -> None:
    model, check = case
    assert result_of(model, check).unit == MEASURES[check.measure].unit


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
    # The availability rises with the ratio, so the ratio that is asked for lies between these two.
    ends = [f"{Decimal(check.exact) * (1 + Decimal(sign) * Decimal('1e-12'))}" for sign in (-1, 1)]
    below, above = (bounds(with_parameter(model, check, end), check) for end in ends)
    assert below[1] < level < above[0]


@pytest.mark.parametrize("case", RATIOS)
def test_level_is_reached_at_the_published_ratio_to_its_digits(case: Case) -> None:
    model, check = case
    level = Fraction(check.to_reach)
    assert agrees(*bounds(with_parameter(model, check, check.published), check), check.to_reach)
    half = Decimal((0, (5,), Decimal(check.published).as_tuple().exponent - 1))
    below, above = (
        bounds(with_parameter(model, check, f"{Decimal(check.published) + sign * half}"), check) for sign in (-1, 1)
    )
    assert below[1] < level < above[0]


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
