"""Stages fitted to a mean and a spread have that mean and spread."""

from __future__ import annotations

from fractions import Fraction
from math import sqrt

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.model import Model
from markov.states.fitting import Fit, fit_stages, moments


def fitted(spread: float) -> Fit:
    spec = {
        "units": {
            "pump": {"failure_rate": "1 /y", "repair_time": {"mean": "10 h", "standard_deviation": f"{10 * spread} h"}}
        },
        "system": "pump",
    }
    shape = Model.from_mapping(spec).units["pump"].repair_time_shape
    assert shape is not None
    return fit_stages(shape)


@given(st.floats(0.1, 4.0))
def test_mean_and_spread_are_met(spread: float) -> None:
    fit = fitted(round(spread, 4))
    mean, second, _ = moments(fit.weights, fit.exits)
    assert abs(mean - 1) < Fraction(1, 10**12)
    assert sqrt(float(second - mean**2)) == pytest.approx(round(spread, 4), rel=1e-7)
    assert fit.spread == pytest.approx(round(spread, 4), rel=1e-7)


def test_the_spread_of_an_exponential_time_takes_one_stage() -> None:
    assert fitted(1.0).weights == (Fraction(1),)


@pytest.mark.parametrize(("spread", "stages"), [(0.5, 4), (0.55, 4), (0.99, 2), (2.0, 2)])
def test_no_more_stages_than_needed(spread: float, stages: int) -> None:
    assert fitted(spread).stages == stages


def test_an_erlang_time_is_fitted_exactly() -> None:
    fit = fitted(0.5)
    assert fit.weights == (Fraction(4),) * 4
    assert not any(fit.exits)
    assert fit.skewness_gap == pytest.approx(0.0, abs=1e-12)  # an Erlang law is a gamma law


def test_moments_of_unlike_stages_by_hand() -> None:
    # rate 2, then with chance 1/2 a stage of rate 1: mean 1/2 + 1/2, second moment 1/2 + 2·½·½·1 + ½·2
    assert moments((Fraction(2), Fraction(1)), (Fraction(1, 2), Fraction(0)))[:2] == (Fraction(1), Fraction(2))
