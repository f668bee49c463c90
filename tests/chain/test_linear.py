"""Stationary values, mean times and absorption against exact rational algebra: contained without exception."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from markov import chain as room
from markov.errors import NotReached
from tests.chain import balls, families

COUNT = 90
#: The same for all three: refinement in double-double leaves only the rounding of the result.
WIDTH = {"elimination": 1e-15, "dense": 1e-15, "sweeps": 1e-15}


def irreducible(chain: families.Chain) -> bool:
    return len(chain.generator().closed_classes()) == 1 and chain.generator().classes()[0] == 1


def test_stationary_probabilities_are_contained(linear_solver):
    asked = declined = 0
    for chain in families.some(COUNT, seed=1):
        if not irreducible(chain):
            continue
        truth = balls.stationary(chain)
        asked += 1
        try:
            found = room.stationary(chain.generator())
        except NotReached:
            declined += 1
            continue
        for state in range(chain.n):
            entry = found.entry(state)
            assert balls.holds(entry, truth[state]), (chain.name, state)
            assert entry.width < WIDTH[linear_solver], (chain.name, state)
        down = found.weighted(chain.down_flags)
        assert balls.holds(down, sum(truth[state] for state in chain.down)), chain.name
        assert balls.holds(found.weighted(~chain.down_flags), 1 - sum(truth[state] for state in chain.down)), chain.name
    assert asked > 60
    assert declined == 0


def test_first_passage_is_contained(linear_solver):
    asked = declined = 0
    for chain in families.some(COUNT, seed=2):
        asked += 1
        mean = balls.before_absorption(chain, chain.down, {i: Fraction(1) for i in range(chain.n)})
        half = balls.before_absorption(chain, chain.down, mean)
        try:
            found = room.first_passage(chain.generator(), 0, chain.down_flags)
        except NotReached:
            declined += 1
            continue
        assert found.probability == room.point(1, "by structure")
        assert balls.holds(found.mean, mean[0]), chain.name
        assert found.mean.width < WIDTH[linear_solver], chain.name
        variance = 2 * half[0] - mean[0] ** 2
        spread = found.standard_deviation
        assert Fraction(spread.lower) ** 2 <= variance <= Fraction(spread.upper) ** 2, chain.name
        assert spread.width < 100 * WIDTH[linear_solver], chain.name
    assert asked == COUNT
    assert declined == 0


def test_rewards_and_several_ends_are_contained(linear_solver):
    declined = 0
    for number, chain in enumerate(families.some(60, seed=3)):
        rng = np.random.default_rng(number)
        if chain.n < 4:
            continue
        label = np.full(chain.n, -1)
        label[chain.n - 1], label[chain.n - 2] = 0, 1
        stopped = (chain.n - 1, chain.n - 2)
        alive = list(range(chain.n - 2))
        reward = np.where(label < 0, rng.integers(0, 4, chain.n), 0).astype(float)
        start = np.zeros(chain.n)
        start[0], start[chain.n - 3] = 0.25, start[chain.n - 3] + 0.75
        generator = chain.generator()
        try:
            ends = room.absorption(generator, start, label)
            earned = room.rewards_before_absorption(generator, start, label, [reward, label < 0])
        except NotReached:
            declined += 1
            continue
        truths = []
        for end in stopped:
            into = {i: chain.rates.get((i, end), Fraction(0)) for i in alive}
            truths.append(balls.before_absorption(chain, stopped, into))
        for column in (dict(enumerate(Fraction(x) for x in reward)), {i: Fraction(1) for i in alive}):
            truths.append(balls.before_absorption(chain, stopped, column))
        for found, truth in zip((ends.entry(0), ends.entry(1), *earned), truths, strict=True):
            mixed = Fraction(1, 4) * truth[0] + Fraction(3, 4) * truth[chain.n - 3]
            assert balls.holds(found, mixed), chain.name
            assert found.width < 2 * WIDTH[linear_solver], chain.name
    assert declined <= (0 if linear_solver != "sweeps" else 2)


def test_a_start_that_carries_an_error_widens_the_answer():
    chain = next(families.some(1, seed=4))
    exact = room.first_passage(chain.generator(), 0, chain.down_flags)
    values = np.zeros(chain.n)
    values[0] = 1.0
    blurred = room.Vector(values, 1e-6, 1e-9, "measured", np.ones(chain.n, dtype=bool))
    wide = room.first_passage(chain.generator(), blurred, chain.down_flags)
    assert wide.mean.lower < exact.mean.lower * (1 - 5e-7)
    assert wide.mean.upper > exact.mean.upper * (1 + 5e-7)
    guessed = room.first_passage(chain.generator(), room.Vector(values, None, 0.0, "guess"), chain.down_flags)
    assert not guessed.mean.certified
    assert not guessed.standard_deviation.certified


def test_erlang_hundred_has_a_deviation_of_a_tenth(linear_solver):
    stages = 100
    rates = {(i, i + 1): Fraction(1, 3) for i in range(stages)}
    chain = families.Chain("erlang", stages + 1, rates, (stages,), ())
    found = room.first_passage(chain.generator(), 0, chain.down_flags)
    assert balls.holds(found.mean, Fraction(300))
    assert Fraction(found.standard_deviation.lower) ** 2 <= 900 <= Fraction(found.standard_deviation.upper) ** 2
    assert found.standard_deviation.width < 1e-11


@pytest.mark.parametrize("seed", range(6))
def test_a_wrong_rate_is_noticed(seed, linear_solver):
    """A rate off by 1e-9 must fall out of the interval somewhere: the intervals are not merely wide."""
    chain = [each for each in families.some(12, seed=5) if irreducible(each)][seed]
    truth = balls.stationary(chain)
    # The move back from the last state: it weighs on the stationary vector of every family.
    touched = max(pair for pair in chain.rates if pair[0] == chain.n - 1)
    wrong = chain.generator({touched: 1 + Fraction(1, 10**9)})
    found = room.stationary(wrong)
    assert not all(balls.holds(found.entry(state), truth[state]) for state in range(chain.n))
