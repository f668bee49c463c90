"""Holds the random plants: legal, the same for the same seed, and within reach of the simulation."""

from __future__ import annotations

import itertools
import math
import random

import pytest

from markov.model import Model
from markov.studies.simulation import simulate
from tests.studies.random_specs import FEATURES, LONG_RUN, NotTogether, random_spec

PAIRS = list(itertools.combinations(FEATURES, 2))


def lives(first: str, second: str, seed: int) -> bool:
    """Simulate a plant of two matters; False where the language refuses the two."""
    try:
        spec = random_spec(seed, first, second)
    except NotTogether:
        return False
    found = simulate(Model.from_mapping(spec), histories=2, seed=seed, horizon=6000.0, times=(500.0,))
    for measure in LONG_RUN:
        estimate = found.estimate(measure)
        assert math.isfinite(estimate.value)
        assert estimate.value >= 0.0
    assert found.estimate("steady_state_unavailability").value <= 1.0
    assert found.estimate("mean_capacity").value <= 1.0
    return True


@pytest.mark.parametrize("feature", FEATURES)
def test_each_matter_makes_a_plant(feature: str) -> None:
    assert lives(feature, feature, seed=1)


def test_matters_meet_in_pairs() -> None:
    drawn = random.Random(5).sample(PAIRS, 250)
    assert sum(lives(*pair, seed=2) for pair in drawn) > 240


@pytest.mark.long
@pytest.mark.parametrize("seed", range(3, 8))
def test_all_matters_meet_in_pairs(seed: int) -> None:
    assert sum(lives(*pair, seed=seed) for pair in PAIRS) > 0.97 * len(PAIRS)


def test_same_seed_gives_the_same_plant() -> None:
    assert random_spec(1, "beta", "phases") == random_spec(1, "beta", "phases")
    assert random_spec(1, "beta", "phases") != random_spec(2, "beta", "phases")
