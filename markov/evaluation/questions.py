"""Which questions a model is asked: those of its targets, and every measure of the system that applies."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from markov.errors import IllPosed
from markov.measures import MEASURES, Measure
from markov.model import Model, Target


@dataclass(frozen=True)
class Question:
    """One measure of one subject, at a time where it takes one."""

    measure: str
    of: str | None = None
    state: str | None = None
    at_hours: Fraction | None = None
    for_hours: Fraction | None = None

    @property
    def asked(self) -> Measure:
        """The measure with its unit and timing."""
        return MEASURES[self.measure]

    @property
    def time(self) -> Fraction:
        """The time asked for, in hours.

        Raises
        ------
        IllPosed
            There is none.
        """
        if self.at_hours is None:
            raise IllPosed("needs a time: give `at`, or a mission time")
        return self.at_hours

    @property
    def positive_time(self) -> Fraction:
        """The time asked for, in hours, to be averaged over.

        Raises
        ------
        IllPosed
            There is none, or it is zero.
        """
        if self.time == 0:
            raise IllPosed("an average over no time: the time is zero")
        return self.time


def subjects_of(model: Model) -> tuple[str, ...]:
    """Name the groups, units and crew pools that targets ask about."""
    return tuple(target.of for target in model.targets if target.of is not None)


def question_of(model: Model, target: Target) -> Question:
    """Return what a target asks; a measure that needs a time takes that of the mission where it names none."""
    at = None if target.at is None else target.at.exact
    if at is None and target.asked.timing == "point" and model.mission is not None:
        at = model.mission.time.exact
    return Question(target.measure, target.of, target.state, at, None if target.for_ is None else target.for_.exact)


def all_questions(model: Model, times: Sequence[Fraction]) -> tuple[Question, ...]:
    """List the measures of the system that apply, then what targets ask besides.

    Parameters
    ----------
    model : Model
    times : sequence of Fraction
        Times in hours asked for beside the mission time; each measure that takes a time is answered at each.
    """
    mission = () if model.mission is None else (model.mission.time.exact,)
    points = tuple(dict.fromkeys((*mission, *times)))
    found: dict[Question, None] = {}
    for measure in MEASURES.values():
        if not applies(model, measure):
            continue
        for question in _at_times(measure, points, tuple(dict.fromkeys(times))):
            found[question] = None
    for target in model.targets:
        found[question_of(model, target)] = None
    return tuple(found)


def applies(model: Model, measure: Measure) -> bool:
    """Tell whether a measure of the whole system means something for a model and needs no further word."""
    if measure.name in ("interval_reliability", "state_probability", "level_probability"):
        return False
    if measure.name in _NEEDS:
        return _NEEDS[measure.name](model)
    if measure.name in ("crew_utilisation", "waiting_for_crew", "probability_of_waiting"):
        return bool(model.crews)
    if model.explicit:
        return measure.name not in (
            "repairs_per_year",
            "starts_per_year",
            "mean_units_failed",
            "time_without_redundancy",
            "gain_over_single_unit",
            "gain_over_independent_blocks",
        )
    if measure.name == "starts_per_year":
        return any(not group.is_active for group in model.groups.values())
    return True


_NEEDS: dict[str, Callable[[Model], bool]] = {
    "hazardous_events_per_year": lambda model: model.demand is not None,
    "spurious_failures_per_year": lambda model: any(unit.may_act_needlessly for unit in model.units.values()),
    "spares_per_year": lambda model: bool(model.spares),
    "tests_per_year": lambda model: bool(model.tests),
}


def _at_times(measure: Measure, points: Sequence[Fraction], added: Sequence[Fraction]) -> Iterator[Question]:
    if measure.timing == "point":
        for time in points:
            yield Question(measure.name, at_hours=time)
        return
    yield Question(measure.name)
    if measure.timing == "either":
        for time in added:
            yield Question(measure.name, at_hours=time)
