"""Rates of zero and coverages of zero or one: what never happens is not in the chain."""

from fractions import Fraction

import pytest

from tests.attacks.truth import Chain, holds
from tests.cli.program import Program

PAIR = """
units: {{lamp: {{failure_rate: {rate}, {repair}}}}}
groups: {{light: {{members: [{{unit: lamp, count: 2}}], redundancy: {redundancy}{more}}}}}
system: light
mission: {{time: 100 h}}
"""


def pair(rate="1e-3 /h", repair="repair_time: 10 h", redundancy="active", more="") -> str:
    return PAIR.format(rate=rate, repair=repair, redundancy=redundancy, more=more)


def labels(program: Program, text: str) -> str:
    program("draw", program.file(text), "states.dot", "--overwrite")
    return (program.folder / "states.dot").read_text(encoding="utf-8")


# --- attack 7: λ = 0


@pytest.mark.parametrize("redundancy", ["active", "hot_standby", "cold_standby"])
def test_a_plant_that_never_fails_has_one_state_and_no_failure(program: Program, redundancy: str) -> None:
    spec = pair(rate="0 /h", redundancy=redundancy) + (
        "targets:\n  - {id: R, measure: reliability, at_least: 1}\n"
        "  - {id: F, measure: failures_per_year, at_most: 0}\n"
        "  - {id: M, measure: mean_time_to_first_failure, at_least: 1e9 y}\n"
        "  - {id: D, measure: mean_down_time, at_most: 1 min}\n"
    )
    told = program.solve(spec)
    assert told.status == 0
    assert told.verdicts == dict.fromkeys("RFMD", "cannot_occur")
    assert told.json["states"] == 1
    assert told.json["transitions"] == 0
    for measure, exact in (("reliability", 1), ("unreliability", 0), ("steady_state_availability", 1), ("pfh", 0)):
        entry = told.result(measure)
        assert (entry["lower"], entry["value"], entry["upper"]) == (exact, exact, exact)
    assert "no down state can be reached" in told.result("mean_time_to_first_failure")["reason"]
    assert any("never fails" in warning for warning in told.json["warnings"])


def test_a_unit_that_never_fails_leaves_its_partner_as_it_would_be_alone(program: Program) -> None:
    both = (
        "units: {frame: {failure_rate: 0 /h}, lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\n"
        "system: {all_of: [frame, lamp]}\nmission: {time: 100 h}\n"
    )
    alone = "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\nsystem: lamp\nmission: {time: 100 h}\n"
    with_frame, without = program.solve(both), program.solve(alone)
    assert with_frame.json["states"] == without.json["states"] == 2
    for measure in ("unreliability", "steady_state_unavailability", "mean_time_to_first_failure", "failures_per_year"):
        assert with_frame.value(measure) == pytest.approx(without.value(measure), rel=1e-12)


def test_a_written_transition_of_rate_zero_never_happens(program: Program) -> None:
    told = program.solve(
        "states: {good: {up: true, initial: true}, bad: {up: false}}\n"
        "transitions: [{from: good, to: bad, rate: 0 /h}]\nmission: {time: 1 y}\n"
        "targets: [{id: T, measure: unreliability, at_most: 0}]\n"
    )
    assert told.verdicts == {"T": "cannot_occur"}
    assert told.json["transitions"] == 0
    assert any("never happens" in warning for warning in told.json["warnings"])


# --- attack 8: μ = 0


@pytest.mark.parametrize("repair", ["repair_rate: 0 /h", ""], ids=["written", "left out"])
def test_a_plant_that_is_never_repaired_ends_down(program: Program, repair: str) -> None:
    told = program.solve(
        pair(repair=repair).replace(", }", "}")
        + "targets: [{id: A, measure: steady_state_availability, at_least: 0.1}]\n"
    )
    truth = Chain({(0, 1): "2/1000", (1, 2): "1/1000"})
    assert told.json["states"] == 3
    assert told.json["transitions"] == 2
    assert told.verdicts == {"A": "missed"}
    assert holds(told.result("unreliability"), truth.at(100)[2])
    assert holds(told.result("mean_time_to_first_failure"), truth.mean_time_to({2}))
    assert told.value("steady_state_availability") == 0
    assert told.value("failures_per_year") == 0
    assert told.result("mean_down_time")["reason"]


def test_a_repair_rate_of_zero_is_noted(program: Program) -> None:
    told = program.solve(pair(repair="repair_rate: 0 /h"))
    assert any("never repaired" in warning for warning in told.json["warnings"])


def test_a_repair_time_of_zero_is_the_contrary(program: Program) -> None:
    told = program.solve(pair(repair="repair_time: 0 h"))
    assert told.value("unreliability") == 0
    assert told.value("steady_state_availability") == 1


