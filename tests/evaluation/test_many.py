"""Many samples at once give what each of them gives alone, with its bound."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from markov.errors import IllPosed, UsageError
from markov.evaluation.answers import Answers
from markov.evaluation.many import solve_many
from markov.evaluation.questions import Question
from markov.evaluation.samples import Samples
from markov.evaluation.solver import Solver
from markov.evaluation.upkeep import UPKEEP, Upkeep
from markov.model import Model
from markov.quantities import Quantity, parse_quantity
from markov.states import generate
from tests.evaluation.parametrised import Parametrised, draw, questions_of

Read = Callable[[str], Model]


def alone(model: Model, questions: list[Question]) -> dict[Question, float | None]:
    """The bounded answers of one model; None where there is none."""
    solver = Solver(model, [each.at_hours for each in questions if each.at_hours is not None], whole_up_to=10**9)
    for question in questions:
        solver.expect(question)
    found: dict[Question, float | None] = {}
    for question in questions:
        try:
            found[question] = solver.answer(question).value
        except IllPosed:
            found[question] = None
    return found


def sampled(spec: Parametrised, seed: int, count: int = 2) -> list[dict[str, Fraction]]:
    rng = random.Random(seed)
    factors = [Fraction(k, 20) for k in (14, 17, 19, 21, 22)]
    return [{name: spec.values[name] * rng.choice(factors) for name in spec.movable} for _ in range(count)]


def close(found: float, truth: float) -> bool:
    return math.isclose(found, truth, rel_tol=1e-12, abs_tol=1e-300)


@pytest.mark.parametrize("seed", [seed for seed in range(32) if seed not in (4, 6, 9, 20)])  # those are large
def test_every_measure_of_random_plants(seed: int) -> None:
    spec = draw(seed)
    moved = sampled(spec, seed)
    model = spec.model()
    samples = {name: [float(sample[name]) for sample in moved] for name in spec.movable}
    questions = questions_of(model)
    truths = [alone(spec.model(**sample), questions) for sample in moved]
    answered = [question for question in questions if all(truth[question] is not None for truth in truths)]
    assert len(answered) >= 8
    for number, truth in enumerate(truths):
        found = solve_many(model, samples, answered)
        for question in answered:
            expected = truth[question]
            assert expected is not None
            assert close(found[question][number], expected), question
    for question in questions:
        if question not in answered:
            with pytest.raises(IllPosed):
                solve_many(model, samples, [question])


PLANT = """
parameters:
  wear: 1e-3 /h
  mend: 20 h
  refusal: 3 %
  other: 2e-3 /h
  slower: other / 3
  seen: 90 %
  share: 40 %
units:
  pump: {failure_rate: wear, repair_time: mend, start_failure: refusal}
  fan: {failure_rate: other, repair_rate: 1 / (mend / 2)}
  door: {mean_time_to_failure: 1 / slower, repair_time: 5 * mend, capacity: share}
  lamp: {failure_rate: 7e-3 /h, repair_time: 3 h}
groups:
  pumps: {members: [{unit: pump, count: 2}], redundancy: cold_standby, coverage: 1 - (1 - seen)}
  fans: {members: [{unit: fan, count: 2}], required: 1, redundancy: active}
  doors: {members: [{unit: door, count: 2}], required: 1, redundancy: active}
  lamps: {members: [{unit: lamp, count: 2}], redundancy: hot_standby, switchover: {time: mend / 20}}
crews:
  one: {size: 1, repairs: [pump, fan]}
  two: {size: 1, repairs: [lamp]}
system: {any_of: [{all_of: [pumps, fans]}, doors]}
mission: {time: 50 h}
"""
VALUES = {"wear": "/h", "mend": "h", "refusal": "", "other": "/h", "seen": "", "share": ""}


def with_values(text: str, values: dict[str, float]) -> str:
    """Write exact floats in place of the parameters' values."""
    lines = text.splitlines()
    for name, value in values.items():
        exact = Fraction(float(value))
        (at,) = (number for number, line in enumerate(lines) if line.startswith(f"  {name}: ") and "{" not in line)
        lines[at] = f"  {name}: {exact.numerator} {VALUES[name]} / {exact.denominator}"
    return "\n".join(lines)


