"""Durations under way in a simulation: which ends next, which are held up."""

from __future__ import annotations

import math
from collections.abc import Callable
from heapq import heappop, heappush


class Timer:
    """A duration under way; `stamp` tells its entry in the clock from older ones, 0 while it is held up."""

    __slots__ = ("action", "due", "left", "stamp")

    def __init__(self, left: float, action: Callable[[], None]) -> None:
        self.action = action
        self.left = left
        self.due = math.inf
        self.stamp = 0


class Clock:
    """The time of one history, with everything that ends by itself."""

    def __init__(self) -> None:
        self.now = 0.0
        self._ends: list[tuple[float, int, Timer]] = []
        self._stamps = 0

    def start(self, duration: float, action: Callable[[], None]) -> Timer:
        """Begin a duration; `action` is called at its end."""
        timer = Timer(duration, action)
        self.resume(timer)
        return timer

    def resume(self, timer: Timer) -> None:
        """Let a duration go on; no effect on one that runs."""
        if timer.stamp:
            return
        self._stamps += 1
        timer.stamp = self._stamps
        timer.due = self.now + timer.left
        if timer.due < math.inf:
            heappush(self._ends, (timer.due, timer.stamp, timer))

    def hold(self, timer: Timer) -> None:
        """Hold a duration up, or end it without its action; what is left of it is kept."""
        if timer.stamp:
            timer.left = max(timer.due - self.now, 0.0)
            timer.stamp = 0

    def left(self, timer: Timer) -> float:
        """Return how many hours of a duration are left."""
        return timer.due - self.now if timer.stamp else timer.left

    def next(self) -> float:
        """Return when the next duration ends; infinity if none does."""
        while self._ends:
            due, stamp, timer = self._ends[0]
            if timer.stamp == stamp:
                return due
            heappop(self._ends)
        return math.inf

    def end_next(self) -> None:
        """End the duration that `next` told of."""
        timer = heappop(self._ends)[2]
        timer.stamp = 0
        timer.left = 0.0
        timer.action()
