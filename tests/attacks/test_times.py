"""No time, endless time, negative and unsorted times."""

from fractions import Fraction

import pytest

import markov
from markov.spec import read_text
from tests.attacks.truth import Chain, holds
from tests.cli.program import Program

LAMP = "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\nsystem: lamp\n"
TRUTH = Chain({(0, 1): "1/1000", (1, 0): "1/10"})


# --- attack 15: t = 0


@pytest.mark.parametrize("how", ["mission", "at", "target"])
def test_at_time_zero_the_plant_is_as_it_starts(program: Program, how: str) -> None:
    if how == "mission":
        told = program.solve(LAMP + "mission: {time: 0 h}\n")
    elif how == "at":
        told = program.solve(LAMP, "--at", "0 h")
    else:
        measures = (
            "reliability",
            "unreliability",
            "availability",
            "unavailability",
            "expected_failures",
            "hazard_rate",
        )
        asked = [
            f"{{id: {name}, measure: {name}, at: 0 h, at_most: {'1 /h' if name == 'hazard_rate' else 1}}}"
            for name in measures
        ]
        told = program.solve(LAMP + f"targets: [{', '.join(asked)}]\n")
    for measure, exact in (
        *(("reliability", 1), ("availability", 1)),
        *(("unreliability", 0), ("unavailability", 0), ("expected_failures", 0)),
    ):
        entry = told.result(measure, at_hours=0)
        assert (entry["lower"], entry["value"], entry["upper"]) == (exact, exact, exact)
    assert holds(told.result("hazard_rate", at_hours=0), Fraction(1, 1000))


@pytest.mark.parametrize("measure", ["mean_availability", "mean_unavailability", "mean_failure_rate"])
def test_an_average_over_no_time_has_a_reason_and_no_value(program: Program, measure: str) -> None:
    limit = "1 /h" if measure == "mean_failure_rate" else "1"
    told = program.solve(LAMP + f"targets: [{{id: T, measure: {measure}, at: 0 h, at_most: {limit}}}]\n")
    assert (told.status, told.verdicts) == (3, {"T": "undecided"})
    assert told.value(measure) is None
    assert "time is zero" in told.result(measure)["reason"]


def test_targets_at_time_zero_are_decided(program: Program) -> None:
    told = program.solve(
        LAMP + "mission: {time: 0 h}\ntargets:\n  - {id: R, measure: reliability, at_least: 1}\n"
        "  - {id: F, measure: unreliability, at_most: 0}\n"
    )
    assert (told.status, told.verdicts) == (0, {"R": "met", "F": "met"})


def test_a_plant_that_starts_down_has_failed_at_time_zero(program: Program) -> None:
    told = program.solve(LAMP + "initial: {lamp: failed}\nmission: {time: 0 h}\n", "--at", "5 h")
    for hours in (0, 5):
        assert told.value("reliability", at_hours=hours) == 0
        assert told.value("unreliability", at_hours=hours) == 1
        assert told.value("hazard_rate", at_hours=hours) is None
    assert told.value("mean_time_to_first_failure") == 0
    assert told.value("availability", at_hours=0) == 0
    assert told.value("availability", at_hours=5) > 0.3


# --- attack 16: t = ∞


@pytest.mark.parametrize("written", [".inf h", "inf h", "infinity", "∞ h", "1e999 h"])
def test_an_endless_time_is_refused(program: Program, written: str) -> None:
    (line,) = program.refused(LAMP + f"mission: {{time: {written}}}\n")
    assert "mission.time" in line
    told = program.solve(LAMP, "--at", written)
    assert (told.status, told.out) == (2, "")


@pytest.mark.parametrize("years", ["1e3 y", "1e6 y", "1e9 y"])
def test_after_ages_the_plant_is_in_its_long_run(program: Program, years: str) -> None:
    told = program.solve(LAMP + f"mission: {{time: {years}}}\n")
    hours = float(years.split()[0]) * 8760
    assert told.status == 0, told.err
    assert told.value("availability") == pytest.approx(100 / 101, rel=1e-9)
    assert told.value("mean_unavailability") == pytest.approx(1 / 101, rel=1e-3)
    assert told.value("expected_failures") == pytest.approx(hours / 1010, rel=1e-3)
    assert told.result("unreliability")["lower"] > 1 - 1e-12
    hazard = told.result("hazard_rate")
    assert hazard["value"] == pytest.approx(1e-3) if hazard["value"] else "survive" in hazard["reason"]


@pytest.mark.parametrize("hours", ["1e20 h", "1e100 h"])
def test_times_beyond_all_ages_are_answered_or_out_of_reach(hours: str) -> None:
    found = markov.solve(read_text(LAMP + f"mission: {{time: {hours}}}\n"))
    availability = found.result("availability")
    if availability.value is None:
        assert availability.reason.startswith("not reached")
        assert found.exit_status == 3
    else:
        assert availability.lower <= Fraction(100, 101) <= availability.upper


# --- attack 17: negative or unsorted times


@pytest.mark.parametrize("written", ["-5 h", "-1 y", "2 h - 3 h"])
def test_a_negative_time_is_refused_wherever_it_stands(program: Program, written: str) -> None:
    (line,) = program.refused(LAMP + f"mission: {{time: {written}}}\n")
    assert "negative" in line
    (line,) = program.refused(LAMP + f"targets: [{{id: T, measure: availability, at: {written}, at_least: 0.9}}]\n")
    assert "negative" in line
    told = program.solve(LAMP, "--at", written)
    assert (told.status, told.out) == (2, "")
    assert "negative" in told.err


def test_unsorted_times_get_the_answers_of_sorted_ones(program: Program) -> None:
    times = ("700 h", "3 h", "50 h", "0 h", "3 h")
    options = [word for time in times for word in ("--at", time)]
    told = program.solve(LAMP + "mission: {time: 60 h}\n", *options)
    for hours in (0, 3, 50, 60, 700):
        entry = told.result("unavailability", at_hours=hours)
        exact = TRUTH.at(hours)[1]
        assert holds(entry, exact)
        failed = TRUTH.at(hours, stopped={1})[1]
        assert holds(told.result("unreliability", at_hours=hours), failed)


def test_unsorted_times_of_targets_are_kept_apart(program: Program) -> None:
    told = program.solve(
        LAMP + "targets:\n  - {id: late, measure: unreliability, at: 100 h, at_most: 0.01}\n"
        "  - {id: early, measure: unreliability, at: 1 h, at_most: 0.01}\n"
    )
    assert told.verdicts == {"late": "missed", "early": "met"}
    assert [each["at_hours"] for each in told.json["targets"]] == [100, 1]
