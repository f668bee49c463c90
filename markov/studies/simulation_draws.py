"""Random numbers of a simulation, drawn in blocks because one at a time is slow."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

T = TypeVar("T")
#: Sizes of the first and of the largest block: many lives are short.
_FIRST, _LARGEST = 64, 8192


class Draws:
    """Uniform and exponential numbers from one generator.

    Parameters
    ----------
    seed : int, or sequence of int
        Of the generator; the same seed gives the same numbers.
    """

    def __init__(self, seed: int | Sequence[int]) -> None:
        self._generator = np.random.default_rng(seed)
        self._block = _FIRST
        self._uniforms: list[float] = []
        self._exponentials: list[float] = []

    def _next_block(self) -> int:
        block, self._block = self._block, min(2 * self._block, _LARGEST)
        return block

    def uniform(self) -> float:
        """Return a number in [0, 1)."""
        if not self._uniforms:
            self._uniforms = self._generator.random(self._next_block()).tolist()
        return self._uniforms.pop()

    def exponential(self) -> float:
        """Return an exponential number of mean 1."""
        if not self._exponentials:
            self._exponentials = self._generator.standard_exponential(self._next_block()).tolist()
        return self._exponentials.pop()

    def gamma(self, shape: float) -> float:
        """Return a gamma number of scale 1."""
        return float(self._generator.standard_gamma(shape))

    def chance(self, probability: float) -> bool:
        """Return True with a probability; none is drawn where the answer is certain."""
        if probability <= 0.0:
            return False
        return probability >= 1.0 or self.uniform() < probability

    def one_of(self, choices: Sequence[T]) -> T:
        """Return one of several, each with the same chance."""
        if len(choices) == 1:
            return choices[0]
        return choices[int(self.uniform() * len(choices))]

    def shuffled(self, choices: Sequence[T]) -> list[T]:
        """Return all in random order."""
        left = list(choices)
        for last in range(len(left) - 1, 0, -1):
            other = int(self.uniform() * (last + 1))
            left[last], left[other] = left[other], left[last]
        return left

    def index(self, weights: Sequence[float]) -> int:
        """Return a position with a chance in proportion to its weight."""
        point = self.uniform() * math.fsum(weights)
        for position, weight in enumerate(weights):
            point -= weight
            if point < 0.0:
                return position
        return max(position for position, weight in enumerate(weights) if weight > 0.0)


@dataclass(frozen=True)
class Law:
    """Law of a duration: its mean in hours, and how it spreads.

    Attributes
    ----------
    mean : float
        ``inf`` for what never ends.
    variance : float
        Of the duration over the square of its mean: 1 exponential, 1 / n in n equal stages, 0 fixed.
        Everything between is a gamma law of that mean and variance.
    """

    mean: float
    variance: float = 1.0

    def draw(self, draws: Draws) -> float:
        """Return one duration in hours."""
        if self.mean == 0.0 or math.isinf(self.mean) or self.variance == 0.0:
            return self.mean
        if self.variance == 1.0:
            return self.mean * draws.exponential()
        return self.mean * self.variance * draws.gamma(1.0 / self.variance)
