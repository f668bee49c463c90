"""Measures of chains with fixed instants: by hand, against chains without, and with their reasons."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np
import pytest

from markov.chain import Enclosure
from markov.errors import IllPosed
from markov.evaluation import solve_model
from markov.evaluation.answers import Answers
from markov.evaluation.questions import Question
from markov.evaluation.scheduled import SCHEDULED, ScheduledAnswers
from markov.model import Model
from markov.rates import Rate
from markov.spec import read_text
from markov.states import ArrowKind, ArrowKinds, Arrows, generate
from markov.states.timetable import Action, Step, Timetable

YEAR = Fraction(8760)
NOTHING = Arrows(*(np.zeros(0, np.int32) for _ in range(4)))


@dataclass
class Phase:
    """The rules of one phase, by hand."""

    arrows: Arrows
    upright: Callable[[str | None], np.ndarray]
    needless: Callable[[str | None], np.ndarray]
    share: Callable[[str | None], np.ndarray]

    def up(self, of: str | None) -> np.ndarray:
        return self.upright(of)

    def acts(self, of: str | None) -> np.ndarray:
        return self.needless(of)

    def capacity(self, of: str | None) -> np.ndarray:
        return self.share(of)


@dataclass
class Space:
    """A chain with fixed instants, by hand."""

    size: int
    kinds: ArrowKinds
    timetable: Timetable | None
    regimes: tuple[Phase, ...]
    jumps: tuple[Arrows, ...]
    start: tuple[tuple[int, Fraction], ...] = ((0, Fraction(1)),)
    slots: frozenset[tuple[str, str]] = frozenset({("", "unit")})
    failing: np.ndarray = field(default_factory=lambda: np.zeros(0))

    def failed(self, subject: str | None) -> np.ndarray:
        return self.failing

    def slots_of(self, subject: str | None) -> frozenset[tuple[str, str]]:
        return self.slots

    def find(self, name: str) -> int:
        return int(name)


def arrows(kinds: ArrowKinds, listed: Mapping[tuple[int, int], Fraction | str | float], **counts: object) -> Arrows:
    """Transitions or chances as columns; what they count goes into their kinds."""
    numbers = [
        kinds.intern(ArrowKind("by hand", kinds.rates.intern(Rate(Fraction(value), ())), **counts))  # type: ignore[arg-type]
        for value in listed.values()
    ]
    return Arrows(
        np.array([source for source, _ in listed], np.int32),
        np.array([target for _, target in listed], np.int32),
        np.array(numbers, np.int32),
        np.ones(len(listed), np.int32),
    )


def phase(moves: Arrows, up: list[bool], acts: list[bool] | None = None) -> Phase:
    upright, needless = np.array(up), np.array(acts or [False] * len(up))
    return Phase(moves, lambda of: upright, lambda of: needless, lambda of: upright.astype(float))


def ask(
    answers: ScheduledAnswers | Answers, measure: str, at: Fraction | int | None = None, **more: object
) -> Enclosure:
    return answers.answer(Question(measure, at_hours=None if at is None else Fraction(at), **more))  # type: ignore[arg-type]


def every(hours: int, *actions: Action) -> Timetable:
    return Timetable((), (Step(0, Fraction(hours), 0),), (actions or (Action("test", "check"),),))


# --- against chains without fixed instants ---------------------------------------------------------------------------

LOCK = """
units: {drive: {failure_rate: 2e-4 /h, repair_time: 24 h, start_failure: 2 %}}
groups:
  gate:
    members: [{unit: drive, count: 2}]
    redundancy: cold_standby
    switchover: {coverage: 0.95, uncovered: {outcome: manual_takeover, time: 0.75 h}}
