"""The front door of the room: one function per question, which picks the method and names it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.chain import elimination
from markov.chain.bounds import (
    Enclosure,
    Flags,
    Floats,
    Vector,
    above,
    around_doubled,
    below,
    point,
    relative_to_computed,
    vector_from_doubled,
)
from markov.chain.doubled import DIVIDE, MULTIPLY, UNIT, Doubled, divide, multiply, plain, total, total_error, zeros
from markov.chain.generator import Generator, Restriction, as_flags
from markov.chain.hub import Hub, with_likely_hub
from markov.chain.transient import as_classes, as_rewards, as_start
from markov.errors import IllPosed

_ELIMINATION = "subtraction-free elimination in double-double"
_STRUCTURE = "by structure"
Levels = NDArray[np.int64]
_PIECE = 1 << 16  # states whose shares are worked out together


@dataclass(frozen=True, eq=False)
class LongRun(Vector):
    """A long-run distribution that tells what it took.

    Attributes
    ----------
    readings : float
        How many times all rates were read from a sparse matrix; 0 where the work was on a dense one.
    """

    readings: float = 0.0


def stationary(generator: Generator, members: ArrayLike | None = None, *, level: ArrayLike | None = None) -> LongRun:
    """Return the long-run distribution of one closed class.

    Parameters
    ----------
    generator : Generator
        n states.
    members : bool[n] or numbers, optional
        The class, closed and irreducible.  Left out: the only closed class of the chain.
    level : int[n], optional
        Distance of each state from the usual one (a number of faults, say), to order the work on large chains.

    Returns
    -------
    LongRun
        n probabilities, 0 outside the class, total exactly 1.

    Raises
    ------
    IllPosed
        Several closed classes, or `members` is none.
    NotReached
        More states than elimination takes and no certificate could be found.
    """
    closed = generator.closed_classes()
    if members is None:
        if len(closed) != 1:
            raise IllPosed(f"the chain has {len(closed)} closed classes: its long run depends on the start")
        chosen = closed[0]
    else:
        chosen = np.flatnonzero(as_flags(members, generator.n)).astype(np.int32)
        if not any(np.array_equal(chosen, each) for each in closed):
            raise IllPosed("the states given are not one closed communicating class")
    possible = np.zeros(generator.n, dtype=bool)
    possible[chosen] = True
    values = np.zeros(generator.n)
    if chosen.size == 1:
        values[chosen] = 1.0
        return LongRun(values, 0.0, 0.0, _STRUCTURE, possible, 1.0)
    part = generator.restricted(chosen, np.full(generator.n, -1), 0)
    readings = 0.0
    if chosen.size <= elimination.LARGEST_ELIMINATION:
        made = elimination.eliminate(part.chain.dense(), None, part.chain.rate_error)
        weights, error, method = made.stationary(), made.error, _ELIMINATION
    else:
        hub = with_likely_hub(part.chain, zeros(part.chain.n), 0.0, 0, _levels(level, part))
        weights, error = hub.stationary()
        method, readings = hub.method, hub.readings.entries / part.chain.source.size
        del hub  # it holds as much as the chain
    whole = total(weights)
    for begin in range(0, chosen.size, _PIECE):
        here = slice(begin, begin + _PIECE)
        share = divide(weights.at(here), whole)
        values[chosen[here]] = share.high + share.low
    relative = 2 * error + total_error(chosen.size) + DIVIDE + UNIT
    return LongRun(values, relative_to_computed(relative), 0.0, method, possible, 1.0, readings)


def long_run(generator: Generator, start: int | Floats | Vector, *, level: ArrayLike | None = None) -> Vector:
    """Return the limit of the mean share of time in each state, for a start.

    Unlike `stationary` this takes chains with several closed classes, each weighted by the probability of ending in it.
    Parameters, errors and result as there; `start` is a state number, a distribution or an earlier result.
    """
    first = as_start(start, generator.n)
    begin = first.values > 0.0 if first.possible is None or first.absolute_error == 0.0 else first.possible
    closed = generator.closed_classes(begin)
    if len(closed) == 1:
        return stationary(generator, closed[0], level=level)
    label = np.full(generator.n, -1)
    for number, members in enumerate(closed):
        label[members] = number
    ends = absorption(generator, first, label, level=level)
    values, possible = np.zeros(generator.n), np.zeros(generator.n, dtype=bool)
    relative: float | None = 0.0
    for number, members in enumerate(closed):
        inside = stationary(generator, members, level=level)
        values += inside.values * ends.values[number]
        possible[members] = True
        if ends.relative_error is None or inside.relative_error is None or relative is None:
            relative = None
        else:
            both = (1.0 + ends.relative_error) * (1.0 + inside.relative_error) * (1.0 + UNIT) - 1.0 + 4 * UNIT
            relative = max(relative, both)
    return Vector(values, relative, ends.absolute_error * 2, f"{ends.method}, class by class", possible, ends.total)


def absorption(
    generator: Generator, start: int | Floats | Vector, absorbing: ArrayLike, *, level: ArrayLike | None = None
) -> Vector:
    """Return the probability of ending in each class of absorbing states.

    Parameters
    ----------
    generator : Generator
        n states.
    start : int, float64[n] or Vector
    absorbing : bool[n] or int[n]
        Flags make one class; numbers give the class of each state, -1 for those that do not absorb.

    Returns
    -------
    Vector
        One probability per class, exactly 0 and 1 where the structure says so.

    Raises
    ------
    IllPosed
        There is a path to a place from which no absorbing state can be reached.
    """
    asked = _Absorbing.of(generator, start, absorbing, level)
    initial, reached = asked.initial(), asked.classes_reached()
    if np.count_nonzero(reached) == 1 and asked.first.total == 1.0:
        return Vector(reached.astype(np.float64), 0.0, 0.0, _STRUCTURE, reached, 1.0)
    if asked.part.chain.n == 0:
        return Vector(initial, *_inexact(asked.first, generator.n * UNIT), _STRUCTURE, reached, asked.first.total)
    spent, error, method = asked.spent()
    rates = asked.part.absorption
    found = total(multiply(Doubled(spent.high[:, None], spent.low[:, None]), rates))
    own = error + asked.part.absorption_error + MULTIPLY + total_error(spent.high.size)
    relative, absolute = _with_first(own + (2.0 + generator.n * bool(initial.any())) * UNIT, asked.first, 1.0)
    return Vector(initial + found.high + found.low, relative, absolute, method, reached, asked.first.total)


def time_spent(
    generator: Generator, start: int | Floats | Vector, absorbing: ArrayLike, *, level: ArrayLike | None = None
) -> Vector:
    """Return the expected time in each state before absorption.

    Any reward earned before absorption is ``time_spent(...).weighted(reward)``.  Parameters and errors as `absorption`.
    """
    asked = _Absorbing.of(generator, start, absorbing, level)
    values, possible = np.zeros(generator.n), np.zeros(generator.n, dtype=bool)
    if asked.part.chain.n == 0:
        return Vector(values, 0.0, 0.0, _STRUCTURE, possible)
    spent, error, method = asked.spent()
    values[asked.part.members] = spent.high + spent.low
    possible[asked.part.members] = True
    longest = asked.longest() if asked.first.absolute_error else 0.0
    return Vector(values, *_with_first(error + UNIT, asked.first, longest), method, possible)


def rewards_before_absorption(
    generator: Generator,
    start: int | Floats | Vector,
    absorbing: ArrayLike,
    rewards: Sequence[Floats | Flags | Vector],
    *,
    reward_error: float = 0.0,
    level: ArrayLike | None = None,
) -> tuple[Enclosure, ...]:
    """Return the expected total of each reward before absorption.

    Parameters
    ----------
    rewards : sequence of float64[n], bool[n] or Vector
        Rates of reward per state, not negative, relative error `reward_error` each.
    generator, start, absorbing, level
        As for `absorption`.
    """
    columns, error, _ = as_rewards(rewards, generator.n, reward_error)
    spent = time_spent(generator, start, absorbing, level=level)
    return tuple(spent.weighted(columns[:, number], error) for number in range(columns.shape[1]))


@dataclass(frozen=True)
class FirstPassage:
    """When a chain first enters some states.

    Attributes
    ----------
    probability : Enclosure
        That it ever does; exactly 0 or 1 where the structure says so.
    mean, standard_deviation : Enclosure or None
        Of the time until then; None where the probability is not 1 (the mean is then infinite).
    """

    probability: Enclosure
    mean: Enclosure | None
    standard_deviation: Enclosure | None


def first_passage(
    generator: Generator,
    start: int | Floats | Vector,
    down: ArrayLike,
    *,
    deviation: bool = True,
    level: ArrayLike | None = None,
) -> FirstPassage:
    """Return probability, mean and standard deviation of the time until the chain first enters some states.

    Parameters
    ----------
    generator : Generator
        n states.
    start : int, float64[n] or Vector
        A start inside `down` counts as entered at time 0.
    down : bool[n] or numbers
        The states to be entered.
    deviation : bool
        Whether the standard deviation is asked for (it costs a second solution).
    level : int[n], optional
        As for `stationary`.

    Raises
    ------
    NotReached
        More states than elimination takes and no certificate could be found.
    """
    first = as_start(start, generator.n)
    goal = as_flags(down, generator.n)
    begin = first.values > 0.0 if first.absolute_error == 0.0 else _support(first)
    ends = generator.without_exits(goal).closed_classes(begin, outside=goal)
    if not bool((generator.reachable(begin, blocked=goal) & goal).any()):
        return FirstPassage(point(0, _STRUCTURE), None, None)
    if ends:
        label = np.where(goal, 0, -1)
        for members in ends:
            label[members] = 1
        return FirstPassage(absorption(generator, first, label, level=level).entry(0).capped(), None, None)
    certain = point(1, _STRUCTURE)
    asked = _Absorbing.of(generator, first, goal, level)
    if asked.part.chain.n == 0:
        return FirstPassage(certain, point(0, _STRUCTURE), point(0, _STRUCTURE) if deviation else None)
    spent, error, method = asked.spent()
    summed = total(spent)
    extra = 0.0 if first.relative_error is None else first.relative_error
    off = first.absolute_error * float(np.count_nonzero(begin))
    error = (error + extra + total_error(spent.high.size)) * (1.0 + 1e-9)
    mean_off = off * asked.longest() * (1.0 + 1e-9) if off else 0.0
    mean = around_doubled(summed, error, mean_off, method)
    if first.relative_error is None:
        mean = Enclosure(mean.value, None, None, method)
    if not deviation:
        return FirstPassage(certain, mean, None)
    times, times_error = asked.times()
    second = total(multiply(spent, times))
    second_error = (error + times_error + MULTIPLY) * (1.0 + 1e-9)
    # Twice the sum is the second moment; from any start it is at most twice the square of the longest mean time.
    second_off = 2.0 * off * asked.longest() ** 2 * (1.0 + 1e-9) if off else 0.0
    spread = _deviation(summed, error, mean_off, second, second_error, second_off, method)
    if first.relative_error is None:
        spread = Enclosure(spread.value, None, None, method)
    return FirstPassage(certain, mean, spread)


def _deviation(
    mean: Doubled, mean_error: float, mean_off: float, half: Doubled, half_error: float, second_off: float, method: str
) -> Enclosure:
    """Return the root of ``2 half - mean**2``; both are kept in double-double, the difference is formed exactly."""
    m, s = mean.fraction(), 2 * half.fraction()
    e, h = Fraction(relative_to_computed(mean_error)), Fraction(relative_to_computed(half_error))
    low = s * (1 - h) - Fraction(second_off) - (m * (1 + e) + Fraction(mean_off)) ** 2
    least = max(Fraction(0), m * (1 - e) - Fraction(mean_off))
    high = s * (1 + h) + Fraction(second_off) - least**2
    middle = s - m * m
    variance = Enclosure(float(middle), max(0.0, below(low)), max(0.0, above(high)), method)
    return variance.root()


def _support(first: Vector) -> Flags:
    return np.ones(len(first), dtype=bool) if first.possible is None else first.possible


def _inexact(first: Vector, rounding: float) -> tuple[float | None, float]:
    relative = None if first.relative_error is None else first.relative_error + rounding
    return relative, first.absolute_error * float(np.count_nonzero(_support(first)))


def _with_first(own: float, first: Vector, largest: float) -> tuple[float | None, float]:
    """Return relative and absolute error with those of the start weights taken in (see `transient`)."""
    if first.relative_error is None:
        return None, 0.0
    error = relative_to_computed(own)
    both = (error + first.relative_error + error * first.relative_error) * (1.0 + 1e-12)
    moved = first.absolute_error * float(np.count_nonzero(_support(first))) * largest
    return both, moved * (1.0 + both) * (1.0 + 1e-9)


@dataclass(frozen=True, eq=False)
class _Absorbing:
    """One question about absorption: the transient states that a start can reach, with their rates into the classes."""

    generator: Generator
    first: Vector
    label: NDArray[np.int64]
    count: int
    part: Restriction
    level: Levels | None

    @classmethod
    def of(
        cls, generator: Generator, start: int | Floats | Vector, absorbing: ArrayLike, level: ArrayLike | None
    ) -> _Absorbing:
        first = as_start(start, generator.n)
        given = np.asarray(absorbing)
        label, count = as_classes(given if given.shape == (generator.n,) else as_flags(given, generator.n), generator.n)
        stopped = label >= 0
        begin = first.values > 0.0 if first.absolute_error == 0.0 else _support(first)
        reached = generator.reachable(begin, blocked=stopped)
        members = np.flatnonzero(reached & ~stopped)
        saved = generator.leading_to(stopped, blocked=stopped)
        if not bool(saved[members].all()):
            stuck = int(members[~saved[members]][0])
            raise IllPosed(f"from state {stuck}, which can be entered, no absorbing state can be reached")
        part = generator.restricted(members, label, count)
        return cls(generator, first, label, count, part, _levels(level, part))

    def initial(self) -> Floats:
        inside = self.label >= 0
        return np.bincount(self.label[inside], weights=self.first.values[inside], minlength=self.count).astype(float)

    def classes_reached(self) -> Flags:
        begin = self.first.values > 0.0 if self.first.absolute_error == 0.0 else _support(self.first)
        inside = (self.label >= 0) & begin
        started = np.bincount(self.label[inside], minlength=self.count) > 0
        return started | (self.part.absorption.high > 0.0).any(axis=0)

    def _loss(self) -> tuple[Doubled, float]:
        return total(self.part.absorption, axis=1), self.part.absorption_error + total_error(self.count)

    def _solver(self) -> elimination.Elimination | Hub:
        loss, loss_error = self._loss()
        chain = self.part.chain
        if chain.n <= elimination.LARGEST_ELIMINATION:
            return elimination.eliminate(chain.dense(), loss, max(chain.rate_error, loss_error))
        guess = int(np.argmax(self.first.values[self.part.members]))
        return with_likely_hub(chain, loss, loss_error, guess, self.level)

    def solver(self) -> elimination.Elimination | Hub:
        """Prepared once."""
        if "made" not in self.__dict__:
            object.__setattr__(self, "made", self._solver())
        made: elimination.Elimination | Hub = self.__dict__["made"]
        return made

    def spent(self) -> tuple[Doubled, float, str]:
        """Time in each member before absorption, taking the start weights as exact."""
        start = plain(self.first.values[self.part.members])
        made = self.solver()
        if isinstance(made, elimination.Elimination):
            return made.row(start), made.error, _ELIMINATION
        return *made.spent(start, 0.0), made.method

    def times(self) -> tuple[Doubled, float]:
        """Mean time to absorption from each member."""
        made = self.solver()
        return (made.times, made.error) if isinstance(made, elimination.Elimination) else made.times()

    def longest(self) -> float:
        """Bound of the mean time to absorption from any member."""
        times, error = self.times()
        return float(times.high.max()) * (1.0 + 2.0 * error + 1e-9)


def _levels(level: ArrayLike | None, part: Restriction) -> Levels | None:
    return None if level is None else np.asarray(level, dtype=np.int64)[part.members]


__all__ = [
    "FirstPassage",
    "absorption",
    "first_passage",
    "long_run",
    "rewards_before_absorption",
    "stationary",
    "time_spent",
    "vector_from_doubled",
]
