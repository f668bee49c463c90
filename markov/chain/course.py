"""A course of segments: a chain that runs at one set of rates after another, with jumps at fixed instants in between.

A prefix of segments is passed once; then a cycle of segments repeats for ever, or, where there is none, the rates of
one last segment go on.  Which states can be entered is a question of structure and is answered without numbers.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from markov.chain.bounds import Flags, Floats
from markov.chain.generator import Generator
from markov.chain.jumps import Jump
from markov.errors import UsageError


@dataclass(frozen=True, eq=False)
class Segment:
    """One stretch of time at fixed rates, with the jump at its end.

    Segments that are the same object are worked out once; equal stretches should share one.

    Attributes
    ----------
    generator : Generator
        n states.
    hours : Fraction
        Length, exact, positive; of no meaning in a last segment that goes on.
    jump : Jump or None
        What happens at the end.
    rewards : float64[n, c]
        Earned per unit of time, relative error `rewards_error`.
    at_jump : float64[n, c]
        Earned at the jump, by the state before it, relative error `at_jump_error`.
    stopped : bool[n] or None
        States that absorb during the segment.
    arriving : bool[n] or None
        States that absorb at once after the jump: the `stopped` ones of what follows.
    """

    generator: Generator
    hours: Fraction
    jump: Jump | None = None
    rewards: Floats = field(default_factory=lambda: np.zeros((0, 0)))
    rewards_error: float = 0.0
    at_jump: Floats = field(default_factory=lambda: np.zeros((0, 0)))
    at_jump_error: float = 0.0
    stopped: Flags | None = None
    arriving: Flags | None = None

    def __post_init__(self) -> None:
        n = self.generator.n
        if self.hours <= 0:
            raise UsageError(f"a segment of {float(self.hours)}: expected a length above zero")
        if self.jump is not None and self.jump.n != n:
            raise UsageError(f"a jump between {self.jump.n} states for {n} states")
        for name in ("rewards", "at_jump"):
            given = getattr(self, name)
            if given.size == 0:
                object.__setattr__(self, name, np.zeros((n, max(self.rewards.shape[1], self.at_jump.shape[1]))))
        if self.rewards.shape != self.at_jump.shape or self.rewards.shape[0] != n:
            raise UsageError(f"rewards of shapes {self.rewards.shape} and {self.at_jump.shape} for {n} states")

    @property
    def n(self) -> int:
        """Number of states."""
        return self.generator.n

    def none(self) -> Flags:
        """Return flags for no state."""
        return np.zeros(self.n, dtype=bool)

    def absorbing(self) -> Flags:
        """States that absorb during the segment, bool[n]."""
        return self.none() if self.stopped is None else self.stopped

    def refused(self) -> Flags:
        """States that absorb at once after it, bool[n]."""
        return self.none() if self.arriving is None else self.arriving

    def reach_before(self, flags: Flags) -> Flags:
        """Return the states that can be occupied at the end, before the jump, from some at the beginning."""
        stopped = self.absorbing()
        return self.generator.reachable(flags & ~stopped, blocked=stopped) & ~stopped

    def reach(self, flags: Flags) -> Flags:
        """Return the states that can be occupied after the jump."""
        before = self.reach_before(flags)
        after = before if self.jump is None else self.jump.reach(before)
        return after & ~self.refused()

    def reach_back(self, flags: Flags) -> Flags:
        """Return the states at the beginning from which some others can be occupied after the jump."""
        stopped = self.absorbing()
        allowed = flags & ~self.refused()
        before = (allowed if self.jump is None else self.jump.reach_back(allowed)) & ~stopped
        return self.generator.without_exits(stopped).reversed().reachable(before) & ~stopped

    def fatal(self) -> Flags:
        """Return the states at the beginning from which absorption within the segment is possible."""
        stopped = self.absorbing()
        refused = self.refused()
        before = (refused if self.jump is None else self.jump.reach_back(refused)) | stopped
        return self.generator.without_exits(stopped).reversed().reachable(before)


@dataclass(frozen=True, eq=False)
class Course:
    """Segments in their order.

    Attributes
    ----------
    prefix : tuple of Segment
        Passed once.
    cycle : tuple of Segment
        Repeated after that; empty where `last` goes on instead.
    last : Segment or None
    """

    prefix: tuple[Segment, ...]
    cycle: tuple[Segment, ...]
    last: Segment | None = None

    def __post_init__(self) -> None:
        if bool(self.cycle) == (self.last is not None):
            raise UsageError("a course ends in a cycle or in one last segment: exactly one of the two")
        if len({(each.n, each.rewards.shape[1]) for each in self.distinct()}) != 1:
            raise UsageError("segments of one course differ in their states or rewards")

    def distinct(self) -> tuple[Segment, ...]:
        """Return every segment once."""
        every = (*self.prefix, *self.cycle, *(() if self.last is None else (self.last,)))
        return tuple({id(each): each for each in every}.values())

    @property
    def n(self) -> int:
        """Number of states."""
        return self.distinct()[0].n

    @property
    def rewards(self) -> int:
        """Number of rewards."""
        return int(self.distinct()[0].rewards.shape[1])

    @property
    def period(self) -> Fraction:
        """Length of the cycle."""
        return sum((each.hours for each in self.cycle), Fraction(0))

    @property
    def before(self) -> Fraction:
        """Length of the prefix."""
        return sum((each.hours for each in self.prefix), Fraction(0))

    def first(self) -> Segment:
        """Return the segment that time zero belongs to."""
        return self.distinct()[0]

    def entered(self, begin: Flags) -> Flags:
        """Return the states that can be occupied at the beginning of some cycle, or of the last segment."""
        flags = passed(self.prefix, begin & ~self.first().absorbing())
        return flags if not self.cycle else self.closure(flags)

    def closure(self, flags: Flags) -> Flags:
        """Return the states that can be occupied at the beginning of a cycle, from some at the beginning of one."""
        found = flags.copy()
        fresh = flags
        while fresh.any():
            fresh = passed(self.cycle, fresh) & ~found
            found |= fresh
        return found

    def closure_back(self, flags: Flags) -> Flags:
        """Return the states at the beginning of a cycle from which some others there can be occupied, now or later."""
        found = flags.copy()
        fresh = flags
        while fresh.any():
            for segment in reversed(self.cycle):
                fresh = segment.reach_back(fresh)
            fresh = fresh & ~found
            found |= fresh
        return found

    def closed_classes(self, begin: Flags) -> list[Flags]:
        """Return the closed classes of states at the beginnings of cycles that can be entered, each as bool[n].

        Parameters
        ----------
        begin : bool[n]
            States possible at the beginning of a cycle.
        """
        left = self.closure(begin)
        found: list[Flags] = []
        while left.any():
            ahead = self.closure(_single(int(np.flatnonzero(left)[0]), left.size))
            while True:
                chosen = _single(int(np.flatnonzero(ahead)[0]), left.size)
                ahead = self.closure(chosen)
                back = self.closure_back(chosen)
                if not (ahead & ~back).any():
                    break
                ahead = ahead & ~back
            found.append(ahead)
            left &= ~self.closure_back(ahead)
        return found

    def doomed(self) -> Flags:
        """Return the states at the beginning of a cycle from which absorption is possible, now or later, bool[n]."""
        flags = np.zeros(self.n, dtype=bool)
        for segment in reversed(self.cycle):
            flags = segment.fatal() | segment.reach_back(flags)
        return self.closure_back(flags)


def passed(segments: Iterable[Segment], flags: Flags) -> Flags:
    """Return the states that can be occupied after some segments."""
    for segment in segments:
        flags = segment.reach(flags)
    return flags


def _single(state: int, n: int) -> Flags:
    flags = np.zeros(n, dtype=bool)
    flags[state] = True
    return flags
