"""Holds the intervals of estimates to the confidence that they claim."""

from __future__ import annotations

import numpy as np
import pytest

from markov.studies.simulation_estimates import bounded_mean, mean, ratio, share


def covered(draw: str, confidence: float, trials: int = 1500) -> float:
    """Share of samples whose interval holds the true mean."""
    generator = np.random.default_rng(11)
    hits = 0
    for _ in range(trials):
        if draw == "share":
            found, true = share(int(generator.binomial(200, 0.02)), 200), 0.02
        elif draw == "rare loss":
            lost = generator.random(200) < 0.02
            found, true = bounded_mean(np.where(lost, generator.random(200), 0.0).tolist(), 0.0), 0.01
        elif draw == "few events":
            counts = generator.poisson(0.5, 40)
            found, true = mean(counts.tolist(), float(counts.sum())), 0.5
        else:
            found, true = mean(generator.normal(3.0, 1.0, 40).tolist()), 3.0
        low, high = found.interval(confidence)
        hits += low <= true <= high
    return hits / trials


@pytest.mark.parametrize("draw", ["share", "rare loss", "few events", "normal"])
@pytest.mark.parametrize("confidence", [0.9, 0.99])
def test_intervals_hold_the_truth_as_often_as_they_claim(draw: str, confidence: float) -> None:
    spread = (confidence * (1 - confidence) / 1500) ** 0.5
    assert covered(draw, confidence) >= confidence - 4 * spread


def test_a_loss_that_was_never_seen_still_has_an_upper_limit() -> None:
    low, high = bounded_mean([0.0] * 100, 0.0).interval(0.95)
    assert low == 0.0
    assert high == pytest.approx(1 - 0.025 ** (1 / 100))


def test_a_ratio_has_the_spread_of_its_parts() -> None:
    generator = np.random.default_rng(5)
    below = generator.uniform(1.0, 2.0, 400)
    above = 0.3 * below + generator.normal(0.0, 0.05, 400)
    found = ratio(above.tolist(), below.tolist())
    assert found is not None
    low, high = found.interval(0.999)
    assert low <= 0.3 <= high
    assert ratio([0.0], [0.0]) is None
