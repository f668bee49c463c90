"""Derivatives of every measure by every parameter, against differences in ball arithmetic over a step of 1e-60."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

import flint
import pytest
import yaml

from markov.errors import IllPosed, NotReached, UsageError
from markov.evaluation import sensitivity
from markov.evaluation.questions import Question
from markov.evaluation.sensitivity import Sensitivity, derivatives, elasticities, sensitivities
from markov.evaluation.solver import Solver
from markov.evaluation.solving import build_space
from markov.evaluation.varied import Varied, fixed
from markov.model import Model
from tests.chain.balls import rational
from tests.evaluation.parametrised import Parametrised, draw, questions_of
from tests.evaluation.truth import BITS, Truth

Read = Callable[[str], Model]
STEP = Fraction(1, 10**60)


def truth_of(model: Model) -> Truth:
    return Truth(build_space(model), model.year_hours)


def check(spec: Parametrised, found: dict[Question, Sensitivity]) -> int:
    """Compare with differences; return how many derivatives were compared."""
    compared = 0
    base = truth_of(spec.model())
    truths = {name: truth_of(spec.model(**{name: spec.values[name] * (1 + STEP)})) for name in spec.movable}
    for question, told in found.items():
        before = base.answer(question)
        with flint.ctx.workprec(BITS):
            assert abs(flint.arb(told.value) - before) < 1e-14 * abs(before) + 1e-200
        for name, after in truths.items():
            if name in told.reasons or (question.measure == "mean_capacity" and "capacity" in name):
                continue
            with flint.ctx.workprec(BITS):
                slope = (after.answer(question) - before) / rational(spec.values[name] * STEP)
                # Of 900 bits the step leaves more than 600; what is smaller than 1e-50 of the value is zero.
                if not abs(slope) > abs(before) * 1e-50:
                    assert told.derivatives[name] == 0.0, (question, name)
                else:
                    apart = abs(flint.arb(told.derivatives[name]) - slope)
                    assert apart < 1e-13 * abs(slope), (question, name, told.derivatives[name], slope)
                compared += 1
    return compared


def answered(model: Model) -> dict[Question, Sensitivity]:
    """Every measure that has an answer, with its derivatives."""
    questions = questions_of(model)
    solver = Solver(model, [each.at_hours for each in questions if each.at_hours is not None])
    posed = []
    for question in questions:
        try:
            solver.answer(question)
            posed.append(question)
        except IllPosed:
            with pytest.raises(IllPosed):
                sensitivities(model, [question])
    return sensitivities(model, posed)


@pytest.mark.parametrize("seed", [3, 7, 16, 17, 21, 22, 25, 29, 30, 35])
def test_every_measure_of_random_plants_by_every_parameter(seed: int) -> None:
    spec = draw(seed)
    found = answered(spec.model())
    assert check(spec, found) > 20


def written(text: str, **values: str) -> Parametrised:
    """A spec of our own with its parameters."""
    exact = {name: Fraction(value.split()[0]) for name, value in values.items()}
    suffixes = {name: "".join(value.split()[1:]) for name, value in values.items()}
    return Parametrised(yaml.safe_load(text), exact, suffixes)


STANDBY = """
units:
  drive: {failure_rate: wear, repair_time: mend, start_failure: refusal}
groups:
  drives: {members: [{unit: drive, count: 2}], redundancy: cold_standby, coverage: seen}
crews: {fitters: {size: 1, repairs: [drive]}}
system: drives
mission: {time: 6 h}
"""


def test_rare_failures_and_stiff_repairs_keep_their_digits() -> None:
    spec = written(STANDBY, wear="1e-9 /h", mend="2 h", refusal="1e-6", seen="0.999999999999")
    found = answered(spec.model())
    assert check(spec, found) >= 4 * 40
    unavailability = found[Question("steady_state_unavailability")]
    assert 0 < unavailability.value < 1e-13


def test_hand_written_chain() -> None:
    text = """
