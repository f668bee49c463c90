"""Tests name what they test, and when."""

from fractions import Fraction

import pytest

SPEC = """\
units:
  fan: {failure_rate: 1 /y, repair_time: 8 h, detected: 0}
  horn: {failure_rate: 1 /y, repair_time: 8 h, detected: 0}
groups:
  left:
    members: [{unit: fan, count: 2}]
    redundancy: hot_standby
    switchover: {switch: {failure_rate: 1 /y, latent: true}}
  right: {members: [{unit: fan, count: 3}], redundancy: active}
system: {all_of: [left, right, horn]}
tests:
  proof: {%s}
"""


def test_test_is_read_whole(read):
    keys = (
        "of: [left.fan, left.switch, horn], interval: 1 y, first_at: 3 months, coverage: 90 %, duration: 2 h, "
        "left_out: 0.1 %, causes_failure: 0.2 %, bypass: true"
    )
    model = read(SPEC % keys)
    test = model.tests["proof"]
    assert test.of == ("left.fan", "left.switch", "horn")
    assert (test.interval.exact, test.first.exact, test.duration.exact) == (8760, 2190, 2)
    assert (test.coverage.exact, test.left_out.exact, test.causes_failure.exact) == (
        Fraction(9, 10),
        Fraction(1, 1000),
        Fraction(1, 500),
    )
    assert (test.in_service, test.bypass, test.takes_out) == (False, True, True)
    tested = {place.key: model.tests_of(place) for place in model.placements}
    assert tested == {"left.fan": ("proof",), "right.fan": (), "horn": ("proof",)}
    assert model.tests_of_switch("left") == ("proof",)
    assert model.periods == (("test proof", 8760),)


def test_kind_means_all_its_items(read):
    model = read(SPEC % "of: fan, interval: 1 y")
    assert [place.key for place in model.placements if model.tests_of(place)] == ["left.fan", "right.fan"]
    assert model.tests["proof"].first.exact == 8760
    assert not model.tests["proof"].lasts


@pytest.mark.parametrize(
    ("keys", "found"),
    [
        ("interval: 1 y", "`of` is missing"),
        ("of: fan", "`interval` is missing"),
        ("of: fan, interval: 0 h", "is zero"),
        ("of: fan, interval: 1 /y", "is a rate"),
        ("of: fan, interval: 1 y, first_at: 0 h", "is zero"),
        ("of: fan, interval: 1 y, coverage: 90", "more than 1"),
        ("of: fan, interval: 1 d, duration: 24 h", "a test of `24 h` every `1 d`"),
        ("of: fan, interval: 1 y, duration: 2", "no unit of measure"),
        ("of: fan, interval: 1 y, in_service: perhaps", "neither"),
        ("of: fan, interval: 1 y, left_out: 2", "more than 1"),
        ("of: [], interval: 1 y", "an empty list"),
        ("of: [fan, fan], interval: 1 y", "`fan` stands twice"),
        ("of: [fan, left.fan], interval: 1 y", "`left.fan` means units that `fan` means, too"),
        ("of: fn, interval: 1 y", "`fn` is not known"),
        ("of: [fan, up.fan], interval: 1 y", "`up.fan` is not known"),
        ("of: right, interval: 1 y", "`right` is a group"),
        ("of: right.switch, interval: 1 y", "`right` has no switch"),
        ("of: fan, every: 1 y", "`every` is not a key here"),
    ],
)
def test_unsound_tests_are_refused(problems, keys, found):
    told = problems(SPEC % keys)
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 12 for problem in told)


def test_a_single_name_has_its_place(told):
    problem = told(SPEC % "interval: 1 y, of: fn")
    assert (problem.line, problem.column) == (12, 30)
    assert "write `fan`" in problem.fix


def test_unit_called_switch_is_not_mistaken_for_the_switch(told):
    text = (
        SPEC.replace("horn", "switch").replace("{unit: fan, count: 2}]", "{unit: fan, count: 2}, switch]")
        % "of: left.switch, interval: 1 y"
    )
    assert "is the switch of `left`, and a unit of it" in told(text).found


def test_intervals_without_a_short_joint_period_are_refused(told, read):
    other = "  other: {of: horn, interval: 8761 h}\n"
    problem = told(SPEC % "of: fan, interval: 1 y" + other)
    assert "meet again only after 8,761 of the shortest intervals" in problem.found
    assert (problem.line, problem.column) == (13, 31)
    assert read(SPEC % "of: fan, interval: 1 y" + other.replace("8761", "8784")).tests["other"].interval.exact == 8784


def test_visits_and_phases_count_for_the_joint_period(told):
    visits = SPEC.replace("redundancy: active}", "redundancy: active, repair_when: {visits_every: 8761 h}}")
    assert "visits of right and" in told(visits % "of: fan, interval: 1 y").found
    phases = "phases: [{name: a, duration: 8760 h}, {name: b, duration: 1 h, repeat: true}]\n"
    problem = told(SPEC % "of: fan, interval: 1 y" + phases)
    assert "the cycle of phases and" in problem.found
    assert problem.line == 13
