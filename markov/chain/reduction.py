"""The part of a course that can be occupied: all other states left out, all absorbing ones made one.

A chain that is stopped at its first failure often has far fewer states than the chain as it runs.  What absorbs in one
segment may live in another, so a state is kept where it can be occupied in any segment; arrows and chances that lead
into states that absorb at that moment lead into one added state.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from markov.chain.bounds import Flags, Floats
from markov.chain.carried import Weights
from markov.chain.course import Course, Segment
from markov.chain.doubled import zeros
from markov.chain.generator import Generator, aggregate
from markov.chain.jumps import Jump, jump


@dataclass(frozen=True, eq=False)
class Reduction:
    """A smaller course with its place in the whole one.

    Attributes
    ----------
    course : Course
        m + 1 states where anything absorbs, the last being absorbing; m otherwise.
    members : int64[m]
        The states kept, in the whole course of n states.
    n : int
    originals : dict
        Segment of the whole course by the identity of the smaller one.
    """

    course: Course
    members: NDArray[np.int64]
    n: int
    originals: dict[int, Segment]

    def shrunk(self, weights: Weights) -> Weights:
        """Return weights of the whole course on the states kept."""
        size = self.course.n
        values = zeros(size)
        values.high[: self.members.size], values.low[: self.members.size] = weights.values.at(self.members)
        possible = np.zeros(size, dtype=bool)
        possible[: self.members.size] = weights.possible[self.members]
        return Weights(values, weights.relative, weights.absolute, possible, weights.method)

    def spread(self, weights: Weights) -> Weights:
        """Return weights on the states kept as weights of the whole course."""
        values, possible, count = zeros(self.n), np.zeros(self.n, dtype=bool), self.members.size
        values.high[self.members], values.low[self.members] = weights.values.at(slice(0, count))
        possible[self.members] = weights.possible[:count]
        return Weights(values, weights.relative, weights.absolute, possible, weights.method)

    def rows(self, values: Floats) -> Floats:
        """Return values per state on the states kept, 0 for the added one."""
        taken = np.zeros((self.course.n, *values.shape[1:]))
        taken[: self.members.size] = values[self.members]
        return taken


def reduced(course: Course, begin: Flags) -> Reduction:
    """Return the part of a course that can be occupied from some states at time zero.

    Parameters
    ----------
    course : Course
    begin : bool[n]
    """
    occupied = _occupied(course, begin)
    stops = any(each.stopped is not None or each.arriving is not None for each in course.distinct())
    members = np.flatnonzero(occupied).astype(np.int64)
    if members.size == course.n and not stops:
        return Reduction(course, members, course.n, {id(each): each for each in course.distinct()})
    number = np.full(course.n, -1, dtype=np.int64)
    number[members] = np.arange(members.size)
    size = members.size + (1 if stops else 0)
    made: dict[int, Segment] = {}
    generators: dict[tuple[int, bytes], Generator] = {}
    jumps: dict[tuple[int, bytes, bytes], Jump] = {}
    for segment in course.distinct():
        stopped, refused = segment.absorbing(), segment.refused()
        rates = id(segment.generator), stopped.tobytes()
        if rates not in generators:
            generators[rates] = _fewer_rates(segment, number, size)
        chances: Jump | None = None
        if segment.jump is not None:
            key = id(segment.jump), stopped.tobytes(), refused.tobytes()
            if key not in jumps:
                jumps[key] = _fewer_chances(segment, number, size)
            chances = jumps[key]
        made[id(segment)] = Segment(
            generators[rates],
            segment.hours,
            chances,
            _rows(segment.rewards, members, size),
            segment.rewards_error,
            _rows(segment.at_jump, members, size),
            segment.at_jump_error,
            _flags(stopped, members, size) if stops else None,
            _flags(refused, members, size) if stops else None,
        )
    last = None if course.last is None else made[id(course.last)]
    smaller = Course(
        tuple(made[id(each)] for each in course.prefix), tuple(made[id(each)] for each in course.cycle), last
    )
    originals = {id(made[id(each)]): each for each in course.distinct()}
    return Reduction(smaller, members, course.n, originals)


def _occupied(course: Course, begin: Flags) -> Flags:
    """Return the states that can be occupied in any segment."""
    flags = begin & ~course.first().absorbing()
    found = flags.copy()
    for segment in course.prefix:
        found |= flags | segment.reach_before(flags)
        flags = segment.reach(flags)
    if course.last is not None:
        return found | flags | course.last.reach_before(flags)
    flags = course.closure(flags)
    for segment in course.cycle:
        found |= flags | segment.reach_before(flags)
        flags = segment.reach(flags)
    return found | flags


def _fewer_rates(segment: Segment, number: NDArray[np.int64], size: int) -> Generator:
    chain, stopped = segment.generator, segment.absorbing()
    into = np.where(stopped, size - 1, number)
    keep = (number[chain.source] >= 0) & ~stopped[chain.source] & (into[chain.target] >= 0)
    source, target = number[chain.source[keep]], into[chain.target[keep]]
    rates = chain.rates.at(keep)
    return aggregate(size, source, target, rates.high, rates.low, rate_error=chain.rate_error)


def _fewer_chances(segment: Segment, number: NDArray[np.int64], size: int) -> Jump:
    whole, stopped, refused = segment.jump, segment.absorbing(), segment.refused()
    assert whole is not None
    into = np.where(refused, size - 1, number)
    keep = (number[whole.source] >= 0) & ~stopped[whole.source]
    # A state that is kept but cannot be occupied just now may jump to one that is not kept; it has no weight then.
    lost = np.zeros(number.size, dtype=bool)
    lost[whole.source[keep & (into[whole.target] < 0)]] = True
    keep &= ~lost[whole.source]
    source, target, chance = number[whole.source[keep]], into[whole.target[keep]], whole.chance.at(keep)
    return jump(size, source, target, chance.high, chance.low, error=whole.error)


def _rows(values: Floats, members: NDArray[np.int64], size: int) -> Floats:
    taken = np.zeros((size, values.shape[1]))
    taken[: members.size] = values[members]
    return taken


def _flags(flags: Flags, members: NDArray[np.int64], size: int) -> Flags:
    """Return flags on the states kept; the added state absorbs."""
    taken = np.ones(size, dtype=bool)
    taken[: members.size] = flags[members]
    return taken
