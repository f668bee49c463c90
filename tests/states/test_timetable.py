"""Fixed instants laid out in time: what repeats, what comes before, in which order things happen at once."""

from __future__ import annotations

from fractions import Fraction

import pytest

from markov.errors import TooLarge
from markov.spec import read_text
from markov.states.timetable import Action, Step, Timetable, timetable

PLANT = """
units:
  pump: {failure_rate: 1e-5 /h, repair_time: 8 h, detected: 50 %}
  fan: {failure_rate: 1e-5 /h, repair_time: 8 h, detected: 50 %}
groups:
  pumps: {members: [{unit: pump, count: 2}], required: 1, redundancy: active}
  fans: {members: [fan]}
system: {all_of: [pumps, fans]}
"""


def laid_out(text: str, plant: str = PLANT) -> Timetable | None:
    return timetable(read_text(plant + text, "spec"))


def table(text: str, plant: str = PLANT) -> Timetable:
    found = laid_out(text, plant)
    assert found is not None
    return found


def happenings(found: Timetable, until: int) -> list[tuple[Fraction, int, tuple[Action, ...]]]:
    """When what happens up to a time, with the phase before it."""
    time, listed = Fraction(0), []
    steps = list(found.prefix)
    while True:
        steps = steps or list(found.cycle)
        if not steps:
            return listed
        step = steps.pop(0)
        time += step.hours
        if time > until:
            return listed
        if step.instant is not None:
            listed.append((time, step.regime, found.instants[step.instant]))


def test_without_fixed_instants_there_is_no_timetable() -> None:
    assert laid_out("") is None
    assert laid_out("phases: [{name: always}]") is None
    assert laid_out("phases: [{name: always, duration: 10 h, repeat: true}]") is None


def test_a_test_repeats_from_the_beginning() -> None:
    assert table("tests: {yearly: {of: [pump], interval: 100 h}}") == Timetable(
        (), (Step(0, Fraction(100), 0),), ((Action("test", "yearly"),),)
    )


def test_a_first_test_of_its_own_comes_before_what_repeats() -> None:
    found = table("tests: {yearly: {of: [pump], interval: 100 h, first_at: 30 h}}")
    assert found.prefix == (Step(0, Fraction(30), 0),)
    assert found.cycle == (Step(0, Fraction(100), 0),)
    late = table("tests: {yearly: {of: [pump], interval: 100 h, first_at: 250 h}}")
    assert [time for time, _, _ in happenings(late, 600)] == [250, 350, 450, 550]


def test_a_test_that_lasts_begins_and_ends() -> None:
    found = table("tests: {long: {of: [pump], interval: 100 h, duration: 3 h}}")
    start, end = (Action("test_start", "long"),), (Action("test_end", "long"),)
    assert happenings(found, 210) == [(100, 0, start), (103, 0, end), (200, 0, start), (203, 0, end)]
    assert found.period == 100


def test_coinciding_tests_happen_in_listed_order() -> None:
    first = "slow: {of: [pump], interval: 100 h}"
    second = "quick: {of: [fan], interval: 50 h}"
    for one, two, order in ((first, second, ["slow", "quick"]), (second, first, ["quick", "slow"])):
        found = table(f"tests:\n  {one}\n  {two}\n")
        assert found.period == 100
        assert [action.name for action in happenings(found, 100)[-1][2]] == order
        assert [action.name for action in happenings(found, 100)[0][2]] == ["quick"]


def test_a_test_that_ends_comes_before_one_that_begins() -> None:
    found = table(
        "tests:\n  early: {of: [pump], interval: 100 h}\n"
        "  late: {of: [fan], interval: 100 h, first_at: 90 h, duration: 10 h}\n"
    )
    assert happenings(found, 100)[-1][2] == (Action("test_end", "late"), Action("test", "early"))


