"""What each measure is made of: the few things that a chain can be asked for, and how they combine.

A recipe does not say in which numbers it is carried out.  On arrays it answers many samples at once (`many`), on
numbers with slopes it differentiates (`sensitivity`).  What the answers mean, and when there are none, is as in
`answers` and `upkeep`, which work on enclosures with a proven bound.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Generic, Protocol, Self, TypeVar

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed, UsageError
from markov.evaluation.answers import Answers
from markov.evaluation.questions import Question
from markov.evaluation.upkeep import Upkeep
from markov.states import GeneratedSpace

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PerState:
    """A number that each state has, shape (n,)."""

    values: Floats


@dataclass(frozen=True, eq=False)
class PerArrow:
    """Something that each transition counts so many times, shape (a,): per hour in a state, rate times count."""

    counts: Floats


@dataclass(frozen=True)
class Delivered:
    """The delivered share of the system or a group."""

    of: str | None


Reward = PerState | PerArrow | Delivered


class Figure(Protocol):
    """What numbers have to be able to do."""

    def __add__(self, other: Self, /) -> Self:
        """Return the sum."""

    def __truediv__(self, other: Self, /) -> Self:
        """Return the quotient."""


T = TypeVar("T", bound=Figure)


class Chain(Protocol[T]):
    """One chain that can be asked."""

    @property
    def answers(self) -> Answers:
        """The chain as the spec has it."""

    def long_run(self, reward: Reward) -> T:
        """Return the long-run mean of a reward."""

    def at(self, time: Fraction, reward: Reward) -> T:
        """Return the mean of a reward at a time."""

    def integral(self, time: Fraction, reward: Reward) -> T:
        """Return the integral of a reward from 0 to a time."""

    def failed(self, time: Fraction, of: str | None) -> T:
        """Return the probability of a failure in (0, time]."""

    def alive(self, time: Fraction, of: str | None, reward: Reward) -> T:
        """Return the mean of a reward at a time, counted where there was no failure."""

    def lasting(self, at: Fraction | None, duration: Fraction, of: str | None) -> T:
        """Return the probability of being up at a time, or in the long run, and not failing for a duration."""

    def first(self, of: str | None) -> tuple[T, T]:
        """Return mean and standard deviation of the time to the first failure, which is certain."""

    def beside(self, good: T, bad: T) -> T:
        """Return `good`, of which `bad` is the complement, with the digits of both."""

    def times(self, value: T, factor: Fraction) -> T:
        """Return a value times an exact factor."""

    def capped(self, value: T) -> T:
        """Return a value that cannot exceed 1."""

    def vanishes(self, value: T) -> str:
        """Tell where a value is zero, as ``" in sample 7"``; an empty text where it is not."""


class Recipes(Generic[T]):
    """Answers questions in numbers of one kind.

    Parameters
    ----------
    chain : Chain
        Of the whole plant.
    loading : callable
        Returns the chains that load crews, the whole plant first, beside what stands outside of the system.
    """

    def __init__(self, chain: Chain[T], loading: Callable[[], Sequence[Chain[T]]]) -> None:
        self.chain = chain
        self._loading = loading

    def answer(self, question: Question) -> T:
        """Answer one question.

        Raises
        ------
        IllPosed
            The question has no answer in this chain.
        UsageError
            The measure compares several plants.
        """
        if question.measure in _CREWS:
            return self._crews(question)
        if question.measure not in _RECIPES:
            raise UsageError(f"{question.measure} compares several plants and is not made of one chain")
        return _RECIPES[question.measure](self, question)

    # --- rewards -------------------------------------------------------------------------------------------------

    def _up(self, of: str | None) -> PerState:
        return PerState(self.chain.answers.up(of).astype(np.float64))

    def _down(self, of: str | None) -> PerState:
        return PerState((~self.chain.answers.up(of)).astype(np.float64))

    def _failures(self, of: str | None) -> PerArrow:
        up, arrows = self.chain.answers.up(of), self.chain.answers.space.arrows
        return PerArrow((up[arrows.source] & ~up[arrows.target]).astype(np.float64))

    def _mean(self, reward: Reward, at: Fraction | None) -> T:
        return self.chain.long_run(reward) if at is None else self.chain.at(at, reward)

    def _per_year(self, value: T) -> T:
        return self.chain.times(value, self.chain.answers.year_hours)

    def _over(self, value: T, divisor: T, reason: str) -> T:
        where = self.chain.vanishes(divisor)
        if where:
            raise IllPosed(reason + where)
        return value / divisor

    # --- availability ----------------------------------------------------------------------------------------------

    def _availability(self, question: Question) -> T:
        up = self._mean(self._up(question.of), question.at_hours)
        return self.chain.capped(self.chain.beside(up, self._unavailability(question)))

    def _unavailability(self, question: Question) -> T:
        return self.chain.capped(self._mean(self._down(question.of), question.at_hours))

    def _mean_availability(self, question: Question) -> T:
        time = question.positive_time
        up = self.chain.times(self.chain.integral(time, self._up(question.of)), 1 / time)
        return self.chain.capped(self.chain.beside(up, self._mean_unavailability(question)))

    def _mean_unavailability(self, question: Question) -> T:
        time = question.positive_time
        down = self.chain.times(self.chain.integral(time, self._down(question.of)), 1 / time)
        return self.chain.capped(down)

    def _interval_reliability(self, question: Question) -> T:
        if question.for_hours is None:
            raise AssertionError("an interval reliability has an interval")
        return self.chain.capped(self.chain.lasting(question.at_hours, question.for_hours, question.of))

    def _state_probability(self, question: Question) -> T:
        space = self.chain.answers.space
        if question.state is None:
            raise AssertionError("a state probability names its state")
        there = np.zeros(space.size)
        there[space.find(question.state)] = 1.0
        return self.chain.capped(self._mean(PerState(there), question.at_hours))

    # --- failures --------------------------------------------------------------------------------------------------

    def _reliability(self, question: Question) -> T:
        alive = self.chain.alive(question.time, question.of, self._everywhere())
        return self.chain.capped(self.chain.beside(alive, self._unreliability(question)))

    def _everywhere(self) -> PerState:
        return PerState(np.ones(self.chain.answers.space.size))

    def _unreliability(self, question: Question) -> T:
        return self.chain.capped(self.chain.failed(question.time, question.of))

    def _hazard_rate(self, question: Question) -> T:
        time = question.time
        failing = self.chain.alive(time, question.of, self._failures(question.of))
        return self._over(failing, self._reliability(question), "nothing survives to this time, so there is no hazard")

    def _mean_failure_rate(self, question: Question) -> T:
        time = question.positive_time
        return self.chain.times(self.chain.failed(time, question.of), 1 / time)

    def _first(self, question: Question) -> tuple[T, T]:
        if not self.chain.answers.can_fail(question.of):
            raise IllPosed("no down state can be reached")
        return self.chain.first(question.of)

    def _mean_time_to_first_failure(self, question: Question) -> T:
        return self._first(question)[0]

    def _spread_of_time_to_first_failure(self, question: Question) -> T:
        return self._first(question)[1]

    def _frequency(self, question: Question) -> T:
        return self._mean(self._failures(question.of), question.at_hours)

    def _passages(self, value: T, question: Question) -> T:
        if not self.chain.answers.can_fail(question.of):
            raise IllPosed("no down state can be reached")
        reason = "in the long run there are no failures to count: the chain ends up or down for good"
        return self._over(value, self._frequency(question), reason)

    def _mean_up_time(self, question: Question) -> T:
        return self._passages(self._availability(question), question)

    def _mean_down_time(self, question: Question) -> T:
        return self._passages(self._unavailability(question), question)

    def _expected_failures(self, question: Question) -> T:
        return self.chain.integral(question.time, self._failures(question.of))

    def _failures_per_year(self, question: Question) -> T:
        return self._per_year(self._frequency(question))

    def _downtime_per_year(self, question: Question) -> T:
        return self._per_year(self._unavailability(question))

    def _conditional_failure_intensity(self, question: Question) -> T:
        down = "the system is down for good" if question.of is None else f"{question.of} is down for good"
        return self._over(self._frequency(question), self._availability(question), down)

    # --- what is delivered, what it costs --------------------------------------------------------------------------

    def _mean_units_failed(self, question: Question) -> T:
        return self._mean(PerState(self.chain.answers.space.failed(question.of)), question.at_hours)

    def _mean_capacity(self, question: Question) -> T:
        return self.chain.capped(self._mean(Delivered(question.of), question.at_hours))

    def _plant(self) -> GeneratedSpace:
        space = self.chain.answers.space
        if not isinstance(space, GeneratedSpace):
            raise IllPosed("a hand-written chain does not tell units, crews or starts apart")
        return space

    def _repairs_per_year(self, question: Question) -> T:
        plant = self._plant()
        slots = _slots(plant, question.of)
        counts = np.array([float((kind.island, kind.repaired) in slots) for kind in plant.kinds.kinds])
        return self._per_year(self.chain.long_run(PerArrow(counts[plant.arrows.kind])))

    def _starts_per_year(self, question: Question) -> T:
        plant = self._plant()
        slots = _slots(plant, question.of)
        counts = np.array(
            [float(sum((kind.island, start) in slots for start in kind.starts)) for kind in plant.kinds.kinds]
        )
        return self._per_year(self.chain.long_run(PerArrow(counts[plant.arrows.kind])))

    def _time_without_redundancy(self, question: Question) -> T:
        open_ = self._plant().without_redundancy(question.of)
        return self._per_year(self.chain.long_run(PerState(open_.astype(np.float64))))

    # --- crews -------------------------------------------------------------------------------------------------------

    def _crews(self, question: Question) -> T:
        self._plant()
        chains = self._loading()
        serving = frozenset(pool.name for pool in _plant_of(chains[0]).pools(None))
        loading = [(chain, upkeep) for chain in chains if (upkeep := Upkeep(chain.answers, serving)).pools(question.of)]
        if not loading:
            raise IllPosed(
                "the chain has no crew pool" if question.of is None else f"crew pool {question.of} serves nothing here"
            )
        if question.measure == "waiting_for_crew":
            return _total(
                [chain.long_run(_waiting(_plant_of(chain), upkeep, question.of)) for chain, upkeep in loading]
            )
        if question.measure == "crew_utilisation":
            sizes = {pool.name: pool.size for _, upkeep in loading for pool in upkeep.pools(question.of)}
            busy = _total([chain.long_run(_busy(_plant_of(chain), upkeep, question.of)) for chain, upkeep in loading])
            return self.chain.capped(self.chain.times(busy, Fraction(1, sum(sizes.values()))))
        calls, refused = [], []
        for chain, upkeep in loading:
            all_, none_free = _calls(_plant_of(chain), upkeep, question.of)
            calls.append(chain.long_run(all_))
            refused.append(chain.long_run(none_free))
        reason = "in the long run no fault calls for a crew"
        return self.chain.capped(self._over(_total(refused), _total(calls), reason))


def _plant_of(chain: Chain[T]) -> GeneratedSpace:
    space = chain.answers.space
    if not isinstance(space, GeneratedSpace):
        raise AssertionError("crews serve generated chains")
    return space


def _total(values: list[T]) -> T:
    total = values[0]
    for value in values[1:]:
        total = total + value
    return total


def _slots(plant: GeneratedSpace, of: str | None) -> frozenset[tuple[str, str]]:
    """Return (island, slot) of everything that a subject covers: the system, a group, a unit or a crew pool."""
    for pool in plant.pools(of) if of is not None else ():
        return frozenset().union(*(plant.slots_of(kind.unit) for kind in pool.kinds))
    return plant.slots_of(of)


def _busy(plant: GeneratedSpace, upkeep: Upkeep, of: str | None) -> PerState:
    return PerState(np.sum([plant.crews_at_work(pool) for pool in upkeep.pools(of)], axis=0))


def _waiting(plant: GeneratedSpace, upkeep: Upkeep, of: str | None) -> PerState:
    return PerState(np.sum([plant.calling(pool) - plant.crews_at_work(pool) for pool in upkeep.pools(of)], axis=0))


def _calls(plant: GeneratedSpace, upkeep: Upkeep, of: str | None) -> tuple[PerArrow, PerArrow]:
    """Return how many faults of each transition call for a crew, and how many of them find none free."""
    arrows, kinds = plant.arrows, plant.kinds.kinds
    calls, refused = np.zeros(len(arrows)), np.zeros(len(arrows))
    for pool in upkeep.pools(of):
        slots = _slots(plant, pool.name)
        calling = plant.calling(pool)
        ended = np.array([float((kind.island, kind.repaired) in slots) for kind in kinds])[arrows.kind]
        before = calling[arrows.source] - ended
        new = np.maximum(calling[arrows.target] - before, 0)
        calls += new
        refused += np.maximum(new - np.maximum(pool.size - before, 0), 0)
    return PerArrow(calls), PerArrow(refused)


_CREWS = frozenset({"crew_utilisation", "waiting_for_crew", "probability_of_waiting"})

_RECIPES: dict[str, Callable[[Recipes[T], Question], T]] = {
    "reliability": Recipes._reliability,
    "unreliability": Recipes._unreliability,
    "interval_reliability": Recipes._interval_reliability,
    "availability": Recipes._availability,
    "unavailability": Recipes._unavailability,
    "mean_availability": Recipes._mean_availability,
    "mean_unavailability": Recipes._mean_unavailability,
    "steady_state_availability": Recipes._availability,
    "steady_state_unavailability": Recipes._unavailability,
    "mean_time_to_first_failure": Recipes._mean_time_to_first_failure,
    "standard_deviation_of_time_to_first_failure": Recipes._spread_of_time_to_first_failure,
    "mean_up_time": Recipes._mean_up_time,
    "mean_down_time": Recipes._mean_down_time,
    "failure_frequency": Recipes._frequency,
    "expected_failures": Recipes._expected_failures,
    "failures_per_year": Recipes._failures_per_year,
    "downtime_per_year": Recipes._downtime_per_year,
    "conditional_failure_intensity": Recipes._conditional_failure_intensity,
    "hazard_rate": Recipes._hazard_rate,
    "mean_failure_rate": Recipes._mean_failure_rate,
    # Without tests nothing repeats: the mean and the peak over a cycle of any length are the long-run values.
    "pfd_average": Recipes._unavailability,
    "pfd_peak": Recipes._unavailability,
    "pfh": Recipes._frequency,
    "mean_units_failed": Recipes._mean_units_failed,
    "mean_capacity": Recipes._mean_capacity,
    "state_probability": Recipes._state_probability,
    "repairs_per_year": Recipes._repairs_per_year,
    "starts_per_year": Recipes._starts_per_year,
    "time_without_redundancy": Recipes._time_without_redundancy,
}
