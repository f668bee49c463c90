"""Measures that follow from others in the same way, whether anything happens at fixed instants or not."""

from __future__ import annotations

from abc import ABC, abstractmethod
from fractions import Fraction
from typing import Protocol

from markov.chain import Enclosure
from markov.errors import IllPosed
from markov.evaluation.questions import Question


class TimeToFailure(Protocol):
    """Mean and spread of a time to a first failure; None where it may never come."""

    @property
    def mean(self) -> Enclosure | None:
        """Hours."""

    @property
    def standard_deviation(self) -> Enclosure | None:
        """Hours."""


class Derived(ABC):
    """Answers by what the chain tells directly; who inherits tells that."""

    year_hours: Fraction

    @abstractmethod
    def can_fail(self, of: str | None) -> bool:
        """Tell whether a down state of a subject can be reached at all."""

    @abstractmethod
    def _unreliability(self, question: Question) -> Enclosure: ...

    @abstractmethod
    def _availability(self, question: Question) -> Enclosure: ...

    @abstractmethod
    def _unavailability(self, question: Question) -> Enclosure: ...

    @abstractmethod
    def _failure_frequency(self, question: Question) -> Enclosure: ...

    @abstractmethod
    def _integral(self, at: Fraction, of: str | None, which: int) -> Enclosure:
        """Return an integral over (0, at]: of being down (0), of failures (1), of being up (2)."""

    @abstractmethod
    def _first_failure(self, of: str | None) -> TimeToFailure: ...

    def _mean_unavailability(self, question: Question) -> Enclosure:
        at = question.positive_time
        return self._integral(at, question.of, 0).over(at).capped()

    def _mean_availability(self, question: Question) -> Enclosure:
        at = question.positive_time
        up = self._integral(at, question.of, 2).over(at).capped()
        return up.meet(self._mean_unavailability(question).complement()) if up.lower is not None else up

    def _mean_time_to_first_failure(self, question: Question) -> Enclosure:
        mean = self._first_failure(question.of).mean
        if mean is None:
            raise IllPosed("a failure may never come, so there is no mean time to it")
        return mean

    def _spread_of_time_to_first_failure(self, question: Question) -> Enclosure:
        spread = self._first_failure(question.of).standard_deviation
        if spread is None:
            raise IllPosed("a failure may never come, so there is no spread of the time to it")
        return spread

    def _mean_up_time(self, question: Question) -> Enclosure:
        return self._availability(question) / self._passages(question)

    def _mean_down_time(self, question: Question) -> Enclosure:
        return self._unavailability(question) / self._passages(question)

    def _passages(self, question: Question) -> Enclosure:
        """Return the failure frequency as a divisor."""
        if not self.can_fail(question.of):
            raise IllPosed("no down state can be reached")
        frequency = self._failure_frequency(question)
        if frequency.upper == 0:
            raise IllPosed("in the long run there are no failures to count: in the end it stays up, or down, for good")
        return frequency

    def _expected_failures(self, question: Question) -> Enclosure:
        return self._integral(question.time, question.of, 1)

    def _conditional_failure_intensity(self, question: Question) -> Enclosure:
        up = self._availability(question)
        if up.upper == 0:
            raise IllPosed("the system is down for good" if question.of is None else f"{question.of} is down for good")
        return self._failure_frequency(question) / up

    def _failures_per_year(self, question: Question) -> Enclosure:
        return self.per_year(self._failure_frequency(question))

    def _downtime_per_year(self, question: Question) -> Enclosure:
        return self.per_year(self._unavailability(question))

    def _mean_failure_rate(self, question: Question) -> Enclosure:
        return self._unreliability(question).over(question.positive_time)

    def per_year(self, value: Enclosure) -> Enclosure:
        """Return a number per hour, or a share of time, as a number or hours per year."""
        return value.times(self.year_hours)
