"""Rules beside units, groups and crews, each against a number worked out by hand."""

from __future__ import annotations

import math
from typing import Any

import pytest

from markov.evaluation import solve_model
from markov.model import Model
from markov.states import generate

RATE, TIME = 1e-3, 10.0


def answer(spec: dict[str, Any], measure: str, at: float | None = None) -> float:
    from fractions import Fraction

    model = Model.from_mapping({"mission": {"time": "100 h"}, **spec})
    solution = solve_model(model, [] if at is None else [Fraction(at)])
    for result in solution.results:
        if result.measure == measure and result.of is None and (at is None or result.at_hours == Fraction(at)):
            assert result.value is not None, result.reason
            assert result.lower is not None
            assert result.upper is not None
            assert result.lower <= result.value <= result.upper
            return result.value
    raise KeyError(measure)


def pair(**more: Any) -> dict[str, Any]:
    return {
        "units": {"p": {"failure_rate": "1e-3 /h", "repair_time": "10 h"}},
        "groups": {"g": {"members": [{"unit": "p", "count": 2}], "redundancy": "active"}},
        "system": "g",
        **more,
    }


def test_a_beta_factor_takes_both_at_once() -> None:
    spec = pair(common_causes={"c": {"members": ["p"], "beta": "10 %"}})
    own, both, mu = 0.9 * RATE, 0.1 * RATE, 1 / TIME
    # balance of states 0, 1, 2 failed
    a, b, c = 2 * own, both, own + both
    # p0 (a + b) = p1 mu;  p2 2mu = p0 b + p1 c
    p0, p1 = 1.0, (a + b) / mu
    # flow into 1 from 2 closes the balance: p1 (mu + c) = p0 a + p2 2mu, which the two above imply
    p2 = (p0 * b + p1 * c) / (2 * mu)
    assert answer(spec, "steady_state_unavailability") == pytest.approx(p2 / (p0 + p1 + p2), rel=1e-12)


def test_greek_letters_of_three_are_staggered_alpha_factors() -> None:
    group = {"g": {"members": [{"unit": "p", "count": 3}], "required": 2, "redundancy": "active"}}
    greek = pair(groups=group, common_causes={"c": {"members": ["p"], "greek_letters": [0.1, 0.3]}})
    alphas = {"alpha_factors": [0.9, 0.07, 0.03], "testing": "staggered"}
    alpha = pair(groups=group, common_causes={"c": {"members": ["p"], **alphas}})
    first = answer(greek, "unreliability")
    assert first == pytest.approx(answer(alpha, "unreliability"), rel=1e-12)
    # from three up: singles first, then any; pairs and all three at once: 3·Q2 + Q3
    assert first > 100 * RATE * (3 * 0.1 * 0.7 / 2 + 0.1 * 0.3) * 0.9


def test_a_hidden_fault_lasts_until_its_test() -> None:
    spec = {
        "units": {"p": {"failure_rate": "1e-3 /h", "repair_time": "0 h", "detected": 0}},
        "tests": {"t": {"of": ["p"], "interval": "500 h"}},
        "system": "p",
    }
    x = RATE * 500
    assert answer(spec, "pfd_average") == pytest.approx(1 - (1 - math.exp(-x)) / x, rel=1e-12)
    assert answer(spec, "pfd_peak") == pytest.approx(1 - math.exp(-x), rel=1e-12)


def test_what_no_test_finds_stays() -> None:
    spec = {
        "units": {"p": {"failure_rate": "1e-3 /h", "repair_time": "0 h", "detected": 0}},
        "tests": {"t": {"of": ["p"], "interval": "500 h", "coverage": "60 %"}},
        "system": "p",
    }
    assert answer(spec, "pfd_average") == pytest.approx(1.0)
    # after one test: found share renewed, the rest kept
    kept = 0.4 * (1 - math.exp(-RATE * 500))
    after = kept + (1 - kept) * (1 - math.exp(-RATE * 100))
    assert answer(spec, "unavailability", 600.0) == pytest.approx(after, rel=1e-12)


def test_a_demand_reveals() -> None:
    spec = {
        "units": {"p": {"failure_rate": "1e-3 /h", "repair_time": "10 h", "detected": 0, "revealed_by": ["demand"]}},
        "demand": {"rate": "1 per 50 h"},
        "system": "p",
    }
    down = RATE * (50 + 10) / (1 + RATE * (50 + 10))
    assert answer(spec, "steady_state_unavailability") == pytest.approx(down, rel=1e-12)
    assert answer(spec, "hazardous_events_per_year") == pytest.approx(down * 8760 / 50, rel=1e-12)


