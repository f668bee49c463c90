"""A course of segments carried out: along its prefix, through whole cycles, into a cycle, for one start or many.

Whole cycles of small chains are passed by powers of one matrix, so their number hardly matters.  The cycle as a map on
weights, which is all that `markov.chain.returning` asks for, is made here as well, with a likely state to ground it.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace
from fractions import Fraction
from functools import cached_property

import numpy as np

from markov.chain import elimination, uniformisation
from markov.chain.bounds import Flags
from markov.chain.carried import SLACK, Amounts, Weights, nothing
from markov.chain.course import Course, Segment, passed
from markov.chain.doubled import UNDERFLOW, Doubled, add, plain, product, product_error
from markov.chain.exponential import Exponential
from markov.chain.returning import Cycle, Image, Kept, visits
from markov.chain.strides import LARGEST_DENSE, Stride, Transfer
from markov.chain.transient import Method, ladder_seconds
from markov.errors import NotReached

#: Seconds that matrices may take for chains of more than `LARGEST_DENSE` states, and the most states of a matrix.
PATIENCE = 10.0
LARGEST_MATRIX = 500
#: Whole cycles from which on they are passed by powers.
_MANY = 6
#: Cycles that the weights at the beginning of one may take to settle, and their bound.
_ROUNDS = 600
#: Entries of a cycle's matrix below this are left out where a solution is only guessed.
_SMALL = 1e-60

#: Transitions followed, beyond which no result is tried for: some ten seconds each time.
MOST_WORK = 5e9


class Runner:
    """A course ready to be carried out.

    Parameters
    ----------
    course : Course
    method : str, optional
        Method for values at a time, where segments are not carried out by matrices.
    largest_dense : int
        Number of states up to which segments are prepared as matrices.
    cycles : float
        How many cycles will be followed where there are no matrices.
    """

    def __init__(
        self,
        course: Course,
        method: Method | None = None,
        largest_dense: int = LARGEST_DENSE,
        cycles: float = 3.0,
    ) -> None:
        self.course = course
        self.dense = method in (None, "ladder") and self._cheap(largest_dense)
        shared: dict[tuple[int, bytes, Fraction], Exponential] = {}
        self._strides = {id(each): Stride(each, self.dense, method, shared) for each in course.distinct()}
        self._powers: list[Transfer] = []
        if not self.dense and method is None:
            self._must_end(cycles)

    def _must_end(self, cycles: float) -> None:
        """Refuse what would take many minutes: segments are followed one by one, as many jumps as their rates tell."""
        work = 0.0
        for segments, times in ((self.course.prefix, 1.0), (self.course.cycle, cycles)):
            for segment in segments:
                chain = segment.generator
                jumps = uniformisation.expected_jumps(chain, None, segment.hours)
                work += times * (jumps + 200.0) * (chain.source.size + 4.0 * chain.n + 10_000.0)
        if work > MOST_WORK:
            raise NotReached(
                f"{self.course.n:,} states with fixed instants and rates as unlike as here would take many minutes; "
                "separate specs for what shares nothing but the calendar, or fewer groups in one, would help"
            )

    def _cheap(self, largest: int) -> bool:
        """Whether matrices are worth their time: always for small chains, where they are few for larger ones."""
        n = self.course.n
        if n <= largest:
            return True
        if largest == 0 or n > LARGEST_MATRIX:
            return False
        matrices = {(id(each.generator), each.absorbing().tobytes(), each.hours) for each in self.course.distinct()}
        exits = max(float(each.generator.exits.high.max(initial=0.0)) for each in self.course.distinct())
        longest = max(each.hours for each in self.course.distinct())
        pieces = len(matrices) + len({id(each) for each in self.course.cycle}) / 20.0
        return pieces * ladder_seconds(n, exits * float(longest)) < PATIENCE

    def stride(self, segment: Segment) -> Stride:
        """Return one segment, ready."""
        return self._strides[id(segment)]

    def nothing(self) -> Amounts:
        """Return amounts of 0: absorbed, then each reward."""
        return nothing(1 + self.course.rewards)

    def pass_through(self, segments: Sequence[Segment], weights: Weights) -> tuple[Weights, Amounts]:
        """Carry weights through whole segments with their jumps."""
        amounts = self.nothing()
        for segment in segments:
            stride = self.stride(segment)
            weights, earned = stride.through(weights)
            weights, leapt = stride.leap(weights)
            amounts = amounts + earned + leapt
        return weights, amounts

    def states_between(self, segments: Sequence[Segment], weights: Weights) -> Iterator[tuple[Weights, Weights]]:
        """Yield for each of some segments the weights at its beginning, and at its end before the jump."""
        for segment in segments:
            stride = self.stride(segment)
            before, _ = stride.through(weights)
            yield weights, before
            weights, _ = stride.leap(before)

    # --- whole cycles ----------------------------------------------------------------------------------------------

    @cached_property
    def cycle(self) -> Transfer:
        """The whole cycle as a matrix (dense only); equal segments in a row are passed by powers."""
        found: Transfer | None = None
        position, cycle = 0, self.course.cycle
        while position < len(cycle):
            count = 1
            while position + count < len(cycle) and cycle[position + count] is cycle[position]:
                count += 1
            piece = _power(self.stride(cycle[position]).whole, count)
            found = piece if found is None else found.then(piece)
            position += count
        assert found is not None
        return found

    def _cycles(self, number: int) -> Transfer:
        """Return ``2**number`` cycles."""
        if not self._powers:
            self._powers.append(self.cycle)
        while len(self._powers) <= number:
            self._powers.append(self._powers[-1].then(self._powers[-1]))
        return self._powers[number]

    def pass_cycles(self, count: int, weights: Weights) -> tuple[Weights, Amounts]:
        """Carry weights through whole cycles."""
        amounts = self.nothing()
        if not self.dense or count < _MANY:
            for _ in range(count):
                weights, earned = self.pass_through(self.course.cycle, weights)
                amounts = amounts + earned
            return weights, amounts
        possible = self.course.closure(weights.possible)
        fed = self._feeding(possible)
        after = self.course.closure(passed(self.course.cycle, weights.possible))
        for number in range(count.bit_length()):
            if count >> number & 1:
                weights, earned = self._cycles(number).carry(weights, possible, fed)
                amounts = amounts + earned
        return replace(weights, possible=after).without(~after), amounts

    def _feeding(self, possible: Flags) -> Flags:
        fed = np.zeros(1 + self.course.rewards, dtype=bool)
        for segment in self.course.cycle:
            stride = self.stride(segment)
            before = segment.reach_before(possible)
            fed |= stride.feeding(possible) | (stride.at_jump[0][before] > 0.0).any(axis=0)
            possible = segment.reach(possible)
        return fed

    # --- the cycle as a map ----------------------------------------------------------------------------------------

    def as_map(self, members: Flags) -> Cycle:
        """Return the cycle as a map of weights at its beginning, which are 0 outside of some states."""
        if not self.dense:
            return self._by_strides(members)
        inside = np.flatnonzero(members)
        square = np.ix_(inside, inside)
        moves, whole = self.cycle.moves.at(square), self.cycle
        mu = product_error(inside.size)

        def carry(weights: Doubled) -> Image:
            high, low = np.zeros_like(weights.high), np.zeros_like(weights.high)
            row = product(weights.at(inside).at((None, slice(None))), moves)
            high[inside], low[inside] = row.high[0], row.low[0]
            mass = float(weights.high.sum()) * SLACK
            absolute = (mass * whole.absolute + inside.size**2 * UNDERFLOW) * SLACK
            return Image(Doubled(high, low), (whole.relative + mu) * SLACK, absolute)

        return carry

    def _by_strides(self, members: Flags) -> Cycle:
        def carry(weights: Doubled) -> Image:
            after, _ = self.pass_through(self.course.cycle, Weights(weights, 0.0, 0.0, members, ""))
            return Image(after.values, after.relative, after.absolute)

        return carry

    def hub(self, members: Flags, weights: Weights) -> int:
        """Return a state in which cycles of these states mostly begin, going on from some weights."""
        if not self.dense:
            for _ in range(5):
                weights, _ = self.pass_through(self.course.cycle, weights)
                largest = float(weights.values.high.max())
                if largest == 0.0:
                    break
                power = -math.frexp(largest)[1]
                weights = replace(weights, values=Doubled(*(np.ldexp(part, power) for part in weights.values)))
            return int(np.argmax(np.where(members, weights.values.high, -1.0)))
        inside = np.flatnonzero(members)
        matrix = self.cycle.moves.high[np.ix_(inside, inside)]
        largest = float(matrix.max())
        if largest < 1e-250:
            return int(inside[np.argmax(weights.values.high[inside])])
        matrix = matrix / largest + np.eye(inside.size)
        for _ in range(60):
            # Not by `@`: a threaded product of this size costs more than it saves beside other work.
            matrix = np.einsum("ij,jk->ik", matrix, matrix, optimize=False)
            matrix /= matrix.max()
        return int(inside[np.argmax(matrix.sum(axis=0))])

    def gathered(self, members: Flags, hub: int, source: Image) -> Kept:
        """Return the weights that gather at the beginnings of cycles before the next visit to a hub."""
        carry = self.as_map(members)
        if self.dense and np.count_nonzero(members) <= elimination.LARGEST_ELIMINATION:
            try:
                guess = self._eliminated(members, hub, source.values)
                return visits(carry, hub, members, source, rounds=_ROUNDS, candidate=guess)
            except NotReached:
                pass  # entries too small for the elimination; adding up cycle after cycle takes them as they are
        return visits(carry, hub, members, source, rounds=_ROUNDS)

    def _eliminated(self, members: Flags, hub: int, source: Doubled) -> Doubled:
        """Solve for the gathered weights by elimination, entries that hardly count left out."""
        inside = np.flatnonzero(members & (np.arange(members.size) != hub))
        moves = self.cycle.moves.at(np.ix_(inside, inside))
        keep = moves.high > _SMALL
        loss = self.cycle.moves.at((inside, hub))
        loss = add(loss, self.cycle.gains.values.at((inside, 0)))
        loss = Doubled(np.where(loss.high > _SMALL, loss.high, 0.0), np.where(loss.high > _SMALL, loss.low, 0.0))
        made = elimination.eliminate(Doubled(moves.high * keep, moves.low * keep), loss, self.cycle.relative)
        spread = plain(np.zeros(members.size))
        spread.high[inside], spread.low[inside] = made.row(source.at(inside))
        return spread

    # --- times -----------------------------------------------------------------------------------------------------

    def place(self, time: Fraction) -> tuple[int, int, Fraction]:
        """Return where a time falls: whole cycles passed, segment in the prefix or cycle, time since it began.

        Cycles are -1 within the prefix.  At an instant the time belongs to what follows the jump.
        """
        course = self.course
        for number, segment in enumerate(course.prefix):
            if time < segment.hours:
                return -1, number, time
            time -= segment.hours
        if not course.cycle:
            return 0, 0, time
        whole = math.floor(time / course.period)
        time -= whole * course.period
        for number, segment in enumerate(course.cycle):
            if time < segment.hours:
                return whole, number, time
            time -= segment.hours
        raise AssertionError("a time within the cycle is within one of its segments")

    def segment_at(self, time: Fraction) -> Segment:
        """Return the segment that a time belongs to."""
        cycles, number, _ = self.place(time)
        if cycles < 0:
            return self.course.prefix[number]
        if self.course.last is not None:
            return self.course.last
        return self.course.cycle[number]


def _power(transfer: Transfer, count: int) -> Transfer:
    found: Transfer | None = None
    while True:
        if count & 1:
            found = transfer if found is None else found.then(transfer)
        count >>= 1
        if not count:
            assert found is not None
            return found
        transfer = transfer.then(transfer)
