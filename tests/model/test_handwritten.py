"""Chains written by hand stand for themselves."""

from fractions import Fraction

import pytest

CHAIN = """\
parameters: {wear: 30 FIT, found: 90 %, repair: 8 h}
states:
  good: {up: true, initial: true}
  worn: {up: true, capacity: 50 %}
  failed: {up: false}
transitions:
  - {from: good, to: worn, rate: wear * found, cause: wear}
  - {from: good, to: failed, rate: wear * (1 - found)}
  - {from: worn, to: good, mean_time: repair}
"""


def test_rates_and_mean_times(read):
    model = read(CHAIN)
    assert model.explicit
    assert model.system is None
    assert [(each.source, each.target, each.hourly) for each in model.transitions] == [
        ("good", "worn", Fraction(27, 10**9)),
        ("good", "failed", Fraction(3, 10**9)),
        ("worn", "good", Fraction(1, 8)),
    ]
    assert model.transitions[0].cause == "wear"
    assert model.states["worn"].capacity.exact == Fraction(1, 2)
    assert not model.states["failed"].up


def test_parallel_transitions_are_kept_apart(read):
    model = read(CHAIN + "  - {from: good, to: worn, rate: 1 FIT, cause: corrosion}\n")
    assert len(model.transitions) == 4


def test_rate_of_zero_is_legal_and_noted(read):
    model = read(CHAIN + "  - {from: worn, to: failed, rate: 0 /h}\n")
    assert any("never happens" in warning for warning in model.warnings)


def test_single_state_is_a_chain(read):
    assert read("states: {on: {up: true, initial: true}}").transitions == ()


@pytest.mark.parametrize(
    ("old", "new", "found"),
    [
        (", initial: true", "", "no state is initial"),
        ("up: false", "up: false, initial: true", "both initial"),
        ("to: failed", "to: faild", "`faild` is not known"),
        ("to: failed", "to: good", "to itself"),
        ("mean_time: repair", "mean_time: 0 h", "is zero"),
        ("mean_time: repair", "rate: repair", "is a time"),
        ("mean_time: repair", "mean_time: 8 h, rate: 1 /h", "both stand here"),
        (", mean_time: repair", "", "`rate` or `mean_time` is missing"),
        ("from: worn", "frm: worn", "`frm` is not a key here"),
        ("up: false", "up: no", "`no` is neither"),
        ("failed: {up: false}", "failed: {}", "`up` is missing"),
        ("failed: {up: false}", "failed: down", "`down` stands here"),
        ("states:", "system: good\nstates:", "beside a hand-written chain"),
        ("states:", "units: {a: {failure_rate: 1 /h}}\nstates:", "beside a hand-written chain"),
        ("states:", "initial: {}\nstates:", "beside a hand-written chain"),
        ("mean_time: repair}", "mean_time: repair, probability: 0.5}", "not a key here"),
    ],
)
def test_unsound_chains_are_refused(told, old, new, found):
    assert found in told(CHAIN.replace(old, new)).found


def test_transitions_need_states(problems):
    assert "without `states`" in problems("transitions: [{from: a, to: b, rate: 1 /h}]")[0].found
    assert "no state" in problems("states: {}")[0].found


def test_target_names_a_state(read, told):
    target = "targets: [{id: A, measure: state_probability, state: %s, at_most: 0.5}]\n"
    assert read(CHAIN + target % "worn").targets[0].state == "worn"
    assert told(CHAIN + target % "wron").fix == "write `worn`"


def test_hand_written_chain_has_no_subjects(told):
    target = "targets: [{id: A, measure: steady_state_availability, of: pump, at_least: 0.5}]\n"
    assert "`of` in a hand-written chain" in told(CHAIN + target).found


def test_names_may_hold_signs(read):
    model = read("states: {'a|b<c': {up: true, initial: true}, '=SUM(A1)': {up: false}, '\\alpha_{1}$': {up: true}}")
    assert list(model.states) == ["a|b<c", "=SUM(A1)", "\\alpha_{1}$"]


def test_names_are_on_one_line(told):
    assert "line break" in told('states: {"a\\nb": {up: true, initial: true}}').found
