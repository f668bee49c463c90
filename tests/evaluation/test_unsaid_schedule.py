"""Choices about hidden faults, spares, tests, causes and phases are listed where a spec leaves them unsaid."""

import pytest

from markov.evaluation.unsaid import unsaid_choices
from markov.spec import read_text
from markov.states.plan import plan

PLANT = """\
units: {pump: {failure_rate: 1 /y, repair_time: 3 h%s}}
groups: {pumps: {members: [{unit: pump, count: 2}], redundancy: hot_standby%s}}
system: pumps
%s
"""


def choices(text: str) -> dict[str, str]:
    model = read_text(text, "spec")
    return dict(each.split(": ", 1) for each in unsaid_choices(model, plan(model)))


def unsaid(unit: str = "", group: str = "", more: str = "") -> dict[str, str]:
    return choices(PLANT % (unit, group, more))


@pytest.mark.parametrize(
    ("parts", "place", "value"),
    [
        ({"unit": ", detected: 0"}, "units.pump.revealed_by", "test"),
        ({"unit": ", failure_modes: {a: {share: 1}}"}, "units.pump.failure_modes.a.effect", "fails_to_act"),
        ({"more": "spares: {s: {for: pump, stock: 1, lead_time: 9 d}}"}, "spares.s.swap_time", "0 h"),
        ({"more": "tests: {t: {of: pump, interval: 2 y}}"}, "tests.t.first_at", "2 y"),
        ({"more": "tests: {t: {of: pump, interval: 2 y}}"}, "tests.t.coverage", "100 %"),
        ({"more": "tests: {t: {of: pump, interval: 2 y}}"}, "tests.t.left_out", "0"),
        ({"more": "tests: {t: {of: pump, interval: 2 y, duration: 1 h}}"}, "tests.t.in_service", "false"),
        ({"more": "common_causes: {c: {members: pump, beta: 5 %}}"}, "common_causes.c.exposed", "all"),
        ({"more": "phases: [{name: a, duration: 1 d}, {name: b}]"}, "phases.b.repeat", "false"),
        ({"more": "restoration: {time: 1 d}"}, "restoration.to", "all_good"),
        ({"group": ", switchover: {switch: {failure_rate: 1 /y}}"}, "groups.pumps.switchover.switch.latent", "false"),
    ],
)
def test_an_unsaid_choice_is_listed(parts: dict[str, str], place: str, value: str) -> None:
    assert unsaid(**parts)[place].startswith(value)


def test_spares_are_ordered_where_units_are_scrapped() -> None:
    more = "spares: {s: {for: pump, stock: 1, lead_time: 9 d}}"
    assert "spares.s.order" not in unsaid(more=more)
    scrapped = (PLANT % ("", "", more)).replace(", repair_time: 3 h", "")
    found = choices(scrapped)
    assert found["spares.s.order"].startswith("when_drawn")
    assert found["units.pump.repair_time"].startswith("none (a failed unit is scrapped")


def test_what_is_said_is_not_listed_again() -> None:
    test = "{of: pump, interval: 2 y, first_at: 1 y, coverage: 1, duration: 0 h, left_out: 0, causes_failure: 0}"
    found = unsaid(
        unit=", detected: 50 %, revealed_by: [test]",
        more=f"tests: {{t: {test}}}\n"
        + "common_causes: {c: {members: pump, beta: 1 %, beta_detected: 2 %, exposed: all}}",
    )
    assert not any(place.startswith(("tests.", "common_causes")) for place in found)
    assert "units.pump.revealed_by" not in found
    assert "units.pump.detected" not in found


def test_restoration_is_unit_by_unit_unless_it_is_said() -> None:
    assert unsaid()["restoration"].startswith("unit by unit")
    assert "restoration" not in unsaid(more="restoration: {time: 1 d, to: all_good}")


def test_queue_of_a_crew_for_several_kinds_is_listed() -> None:
    text = """
units: {pump: {failure_rate: 1 /y, repair_time: 3 h}, fan: {failure_rate: 1 /y, repair_time: 3 h}}
crews: {c: {size: 1, repairs: [pump, fan]%s}}
system: {all_of: [pump, fan]}
"""
    assert {"crews.c.queue", "crews.c.priority", "crews.c.preemptive"} <= set(choices(text % ""))
    assert not any(place.startswith("crews.c") for place in choices(text % ", queue: first_come"))
