"""Values at given times: state probabilities, absorption, integrals of rewards.

The method is chosen by size and by the number of expected jumps:

==========================  =====================================================  =====================
method                      where                                                  bound
==========================  =====================================================  =====================
`ladder`                    up to `LADDER_ALWAYS` states; more if time allows      1e-15, any time
`uniformisation`            any size, few expected jumps (about 1e5)               1e-7 and better
`settling`                  any size and time, if the chain settles within reach   1e-7 and better
`windows`                   any size and time                                      1e-9 and better (see below)
`squaring`                  up to 1,000 states                                     none: an estimate
==========================  =====================================================  =====================

Anything else raises NotReached.

`windows` bounds absorption and integrals of rewards, and state probabilities where they have settled; elsewhere its
state probabilities are an estimate, as they are where parts of a chain are nearly uncoupled.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.chain import ladder, missions, settling, squaring, uniformisation
from markov.chain.bounds import Enclosure, Flags, Floats, Vector, distribution, relative_to_computed
from markov.chain.doubled import UNIT, Doubled, plain, total, total_error
from markov.chain.generator import Generator, Restriction
from markov.errors import NotReached, UsageError

Method = Literal["ladder", "uniformisation", "settling", "windows", "squaring"]
Time = Fraction | float | int

#: Up to this many states the ladder is taken whatever the time.
LADDER_ALWAYS = 130
#: Seconds that the ladder may take where uniformisation cannot bound the answer.
LADDER_PATIENCE = 25.0
#: Elementary multiplications, about a second, up to which settling is tried before windows.
_SETTLING_WORK = 1e9
#: A relative width that ends the search for a better method.
_HOPED = 1e-6
_ROUNDS = "scaling and squaring in double-double"
_UNIFORM = "uniformisation"
_SETTLED = "uniformisation, then the settled shape"
_WINDOWS = "contour windows with a proven bound"
_ESTIMATE = "scaling and squaring in floats (estimate)"


NAMES: dict[Method, str] = {
    "ladder": _ROUNDS,
    "uniformisation": _UNIFORM,
    "settling": _SETTLED,
    "windows": _WINDOWS,
    "squaring": _ESTIMATE,
}


@dataclass(frozen=True, eq=False)
class Transient:
    """Values at m times of a chain of n states.

    Attributes
    ----------
    times : tuple of Fraction
        As asked for, in that order.
    states : tuple of Vector
        Per time the probability of being in each state; entries of absorbing states are 0 (see `absorbed`).
    absorbed : tuple of Vector
        Per time the probability of having entered each class of absorbing states.
    integrals : tuple of Vector
        Per time the integral of each reward from 0 to that time, before absorption.
    alive : tuple of Enclosure
        Per time the probability of not having been absorbed, narrow next to 0 by the states and next to 1 by what was
        absorbed.
    method : str
        How.
    """

    times: tuple[Fraction, ...]
    states: tuple[Vector, ...]
    absorbed: tuple[Vector, ...]
    integrals: tuple[Vector, ...]
    alive: tuple[Enclosure, ...]
    method: str


def as_times(times: Sequence[Time]) -> tuple[Fraction, ...]:
    """Return times as exact fractions."""
    exact = []
    for time in times:
        if isinstance(time, float) and not math.isfinite(time):
            raise UsageError(f"time {time}: expected a finite number")
        exact.append(Fraction(time))
        if exact[-1] < 0:
            raise UsageError(f"time {float(time)}: expected a time that is not negative")
    return tuple(exact)


def as_start(start: int | Floats | Vector, n: int) -> Vector:
    """Return a start distribution over n states from a state number, exact floats or an earlier result."""
    if isinstance(start, Vector):
        found = start
    elif isinstance(start, (int, np.integer)):
        if not 0 <= start < n:
            raise UsageError(f"start state {start} outside 0 .. {n - 1}")
        values = np.zeros(n)
        values[start] = 1.0
        found = distribution(values, "given")
    else:
        found = distribution(np.asarray(start, dtype=np.float64), "given")
    if len(found) != n:
        raise UsageError(f"start distribution of {len(found)} entries for {n} states")
    if not (np.isfinite(found.values).all() and (found.values >= 0.0).all() and found.values.any()):
        raise UsageError("a start distribution has negative, infinite or only zero entries")
    return found


def as_classes(absorbing: ArrayLike | None, n: int) -> tuple[NDArray[np.int64], int]:
    """Return the class of each state, -1 for those that do not absorb, with the number of classes."""
    if absorbing is None:
        return np.full(n, -1, dtype=np.int64), 0
    given = np.asarray(absorbing)
    if given.shape != (n,):
        raise UsageError(f"absorbing states given by shape {given.shape}; expected one flag or class per state, {n}")
    if given.dtype == np.bool_:
        return np.where(given, 0, -1).astype(np.int64), 1
    label = given.astype(np.int64)
    return label, int(label.max(initial=-1)) + 1


def as_rewards(
    rewards: Sequence[Floats | Flags | Vector] | None, n: int, reward_error: float
) -> tuple[Floats, float, list[Flags]]:
    """Return rewards as one array float64[n, r] with its relative error and where each can be positive."""
    columns, error, carried = [], reward_error, []
    for reward in rewards or ():
        if isinstance(reward, Vector):
            if reward.absolute_error > 0.0 or reward.relative_error is None:
                raise UsageError("a reward must be known with a relative error only")
            # Stated relative to the rounded values; relative to the exact ones it is a little more.
            error = max(error, reward.relative_error / (1.0 - reward.relative_error))
            reward = reward.values
        values = np.asarray(reward, dtype=np.float64)
        if values.shape != (n,):
            raise UsageError(f"a reward of shape {values.shape} for {n} states")
        if not (np.isfinite(values).all() and (values >= 0.0).all()):
            raise UsageError("a reward is negative or not finite; split it into two")
        columns.append(values)
        carried.append(values > 0.0)
    return (np.stack(columns, axis=1) if columns else np.zeros((n, 0))), error, carried


def transient(
    generator: Generator,
    start: int | Floats | Vector,
    times: Sequence[Time],
    rewards: Sequence[Floats | Flags | Vector] | None = None,
    *,
    absorbing: ArrayLike | None = None,
    reward_error: float = 0.0,
    method: Method | None = None,
) -> Transient:
    """Return state probabilities, absorption probabilities and integrals of rewards at several times.

    Parameters
    ----------
    generator : Generator
        n states.
    start : int, float64[n] or Vector
        Start state or distribution; a Vector brings its own error.
    times : sequence of Fraction, float or int
        Taken as exact, not negative.
    rewards : sequence of float64[n], bool[n] or Vector, optional
        Rates of reward per state, not negative.  Reward is earned before absorption only.
    absorbing : bool[n] or int[n], optional
        States in which the chain is stopped: flags make one class, numbers give the class (-1: not stopped).  The
        states of a class are lumped, which costs nothing and makes large down sets cheap.
    reward_error : float
        Relative error of every reward.
    method : {"ladder", "uniformisation", "settling", "windows", "squaring"}, optional
        Take this one, whatever it costs.

    Raises
    ------
    UsageError
        Arguments that do not fit together.
    NotReached
        No method reaches a result.
    """
    exact_times = as_times(times)
    first = as_start(start, generator.n)
    label, count = as_classes(absorbing, generator.n)
    columns, reward_error, carried = as_rewards(rewards, generator.n, reward_error)
    begin = first.values > 0.0
    if first.absolute_error > 0.0:
        begin = np.ones(generator.n, dtype=bool) if first.possible is None else first.possible
    stopped = label >= 0
    reached = generator.reachable(begin, blocked=stopped)
    members = np.flatnonzero(reached & ~stopped)
    part = generator.restricted(members, label, count)
    initial: Floats = np.zeros(count)
    np.add.at(initial, label[stopped], first.values[stopped])
    absorbing_start = np.bincount(label[stopped & begin], minlength=count) > 0 if count else np.zeros(0, dtype=bool)
    classes_reached = absorbing_start | (part.absorption.high > 0.0).any(axis=0)
    later = [time for time in exact_times if time > 0]
    run = _Run(part, first.values[members], columns[members], reward_error, later)
    name = NAMES[method or "ladder"]
    outcome: _Outcome | None = None
    if later and members.size:
        name, outcome = run.answer(method)
    whole = first.total if first.total is not None and not classes_reached.any() else None
    earning = np.array([bool((carry & reached & ~stopped).any()) for carry in carried], dtype=bool)
    states, absorbed, integrals = [], [], []
    position = 0
    for time in exact_times:
        if outcome is None or time == 0:
            here = np.where(stopped, 0.0, first.values)
            states.append(Vector(here, first.relative_error, first.absolute_error, name, begin & ~stopped, whole))
            # Adding up the start weights of one class rounds.
            rounding = 0.0 if np.count_nonzero(begin & stopped) <= 1 else generator.n * UNIT
            relative = None if first.relative_error is None else first.relative_error + rounding
            spread = first.absolute_error * float(np.count_nonzero(begin))
            absorbed.append(Vector(initial, relative, spread, name, absorbing_start))
            integrals.append(Vector(np.zeros(columns.shape[1]), 0.0, 0.0, name, np.zeros(columns.shape[1], dtype=bool)))
            continue
        result = outcome.at(position)
        position += 1
        values = np.zeros(generator.n)
        values[members] = result.weights
        possible = np.zeros(generator.n, dtype=bool)
        possible[members] = True
        error = _with_start(result.relative, result.absolute, first, begin, 1.0)
        states.append(Vector(values, *error, name, possible, whole))
        error = _with_start(result.taken, result.off, first, begin, 1.0)
        if initial.any():
            error = (None if error[0] is None else error[0] + generator.n * UNIT, error[1])
        absorbed.append(Vector(initial + result.absorbed, *error, name, classes_reached))
        most = float(columns.max()) * float(time) if columns.size else 0.0
        integrals.append(
            Vector(
                result.integrals,
                *_with_start(result.gained, result.off, first, begin, most * (1.0 + 1e-9)),
                name,
                earning,
            )
        )
    alive = tuple(_alive(here, gone, first) for here, gone in zip(states, absorbed, strict=True))
    return Transient(exact_times, tuple(states), tuple(absorbed), tuple(integrals), alive, name)


def _alive(here: Vector, gone: Vector, first: Vector) -> Enclosure:
    direct = here.weighted(np.ones(len(here)))
    if first.total != 1.0 or len(gone) == 0:
        return direct
    return direct.capped().meet(gone.weighted(np.ones(len(gone))).capped().complement())


def _with_start(
    relative: float | None, absolute: float, first: Vector, begin: Flags, largest: float
) -> tuple[float | None, float]:
    """Return errors relative to the computed values, with those of the start weights taken in.

    An absolute error of each start weight moves any probability by at most their number times it, any integral by at
    most `largest` times that.
    """
    if relative is None or first.relative_error is None:
        return None, absolute
    own = relative_to_computed(relative + UNIT)
    both = own + first.relative_error + own * first.relative_error
    moved = first.absolute_error * float(np.count_nonzero(begin)) * largest
    return both * (1.0 + 1e-12), (absolute * (1.0 + 2.0 * relative) + moved * (1.0 + own)) * (1.0 + 1e-9)


@dataclass(frozen=True, eq=False)
class _Moment:
    """What a method found for one time; errors are relative to the exact values, before rounding to floats."""

    weights: Floats
    absorbed: Floats
    integrals: Floats
    relative: float | None
    absolute: float
    taken: float | None  # of what was absorbed
    gained: float | None  # of integrals
    off: float

    @property
    def placed(self) -> float:
        """Relative error of the weights, inf for an estimate."""
        return math.inf if self.relative is None else self.relative

    @property
    def earned(self) -> float:
        """Relative error of what was absorbed or earned, inf for an estimate."""
        return math.inf if self.taken is None or self.gained is None else max(self.taken, self.gained)


@dataclass(frozen=True, eq=False)
class _Outcome:
    moments: tuple[_Moment, ...]

    def complete(self, *, states: bool) -> bool:
        """Whether all is as narrow as one may hope for; `states`: the weights of states count too."""
        return all(max(each.earned, each.placed if states else 0.0) <= _HOPED for each in self.moments)

    def joined(self, other: _Outcome) -> _Outcome:
        """Return the narrower weights of states with the narrower amounts, time by time."""
        moments = []
        for one, two in zip(self.moments, other.moments, strict=True):
            earned = one if one.earned <= two.earned else two
            placed = one if one.placed <= two.placed else two
            moments.append(replace(earned, weights=placed.weights, relative=placed.relative, absolute=placed.absolute))
        return _Outcome(tuple(moments))

    def at(self, position: int) -> _Moment:
        return self.moments[position]


@dataclass(frozen=True, eq=False)
class _Run:
    """One question, ready for any method."""

    part: Restriction
    start: Floats
    rewards: Floats
    reward_error: float
    times: list[Fraction]

    @property
    def classes(self) -> int:
        return int(self.part.absorption.high.shape[1])

    def loss(self) -> tuple[Doubled | None, float]:
        """Rate of absorption from each state, all classes together, with its relative error."""
        if not self.classes:
            return None, 0.0
        return total(self.part.absorption, axis=1), self.part.absorption_error + total_error(self.classes)

    def candidates(self) -> list[Method]:
        """Methods worth trying, the best first."""
        n = self.part.chain.n
        if n <= LADDER_ALWAYS:
            return ["ladder"]
        loss, _ = self.loss()
        expected = uniformisation.expected_jumps(self.part.chain, loss, max(self.times))
        step = uniformisation.jumps(self.part.chain, loss)
        seconds = ladder_seconds(n, expected)
        work = (expected + 200.0) * (step.work + 10_000)
        chosen: list[Method] = []
        if uniformisation.affordable(step, self.times) and (expected * step.roundings * UNIT < 1e-12 or work < 1e8):
            chosen.append("uniformisation")
        if seconds < 3.0:
            chosen.append("ladder")
        soon = 60.0 * self._slowness(loss)
        if soon < expected and soon * (step.work + 10_000) < _SETTLING_WORK:
            chosen.append("settling")
        chosen.append("windows")
        if "settling" not in chosen:
            chosen.append("settling")
        if seconds <= LADDER_PATIENCE:
            chosen.append("ladder")
        if uniformisation.affordable(step, self.times, patient=True):
            chosen.append("uniformisation")
        if n + self.classes <= squaring.LARGEST_SQUARING:
            chosen.append("squaring")
        return chosen

    def _slowness(self, loss: Doubled | None) -> float:
        """Return the fastest exit rate over the slowest but that of the likeliest start: about what settling takes."""
        exits = self.part.chain.exits.high if loss is None else self.part.chain.exits.high + loss.high
        slowest = float(np.delete(exits, int(np.argmax(self.start))).min(initial=math.inf))
        return float(exits.max()) / slowest if slowest > 0.0 else math.inf

    def answer(self, method: Method | None) -> tuple[str, _Outcome]:
        """Carry out one method, or the first that reaches a result; where windows stay wide, one more beside them."""
        ways: dict[Method, Callable[[], _Outcome]] = {
            "ladder": self._by_ladder,
            "uniformisation": self._by_uniformisation,
            "settling": self._by_settling,
            "windows": self._by_windows,
            "squaring": self._by_squaring,
        }
        reasons = []
        order: list[Method] = [method] if method else self.candidates()
        kept: _Outcome | None = None
        names: list[str] = []
        for each in order:
            if kept is not None and each == "squaring":
                continue  # a wide bound is worth more than an estimate
            try:
                outcome = ways[each]()
            except NotReached as reason:
                reasons.append(f"{NAMES[each]}: {reason}")
                continue
            names.append(NAMES[each])
            kept = outcome if kept is None else kept.joined(outcome)
            # Stopped chains are asked for what was absorbed; their states are not worth another method.
            if method or kept.complete(states=not self.classes) or each != "windows":
                break
        if kept is None:
            raise NotReached("; ".join(dict.fromkeys(reasons)))
        return "; ".join(names), kept

    def _by_ladder(self) -> _Outcome:
        loss, loss_error = self.loss()
        high = np.concatenate((self.part.absorption.high, self.rewards), axis=1)
        low = np.concatenate((self.part.absorption.low, np.zeros_like(self.rewards)), axis=1)
        error = max(self.part.absorption_error, self.reward_error)
        prepared = ladder.build(self.part.chain, loss, loss_error, Doubled(high, low), error, self.times)
        climbed = ladder.climb(prepared, plain(self.start), self.times)
        weights = climbed.weights.high + climbed.weights.low
        integrals = climbed.integrals.high + climbed.integrals.low
        return _Outcome(
            tuple(
                _Moment(
                    weights[number],
                    integrals[number, : self.classes],
                    integrals[number, self.classes :],
                    climbed.relative[number],
                    climbed.absolute[number],
                    climbed.integrals_relative[number],
                    climbed.integrals_relative[number],
                    climbed.integrals_absolute[number],
                )
                for number in range(len(self.times))
            )
        )

    def _columns(self) -> tuple[Floats, float]:
        """Return absorption rates beside rewards, as floats, with their relative error."""
        absorption = self.part.absorption.high + self.part.absorption.low
        return np.concatenate((absorption, self.rewards), axis=1), max(
            self.part.absorption_error + UNIT, self.reward_error
        )

    def _by_uniformisation(self) -> _Outcome:
        loss, _ = self.loss()
        step = uniformisation.jumps(self.part.chain, loss)
        walked = uniformisation.walk(step, self.start, *self._columns(), self.times)
        return _Outcome(
            tuple(
                _Moment(
                    walked.weights[number],
                    walked.integrals[number, : self.classes],
                    walked.integrals[number, self.classes :],
                    walked.relative[number],
                    walked.absolute[number],
                    walked.integrals_relative[number],
                    walked.integrals_relative[number],
                    walked.integrals_absolute[number],
                )
                for number in range(len(self.times))
            )
        )

    def _moment(
        self,
        weights: Floats,
        integrals: Floats,
        error: tuple[float | None, float],
        relative: Floats,
        absolute: float,
    ) -> _Moment:
        """Split integrals into absorption by class, which comes first, and rewards, with the worst error of each."""
        return _Moment(
            weights,
            integrals[: self.classes],
            integrals[self.classes :],
            *error,
            float(relative[: self.classes].max(initial=0.0)),
            float(relative[self.classes :].max(initial=0.0)),
            absolute,
        )

    def _by_settling(self) -> _Outcome:
        loss, loss_error = self.loss()
        lost = plain(np.zeros(self.part.chain.n)) if loss is None else loss
        found = settling.follow(
            self.part.chain, lost, loss_error, self.start, *self._columns(), self.times, self.classes
        )
        return _Outcome(
            tuple(
                self._moment(
                    each.weights,
                    each.integrals,
                    (each.relative, each.absolute),
                    each.integrals_relative,
                    each.integrals_absolute,
                )
                for each in found
            )
        )

    def _by_windows(self) -> _Outcome:
        loss, loss_error = self.loss()
        lost = plain(np.zeros(self.part.chain.n)) if loss is None else loss
        absorption = self.part.absorption.high + self.part.absorption.low
        if not absorption.shape[1] + self.rewards.shape[1]:
            raise NotReached("no integral is asked for, and windows bound nothing else")
        found = missions.follow(
            self.part.chain,
            lost,
            loss_error,
            self.start,
            np.concatenate((absorption, self.rewards), axis=1),
            self.part.absorption_error + UNIT,
            self.reward_error,
            self.times,
            self.classes,
        )
        return _Outcome(
            tuple(
                self._moment(
                    each.weights,
                    each.integrals,
                    (each.weights_relative, each.weights_absolute),
                    each.relative,
                    2.0**-1060,
                )
                for each in found
            )
        )

    def _by_squaring(self) -> _Outcome:
        weights, absorbed, integrals = squaring.estimate(
            self.part.chain, self.part.absorption, self.rewards, self.start, self.times
        )
        return _Outcome(
            tuple(
                _Moment(weights[number], absorbed[number], integrals[number], None, 0.0, None, None, 0.0)
                for number in range(len(self.times))
            )
        )


def ladder_seconds(n: int, expected: float) -> float:
    """Return about how long the ladder takes, from its matrix products (measured on one core)."""
    return 7e-9 * n**3 * (20.0 + math.log2(expected + 2.0))