crews: {fitters: {size: 1, repairs: [drive]}}
system: gate
"""

TABLES = {
    "a test that finds nothing": every(1000),
    "two of them": Timetable(
        (Step(0, Fraction(17), 0),),
        (Step(0, Fraction(300), 1), Step(0, Fraction(700), 0)),
        ((Action("test", "check"),), (Action("test", "other"),)),
    ),
    "phases that differ in nothing": Timetable(
        (Step(0, Fraction(5), 0), Step(1, Fraction(7), 1)), (), ((Action("phase", 1),), (Action("phase", 0),))
    ),
    "phases that repeat": Timetable(
        (), (Step(0, Fraction(50), 0), Step(1, Fraction(70), 1)), ((Action("phase", 1),), (Action("phase", 0),))
    ),
}

#: Measures that speak of what only fixed instants, or levels, bring about.
UNLIKE = ("tests_per_year", "level_probability")


@pytest.mark.parametrize(
    ("name", "largest_dense"),
    [*((name, 160) for name in TABLES), ("a test that finds nothing", 0), ("phases that differ in nothing", 0)],
)
def test_instants_at_which_nothing_happens_change_nothing(name: str, largest_dense: int) -> None:
    plain = generate(read_text(LOCK, "spec"))
    rules = Phase(plain.arrows, lambda of: plain.up, lambda of: np.zeros(plain.size, bool), plain.capacity)
    table = TABLES[name]
    space = Space(plain.size, plain.kinds, table, (rules, rules), tuple(NOTHING for _ in table.instants), plain.start)
    space.failing, space.slots = plain.failed(None), plain.slots_of(None)
    times = (Fraction(0), Fraction(100), YEAR)
    answers = ScheduledAnswers(space, YEAR, times, largest_dense=largest_dense)
    before = Answers(plain, YEAR, times)
    asked = 0
    for measure in SCHEDULED:
        if measure in UNLIKE:
            continue
        steady = Question(measure).asked.timing in ("steady", "none")
        more: dict[str, object] = {"state": "0"} if measure == "state_probability" else {}
        if measure == "interval_reliability":
            more = {"for_hours": Fraction(2000)}
        for at in (None,) if steady else (Fraction(100), YEAR):
            found = ask(answers, measure, at, **more)
            known = ask(before, measure, at, **more)
            assert found.meet(known).value == pytest.approx(known.value, rel=1e-12), measure
            wide = 1.01 if measure.startswith("standard") and largest_dense == 0 else 1e-12
            assert found.width < wide, measure
            asked += 1
    assert asked > 35
    starts = np.array([float(len(kind.starts)) for kind in plain.kinds.kinds])

    def attempts(columns: Arrows, phase: int) -> np.ndarray:
        return starts[columns.kind]

    known = before.count_rate(attempts)
    assert known.lower
    assert answers.count_rate(attempts).meet(known).value == pytest.approx(known.value, rel=1e-12)
    assert answers.can_fail(None)
    assert answers.arrow_count == before.arrow_count


# --- by hand ---------------------------------------------------------------------------------------------------------


def yearly_tested(**more: object) -> ScheduledAnswers:
    """A unit whose faults only a yearly test finds; what it finds is renewed at once."""
    kinds = ArrowKinds()
    moves = arrows(kinds, {(0, 1): Fraction(1, 100_000)})
    found = arrows(kinds, {(1, 0): 1}, repaired="unit")
    space = Space(2, kinds, every(8760), (phase(moves, [True, False]),), (found,), failing=np.array([0.0, 1.0]))
    return ScheduledAnswers(space, YEAR, (Fraction(8760), Fraction(20000)), **more)  # type: ignore[arg-type]


def test_a_yearly_tested_unit_has_its_closed_form() -> None:
    x = 8760e-5
    answers = yearly_tested(covers={"check": ("unit",)}, levels={"half": Fraction(1, 2)})
    average = 1 + math.expm1(-x) / x
    expected = {
        "pfd_average": average,
        "steady_state_unavailability": average,
        "mean_units_failed": average,
        "steady_state_availability": 1 - average,
        "mean_capacity": 1 - average,
        "level_probability": 1 - average,
        "pfd_peak": -math.expm1(-x),
        "pfh": -math.expm1(-x) / 8760,
        "failure_frequency": -math.expm1(-x) / 8760,
        "failures_per_year": -math.expm1(-x),
        "mean_time_to_first_failure": 1e5,
        "standard_deviation_of_time_to_first_failure": 1e5,
        "downtime_per_year": 8760 * average,
        "mean_up_time": 1e5,
        "conditional_failure_intensity": 1e-5,
        "tests_per_year": 1.0,
        "spurious_failures_per_year": 0.0,
    }
    for measure, value in expected.items():
        found = ask(answers, measure, of="half") if measure == "level_probability" else ask(answers, measure)
        assert found.value == pytest.approx(value, rel=2e-13), measure
        assert found.lower is not None
    repairs = np.array([float(bool(kind.repaired)) for kind in answers.space.kinds.kinds])
    found = answers.count_rate(lambda columns, _: repairs[columns.kind])
    assert found.value == pytest.approx(-math.expm1(-x) / 8760, rel=1e-14)
    assert ask(answers, "tests_per_year", of="unit").value == 1.0
    assert ask(answers, "tests_per_year", of="another").value == 0.0


def test_a_value_at_an_instant_is_that_after_it() -> None:
    answers = yearly_tested()
    assert ask(answers, "unavailability", 8760).upper == 0.0
    assert ask(answers, "unavailability", 20000).value == pytest.approx(-math.expm1(-(20000 - 17520) / 1e5), rel=1e-13)
    assert ask(answers, "unreliability", 8760).value == pytest.approx(-math.expm1(-0.0876), rel=1e-14)
    assert ask(answers, "expected_failures", 8760).value == pytest.approx(-math.expm1(-0.0876), rel=1e-14)
    assert ask(answers, "hazard_rate", 20000).value == pytest.approx(1e-5, rel=1e-13)
    assert ask(answers, "interval_reliability", 8760, for_hours=Fraction(30000)).value == pytest.approx(
        math.exp(-0.3), rel=1e-13
    )


def test_needless_action_counts_as_down_and_not_against_the_demand() -> None:
    """Good, failed unnoticed, acting needlessly for ten hours."""
    kinds = ArrowKinds()
    moves = arrows(kinds, {(0, 1): Fraction(1, 10**6), (0, 2): Fraction(2, 10**5), (2, 0): Fraction(1, 10)})
    leap = arrows(kinds, {(1, 0): 1}, repaired="unit")
    space = Space(3, kinds, every(1000), (phase(moves, [True, False, False], [False, False, True]),), (leap,))
    answers = ScheduledAnswers(space, YEAR)
    acting = ask(answers, "steady_state_unavailability").minus(ask(answers, "pfd_average"))
    assert acting.value == pytest.approx(2e-4, rel=2e-3)
    assert ask(answers, "spurious_failures_per_year").value == pytest.approx(2e-5 * 8760, rel=2e-3)
    assert ask(answers, "pfh").value == pytest.approx(1e-6, rel=2e-3)
    assert ask(answers, "failures_per_year").value == pytest.approx(2.1e-5 * 8760, rel=2e-3)
    assert ask(answers, "pfd_average").value == pytest.approx(5e-4, rel=2e-3)


def test_a_stricter_phase_fails_at_its_boundary() -> None:
    """Two units without repair: the second phase needs both, so one failed is a failure at the boundary."""
    kinds = ArrowKinds()
    rate = Fraction(1, 1000)
    moves = arrows(kinds, {(0, 1): 2 * rate, (1, 2): rate})
    table = Timetable((Step(0, Fraction(100), 0),), (), ((Action("phase", 1),),))
    loose, strict = phase(moves, [True, True, False]), phase(moves, [True, False, False])
    space = Space(3, kinds, table, (loose, strict), (NOTHING,))
    answers = ScheduledAnswers(space, YEAR, (Fraction(99), Fraction(100), Fraction(300)))
    r = math.exp(-0.1)
    assert ask(answers, "unreliability", 99).value == pytest.approx((1 - math.exp(-0.099)) ** 2, rel=1e-13)
    assert ask(answers, "reliability", 100).value == pytest.approx(r**2, rel=1e-14)
    assert ask(answers, "expected_failures", 100).value == pytest.approx((1 - r) ** 2 + 2 * r * (1 - r), rel=1e-13)
    assert ask(answers, "reliability", 300).value == pytest.approx(math.exp(-0.6), rel=1e-13)
    assert ask(answers, "availability", 99).value == pytest.approx(1 - (1 - math.exp(-0.099)) ** 2, rel=1e-13)
    # The integral of 2 e^-t - e^-2t up to the boundary, then the rest at twice the rate.
    lived = 1000 * (2 * (1 - r) - (1 - r**2) / 2 + r**2 / 2)
    assert ask(answers, "mean_time_to_first_failure").value == pytest.approx(lived, rel=1e-13)
    assert ask(answers, "steady_state_unavailability").lower == 1.0


def test_a_criterion_that_comes_and_goes_fails_once_a_cycle() -> None:
    """Half of the states are down in the night only; nothing ever moves them."""
    kinds = ArrowKinds()
    still = arrows(kinds, {})
    table = Timetable(
        (), (Step(0, Fraction(16), 0), Step(1, Fraction(8), 1)), ((Action("phase", 1),), (Action("phase", 0),))
    )
    space = Space(1, kinds, table, (phase(still, [True]), phase(still, [False])), (NOTHING, NOTHING))
    answers = ScheduledAnswers(space, YEAR, (Fraction(240), Fraction(241)))
    assert ask(answers, "failures_per_year").value == pytest.approx(365, rel=1e-14)
    assert ask(answers, "steady_state_unavailability").value == pytest.approx(1 / 3, rel=1e-14)
    assert ask(answers, "pfd_peak").value == 1.0
    assert ask(answers, "mean_down_time").value == pytest.approx(8, rel=1e-13)
    assert ask(answers, "expected_failures", 240).value == pytest.approx(10, rel=1e-13)
    assert ask(answers, "mean_time_to_first_failure").value == pytest.approx(16, rel=1e-13)
    # From first and second moment, one minus the other: only small.
    assert ask(answers, "standard_deviation_of_time_to_first_failure").lower == 0.0
    assert ask(answers, "reliability", 240).upper == 0.0
    assert answers.can_fail(None)


def test_starts_at_instants_are_counted() -> None:
    kinds = ArrowKinds()
    moves = arrows(kinds, {(0, 1): Fraction(1, 1000), (1, 0): Fraction(1, 10)}, starts=("unit",))
    leap = arrows(kinds, {(0, 0): 1, (1, 1): 1}, starts=("unit", "unit"))
    space = Space(2, kinds, every(100), (phase(moves, [True, False]),), (leap,))
    answers = ScheduledAnswers(space, YEAR)
    running = 2 / (1 / 1e-3 + 1 / 0.1)
    starts = np.array([float(len(kind.starts)) for kind in kinds.kinds])
    found = answers.count_rate(lambda columns, _: starts[columns.kind])
    assert found.value == pytest.approx(running + 2 / 100, rel=1e-13)


def test_many_chances_lead_to_the_limit_by_hand() -> None:
    """A deterministic cycle of three shifts a unit among two places; no rate is above zero."""
    kinds = ArrowKinds()
    still = arrows(kinds, {})
    leap = arrows(kinds, {(0, 0): "1/4", (0, 1): "3/4", (1, 0): "1/2", (1, 1): "1/2"})
    space = Space(2, kinds, every(10), (phase(still, [True, False]),), (leap,))
    answers = ScheduledAnswers(space, YEAR, (Fraction(5), Fraction(10), Fraction(20)))
    assert ask(answers, "steady_state_availability").value == pytest.approx(0.4, rel=1e-14)
    assert ask(answers, "availability", 10).value == 0.25
    assert ask(answers, "availability", 20).value == pytest.approx(1 / 16 + 3 / 8, rel=1e-15)
    assert ask(answers, "failures_per_year").value == pytest.approx(0.4 * 0.75 * 876, rel=1e-13)
    assert ask(answers, "mean_time_to_first_failure").value == pytest.approx(10 / 0.75, rel=1e-13)
    assert ask(answers, "standard_deviation_of_time_to_first_failure").value == pytest.approx(
        10 * math.sqrt(0.25) / 0.75, rel=1e-12
    )


# --- reasons ---------------------------------------------------------------------------------------------------------


def test_questions_without_an_answer_get_their_reason() -> None:
    answers = yearly_tested()
    with pytest.raises(IllPosed, match="when in the cycle"):
        ask(answers, "interval_reliability", for_hours=Fraction(10))
    with pytest.raises(IllPosed, match="no such level"):
        ask(answers, "level_probability", of="none")
    with pytest.raises(IllPosed, match="over no time"):
        ask(answers, "mean_availability", 0)


def test_two_ways_to_end_have_no_common_long_run() -> None:
    kinds = ArrowKinds()
    moves = arrows(kinds, {(0, 1): Fraction(1, 1000), (0, 2): Fraction(1, 1000)})
    leap = arrows(kinds, {(0, 0): 1})
    for up, reason in (([True, True, False], "down for good and others live on"),):
        space = Space(3, kinds, every(100), (phase(moves, up),), (leap,))
        with pytest.raises(IllPosed, match=reason):
            ask(ScheduledAnswers(space, YEAR), "steady_state_availability")
        with pytest.raises(IllPosed, match="may never come"):
            ask(ScheduledAnswers(space, YEAR), "mean_time_to_first_failure")


def test_what_cannot_fail_says_so() -> None:
    kinds = ArrowKinds()
    moves = arrows(kinds, {(0, 1): Fraction(1, 1000), (1, 0): 1})
    space = Space(3, kinds, every(100), (phase(moves, [True, True, False]),), (NOTHING,))
    answers = ScheduledAnswers(space, YEAR, (Fraction(5),))
    assert not answers.can_fail(None)
    assert ask(answers, "steady_state_unavailability").upper == 0.0
    assert ask(answers, "steady_state_availability").lower == 1.0
    assert ask(answers, "unreliability", 5).upper == 0.0
    with pytest.raises(IllPosed, match="no down state"):
        ask(answers, "mean_time_to_first_failure")


def test_what_would_take_many_minutes_is_refused_at_once_with_what_would_help() -> None:
    pairs = {f"g{number}": {"members": [{"unit": "a", "count": 2}, "b"], "redundancy": "active"} for number in range(5)}
    for number, group in enumerate(pairs.values()):
        group["members"] = [{"unit": f"a{number}", "count": 2}, f"b{number}"]
    units = {}
    for number in range(5):
        units[f"a{number}"] = {"failure_rate": f"{number + 1}e-5 /h", "repair_time": "1 s"}
        units[f"b{number}"] = {"failure_rate": f"{number + 1}e-6 /h", "repair_time": "20 h", "detected": "50 %"}
    spec = {
        "units": units,
        "groups": pairs,
        "tests": {"t": {"of": "b0", "interval": "1 y"}},
        "system": {"all_of": list(pairs)},
    }
    solution = solve_model(Model.from_mapping(spec))
    found = next(each for each in solution.results if each.measure == "steady_state_unavailability")
    assert found.value is None
    assert not found.reached
    assert found.reason is not None
    assert "separate specs for what shares nothing but the calendar" in found.reason
