"""How strongly each parameter moves each measure: exact derivatives, from one solution of the chain.

From parameters to rates the derivatives are exact fractions (`slopes`).  From rates to values they are sums over the
transitions of what a transition more would bring and what it would cost, each without subtraction and in double-double
(`markov.chain.derivatives`).  Only at the end are the two set against each other.  What then is left is either good to
`TOLERANCE`, or it is zero within the doubt of its terms and told as 0, as for the mean down time of one unit by its
failure rate, or it is refused.  A time in a question, and the length of a year, are held fixed.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.chain.derivatives import Sloped, absorption_slopes, integral_slopes, long_run_slopes, slopes_at
from markov.chain.doubled import UNIT, Doubled, W, exact, multiply, plain, totals, zeros
from markov.errors import IllPosed, NotReached
from markov.evaluation.answers import Answers
from markov.evaluation.delivery import capacities_of, delivered
from markov.evaluation.many import several_ends
from markov.evaluation.questions import Question
from markov.evaluation.recipes import Delivered, PerArrow, PerState, Recipes, Reward
from markov.evaluation.refilling import Chains
from markov.evaluation.samples import written
from markov.evaluation.slopes import Slopes
from markov.evaluation.varied import Varied, fixed
from markov.model import Model
from markov.quantities import Quantity

Floats = NDArray[np.float64]
Rates = dict[int, Fraction]
"""Number of a rate -> a number."""

_Solve = Callable[[Doubled], Sloped]

#: Largest doubt of a derivative, relative to it.
TOLERANCE = Fraction(1, 10**9)


@dataclass(frozen=True)
class Sensitivity:
    """One measure with its derivatives by every parameter.

    Attributes
    ----------
    question : Question
    value : float
    derivatives : mapping of name to float
        Change of the measure per unit of change of the parameter (hours, per hour, plain); 0 for one without
        influence, nan for one of `reasons`.
    elasticities : mapping of name to float or None
        Percent of change of the measure per percent of change of the parameter; None where the measure is zero.
    reasons : mapping of name to str
        Why there is no derivative by a parameter at its present value.
    """

    question: Question
    value: float
    derivatives: Mapping[str, float]
    elasticities: Mapping[str, float | None]
    reasons: Mapping[str, str]


def derivatives(model: Model, question: Question) -> dict[str, float]:
    """Return the derivative of a measure by each parameter of a model.

    Parameters
    ----------
    model : Model
    question : Question

    Returns
    -------
    dict of name to float
        Per hour, per (per hour) or per unit of a plain number, as the parameter is; exactly 0 for a parameter that
        nothing uses; nan where there is no derivative, for one of the reasons that `sensitivities` tells.

    Raises
    ------
    IllPosed
        The question has no answer.
    NotReached
        What is left after cancelling is in doubt.
    TooLarge
        The chain has more states than exact derivatives are made for.
    """
    return dict(sensitivities(model, [question])[question].derivatives)


def elasticities(model: Model, question: Question) -> dict[str, float | None]:
    """Return by how many percent a measure changes per percent of change of each parameter; see `derivatives`."""
    return dict(sensitivities(model, [question])[question].elasticities)


def sensitivities(model: Model, questions: Sequence[Question]) -> dict[Question, Sensitivity]:
    """Return several measures with their derivatives; what they share is worked out once.  See `derivatives`."""
    chains, slopes = Chains(model, questions), Slopes(model)
    ends = _ends(model, slopes)
    made: dict[bool, Recipes[Varied]] = {}

    def loading() -> list[SlopedChain]:
        return [SlopedChain(answers, slopes) for answers in chains.loading]

    found = {}
    for question in questions:
        outside = chains.is_outside(question)
        if outside not in made:
            made[outside] = Recipes(SlopedChain(chains.extended if outside else chains.plant, slopes), loading)
        found[question] = _told(model, question, made[outside].answer(question), ends)
    return found


def _ends(model: Model, slopes: Slopes) -> dict[str, str]:
    """Return parameter -> why it stands at the end of a range, where the chain leaves out what lies beyond."""
    found: dict[str, str] = {}
    for where, quantity, kind in written(model):
        at_end = kind != "number" and (quantity.exact == 0 or (kind == "share" and quantity.exact == 1))
        for name, slope in slopes.quantity(quantity).items() if at_end else ():
            if slope:
                found[name] = f"{where} is {float(quantity.exact):g}: the chain leaves out what a change would bring"
    return found


def _told(model: Model, question: Question, answer: Varied, ends: Mapping[str, str]) -> Sensitivity:
    by_name: dict[str, float] = {}
    relative: dict[str, float | None] = {}
    bend = "what is delivered just reaches a limit, where less of it counts otherwise than more"
    reasons = {**dict.fromkeys(answer.bent, bend), **ends}
    for name, parameter in model.parameters.items():
        if name in reasons:
            by_name[name], relative[name] = math.nan, math.nan
            continue
        slope, doubt = answer.slopes.get(name, Fraction(0)), answer.doubts.get(name, Fraction(0))
        if abs(slope) <= doubt:
            slope = Fraction(0)
        elif doubt > TOLERANCE * abs(slope):
            raise NotReached(
                f"the derivative of {question.measure} by {name} is what is left of far larger terms and in doubt by "
                f"{float(doubt / abs(slope)):.0e} of itself"
            )
        by_name[name] = float(slope)
        relative[name] = float(slope * parameter.value.exact / answer.value) if answer.value else None
    return Sensitivity(question, float(answer.value), by_name, relative, reasons)


class SlopedChain:
    """One chain asked in numbers with slopes; see `markov.evaluation.recipes.Chain`."""

    def __init__(self, answers: Answers, slopes: Slopes) -> None:
        self.answers = answers
        self._slopes = slopes
        self._stopped: dict[tuple[Fraction, str | None, bytes], Sloped] = {}

    # --- from rates to parameters ------------------------------------------------------------------------------------

    @cached_property
    def _by_parameter(self) -> dict[str, Rates]:
        return self._slopes.rates(self.answers.space.kinds.rates)

    @cached_property
    def _arrow_rate(self) -> NDArray[np.int64]:
        """Number of the rate of every transition, int64[a]."""
        space = self.answers.space
        return np.array([kind.rate for kind in space.kinds.kinds], np.int64)[space.arrows.kind]

    @cached_property
    def _place(self) -> NDArray[np.int64]:
        """Where each moving transition stands in the generator."""
        space, generator = self.answers.space, self.answers.generator
        moving = space.arrows.moving
        code = space.arrows.source[moving].astype(np.int64) * space.size + space.arrows.target[moving]
        return np.searchsorted(generator.source.astype(np.int64) * space.size + generator.target, code)

    @cached_property
    def _start(self) -> Doubled:
        chances = [Fraction(0)] * self.answers.space.size
        for state, chance in self.answers.space.start:
            chances[state] += chance
        return exact(chances)

    @cached_property
    def _begin(self) -> NDArray[np.bool_]:
        return self._start.high > 0.0

    @cached_property
    def _moving(self) -> dict[int, Fraction]:
        """Parameters matter only through these rates; the others need not be added up."""
        return {number: Fraction(0) for rates in self._by_parameter.values() for number in rates}

    def _per_rate(self, arrows: NDArray[np.intp], amounts: Doubled, multiples: Floats) -> Rates:
        """Add up amounts, times multiples, over the transitions of each rate."""
        sums = dict(self._moving)
        high, low = amounts.high.tolist(), amounts.low.tolist()
        for number, multiple, first, second in zip(
            self._arrow_rate[arrows].tolist(), multiples.tolist(), high, low, strict=True
        ):
            if number in sums and first:
                sums[number] += Fraction(multiple) * (Fraction(first) + Fraction(second))
        return sums

    def _varied(self, found: Sloped, reward: Reward | None = None, reward_error: float = 0.0) -> Varied:
        """Carry derivatives by rates, and by what a reward follows from, over to parameters."""
        space = self.answers.space
        moving = np.flatnonzero(space.arrows.moving)
        multiples = space.arrows.multiple[moving].astype(np.float64)
        more = self._per_rate(moving, found.more.at(self._place), multiples)
        less = self._per_rate(moving, found.less.at(self._place), multiples)
        if isinstance(reward, PerArrow):
            counting = np.flatnonzero(reward.counts)
            counts = reward.counts[counting] * space.arrows.multiple[counting]
            weights = found.rewards.at(space.arrows.source[counting])
            for number, amount in self._per_rate(counting, weights, counts).items():
                more[number] += amount
        error = Fraction(found.error + reward_error)
        slopes, doubts = {}, {}
        for name, rates in self._by_parameter.items():
            slopes[name] = sum((slope * (more[number] - less[number]) for number, slope in rates.items()), Fraction(0))
            size = sum((abs(slope) * (more[number] + less[number]) for number, slope in rates.items()), Fraction(0))
            doubts[name] = size * error
        answer = Varied(found.value, abs(found.value) * error, slopes, doubts)
        if isinstance(reward, Delivered):
            answer = answer + self._by_capacity(found.rewards, error, reward.of)
        return answer

    def _by_capacity(self, weights: Doubled, error: Fraction, of: str | None) -> Varied:
        """Return what changes of the capacities add, at given weights of the states, as a number beside zero."""
        names = [name for name in self._capacity_slopes(of) if name]
        if not names:
            return fixed(Fraction(0))

        def capacity(quantity: Quantity) -> tuple[float, Floats]:
            slope = self._slopes.quantity(quantity)
            return float(quantity.exact), np.array([float(slope.get(name, 0)) for name in names])

        slope = delivered(self.answers.space, of, capacity, 1, len(names)).slope[:, 0]
        values = weights.high + weights.low
        torn = [bool(each.any()) for each in (np.isnan(slope) & (values > 0)[:, None]).T]
        slope[np.isnan(slope)] = 0.0
        slopes, doubts = {}, {}
        for number, name in enumerate(names):
            terms = [Fraction(x) * Fraction(y) for x, y in zip(values, slope[:, number], strict=True) if x and y]
            slopes[name] = sum(terms, Fraction(0))
            doubts[name] = sum(map(abs, terms), Fraction(0)) * (error + Fraction(1, 2**48))
        bent = frozenset(name for name, is_torn in zip(names, torn, strict=True) if is_torn)
        return Varied(Fraction(0), Fraction(0), slopes, doubts, bent)

    def _capacity_slopes(self, of: str | None) -> tuple[str, ...]:
        found = (self._slopes.quantity(each) for each in capacities_of(self.answers.space, of))
        return tuple(dict.fromkeys(name for slope in found for name, value in slope.items() if value))

    def _weights(self, reward: Reward) -> tuple[Doubled, float]:
        """Return a reward by state with its relative error."""
        space = self.answers.space
        if isinstance(reward, PerState):
            return plain(reward.values), 0.0
        if isinstance(reward, Delivered):
            share = space.capacity(reward.of)
            return plain(share), 0.0 if np.isin(share, (0.0, 1.0)).all() else 16 * UNIT
        order = np.flatnonzero(reward.counts)
        order = order[np.argsort(space.arrows.source[order], kind="stable")]
        high, low = self.answers.arrow_rates
        amounts = multiply(Doubled(high[order], low[order]), plain(reward.counts[order]))
        return totals(amounts, space.arrows.source[order], space.size), 64 * W

    def _both_ways(self, reward: Reward, first: NDArray[np.bool_], solve: _Solve, most: Fraction) -> Varied:
        """Work out a mean from a reward and, where the usual state earns it, from what is missing to the most as well.

        What nearly always holds barely reacts, and its derivative is left of terms that cancel; what is missing does
        not cancel.  Of both the sharper is taken, slope by slope.
        """
        weights, error = self._weights(reward)
        found = solve(weights)
        answer = self._varied(found, reward, error)
        highest = float(weights.high.max(initial=0.0))
        if isinstance(reward, PerArrow) or not (weights.high[first] > 0.0).any():
            return answer
        missing = self._varied(solve(plain(highest - weights.high)), None, 2 * error)
        if isinstance(reward, Delivered):
            # What a capacity adds does not pass through the chain: take it from the direct way.
            direct = self._by_capacity(found.rewards, Fraction(found.error), reward.of)
            missing = missing + direct.times(Fraction(-1))
        return answer.or_sharper(missing.complement_of(most * Fraction(highest)))

    # --- the long run ----------------------------------------------------------------------------------------------

    @cached_property
    def _classes(self) -> list[NDArray[np.int32]]:
        return self.answers.generator.closed_classes(self._begin)

    def long_run(self, reward: Reward) -> Varied:
        """See `Chain`."""
        if len(self._classes) > 1:
            return self._same_ends(reward, self._weights(reward)[0].high)
        (members,) = self._classes
        generator = self.answers.generator
        inside = np.zeros(generator.n, np.bool_)
        inside[members] = True

        def solve(values: Doubled) -> Sloped:
            return long_run_slopes(generator, members, Doubled(values.high * inside, values.low * inside))

        return self._both_ways(reward, inside, solve, Fraction(1))

    def _same_ends(self, reward: Reward, weights: Floats) -> Varied:
        ends = np.concatenate(self._classes)
        same = (weights[ends] == weights[ends[0]]).all()
        if not same or (isinstance(reward, PerArrow) and weights[ends].any()):
            raise several_ends(self.answers, [members.astype(np.int64) for members in self._classes])
        if isinstance(reward, Delivered) and weights[ends].any() and self._capacity_slopes(reward.of):
            raise several_ends(self.answers, [members.astype(np.int64) for members in self._classes])
        return fixed(Fraction(float(weights[ends[0]])))

    # --- at given times ----------------------------------------------------------------------------------------------

    def at(self, time: Fraction, reward: Reward) -> Varied:
        """See `Chain`."""
        generator = self.answers.generator

        def solve(values: Doubled) -> Sloped:
            return slopes_at(generator, self._start, time, values)[0]

        return self._both_ways(reward, self._begin, solve, Fraction(1))

    def integral(self, time: Fraction, reward: Reward) -> Varied:
        """See `Chain`."""
        generator = self.answers.generator

        def solve(values: Doubled) -> Sloped:
            return integral_slopes(generator, self._start, time, values)

        return self._both_ways(reward, self._begin, solve, time)

    # --- until the first failure -------------------------------------------------------------------------------------

    def _halted(self, time: Fraction, of: str | None, weights: Doubled | None) -> Sloped:
        """Follow the chain stopped at the first failure; without weights the value is having failed."""
        up = self.answers.up(of)
        key = (time, of, b"" if weights is None else weights.high.tobytes())
        if key not in self._stopped:
            failed = weights is None
            final = zeros(len(up)) if weights is None else Doubled(weights.high * up, weights.low * up)
            self._stopped[key] = slopes_at(
                self.answers.generator, self._start, time, final, stopped=~up, absorbed=float(failed)
            )[0]
        return self._stopped[key]

    def failed(self, time: Fraction, of: str | None) -> Varied:
        """See `Chain`."""
        return self._varied(self._halted(time, of, None))

    def alive(self, time: Fraction, of: str | None, reward: Reward) -> Varied:
        """See `Chain`."""
        weights, error = self._weights(reward)
        return self._varied(self._halted(time, of, weights), reward, error)

    def lasting(self, at: Fraction | None, duration: Fraction, of: str | None) -> Varied:
        """See `Chain`; worked out as the chance of being down or failing, which keeps its digits, and from survival."""
        up = self.answers.up(of)
        generator = self.answers.generator
        nowhere = np.zeros(len(up))
        answers = []
        for final, absorbed, whole in ((nowhere, 1.0, 1), (up.astype(np.float64), 0.0, 0)):
            ahead, seen = slopes_at(generator, nowhere, duration, final, stopped=~up, absorbed=absorbed)
            seen.high[~up], seen.low[~up] = absorbed, 0.0
            before, weights = self._before(at, seen, ahead.error)
            inside = Doubled(weights.high * up, weights.low * up)
            after, _ = slopes_at(generator, inside, duration, final, stopped=~up, absorbed=absorbed)
            varied = self._varied(after, None, ahead.error)
            answer = before + Varied(Fraction(0), Fraction(0), varied.slopes, varied.doubts)
            answers.append(answer.complement_of(Fraction(1)) if whole else answer)
        return answers[0].or_sharper(answers[1])

    def _before(self, at: Fraction | None, seen: Doubled, error: float) -> tuple[Varied, Doubled]:
        """Return the mean of a value as it varies by what comes before, with the weights of the states.

        At a time, or in the long run.
        """
        generator = self.answers.generator
        if at is not None:
            found, _ = slopes_at(generator, self._start, at, seen)
            return self._varied(found, None, error), found.rewards
        if len(self._classes) > 1:
            ends = np.concatenate(self._classes)
            if not (seen.high[ends] == seen.high[ends[0]]).all() or seen.high[ends[0]] not in (0.0, 1.0):
                raise several_ends(self.answers, [members.astype(np.int64) for members in self._classes])
            return fixed(Fraction(float(seen.high[ends[0]]))), zeros(generator.n)
        found = long_run_slopes(generator, self._classes[0], seen)
        return self._varied(found, None, error), found.rewards

    def first(self, of: str | None) -> tuple[Varied, Varied]:
        """See `Chain`."""
        down = ~self.answers.up(of)
        generator = self.answers.generator
        stopped = generator.without_exits(down)
        if any(not down[members[0]] for members in stopped.closed_classes(self._begin)):
            raise IllPosed("a failure may never come, so there is no mean time to it")
        first, half = absorption_slopes(generator, self._start, down)
        mean, second = self._varied(first), self._varied(half).times(Fraction(2))
        if not mean.value:
            return mean, mean
        return mean, (second + mean.product(mean).times(Fraction(-1))).root()

    # --- numbers -----------------------------------------------------------------------------------------------------

    def beside(self, good: Varied, bad: Varied) -> Varied:
        """See `Chain`."""
        return good.or_sharper(bad.complement_of(Fraction(1)))

    def times(self, value: Varied, factor: Fraction) -> Varied:
        """See `Chain`."""
        return value.times(factor)

    def capped(self, value: Varied) -> Varied:
        """See `Chain`; what is left above 1 is rounding, and a slope is not changed by it."""
        return value

    def vanishes(self, value: Varied) -> str:
        """See `Chain`."""
        return "" if abs(value.value) > value.doubt else " at these values"
