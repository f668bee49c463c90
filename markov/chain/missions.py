"""Long missions of large stiff chains: uniformise a little, then windows, then the tail, as narrow as asked for.

The pieces and their proofs are in `markov.chain.windows` and `markov.chain.tail`; this file chooses.  Uniformisation
reaches a power of two of one to two hundred expected jumps; windows follow, each eight times as long as the last, until
the largest time or until the chain has settled, when the tail ends the work whatever the mission.  A result that is too
wide is tried again with more nodes, or with windows that begin later (chains with nearly complex spectra need that).
All intervals are proven, so the narrowest of each time and quantity is kept.

Source: derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain import settling, uniformisation
from markov.chain.bounds import Floats
from markov.chain.contour import RATIO, SIZES, contour
from markov.chain.doubled import UNIT, Doubled
from markov.chain.generator import Generator
from markov.chain.hub import with_likely_hub
from markov.chain.hubs import Hubs, Shares, hubs_of, shares_of
from markov.chain.parts import likely_states
from markov.chain.shape import Shape, shape_of
from markov.chain.tail import Tail, joined, settled
from markov.chain.weights import Weights, verified
from markov.chain.windows import Prepared, Question, State, Window
from markov.errors import NotReached

#: Relative widths aimed at, up to `_SMALL` states; and beyond.
NARROW = 5e-12
NARROW_LARGE = 4e-10
_SMALL = 25_000
#: A relative width beyond this is declined.
WIDEST = 1e-3
#: Times of up to this many expected jumps are uniformised.
_FEW_JUMPS = 4096.0
_FIRST_JUMPS = 128
_MOST_JUMPS = 1 << 19
_ATTEMPTS = 6
#: Weights of states whose relative bound is wider than this count as estimates.
_WIDEST_STATES = 1e-4
#: Windows beyond what integrals need, for the weights of states to settle.
_MORE_WINDOWS = 3
_HUBS = 5
_SLACK = 1.0 + 1e-9
_TINY = 1e-285
_JOINING = "joining windows"


@dataclass(frozen=True, eq=False)
class Moment:
    """Weights of n states with c proven integrals at one time.

    Attributes
    ----------
    weights : float64[n]
    weights_relative : float or None
        Relative error of every weight to the exact one; None: an estimate.
    weights_absolute : float
        Absolute error beside it.
    integrals : float64[c]
    relative : float64[c]
        Relative error of each integral to the exact one.
    reason : str
        Why it is as wide as it is: the largest part of the bound.
    """

    weights: Floats
    weights_relative: float | None
    weights_absolute: float
    integrals: Floats
    relative: Floats
    reason: str


@dataclass(frozen=True, eq=False)
class _Begun:
    """The end of uniformisation: weights of states with what was collected, and the error of each."""

    time: Fraction
    weights: Floats
    off: Floats
    earned: Floats
    earned_off: Floats


@dataclass
class _Best:
    """The narrowest interval of each quantity at one time so far."""

    lower: Floats
    upper: Floats
    weights: Floats
    reason: str = ""
    weights_relative: float = math.inf
    weights_absolute: float = 0.0

    def place(self, weights: Floats, relative: float, absolute: float = 0.0) -> None:
        """Take weights of states whose relative error is the least so far."""
        if relative < self.weights_relative or not math.isfinite(self.weights_relative):
            self.weights, self.weights_relative, self.weights_absolute = weights, relative, absolute

    def take(self, middle: Floats, error: Floats, reason: str) -> None:
        """Take one more proven interval around each quantity."""
        before = self.width()
        known = np.isfinite(middle) & np.isfinite(error)
        middle, error = np.where(known, middle, 0.0), np.where(known, error, math.inf)
        self.lower = np.maximum(self.lower, middle - error - 4.0 * UNIT * middle)
        self.upper = np.minimum(self.upper, middle + error + 4.0 * UNIT * middle)
        if bool((self.lower > self.upper).any()):
            raise ArithmeticError(f"two proven intervals do not meet: {self.lower} and {self.upper}")
        if self.width() <= before or not self.reason:
            self.reason = reason

    def width(self) -> float:
        """Largest half width relative to the lower end."""
        with np.errstate(divide="ignore", invalid="ignore"):
            found = (self.upper - self.lower) / (2.0 * self.lower)
        found[self.upper == self.lower] = 0.0
        return float(np.nan_to_num(found, nan=np.inf).max(initial=0.0))


def follow(
    chain: Generator,
    loss: Doubled,
    loss_error: float,
    start: Floats,
    columns: Floats,
    columns_error: float,
    reward_error: float,
    times: Sequence[Fraction],
    classes: int,
) -> list[Moment]:
    """Return integrals of rates of absorption with those of rewards at each time, proven.

    Parameters
    ----------
    chain : Generator
        n states.
    loss : Doubled[n]
        Rates of absorption into all classes together, 0 where nothing absorbs; relative error `loss_error`.
    start : float64[n]
        Weights, taken as exact.
    columns : float64[n, c]
        Rates into each class, relative error `columns_error`; then rewards, relative error `reward_error`.
    times : Fraction[t]
        Exact, positive.
    classes : int
        How many of the columns are classes.

    Raises
    ------
    NotReached
        A part of the bound cannot be verified, or the width stays above `WIDEST`.
    """
    task = _Task.of(chain, loss, loss_error, start, columns, columns_error, times, classes)
    task.work()
    found = []
    for best in task.best:
        width = best.width()
        if not width < WIDEST:
            raise NotReached(f"the contour windows bound the answer to {width:.2g} only: {best.reason}")
        middle = 0.5 * (best.lower + best.upper)
        with np.errstate(divide="ignore", invalid="ignore"):
            relative = np.nan_to_num((best.upper - best.lower) / (2.0 * best.lower)) * _SLACK + 2.0 * UNIT
        relative[classes:] += reward_error * (1.0 + relative[classes:])
        proven = best.weights_relative < _WIDEST_STATES
        found.append(
            Moment(
                best.weights,
                best.weights_relative if proven else None,
                best.weights_absolute,
                middle,
                relative,
                best.reason,
            )
        )
    return found


@dataclass(eq=False)
class _Task:
    """One question with the best answers so far; rates and times in a unit in which the fastest rate is about 1."""

    chain: Generator
    loss: Doubled
    loss_error: float
    start: Floats
    columns: Floats
    classes: int
    step: uniformisation.Jumps
    scale: float
    entry_error: float
    times: list[Fraction]
    best: list[_Best]
    tail: Tail | None = None
    tailless: bool = False
    shape: Shape | None = None

    @classmethod
    def of(
        cls,
        chain: Generator,
        loss: Doubled,
        loss_error: float,
        start: Floats,
        columns: Floats,
        columns_error: float,
        times: Sequence[Fraction],
        classes: int,
    ) -> _Task:
        step = uniformisation.jumps(chain, loss)
        exponent = math.frexp(step.rate)[1]
        scale = math.ldexp(1.0, -exponent)
        lost = loss.high + loss.low
        rates = np.concatenate((chain.high, lost[lost > 0.0]))
        if rates.size and float(rates.min()) * scale < 1e-100:
            raise NotReached("rates span more than a hundred powers of ten")
        most = np.where(columns.any(axis=0), math.fsum(start.tolist()) * (1.0 + 4 * UNIT), 0.0)
        best = []
        for time in times:
            ceiling = most.copy()
            ceiling[classes:] *= columns[:, classes:].max(axis=0, initial=0.0) * float(time) * _SLACK
            best.append(_Best(np.zeros(columns.shape[1]), ceiling, start))
        return cls(
            chain,
            loss,
            loss_error,
            start,
            np.concatenate((columns, lost[:, None]), axis=1) * scale,
            classes,
            step,
            scale,
            max(chain.rate_error, chain.exit_error, loss_error, columns_error) + 3 * UNIT,
            [time / Fraction(scale) for time in times],
            best,
        )

    @property
    def target(self) -> float:
        return NARROW if self.chain.n <= _SMALL else NARROW_LARGE

    @property
    def residual(self) -> float:
        return self.target * (1e-4 if self.chain.n <= _SMALL else 1e-2)

    def work(self) -> None:
        """Narrow all intervals down."""
        rate = self.step.rate * self.scale
        late = [
            number
            for number, time in enumerate(self.times)
            if float(time) * rate > _FEW_JUMPS
            or (time > 4 * _FIRST_JUMPS and not uniformisation.affordable(self.step, [time * Fraction(self.scale)]))
        ]
        early = [number for number in range(len(self.times)) if number not in late]
        if early:
            self._uniformise([self.times[number] for number in early], early)
        if not late:
            return
        size = 48 if self.target < 1e-11 else 28
        jumps = _FIRST_JUMPS
        prepared: Prepared | None = None
        past = math.inf
        for _ in range(_ATTEMPTS):
            # What has passed before windows begin is uniformised on the way.
            passed = [number for number in late if self.times[number] < jumps]
            begun = self._uniformise([*(self.times[number] for number in passed), Fraction(jumps)], passed)
            if prepared is None:
                prepared = self._prepare(begun, late)
            self._run(prepared, begun, size, late)
            worst = max(late, key=lambda number: self.best[number].width())
            width = self.best[worst].width()
            if width <= 4.0 * self.target:
                return
            if size < SIZES[-1]:
                size = SIZES[-1]
                continue
            # A later beginning mends what oscillates; what rounding or slow modes cost it does not.
            helps = self.best[worst].reason == _JOINING or not width < 1e3 or width < 0.9 * past
            past, jumps = width, jumps * RATIO
            if not helps or jumps > _MOST_JUMPS:
                return
            if not uniformisation.affordable(self.step, [Fraction(jumps) * Fraction(self.scale)]):
                return

    def _uniformise(self, times: list[Fraction], numbers: list[int]) -> _Begun:
        """Return weights with their error and integrals with theirs at the last time; keep what was asked for."""
        real = [time * Fraction(self.scale) for time in times]
        columns = self.columns / self.scale
        walked = uniformisation.walk(self.step, self.start, columns, 0.0, real)
        for place, number in enumerate(numbers):
            middle = walked.integrals[place, :-1]
            error = middle * (walked.integrals_relative[place] * 1.01 + self.entry_error)
            self.best[number].take(middle, error + walked.integrals_absolute[place], "uniformisation")
            self.best[number].place(walked.weights[place], walked.relative[place], walked.absolute[place])
        weights, earned = walked.weights[-1], walked.integrals[-1]
        return _Begun(
            times[-1],
            weights,
            weights * (walked.relative[-1] * 1.01) + walked.absolute[-1],
            earned,
            earned * (walked.integrals_relative[-1] * 1.01 + self.entry_error) + walked.integrals_absolute[-1],
        )

    def _prepare(self, begun: _Begun, late: list[int]) -> Prepared:
        """Ground the chain at likely states and verify weights for all times."""
        lost = self.loss.high + self.loss.low
        last = max(float(self.times[number]) for number in late)
        ceilings = np.ones(self.columns.shape[1] - 1)
        ceilings[self.classes :] = self.columns[:, self.classes : -1].max(axis=0, initial=0.0) * last * _SLACK

        def weigh(hubs: Hubs, shares: Shares, kappa: float, time: float) -> Weights:
            return verified(
                hubs,
                shares,
                self.columns[hubs.grounded.order, :-1],
                self.columns[hubs.states, :-1],
                kappa=kappa,
                time=time,
                whole=0 if self.classes == 1 else None,
                ceilings=ceilings,
                entry_error=self.entry_error,
            )

        made: list[Weights] = []
        trouble = NotReached("no likely state was found")
        likely = int(np.argmax(begun.weights))
        first: list[int] | None = likely_states(self.chain, lost, likely).states if self.chain.n <= _SMALL else [likely]
        tried: list[list[int]] = []
        found: tuple[Hubs, Shares] | None = None
        while first is not None and len(tried) < _HUBS:
            tried.append(first)
            hubs = hubs_of(self.chain, lost, first, self.scale)
            first = None
            try:
                shares = shares_of(hubs, self.entry_error)
                made = [weigh(hubs, shares, 0.0, last)]
            except NotReached as reason:
                trouble = reason
                first = self._other(begun, tried)
            else:
                found = hubs, shares
                first = _likelier(hubs, made[0], tried)
        if found is None:
            hubs = hubs_of(self.chain, lost, tried[0], self.scale)
            found = hubs, shares_of(hubs, self.entry_error)
        hubs, shares = found
        longest = made[0].longest if made else math.inf
        short = sorted(float(self.times[number]) for number in late if float(self.times[number]) < 30.0 * longest)
        for time in {short[0], short[len(short) // 2], short[-1]} if short else ():
            for power in (1.0, 4.0):
                try:
                    made.append(weigh(hubs, shares, power / time, time * _SLACK))
                except NotReached as reason:
                    trouble = reason
        if not made:
            raise trouble
        order = hubs.grounded.order
        question = Question(
            hubs,
            shares,
            tuple(made),
            self.start[order],
            self.start[hubs.states],
            math.fsum(self.start.tolist()),
            self.columns[order],
            self.columns[hubs.states],
            ceilings,
            self.entry_error,
        )
        return Prepared.of(question)

    def _other(self, begun: _Begun, tried: list[list[int]]) -> list[int] | None:
        """Return what to ground the chain at where the first choice failed."""
        likely = int(np.argmax(begun.weights))
        if [likely] not in tried:
            return [likely]
        kept = self._kept(begun)
        if kept is not None and [kept] not in tried:
            return [kept]
        if self.chain.n > _SMALL:
            several = likely_states(self.chain, self.loss.high, likely).states
            return several if several not in tried else None
        return None

    def _kept(self, begun: _Begun) -> int | None:
        """Return the likeliest state of a class that is never left, if there is one without absorption."""
        lost = self.loss.high > 0.0
        closed = [members for members in self.chain.closed_classes() if not bool(lost[members].any())]
        if len(closed) != 1:
            return None
        return int(closed[0][int(np.argmax(begun.weights[closed[0]]))])

    def _run(self, prepared: Prepared, begun: _Begun, size: int, late: list[int]) -> None:
        """Follow the chain once, from the end of uniformisation to the largest time."""
        question = prepared.question
        order, hubs = question.hubs.grounded.order, question.hubs.states
        shares = question.shares.of(begun.weights[order], begun.weights[hubs])
        rows = prepared.watch.shape[0]
        state = State(
            begun.time,
            begun.weights[order],
            begun.weights[hubs],
            shares,
            question.shares.of(begun.off[order], begun.off[hubs]) * _SLACK + 4.0 * UNIT * shares,
            (prepared.costs @ begun.off[order]) * _SLACK,
            begun.earned,
            begun.earned_off,
            np.zeros(rows),
            math.inf
            if prepared.steady is None
            else float(prepared.steady.most(begun.off[order], float(begun.off[hubs[0]]))),
        )
        nodes = contour(size)
        waiting = sorted((each for each in late if self.times[each] >= begun.time), key=lambda each: self.times[each])
        more = 0 if self.classes and self.chain.n > _SMALL else _MORE_WINDOWS
        while waiting:
            if self._by_tail(prepared, state, waiting):
                if more == 0 or self._settled(prepared, state, waiting):
                    return
                more -= 1
            inside = [number for number in waiting if self.times[number] <= RATIO * state.time]
            sigmas = sorted({self.times[number] / state.time for number in inside})
            goes_on = len(inside) < len(waiting)
            ends = sorted({*sigmas, Fraction(RATIO)}) if goes_on else sigmas
            goal = min(float(self.times[waiting[0]] / state.time), float(RATIO))
            expected = np.minimum(state.collected[:-1] * max(1.0, 0.5 * goal), question.ceilings)
            aim = np.maximum(np.tile(expected, len(question.weights)) * self.residual, 1e-300)
            window = Window(prepared, state, nodes, aim, ends)
            for number in inside:
                place = ends.index(self.times[number] / state.time)
                self._keep(prepared, number, *window.until(place))
            waiting = waiting[len(inside) :]
            if goes_on:
                state, _ = window.until(len(ends) - 1)

    def _by_tail(self, prepared: Prepared, state: State, waiting: list[int]) -> bool:
        """Answer what the settled shape answers from here; return whether that is all, as narrow as aimed at."""
        if self.tail is None and not self.tailless:
            try:
                self.tail = settled(prepared)
            except NotReached:
                self.tailless = True
        if self.tail is None:
            return False
        for number in waiting:
            try:
                later = joined(prepared, state, self.tail, self.times[number])
            except NotReached:
                self.tail, self.tailless = None, True
                return False
            self._keep(prepared, number, later, "joining the settled shape")
        return all(self.best[number].width() <= self.target for number in waiting)

    def _settled(self, prepared: Prepared, state: State, waiting: list[int]) -> bool:
        """Prove the weights of states at all later times from a shape that they have settled to, if they have."""
        steady = prepared.steady
        if steady is None or not math.isfinite(state.apart):
            return True  # nothing to be had
        here = self._spread(prepared, state)
        if not bool((here > 0.0).all()):
            return False
        relative = state.apart / steady.least(state.weights, float(state.at_hubs[0]))
        if not relative < 0.1 * _WIDEST_STATES:
            return False
        moment = settling.Moment(here, np.zeros(0), relative * _SLACK, 0.0, np.zeros(0), 0.0)
        try:
            if self.shape is None:
                self.shape = self._shape(int(prepared.question.hubs.states[0]))
            low, high, left = settling.fading_between(self.shape, moment)
            if not low > 0.0 or high / low - 1.0 > 4.0 * relative + 1e-11 or left > 0.0:
                return False
            for number in waiting:
                later = (self.times[number] - state.time) * Fraction(self.scale)
                found = settling.follow_shape(
                    self.shape, moment, np.zeros((self.chain.n, 0)), 0.0, later, low, high, left
                )
                self.best[number].place(found.weights, found.relative, found.absolute)
        except NotReached:
            return True
        return True

    def _shape(self, hub: int) -> Shape:
        """Return the shape that the weights of states settle to, with its decay; without absorption there is none."""
        if self.classes:
            last = max(self.times) * Fraction(self.scale)
            return shape_of(self.chain, self.loss, self.loss_error, hub, last, "row")
        grounded = with_likely_hub(self.chain, self.loss, 0.0, hub)
        weights, error = grounded.stationary()
        if error > 1e-20:
            raise NotReached("the settled weights are not known well enough")
        return Shape(np.arange(self.chain.n), weights.high + weights.low, Fraction(0), Fraction(0), grounded)

    def _spread(self, prepared: Prepared, state: State) -> Floats:
        """Return weights of all states in their own order."""
        hubs = prepared.question.hubs
        spread = np.zeros_like(self.start)
        spread[hubs.grounded.order] = np.maximum(state.weights, 0.0)
        spread[hubs.states] = np.maximum(state.at_hubs, 0.0)
        return spread

    def _keep(self, prepared: Prepared, number: int, state: State, reason: str) -> None:
        """Take the least proven error of each quantity at a time."""
        question, time = prepared.question, float(self.times[number])
        kinds = question.kinds
        error = np.full(kinds, math.inf)
        for place, each in enumerate(question.weights):
            if time <= each.until:
                error = np.minimum(error, state.cost[place * kinds : (place + 1) * kinds])
        self.best[number].take(state.collected[:-1], (error + state.doubt[:-1]) * _SLACK + _TINY, reason)
        here, relative = self._spread(prepared, state), math.inf
        if prepared.steady is not None and math.isfinite(state.apart) and bool((here > 0.0).all()):
            steady = prepared.steady
            relative = state.apart / steady.least(state.weights, float(state.at_hubs[0]))
            relative = relative / (1.0 - relative) if relative < 0.1 else math.inf
        self.best[number].place(here, relative * _SLACK)


def _likelier(hubs: Hubs, weights: Weights, tried: list[list[int]]) -> list[int] | None:
    """Return other hubs where more time is spent in a state than at the hub that it follows, if there are any."""
    spent = weights.excursion
    if not float(spent.max(initial=0.0)) > 4.0:
        return None
    place, h = np.unravel_index(int(np.argmax(spent)), spent.shape)
    other = hubs.states.tolist()
    other[int(h)] = int(hubs.grounded.order[place])
    return other if other not in tried else None
