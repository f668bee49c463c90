"""Parts solved apart and combined give what the whole chain gives, to the last digits."""

from fractions import Fraction

import pytest

import markov
from markov.errors import IllPosed
from markov.evaluation.parts import NeedsWhole
from markov.evaluation.questions import Question, all_questions
from markov.evaluation.solver import Solver
from markov.evaluation.solving import solve_model
from markov.spec import read_text

PLANT = """
units:
  pump: {failure_rate: 1e-3 /h, repair_time: 20 h, start_failure: 3 %}
  fan: {failure_rate: 2e-3 /h, repair_time: 10 h}
  door: {failure_rate: 5e-4 /h, repair_time: 100 h, capacity: 40 %}
  lamp: {failure_rate: 7e-3 /h, repair_time: 3 h}
groups:
  pumps: {members: [{unit: pump, count: 2}], redundancy: cold_standby, coverage: 90 %}
  fans: {members: [{unit: fan, count: 3}], required: 2, redundancy: active}
  doors: {members: [{unit: door, count: 3}], required: 1, redundancy: active}
  lamps: {members: [{unit: lamp, count: 2}], redundancy: hot_standby, switchover: {time: 1 h}}
crews:
  one: {size: 1, repairs: [pump, fan]}
  two: {size: 1, repairs: [lamp]}
  three: {size: 3, repairs: [door]}
year: 8760 h
"""
STRUCTURES = [
    "{all_of: [pumps, fans, doors, lamps]}",
    "{any_of: [{all_of: [pumps, fans]}, doors, lamps]}",
    "{all_of: [pumps, {any_of: [doors, lamps]}, fans]}",
    "{any_of: [{all_of: [doors, lamps]}, {all_of: [pumps, fans]}]}",
    "{at_least: 2, of: [{all_of: [pumps, fans]}, doors, lamps]}",
]
TIME = Fraction(50)


def solvers(structure: str) -> tuple[Solver, Solver]:
    model = read_text(f"{PLANT}system: {structure}\nmission: {{time: 50 h}}\n", "spec")
    return Solver(model, [TIME], whole_up_to=0), Solver(model, [TIME])


@pytest.mark.parametrize("structure", STRUCTURES)
def test_parts_agree_with_the_whole(structure: str) -> None:
    apart, whole = solvers(structure)
    assert apart.parts is not None
    assert whole.parts is None
    assert apart.states < whole.states
    compared = 0
    for question in [*all_questions(whole.model, [TIME]), Question("interval_reliability", for_hours=Fraction(5))]:
        if question.measure.startswith("gain"):
            continue
        try:
            found = apart.parts.answer(question)
        except NeedsWhole:
            continue
        truth = whole.answer(question)
        assert found.value == pytest.approx(truth.value, rel=1e-13), question
        assert found.lower <= truth.upper, question
        assert truth.lower <= found.upper, question
        assert found.upper - found.lower <= 1e-12 * found.value
        compared += 1
    assert compared >= 20


@pytest.mark.parametrize(
    ("structure", "why"),
    [
        ("{all_of: [pumps, fans]}", "one part: the crew is shared"),
        ("{all_of: [{any_of: [pumps, doors]}, {any_of: [fans, lamps]}]}", "the shared crew stands at two places"),
        ("{at_least: 2, of: [pumps, fans, doors]}", "k of n cannot be regrouped"),
        ("{all_of: [{any_of: [doors, lamps]}, {any_of: [doors, fans]}]}", "a name used twice"),
    ],
)
def test_dependent_places_are_left_to_the_whole_chain(structure: str, why: str) -> None:
    apart, _ = solvers(structure)
    assert apart.parts is None, why


def test_stopping_with_the_system_makes_one_part() -> None:
    model = read_text(f"{PLANT}while_down: stop\nsystem: {STRUCTURES[0]}\n", "spec")
    assert Solver(model, whole_up_to=0).parts is None


def test_a_question_about_a_group_goes_to_its_part() -> None:
    apart, whole = solvers(STRUCTURES[0])
    for measure, of in (
        ("steady_state_unavailability", "fans"),
        ("mean_time_to_first_failure", "pumps"),
        ("mean_unavailability", "lamps"),
        ("repairs_per_year", "door"),
        ("crew_utilisation", "two"),
    ):
        question = Question(measure, of=of, at_hours=TIME if measure == "mean_unavailability" else None)
        assert apart.answer(question).value == pytest.approx(whole.answer(question).value, rel=1e-13)


