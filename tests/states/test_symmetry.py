"""Interchangeable groups are merged, exactly, and only those."""

from fractions import Fraction

import pytest

from markov.evaluation.answers import Answers
from markov.evaluation.questions import Question
from markov.spec import read_text
from markov.states import generate

HOUR = Fraction(1000)
QUESTIONS = (
    Question("unreliability", at_hours=HOUR),
    Question("mean_unavailability", at_hours=HOUR),
    Question("steady_state_unavailability"),
    Question("failure_frequency"),
    Question("mean_units_failed"),
    Question("mean_capacity"),
    Question("mean_time_to_first_failure"),
)


def plant(groups: int, crews: int, system: str, *, extra: str = "", rules: str = "redundancy: active") -> str:
    members = "\n".join(f"  g{number}: {{members: [{{unit: pump, count: 2}}], {rules}}}" for number in range(groups))
    return (
        "units: {pump: {failure_rate: 1e-3 /h, repair_time: 10 h, start_failure: 3 %}}\n"
        f"groups:\n{members}\ncrews: {{c: {{size: {crews}, repairs: [pump]}}}}\nsystem: {system}\n{extra}\n"
    )


def both(text: str) -> tuple:
    model = read_text(text, "spec")
    return generate(model), generate(model, merge=False)


@pytest.mark.parametrize("crews", [1, 2, 100])
@pytest.mark.parametrize(
    ("system", "rules"),
    [
        ("{all_of: [g0, g1, g2]}", "redundancy: active"),
        ("{at_least: 2, of: [g0, g1, g2]}", "redundancy: cold_standby, coverage: 90 %"),
        ("{any_of: [g0, g1, g2]}", "redundancy: hot_standby, while_down: stop"),
    ],
)
def test_merging_changes_no_number(crews: int, system: str, rules: str) -> None:
    merged, whole = both(plant(3, crews, system, rules=rules))
    assert merged.size < whole.size == merged.raw_size
    one, other = (Answers(space, Fraction(8760), [HOUR]) for space in (merged, whole))
    for question in QUESTIONS:
        for answers in (one, other):
            answers.expect(question)
    for question in QUESTIONS:
        small, large = one.answer(question), other.answer(question)
        assert small.value == pytest.approx(large.value, rel=1e-13), question
        assert small.lower <= large.upper
        assert large.lower <= small.upper


def test_ten_groups_that_share_a_crew_are_merged() -> None:
    names = ", ".join(f"g{number}" for number in range(10))
    space = generate(read_text(plant(10, 1, f"{{all_of: [{names}]}}"), "spec"))
    # Each group has no, one or two failed; one of them may hold the crew: 1 + 10 * 11 states.
    assert space.size == 111
    assert space.raw_size == 393_661


def test_groups_at_different_places_of_the_structure_stay_apart() -> None:
    merged, whole = both(plant(3, 1, "{any_of: [g0, {all_of: [g1, g2]}]}"))
    pairs, _ = both(plant(4, 1, "{any_of: [{all_of: [g0, g1]}, {all_of: [g2, g3]}]}"))
    assert merged.size < whole.size
    assert [tuple(sorted(each)) for each in merged.classes] == [(1, 2)]
    assert [tuple(sorted(each)) for each in pairs.classes] == [(0, 1), (2, 3)]


@pytest.mark.parametrize(
    "change",
    [
        ("g1: {members: [{unit: pump, count: 2}]", "g1: {members: [{unit: pump, count: 3}]"),
        ("system: {all_of: [g0, g1]}", "system: {all_of: [g0, g1, g0]}"),
        ("redundancy: active}\ncrews", "redundancy: active, coverage: 99 %}\ncrews"),
        ("system: {all_of", "initial: {g1.pump: failed}\nsystem: {all_of"),
    ],
)
def test_groups_that_differ_in_anything_stay_apart(change: tuple[str, str]) -> None:
    text = plant(2, 1, "{all_of: [g0, g1]}")
    assert generate(read_text(text, "spec")).classes == ((0, 1),)
    assert change[0] in text
    changed = text.replace(*change)
    assert generate(read_text(changed, "spec")).classes == ()


def test_a_group_that_is_asked_about_stays_apart() -> None:
    model = read_text(plant(3, 1, "{all_of: [g0, g1, g2]}"), "spec")
    assert generate(model, ("g1",)).classes == ((0, 2),)


def test_merged_states_are_named_by_how_many_groups_are_alike() -> None:
    space = generate(read_text(plant(2, 2, "{all_of: [g0, g1]}"), "spec"))
    labels = [space.label(state) for state in range(space.size)]
    assert labels[0] == "all good"
    assert "1 of 2 like g0[pump: 1 in repair]" in labels
    assert "2 of 2 like g0[pump: 1 in repair]" in labels
    assert len(set(labels)) == space.size
    assert [space.find(label) for label in labels] == list(range(space.size))