def test_a_phase_with_its_rate_and_criterion() -> None:
    spec = pair(
        units={"p": {"failure_rate": "1e-3 /h"}},
        phases=[
            {"name": "first", "duration": "50 h", "rate_factors": {"p": 4}},
            {"name": "then", "required": {"g": 2}},
        ],
    )
    survives = math.exp(-RATE * 4 * 50)
    # both have to be good at the boundary, and to stay so
    assert answer(spec, "unreliability", 80.0) == pytest.approx(1 - survives**2 * math.exp(-2 * RATE * 30), rel=1e-12)


def test_load_sharing_raises_the_rate_of_the_last() -> None:
    group = {"members": [{"unit": "p", "count": 2}], "redundancy": "active", "load_sharing": {2: 1, 1: 3}}
    spec = pair(units={"p": {"failure_rate": "1e-3 /h"}}, groups={"g": group})
    mean = 1 / (2 * RATE) + 1 / (3 * RATE)
    assert answer(spec, "mean_time_to_first_failure") == pytest.approx(mean, rel=1e-12)


def test_a_spare_is_ordered_when_it_is_drawn() -> None:
    spec = {
        "units": {"p": {"failure_rate": "1e-3 /h"}},
        "spares": {"s": {"for": ["p"], "stock": 1, "lead_time": "400 h"}},
        "system": "p",
    }
    # on shelf -> drawn at a fault, order placed; a fault while the shelf is empty waits for the order, and draws it
    lam, nu = RATE, 1 / 400
    p_shelf, p_empty = 1.0, lam / nu  # up with a spare, up without
    p_down = p_empty * lam / nu  # down: the order that comes is drawn at once and another one placed
    # balance: up without loses to up with (nu) and to down (lam); down returns to up without (nu)
    total = p_shelf + p_empty + p_down
    assert answer(spec, "steady_state_unavailability") == pytest.approx(p_down / total, rel=1e-12)
    assert answer(spec, "spares_per_year") == pytest.approx(lam * (p_shelf + p_empty) / total * 8760, rel=1e-12)


def test_repair_deferred_until_two_have_failed() -> None:
    group = {"members": [{"unit": "p", "count": 2}], "redundancy": "active", "repair_when": {"failed": 2}}
    spec = pair(groups={"g": group})
    lam, mu = RATE, 1 / TIME
    # 0 failed -> 1 deferred -> 2 failed, both under repair -> 1 under repair -> 0 (or back to 2)
    p0 = 1.0
    deferred = 2 * lam * p0 / lam
    repair1 = 2 * lam * p0 / mu
    both = (mu + lam) * repair1 / (2 * mu)
    total = p0 + deferred + repair1 + both
    assert answer(spec, "steady_state_unavailability") == pytest.approx(both / total, rel=1e-12)


def test_restoration_makes_all_good_at_once() -> None:
    spec = pair(restoration={"time": "5 h", "to": "all_good"})
    lam, mu, rho = RATE, 1 / TIME, 1 / 5.0
    one = 2 * lam / (mu + lam)
    both = lam * one / rho
    assert answer(spec, "steady_state_unavailability") == pytest.approx(both / (1 + one + both), rel=1e-12)


def test_a_unit_that_acts_needlessly_brings_the_group_down() -> None:
    modes = {
        "stuck": {"share": "60 %", "effect": "fails_to_act"},
        "trip": {"share": "40 %", "effect": "acts_needlessly", "repair_time": "2 h"},
    }
    spec = {
        "units": {"p": {"failure_rate": "1e-3 /h", "repair_time": "10 h", "failure_modes": modes}},
        "system": "p",
    }
    stuck, trip = 0.6 * RATE * 10, 0.4 * RATE * 2
    assert answer(spec, "steady_state_unavailability") == pytest.approx((stuck + trip) / (1 + stuck + trip), rel=1e-12)
    assert answer(spec, "pfd_average") == pytest.approx(stuck / (1 + stuck + trip), rel=1e-12)
    frequency = 0.4 * RATE / (1 + stuck + trip)
    assert answer(spec, "spurious_failures_per_year") == pytest.approx(frequency * 8760, rel=1e-12)