def test_what_parts_cannot_answer_is_answered_by_the_whole_chain() -> None:
    apart, whole = solvers(STRUCTURES[0])
    question = Question("mean_time_to_first_failure")
    assert apart.answer(question).value == whole.answer(question).value


def test_forty_independent_groups_are_solved_and_what_needs_the_whole_chain_says_so() -> None:
    units = "\n".join(f"  u{at}: {{failure_rate: {at + 1}e-5 /h, repair_time: 10 h}}" for at in range(40))
    groups = "\n".join(f"  g{at}: {{members: [{{unit: u{at}, count: 2}}], redundancy: active}}" for at in range(40))
    system = ", ".join(f"g{at}" for at in range(40))
    text = f"units:\n{units}\ngroups:\n{groups}\nsystem: {{all_of: [{system}]}}\nmission: {{time: 1 y}}\n"
    solution = markov.solve(read_text(text, "spec"))
    assert solution.states == 120
    assert solution.raw_states == 3**40
    # Two units with a crew each: unavailability u**2 of a group, u = λ/(λ + μ); the system is all groups in series.
    up = Fraction(1)
    for at in range(40):
        rate = Fraction(at + 1, 100_000)
        up *= 1 - (rate / (rate + Fraction(1, 10))) ** 2
    found = solution.result("steady_state_unavailability")
    assert found.lower <= 1 - up <= found.upper
    assert found.upper - found.lower < 1e-13 * found.value
    assert solution.result("unreliability").value == pytest.approx(
        1 - float(solution.result("reliability").value), rel=1e-9
    )
    unanswered = solution.result("mean_time_to_first_failure")
    assert unanswered.value is None
    assert f"{3**40:,} states" in unanswered.reason


def test_a_part_that_is_too_large_is_refused() -> None:
    model = read_text(f"{PLANT}system: {STRUCTURES[0]}\n", "spec")
    with pytest.raises(markov.TooLarge):
        solve_model(model, limit=5)


def test_a_system_whose_parts_never_fail_says_so() -> None:
    text = "units: {a: {failure_rate: 0 /h, repair_time: 1 h}, b: {failure_rate: 0 /h}}\nsystem: {all_of: [a, b]}\n"
    apart = Solver(read_text(text, "spec"), whole_up_to=0)
    assert apart.parts is not None
    assert not apart.can_fail(None)
    with pytest.raises(IllPosed):
        apart.answer(Question("mean_up_time"))


def test_check_predicts_the_size_without_generating() -> None:
    model = read_text(f"{PLANT}system: {STRUCTURES[0]}\n", "spec")
    size = markov.check(model).size
    solved = Solver(model)
    assert size.is_exact
    assert (size.states, size.transitions) == (solved.states, solved.transitions)


def test_check_of_a_plant_beyond_the_limit_says_so_and_solving_it_is_refused() -> None:
    units = "\n".join(f"  u{at}: {{failure_rate: {at + 1}e-5 /h, repair_time: 10 h}}" for at in range(16))
    groups = "\n".join(f"  g{at}: {{members: [{{unit: u{at}, count: 2}}], redundancy: active}}" for at in range(16))
    every = ", ".join(f"u{at}" for at in range(16))
    system = ", ".join(f"g{at}" for at in range(16))
    text = (
        f"units:\n{units}\ngroups:\n{groups}\ncrews: {{c: {{size: 1, repairs: [{every}]}}}}\n"
        f"system: {{all_of: [{system}]}}\n"
    )
    model = read_text(text, "spec")
    size = markov.check(model).size
    assert size.states == 3**16
    assert not size.is_exact
    assert not size.is_within_limit
    assert size.memory_bytes > 10**11
    with pytest.raises(markov.TooLarge, match=r"43,046,721 states at most.*5,000,000"):
        markov.solve(model)


def test_check_tells_parts_apart() -> None:
    units = "\n".join(f"  u{at}: {{failure_rate: {at + 1}e-5 /h, repair_time: 10 h}}" for at in range(16))
    groups = "\n".join(f"  g{at}: {{members: [{{unit: u{at}, count: 2}}], redundancy: active}}" for at in range(16))
    system = ", ".join(f"g{at}" for at in range(16))
    size = markov.check(read_text(f"units:\n{units}\ngroups:\n{groups}\nsystem: {{all_of: [{system}]}}\n", "spec")).size
    assert (size.states, size.parts, size.raw_states) == (48, 16, 3**16)
    assert size.is_within_limit
