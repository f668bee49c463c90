"""Estimates of a simulation, each with its standard error and its intervals."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

#: Events below which Student's t is not trusted alone.
FEW = 50


@dataclass(frozen=True)
class Estimate:
    """A number from a sample.

    Attributes
    ----------
    value : float
    standard_error : float
    samples : int
        Lives, or batches of one life.
    events : float or None
        Where the number counts events, or the time after them: how many were seen.
    is_share : bool
        Whether each sample was a yes or a no.
    is_bounded : bool
        Whether each sample lies between 0 and 1; `events` then tells how many differ from the usual.
    """

    value: float
    standard_error: float
    samples: int
    events: float | None = None
    is_share: bool = False
    is_bounded: bool = False

    def interval(self, confidence: float = 0.95) -> tuple[float, float]:
        """Return the two-sided interval at a confidence.

        Notes
        -----
        Shares: exact binomial limits (C. J. Clopper, E. S. Pearson, Biometrika 26, 1934).  Others: Student's t over
        the samples; where fewer than 50 events were seen, joined with the exact Poisson limits (F. Garwood,
        Biometrika 28, 1936).  Bounded samples of which fewer than 50 differ from the usual: joined with the binomial
        limits of the same sum, since no law on [0, 1] spreads more than a yes or no of its mean (W. Hoeffding, J. Amer.
        Statist. Assoc. 58, 1963).  Student's t alone is too narrow there: a rare loss that was not seen widens nothing.
        """
        from scipy import stats

        beyond = (1.0 - confidence) / 2.0
        if self.is_share:
            return _binomial(round(self.value * self.samples), self.samples, beyond)
        if self.samples < 2:
            return -math.inf, math.inf
        reach = float(stats.t.isf(beyond, self.samples - 1)) * self.standard_error
        low, high = self.value - reach, self.value + reach
        if self.is_bounded:
            if self.events is not None and self.events < FEW:
                other = _binomial(self.value * self.samples, self.samples, beyond)
                low, high = min(low, other[0]), max(high, other[1])
        elif self.events is not None and 0 < self.events < FEW:
            per_event = self.value / self.events
            low = min(low, per_event * float(stats.chi2.ppf(beyond, 2.0 * self.events)) / 2.0)
            high = max(high, per_event * float(stats.chi2.isf(beyond, 2.0 * self.events + 2.0)) / 2.0)
        return low, high


def _binomial(seen: float, samples: int, beyond: float) -> tuple[float, float]:
    from scipy import stats

    low = float(stats.beta.ppf(beyond, seen, samples - seen + 1)) if seen > 0 else 0.0
    high = float(stats.beta.isf(beyond, seen + 1, samples - seen)) if seen < samples else 1.0
    return low, high


def bounded_mean(values: Sequence[float], usual: float) -> Estimate:
    """Return the estimate of a mean of values between 0 and 1, of which most may be the usual one."""
    found = mean(values, float(sum(value != usual for value in values)))
    return replace(found, is_bounded=True)


def share(yes: int, samples: int) -> Estimate:
    """Return the estimate of a probability."""
    value = yes / samples
    return Estimate(value, math.sqrt(value * (1.0 - value) / samples), samples, is_share=True)


def mean(values: Sequence[float], events: float | None = None) -> Estimate:
    """Return the estimate of a mean from independent values."""
    number = len(values)
    value = math.fsum(values) / number
    spread = math.fsum((each - value) ** 2 for each in values)
    error = math.sqrt(spread / (number - 1) / number) if number > 1 else math.inf
    return Estimate(value, error, number, events)


def ratio(above: Sequence[float], below: Sequence[float]) -> Estimate | None:
    """Return the estimate of a ratio of two means over the same samples; None where there is nothing to divide by.

    Notes
    -----
    First order in the spreads (W. G. Cochran, Sampling Techniques, 3rd ed., 1977, section 2.11, from memory).
    """
    number, total = len(above), math.fsum(below)
    if total == 0.0:
        return None
    value = math.fsum(above) / total
    rest = math.fsum((one - value * other) ** 2 for one, other in zip(above, below, strict=True))
    error = math.sqrt(rest / (number - 1) / number) / (total / number) if number > 1 else math.inf
    return Estimate(value, error, number)
