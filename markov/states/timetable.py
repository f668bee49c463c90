"""The timetable: when tests, visits or phase boundaries fall, as steps of time that repeat after a prefix.

All times are exact fractions of an hour, counted from time zero.  What falls on one instant happens in this order: the
phase that begins, then visits, then tests: first those that end, then those that begin or take no time, each in the
order of the spec.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from markov.errors import TooLarge
from markov.model import Model, RepairAtVisits
from markov.model.cycle import joint_period

ActionKind = Literal["phase", "visit", "test", "test_start", "test_end"]

#: More steps than this are not laid out.
MOST_STEPS = 20_000

#: Place of a kind in the order of one instant.
_ORDER: dict[ActionKind, int] = {"phase": 0, "visit": 1, "test_end": 2, "test": 3, "test_start": 3}


@dataclass(frozen=True)
class Action:
    """One thing that happens at an instant.

    Attributes
    ----------
    kind : str
        ``phase``: a phase begins; ``visit``; ``test``: one that takes no time; ``test_start`` and ``test_end`` of one
        that does.
    name : str or int
        The group visited, the test, or the number of the phase that begins.
    """

    kind: ActionKind
    name: str | int


@dataclass(frozen=True)
class Step:
    """A stretch of time without any instant in it.

    Attributes
    ----------
    regime : int
        Number of the phase; 0 where there are none.
    hours : Fraction
        Length, above zero.
    instant : int or None
        Number of the tuple of actions at its end; None where nothing happens there.
    """

    regime: int
    hours: Fraction
    instant: int | None


@dataclass(frozen=True)
class Timetable:
    """Steps that are passed once, steps that repeat for ever after, and what happens at their ends.

    Attributes
    ----------
    prefix, cycle : tuple of Step
        Where the cycle is empty, the last phase goes on for ever after the prefix.
    instants : tuple of tuples of Action
    """

    prefix: tuple[Step, ...]
    cycle: tuple[Step, ...]
    instants: tuple[tuple[Action, ...], ...]

    @property
    def final(self) -> int:
        """Number of the phase that holds after the prefix."""
        if self.cycle:
            return self.cycle[0].regime
        last = self.prefix[-1].instant
        begun = [] if last is None else [action.name for action in self.instants[last] if action.kind == "phase"]
        return int(begun[-1]) if begun else self.prefix[-1].regime

    @property
    def period(self) -> Fraction:
        """Length of the cycle in hours; 0 where nothing repeats."""
        return sum((step.hours for step in self.cycle), Fraction(0))


@dataclass(frozen=True)
class _Recurring:
    """An action at ``first``, ``first + every`` and so on."""

    action: Action
    first: Fraction
    every: Fraction
    rank: int


def timetable(model: Model) -> Timetable | None:
    """Lay out the fixed instants of a model.

    Returns
    -------
    Timetable or None
        None where nothing ever happens at a fixed instant.

    Raises
    ------
    TooLarge
        More than `MOST_STEPS` steps.
    """
    lengths = [phase.duration.exact if phase.duration is not None else Fraction(0) for phase in model.phases]
    repeats = bool(model.phases) and model.phases[-1].repeat
    recurring = [*_visits(model), *_tests(model)]
    periods = [each.every for each in recurring]
    if len(lengths) > 1:
        round_trip = sum(lengths, Fraction(0))
        ends = [sum(lengths[: number + 1], Fraction(0)) for number in range(len(lengths))]
        if repeats:
            periods.append(round_trip)
            begun = [(number + 1) % len(lengths) for number in range(len(lengths))]
            recurring = [
                *(
                    _Recurring(Action("phase", number), end, round_trip, 0)
                    for number, end in zip(begun, ends, strict=True)
                ),
                *recurring,
            ]
    phases = _Phases(tuple(lengths), repeats)
    period = joint_period(periods)
    if period is None:
        return None if len(lengths) < 2 else _once(phases)
    settled = max((each.first - each.every for each in recurring), default=Fraction(0))
    settled = max(settled, Fraction(0), Fraction(0) if repeats else phases.before_last)
    expected = sum((settled + 2 * period) / each.every for each in recurring)
    if expected > MOST_STEPS:
        raise TooLarge(
            f"a timetable of about {int(expected):,} instants before it repeats; at most {MOST_STEPS:,} are laid out: "
            "make the intervals simple multiples of each other, or the first tests earlier"
        )
    happening = _instants(recurring, phases, settled + 2 * period)
    times = sorted(happening)
    begin = settled if settled + period in happening else next(time for time in times if time > settled)
    return _laid_out(happening, times, begin, period, phases)


def _visits(model: Model) -> Iterator[_Recurring]:
    for name, group in model.groups.items():
        if isinstance(group.repair_when, RepairAtVisits):
            every = group.repair_when.every.exact
            yield _Recurring(Action("visit", name), every, every, 0)


def _tests(model: Model) -> Iterator[_Recurring]:
    for rank, (name, test) in enumerate(model.tests.items()):
        first, every = test.first.exact, test.interval.exact
        if test.duration is None or test.duration.is_zero:
            yield _Recurring(Action("test", name), first, every, rank)
        else:
            yield _Recurring(Action("test_start", name), first, every, rank)
            yield _Recurring(Action("test_end", name), first + test.duration.exact, every, rank)


@dataclass(frozen=True)
class _Phases:
    """Which phase holds when."""

    lengths: tuple[Fraction, ...]
    repeats: bool

    @property
    def before_last(self) -> Fraction:
        """When the last phase begins for the first time."""
        return sum(self.lengths[:-1], Fraction(0))

    def holding(self, time: Fraction) -> int:
        """Return the phase that holds just after a time."""
        if self.repeats and len(self.lengths) > 1:
            time %= sum(self.lengths, Fraction(0))
        for number, length in enumerate(self.lengths[:-1]):
            if time < length:
                return number
            time -= length
        return max(0, len(self.lengths) - 1)


def _instants(
    recurring: list[_Recurring], phases: _Phases, until: Fraction
) -> dict[Fraction, list[tuple[int, int, Action]]]:
    """Return what happens when, each with its place in the order of its instant."""
    found: dict[Fraction, list[tuple[int, int, Action]]] = {}
    for each in recurring:
        time = each.first
        while time <= until:
            found.setdefault(time, []).append((_ORDER[each.action.kind], each.rank, each.action))
            time += each.every
    if not phases.repeats:
        time = Fraction(0)
        for number, length in enumerate(phases.lengths[:-1]):
            time += length
            found.setdefault(time, []).append((_ORDER["phase"], 0, Action("phase", number + 1)))
    return found


def _once(phases: _Phases) -> Timetable:
    """Lay out phases of which the last goes on, without anything that repeats."""
    last = len(phases.lengths) - 1
    steps = tuple(Step(number, length, number) for number, length in enumerate(phases.lengths[:-1]))
    return Timetable(steps, (), tuple((Action("phase", number + 1),) for number in range(last)))


def _laid_out(
    happening: dict[Fraction, list[tuple[int, int, Action]]],
    times: list[Fraction],
    begin: Fraction,
    period: Fraction,
    phases: _Phases,
) -> Timetable:
    numbers: dict[tuple[Action, ...], int] = {}
    prefix: list[Step] = []
    cycle: list[Step] = []
    before = Fraction(0)
    cuts = {time for time in times if time <= begin + period} | {begin, begin + period}
    for time in sorted(cuts - {Fraction(0)}):
        instant: int | None = None
        if time in happening:
            # Only phase boundary, visits and tests are ordered among each other; visits keep the order of the spec.
            ordered = sorted(happening[time], key=lambda each: each[:2])
            instant = numbers.setdefault(tuple(action for _, _, action in ordered), len(numbers))
        step = Step(phases.holding(before), time - before, instant)
        (prefix if time <= begin else cycle).append(step)
        before = time
    return Timetable(tuple(prefix), tuple(cycle), tuple(numbers))
