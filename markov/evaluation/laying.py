"""A timetable as courses of segments: from the phases of a plant to what the mathematician's wing can follow."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from markov.chain import Generator, Vector, aggregate
from markov.chain.course import Course, Segment
from markov.chain.jumps import Jump, jump
from markov.rates import split_exact
from markov.states.arrows import ArrowKinds
from markov.states.space import Arrows
from markov.states.timetable import Step, Timetable

Mask = NDArray[np.bool_]
Values = NDArray[np.float64]

#: Relative error of one rounded operation.
UNIT = 2.0**-53


class Rules(Protocol):
    """What the bridge asks of one phase."""

    @property
    def arrows(self) -> Arrows:
        """Transitions as columns; the rate factors of the phase are in the symbolic rates."""

    def up(self, of: str | None) -> Mask:
        """States in which the system, a group or a unit delivers, shape (n,)."""

    def acts(self, of: str | None) -> Mask:
        """States in which it acts needlessly, shape (n,); none of them is up."""

    def capacity(self, of: str | None) -> Values:
        """Delivered share, shape (n,)."""


class ScheduledSpace(Protocol):
    """What the bridge asks of a chain with fixed instants."""

    @property
    def size(self) -> int:
        """Number of states, n."""

    @property
    def start(self) -> tuple[tuple[int, Fraction], ...]:
        """Initial states with their probabilities."""

    @property
    def kinds(self) -> ArrowKinds:
        """Kinds of transition and of jump, with their symbolic rates and chances."""

    @property
    def timetable(self) -> Timetable | None:
        """What happens at fixed instants."""

    @property
    def regimes(self) -> Sequence[Rules]:
        """The rules of every phase."""

    @property
    def jumps(self) -> tuple[Arrows, ...]:
        """One an instant of the timetable: the rate of a kind times its multiple is a chance."""

    def failed(self, subject: str | None) -> Values:
        """Failed items of the system, a group or a kind, shape (n,)."""

    def slots_of(self, subject: str | None) -> frozenset[tuple[str, str]]:
        """(island, kind) of every slot whose events count for a subject."""

    def find(self, name: str) -> int:
        """Number of the state of that name."""


@dataclass(frozen=True)
class Stretch:
    """One step of the timetable with the phase that follows it."""

    regime: int
    hours: Fraction
    instant: int | None
    after: int


@dataclass(frozen=True)
class Earnings:
    """What is earned, c rewards.

    Attributes
    ----------
    during : callable
        From a phase to rewards per hour by state, float64[n, c].
    at : callable or None
        From a stretch to what its end earns by the state before it, float64[n, c].
    error : float
        Relative error of either.
    """

    during: Callable[[int], Values]
    at: Callable[[Stretch], Values] | None = None
    error: float = 0.0


class Schedule:
    """The phases and instants of one chain as arrays.

    Parameters
    ----------
    space : ScheduledSpace
    table : Timetable
    """

    def __init__(self, space: ScheduledSpace, table: Timetable) -> None:
        self.space = space
        prefix, cycle = _stretches(table)
        self.prefix, self.cycle = prefix, cycle
        self.final = table.final

    @property
    def phase_after(self) -> tuple[int, ...]:
        """Of each instant, a phase that it leads into."""
        found = {each.instant: each.after for each in (*self.prefix, *self.cycle) if each.instant is not None}
        return tuple(found.get(number, 0) for number in range(len(self.space.jumps)))

    @property
    def period(self) -> Fraction:
        """Length of the cycle in hours."""
        return sum((each.hours for each in self.cycle), Fraction(0))

    @cached_property
    def arrow_rates(self) -> tuple[tuple[Values, Values], ...]:
        """Of each phase the rate of every transition, multiples included, as sums of two floats, shape (a,) each."""
        return tuple(_exact_values(self.space.kinds, regime.arrows) for regime in self.space.regimes)

    @cached_property
    def jump_chances(self) -> tuple[tuple[Values, Values], ...]:
        """Of each instant the chance of every jump as a sum of two floats, shape (a,) each."""
        return tuple(_exact_values(self.space.kinds, arrows) for arrows in self.space.jumps)

    @cached_property
    def generators(self) -> tuple[Generator, ...]:
        """The rates of each phase, parallel transitions added."""
        found = []
        for regime, (high, low) in zip(self.space.regimes, self.arrow_rates, strict=True):
            arrows, moving = regime.arrows, regime.arrows.moving
            source, target = arrows.source[moving], arrows.target[moving]
            found.append(aggregate(self.space.size, source, target, high[moving], low[moving]))
        return tuple(found)

    @cached_property
    def jumps(self) -> tuple[Jump, ...]:
        """What each instant does."""
        return tuple(
            jump(self.space.size, arrows.source, arrows.target, high, low)
            for arrows, (high, low) in zip(self.space.jumps, self.jump_chances, strict=True)
        )

    @cached_property
    def nothing_happens(self) -> Jump:
        """The jump that leaves every state as it is."""
        return jump(self.space.size, [], [], [])

    def jump_of(self, stretch: Stretch) -> Jump:
        """Return what happens at the end of a stretch."""
        return self.nothing_happens if stretch.instant is None else self.jumps[stretch.instant]

    def course(
        self,
        earnings: Earnings | None = None,
        stopped: Callable[[int], Mask] | None = None,
        since: Fraction = Fraction(0),
    ) -> tuple[Course, dict[int, int]]:
        """Return the course of one question, with the phase of each of its segments by the segment's identity.

        Parameters
        ----------
        earnings : Earnings, optional
        stopped : callable, optional
            From a phase to the states that absorb in it.
        since : Fraction
            Hours after time zero at which the course begins.
        """
        made: dict[Stretch, Segment] = {}
        phases: dict[int, int] = {}

        def segment(stretch: Stretch) -> Segment:
            if stretch not in made:
                made[stretch] = self._segment(stretch, earnings, stopped)
                phases[id(made[stretch])] = stretch.regime
            return made[stretch]

        prefix = tuple(segment(each) for each in self._remaining(since))
        if self.cycle:
            return Course(prefix, tuple(segment(each) for each in self.cycle)), phases
        last = segment(Stretch(self.final, Fraction(1), None, self.final))
        return Course(prefix, (), last), phases

    def _segment(self, stretch: Stretch, earnings: Earnings | None, stopped: Callable[[int], Mask] | None) -> Segment:
        n = self.space.size
        rewards = at_jump = np.zeros((n, 0))
        error = 0.0
        if earnings is not None:
            rewards, error = earnings.during(stretch.regime), earnings.error
            at_jump = np.zeros_like(rewards) if earnings.at is None else earnings.at(stretch)
        return Segment(
            self.generators[stretch.regime],
            stretch.hours,
            None if stretch.instant is None else self.jumps[stretch.instant],
            rewards,
            error,
            at_jump,
            error,
            None if stopped is None else stopped(stretch.regime),
            None if stopped is None else stopped(stretch.after),
        )

    def _remaining(self, since: Fraction) -> tuple[Stretch, ...]:
        """Return what is passed once when the course begins at a later time."""
        if since == 0:
            return self.prefix
        for number, each in enumerate(self.prefix):
            if since < each.hours:
                return replace(each, hours=each.hours - since), *self.prefix[number + 1 :]
            since -= each.hours
        if not self.cycle:
            return ()
        since %= self.period
        for number, each in enumerate(self.cycle):
            if since < each.hours:
                return replace(each, hours=each.hours - since), *self.cycle[number + 1 :]
            since -= each.hours
        raise AssertionError("a time within the cycle is within one of its steps")


def _stretches(table: Timetable) -> tuple[tuple[Stretch, ...], tuple[Stretch, ...]]:
    """Return the steps of prefix and cycle, each with the phase that follows."""
    after = [step.regime for step in (*table.prefix, *table.cycle)][1:]
    after.append(table.final)
    made = [_stretch(step, phase) for step, phase in zip((*table.prefix, *table.cycle), after, strict=True)]
    return tuple(made[: len(table.prefix)]), tuple(made[len(table.prefix) :])


def _stretch(step: Step, after: int) -> Stretch:
    return Stretch(step.regime, step.hours, step.instant, after)


def _exact_values(kinds: ArrowKinds, arrows: Arrows) -> tuple[Values, Values]:
    """Return the symbolic rate, or chance, of every arrow times its multiple as a sum of two floats."""
    if len(arrows) == 0:
        return np.zeros(0), np.zeros(0)
    widest = int(arrows.multiple.max()) + 1
    rate_of_kind = np.array([kind.rate for kind in kinds.kinds], np.int64)
    pair = rate_of_kind[arrows.kind] * widest + arrows.multiple
    found, place = np.unique(pair, return_inverse=True)
    high, low = split_exact([kinds.rates.rates[each // widest].exact * (each % widest) for each in found.tolist()])
    return high[place], low[place]


def start_of(space: ScheduledSpace) -> int | Vector:
    """Return the initial state, or the distribution over states where chance decides at time zero."""
    if len(space.start) == 1:
        return space.start[0][0]
    values = np.zeros(space.size)
    for state, chance in space.start:
        values[state] += float(chance)
    return Vector(values, 2 * UNIT, 0.0, "given", values > 0.0, 1.0)