def test_a_unit_renewed_at_once_is_good_even_if_it_is_failed_at_the_start(program: Program) -> None:
    spec = (
        "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 0 h}}\nsystem: lamp\ninitial: {lamp: failed}\n"
        "mission: {time: 100 h}\n"
    )
    told = program.solve(spec)
    # Refused would do as well; a plant that is down for ever will not.
    assert told.status == 2 or told.value("steady_state_availability") == 1


def test_a_unit_renewed_at_once_calls_no_crew(program: Program) -> None:
    told = program.solve(
        pair(repair="repair_time: 0 h") + "crews: {fitters: {size: 1, repairs: [lamp]}}\ninitial: {lamp: {failed: 1}}\n"
    )
    assert told.status in (0, 2), told.err


def test_a_unit_that_is_never_repaired_holds_no_crew(program: Program) -> None:
    def plant(repairs: str) -> str:
        return (
            "units: {a: {failure_rate: 1e-1 /h, repair_time: 8 h}, b: {failure_rate: 2e-2 /h}}\n"
            "groups: {g: {members: [{unit: a, count: 2}, b], required: 2, redundancy: active}}\n"
            f"crews: {{c: {{size: 1, repairs: {repairs}}}}}\nsystem: g\nmission: {{time: 100 h}}\n"
        )

    told, plain = program.solve(plant("[a, b]")), program.solve(plant("[a]"))
    assert told.status == 0, told.err.splitlines()[-1]
    for measure in ("crew_utilisation", "waiting_for_crew", "probability_of_waiting", "unavailability"):
        assert told.value(measure) == pytest.approx(plain.value(measure), rel=1e-12)


# --- attack 9: c = 0 and c = 1


RESTART = ", switchover: {{coverage: {coverage}, uncovered: {{outcome: restart, time: 3 h}}}}"


def test_certain_coverage_has_no_uncovered_state(program: Program) -> None:
    spec = pair(more=RESTART.format(coverage="1"))
    told = program.solve(spec)
    assert (told.json["states"], told.json["transitions"]) == (3, 4)
    assert "uncovered" not in labels(program, spec)
    truth = Chain({(0, 1): "2/1000", (1, 0): "1/10", (1, 2): "1/1000", (2, 1): "2/10"})
    assert holds(told.result("steady_state_unavailability"), truth.stationary()[2])
    assert holds(told.result("unreliability"), truth.at(100, stopped={2})[2])


def test_no_coverage_has_no_degraded_state_that_delivers(program: Program) -> None:
    spec = pair(more=RESTART.format(coverage="0"))
    told = program.solve(spec)
    drawn = labels(program, spec)
    assert "uncovered" in drawn
    assert "degraded\\n" not in drawn
    # All good; one failed and uncovered; both failed and uncovered: a restart or the last repair ends both.
    assert told.json["states"] == 3
    assert holds(told.result("mean_time_to_first_failure"), Fraction(500))


def test_no_coverage_makes_a_pair_as_good_as_a_series(program: Program) -> None:
    never = program.solve(pair(more=", coverage: 0"))
    series = program.solve(
        "units: {a: {failure_rate: 1e-3 /h, repair_time: 10 h}, b: {failure_rate: 1e-3 /h, repair_time: 10 h}}\n"
        "system: {all_of: [a, b]}\nmission: {time: 100 h}\n"
    )
    assert never.value("unreliability") == pytest.approx(series.value("unreliability"), rel=1e-12)


@pytest.mark.parametrize("redundancy", ["active", "hot_standby", "cold_standby"])
def test_a_coverage_of_one_is_the_coverage_left_unsaid(program: Program, redundancy: str) -> None:
    said = program.solve(pair(redundancy=redundancy, more=", coverage: 1")).json
    unsaid = program.solve(pair(redundancy=redundancy)).json
    assert said["results"] == unsaid["results"]
    assert (said["states"], said["transitions"]) == (unsaid["states"], unsaid["transitions"])


def test_a_complement_of_coverage_keeps_its_digits(program: Program) -> None:
    told = program.solve(pair(rate="1e-9 /h", more=", coverage: 0.99999999999999999999"))
    truth = Chain(
        {
            (0, 1): Fraction(2, 10**9) * (1 - Fraction(1, 10**20)),
            (0, 3): Fraction(2, 10**9) * Fraction(1, 10**20),
            (1, 0): "1/10",
            (1, 2): Fraction(1, 10**9),
            (2, 1): "2/10",
            (3, 0): "1/10",
            (3, 2): Fraction(1, 10**9),
        }
    )
    assert holds(told.result("unreliability"), sum(truth.at(100, stopped={2, 3})[2:]))
