"""Choices left unsaid are listed if they can change a result, and only then."""

import markov
from markov.spec import read_text

BASE = {
    "unit": "failure_rate: 1e-3 /h, repair_time: 10 h",
    "group": "members: [{unit: pump, count: 2}], redundancy: cold_standby",
    "more": "",
}


def unsaid(**changes: str) -> dict[str, str]:
    parts = {**BASE, **changes}
    plant = f"units: {{pump: {{{parts['unit']}}}}}\ngroups: {{pumps: {{{parts['group']}}}}}\nsystem: pumps\n"
    text = f"{plant}{parts['more']}\n"
    found = markov.check(read_text(text, "spec")).assumptions
    return dict(each.split(": ", 1) for each in found)


def test_every_choice_is_named_by_its_place_in_the_spec() -> None:
    found = unsaid()
    assert found["groups.pumps.coverage"].startswith("1 ")
    assert found["groups.pumps.switchover.time"].startswith("0 h")
    assert found["units.pump.start_failure"].startswith("0 ")
    assert found["units.pump.repair_stages"].startswith("1 ")
    assert found["crews"].startswith("one crew per unit for pump")
    assert found["year"].startswith("8760 h")


def test_what_is_said_is_not_listed() -> None:
    found = unsaid(
        unit=f"{BASE['unit']}, repair_stages: 1, start_failure: 0, logistic_delay: 0 h, detected: 1",
        group="members: [{unit: pump, count: 2}], redundancy: cold_standby, switchover: {coverage: 1, time: 0 h}",
        more="year: 8760 h\nwhile_down: continue\ncrews: {c: {size: 2, repairs: [pump]}}",
    )
    for name in ("groups.pumps.coverage", "groups.pumps.switchover.time", "units.pump.start_failure", "crews", "year"):
        assert name not in found
    assert not any(name.startswith("units.pump") for name in found)


def test_the_outcome_matters_only_where_coverage_is_imperfect() -> None:
    assert "groups.pumps.switchover.uncovered" not in unsaid()
    found = unsaid(group=BASE["group"] + ", coverage: 95 %")
    assert found["groups.pumps.switchover.uncovered"].startswith("until_repair")


def test_return_to_preferred_matters_only_among_unlike_members() -> None:
    assert "groups.pumps.return_to_preferred" not in unsaid()
    text = """
units:
  pump: {failure_rate: 1e-3 /h}
  spare: {failure_rate: 2e-3 /h}
groups: {pumps: {members: [pump, spare], redundancy: hot_standby}}
system: pumps
"""
    found = markov.check(read_text(text, "spec")).assumptions
    assert any(each.startswith("groups.pumps.return_to_preferred: false") for each in found)


def test_a_cold_pair_that_is_down_has_nobody_left_to_fail() -> None:
    assert "while_down" not in unsaid()
    assert "while_down" in unsaid(group="members: [{unit: pump, count: 3}], required: 2, redundancy: active")


def test_priority_is_listed_where_kinds_compete() -> None:
    text = """
units: {a: {failure_rate: 1e-3 /h, repair_time: 1 h}, b: {failure_rate: 1e-3 /h, repair_time: 1 h}}
crews: {c: {size: SIZE, repairs: [b, a]}}
system: {all_of: [a, b]}
"""
    compete = markov.check(read_text(text.replace("SIZE", "1"), "spec")).assumptions
    enough = markov.check(read_text(text.replace("SIZE", "2"), "spec")).assumptions
    assert any(each.startswith("crews.c.priority: b, a") for each in compete)
    assert not any(each.startswith("crews.c.priority") for each in enough)


def test_a_hand_written_chain_leaves_only_the_year_unsaid() -> None:
    text = (
        "states: {up: {up: true, initial: true}, down: {up: false}}\ntransitions: [{from: up, to: down, rate: 1 /h}]\n"
    )
    assert [each.split(":")[0] for each in markov.check(read_text(text, "spec")).assumptions] == ["year"]


def test_choices_inside_a_train_are_listed_too() -> None:
    text = """
units: {a: {failure_rate: 1e-3 /h, repair_time: 1 h}}
groups:
  out: {members: [one, other], redundancy: cold_standby, switchover: {time: 2 h}, repair_when: at_once}
  one: {members: [{unit: a, count: 2}], redundancy: active, repair_when: at_once}
  other: {members: [{unit: a, count: 2}], redundancy: active, repair_when: at_once}
system: out
"""
    found = dict(each.split(": ", 1) for each in markov.check(read_text(text, "spec")).assumptions)
    assert found["groups.one.coverage"].startswith("1 ")
    assert found["groups.out.switchover.stages"].startswith("1 ")
    assert "repair_when" not in found
