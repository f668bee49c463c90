"""Answers about a chain with fixed instants: tests, visits, phases.

Values at an instant are those just after it; ``(0, t]`` includes what happens at t.  A long-run value is the mean over
the cycle of the periodic limit; without a cycle it is that of the last phase, which goes on for ever.  A system that is
up before an instant and down after it, by the criterion of the phase that follows, has failed at that instant.

`pfd_average`, `pfd_peak` and `pfh` leave states out in which the system acts needlessly: `pfh` counts passages from up
to the states that are down without acting.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from fractions import Fraction
from functools import cached_property

import numpy as np

from markov.chain import Enclosure, Method, Vector, flow, point, stationary
from markov.chain.course import Course
from markov.chain.periodic import FirstFailure, Moment, first_failure, follow, periodic_limit
from markov.chain.strides import LARGEST_DENSE
from markov.errors import IllPosed
from markov.evaluation.derived import Derived
from markov.evaluation.laying import UNIT, Earnings, Mask, Schedule, ScheduledSpace, Stretch, Values, start_of
from markov.evaluation.limits import Average, Limit, Weighable
from markov.evaluation.questions import Question
from markov.states import Arrows

#: A delivered share is formed by a few roundings; a level reached but for these is reached.
_CLOSE = 1e-12


class ScheduledAnswers(Derived):
    """Answers questions about one chain with fixed instants and keeps what several questions share.

    Parameters
    ----------
    space : ScheduledSpace
    year_hours : Fraction
    times : sequence of Fraction
        Times in hours at which values will be asked for; they are worked out together.
    method : str, optional
        Method for values at a time; chosen by size and time if left out.
    covers : mapping, optional
        Of each test the names (units, groups) that a question about its number may name; none if left out.
    levels : mapping, optional
        Of each level the least share delivered.
    largest_dense : int
        Number of states up to which phases are prepared as matrices.
    """

    def __init__(
        self,
        space: ScheduledSpace,
        year_hours: Fraction,
        times: Sequence[Fraction] = (),
        method: Method | None = None,
        *,
        covers: Mapping[str, Collection[str]] | None = None,
        levels: Mapping[str, Fraction] | None = None,
        largest_dense: int = LARGEST_DENSE,
    ) -> None:
        if space.timetable is None:
            raise AssertionError("a chain without fixed instants needs no schedule")
        self.space, self.table = space, space.timetable
        self.year_hours = year_hours
        self.schedule = Schedule(space, space.timetable)
        self._method, self._largest_dense = method, largest_dense
        self._covers, self._levels = covers or {}, levels or {}
        self._times = tuple(sorted(set(times)))
        self._subjects: list[str | None] = [None]
        self._stopped_moments: dict[str | None, dict[Fraction, Moment]] = {}
        self._first_failures: dict[str | None, FirstFailure] = {}

    # --- the chain -------------------------------------------------------------------------------------------------

    @cached_property
    def start(self) -> int | Vector:
        """Initial state, or distribution over states."""
        return start_of(self.space)

    @property
    def arrow_rates(self) -> tuple[tuple[Values, Values], ...]:
        """Of each phase the rate of every transition as a sum of two floats, shape (a,) each."""
        return self.schedule.arrow_rates

    def up(self, of: str | None, phase: int) -> Mask:
        """States in which the system, a group or a unit delivers in a phase, shape (n,)."""
        return self.space.regimes[phase].up(of)

    def _down(self, of: str | None) -> Callable[[int], Values]:
        return lambda phase: (~self.up(of, phase)).astype(np.float64)

    def _up(self, of: str | None) -> Callable[[int], Values]:
        return lambda phase: self.up(of, phase).astype(np.float64)

    def _dangerous_flags(self, of: str | None, phase: int) -> Mask:
        return ~self.up(of, phase) & ~self.space.regimes[phase].acts(of)

    @cached_property
    def _occupied(self) -> tuple[tuple[int, Mask], ...]:
        """Phases with the states that can be occupied in them, at any time."""
        course, phases = self.schedule.course()
        flags = np.zeros(self.space.size, np.bool_)
        flags[[state for state, _ in self.space.start]] = True
        found = []
        for segment in course.prefix:
            found.append((phases[id(segment)], segment.reach_before(flags)))
            flags = segment.reach(flags)
        if course.last is not None:
            found.append((self.schedule.final, course.last.reach_before(flags)))
            return tuple(found)
        flags = course.closure(flags)
        for segment in course.cycle:
            found.append((phases[id(segment)], segment.reach_before(flags)))
            flags = segment.reach(flags)
        return tuple(found)

    def can_fail(self, of: str | None) -> bool:
        """Tell whether a down state of a subject can be reached at all."""
        return any(bool((flags & ~self.up(of, phase)).any()) for phase, flags in self._occupied)

    @cached_property
    def arrow_count(self) -> int:
        """Number of distinct arrows of the chain, those of all phases and instants together."""
        n = self.space.size
        pairs = [each.source.astype(np.int64) * n + each.target for each in self.schedule.generators]
        for each in self.schedule.jumps:
            moving = each.source != each.target
            pairs.append(each.source[moving] * n + each.target[moving])
        return len(np.unique(np.concatenate(pairs)))

    # --- passages --------------------------------------------------------------------------------------------------

    def _entries(self, leaving: Callable[[int], Mask], entering: Callable[[int], Mask]) -> Earnings:
        """Return how often some states are entered from some others, transitions and instants counted."""
        return Earnings(
            lambda phase: self._flow(leaving, entering, phase).values[:, None],
            lambda stretch: self.schedule.jump_of(stretch).passages(leaving(stretch.regime), entering(stretch.after))[
                0
            ][:, None],
            self._passage_error,
        )

    def _flow(self, leaving: Callable[[int], Mask], entering: Callable[[int], Mask], phase: int) -> Vector:
        return flow(self.schedule.generators[phase], leaving(phase), entering(phase) & ~leaving(phase))

    @cached_property
    def _passage_error(self) -> float:
        """Relative error of every rate and chance of passing, at most."""
        every = np.ones(self.space.size, np.bool_)
        jumps = [jump.passages(every, every)[1] for jump in self.schedule.jumps]
        return max([4 * UNIT, *jumps]) + 2 * UNIT

    def _failures(self, of: str | None) -> Earnings:
        return self._entries(lambda phase: self.up(of, phase), lambda phase: ~self.up(of, phase))

    def _failure_flow(self, of: str | None, phase: int) -> Vector:
        return self._flow(lambda at: self.up(of, at), lambda at: ~self.up(of, at), phase)

    # --- the long run ------------------------------------------------------------------------------------------------

    @cached_property
    def _limits(self) -> tuple[Limit, ...]:
        course, _ = self.schedule.course()
        if course.cycle:
            limits = periodic_limit(course, self.start, method=self._method, largest_dense=self._largest_dense)
            return tuple(Limit(each, self.schedule.cycle, None, -1) for each in limits)
        flags = np.zeros(self.space.size, np.bool_)
        flags[[state for state, _ in self.space.start]] = True
        generator = self.schedule.generators[self.schedule.final]
        classes = generator.closed_classes(course.entered(flags))
        return tuple(Limit(None, (), stationary(generator, members), self.schedule.final) for members in classes)

    def _in_the_end(self, value: Callable[[Limit], Enclosure]) -> Enclosure:
        """Return a long-run value, the same from every way in which the chain may go on in the end."""
        values = [value(each) for each in self._limits]
        if len(values) == 1:
            return values[0]
        exact = {each.value for each in values if each.lower == each.upper and each.lower is not None}
        if len(exact) == 1 and all(each.lower == each.upper and each.lower is not None for each in values):
            return values[0]
        dead = [
            not any(bool((flags & self.up(None, phase)).any()) for phase, flags in each.possible())
            for each in self._limits
        ]
        if any(dead) and not all(dead):
            raise IllPosed("some histories end down for good and others live on, so there is no one long-run value")
        raise IllPosed("the chain can end in several ways for good, and each has a long-run value of its own")

    def long_run(self, weigh: Callable[[Weighable], Enclosure]) -> Enclosure:
        """Return a long-run mean of numbers that do not depend on the phase."""
        return self._in_the_end(lambda limit: weigh(Average(limit)))

    def long_run_share(self, states: Callable[[int], Values]) -> Enclosure:
        """Return the long-run share of time in some states of each phase."""
        return self._in_the_end(lambda limit: limit.mean(states, 0.0)).capped()

    def long_run_rate(self, earnings: Earnings) -> Enclosure:
        """Return what is earned per hour in the long run, one reward."""
        return self._in_the_end(lambda limit: limit.rate(earnings))

    def count_rate(self, counts: Callable[[Arrows, int], Values]) -> Enclosure:
        """Return the long-run number per hour of something that each transition and jump counts so many times.

        Parameters
        ----------
        counts : callable
            Transitions, or jumps, and the phase that they are in or lead into -> how often each counts, shape (a,).
        """
        n = self.space.size
        widest = [1]

        def summed(arrows: Arrows, rates: Values, phase: int) -> Values:
            number = counts(arrows, phase)
            counting = number > 0
            source = arrows.source[counting]
            widest.append(int(np.bincount(source, minlength=1).max(initial=0)))
            weights = np.bincount(source, weights=rates[counting] * number[counting], minlength=n)
            return weights.astype(np.float64)[:, None]

        during = [
            summed(regime.arrows, rates[0], phase)
            for phase, (regime, rates) in enumerate(zip(self.space.regimes, self.schedule.arrow_rates, strict=True))
        ]
        at = [
            summed(arrows, chances[0], phase)
            for arrows, chances, phase in zip(
                self.space.jumps, self.schedule.jump_chances, self.schedule.phase_after, strict=True
            )
        ]
        nothing = np.zeros((n, 1))
        return self.long_run_rate(
            Earnings(
                lambda phase: during[phase],
                lambda stretch: nothing if stretch.instant is None else at[stretch.instant],
                (max(widest) + 3) * UNIT,
            )
        )

    # --- at given times ----------------------------------------------------------------------------------------------

    def expect(self, question: Question) -> None:
        """Tell in advance what will be asked, so that the integrals of all subjects are worked out together."""
        if question.measure in _INTEGRALS and question.of not in self._subjects:
            try:
                self.up(question.of, 0)
            except IllPosed:
                return  # answered with the reason when it is asked
            self._subjects.append(question.of)

    def _of_every_subject(self) -> Earnings:
        failures = [self._failures(of) for of in self._subjects]

        def during(phase: int) -> Values:
            columns: list[Values] = []
            for of, failing in zip(self._subjects, failures, strict=True):
                columns += [self._down(of)(phase)[:, None], failing.during(phase), self._up(of)(phase)[:, None]]
            return np.concatenate(columns, axis=1)

        def at(stretch: Stretch) -> Values:
            nothing = np.zeros((self.space.size, 1))
            columns: list[Values] = []
            for failing in failures:
                assert failing.at is not None
                columns += [nothing, failing.at(stretch), nothing]
            return np.concatenate(columns, axis=1)

        return Earnings(during, at, self._passage_error)

    @cached_property
    def _free(self) -> tuple[dict[Fraction, Moment], dict[int, int]]:
        """The chain as it runs, with the down time and the passages of every subject accumulated."""
        course, phases = self.schedule.course(self._of_every_subject())
        return self._followed(course), phases

    def _followed(self, course: Course) -> dict[Fraction, Moment]:
        found = follow(course, self.start, self._times, method=self._method, largest_dense=self._largest_dense)
        return {each.time: each for each in found}

    def _moment(self, at: Fraction) -> tuple[Moment, int]:
        moments, phases = self._free
        return moments[at], phases[id(moments[at].segment)]

    def _stopped_at_failure(self, at: Fraction, of: str | None) -> Moment:
        """The chain stopped at the first failure of a subject."""
        if of not in self._stopped_moments:
            course, _ = self.schedule.course(stopped=lambda phase: ~self.up(of, phase))
            self._stopped_moments[of] = self._followed(course)
        return self._stopped_moments[of][at]

    def _integral(self, at: Fraction, of: str | None, which: int) -> Enclosure:
        if of not in self._subjects:  # not told in advance: work everything out once more, with this subject
            self.up(of, 0)
            self._subjects.append(of)
            self.__dict__.pop("_free", None)
        return self._moment(at)[0].earned[3 * self._subjects.index(of) + which]

    # --- the measures ------------------------------------------------------------------------------------------------

    def answer(self, question: Question) -> Enclosure:
        """Answer one question.

        Raises
        ------
        IllPosed
            The question has no answer in this chain.
        NotReached
            No method reached its tolerance.
        """
        return _MEASURES[question.measure](self, question)

    def share_of_states(self, states: Callable[[int], Values], at: Fraction | None) -> Enclosure:
        """Return the probability of some states of each phase, in the long run or at a time."""
        if at is None:
            return self.long_run_share(states)
        moment, phase = self._moment(at)
        return moment.states.weighted(states(phase)).capped()

    def mean_of(self, values: Callable[[int], Values] | Values, at: Fraction | None, error: float = UNIT) -> Enclosure:
        """Return the mean of a number that each state has, in each phase or in all, in the long run or at a time."""
        by_phase = values if callable(values) else lambda _: values
        if at is None:
            return self._in_the_end(lambda limit: limit.mean(by_phase, error))
        moment, phase = self._moment(at)
        return moment.states.weighted(by_phase(phase), error)

    def _reliability(self, question: Question) -> Enclosure:
        return self._stopped_at_failure(question.time, question.of).alive

    def _unreliability(self, question: Question) -> Enclosure:
        return self._stopped_at_failure(question.time, question.of).absorbed

    def _interval_reliability(self, question: Question) -> Enclosure:
        if question.for_hours is None:
            raise AssertionError("an interval reliability has an interval")
        if question.at_hours is None:
            raise IllPosed("with fixed instants it depends on when in the cycle the interval begins: give `at`")
        start = self._moment(question.at_hours)[0].states
        stopped = self.schedule.course(stopped=lambda phase: ~self.up(question.of, phase), since=question.at_hours)[0]
        (moment,) = follow(stopped, start, [question.for_hours], method=self._method, largest_dense=self._largest_dense)
        return moment.alive

    def _availability(self, question: Question) -> Enclosure:
        return self.share_of_states(self._up(question.of), question.at_hours)

    def _unavailability(self, question: Question) -> Enclosure:
        return self.share_of_states(self._down(question.of), question.at_hours)

    def _first_failure(self, of: str | None) -> FirstFailure:
        if not self.can_fail(of):
            raise IllPosed("no down state can be reached")
        if of not in self._first_failures:
            ones = np.ones((self.space.size, 1))
            course, _ = self.schedule.course(Earnings(lambda _: ones), lambda phase: ~self.up(of, phase))
            self._first_failures[of] = first_failure(
                course, self.start, method=self._method, largest_dense=self._largest_dense
            )
        return self._first_failures[of]

    def _failure_frequency(self, question: Question) -> Enclosure:
        if question.at_hours is None:
            return self.long_run_rate(self._failures(question.of))
        moment, phase = self._moment(question.at_hours)
        return moment.states.weighted(self._failure_flow(question.of, phase))

    def _hazard_rate(self, question: Question) -> Enclosure:
        moment = self._stopped_at_failure(question.time, question.of)
        _, phase = self._moment(question.time)
        survivors = moment.alive
        if survivors.upper == 0:
            raise IllPosed("nothing survives to this time, so there is no hazard")
        if survivors.lower == 0 and survivors.upper is not None:
            raise IllPosed(f"the chance to survive to this time is below {survivors.upper:.0e}, too small to divide by")
        return moment.states.weighted(self._failure_flow(question.of, phase)) / survivors

    def _dangerous(self, of: str | None) -> Callable[[int], Values]:
        return lambda phase: self._dangerous_flags(of, phase).astype(np.float64)

    def _pfd_average(self, question: Question) -> Enclosure:
        return self.long_run_share(self._dangerous(question.of))

    def _pfd_peak(self, question: Question) -> Enclosure:
        return self._in_the_end(lambda limit: limit.peak(self._dangerous(question.of)))

    def _pfh(self, question: Question) -> Enclosure:
        of = question.of
        return self.long_run_rate(
            self._entries(lambda phase: self.up(of, phase), lambda phase: self._dangerous_flags(of, phase))
        )

    def _spurious_failures(self, question: Question) -> Enclosure:
        def acts(phase: int) -> Mask:
            return self.space.regimes[phase].acts(question.of)

        return self.per_year(self.long_run_rate(self._entries(lambda phase: ~acts(phase), acts)))

    def _tests_per_year(self, question: Question) -> Enclosure:
        if not self.schedule.cycle:
            return point(0, "counted")
        of = question.of
        tests = [
            action
            for step in self.table.cycle
            if step.instant is not None
            for action in self.table.instants[step.instant]
            if action.kind in ("test", "test_start")
            and (of is None or of == action.name or of in self._covers.get(str(action.name), ()))
        ]
        return point(Fraction(len(tests)) * self.year_hours / self.schedule.period, "counted in the timetable")

    def _state_probability(self, question: Question) -> Enclosure:
        if question.state is None:
            raise AssertionError("a state probability names its state")
        states = np.zeros(self.space.size)
        states[self.space.find(question.state)] = 1.0
        return self.share_of_states(lambda _: states, question.at_hours)

    def _mean_units_failed(self, question: Question) -> Enclosure:
        return self.mean_of(self.space.failed(question.of), question.at_hours)

    def _mean_capacity(self, question: Question) -> Enclosure:
        def shares(phase: int) -> Values:
            return self.space.regimes[phase].capacity(question.of)

        if all(np.isin(shares(phase), (0.0, 1.0)).all() for phase in range(len(self.space.regimes))):
            return self.share_of_states(shares, question.at_hours)
        # A share is formed by a few roundings: divisions by `required` and sums over the members.
        return self.mean_of(shares, question.at_hours, 16 * UNIT).capped()

    def _level_probability(self, question: Question) -> Enclosure:
        if question.of is None or question.of not in self._levels:
            raise IllPosed("there is no such level")
        least = float(self._levels[question.of]) - _CLOSE
        return self.share_of_states(
            lambda phase: (self.space.regimes[phase].capacity(None) >= least).astype(np.float64), question.at_hours
        )


#: Measures that are integrals over time, worked out together for all subjects.
_INTEGRALS = frozenset({"mean_availability", "mean_unavailability", "expected_failures"})


_MEASURES: dict[str, Callable[[ScheduledAnswers, Question], Enclosure]] = {
    "reliability": ScheduledAnswers._reliability,
    "unreliability": ScheduledAnswers._unreliability,
    "interval_reliability": ScheduledAnswers._interval_reliability,
    "availability": ScheduledAnswers._availability,
    "unavailability": ScheduledAnswers._unavailability,
    "mean_availability": ScheduledAnswers._mean_availability,
    "mean_unavailability": ScheduledAnswers._mean_unavailability,
    "steady_state_availability": ScheduledAnswers._availability,
    "steady_state_unavailability": ScheduledAnswers._unavailability,
    "mean_time_to_first_failure": ScheduledAnswers._mean_time_to_first_failure,
    "standard_deviation_of_time_to_first_failure": ScheduledAnswers._spread_of_time_to_first_failure,
    "mean_up_time": ScheduledAnswers._mean_up_time,
    "mean_down_time": ScheduledAnswers._mean_down_time,
    "failure_frequency": ScheduledAnswers._failure_frequency,
    "expected_failures": ScheduledAnswers._expected_failures,
    "failures_per_year": ScheduledAnswers._failures_per_year,
    "downtime_per_year": ScheduledAnswers._downtime_per_year,
    "conditional_failure_intensity": ScheduledAnswers._conditional_failure_intensity,
    "hazard_rate": ScheduledAnswers._hazard_rate,
    "mean_failure_rate": ScheduledAnswers._mean_failure_rate,
    "pfd_average": ScheduledAnswers._pfd_average,
    "pfd_peak": ScheduledAnswers._pfd_peak,
    "pfh": ScheduledAnswers._pfh,
    "spurious_failures_per_year": ScheduledAnswers._spurious_failures,
    "tests_per_year": ScheduledAnswers._tests_per_year,
    "mean_units_failed": ScheduledAnswers._mean_units_failed,
    "mean_capacity": ScheduledAnswers._mean_capacity,
    "level_probability": ScheduledAnswers._level_probability,
    "state_probability": ScheduledAnswers._state_probability,
}

#: The measures that `ScheduledAnswers` answers.
SCHEDULED = tuple(_MEASURES)
