"""What is legal and likely not meant is noted, and nothing else is."""

import pytest

PLANT = """\
parameters: {failures: 1e-4 /h}
units:
  pump: {failure_rate: failures, repair_time: 24 h}
  valve: {failure_rate: 1e-5 /h, repair_time: 24 h}
groups:
  water: {members: [{unit: pump, count: 2}], redundancy: cold_standby}
crews:
  fitters: {size: 1, repairs: [pump, valve]}
system: {all_of: [water, valve]}
mission: {time: 1 y}
targets:
  - {id: A, measure: steady_state_availability, at_least: 0.9}
"""


def test_plain_plant_has_no_cautions(read):
    assert read(PLANT).warnings == ("Unsupported, as no `source` is given: `failures`.",)


@pytest.mark.parametrize(
    ("old", "new", "noted"),
    [
        ("{failures: 1e-4 /h}", "{failures: 1e-4 /h, left: 3}", "parameters.left: nothing uses"),
        ("at_least: 0.9", "at_most: 0.9", "target A: `at_most`"),
        ("steady_state_availability, at_least: 0.9", "downtime_per_year, at_least: 3 h", "where low is good"),
        ("size: 1", "size: 4", "a size of 4 for 3 units"),
        ("failure_rate: 1e-5 /h", "failure_rate: 0 /h", "it never fails"),
        ("  valve:", "  twin: {failure_rate: 1.005e-5 /h, repair_time: 24 h}\n  valve:", "units.twin: nothing uses"),
        ("  valve:", "  twin: {failure_rate: 1.005e-5 /h, repair_time: 24 h}\n  valve:", "less than 1 %"),
        ("groups:\n", "groups:\n  out: {members: [valve]}\n", "groups.out is outside of `system`"),
        ("mission: {time: 1 y}\n", "", "No `mission`"),
        ("mission:", "year: 365 h\nmission:", "far from 8760 h"),
        ("cold_standby}", "cold_standby, coverage: [0.9, 0.8]}", "only the first 1 can ever apply"),
        ("cold_standby}", "cold_standby, switchover: {stages: 2}}", "no effect without a `time`"),
        ("cold_standby}", "active, after_repair: start_again}", "no effect in an active group"),
        ("cold_standby}", "active, required: 2, coverage: 0.9}", "`coverage` has no effect"),
        ("cold_standby}", "cold_standby, on_duty: 2}", "none ever waits at first"),
        ("1e-5 /h, repair_time: 24 h", "1e-5 /h", "the crew is not called"),
        ("1e-5 /h, repair_time: 24 h", "1e-5 /h, repair_time: 0 h, repair_stages: 2", "no effect on a repair"),
    ],
)
def test_caution(read, old, new, noted):
    assert old in PLANT
    assert any(noted in warning for warning in read(PLANT.replace(old, new)).warnings)


def test_unit_that_only_loads_a_crew_is_noted(read):
    model = read(PLANT.replace("{all_of: [water, valve]}", "water"))
    assert any("it only loads the crew `fitters`" in warning for warning in model.warnings)


def test_equal_units_are_not_called_nearly_alike(read):
    text = PLANT.replace("  valve:", "  twin: {failure_rate: 1e-5 /h, repair_time: 24 h}\n  valve:")
    assert not any("1 %" in warning for warning in read(text).warnings)


def test_parameter_behind_a_parameter_is_used(read):
    text = PLANT.replace("{failures: 1e-4 /h}", "{failures: base * 2, base: 5e-5 /h}")
    assert read(text).warnings == ("Unsupported, as no `source` is given: `failures` and `base`.",)


def test_a_parameter_with_a_source_is_supported(read):
    text = PLANT.replace("failures: 1e-4 /h", "failures: {value: 1e-4 /h, source: a handbook}")
    assert text != PLANT
    assert read(text).warnings == ()


HIDDEN = """\
parameters:
  failures: {value: 1e-4 /h, source: a log}
units:
  fan: {failure_rate: failures, repair_time: 8 h, detected: 40 %}
  lamp: {failure_rate: 1e-5 /h, repair_time: 8 h}
groups:
  air: {members: [{unit: fan, count: 3}], required: 2, redundancy: hot_standby}
tests:
  yearly: {of: fan, interval: 1 y}
system: {all_of: [air, lamp]}
mission: {time: 10 y}
"""


def test_plain_tested_plant_has_no_cautions(read):
    assert read(HIDDEN).warnings == ()


