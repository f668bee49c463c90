"""Answers about chains that are changed at fixed instants: values at times, the periodic limit, the first failure.

Method.  Between instants the rates are constant and the methods of `markov.chain.transient` apply; at an instant a jump
maps the weights.  Everything is a sum of non-negative terms, so errors add.

*The periodic limit* is the distribution at the beginning of a cycle that the cycle keeps, solved around a likely state
by `markov.chain.returning`.  A mean over the cycle weighs time spent in it; long-run shares are those means.

*The first failure* is absorption, in a segment or at a jump.  With y the expected visits to each state at the beginning
of a cycle before the failure, which solve ``y = a + y C`` for a sub-stochastic C,

    mean = (time alive in the prefix) + y m,                       m the time alive in one cycle,
    second moment = 2 (integral of time over the prefix) + 2 S (y m) + y q + 2 T (y' m),

S and T the lengths of prefix and cycle, q twice the integral of time since the cycle began over the time alive in it,
and ``y' = (y C) (I - C)**-1``.  y is solved around a likely state h: with w visits per visit of h, f the probability of
failing before the next visit of h (a sum of what is absorbed, never a complement), ``y = y0 + (p / f) (1, w)`` where
y0 counts visits before h is seen and p is the probability of ever seeing it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from markov.chain.bounds import Enclosure, Flags, Floats, Vector, above, around, below, point
from markov.chain.carried import SLACK, Amounts, Weights, computed, joined, nothing, weights_of
from markov.chain.course import Course, Segment
from markov.chain.doubled import ADD, DIVIDE, UNIT, Doubled, add, divide, plain, total, total_error
from markov.chain.reduction import Reduction, reduced
from markov.chain.returning import Image, Kept
from markov.chain.runner import Runner
from markov.chain.solve import first_passage
from markov.chain.strides import LARGEST_DENSE
from markov.chain.transient import Method, Time, as_start, as_times
from markov.errors import IllPosed

_PERIODIC = "periodic limit solved around a likely state"
_FAILURE = "visits at the beginnings of cycles, solved around a likely state"


@dataclass(frozen=True, eq=False)
class Moment:
    """Values of n states at one time.

    Attributes
    ----------
    time : Fraction
    segment : Segment
        What the time belongs to; at an instant what follows the jump.
    states : Vector
        Probability of each state, absorbed ones left out.
    absorbed : Enclosure
        Probability of having been absorbed by then, jumps up to this time included.
    alive : Enclosure
        Probability of not having been absorbed.
    earned : tuple of Enclosure
        Each reward until then.
    """

    time: Fraction
    segment: Segment
    states: Vector
    absorbed: Enclosure
    alive: Enclosure
    earned: tuple[Enclosure, ...]


def follow(
    course: Course,
    start: int | Floats | Vector,
    times: Sequence[Time],
    *,
    method: Method | None = None,
    largest_dense: int = LARGEST_DENSE,
) -> tuple[Moment, ...]:
    """Return state probabilities, absorption and rewards at several times.

    Parameters
    ----------
    course : Course
        n states, c rewards.
    start : int, float64[n] or Vector
    times : sequence of Fraction, float or int
        Exact, not negative.  At an instant the values are those after the jump.
    method : str, optional
        Method for values at a time.
    largest_dense : int
        Number of states up to which segments are prepared as matrices.
    """
    exact = as_times(times)
    given = as_start(start, course.n)
    first = weights_of(given)
    amounts = _absorbed_at_once(course, first)
    small = reduced(course, first.possible)
    course = small.course
    period = float(course.period) if course.cycle else 0.0
    cycles = float(max(times, default=0)) / period if period else 0.0
    runner = Runner(course, method, largest_dense, cycles)
    weights = small.shrunk(first).without(course.first().absorbing())
    # Where each segment of the prefix, and the cycle, begins.
    begins = [(weights, amounts)]
    furthest = max((runner.place(time) for time in exact), default=(-1, 0, Fraction(0)))
    for number, segment in enumerate(course.prefix):
        if furthest[0] < 0 and number >= furthest[1]:
            break
        weights, earned = runner.pass_through([segment], weights)
        amounts = amounts + earned
        begins.append((weights, amounts))
    found: dict[Fraction, Moment] = {}
    here, cycles, within = begins[-1], 0, 0
    for time in sorted(set(exact)):
        whole, number, rest = runner.place(time)
        if whole < 0:
            at = begins[number]
        else:
            if whole > cycles or (whole == cycles and number < within):
                if within:
                    finished, earned = runner.pass_through(course.cycle[within:], here[0])
                    here, cycles, within = (finished, here[1] + earned), cycles + 1, 0
                passed, earned = runner.pass_cycles(whole - cycles, here[0])
                here, cycles = (passed, here[1] + earned), whole
            if number > within:
                passed, earned = runner.pass_through(course.cycle[within:number], here[0])
                here, within = (passed, here[1] + earned), number
            at = here
        segment = runner.segment_at(time)
        if rest:
            ahead, earned = runner.stride(segment).partly(at[0], rest)
            at = ahead, at[1] + earned
        found[time] = _moment(time, small.originals[id(segment)], small.spread(at[0]), at[1], given.total == 1.0)
    return tuple(found[time] for time in exact)


def _absorbed_at_once(course: Course, start: Weights) -> Amounts:
    """Return amounts with the start weights that are absorbed from the beginning."""
    amounts, stopped = nothing(1 + course.rewards), course.first().absorbing()
    if not (start.possible & stopped).any():
        return amounts
    inside = np.flatnonzero(stopped)
    amounts.values.high[:1], amounts.values.low[:1] = total(start.values.at((inside, None)))
    amounts.absolute[0] = start.absolute
    relative = joined(start.relative, total_error(inside.size))
    return Amounts(amounts.values, relative, amounts.absolute, start.method)


def _moment(time: Fraction, segment: Segment, weights: Weights, amounts: Amounts, complete: bool) -> Moment:
    unstopped = segment.stopped is None and segment.arriving is None
    whole = 1.0 if complete and unstopped and amounts.entry(0).upper == 0.0 else None
    states = weights.vector(whole)
    absorbed = amounts.entry(0).capped()
    alive = states.weighted(np.ones(len(states))).capped()
    if complete:
        alive = alive.meet(absorbed.complement())
    earned = tuple(amounts.entry(1 + number) for number in range(amounts.values.high.size - 1))
    return Moment(time, segment, states, absorbed, alive, earned)


# --- the periodic limit ----------------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class PeriodicLimit:
    """How a chain repeats itself in the end.

    Attributes
    ----------
    runner : Runner
    small : Reduction
        The states that can be occupied.
    weights, before : tuple of Weights
        On these states, at the beginning of each segment and at its end before the jump.
    """

    runner: Runner
    small: Reduction
    weights: tuple[Weights, ...]
    before: tuple[Weights, ...]

    @property
    def segments(self) -> tuple[Segment, ...]:
        """The cycle."""
        return tuple(self.small.originals[id(each)] for each in self.runner.course.cycle)

    @property
    def begins(self) -> tuple[Vector, ...]:
        """Distribution at the beginning of each segment."""
        return tuple(self.small.spread(each).vector(1.0) for each in self.weights)

    @property
    def ends(self) -> tuple[Vector, ...]:
        """Distribution at the end of each segment, before its jump."""
        return tuple(self.small.spread(each).vector(1.0) for each in self.before)

    def rate(self, rewards: Sequence[Floats], error: float, at_jump: Sequence[Floats], jump_error: float) -> Enclosure:
        """Return what is earned per unit of time.

        Parameters
        ----------
        rewards : sequence of float64[n]
            Per unit of time in each segment of the cycle, relative error `error`.
        at_jump : sequence of float64[n]
            At the jump that ends it, by the state before, relative error `jump_error`; empty for nothing.
        """
        amounts = nothing(1)
        for number, segment in enumerate(self.runner.course.cycle):
            reward = self.small.rows(np.asarray(rewards[number], dtype=np.float64))
            if reward.any():
                found = self._spent(number)
                if isinstance(found, Weights):
                    value = _weighed(found, reward, error)
                else:
                    value = self.runner.stride(segment).earned(self.weights[number], reward[:, None], error)
                amounts = amounts + value
            if at_jump and at_jump[number].any():
                amounts = amounts + _weighed(self.before[number], self.small.rows(at_jump[number]), jump_error)
        rate = amounts.entry(0).over(self.runner.course.period)
        return replace(rate, method=f"{_PERIODIC}; {amounts.method}" if amounts.method else "by structure")

    def _spent(self, number: int) -> Weights | None:
        """Return the time spent in each state in one segment, where it comes cheap."""
        if not self.runner.dense:
            return None
        known: dict[int, Weights] = self.__dict__.setdefault("_times", {})
        if number not in known:  # all segments that go by the same matrix at once
            strides = [self.runner.stride(segment) for segment in self.runner.course.cycle]
            alike = [each for each, stride in enumerate(strides) if stride.moves_like(strides[number])]
            found = strides[number].spent_from([self.weights[each] for each in alike])
            known.update(zip(alike, found, strict=True))
        return known[number]

    def mean(self, values: Sequence[Floats], error: float = 0.0) -> Enclosure:
        """Return the mean over the cycle of a number that each state has, float64[n] for each segment.

        Next to the largest value it is as narrow as what it lacks allows.
        """
        direct = self.rate(values, error, (), 0.0)
        largest = max(float(each.max(initial=0.0)) for each in values)
        if error or largest not in (0.0, 1.0):
            return direct
        if largest == 0.0:
            return point(0, "by structure")
        lacking = [1.0 - each for each in values]
        if not all(bool(np.isin(each, (0.0, 1.0)).all()) for each in lacking):
            return direct.capped()
        return direct.capped().meet(self.rate(lacking, 0.0, (), 0.0).capped().complement())


def _weighed(weights: Weights, reward: Floats, error: float) -> Amounts:
    fed = weights.possible & (reward > 0.0)
    if not fed.any():
        return nothing(1)
    high = weights.values.high[fed]
    terms = math.fsum((high * reward[fed]).tolist()) + math.fsum((weights.values.low[fed] * reward[fed]).tolist())
    most = float(reward.max()) * (1.0 + error)
    absolute = (weights.absolute * most + fed.size * 2.0**-1070) * SLACK
    relative = joined(weights.relative, error, 4 * UNIT)
    return Amounts(plain(np.array([terms])), relative, np.array([absolute]), weights.method)


def periodic_limit(
    course: Course,
    start: int | Floats | Vector,
    *,
    method: Method | None = None,
    largest_dense: int = LARGEST_DENSE,
) -> tuple[PeriodicLimit, ...]:
    """Return how the chain repeats itself in the end, once for each closed class that it can end in.

    Parameters
    ----------
    course : Course
        With a cycle; nothing absorbs.
    start, method, largest_dense
        As for `follow`.

    Raises
    ------
    NotReached
        The weights at the beginning of a cycle do not settle within reach.
    """
    if not course.cycle:
        raise IllPosed("the schedule does not repeat")
    first = weights_of(as_start(start, course.n))
    small = reduced(course, first.possible)
    course = small.course
    runner = Runner(course, method, largest_dense)
    begin = course.entered(small.shrunk(first).possible)
    found = []
    for members in course.closed_classes(begin):
        weights = _settled(runner, members)
        pairs = list(runner.states_between(course.cycle, weights))
        found.append(PeriodicLimit(runner, small, tuple(pair[0] for pair in pairs), tuple(pair[1] for pair in pairs)))
    return tuple(found)


def _unit(n: int, state: int) -> Doubled:
    row = np.zeros(n)
    row[state] = 1.0
    return plain(row)


def _settled(runner: Runner, members: Flags) -> Weights:
    """Return the distribution at the beginning of a cycle that the cycle keeps."""
    count = int(np.count_nonzero(members))
    if count == 1:
        return Weights(_unit(members.size, int(np.flatnonzero(members)[0])), 0.0, 0.0, members, "by structure")
    evenly = plain(members / count)
    hub = runner.hub(members, Weights(evenly, None, 0.0, members, ""))
    around_hub, _ = _excursion(runner, members, hub)
    values = add(around_hub.values, _unit(members.size, hub))
    summed = total(values)
    share = divide(values, summed)
    mass = float(summed.high)
    relative = None
    if around_hub.relative is not None:
        lost = 2 * around_hub.absolute / mass
        relative = joined(around_hub.relative, around_hub.relative, total_error(members.size) + ADD + DIVIDE, lost)
    return Weights(share, relative, 2 * around_hub.absolute / mass * SLACK, members, _PERIODIC)


def _excursion(runner: Runner, members: Flags, hub: int) -> tuple[Kept, Image]:
    """Return the visits to other states between visits to the hub, with what the hub sends."""
    source = runner.as_map(members)(_unit(members.size, hub))
    return runner.gathered(members, hub, source), source


# --- the first failure -----------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class FirstFailure:
    """The time until the chain is absorbed; both None where that may never happen."""

    mean: Enclosure | None
    standard_deviation: Enclosure | None


def first_failure(
    course: Course,
    start: int | Floats | Vector,
    *,
    method: Method | None = None,
    largest_dense: int = LARGEST_DENSE,
) -> FirstFailure:
    """Return mean and standard deviation of the time until absorption.

    Parameters
    ----------
    course : Course
        With states that absorb; its first reward is 1 in every state, so that it counts time.
    start, method, largest_dense
        As for `follow`.

    Raises
    ------
    NotReached
        Visits between failures do not settle within reach.
    """
    first = weights_of(as_start(start, course.n))
    small = reduced(course, first.possible)
    course = small.course
    runner = Runner(course, method, largest_dense)
    first = small.shrunk(first)
    weights = first.without(course.first().absorbing())
    alive, aged, length = point(0, ""), point(0, ""), Fraction(0)
    for segment in course.prefix:
        earned, grown, weights = _lived(runner, segment, weights, length)
        alive, aged, length = alive + earned, aged + grown, length + segment.hours
    begin = course.entered(first.possible)
    if not begin.any() or (not weights.values.high.any() and weights.absolute == 0.0):
        return FirstFailure(alive, _spread(alive, aged))
    if course.last is not None:
        return _then_for_ever(course.last, weights, alive, aged, length)
    if (begin & ~course.doomed()).any():
        return FirstFailure(None, None)
    visited = _Visits(runner, begin, weights)
    mean_left, aged_left, later = visited.totals()
    mean = replace(alive + mean_left, method=f"{_FAILURE}; {visited.round.method}".strip("; "))
    second = aged + mean_left.times(2 * length) + aged_left + later.times(2 * course.period)
    return FirstFailure(mean, _spread(mean, second))


def _lived(runner: Runner, segment: Segment, weights: Weights, since: Fraction) -> tuple[Enclosure, Enclosure, Weights]:
    """Return the time alive in a segment, twice the integral of the time over it, and the weights after its jump."""
    stride = runner.stride(segment)
    before, earned = stride.through(weights)
    after, _ = stride.leap(before)
    alive = earned.entry(1)
    if runner.dense:
        within = stride.ageing(weights.without(segment.absorbing())).entry(0)
    else:
        within = _about_half(alive, before, segment.hours)
    return alive, within.times(2) + alive.times(2 * since), after


def _about_half(alive: Enclosure, before: Weights, hours: Fraction) -> Enclosure:
    """Enclose the integral of the time since a segment began over the time alive, from what is alive at its end.

    Survival falls along a segment, from which the mean time since it began is at most half of its length; and at least
    what is alive at the end was alive all the time.
    """
    most = alive.times(hours / 2)
    least = before.vector().weighted(np.ones(before.possible.size)).times(hours * hours / 2)
    if most.upper is None or least.lower is None:
        return most
    return Enclosure(most.value, min(least.lower, most.value), most.upper, most.method)


def _spread(mean: Enclosure, second: Enclosure) -> Enclosure:
    method = mean.method
    if mean.lower is None or mean.upper is None or second.lower is None or second.upper is None:
        return Enclosure(math.sqrt(max(0.0, second.value - mean.value**2)), None, None, method)
    low = Fraction(second.lower) - Fraction(mean.upper) ** 2
    high = Fraction(second.upper) - Fraction(mean.lower) ** 2
    middle = Fraction(second.value) - Fraction(mean.value) ** 2
    ends = max(0.0, below(low)), max(0.0, above(high))
    return Enclosure(min(max(float(middle), ends[0]), ends[1]), *ends, method).root()


def _then_for_ever(
    last: Segment, weights: Weights, alive: Enclosure, aged: Enclosure, length: Fraction
) -> FirstFailure:
    """Add what comes after the prefix where one segment goes on for ever."""
    found = first_passage(last.generator, weights.vector(), last.absorbing())
    if found.mean is None or found.standard_deviation is None:
        return FirstFailure(None, None)
    left = found.mean
    second = found.standard_deviation * found.standard_deviation + left * left
    mean = alive + left
    return FirstFailure(mean, _spread(mean, aged + left.times(2 * length) + second))


class _Visits:
    """Expected visits to the states at the beginnings of cycles before absorption."""

    def __init__(self, runner: Runner, members: Flags, weights: Weights) -> None:
        self.runner, self.members, self.n = runner, members, members.size
        self.hub = runner.hub(members, weights)
        self.map = runner.as_map(members)
        around_hub, _ = _excursion(runner, members, self.hub)
        unit = Weights(_unit(self.n, self.hub), 0.0, 0.0, members, "")
        self.round = _added(unit, around_hub, members)
        self.alive, self.aged, self.lost = self._through(self.round)
        self.start = weights

    def _through(self, weights: Weights) -> tuple[Enclosure, Enclosure, Enclosure]:
        """Return time alive, twice the integral of time since the cycle began, and absorption, over one cycle."""
        alive, aged, lost, since = point(0, ""), point(0, ""), nothing(1 + self.runner.course.rewards), Fraction(0)
        for segment in self.runner.course.cycle:
            stride = self.runner.stride(segment)
            earned, grown, after = _lived(self.runner, segment, weights, since)
            before, gone = stride.through(weights)
            lost = lost + gone + stride.leap(before)[1]
            alive, aged, weights, since = alive + earned, aged + grown, after, since + segment.hours
        return alive, aged, lost.entry(0)

    def _from(self, weights: Weights) -> tuple[Weights, Enclosure]:
        """Return visits before the hub is seen, and the visits of the hub ever after."""
        inside = replace(weights, possible=weights.possible & self.members)
        kept = self.runner.gathered(self.members, self.hub, Image(weights.values, weights.relative, weights.absolute))
        before = Weights(kept.values, kept.relative, kept.absolute, self.members, weights.method)
        image = self.map(kept.values)
        sent = Weights(
            image.values,
            joined(image.relative, kept.relative),
            image.absolute + kept.absolute * SLACK,
            self.members,
            weights.method,
        )
        seen = _entry(inside, self.hub) + _entry(sent, self.hub)
        return before, seen / self.lost

    def totals(self) -> tuple[Enclosure, Enclosure, Enclosure]:
        """Return ``y m``, ``y q`` and ``y' m`` of the module's docstring."""
        before, rounds = self._from(self.start)
        alive, aged, _ = self._through(before)
        # y' is made from the weights after one cycle: those of the visits before the hub, and of one round.
        later = self._mean(self._after(before)) + rounds * self._mean(self._after(self.round))
        return alive + rounds * self.alive, aged + rounds * self.aged, later

    def _after(self, weights: Weights) -> Weights:
        image = self.map(weights.values)
        return Weights(
            image.values,
            joined(image.relative, weights.relative),
            image.absolute + weights.absolute * SLACK,
            self.members,
            weights.method,
        )

    def _mean(self, weights: Weights) -> Enclosure:
        before, rounds = self._from(weights)
        return self._through(before)[0] + rounds * self.alive


def _added(one: Weights, kept: Kept, members: Flags) -> Weights:
    relative = None if kept.relative is None else (kept.relative + ADD) * SLACK
    return Weights(add(one.values, kept.values), relative, kept.absolute, members, "")


def _entry(weights: Weights, state: int) -> Enclosure:
    value = weights.values.fraction(state)
    return around(value, computed(weights.relative), weights.absolute * SLACK, weights.method)