def test_a_plant_with_expressions_and_subjects(read: Read) -> None:
    model = read(PLANT)
    rng = np.random.default_rng(4)
    samples = {name: float(model.parameters[name].value.exact) * rng.uniform(0.6, 1.05, 2) for name in VALUES}
    subjects = ["pumps", "fans", "doors", "lamps"]
    time = Fraction(50)
    about = [
        *(Question(measure, of) for of in subjects for measure in ("steady_state_unavailability", "mean_down_time")),
        *(Question(measure, of, at_hours=time) for of in subjects for measure in ("unreliability", "hazard_rate")),
        *(
            Question(measure, of)
            for of in ("pumps", "pump", "lamps")
            for measure in ("repairs_per_year", "mean_units_failed")
        ),
        Question("starts_per_year", "pumps"),
        Question("mean_capacity", "doors", at_hours=time),
        Question("mean_time_to_first_failure", "lamps"),
        Question("expected_failures", "fans", at_hours=Fraction(3000)),
        Question("crew_utilisation", "one"),
        Question("probability_of_waiting", "two"),
    ]
    system = questions_of(model)
    found = solve_many(model, samples, [*system, *about])
    assert list(found) == [*system, *about]
    for number in range(2):
        moved = read(with_values(PLANT, {name: values[number] for name, values in samples.items()}))
        truth = alone(moved, system)
        for question in system:
            expected = truth[question]
            assert expected is not None
            assert close(found[question][number], expected), question
        answers = Answers(generate(moved, tuple(subjects)), moved.year_hours, [time, Fraction(3000)])
        for question in about:
            if question.measure in UPKEEP:
                assert close(found[question][number], Upkeep(answers).answer(question).value), question
            elif question.measure not in ("crew_utilisation", "probability_of_waiting"):
                assert close(found[question][number], answers.answer(question).value), question
        (busy,) = (question for question in about if question.measure == "crew_utilisation")
        assert close(found[busy][number], alone(moved, [busy])[busy] or math.nan)


HAND_WRITTEN = """
parameters: {a: 1e-3 /h, b: 10 h, c: 90 %, half: 50 %}
states:
  good: {up: true, initial: true}
  low: {up: true, capacity: half}
  bad: {up: false}
transitions:
  - {from: good, to: low, rate: 2 * a * c}
  - {from: good, to: bad, rate: 2 * a * (1 - c)}
  - {from: low, to: bad, rate: a}
  - {from: low, to: good, mean_time: b}
  - {from: bad, to: good, mean_time: b}
mission: {time: 100 h}
"""


def test_a_hand_written_chain(read: Read) -> None:
    model = read(HAND_WRITTEN)
    questions = questions_of(model)
    samples = {"a": [1e-3, 3e-3], "b": [10.0, 5.0], "c": [0.5, 0.875], "half": [0.25, 0.75]}
    found = solve_many(model, samples, questions)
    units = {"a": "/h", "b": "h", "c": "", "half": ""}
    for number in range(2):
        values = {name: Fraction(column[number]) for name, column in samples.items()}
        told = ", ".join(f"{k}: {v.numerator} {units[k]} / {v.denominator}" for k, v in values.items())
        truth = alone(read(HAND_WRITTEN.replace("a: 1e-3 /h, b: 10 h, c: 90 %, half: 50 %", told)), questions)
        for question in questions:
            expected = truth[question]
            assert expected is not None
            assert close(found[question][number], expected), question


def test_alike_groups_are_only_merged_if_they_follow_from_the_same_parameters(read: Read) -> None:
    text = """
parameters: {one: 1e-2 /h, two: 1e-2 /h}
units: {pump: {failure_rate: 3 * one, repair_time: 5 h}, fan: {failure_rate: 3 * two, repair_time: 5 h}}
system: {any_of: [pump, fan]}
"""
    asked = Question("steady_state_unavailability")
    found = solve_many(read(text), {"two": [1e-2, 2e-2]}, [asked])[asked]
    own = [rate / (rate + 0.2) for rate in (3e-2, 6e-2)]
    np.testing.assert_allclose(found, [own[0] * own[0], own[0] * own[1]], rtol=1e-14)


# ----------------------------------------------------------------------------------------------------- complements


