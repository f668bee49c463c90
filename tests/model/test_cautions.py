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