@pytest.mark.parametrize(
    ("old", "new", "noted"),
    [
        ("tests:\n  yearly: {of: fan, interval: 1 y}\n", "", "no test ever finds the hidden faults of `air.fan`"),
        ("interval: 1 y", "interval: 1 y, coverage: 90 %", "no test ever finds 10 % of the hidden faults of `air.fan`"),
        ("interval: 1 y", "interval: 1 y, coverage: 0", "it never finds anything"),
        ("interval: 1 y", "interval: 11 y", "an interval of 11 y is longer than the mission of 10 y"),
        ("interval: 1 y", "interval: 1 y, first_at: 11 y", "is after the mission"),
        ("of: fan", "of: [fan, lamp]", "`lamp` never has a hidden fault"),
        ("interval: 1 y", "interval: 1 y, bypass: true", "`bypass` has no effect on a test without"),
        ("interval: 1 y", "interval: 1 y, in_service: true", "`in_service` has no effect"),
        ("interval: 1 y", "interval: 1 y, duration: 1 h, in_service: true, bypass: true", "leaves the unit in service"),
        ("1e-5 /h, repair", "1e-5 /h, revealed_by: [system_failure], repair", "`revealed_by` has no effect"),
        (
            "1e-5 /h, repair_time: 8 h",
            "1e-5 /h, repair_time: 0 h, repair_success: 0.5",
            "`repair_success` has no effect",
        ),
        ("tests:", "demand: {rate: 0 /y}\ntests:", "demand: a rate of zero"),
        ("tests:", "common_causes: {c: {members: fan, beta: 0}}\ntests:", "it never strikes `fan`"),
        ("tests:", "phases: [{name: a, duration: 20 y}, {name: b}]\ntests:", "ends before `b` begins"),
        ("tests:", "phases: [{name: a, rate_factors: {fan: 0}}]\ntests:", "never fails in it"),
        ("tests:", "spares: {s: {for: fan, stock: 1, lead_time: 9 d}}\ntests:", "nothing is ever ordered"),
        (
            "tests:",
            "crews: {c: {size: 1, repairs: [fan], queue: first_come, priority: [fan]}}\ntests:",
            "`priority` has",
        ),
        ("hot_standby", "hot_standby, repair_when: {failed: 1}", "the same as `at_once`"),
        ("hot_standby", "hot_standby, load_sharing: {exponent: 0}", "`load_sharing` has no effect"),
        ("hot_standby", "hot_standby, switchover: {coverage: 0.9, switch: {failure_on_demand: 1 %}}", "two chances"),
        ("hot_standby", "hot_standby, switchover: {switch: {failure_rate: 1 /y, latent: true}}", "only a call does"),
        ("hot_standby", "hot_standby, switchover: {switch: {failure_rate: 0 /y}}", "a `failure_rate` of zero"),
        ("hot_standby", "active, switchover: {switch: {false_operation_rate: 1 /y}}", "where no standby waits"),
        ("hot_standby", "hot_standby, switchover: {switch: {failure_on_demand: 0, latent: true}}", "`latent` has no"),
        ("of: fan", "of: [fan, air.switch]", "never has a hidden fault"),
        ("h, detected", "h, failure_modes: {a: {share: 1}, b: {share: 0}}, detected", "it never occurs"),
        ("repair_time: 8 h, detected", "repair_time: {mean: 8 h, standard_deviation: 1 h}, detected", "64 stages"),
        ("repair_time: 8 h, detected", "detected", "the crew is not called"),
    ],
)
def test_caution_about_what_is_hidden_or_idle(read, old, new, noted):
    assert old in HIDDEN
    text = HIDDEN.replace(old, new, 1)
    if "air.switch" in new:
        text = text.replace("hot_standby", "hot_standby, switchover: {switch: {failure_rate: 1 /y}}")
    if "the crew" in noted:
        text += "crews: {c: {size: 1, repairs: [fan]}}\n"
    assert any(noted in warning for warning in read(text).warnings)


def test_spurious_target_without_a_needless_mode_is_noted(read):
    text = HIDDEN + "targets: [{id: A, measure: spurious_failures_per_year, at_most: 1}]\n"
    assert any("no failure mode acts needlessly" in warning for warning in read(text).warnings)


def test_what_a_demand_reveals_needs_no_test(read):
    text = HIDDEN.replace("detected: 40 %", "detected: 40 %, revealed_by: [demand]").replace(
        "yearly: {of: fan", "x: {of: lamp"
    )
    assert not any("no test ever finds" in warning for warning in read(text + "demand: {rate: 1 /y}\n").warnings)


def test_parameters_behind_new_keys_are_used(read):
    text = HIDDEN.replace(
        "parameters:", "parameters:\n  reach: {value: 90 %, source: a log}\n  load: {value: 2, source: a log}"
    )
    text = text.replace("interval: 1 y", "interval: 1 y, coverage: reach")
    text = text.replace("hot_standby", "hot_standby, load_sharing: {1: load, 2: 1}")
    assert not any("nothing uses" in warning for warning in read(text).warnings)


def test_units_with_different_modes_are_not_nearly_alike(read):
    text = HIDDEN.replace("  lamp: {failure_rate: 1e-5 /h,", "  lamp: {failure_rate: 1.001e-4 /h, detected: 40 %,")
    assert any("1 %" in warning for warning in read(text).warnings)
    other = text.replace("detected: 40 %}\n  lamp", "detected: 40 %, failure_modes: {a: {share: 1}}}\n  lamp")
    assert other != text
    assert not any("1 %" in warning for warning in read(other).warnings)


def test_starts_that_never_happen_are_noted(read):
    text = """
units: {u: {failure_rate: 1 /y, start_failure: 2 %}}
groups: {g: {members: [{unit: u, count: 2}], redundancy: active}}
system: g
"""
    assert any("`start_failure` has no effect in active groups" in warning for warning in read(text).warnings)
    standby = text.replace("active", "cold_standby")
    assert not any("`start_failure` has no effect" in warning for warning in read(standby).warnings)


def test_hidden_faults_that_come_while_the_system_is_down_are_noted(read):
    text = """
units:
  line: {failure_rate: 1 /y, repair_time: 5 h, detected: 85 %, revealed_by: [system_failure]}
system: line
"""
    assert any("revealed when the system fails, not while it is down" in warning for warning in read(text).warnings)