def test_a_complement_that_is_given_keeps_its_digits(read: Read) -> None:
    text = """
parameters: {seen: 90 %}
units: {pump: {failure_rate: 1e-15 /h, repair_time: 1 h}}
groups: {pumps: {members: [{unit: pump, count: 2}], redundancy: cold_standby, coverage: seen}}
system: pumps
"""
    model = read(text.replace("seen: 90 %", "seen: 99 %"))
    asked = Question("failure_frequency")
    lost = np.array([1.2345678e-13, 3e-15])
    given = solve_many(model, {"seen": 1.0 - lost}, [asked], complements={"seen": lost})[asked]
    blunt = solve_many(model, {"seen": 1.0 - lost}, [asked])[asked]
    truth = []
    for each in lost.tolist():
        value = 1 - Fraction(each)
        truth.append(alone(read(text.replace("seen: 90 %", f"seen: {value.numerator} / {value.denominator}")), [asked]))
    expected = np.array([each[asked] for each in truth], np.float64)
    np.testing.assert_allclose(given, expected, rtol=1e-13)
    assert np.abs(blunt / expected - 1).max() > 1e-6


def quantity(read: Read, text: str) -> tuple[Model, Quantity]:
    model = read(PLANT)
    known = {name: parameter.value for name, parameter in model.parameters.items()}
    return model, parse_quantity(text, parameters=known)


@pytest.mark.parametrize(
    ("text", "truth"),
    [
        ("1 - seen", lambda c: c),
        ("100 % - seen", lambda c: c),
        ("1 - (1 - seen)", lambda c: 1 - c),
        ("1 - seen * refusal", lambda c: 1 - (1 - c) * Fraction(3, 100)),
        ("1 - seen * seen", lambda c: c * (2 - c)),
        ("1 - 1 / (1 / seen)", lambda c: c),
        ("(1 - seen) * seen", lambda c: c * (1 - c)),
        ("0.5 + 0.5 - seen", lambda c: c),
    ],
)
def test_complements_within_expressions(read: Read, text: str, truth: Callable[[Fraction], Fraction]) -> None:
    model, written = quantity(read, text)
    lost = np.array([1.2345678e-13])
    samples = Samples(model, {"seen": 1.0 - lost}, {"seen": lost})
    value = samples.value(written.expression)
    assert isinstance(value, np.ndarray)
    exact = truth(Fraction(float(lost[0])))
    assert value[0] == pytest.approx(float(exact), rel=1e-15)
    opposite = samples.complement(written.expression)
    assert isinstance(opposite, np.ndarray)
    assert opposite[0] == pytest.approx(float(1 - exact), rel=1e-12)


def test_what_no_sample_enters_stays_exact(read: Read) -> None:
    model, written = quantity(read, "1 - refusal")
    samples = Samples(model, {"seen": [0.5]})
    assert samples.value(written.expression) == Fraction(97, 100)
    assert samples.complement(written.expression) == Fraction(3, 100)


# ------------------------------------------------------------------------------------------------------- zero, one


def test_a_sample_may_reach_zero_or_one_where_the_spec_does_not(read: Read) -> None:
    model = read(PLANT)
    asked = [Question("failures_per_year"), Question("unreliability", at_hours=Fraction(50))]
    found = solve_many(model, {"seen": [1.0, 0.0], "refusal": [0.0, 1.0]}, asked)
    for number, (seen, refusal) in enumerate([("1", "0"), ("0", "1")]):
        text = PLANT.replace("seen: 90 %", f"seen: {seen}").replace("refusal: 3 %", f"refusal: {refusal}")
        truth = alone(read(text), asked)
        for question in asked:
            expected = truth[question]
            assert expected is not None
            assert close(found[question][number], expected), question


def test_failures_that_never_come_are_fine_until_they_are_asked_for(read: Read) -> None:
    model = read(PLANT.replace("{any_of: [{all_of: [pumps, fans]}, doors]}", "doors"))
    samples = {"other": [2e-3, 0.0]}
    down = Question("steady_state_unavailability")
    with pytest.raises(UsageError, match="division by zero"):
        solve_many(model, samples, [down])  # a mean time of one divided by a rate of zero
    model = read(PLANT.replace("mean_time_to_failure: 1 / slower", "failure_rate: slower"))
    found = solve_many(model, samples, [down])[down]
    assert found[0] > found[1] == 0.0
    with pytest.raises(IllPosed, match=r"no failures to count.*sample 1"):
        solve_many(model, samples, [Question("mean_down_time")])
    with pytest.raises(IllPosed, match="in sample 1 some rates are zero"):
        solve_many(model, samples, [Question("mean_time_to_first_failure")])


