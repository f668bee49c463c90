"""A unit fails in one way, or in several that share its rate."""

from fractions import Fraction

import pytest

SPEC = "units:\n  valve: {failure_rate: 1 /y, repair_time: 8 h, detected: 90 %%, failure_modes: {%s}}\nsystem: valve\n"


def test_unit_without_modes_has_one(read):
    unit = read("units: {valve: {failure_rate: 1 /y, repair_time: 8 h, detected: 90 %}}\nsystem: valve\n").units[
        "valve"
    ]
    (mode,) = unit.modes()
    assert (mode.name, mode.share, mode.needless) == ("", None, False)
    assert mode.detected.exact == Fraction(9, 10)
    assert mode.repair.exact == 8
    assert mode.may_hide


def test_mode_takes_over_what_it_does_not_say(read):
    keys = "opens: {share: 40 %, effect: acts_needlessly, repair_time: 0 h, detected: 1}, sticks: {share: 0.6}"
    opens, sticks = read(SPEC % keys).units["valve"].modes()
    assert (opens.name, opens.needless, opens.may_hide, opens.repaired_at_once) == ("opens", True, False, True)
    assert (sticks.name, sticks.needless, sticks.may_hide, sticks.repaired_at_once) == ("sticks", False, True, False)
    assert sticks.repair.exact == 8


def test_repair_rate_is_taken_over(read):
    text = SPEC.replace("repair_time: 8 h", "repair_rate: 2 /d") % "sticks: {share: 1}"
    (mode,) = read(text).units["valve"].modes()
    assert mode.repair.dimension == "rate"
    assert mode.repairable


def test_modes_alone_may_say_the_repair(read):
    text = SPEC.replace("repair_time: 8 h", "repair_stages: 2") % "a: {share: 50 %, repair_time: 3 h}, b: {share: 50 %}"
    unit = read(text).units["valve"]
    assert unit.ever_repaired
    assert not unit.repairable
    assert [mode.repairable for mode in unit.modes()] == [True, False]


def test_shares_add_up_exactly(read):
    thirds = "a: {share: 1 / 3}, b: {share: 1 / 3}, c: {share: 1 / 3}"
    assert len(read(SPEC % thirds).units["valve"].modes()) == 3


@pytest.mark.parametrize(
    ("modes", "found"),
    [
        ("a: {share: 0.4}, b: {share: 0.599}", "the shares sum to 0.999"),
        ("a: {share: 0.4}, b: {share: 0.6000000000000001}", "a little more than 1"),
        ("a: {share: 0.9}", "the shares sum to 0.9"),
        ("", "no failure mode"),
        ("a: {}", "`share` is missing"),
        ("a: {share: 60}, b: {share: 40}", "more than 1"),
        ("a: {share: 1, effect: explodes}", "no choice"),
        ("a: {share: 1, detected: 110 %}", "more than 1"),
        ("a: {share: 1, repair_time: 3}", "no unit of measure"),
        ("a: {share: 1, rate: 3 /y}", "`rate` is not a key here"),
        ("a: 60 %", "`60 %` stands here"),
    ],
)
def test_unsound_modes_are_refused(problems, modes, found):
    told = problems(SPEC % modes)
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 2 for problem in told)


def test_stages_without_any_repair_are_refused(told):
    text = SPEC.replace("repair_time: 8 h", "repair_stages: 2") % "a: {share: 1}"
    assert "never repaired" in told(text).found