def test_boundary_then_visit_then_test() -> None:
    visited = PLANT.replace("fans: {members: [fan]}", "fans: {members: [fan], repair_when: {visits_every: 30 h}}")
    found = table(
        "phases: [{name: day, duration: 10 h}, {name: night, duration: 20 h, repeat: true}]\n"
        "tests: {check: {of: [pump], interval: 60 h}}\n",
        visited,
    )
    assert found.period == 60
    assert happenings(found, 60)[-1] == (
        60,
        1,
        (Action("phase", 0), Action("visit", "fans"), Action("test", "check")),
    )
    assert happenings(found, 30)[-1][2] == (Action("phase", 0), Action("visit", "fans"))


def test_a_mission_of_phases_ends_in_the_last() -> None:
    found = table("phases: [{name: climb, duration: 10 h}, {name: cruise, duration: 20 h}, {name: moored}]")
    assert found.prefix == (Step(0, Fraction(10), 0), Step(1, Fraction(20), 1))
    assert found.cycle == ()
    assert found.instants == ((Action("phase", 1),), (Action("phase", 2),))
    assert found.final == 2
    assert found.period == 0


def test_tests_go_on_in_the_last_phase() -> None:
    found = table(
        "phases: [{name: first, duration: 10 h}, {name: second}]\ntests: {check: {of: [pump], interval: 40 h}}\n"
    )
    assert happenings(found, 120) == [
        (10, 0, (Action("phase", 1),)),
        (40, 1, (Action("test", "check"),)),
        (80, 1, (Action("test", "check"),)),
        (120, 1, (Action("test", "check"),)),
    ]
    assert {step.regime for step in found.cycle} == {1}


@pytest.mark.parametrize("seed", range(30))
def test_the_pattern_is_the_one_counted_by_hand(seed: int) -> None:
    """Every happening of three cycles against plain counting from time zero."""
    intervals = [(2 + seed % 3) * 10, (1 + seed % 4) * 20, (1 + seed % 5) * 12]
    firsts = [7 + seed * 3, intervals[1], 1 + seed % 12]
    lasts = [seed % 7, 0, 2 * (seed % 3)]
    tests = "".join(
        f"  t{k}: {{of: [pump], interval: {intervals[k]} h, first_at: {firsts[k]} h, duration: {lasts[k]} h}}\n"
        for k in range(3)
    )
    phases = "phases: [{name: a, duration: 15 h}, {name: b, duration: 45 h, repeat: true}]\n" if seed % 2 else ""
    found = table(phases + "tests:\n" + tests)
    until = int(3 * found.period + sum((step.hours for step in found.prefix), Fraction(0)))
    expected: dict[int, set[Action]] = {}
    for k in range(3):
        for time in range(firsts[k], until + 1, intervals[k]):
            expected.setdefault(time, set()).add(Action("test_start" if lasts[k] else "test", f"t{k}"))
            if lasts[k] and time + lasts[k] <= until:
                expected.setdefault(time + lasts[k], set()).add(Action("test_end", f"t{k}"))
    for time in range(15, until + 1, 15) if phases else ():
        if time % 60 in (0, 15):
            expected.setdefault(time, set()).add(Action("phase", 1 if time % 60 else 0))
    listed = happenings(found, until)
    assert {int(time): set(actions) for time, _, actions in listed} == expected
    assert all(len(set(actions)) == len(actions) for _, _, actions in listed)
    if phases:
        assert all(regime == (0 if (time - 1) % 60 < 15 else 1) for time, regime, _ in listed)


def test_the_cycle_begins_with_what_an_instant_leaves() -> None:
    """So that few states can be occupied there."""
    for text in (
        "tests: {check: {of: [pump], interval: 100 h, first_at: 30 h}}",
        "tests: {check: {of: [pump], interval: 100 h, first_at: 330 h, duration: 5 h}}",
        "phases: [{name: a, duration: 10 h}, {name: b}]\ntests: {check: {of: [pump], interval: 100 h}}",
    ):
        found = table(text)
        assert found.cycle[-1].instant is not None


def test_a_first_test_in_the_far_future_is_refused() -> None:
    with pytest.raises(TooLarge, match="instants before it repeats"):
        timetable(
            read_text(
                PLANT + "tests: {often: {of: [pump], interval: 1 h}, rare: {of: [fan], interval: 10 h, first_at: 9 y}}",
                "spec",
            )
        )