states: {good: {up: true, initial: true}, low: {up: true, capacity: 30 %}, bad: {up: false}}
transitions:
  - {from: good, to: low, rate: 2 * a * c}
  - {from: good, to: bad, rate: 2 * a * (1 - c)}
  - {from: low, to: bad, rate: a}
  - {from: low, to: good, mean_time: b}
  - {from: bad, to: good, rate: 1 / (3 * b)}
mission: {time: 6 h}
"""
    spec = written(text, a="1e-3 /h", b="10 h", c="0.9")
    assert check(spec, answered(spec.model())) > 80


# ------------------------------------------------------------------------------------------------------- by hand

ONE = """
parameters: {wear: 1e-3 /h, mend: 20 h, unused: 3, cost: 5 h}
units: {pump: {failure_rate: wear, repair_time: mend}}
system: pump
mission: {time: 100 h}
"""


def test_one_unit_by_hand(read: Read) -> None:
    model = read(ONE)
    rate, time = 1e-3, 20.0
    down = derivatives(model, Question("steady_state_unavailability"))
    assert down["wear"] == pytest.approx(time / (1 + rate * time) ** 2, rel=1e-15)
    assert down["mend"] == pytest.approx(rate / (1 + rate * time) ** 2, rel=1e-15)
    up = derivatives(model, Question("steady_state_availability"))
    assert up["wear"] == -down["wear"]
    failed = derivatives(model, Question("unreliability", at_hours=Fraction(100)))
    assert failed["wear"] == pytest.approx(100 * math.exp(-rate * 100), rel=1e-15)
    assert derivatives(model, Question("mean_time_to_first_failure"))["wear"] == pytest.approx(-1e6, rel=1e-15)
    spread = derivatives(model, Question("standard_deviation_of_time_to_first_failure"))
    assert spread["wear"] == pytest.approx(-1e6, rel=1e-15)


def test_what_has_no_influence_is_exactly_zero(read: Read) -> None:
    model = read(ONE)
    for question in questions_of(model):
        found = derivatives(model, question)
        assert found["unused"] == found["cost"] == 0.0
    # The mean down time of one unit is its repair time, whatever the failure rate: both terms cancel to the last digit.
    assert derivatives(model, Question("mean_down_time")) == {"wear": 0.0, "mend": 1.0, "unused": 0.0, "cost": 0.0}
    assert derivatives(model, Question("failure_frequency", at_hours=Fraction(0)))["mend"] == 0.0
    assert derivatives(model, Question("unreliability", at_hours=Fraction(0)))["wear"] == 0.0


def test_elasticities_are_percent_per_percent(read: Read) -> None:
    found = elasticities(read(ONE), Question("mean_time_to_first_failure"))
    assert found["wear"] == pytest.approx(-1.0, rel=1e-15)
    assert found["mend"] == 0.0
    assert elasticities(read(ONE), Question("unreliability", at_hours=Fraction(0)))["wear"] is None


def test_a_parameter_takes_along_what_follows_from_it(read: Read) -> None:
    text = ONE.replace("{wear: 1e-3 /h,", "{base: 5e-4 /h, wear: base + base,")
    found = derivatives(read(text), Question("mean_time_to_first_failure"))
    assert found["wear"] == pytest.approx(-1e6, rel=1e-15)
    assert found["base"] == pytest.approx(-2e6, rel=1e-15)


def test_more_coverage_never_hurts_here_and_more_wear_always_does() -> None:
    spec = written(STANDBY, wear="1e-3 /h", mend="20 h", refusal="0.02", seen="0.95")
    model = spec.model()
    for measure in ("steady_state_unavailability", "failure_frequency"):
        found = derivatives(model, Question(measure))
        assert found["wear"] > 0 > found["seen"]
    # Whatever brought the system down, one repair brings it back.
    assert derivatives(model, Question("mean_down_time")) == {"wear": 0.0, "mend": 1.0, "refusal": 0.0, "seen": 0.0}
    found = derivatives(model, Question("unreliability", at_hours=Fraction(6)))
    assert found["wear"] > 0 > found["seen"]
    assert found["refusal"] > 0
    assert derivatives(model, Question("reliability", at_hours=Fraction(6)))["wear"] == -found["wear"]


def test_a_group_outside_of_the_system_is_asked_in_a_chain_of_its_own(read: Read) -> None:
    beside = "}, fan: {failure_rate: 2e-3 /h}}\ngroups: {spare: {members: [pump]}}\n"
    model = read(ONE.replace("system: pump", "system: fan").replace("}}\n", beside, 1))
    inside = Question("unreliability", at_hours=Fraction(6))
    outside = Question("unreliability", "spare", at_hours=Fraction(6))
    found = sensitivities(model, [inside, outside])
    assert found[inside].derivatives["wear"] == 0.0
    assert found[outside].derivatives["wear"] == pytest.approx(6 * math.exp(-6e-3), rel=1e-15)


def test_alike_groups_of_different_parameters_are_told_apart(read: Read) -> None:
    text = """