def test_crews_that_never_interrupt_serve_in_the_order_of_arrival_or_by_priority() -> None:
    units = {
        "a": {"failure_rate": "1e-2 /h", "repair_time": "10 h"},
        "b": {"failure_rate": "1e-2 /h", "repair_time": "40 h"},
        "c": {"failure_rate": "1e-2 /h", "repair_time": "20 h"},
    }

    def down(crew: dict[str, Any]) -> float:
        spec = {
            "units": units,
            "crews": {"f": {"size": 1, "repairs": ["a", "b", "c"], **crew}},
            "system": {"all_of": ["a", "b", "c"]},
            "targets": [{"id": "T", "measure": "steady_state_unavailability", "of": "c", "at_most": 1}],
        }
        model = Model.from_mapping(spec)
        return next(r.value for r in solve_model(model).results if r.of == "c" and r.value is not None)

    first_come, by_priority = down({"queue": "first_come"}), down({"preemptive": False})
    interrupting = down({})
    assert first_come < by_priority < interrupting  # the last in rank suffers most where others go before it


@pytest.mark.parametrize("count", [3, 6])
def test_alike_groups_under_one_cause_are_merged(count: int) -> None:
    groups = {
        f"g{number}": {"members": [{"unit": "p", "count": 2}], "redundancy": "cold_standby", "coverage": 0.9}
        for number in range(count)
    }
    spec = pair(
        groups=groups,
        common_causes={"c": {"members": ["p"], "beta": "10 %"}},
        crews={"f": {"size": 2, "repairs": ["p"]}},
    )
    spec["system"] = {"all_of": list(groups)}
    model = Model.from_mapping(spec)
    merged = generate(model)
    if count > 3:
        assert merged.size < merged.raw_size / 100
        return
    apart = generate(model, merge=False)
    assert merged.raw_size == apart.size
    from markov.evaluation.answers import Answers
    from markov.evaluation.questions import Question

    asked = Question("steady_state_unavailability")
    values = [Answers(space, model.year_hours).answer(asked).value for space in (merged, apart)]
    assert values[0] == pytest.approx(values[1], rel=1e-12)


def test_chances_at_an_instant_add_up_to_one() -> None:
    from fractions import Fraction

    spec = {
        "units": {
            "a": {"failure_rate": "1e-3 /h", "repair_time": "10 h", "detected": "30 %"},
            "b": {"failure_rate": "1e-3 /h", "repair_time": "10 h", "detected": "30 %", "start_failure": "10 %"},
        },
        "groups": {"g": {"members": ["a", {"unit": "b", "count": 2}], "redundancy": "hot_standby", "coverage": "90 %"}},
        "tests": {
            "ta": {"of": ["a"], "interval": "1000 h", "coverage": "90 %", "duration": "10 h", "left_out": "1 %"},
            "tb": {"of": ["b"], "interval": "1000 h", "first_at": "500 h", "causes_failure": "2 %"},
        },
        "system": "g",
    }
    space = generate(Model.from_mapping(spec))
    assert space.jumps
    for jump in space.jumps:
        chances = [Fraction(0)] * space.size
        for source, kind, multiple in zip(
            jump.source.tolist(), jump.kind.tolist(), jump.multiple.tolist(), strict=True
        ):
            chances[source] += space.kinds.rates.rates[space.kinds.kinds[kind].rate].exact * multiple
        assert set(chances) == {Fraction(1)}


def test_what_only_a_phase_needs_counts_for_the_system() -> None:
    spec = {
        "units": {
            "a": {"failure_rate": "1e-3 /h", "repair_time": "10 h"},
            "b": {"failure_rate": "2e-3 /h", "repair_time": "10 h"},
        },
        "system": "a",
        "phases": [
            {"name": "one", "duration": "9 h", "system": {"all_of": ["a", "b"]}},
            {"name": "other", "duration": "9 h", "repeat": True},
        ],
    }
    repairs = sum(rate / (1 + rate * 10) for rate in (1e-3, 2e-3)) * 8760
    assert answer(spec, "repairs_per_year") == pytest.approx(repairs, rel=1e-12)
    failed = sum(rate * 10 / (1 + rate * 10) for rate in (1e-3, 2e-3))
    assert answer(spec, "mean_units_failed") == pytest.approx(failed, rel=1e-12)
