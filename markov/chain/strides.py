"""One segment carried out on weights: dense in double-double for small chains, by `transient` for any other.

The dense way prepares a matrix once and then serves any number of starts, powers of a whole cycle included.  The other
costs one transient solution for each start.  Both count the errors in the sense of `markov.chain.carried`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cached_property

import numpy as np

from markov.chain import uniformisation
from markov.chain.bounds import Flags, Floats, Vector
from markov.chain.carried import SLACK, WIDEST, Amounts, Weights, joined
from markov.chain.course import Segment
from markov.chain.doubled import ADD, UNDERFLOW, UNIT, Doubled, add, plain, product, product_error, zeros
from markov.chain.exponential import Columns, Exponential, exponential
from markov.chain.generator import Restriction
from markov.chain.transient import LADDER_ALWAYS, Method, transient
from markov.errors import NotReached

#: Up to this many states segments are prepared as matrices.
LARGEST_DENSE = 160
#: Elementary multiplications of about a second.
_QUICK = 1e9
#: A relative error of matrices beyond this is a failure.
_WORST = 1e-10
_DENSE = "scaling and squaring in double-double"


@dataclass(frozen=True, eq=False)
class Transfer:
    """What happens over a stretch of time, from each of n states.

    Attributes
    ----------
    moves : Doubled[n, n]
        Chances to be in each state in the end; relative error `relative`, and `absolute` of the sum over a row.
    gains : Columns
        What is absorbed and earned, Doubled[n, 1 + c].
    """

    moves: Doubled
    relative: float
    absolute: float
    gains: Columns

    def then(self, other: Transfer) -> Transfer:
        """Return both stretches, one after the other."""
        n = self.moves.high.shape[0]
        mu = product_error(n)
        later = product(self.moves, other.gains.values)
        gains = Columns(
            add(self.gains.values, later),
            (max(self.gains.relative, self.relative + other.gains.relative + mu) + ADD) * SLACK,
            (
                self.gains.absolute
                + self.absolute * other.gains.largest
                + other.gains.absolute * (1.0 + self.absolute)
                + n * UNDERFLOW
            )
            * SLACK,
        )
        relative = (self.relative + other.relative + mu) * SLACK
        if not max(relative, gains.relative) < _WORST:
            raise NotReached(f"so many segments after each other that no bound of {_WORST:g} is left")
        return Transfer(
            product(self.moves, other.moves),
            relative,
            (self.absolute + other.absolute + n * n * UNDERFLOW) * SLACK,
            gains,
        )

    def carry(self, start: Weights, possible: Flags, fed: Flags) -> tuple[Weights, Amounts]:
        """Carry weights through.

        Parameters
        ----------
        start : Weights
        possible : bool[n]
            The states that can be occupied in the end.
        fed : bool[1 + c]
            Which gains can be positive.
        """
        row, mu = start.values.at((None, slice(None))), product_error(start.values.high.size)
        after, earned = product(row, self.moves).at(0), product(row, self.gains.values).at(0)
        under = start.values.high.size * UNDERFLOW
        weights = Weights(
            after,
            joined(start.relative, self.relative, mu),
            (start.absolute + start.mass * self.absolute + start.values.high.size * under) * SLACK,
            possible,
            _DENSE,
        )
        amounts = _earned(start, earned, joined(start.relative, self.gains.relative, mu), self.gains, fed)
        return weights, amounts


def _earned(start: Weights, values: Doubled, relative: float | None, gains: Columns, fed: Flags) -> Amounts:
    """Return what is earned; where nothing can feed a column, flags `fed`, it is exactly 0."""
    most = (gains.values.high.max(axis=0, initial=0.0) + gains.absolute) * SLACK
    off = start.absolute * most + start.mass * gains.absolute + start.values.high.size * UNDERFLOW
    return Amounts(values, relative, np.where(fed, off * SLACK, 0.0), _DENSE)


@dataclass(frozen=True, eq=False)
class Stride:
    """One segment, ready to be carried out; `dense` tells how.

    `shared` keeps what segments of the same rates, stopped states and length have in common.
    """

    segment: Segment
    dense: bool
    method: Method | None = None
    shared: dict[tuple[int, bytes, Fraction], Exponential] = field(default_factory=dict)

    @cached_property
    def _part(self) -> Restriction:
        stopped = self.segment.absorbing()
        return self.segment.generator.restricted(np.flatnonzero(~stopped), np.where(stopped, 0, -1), 1)

    @cached_property
    def _matrix(self) -> Exponential:
        key = id(self.segment.generator), self.segment.absorbing().tobytes(), self.segment.hours
        if key not in self.shared:
            part = self._part
            loss = Doubled(part.absorption.high[:, 0], part.absorption.low[:, 0])
            self.shared[key] = exponential(part.chain, loss, part.absorption_error, self.segment.hours)
        return self.shared[key]

    def _rates(self) -> tuple[Doubled, float]:
        """Return absorption beside rewards per unit of time over the states that do not absorb."""
        part = self._part
        rewards = self.segment.rewards[part.members]
        high = np.concatenate((part.absorption.high, rewards), axis=1)
        low = np.concatenate((part.absorption.low, np.zeros_like(rewards)), axis=1)
        return Doubled(high, low), max(part.absorption_error, self.segment.rewards_error)

    @cached_property
    def run(self) -> Transfer:
        """The segment without its jump, over all n states."""
        members, made = self._part.members, self._matrix
        moves = zeros(self.segment.n, self.segment.n)
        inside = np.ix_(members, members)
        moves.high[inside], moves.low[inside] = made.moves
        found = made.gains(*self._rates())
        gains = zeros(self.segment.n, found.values.high.shape[1])
        gains.high[members], gains.low[members] = found.values
        return Transfer(moves, made.relative, made.absolute, Columns(gains, found.relative, found.absolute))

    @cached_property
    def at_jump(self) -> tuple[Floats, float]:
        """What is absorbed and earned at the jump by the state before it, float64[n, 1 + c], with relative error."""
        segment = self.segment
        every = np.ones(segment.n, dtype=bool)
        lost, error = segment.refused().astype(np.float64), 0.0
        if segment.jump is not None:
            lost, error = segment.jump.passages(every, segment.refused())
        lost[segment.absorbing()] = 0.0
        return np.concatenate((lost[:, None], segment.at_jump), axis=1), max(error, segment.at_jump_error)

    @cached_property
    def whole(self) -> Transfer:
        """The segment with its jump, over all n states."""
        segment = self.segment
        gains, error = self.at_jump
        moves, off = plain(np.eye(segment.n)), 0.0
        if segment.jump is not None:
            moves, off = segment.jump.dense(), segment.jump.error
        kept = ~segment.refused()
        moves = Doubled(moves.high * kept, moves.low * kept)
        return self.run.then(Transfer(moves, off, 0.0, Columns(plain(gains), error, 0.0)))

    def through(self, start: Weights) -> tuple[Weights, Amounts]:
        """Carry weights to the end of the segment, before its jump."""
        start = start.without(self.segment.absorbing())
        if not start.values.high.any() and start.absolute == 0.0:
            return start, _none(self.segment)
        possible = self._reached(start.possible)
        if self.dense:
            return self.run.carry(start, possible, self.feeding(start.possible))
        return self._by_transient(self.segment, start, self.segment.hours)

    def feeding(self, possible: Flags) -> Flags:
        """Return whether anything can be absorbed, and each reward be earned, from some states, bool[1 + c]."""
        known: dict[bytes, Flags] = self.__dict__.setdefault("_feeding", {})
        key = possible.tobytes()
        if key not in known:
            inside = self._reached(possible)[self._part.members]
            known[key] = _any(self._rates()[0].high[inside])
        return known[key]

    def leap(self, before: Weights) -> tuple[Weights, Amounts]:
        """Carry weights through the jump."""
        segment = self.segment
        gains, error = self.at_jump
        earned = product(before.values.at((None, slice(None))), plain(gains)).at(0)
        columns, fed = Columns(plain(gains), error, 0.0), _any(gains[before.possible])
        amounts = _earned(before, earned, joined(before.relative, error, product_error(segment.n)), columns, fed)
        amounts = replace(amounts, method=before.method)
        if segment.jump is None:
            return before.without(segment.refused()), amounts
        after = Weights(
            segment.jump.forwards(before.values),
            joined(before.relative, segment.jump.rounding),
            (before.absolute + segment.jump.source.size * UNDERFLOW) * SLACK,
            segment.jump.reach(before.possible),
            before.method,
        )
        return after.without(segment.refused()), amounts

    def partly(self, start: Weights, hours: Fraction) -> tuple[Weights, Amounts]:
        """Carry weights to a moment within the segment."""
        start = start.without(self.segment.absorbing())
        if not start.values.high.any() and start.absolute == 0.0:
            return start, _none(self.segment)
        return self._by_transient(self.segment, start, hours)

    def earned(self, start: Weights, rewards: Floats, error: float) -> Amounts:
        """Return the integral of other rewards, float64[n, k], over the segment."""
        if not self.dense:
            asked = replace(self.segment, rewards=rewards, rewards_error=error, at_jump=np.zeros_like(rewards))
            found = Stride(asked, False, self.method)._by_transient(asked, start, asked.hours)[1]
            return Amounts(found.values.at(slice(1, None)), found.relative, found.absolute[1:], found.method)
        spent = self.spent(start)
        row = product(spent.values.at((None, slice(None))), plain(rewards)).at(0)
        columns = Columns(plain(rewards), error, 0.0)
        relative = joined(spent.relative, error, product_error(self.segment.n))
        return _earned(spent, row, relative, columns, _any(rewards[spent.possible]))

    def spent(self, start: Weights) -> Weights:
        """Return the time spent in each state over the segment (dense only)."""
        return self.spent_from([start])[0]

    def moves_like(self, other: Stride) -> bool:
        """Tell whether another segment moves by the same matrix (dense only)."""
        return self._matrix is other._matrix

    def spent_from(self, starts: Sequence[Weights]) -> list[Weights]:
        """Return the time spent in each state over the segment from each of several starts (dense only)."""
        members = self._part.members
        inside = [start.values.at(members) for start in starts]
        stacked = Doubled(np.stack([each.high for each in inside]), np.stack([each.low for each in inside]))
        values, relative, off = self._matrix.spent(stacked)
        found = []
        for number, start in enumerate(starts):
            spread = zeros(self.segment.n)
            spread.high[members], spread.low[members] = values.at(number)
            absolute = (start.absolute * float(self.segment.hours) + off) * SLACK
            relative_here = joined(start.relative, relative)
            found.append(Weights(spread, relative_here, absolute, self._reached(start.possible), _DENSE))
        return found

    def ageing(self, start: Weights) -> Amounts:
        """Return the integral of the time since the segment began, over the time before absorption (dense only)."""
        part = self._part
        twice = self._matrix.ages
        inside = replace(start, values=start.values.at(part.members))
        row = product(inside.values.at((None, slice(None))), twice.values).at(0)
        relative = joined(start.relative, twice.relative, product_error(part.chain.n))
        return _earned(inside, row, relative, twice, np.ones(1, dtype=bool))

    def _by_transient(self, segment: Segment, start: Weights, hours: Fraction) -> tuple[Weights, Amounts]:
        """Carry weights through some time of a segment, their floats taken as an exact start."""
        first = start.values.high + start.values.low
        count = 1 + segment.rewards.shape[1]
        possible, fed = self._reached(start.possible), self.feeding(start.possible)
        most = np.concatenate(([1.0], segment.rewards.max(axis=0, initial=0.0) * float(hours))) * fed
        if not first.any():
            lost = Weights(plain(first), start.relative, start.absolute, possible, start.method)
            return lost, Amounts(zeros(count), start.relative, start.absolute * most * SLACK, start.method)
        found = transient(
            segment.generator,
            Vector(first, 0.0, 0.0, "given", first > 0.0, None),
            [hours],
            [segment.rewards[:, number] for number in range(count - 1)],
            absorbing=segment.stopped,
            reward_error=segment.rewards_error,
            method=self.method or self._quickest(segment, hours),
        )
        states, integrals = found.states[0], found.integrals[0]
        weights = Weights(
            plain(states.values),
            joined(start.relative, UNIT, _to_exact(states.relative_error)),
            (start.absolute + segment.n * states.absolute_error) * SLACK,
            possible,
            found.method,
        )
        values, off = np.zeros(count), np.zeros(count)
        errors: list[float | None] = [_to_exact(integrals.relative_error) if count > 1 else 0.0]
        values[1:], off[1:] = integrals.values, integrals.absolute_error
        if segment.stopped is not None:
            absorbed = found.absorbed[0]
            values[0], off[0] = float(absorbed.values.sum()), absorbed.absolute_error
            errors.append(_to_exact(absorbed.relative_error))
        worst = None if any(error is None for error in errors) else max(error or 0.0 for error in errors)
        relative = joined(start.relative, UNIT, worst)
        return weights, Amounts(plain(values), relative, (off * fed + start.absolute * most) * SLACK, found.method)

    def _quickest(self, segment: Segment, hours: Fraction) -> Method | None:
        """Return uniformisation where it takes about a second: unlike other methods it bounds the weights of states."""
        if self.dense:
            return "ladder"
        chain = segment.generator
        jumps = uniformisation.expected_jumps(chain, None, hours)
        work = (jumps + 200.0) * (chain.source.size + 4.0 * chain.n + 10_000.0)
        return "uniformisation" if chain.n > LADDER_ALWAYS and jumps < 1e6 and work < _QUICK else None

    def _reached(self, possible: Flags) -> Flags:
        known: dict[bytes, Flags] = self.__dict__.setdefault("_known", {})
        key = possible.tobytes()
        if key not in known:
            known[key] = self.segment.reach_before(possible)
        return known[key]


def _any(values: Floats) -> Flags:
    """Whether a column has a positive entry, bool[c]."""
    return np.asarray((values > 0.0).any(axis=0))


def _none(segment: Segment) -> Amounts:
    count = 1 + segment.rewards.shape[1]
    return Amounts(zeros(count), 0.0, np.zeros(count), "")


def _to_exact(relative: float | None) -> float | None:
    """Turn an error relative to the computed number into one relative to the exact one."""
    return None if relative is None or relative > WIDEST else relative / (1.0 - relative) * SLACK