parameters: {one: 1e-2 /h, two: 1e-2 /h}
units: {pump: {failure_rate: 3 * one, repair_time: 5 h}, fan: {failure_rate: 3 * two, repair_time: 5 h}}
system: {any_of: [pump, fan]}
"""
    found = derivatives(read(text), Question("steady_state_unavailability"))
    share, slope = 0.03 / 0.23, 3 * 0.2 / 0.23**2
    assert found["one"] == pytest.approx(share * slope, rel=1e-14)
    assert found["two"] == pytest.approx(share * slope, rel=1e-14)


# ----------------------------------------------------------------------------------------------------- capacities

SHARED = """
parameters: {share: 40 %, wear: 1e-2 /h}
units: {pump: {failure_rate: wear, repair_time: 5 h, capacity: share}, fan: {failure_rate: wear, repair_time: 3 h}}
groups:
  pumps: {members: [{unit: pump, count: 3}], required: 1, redundancy: active}
  both: {members: [pump, fan], required: 1, redundancy: active}
system: {all_of: [pumps, both]}
mission: {time: 6 h}
"""


@pytest.mark.parametrize("at", [None, Fraction(6)])
@pytest.mark.parametrize("of", [None, "pumps", "both"])
def test_capacities(read: Read, of: str | None, at: Fraction | None) -> None:
    """The delivered share is linear in the capacity here, so a long step gives the slope."""
    question = Question("mean_capacity", of, at_hours=at)
    low, middle, high = (
        sensitivities(read(SHARED.replace("40 %", f"{percent} %")), [question])[question] for percent in (39, 40, 41)
    )
    assert middle.derivatives["share"] == pytest.approx((high.value - low.value) / 0.02, rel=1e-10)
    assert middle.derivatives["share"] > 0
    assert middle.derivatives["wear"] < 0
    assert middle.derivatives["wear"] == pytest.approx(
        (low.derivatives["wear"] + high.derivatives["wear"]) / 2, rel=1e-12
    )


def test_a_bend_of_the_delivered_share_is_told(read: Read) -> None:
    text = SHARED.replace("40 %", "50 %")
    found = sensitivities(read(text), [Question("mean_capacity", "pumps")])[Question("mean_capacity", "pumps")]
    assert math.isnan(found.derivatives["share"])
    assert "limit" in found.reasons["share"]
    assert found.derivatives["wear"] < 0


# ------------------------------------------------------------------------------------------------------- refusals


@pytest.mark.parametrize(
    ("values", "name"),
    [
        ({"seen": "1"}, "seen"),
        ({"refusal": "0"}, "refusal"),
        ({"wear": "0 /h"}, "wear"),
        ({"mend": "0 h"}, "mend"),
    ],
)
def test_at_the_end_of_a_range_there_is_no_derivative_but_a_reason(values: dict[str, str], name: str) -> None:
    given = {"wear": "1e-3 /h", "mend": "20 h", "refusal": "0.02", "seen": "0.95", **values}
    question = Question("unreliability", at_hours=Fraction(6))
    found = sensitivities(written(STANDBY, **given).model(), [question])[question]
    assert math.isnan(found.derivatives[name])
    assert "leaves out" in found.reasons[name]
    assert [each for each in found.derivatives if math.isnan(found.derivatives[each])] == [name]


def test_questions_without_an_answer_have_no_derivative(read: Read) -> None:
    model = read(ONE.replace(", repair_time: mend", ""))
    with pytest.raises(IllPosed, match="no failures to count"):
        derivatives(model, Question("mean_down_time"))
    with pytest.raises(UsageError, match="several plants"):
        derivatives(model, Question("gain_over_single_unit"))
    assert derivatives(model, Question("steady_state_unavailability"))["wear"] == 0.0


def test_what_is_lost_in_cancelling_is_refused() -> None:
    question = Question("unreliability", at_hours=Fraction(6))
    model = written(STANDBY, wear="1e-3 /h", mend="20 h", refusal="0.02", seen="0.95").model()
    doubtful = Varied(Fraction(1), Fraction(0), {"wear": Fraction(1)}, {"wear": Fraction(1, 10**6)})
    with pytest.raises(NotReached, match="far larger terms"):
        sensitivity._told(model, question, doubtful, {})
    lost = Varied(Fraction(1), Fraction(0), {"wear": Fraction(1)}, {"wear": Fraction(2)})
    assert sensitivity._told(model, question, lost, {}).derivatives["wear"] == 0.0


# --------------------------------------------------------------------------------------------- numbers with slopes


def number(value: Fraction, slope: Fraction) -> Varied:
    return Varied(value, abs(value) / 2**80, {"x": slope}, {"x": abs(slope) / 2**80})


def test_rules_of_differentiation() -> None:
    a, b = number(Fraction(3), Fraction(5)), number(Fraction(7), Fraction(-2))
    assert (a + b).slopes["x"] == 3
    assert a.product(b).slopes["x"] == 5 * 7 - 3 * 2
    assert (a / b).slopes["x"] == (Fraction(5) + Fraction(3, 7) * 2) / 7
    assert a.times(Fraction(1, 2)).slopes["x"] == Fraction(5, 2)
    assert a.complement_of(Fraction(10)).slopes["x"] == -5
    assert float(a.root().slopes["x"]) == pytest.approx(5 / (2 * math.sqrt(3)), rel=1e-15)
    assert float(number(Fraction(10) ** 300, Fraction(1)).root().value) == pytest.approx(1e150, rel=1e-15)
    assert float(number(Fraction(1, 10**300), Fraction(1)).root().value) == pytest.approx(1e-150, rel=1e-15)
    with pytest.raises(ZeroDivisionError):
        a / fixed(Fraction(0))


def test_doubts_cover_what_the_errors_of_the_parts_can_do() -> None:
    a, b = number(Fraction(3), Fraction(5)), number(Fraction(7), Fraction(-2))
    for combine in (
        lambda x, y: x + y,
        lambda x, y: x / y,
        lambda x, y: x.product(y),
        lambda x, y: x.root(),
        lambda x, y: x.product(y).root() / y,
    ):
        found = combine(a, b)
        for ends in range(16):
            signs = [1 if ends >> bit & 1 else -1 for bit in range(4)]
            moved_a = number(a.value + signs[0] * a.doubt, a.slopes["x"] + signs[1] * a.doubts["x"])
            moved_b = number(b.value + signs[2] * b.doubt, b.slopes["x"] + signs[3] * b.doubts["x"])
            other = combine(moved_a, moved_b)
            assert abs(other.value - found.value) <= found.doubt
            assert abs(other.slopes["x"] - found.slopes["x"]) <= found.doubts["x"]
