"""Units say how they fail and how they are repaired, each in one way."""

from fractions import Fraction

import pytest

SPEC = "units:\n  pump: {%s}\nsystem: pump\n"


def test_rate_and_mean_time_are_told_apart(read):
    by_rate = read(SPEC % "failure_rate: 1e-4 /h, repair_rate: 2 /d").units["pump"]
    by_time = read(SPEC % "mean_time_to_failure: 10000 h, repair_time: 12 h").units["pump"]
    assert by_rate.failure_hourly == by_time.failure_hourly == Fraction(1, 10_000)
    assert by_rate.repair_hourly == by_time.repair_hourly == Fraction(1, 12)
    assert by_rate.failure.dimension == "rate"
    assert by_time.failure.dimension == "time"


def test_unit_without_repair_is_never_repaired(read):
    unit = read(SPEC % "failure_rate: 1 /y").units["pump"]
    assert not unit.repairable
    assert not unit.repaired_at_once
    with pytest.raises(ValueError, match="no repair"):
        _ = unit.repair_hourly


def test_repair_rate_of_zero_is_never_repaired_and_noted(read):
    model = read(SPEC % "failure_rate: 1 /y, repair_rate: 0 /h")
    assert not model.units["pump"].repairable
    assert any("never repaired" in warning for warning in model.warnings)


def test_failure_rate_of_zero_is_legal_and_noted(read):
    model = read(SPEC % "failure_rate: 0 /h")
    assert model.units["pump"].failure_hourly == 0
    assert any("never fails" in warning for warning in model.warnings)


def test_repair_time_of_zero_is_repair_at_once(read):
    unit = read(SPEC % "failure_rate: 1 /y, repair_time: 0 h").units["pump"]
    assert unit.repairable
    assert unit.repaired_at_once


def test_unsaid_keys_can_be_told(read):
    unit = read(SPEC % "failure_rate: 1 /y, repair_time: 1 h").units["pump"]
    assert unit.repair_stages == 1
    assert not unit.is_said("repair_stages")
    assert unit.is_said("repair_time")
    assert unit.start_failure is None
    assert unit.detected is None


def test_full_detection_may_be_written(read):
    assert read(SPEC % "failure_rate: 1 /y, detected: 100 %").units["pump"].detected.exact == 1


@pytest.mark.parametrize(
    ("keys", "found"),
    [
        ("repair_time: 1 h", "`failure_rate` or `mean_time_to_failure` is missing"),
        ("failure_rate: 1 /y, mean_time_to_failure: 1 y", "both stand here"),
        ("failure_rate: 1 /y, repair_time: 1 h, repair_rate: 1 /h", "both stand here"),
        ("failure_rate: 5e-6", "no unit of measure"),
        ("failure_rate: 24 h", "is a time"),
        ("failure_rate: 95 %", "no unit of measure"),
        ("failure_rate: -5e-6 /h", "is negative"),
        ("failure_rate: .nan", "not a number"),
        ("failure_rate: .inf", "not a number"),
        ("failure_rate: null", "not a number"),
        ("failure_rate: no", "not a number"),
        ("failure_rate: 010 /h", "begins with a zero"),
        ("failure_rate: '1:30 /h'", "has a colon"),
        ("failure_rate: '1,5 /h'", "has a comma"),
        ("failure_rate: ", "nothing is written here"),
        ("failure_rate: {value: 1 /h}", "a mapping stands here"),
        ("failure_rate: [1 /h]", "a list stands here"),
        ("mean_time_to_failure: 0 h", "is zero"),
        ("mean_time_to_failure: 1e-6 /h", "is a rate"),
        ("failure_rate: 1 /y, repair_time: 24", "no unit of measure"),
        ("failure_rate: 1 /y, start_failure: 2", "more than 1"),
        ("failure_rate: 1 /y, start_failure: 1 h", "is a time"),
        ("failure_rate: 1 /y, repair_stages: 2", "never repaired"),
        ("failure_rate: 1 /y, logistic_delay: 2 h", "never repaired"),
        ("failure_rate: 1 /y, repair_time: 1 h, repair_stages: 0", "out of range"),
        ("failure_rate: 1 /y, repair_time: 1 h, repair_stages: 1.5", "not a whole number"),
        ("failure_rate: 1 /y, capacity: 2", "more than 1"),
        ("failure_rate: 1 /y, repair_success: 90 %", "never repaired"),
        ("failure_rate: 1 /y, repair_time: 1 h, repair_success: 0", "is zero"),
        ("failure_rate: 1 /y, repair_time: 1 h, repair_success: 90", "more than 1"),
        ("failure_rate: 1 /y, detected: 101 %", "more than 1"),
        ("failure_rate: 1 /y, revealed_by: [proof]", "`proof` is no choice"),
        ("failure_rate: 1 /y, revealed_by: [test, test]", "`test` stands twice"),
        ("failure_rate: 1 /y, revealed_by: []", "an empty list"),
        ("failure_rate: 1 /y, revealed_by: [demand]", "there are none"),
        ("failure_rate: 1 /y, cost: -100", "negative"),
        ("failure_rate: 1 /y, mass: 100 h", "is a time"),
        ("failure_rate: 1 /y, power: lots", "neither a number"),
        ("failure_rate: 1 /y, colour: red", "not a key here"),
    ],
)
def test_unsound_units_are_refused(told, keys, found):
    problem = told(SPEC % keys)
    assert found in problem.found
    assert problem.line == 2


