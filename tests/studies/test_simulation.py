"""Holds the simulation to values that were worked out by hand."""

from __future__ import annotations

import json
import math

import pytest

from markov.errors import NotReached, UsageError
from markov.model import Model
from markov.studies.simulation import Simulated, simulate
from tests.studies.hand_values import ACTIVE, CASES, FOR_GOOD, HIDDEN, WORN, Case, one, pair

#: Chance that all values of this file lie inside their intervals, were the seeds not fixed.
FAMILY_CONFIDENCE = 0.999
EACH = FAMILY_CONFIDENCE ** (1 / len(CASES))
#: Widest standard error, relative, with which a case still says something.
WIDEST = 0.06


_FOUND: dict[str, Simulated] = {}


def simulated(case: Case) -> Simulated:
    """Simulate the plant of a case, once for all cases that ask the same of it."""
    asked = (case.spec, case.histories, case.horizon, case.at, case.first_failure)
    key = json.dumps(asked, default=str)
    if key not in _FOUND:
        _FOUND[key] = simulate(
            Model.from_mapping(case.spec),
            histories=case.histories,
            seed=20261201,
            horizon=case.horizon,
            times=() if case.at is None else (case.at,),
            first_failure=case.first_failure,
        )
    return _FOUND[key]


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_simulation_agrees_with_the_hand_value(case: Case) -> None:
    found = simulated(case).estimate(case.measure, of=case.of, at_hours=case.at)
    low, high = found.interval(EACH)
    assert low <= case.value <= high, f"{found.value:.6g} ± {found.standard_error:.2g}, by hand {case.value:.6g}"
    assert found.standard_error <= WIDEST * case.value


def test_same_seed_gives_same_numbers() -> None:
    model = Model.from_mapping(pair(WORN, ACTIVE))
    first, second = (simulate(model, histories=50, seed=3, horizon=1e5, times=(100.0,)) for _ in range(2))
    other = simulate(model, histories=50, seed=4, horizon=1e5, times=(100.0,))
    assert first.estimates == second.estimates
    assert first.estimates != other.estimates


def test_a_hidden_fault_at_the_start_stays_until_the_first_test() -> None:
    model = Model.from_mapping(one(HIDDEN, initial={"u": "hidden"}, tests={"t": {"of": ["u"], "interval": "100 h"}}))
    found = simulate(model, histories=20, seed=1, times=(99.0, 100.0))
    assert found.estimate("unavailability", at_hours=99.0).value == 1.0
    assert found.estimate("unavailability", at_hours=100.0).value == 0.0


def test_fixed_instants_happen_in_the_order_of_the_language() -> None:
    # The visit comes before the test of the same instant, so what the test finds waits for the next visit.
    spec = pair(
        {"failure_rate": "1e-12 /h", "repair_time": "0.001 h", "detected": "0 %"},
        {**ACTIVE, "required": 2, "repair_when": {"visits_every": "100 h"}},
        initial={"u": {"hidden": 1}},
        tests={"t": {"of": ["u"], "interval": "100 h"}},
    )
    found = simulate(Model.from_mapping(spec), histories=5, seed=1, times=(150.0, 250.0))
    assert found.estimate("unavailability", at_hours=150.0).value == 1.0
    assert found.estimate("unavailability", at_hours=250.0).value == 0.0


def test_a_plant_that_is_down_at_the_start_has_failed() -> None:
    model = Model.from_mapping(one(WORN, initial={"u": "failed"}))
    found = simulate(model, histories=20, seed=1, times=(0.0, 10.0), first_failure=True)
    assert found.estimate("unreliability", at_hours=0.0).value == 1.0
    assert found.estimate("mean_time_to_first_failure").value == 0.0


def test_a_life_that_never_fails_is_told() -> None:
    with pytest.raises(UsageError, match="without a failure"):
        simulate(Model.from_mapping(one({"failure_rate": "0 /h"})), histories=1, seed=1, first_failure=True)


def test_a_life_that_goes_on_too_long_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("markov.studies.simulation.MOST_EVENTS", 10)
    spec = {
        "units": {"u": WORN, "v": {"failure_rate": "0 /h"}},
        "system": "v",
        "crews": {"f": {"size": 1, "repairs": ["u"]}},
    }
    with pytest.raises(NotReached, match="10 events"):
        simulate(Model.from_mapping(spec), histories=1, seed=1, first_failure=True)


def test_a_chain_written_by_hand_has_no_items() -> None:
    spec = {
        "states": {"good": {"up": True, "initial": True}, "bad": {"up": False}},
        "transitions": [{"from": "good", "to": "bad", "rate": "1 /h"}],
    }
    with pytest.raises(UsageError, match="written by hand"):
        simulate(Model.from_mapping(spec), histories=1, seed=1, horizon=1.0)


def test_intervals_widen_with_confidence() -> None:
    model = Model.from_mapping(one(FOR_GOOD))
    found = simulate(model, histories=200, seed=1, times=(500.0,)).estimate("unreliability", at_hours=500.0)
    narrow, wide = found.interval(0.9), found.interval(0.999)
    assert wide[0] < narrow[0] < found.value < narrow[1] < wide[1]
    assert math.isclose(found.standard_error, math.sqrt(found.value * (1 - found.value) / 200))
