"""What is legal in the language and not built yet is refused by name."""

import pytest

SPEC = """\
units:
  pump: {failure_rate: 1e-4 /h%s}
  fan: {failure_rate: 1e-4 /h, detected: 0}
groups:
  train: {members: [{unit: pump, count: 2}], required: 2%s}
  plant: {members: [train, fan], redundancy: hot_standby%s}
system: plant
%s
"""
SWITCH = ", switchover: {switch: {failure_on_demand: 1 %}}"


@pytest.mark.parametrize(
    ("unit", "train", "plant", "more", "found", "line"),
    [
        (", detected: 90 %", "", "", "", "hidden faults of `pump`", 2),
        (", failure_modes: {a: {share: 1, detected: 0}}", "", "", "", "hidden faults of `pump`", 2),
        ("", "", "", "tests: {t: {of: pump, interval: 1 y}}", "a test of `pump`", 8),
        ("", "", "", "common_causes: {c: {members: pump, beta: 1 %}}", "a common cause of `pump`", 8),
        ("", "", "", "common_causes: {c: {members: plant, beta: 1 %}}", "a common cause of `pump`", 8),
        ("", "", "", "spares: {s: {for: pump, stock: 1, lead_time: 1 d}}", "spares for `pump`", 8),
        ("", ", repair_when: system_down", "", "", "deferred repair", 5),
        ("", "", ", repair_when: system_down", "", "deferred repair", 6),
        ("", SWITCH, "", "", "a switch", 5),
    ],
)
def test_combinations_with_trains(told, unit, train, plant, more, found, line):
    problem = told(SPEC % (unit, train, plant, more))
    assert found in problem.found
    assert "in the train `train`: not built yet" in problem.found
    assert problem.line == line


def test_the_same_beside_trains_is_read(read):
    more = "tests: {t: {of: fan, interval: 1 y}}"
    plain = ", failure_modes: {a: {share: 1, effect: acts_needlessly}}"
    assert read(SPEC % (plain, ", load_sharing: {1: 1, 2: 1}", SWITCH, more)).groups["plant"].switch is not None