@pytest.mark.parametrize(
    ("keys", "fix"),
    [
        ("failure_rat: 1 /y", "write `failure_rate`"),
        ("Failure-Rate: 1 /y", "write `failure_rate`"),
        ("MTBF: 3 y", "write `mean_time_to_failure`, and the mean repair as `repair_time`"),
        ("failure_rate: 1 /y, mttr: 3 h", "write `repair_time`"),
        ("failure_rate: 24 h", "use the key `mean_time_to_failure`, or write a rate"),
        ("failure_rate: 1 /y, repair_time: 1 /h", "use the key `repair_rate`, or write a time"),
        ("failure_rate: 1 /y, repair_time: 24", "write `24 h`, or another unit if that is meant"),
        ("failure_rate: 1 /y, start_failure: 95", "write 95 % or 0.95"),
    ],
)
def test_fix_names_what_is_meant(told, keys, fix):
    assert told(SPEC % keys).fix == fix


def test_a_delay_before_a_repair_that_takes_no_time_is_refused(told):
    problem = told("units: {a: {failure_rate: 1 /h, repair_time: 0 h, logistic_delay: 2 h}}\nsystem: a\n")
    assert "renewed at once" in problem.found
    assert (problem.line, problem.column) == (1, 51)


def test_cost_mass_and_power_are_plain_numbers(read):
    unit = read(SPEC % "failure_rate: 1 /y, cost: 12_000, mass: 0, power: 5.5").units["pump"]
    assert (unit.cost.exact, unit.mass.exact, unit.power.exact) == (12000, 0, Fraction(11, 2))


def test_hidden_faults_are_revealed_by_tests_unless_more_is_said(read):
    unit = read(SPEC % "failure_rate: 1 /y, detected: 60 %").units["pump"]
    assert unit.may_hide
    assert unit.revealed_by == ("test",)
    more = read(SPEC % "failure_rate: 1 /y, detected: 60 %, revealed_by: [demand]" + "demand: {rate: 1 /y}\n")
    assert more.units["pump"].revealed_by == ("demand",)


def test_a_delay_before_an_exchange_needs_no_repair(read):
    text = SPEC % "failure_rate: 1 /y, logistic_delay: 2 h" + "spares: {s: {for: pump, stock: 1, lead_time: 9 d}}\n"
    assert read(text).units["pump"].logistic_delay.exact == 2
