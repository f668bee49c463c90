"""How a chain with fixed instants goes on in the end, and means over that."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from markov.chain import Enclosure, Vector
from markov.chain.periodic import PeriodicLimit
from markov.evaluation.laying import Earnings, Mask, Stretch, Values


class Weighable(Protocol):
    """A long-run distribution, as far as means are asked of it."""

    def weighted(self, weights: Values | Mask, weight_error: float = 0.0) -> Enclosure:
        """Return the mean of a number that each state has."""


@dataclass(frozen=True)
class Limit:
    """One way of going on in the end: a periodic limit, or the stationary distribution of the last phase.

    Attributes
    ----------
    periodic : PeriodicLimit or None
    stretches : tuple of Stretch
        The cycle.
    settled : Vector or None
        Where there is no cycle.
    phase : int
        The last phase, where there is no cycle.
    """

    periodic: PeriodicLimit | None
    stretches: tuple[Stretch, ...]
    settled: Vector | None
    phase: int
    _means: dict[tuple[float, bytes], Enclosure] = field(default_factory=dict, compare=False, repr=False)

    def mean(self, values: Callable[[int], Values], error: float) -> Enclosure:
        """Return the mean of a number that each state has in a phase; several measures ask for the same ones."""
        if self.periodic is None:
            assert self.settled is not None
            return self.settled.weighted(values(self.phase), error)
        found = [values(each.regime) for each in self.stretches]
        asked = error, b"".join(np.ascontiguousarray(each).tobytes() for each in found)
        if asked not in self._means:
            self._means[asked] = self.periodic.mean(found, error)
        return self._means[asked]

    def rate(self, earnings: Earnings) -> Enclosure:
        """Return what is earned per hour, one reward."""
        if self.periodic is None:
            assert self.settled is not None
            return self.settled.weighted(earnings.during(self.phase)[:, 0], earnings.error)
        rewards = [earnings.during(each.regime)[:, 0] for each in self.stretches]
        at = [] if earnings.at is None else [earnings.at(each)[:, 0] for each in self.stretches]
        return self.periodic.rate(rewards, earnings.error, at, earnings.error)

    def peak(self, values: Callable[[int], Values]) -> Enclosure:
        """Return the largest of the values just before and just after the instants."""
        if self.periodic is None:
            return self.mean(values, 0.0)
        found = []
        for stretch, begin, end in zip(self.stretches, self.periodic.begins, self.periodic.ends, strict=True):
            flags = values(stretch.regime)
            found += [begin.weighted(flags).capped(), end.weighted(flags).capped()]
        return _largest(found)

    def possible(self) -> list[tuple[int, Mask]]:
        """Return phases with the states that can be occupied in them."""
        if self.periodic is None:
            assert self.settled is not None
            assert self.settled.possible is not None
            return [(self.phase, self.settled.possible)]
        found = []
        for stretch, begin, end in zip(self.stretches, self.periodic.begins, self.periodic.ends, strict=True):
            assert begin.possible is not None
            assert end.possible is not None
            found.append((stretch.regime, begin.possible | end.possible))
        return found


def _largest(values: Sequence[Enclosure]) -> Enclosure:
    best = max(values, key=lambda each: each.value)
    lowers = [each.lower for each in values if each.lower is not None]
    uppers = [each.upper for each in values if each.upper is not None]
    if len(lowers) < len(values) or len(uppers) < len(values):
        return Enclosure(best.value, None, None, best.method)
    return Enclosure(best.value, max(lowers), max(uppers), best.method)


class Average:
    """The mean over the cycle as a distribution, for numbers that do not depend on the phase."""

    def __init__(self, limit: Limit) -> None:
        self._limit = limit

    def weighted(self, weights: Values | Mask, weight_error: float = 0.0) -> Enclosure:
        """Return the mean of a number that each state has."""
        values = np.asarray(weights, np.float64)
        return self._limit.mean(lambda _: values, weight_error)
