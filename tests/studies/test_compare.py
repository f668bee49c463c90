"""Holds the comparison of solver and simulation: it sees what differs, and says so where it cannot tell."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

import pytest

from markov.model import Model
from markov.results import Result, Solution
from tests.studies.compare import compare, each_confidence
from tests.studies.hand_values import WORN, one

DOWN = 1 / 11
MODEL = Model.from_mapping(one(WORN))


def solver_of(value: float | None, *, at: float | None = None) -> Callable[[Model, Sequence[Fraction]], Solution]:
    """Stand in for the solver: it has one answer."""
    measure = "steady_state_unavailability" if at is None else "unavailability"
    hours = None if at is None else Fraction(at)
    reason = "by hand" if value is None else None
    result = Result(measure, None, None, hours, None, value, value, value, "1", "by hand", reason)

    def solve(model: Model, times: Sequence[Fraction]) -> Solution:
        return Solution("", "", "", "", 2, 2, 2, 1, Fraction(8760), (result,), (), (), ())

    return solve


def test_the_right_value_agrees() -> None:
    asked = [("steady_state_unavailability", None, None)]
    (found,) = compare(MODEL, asked, 1, 100, horizon=2e6, solver=solver_of(DOWN))
    assert found.agrees, str(found)


def test_a_value_off_by_a_tenth_differs() -> None:
    asked = [("steady_state_unavailability", None, None)]
    (found,) = compare(MODEL, asked, 1, 100, horizon=2e7, solver=solver_of(1.1 * DOWN))
    assert found.agrees is False
    assert "DIFFERS" in str(found)


def test_a_value_at_a_time_is_compared() -> None:
    asked = [("unavailability", None, 1e4)]
    (found,) = compare(MODEL, asked, 1, 100, histories=400, solver=solver_of(DOWN, at=1e4))
    assert found.agrees, str(found)


@pytest.mark.parametrize(
    ("measure", "value", "why"),
    [
        ("pfd_peak", DOWN, "the solution does not hold it"),
        ("steady_state_unavailability", None, "by hand"),
    ],
)
def test_what_cannot_be_compared_is_told(measure: str, value: float | None, why: str) -> None:
    (found,) = compare(MODEL, [(measure, None, None)], 1, 1, horizon=1e4, solver=solver_of(value))
    assert found.agrees is None
    assert found.why == why
    assert why in str(found)


def test_what_was_never_seen_is_not_judged() -> None:
    model = Model.from_mapping(one({"failure_rate": "1e-9 /h", "repair_time": "1 h"}))
    asked = [("steady_state_unavailability", None, None)]
    (found,) = compare(model, asked, 1, 1, horizon=1e4, solver=solver_of(1e-9))
    assert found.agrees is None
    (found,) = compare(model, asked, 1, 1, horizon=1e4, solver=solver_of(0.0))
    assert found.agrees is True


def test_a_larger_family_asks_more_of_each() -> None:
    assert each_confidence(1, 0.99) == pytest.approx(0.99)
    assert 1 - each_confidence(100, 0.99) == pytest.approx(1e-4)
