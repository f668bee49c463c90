"""The JSON object: one, pure, complete, with a reason wherever there is no number."""

import hashlib
import json
import math

import pytest

import markov
from tests.cli.program import Program

PLANT = """
title: Ferry ramp
units:
  pump: {failure_rate: 2e-3 /h, repair_time: 10 h, start_failure: 1 %}
  valve: {failure_rate: 1e-4 /h, repair_time: 4 h}
groups:
  pressure: {members: [{unit: pump, count: 2}], redundancy: cold_standby, switchover: {coverage: 0.9}}
crews: {mechanics: {size: 1, repairs: [valve, pump]}}
system: {all_of: [pressure, valve]}
mission: {time: 100 h}
targets:
  - {id: A, measure: steady_state_availability, at_least: 0.9}
  - {id: B, measure: interval_reliability, for: 8 h, at_least: 0.999}
  - {id: C, measure: unavailability, of: pressure, at: 1 d, at_most: 5 %}
  - {id: D, measure: mean_down_time, at_most: 90 min}
  - {id: E, measure: crew_utilisation, of: mechanics, at_most: 0.5}
"""
HAND = """
states: {good: {up: true, initial: true}, safe: {up: true}, lost: {up: false}}
transitions: [{from: good, to: safe, rate: 1e-3 /h}, {from: good, to: lost, rate: 1e-3 /h}]
mission: {time: 100 h}
targets:
  - {id: A, measure: mean_down_time, at_most: 1 h}
  - {id: B, measure: state_probability, state: safe, at_most: 0.6}
"""
# Wherever the spec has no crews, tests, demands and so on, measures of theirs do not apply.
EVERYWHERE = {
    *("reliability", "unreliability", "availability", "unavailability", "mean_availability", "mean_unavailability"),
    *("steady_state_availability", "steady_state_unavailability", "mean_time_to_first_failure"),
    *("standard_deviation_of_time_to_first_failure", "mean_up_time", "mean_down_time", "failure_frequency"),
    *("expected_failures", "failures_per_year", "downtime_per_year", "conditional_failure_intensity", "hazard_rate"),
    *("mean_failure_rate", "pfd_average", "pfd_peak", "pfh", "mean_capacity"),
}
OF_UNITS = {
    *("repairs_per_year", "mean_units_failed", "time_without_redundancy"),
    *("gain_over_single_unit", "gain_over_independent_blocks"),
}
OF_CREWS = {"crew_utilisation", "waiting_for_crew", "probability_of_waiting"}
UNITS = {"1", "h", "1/h", "1/y", "h/y"}


def is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)


@pytest.mark.parametrize("spec", [PLANT, HAND], ids=["generated", "hand-written"])
def test_standard_output_holds_one_object_and_nothing_else(program: Program, spec: str) -> None:
    told = program.solve(spec)
    assert told.out.startswith("{")
    assert told.out.endswith("}\n")
    assert isinstance(told.json, dict)
    assert told.err == ""


@pytest.mark.parametrize("spec", [PLANT, HAND], ids=["generated", "hand-written"])
def test_every_key_is_there_with_its_type(program: Program, spec: str) -> None:
    told = program.solve(spec, "--at", "30 h")
    found = told.json
    assert isinstance(found["title"], str)
    assert found["spec_sha256"] == hashlib.sha256(spec.encode()).hexdigest()
    assert found["version"] == markov.__version__
    assert isinstance(found["states"], int)
    assert isinstance(found["transitions"], int)
    assert found["year_hours"] == 8760
    for key in ("assumptions", "warnings"):
        assert all(isinstance(entry, str) and entry for entry in found[key])
    for entry in found["results"]:
        keys = {"measure", "of", "state", "at_hours", "value", "lower", "upper", "unit", "method"}
        assert keys <= set(entry), entry["measure"]
        assert entry["unit"] in UNITS
        assert isinstance(entry["method"], str)
        assert entry["at_hours"] is None or is_number(entry["at_hours"])
        if entry["value"] is None:
            assert entry["lower"] is None
            assert entry["upper"] is None
            assert entry["reason"].strip()
        else:
            assert "reason" not in entry or entry["reason"] is None
            assert all(is_number(entry[key]) for key in ("value", "lower", "upper"))
            assert entry["lower"] <= entry["value"] <= entry["upper"]
    for entry in found["targets"]:
        assert {"id", "measure", "at_hours", "limit", "value", "verdict"} <= set(entry)
        assert is_number(entry["limit"])
        assert entry["verdict"] in ("met", "missed", "undecided", "cannot_occur")


