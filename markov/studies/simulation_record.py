"""What a simulated history leaves behind: counts of events, integrals over time."""

from __future__ import annotations

from collections import defaultdict

#: What is counted or lasts, and of whom.
Key = tuple[str, str]


class Record:
    """Counts of events, and hours weighted with what lasts.

    Attributes
    ----------
    counts : mapping of (what, of whom) to int
    hours : mapping of (what, of whom) to float
    lasting : mapping of (what, of whom) to float
        What holds now.
    was_up : mapping of group to bool
        Before the event that is being taken note of.
    """

    def __init__(self) -> None:
        self.counts: dict[Key, float] = defaultdict(float)
        self.hours: dict[Key, float] = defaultdict(float)
        self.lasting: dict[Key, float] = {}
        self.was_up: dict[str, bool] = {}
        self.passed = 0.0

    def count(self, what: str, of: str) -> None:
        """Count one event."""
        self.counts[what, of] += 1.0

    def pass_time(self, duration: float) -> None:
        """Let time pass in the present state."""
        self.passed += duration
        hours = self.hours
        for key, value in self.lasting.items():
            if value:
                hours[key] += value * duration

    def clear(self) -> None:
        """Begin counting anew; what lasts goes on."""
        self.counts.clear()
        self.hours.clear()
        self.passed = 0.0
