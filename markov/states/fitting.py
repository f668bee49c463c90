"""Stages fitted to a mean and a spread.

Below the spread of an exponential time: a mixture of Erlang times of k − 1 and k stages of equal rate (H. C. Tijms, A
First Course in Stochastic Models, 2003, appendix B); above it: two stages, the second passed with some chance only
(R. Marie, Calculating equilibrium probabilities for λ(n)/C_k/1/N queues, 1980).  Both cited from memory; both are
checked against the moments they are fitted to.  The mean is met exactly, the spread to the precision of floats; a
fixed time keeps the spread of its Erlang time.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import ceil, sqrt

from markov.model import TimeShape

#: Most stages that a fit may take.
MOST_STAGES = 200


@dataclass(frozen=True)
class Fit:
    """Stages with their rates times the mean, and the chance to end after each though more follow.

    Attributes
    ----------
    weights : tuple of Fraction
        Rate of each stage, times the mean.
    exits : tuple of Fraction
        Zero where the time never ends after the stage early; the last is zero.
    spread : float
        Standard deviation ÷ mean of the fitted time.
    skewness_gap : float
        How far the third moment about the mean, in units of the mean cubed, is from that of a gamma law with the same
        mean and spread; for a fixed time, from zero.
    """

    weights: tuple[Fraction, ...]
    exits: tuple[Fraction, ...]
    spread: float
    skewness_gap: float

    @property
    def stages(self) -> int:
        """Number of stages."""
        return len(self.weights)

    @property
    def unequal(self) -> bool:
        """Whether the stages have rates of their own."""
        return len(set(self.weights)) > 1


def fit_stages(shape: TimeShape) -> Fit:
    """Fit stages to a mean and a spread, or to a fixed time."""
    if shape.is_fixed:
        stages = shape.stages or 20
        return _checked((Fraction(stages),) * stages, (Fraction(0),) * stages, 0.0)
    if shape.standard_deviation is None:
        raise AssertionError("a shape has a spread, or is fixed")
    square = (shape.standard_deviation.exact / shape.mean.exact) ** 2
    wanted = 2.0 * float(square) ** 2  # third central moment of a gamma law over the mean cubed
    if square > 1:
        onward = 1 / (2 * square)
        return _checked((Fraction(2), 1 / square), (1 - onward, Fraction(0)), wanted)
    stages = min(max(ceil(1 / square) if square else MOST_STAGES, 1), MOST_STAGES)
    if stages == 1 or square * stages == 1:
        return _checked((Fraction(stages),) * stages, (Fraction(0),) * stages, wanted)
    spread = float(square)
    inside = max(stages * (1 + spread) - stages * stages * spread, 0.0)
    early = min(max((stages * spread - sqrt(inside)) / (1 + spread), 0.0), 1.0)
    chance = Fraction(early).limit_denominator(10**17)
    exits = [Fraction(0)] * stages
    exits[-2] = chance
    return _checked((stages - chance,) * stages, tuple(exits), wanted)


def _checked(weights: tuple[Fraction, ...], exits: tuple[Fraction, ...], wanted: float) -> Fit:
    mean, second, third = moments(weights, exits)
    if abs(mean - 1) > Fraction(1, 10**12):
        raise AssertionError("the fitted stages miss their mean")
    variance = float(second - mean * mean)
    central = float(third - 3 * mean * second + 2 * mean**3)
    return Fit(weights, exits, sqrt(max(variance, 0.0)), central - wanted)


def moments(weights: tuple[Fraction, ...], exits: tuple[Fraction, ...]) -> tuple[Fraction, Fraction, Fraction]:
    """Return the first three moments of the time that the stages take."""
    first = second = third = Fraction(0)  # of what is left before a stage, from the last one back
    for weight, leave in zip(reversed(weights), reversed(exits), strict=True):
        stay = 1 - leave
        own1, own2, own3 = 1 / weight, 2 / weight**2, 6 / weight**3
        first, second, third = (
            own1 + stay * first,
            own2 + stay * (2 * own1 * first + second),
            own3 + stay * (3 * own2 * first + 3 * own1 * second + third),
        )
    return first, second, third