def test_every_measure_of_the_system_that_applies_is_there(program: Program) -> None:
    generated = {each["measure"] for each in program.solve(PLANT).json["results"] if each["of"] is None}
    assert generated == EVERYWHERE | OF_UNITS | OF_CREWS | {"starts_per_year", "interval_reliability"}
    without_crews = PLANT.replace("crews: {mechanics: {size: 1, repairs: [valve, pump]}}\n", "").replace(
        "  - {id: E, measure: crew_utilisation, of: mechanics, at_most: 0.5}\n", ""
    )
    assert not OF_CREWS & {each["measure"] for each in program.solve(without_crews).json["results"]}
    by_hand = {each["measure"] for each in program.solve(HAND).json["results"] if each["state"] is None}
    assert by_hand == EVERYWHERE


def test_what_a_target_names_is_there_with_subject_state_and_times(program: Program) -> None:
    told = program.solve(PLANT)
    assert told.result("interval_reliability")["for_hours"] == 8
    assert told.result("unavailability", of="pressure")["at_hours"] == 24
    assert told.result("crew_utilisation", of="mechanics")["unit"] == "1"
    (state,) = (each for each in program.solve(HAND).json["results"] if each["state"] is not None)
    assert (state["measure"], state["state"]) == ("state_probability", "safe")


def test_a_target_repeats_value_and_limit_in_the_unit_of_its_measure(program: Program) -> None:
    told = program.solve(PLANT)
    targets = {each["id"]: each for each in told.json["targets"]}
    assert targets["A"]["value"] == told.value("steady_state_availability")
    assert (targets["C"]["limit"], targets["C"]["at_hours"]) == (0.05, 24)
    assert targets["D"]["limit"] == 1.5
    assert targets["A"]["at_hours"] is None


def test_size_is_that_of_the_chain_that_was_solved(program: Program) -> None:
    found = program.solve(HAND).json
    assert (found["states"], found["transitions"]) == (3, 2)


def test_an_untitled_spec_has_an_empty_title_and_null_subjects(program: Program) -> None:
    told = program.solve(HAND)
    assert told.json["title"] in ("", None)
    assert told.result("availability")["of"] is None


def test_a_target_without_a_number_carries_the_reason(program: Program) -> None:
    target = program.solve(HAND).json["targets"][0]
    assert target["value"] is None
    assert target["verdict"] == "undecided"
    assert "down for good" in target["reason"]


def test_numbers_keep_all_their_digits(program: Program) -> None:
    told = program.solve(PLANT)
    solution = markov.solve(program.file(PLANT))
    for measure in ("mean_up_time", "unreliability"):
        assert told.value(measure) == solution.result(measure).value


def test_the_same_call_gives_the_same_bytes(program: Program) -> None:
    assert program.solve(PLANT).out == program.solve(PLANT).out


def test_check_has_a_json_object_of_its_own(program: Program) -> None:
    told = program("check", program.file(PLANT), "--json")
    found = json.loads(told.out)
    solved = program.solve(PLANT).json
    for key in ("title", "spec_sha256", "version", "states", "transitions", "assumptions", "warnings"):
        assert found[key] == solved[key]
    assert "results" not in found


def test_a_hazard_after_everything_has_died_is_no_infinity(program: Program) -> None:
    # exp(-240) lies below what the bound of a reliability tells from zero.
    spec = "units: {lamp: {failure_rate: 2 /h}}\nsystem: lamp\nmission: {time: 120 h}\n"
    told = program.solve(spec)
    assert told.status in (0, 3), told.err
    hazard = told.result("hazard_rate")
    assert hazard["value"] is None or hazard["value"] == pytest.approx(2.0, rel=1e-9)


def test_a_hazard_after_everything_has_died_is_printed(program: Program) -> None:
    spec = (
        "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\nsystem: lamp\nmission: {time: 1e6 h}\n"
        "targets: [{id: H, measure: hazard_rate, at_most: 1 /h}]\n"
    )
    told = program.table(spec)
    assert told.status in (0, 3), told.err
