"""The bridge: answers questions about a chain of states by the methods of the mathematician's wing.

This is the only file that sees both wings.  A question whose answer does not exist raises `IllPosed` with the reason.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.chain import (
    Enclosure,
    FirstPassage,
    Generator,
    Method,
    Transient,
    Vector,
    aggregate,
    first_passage,
    flow,
    stationary,
    survival,
    transient,
)
from markov.errors import IllPosed
from markov.evaluation.derived import Derived
from markov.evaluation.questions import Question
from markov.rates import split_exact
from markov.states import Arrows, GeneratedSpace, StateSpace

Mask = NDArray[np.bool_]
Values = NDArray[np.float64]

#: A delivered share is formed by a few roundings; a level reached but for these is reached.
_CLOSE = 1e-12

#: Relative error of one rounded operation.
UNIT = 2.0**-53


@dataclass(frozen=True)
class _Class:
    """A closed communicating class that the chain may end in, with its stationary distribution over all states."""

    members: NDArray[np.int32]
    distribution: Vector


class Answers(Derived):
    """Answers questions about one chain and keeps what several questions share.

    Parameters
    ----------
    space : StateSpace
    year_hours : Fraction
    times : sequence of Fraction
        Times in hours at which values will be asked for; they are worked out together.
    method : str, optional
        Method for values at a time; chosen by size and time if left out.
    levels : mapping, optional
        Of each level the least share delivered.
    """

    def __init__(
        self,
        space: StateSpace,
        year_hours: Fraction,
        times: Sequence[Fraction] = (),
        method: Method | None = None,
        *,
        levels: Mapping[str, Fraction] | None = None,
    ) -> None:
        self.space = space
        self._levels = levels or {}
        self._method = method
        self.year_hours = year_hours
        self._times = tuple(sorted(set(times)))
        self._stopped: dict[str | None, Transient] = {}
        self._passages_found: dict[str | None, FirstPassage] = {}

    # --- the chain ------------------------------------------------------------------------------------------------

    @cached_property
    def generator(self) -> Generator:
        """The rates of the chain, parallel transitions added."""
        high, low = self.arrow_rates
        arrows = self.space.arrows
        return aggregate(self.space.size, arrows.source, arrows.target, high, low)

    @cached_property
    def arrow_rates(self) -> tuple[Values, Values]:
        """Rate of every transition, multiples included, as sums of two floats, shape (a,) each."""
        arrows, kinds = self.space.arrows, self.space.kinds
        widest = int(arrows.multiple.max(initial=0)) + 1
        rate_of_kind = np.array([kind.rate for kind in kinds.kinds] or [0], np.int64)
        pair = rate_of_kind[arrows.kind] * widest + arrows.multiple
        found = np.flatnonzero(np.bincount(pair, minlength=1))  # few pairs, so no sorting of many transitions
        exact = [kinds.rates.rates[each // widest].exact * (each % widest) for each in found.tolist()]
        place = np.zeros(int(found.max(initial=0)) + 1, np.int64)
        place[found] = np.arange(len(found))
        high, low = split_exact(exact)
        return high[place[pair]], low[place[pair]]

    @cached_property
    def start(self) -> int | Vector:
        """Initial state, or distribution over states where crews draw among equals at time zero."""
        if len(self._start_states) == 1:
            return self._start_states[0]
        values = np.zeros(self.space.size)
        for state, chance in self.space.start:
            values[state] = float(chance)
        return Vector(values, 2 * UNIT, 0.0, "given", values > 0.0, 1.0)

    @cached_property
    def _start_states(self) -> list[int]:
        return [state for state, _ in self.space.start]

    @cached_property
    def reachable(self) -> Mask:
        """States that can be entered from the start, shape (n,)."""
        return self.generator.reachable(self._start_states)

    @cached_property
    def arrow_count(self) -> int:
        """Number of distinct arrows of the chain."""
        return len(self.generator.source)

    def up(self, of: str | None) -> Mask:
        """States in which the system, a group or a unit delivers, shape (n,)."""
        return self.space.up if of is None else self.space.delivers(of)

    def can_fail(self, of: str | None) -> bool:
        """Tell whether a down state of a subject can be reached at all."""
        return bool((self.reachable & ~self.up(of)).any())

    # --- the long run ----------------------------------------------------------------------------------------------

    @cached_property
    def _classes(self) -> tuple[_Class, ...]:
        found = []
        for members in self.generator.closed_classes(self._start_states):
            found.append(_Class(members, stationary(self.generator, members)))
        return tuple(found)

    def long_run(self, weigh: Callable[[Vector], Enclosure]) -> Enclosure:
        """Return a long-run mean, the same from every class that the chain may end in."""
        values = [weigh(each.distribution) for each in self._classes]
        if len(values) == 1:
            return values[0]
        exact = {value.value for value in values if value.lower == value.upper}
        if len(exact) == 1 and all(value.lower == value.upper for value in values):
            return values[0]
        up = self.up(None)
        dead = [not up[each.members].any() for each in self._classes]
        if any(dead) and not all(dead):
            raise IllPosed("some histories end down for good and others live on, so there is no one long-run value")
        raise IllPosed("the chain can end in several ways for good, and each has a long-run value of its own")

    def long_run_share(self, states: Mask) -> Enclosure:
        """Return the long-run share of time in some states."""
        return self.long_run(lambda pi: pi.weighted(states))

    def _frequency(self, of: str | None) -> Enclosure:
        passages = self._failure_flow(of)
        return self.long_run(lambda pi: pi.weighted(passages))

    def count_rate(self, counts: Callable[[Arrows, int], Values]) -> Enclosure:
        """Return the long-run number per hour of something that each transition counts so many times.

        Parameters
        ----------
        counts : callable
            Transitions and their phase -> how many times each counts, shape (a,).
        """
        arrows = self.space.arrows
        number = counts(arrows, 0)
        counting = number > 0
        source = arrows.source[counting]
        rates = self.arrow_rates[0][counting] * number[counting]
        weights = np.bincount(source, weights=rates, minlength=self.space.size).astype(np.float64)
        terms = int(np.bincount(source, minlength=1).max()) if len(source) else 0
        return self.long_run(lambda pi: pi.weighted(weights, (terms + 3) * UNIT))

    def _failure_flow(self, of: str | None) -> Vector:
        up = self.up(of)
        return flow(self.generator, up, ~up)

    # --- at given times --------------------------------------------------------------------------------------------

    @cached_property
    def _subjects(self) -> list[str | None]:
        return [None]

    def expect(self, question: Question) -> None:
        """Tell in advance what will be asked, so that the integrals of all subjects are worked out together."""
        if question.measure in _INTEGRALS and question.of not in self._subjects:
            try:
                self.up(question.of)
            except IllPosed:
                return  # answered with the reason when it is asked
            self._subjects.append(question.of)

    @cached_property
    def _free(self) -> Transient:
        """The chain as it runs, with the down time and the passages of every subject accumulated."""
        rewards: list[Vector | Mask | Values] = []
        for of in self._subjects:
            rewards += [(~self.up(of)).astype(np.float64), self._failure_flow(of), self.up(of).astype(np.float64)]
        return transient(self.generator, self.start, self._times, rewards, method=self._method)

    def _stopped_at_failure(self, of: str | None) -> Transient:
        """The chain stopped at the first failure of a subject."""
        if of not in self._stopped:
            self._stopped[of] = transient(
                self.generator, self.start, self._times, absorbing=~self.up(of), method=self._method
            )
        return self._stopped[of]

    def _states_at(self, at: Fraction) -> Vector:
        return self._free.states[self._times.index(at)]

    def _integral(self, at: Fraction, of: str | None, which: int) -> Enclosure:
        if of not in self._subjects:  # not told in advance: work everything out once more, with this subject
            self.up(of)
            self._subjects.append(of)
            self.__dict__.pop("_free", None)
        integrals = self._free.integrals[self._times.index(at)]
        return integrals.entry(3 * self._subjects.index(of) + which)

    def _failed_by(self, at: Fraction, of: str | None) -> Enclosure:
        return self._stopped_at_failure(of).absorbed[self._times.index(at)].entry(0).capped()

    def _alive_at(self, at: Fraction, of: str | None) -> Vector:
        return self._stopped_at_failure(of).states[self._times.index(at)]

    # --- the measures ----------------------------------------------------------------------------------------------

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

    def _reliability(self, question: Question) -> Enclosure:
        return self._stopped_at_failure(question.of).alive[self._times.index(question.time)]

    def _unreliability(self, question: Question) -> Enclosure:
        return self._failed_by(question.time, question.of)

    def _interval_reliability(self, question: Question) -> Enclosure:
        if question.for_hours is None:
            raise AssertionError("an interval reliability has an interval")
        lasting = survival(self.generator, self.up(question.of), question.for_hours)
        if question.at_hours is None:
            return self.long_run(lambda pi: pi.weighted(lasting)).capped()
        return self._states_at(question.at_hours).weighted(lasting).capped()

    def share_of_states(self, states: Mask, at: Fraction | None) -> Enclosure:
        """Return the probability of some states, in the long run or at a time."""
        return self.long_run_share(states) if at is None else self._states_at(at).weighted(states)

    def _availability(self, question: Question) -> Enclosure:
        return self.share_of_states(self.up(question.of), question.at_hours)

    def _unavailability(self, question: Question) -> Enclosure:
        return self.share_of_states(~self.up(question.of), question.at_hours)

    def _first_failure(self, of: str | None) -> FirstPassage:
        if not self.can_fail(of):
            raise IllPosed("no down state can be reached")
        if of not in self._passages_found:
            self._passages_found[of] = first_passage(self.generator, self.start, ~self.up(of))
        return self._passages_found[of]

    def _failure_frequency(self, question: Question) -> Enclosure:
        if question.at_hours is None:
            return self._frequency(question.of)
        return self._states_at(question.at_hours).weighted(self._failure_flow(question.of))

    def _hazard_rate(self, question: Question) -> Enclosure:
        alive = self._alive_at(question.time, question.of)
        survivors = self._reliability(question)
        if survivors.upper == 0:
            raise IllPosed("nothing survives to this time, so there is no hazard")
        if survivors.lower == 0 and survivors.upper is not None:
            raise IllPosed(f"the chance to survive to this time is below {survivors.upper:.0e}, too small to divide by")
        return alive.weighted(self._failure_flow(question.of)) / survivors

    # --- functions on demand --------------------------------------------------------------------------------------

    def acts(self, of: str | None) -> Mask:
        """States in which the system or a group acts needlessly, shape (n,)."""
        if isinstance(self.space, GeneratedSpace):
            return self.space.regimes[0].acts(of)
        return np.zeros(self.space.size, np.bool_)

    def _fails_to_act(self, of: str | None) -> Mask:
        """States in which a subject is down and does not act: what a demand would meet, shape (n,)."""
        return ~self.up(of) & ~self.acts(of)

    def _pfd(self, question: Question) -> Enclosure:
        return self.long_run_share(self._fails_to_act(question.of))

    def _pfh(self, question: Question) -> Enclosure:
        passages = flow(self.generator, self.up(question.of), self._fails_to_act(question.of))
        return self.long_run(lambda pi: pi.weighted(passages))

    def _spurious_failures_per_year(self, question: Question) -> Enclosure:
        acts = self.acts(question.of)
        passages = flow(self.generator, ~acts, acts)
        return self.per_year(self.long_run(lambda pi: pi.weighted(passages)))

    def _state_probability(self, question: Question) -> Enclosure:
        if question.state is None:
            raise AssertionError("a state probability names its state")
        states = np.zeros(self.space.size, np.bool_)
        states[self.space.find(question.state)] = True
        return self.share_of_states(states, question.at_hours)

    def mean_of(self, values: Values, at: Fraction | None) -> Enclosure:
        """Return the mean of a number that each state has, in the long run or at a time."""
        if at is None:
            return self.long_run(lambda pi: pi.weighted(values, UNIT))
        return self._states_at(at).weighted(values, UNIT)

    def _mean_units_failed(self, question: Question) -> Enclosure:
        return self.mean_of(self.space.failed(question.of), question.at_hours)

    def _mean_capacity(self, question: Question) -> Enclosure:
        share = self.space.capacity(question.of)
        if np.isin(share, (0.0, 1.0)).all():
            return self.share_of_states(share == 1.0, question.at_hours)
        # A share is formed by a few roundings: divisions by `required` and sums over the members.
        weights = (16 * UNIT,)
        if question.at_hours is None:
            return self.long_run(lambda pi: pi.weighted(share, *weights)).capped()
        return self._states_at(question.at_hours).weighted(share, *weights).capped()

    def _level_probability(self, question: Question) -> Enclosure:
        if question.of is None or question.of not in self._levels:
            raise IllPosed("there is no such level")
        least = float(self._levels[question.of]) - _CLOSE
        return self.share_of_states(self.space.capacity(None) >= least, question.at_hours).capped()


#: Measures that are integrals over time, worked out together for all subjects.
_INTEGRALS = frozenset({"mean_availability", "mean_unavailability", "expected_failures"})


_MEASURES: dict[str, Callable[[Answers, Question], Enclosure]] = {
    "reliability": Answers._reliability,
    "unreliability": Answers._unreliability,
    "interval_reliability": Answers._interval_reliability,
    "availability": Answers._availability,
    "unavailability": Answers._unavailability,
    "mean_availability": Answers._mean_availability,
    "mean_unavailability": Answers._mean_unavailability,
    "steady_state_availability": Answers._availability,
    "steady_state_unavailability": Answers._unavailability,
    "mean_time_to_first_failure": Answers._mean_time_to_first_failure,
    "standard_deviation_of_time_to_first_failure": Answers._spread_of_time_to_first_failure,
    "mean_up_time": Answers._mean_up_time,
    "mean_down_time": Answers._mean_down_time,
    "failure_frequency": Answers._failure_frequency,
    "expected_failures": Answers._expected_failures,
    "failures_per_year": Answers._failures_per_year,
    "downtime_per_year": Answers._downtime_per_year,
    "conditional_failure_intensity": Answers._conditional_failure_intensity,
    "hazard_rate": Answers._hazard_rate,
    "mean_failure_rate": Answers._mean_failure_rate,
    # Without tests nothing repeats: the mean and the peak over a cycle of any length are the long-run values.
    "pfd_average": Answers._pfd,
    "pfd_peak": Answers._pfd,
    "pfh": Answers._pfh,
    "spurious_failures_per_year": Answers._spurious_failures_per_year,
    "mean_units_failed": Answers._mean_units_failed,
    "mean_capacity": Answers._mean_capacity,
    "level_probability": Answers._level_probability,
    "state_probability": Answers._state_probability,
}
