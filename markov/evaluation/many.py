"""Measures of one plant for many values of its parameters, from one chain that is refilled for all samples at once.

Parameter values become values of quantities (`samples`), products of these the symbolic rates, sums of rates with
multiples the rates of the chain; no state is generated again, and the elimination is worked out once for all samples
(`markov.chain.batch`).  What is computed in floats is non-negative throughout: observed relative errors against the
bounded answers of `answers` are below 1e-13.  There is no proven bound on these numbers, and no verdict is drawn from
them.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import coo_array, csr_array

from markov.chain import Generator, aggregate
from markov.chain.batch import Compiled, compile_chain
from markov.chain.batch_transient import Pattern, foresee, spread
from markov.errors import IllPosed
from markov.evaluation.answers import Answers
from markov.evaluation.delivery import capacities_of, delivered
from markov.evaluation.questions import Question
from markov.evaluation.recipes import PerArrow, PerState, Recipes, Reward
from markov.evaluation.refilling import Chains
from markov.evaluation.samples import Samples
from markov.model import Model
from markov.quantities import Quantity

Floats = NDArray[np.float64]
Numbers = NDArray[np.int64]
_Integers = NDArray[np.integer[Any]]


def solve_many(
    model: Model,
    samples: Mapping[str, ArrayLike],
    questions: Iterable[Question],
    *,
    complements: Mapping[str, ArrayLike] | None = None,
) -> dict[Question, Floats]:
    """Answer questions for many values of some parameters.

    Parameters
    ----------
    model : Model
        Parameters that are not sampled keep the value of the spec.
    samples : mapping of name to float64[s]
        Values of parameters in s samples: hours, per hour or plain.
    questions : iterable of Question
    complements : mapping of name to float64[s], optional
        One minus the value, for shares so close to 1 that floats do not hold the digits of their complement.

    Returns
    -------
    dict of Question to float64[s]
        In the order of the questions.

    Raises
    ------
    UsageError
        Samples that do not fit the model, or a measure that compares several plants.
    IllPosed
        A question without an answer in this plant or in one of the samples; or a sample that makes another chain, as a
        failure rate does that is zero in the spec.
    NotReached
        Numbers beyond what floats hold.
    TooLarge
        The chain is too large to be solved many times at once.
    """
    asked = tuple(dict.fromkeys(questions))
    given = Samples(model, samples, complements)
    given.check()
    chains = Chains(model, asked)
    made: dict[bool, Recipes[Floats]] = {}

    def loading() -> list[ManyChains]:
        return [ManyChains(answers, given, ()) for answers in chains.loading]

    found = {}
    for question in asked:
        outside = chains.is_outside(question)
        if outside not in made:
            about = tuple(each for each in asked if chains.is_outside(each) == outside)
            made[outside] = Recipes(ManyChains(chains.extended if outside else chains.plant, given, about), loading)
        found[question] = made[outside].answer(question)
    return found


@dataclass(frozen=True, eq=False)
class _Until:
    """The chain until it enters some states, those outside counted as one; the pattern of what happens before."""

    members: Numbers  # states that run
    kept: Numbers  # transitions out of these
    source: Numbers
    target: Numbers  # the number of members stands for having entered
    merge: csr_array  # adds up transitions that enter from the same state

    def rates(self, rates: Floats) -> Floats:
        return np.asarray(self.merge @ rates[self.kept])


class ManyChains:
    """One chain with the rates of all samples; see `markov.evaluation.recipes.Chain`.

    Parameters
    ----------
    answers : Answers
        The chain as the spec has it.
    samples : Samples
    questions : tuple of Question
        What will be asked, so that all times and integrals are worked out together.
    """

    def __init__(self, answers: Answers, samples: Samples, questions: tuple[Question, ...]) -> None:
        self.answers = answers
        self.samples = samples
        self.count = samples.count
        self._questions = questions
        self._table = samples.rates(answers.space.kinds.rates)
        self._until_found: dict[bytes, _Until] = {}
        self._stopped: dict[str | None, Floats] = {}
        self._integrals: dict[bytes, Floats] = {}

    # --- rates -------------------------------------------------------------------------------------------------------

    @cached_property
    def _pattern(self) -> tuple[Numbers, Numbers, Floats]:
        """Source, target and rates, float64[k, s], of every pair of states with a transition."""
        space = self.answers.space
        arrows = space.arrows
        moving = np.flatnonzero(arrows.moving)
        code = arrows.source[moving].astype(np.int64) * space.size + arrows.target[moving]
        pairs, where = np.unique(code, return_inverse=True)
        add = self._adding(where, moving, len(pairs), np.ones(len(moving)))
        return pairs // space.size, pairs % space.size, np.asarray(add @ self._table)

    def _adding(self, owner: _Integers, arrows: _Integers, count: int, counts: Floats) -> csr_array:
        """Return the matrix that adds the rates of some transitions, counted so many times, to what owns them."""
        space = self.answers.space
        rate = np.array([kind.rate for kind in space.kinds.kinds], np.int64)[space.arrows.kind[arrows]]
        amount = space.arrows.multiple[arrows] * counts
        return coo_array((amount, (owner, rate)), shape=(count, len(self._table))).tocsr()

    @cached_property
    def _graph(self) -> Generator:
        """Which states are connected, for questions of structure."""
        source, target, _ = self._pattern
        return aggregate(self.answers.space.size, source, target, np.ones(len(source)), rate_error=0.0)

    @cached_property
    def _start(self) -> Floats:
        start = np.zeros(self.answers.space.size)
        for state, chance in self.answers.space.start:
            start[state] = float(chance)
        return start

    def _weights(self, reward: Reward) -> Floats:
        """Return a reward by state, float64[n, 1] or float64[n, s]."""
        if isinstance(reward, PerState):
            return reward.values[:, None]
        space = self.answers.space
        if isinstance(reward, PerArrow):
            counting = np.flatnonzero(reward.counts)
            add = self._adding(space.arrows.source[counting], counting, space.size, reward.counts[counting])
            return np.asarray(add @ self._table)
        moving = [self.samples.value(each.expression) for each in capacities_of(space, reward.of)]
        if all(isinstance(value, Fraction) for value in moving):
            return space.capacity(reward.of)[:, None]
        return delivered(space, reward.of, self._capacity, self.count, 0).share

    def _capacity(self, quantity: Quantity) -> tuple[Floats | float, Floats]:
        value = self.samples.value(quantity.expression)
        return (float(value) if isinstance(value, Fraction) else value), np.zeros(0)

    # --- the long run ----------------------------------------------------------------------------------------------

    @cached_property
    def _classes(self) -> list[tuple[Numbers, Floats]]:
        """Closed classes that the chain may end in, each with its stationary distribution, float64[m, s]."""
        found = []
        source, target, rates = self._pattern
        for each in self._graph.closed_classes(self._start > 0.0):
            members = each.astype(np.int64)
            if len(members) == 1:
                found.append((members, np.ones((1, self.count))))
                continue
            number = np.full(self.answers.space.size, -1)
            number[members] = np.arange(len(members))
            inside = number[source] >= 0
            likely = np.flatnonzero(self._start[members] > 0.0)
            ground = int(likely[0]) if likely.size else 0
            made = compile_chain(len(members), number[source[inside]], number[target[inside]], ground=ground)
            found.append((members, made.stationary(rates[inside])))
        return found

    def long_run(self, reward: Reward) -> Floats:
        """See `Chain`."""
        return self._long_run(self._weights(reward))

    def _long_run(self, weights: Floats) -> Floats:
        if len(self._classes) == 1:
            members, distribution = self._classes[0]
            return np.asarray((distribution * weights[members]).sum(axis=0))
        inside = np.concatenate([weights[members] for members, _ in self._classes])
        if (inside == inside[0]).all():
            return np.array(np.broadcast_to(inside[0], self.count), np.float64)
        raise several_ends(self.answers, [members for members, _ in self._classes])

    # --- at given times ----------------------------------------------------------------------------------------------

    @cached_property
    def _times(self) -> tuple[Fraction, ...]:
        return tuple(sorted({q.at_hours for q in self._questions if q.at_hours is not None}))

    @cached_property
    def _free(self) -> Floats:
        """Probabilities of the states at all times, float64[m, n, s]."""
        source, target, rates = self._pattern
        return spread(Pattern(self.answers.space.size, source, target), rates, self._start, self._times).states

    def at(self, time: Fraction, reward: Reward) -> Floats:
        """See `Chain`."""
        return self._at(time, self._weights(reward))

    def _at(self, time: Fraction, weights: Floats) -> Floats:
        return np.asarray((self._free[self._times.index(time)] * weights).sum(axis=0))

    def integral(self, time: Fraction, reward: Reward) -> Floats:
        """See `Chain`."""
        weights = self._weights(reward)
        key = weights.tobytes()
        if key not in self._integrals:
            source, target, rates = self._pattern
            pattern = Pattern(self.answers.space.size, source, target)
            self._integrals[key] = spread(pattern, rates, self._start, self._times, [weights]).integrals[:, 0]
        return np.asarray(self._integrals[key][self._times.index(time)])

    # --- until the first failure -------------------------------------------------------------------------------------

    def _until(self, running: NDArray[np.bool_]) -> _Until:
        """Return the chain on some states, until it leaves them."""
        key = running.tobytes()
        if key not in self._until_found:
            source, target, _ = self._pattern
            members = np.flatnonzero(running)
            number = np.full(self.answers.space.size, len(members))
            number[members] = np.arange(len(members))
            kept = np.flatnonzero(running[source])
            code = number[source[kept]] * (len(members) + 1) + number[target[kept]]
            pairs, owner = np.unique(code, return_inverse=True)
            ones = np.ones(len(kept))
            merge = coo_array((ones, (owner, np.arange(len(kept)))), shape=(len(pairs), len(kept))).tocsr()
            width = len(members) + 1
            self._until_found[key] = _Until(members, kept, pairs // width, pairs % width, merge)
        return self._until_found[key]

    def _reached(self, of: str | None) -> NDArray[np.bool_]:
        """States that run before the first failure."""
        up = self.answers.up(of)
        return self._graph.reachable(self._start > 0.0, blocked=~up) & up

    def _failing(self, of: str | None) -> tuple[_Until, Floats]:
        """Return the chain stopped at the first failure with its states at all times, the last being failed."""
        until = self._until(self._reached(of))
        if of not in self._stopped:
            pattern = Pattern(len(until.members) + 1, until.source, until.target)
            start = np.append(self._start[until.members], self._start[~self.answers.up(of)].sum())
            found = spread(pattern, until.rates(self._pattern[2]), start, self._times)
            self._stopped[of] = found.states
        return until, self._stopped[of]

    def failed(self, time: Fraction, of: str | None) -> Floats:
        """See `Chain`."""
        return np.asarray(self._failing(of)[1][self._times.index(time), -1])

    def alive(self, time: Fraction, of: str | None, reward: Reward) -> Floats:
        """See `Chain`."""
        until, states = self._failing(of)
        return np.asarray((states[self._times.index(time), :-1] * self._weights(reward)[until.members]).sum(axis=0))

    def lasting(self, at: Fraction | None, duration: Fraction, of: str | None) -> Floats:
        """See `Chain`."""
        up = self.answers.up(of)
        until = self._until(up)
        pattern = Pattern(len(until.members) + 1, until.source, until.target)
        final = np.append(np.ones(len(until.members)), 0.0)
        surviving = np.zeros((self.answers.space.size, self.count))
        surviving[until.members] = foresee(pattern, until.rates(self._pattern[2]), final, duration)[:-1]
        return self._long_run(surviving) if at is None else self._at(at, surviving)

    def first(self, of: str | None) -> tuple[Floats, Floats]:
        """See `Chain`."""
        down = ~self.answers.up(of)
        if self._ends_alive(down):
            raise IllPosed("a failure may never come, so there is no mean time to it")
        until = self._until(self._reached(of))
        if not len(until.members):
            return np.zeros(self.count), np.zeros(self.count)
        rates = until.rates(self._pattern[2])
        start = self._start[until.members]
        found = self._compiled(until).passages(rates, start)
        times = np.vstack((found.rewards, np.zeros((1, self.count))))
        mean = np.asarray((start[:, None] * times[:-1]).sum(axis=0))
        # Every jump changes what is still expected; the squares of the changes add up to the variance, nothing cancels
        # (the expected total is a martingale).  A start among several states counts as one jump more.
        spread_ = (self._start[down].sum() * mean**2) + (start[:, None] * (times[:-1] - mean) ** 2).sum(axis=0)
        for rate, tail, head in zip(rates, until.source.tolist(), until.target.tolist(), strict=True):
            spread_ += found.spent[tail] * rate * (times[head] - times[tail]) ** 2
        return mean, np.sqrt(spread_)

    def _compiled(self, until: _Until) -> Compiled:
        return compile_chain(len(until.members), until.source, until.target)

    def _ends_alive(self, down: NDArray[np.bool_]) -> bool:
        """Tell whether the chain, stopped in the down states, may end elsewhere."""
        stopped = self._graph.without_exits(down)
        return any(not down[members[0]] for members in stopped.closed_classes(self._start > 0.0))

    # --- numbers -----------------------------------------------------------------------------------------------------

    def beside(self, good: Floats, bad: Floats) -> Floats:
        """See `Chain`; both were added up from small to large without a difference."""
        return good

    def times(self, value: Floats, factor: Fraction) -> Floats:
        """See `Chain`."""
        return value * float(factor)

    def capped(self, value: Floats) -> Floats:
        """See `Chain`."""
        return np.minimum(value, 1.0)

    def vanishes(self, value: Floats) -> str:
        """See `Chain`."""
        return f" (sample {int(np.argmin(value))})" if not value.all() else ""


def several_ends(answers: Answers, classes: list[Numbers]) -> IllPosed:
    """Return the reason why a chain that can end in several ways has no one long-run value."""
    up = answers.up(None)
    dead = [not up[members].any() for members in classes]
    if any(dead) and not all(dead):
        return IllPosed("some histories end down for good and others live on, so there is no one long-run value")
    return IllPosed("the chain can end in several ways, so the long-run value depends on chance or on the start")
