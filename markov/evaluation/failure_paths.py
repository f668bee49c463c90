"""The ways to failure: from a state without a fault, step by step, to one that is down, by their share of all failures.

Method.  Every failure is a transition from an up to a down state.  Its history is followed backwards, from state to
state, to the last state of the start region, or to the down state that the system has come back from; a step back from
s to k has the chance (flow from k to s) / (flow into s), as in the time-reversed jump chain (F. Kelly, Reversibility
and Stochastic Networks, 1979, section 1.7; cited from memory).  The frequencies of all histories add up to the failure
frequency.  The most frequent ones are found best first; loops on the way are cut out, and histories that then agree are
one path.

Where the chain does not fail again and again in the long run, the same is done with the expected time in each state
before the first failure in place of the long-run share, and the shares are those of first failures.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

import numpy as np

from markov.chain import Enclosure, Vector, point
from markov.chain.solve import time_spent
from markov.errors import IllPosed
from markov.evaluation.answers import Answers
from markov.evaluation.solver import answers_of
from markov.model import Model
from markov.states import GeneratedSpace, StateSpace

#: Histories that are followed at most.
MOST_STEPS = 30_000

_UNIT = 2.0**-53

Basis = Literal["failure frequency", "first failures"]


@dataclass(frozen=True)
class FailurePath:
    """One way to failure.

    Attributes
    ----------
    states : tuple of int
        From the start region, or from the down state that the system came back from, to the down state.
    share : float
        Of all failures.
    """

    states: tuple[int, ...]
    share: float


@dataclass(frozen=True)
class FailurePaths:
    """The dominant ways to failure, the most frequent first.

    Attributes
    ----------
    paths : tuple of FailurePath
    covered : float
        Share of all failures that they make together.
    least : float or None
        Proven lower bound of it; None for an estimate.
    basis : str
        What the shares are of: the long-run failure frequency, or the first failures.
    total : Enclosure
        The failure frequency per hour, or the probability of a first failure.
    exhausted : bool
        Whether the search ended before the share that was asked for was reached.
    """

    paths: tuple[FailurePath, ...]
    covered: float
    least: float | None
    basis: Basis
    total: Enclosure
    exhausted: bool

    def first(self, share: float, most: int) -> FailurePaths:
        """Return as few of the paths as make a share together, at most so many."""
        held: list[FailurePath] = []
        covered = 0.0
        for path in self.paths:
            if held and (covered >= share or len(held) == most):
                break
            held.append(path)
            covered += path.share
        least = None if self.least is None else covered * (self.least / self.covered)
        return FailurePaths(tuple(held), covered, least, self.basis, self.total, covered < share)


def failure_paths(model: Model, space: StateSpace, share: Fraction | float = Fraction(95, 100)) -> FailurePaths:
    """Return the ways to failure that together make a share of all failures.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain, without fixed instants.
    share : Fraction or float
        Above 0, at most 1; short of 1 by nature, as loops never end.

    Raises
    ------
    IllPosed
        No down state is ever entered from an up state, or there are fixed instants.
    NotReached
        The chain could not be solved.
    """
    answers = answers_of(model, space)
    if not isinstance(answers, Answers):
        raise IllPosed("ways to failure are told for chains without tests, visits and phases")
    up = answers.up(None)
    if not answers.can_fail(None) or not any(up[state] for state, _ in space.start):
        raise IllPosed("no way leads from an up state to a down state")
    basis, weights, total = _weights(answers, up)
    return _search(answers, up, weights, total, basis, float(share))


def _weights(answers: Answers, up: np.ndarray) -> tuple[Basis, Vector, Enclosure]:
    """Return the long-run shares with the failure frequency, else the times before the first failure."""
    held: list[Vector] = []
    passing, _ = answers.generator.crossing(up, ~up)
    leaving = passing.high + passing.low

    def keep(pi: Vector) -> Enclosure:
        held.append(pi)
        return pi.weighted(leaving, 8 * _UNIT)

    try:
        total = answers.long_run(keep)
    except IllPosed:
        total = point(0, "by structure")
    if total.value > 0:
        return "failure frequency", held[0], total
    spent = time_spent(answers.generator, answers.start, ~up)
    return "first failures", spent, spent.weighted(leaving, 8 * _UNIT)


def _search(
    answers: Answers, up: np.ndarray, weights: Vector, total: Enclosure, basis: Basis, wanted: float
) -> FailurePaths:
    generator, space = answers.generator, answers.space
    source, target = generator.source, generator.target
    flow = weights.values[source] * generator.high
    entering = np.bincount(target, weights=flow, minlength=space.size)
    if basis == "first failures":
        for state, chance in space.start:
            entering[state] += float(chance)
    order = np.argsort(target, kind="stable")
    first = np.searchsorted(target[order], np.arange(space.size + 1))
    starting = _start_region(space, up, weights.values)
    heap: list[tuple[float, int, tuple[int, ...]]] = []
    whole = 0.0
    failing = np.flatnonzero(up[source] & ~up[target] & (flow > 0)).tolist()
    for arrow in failing:
        whole += float(flow[arrow])
        heap.append((-float(flow[arrow]), len(heap), (int(source[arrow]), int(target[arrow]))))
    heapq.heapify(heap)
    found: dict[tuple[int, ...], float] = {}
    covered, longest, steps, number = 0.0, 2, 0, len(heap)
    while heap and covered < wanted * whole and steps < MOST_STEPS:
        negative, _, walk = heapq.heappop(heap)
        steps += 1
        head = walk[0]
        if starting[head] or not up[head]:
            path = _without_loops(walk)
            found[path] = found.get(path, 0.0) - negative
            covered -= negative
            longest = max(longest, len(walk))
            continue
        for arrow in order[first[head] : first[head + 1]].tolist():
            weight = negative * float(flow[arrow]) / float(entering[head])
            if weight < 0:
                number += 1
                heapq.heappush(heap, (weight, number, (int(source[arrow]), *walk)))
    ranked = sorted(found.items(), key=lambda each: (-each[1], each[0]))
    paths = tuple(FailurePath(path, weight / whole) for path, weight in ranked)
    share = min(covered / whole, 1.0)
    widest = int(np.bincount(target).max(initial=1))
    least = _lower_bound(share, weights, longest, widest, steps + len(failing))
    return FailurePaths(paths, share, least, basis, total, share < wanted)


def _start_region(space: StateSpace, up: np.ndarray, weights: np.ndarray) -> np.ndarray:
    """Return the states in which a way to failure begins: initial ones, those without a fault, the most usual one."""
    starting = np.zeros(space.size, np.bool_)
    starting[[state for state, _ in space.start]] = True
    if isinstance(space, GeneratedSpace):
        starting |= space.failed_items == 0
    starting[int(np.argmax(np.where(up, weights, 0.0)))] = True
    return np.asarray(starting & up)


def _without_loops(walk: Sequence[int]) -> tuple[int, ...]:
    """Cut the loops out of a history; it may end in the down state that it began in."""
    path: list[int] = []
    for state in walk[:-1]:
        if state in path:
            del path[path.index(state) + 1 :]
        else:
            path.append(state)
    return (*path, walk[-1])


def _lower_bound(share: float, weights: Vector, longest: int, widest: int, terms: int) -> float | None:
    """Return a proven lower bound of the share covered.

    A history is a product of `longest` flows and inflows at most, each off by the error of the weights, of its rates
    and of a sum of `widest` terms; shares and their divisor are sums of `terms` such products.
    """
    if weights.relative_error is None or weights.absolute_error > 0.0:
        return None
    each = weights.relative_error + (widest + 8) * _UNIT
    return max(0.0, share * (1.0 - 3.0 * ((longest + 2) * each + terms * _UNIT)))