@pytest.mark.parametrize(
    ("change", "samples", "told"),
    [
        (("refusal: 3 %", "refusal: 0"), {"refusal": [0.0, 0.1]}, "units.pump.start_failure: refusal is 0 in the spec"),
        (
            ("seen: 90 %", "seen: 1"),
            {"seen": [1.0, 0.9]},
            r"groups.pumps.coverage: .* is 1 in the spec and 0.9 in sample 1",
        ),
        (("wear: 1e-3 /h", "wear: 0 /h"), {"wear": [1e-3]}, "units.pump.failure_rate: wear is 0 in the spec"),
        (("repair_rate: 1 / (mend / 2)", "repair_time: mend"), {"mend": [20.0, 0.0]}, "repair_time: mend is 20 in the"),
    ],
)
def test_a_sample_that_makes_another_chain_is_refused(
    read: Read, change: tuple[str, str], samples: dict[str, list[float]], told: str
) -> None:
    with pytest.raises(IllPosed, match=told):
        solve_many(read(PLANT.replace(*change)), samples, [Question("failures_per_year")])


@pytest.mark.parametrize(
    ("samples", "complements", "told"),
    [
        ({"nothing": [1.0]}, {}, "no parameter is named nothing"),
        ({"wear": [1.0], "mend": [1.0, 2.0]}, {}, "one number of samples"),
        ({"wear": [[1.0]]}, {}, "shape"),
        ({"wear": [-1.0]}, {}, "negative"),
        ({"wear": [math.nan]}, {}, "not finite"),
        ({"seen": [1.5]}, {}, "share of at most 1"),
        ({"seen": [0.5]}, {"seen": [0.4]}, "add up to 1"),
        ({"wear": [0.5]}, {"seen": [0.4]}, "without values"),
        ({}, {}, "number of samples"),
    ],
)
def test_samples_that_do_not_fit_are_refused(
    read: Read, samples: dict[str, list[float]], complements: dict[str, list[float]], told: str
) -> None:
    with pytest.raises(UsageError, match=told):
        solve_many(read(PLANT), samples, [Question("failures_per_year")], complements=complements)


def test_a_comparison_of_plants_is_not_made_of_one_chain(read: Read) -> None:
    with pytest.raises(UsageError, match="several plants"):
        solve_many(read(PLANT), {"wear": [1e-3]}, [Question("gain_over_single_unit")])


def test_a_parameter_that_follows_from_others_moves_with_them_unless_it_is_sampled_itself(read: Read) -> None:
    model = read(PLANT)
    asked = Question("mean_units_failed")
    moving = solve_many(model, {"other": [4e-3]}, [asked])[asked]
    held = solve_many(model, {"other": [4e-3], "slower": [2e-3 / 3]}, [asked])[asked]
    both = solve_many(model, {"other": [4e-3], "slower": [4e-3 / 3]}, [asked])[asked]
    assert held < moving
    np.testing.assert_allclose(both, moving, rtol=1e-14)


def test_samples_are_independent_of_each_other(read: Read) -> None:
    model = read(PLANT)
    rng = np.random.default_rng(8)
    samples = {"wear": 1e-3 * rng.uniform(0.5, 2, 300), "mend": 20 * rng.uniform(0.5, 2, 300)}
    asked = [Question("failures_per_year"), Question("unreliability", at_hours=Fraction(50))]
    together = solve_many(model, samples, asked)
    apart = solve_many(model, {name: values[200:201] for name, values in samples.items()}, asked)
    for question in asked:
        np.testing.assert_allclose(together[question][200], apart[question][0], rtol=1e-13)


def test_the_year_of_the_model_counts(read: Read) -> None:
    asked = Question("failures_per_year")
    short, long_ = (
        solve_many(read(f"year: {hours} h\n{PLANT}"), {"wear": [2e-3]}, [asked])[asked] for hours in (8760, 8766)
    )
    np.testing.assert_allclose(long_ / short, 8766 / 8760, rtol=1e-15)


def test_questions_are_kept_apart_by_everything_they_say(read: Read) -> None:
    first = Question("unreliability", at_hours=Fraction(50))
    second = replace(first, at_hours=Fraction(100))
    found = solve_many(read(PLANT), {"wear": [1e-3]}, [first, second, first])
    assert list(found) == [first, second]
    assert found[first] < found[second]
