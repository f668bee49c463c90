"""Phases follow each other, each with rules of its own."""

import pytest

from markov.model import Named

SPEC = """\
units:
  fan: {failure_rate: 1 /y, repair_time: 8 h}
  lamp: {failure_rate: 1 /y}
groups:
  air: {members: [{unit: fan, count: 3}], redundancy: hot_standby}
  duo: {members: [{unit: fan, count: 3}], on_duty: 2, redundancy: hot_standby}
system: {all_of: [air, duo]}
phases:
%s
"""
TWO = "  - {name: day, duration: 8 h%s}\n  - {name: night, duration: 16 h%s}"


def test_phases_are_read_whole(read):
    model = read(SPEC % (TWO % (", rate_factors: {fan: 1.5}, required: {air: 2}, repair: false", ", repeat: true")))
    day, night = model.phases
    assert (day.name, day.duration.exact, day.repair, day.repeat) == ("day", 8, False, False)
    assert day.rate_factors["fan"].exact * 2 == 3
    assert (night.repair, night.repeat, night.system) == (True, True, None)
    assert (model.required_in(day, "air"), model.required_in(night, "air"), model.required_in(None, "air")) == (2, 1, 1)
    assert model.groups["air"].places_for(2) == 2
    assert model.groups["duo"].places_for(1) == 2
    assert model.periods == (("the cycle of phases", 24),)


def test_last_phase_goes_on(read):
    model = read(SPEC % "  - {name: day, duration: 8 h}\n  - {name: night}")
    assert model.phases[1].duration is None
    assert model.periods == ()
    assert model.is_scheduled


def test_criterion_of_a_phase_brings_in_its_units(read):
    model = read(SPEC % (TWO % (", system: lamp", "")))
    assert model.criteria == (Named("lamp"), model.system)
    assert "lamp" in [place.key for place in model.placements]
    assert not any("lamp" in warning for warning in model.warnings)


@pytest.mark.parametrize(
    ("first", "second", "found"),
    [
        (", repeat: true", "", "is not the last phase"),
        (", rate_factors: {fn: 2}", "", "`fn` is not known"),
        (", rate_factors: {fan: 2 h}", "", "is a time"),
        (", rate_factors: {fan: -1}", "", "negative"),
        (", required: {air: 4}", "", "4 required of 3"),
        (", required: {air: 0}", "", "out of range"),
        (", required: {duo: 3}", "", "3 required, and 2 on duty"),
        (", required: {fan: 1}", "", "`fan` is not known"),
        (", system: {all_of: [air, sky]}", "", "`sky` is not known"),
        (", repair: maybe", "", "neither"),
        (", repair: no", "", "neither"),
        (", load: 2", "", "`load` is not a key here"),
    ],
)
def test_unsound_phases_are_refused(told, first, second, found):
    problem = told(SPEC % (TWO % (first, second)))
    assert found in problem.found
    assert problem.line == 9


@pytest.mark.parametrize(
    ("phases", "found"),
    [
        ("  - {name: day}\n  - {name: night, duration: 1 h}", "`duration` is missing: the phase `day` is followed"),
        ("  - {name: day, duration: 1 h}\n  - {name: night, repeat: true}", "the phase `night` repeats"),
        ("  - {name: day, duration: 1 h}\n  - {name: day}", "`day` stands twice"),
        ("  - {name: day, duration: 0 h}\n  - {name: night}", "is zero"),
        ("  - {duration: 1 h}\n  - {name: night}", "`name` is missing"),
        ("  day: {duration: 1 h}", "a mapping stands here"),
    ],
)
def test_unsound_orders_are_refused(told, phases, found):
    assert found in told(SPEC % phases).found


def test_fault_of_one_phase_does_not_move_the_place_of_another(problems):
    told = problems(SPEC % "  - {name: day, duration: soon}\n  - {name: night, required: {air: 9}}")
    assert [problem.line for problem in told] == [9, 10]
