"""What a solution says of times that stages stand for."""

from __future__ import annotations

from markov.evaluation import solve_model
from markov.evaluation.fits import fitted_times
from markov.model import Model


def plant(repair: object) -> Model:
    unit = {"failure_rate": "1e-3 /h", "repair_time": repair}
    return Model.from_mapping({"units": {"pump": unit}, "system": "pump"})


def test_nothing_is_said_of_exponential_times() -> None:
    assert fitted_times(plant("10 h")) == ()


def test_a_fit_tells_its_stages_and_its_error() -> None:
    fit, states = fitted_times(plant({"mean": "10 h", "standard_deviation": "5 h"}))
    assert fit.startswith("units.pump.repair_time: 4 stages fitted")
    assert "50 % of it" in fit
    assert states.endswith("5 states at most in place of 2")


def test_a_fixed_time_is_said_to_be_approximated() -> None:
    told = solve_model(plant({"fixed": "10 h", "stages": 5})).assumptions
    assert any("a fixed time, approximated by 5 stages" in each and "44.7 % of it and not 0" in each for each in told)
