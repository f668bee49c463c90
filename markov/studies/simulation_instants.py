"""What happens in a simulated plant at instants that are fixed beforehand."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction
from heapq import heapify, heappop, heappush

from markov.studies.simulation_plan import Plan

#: Order of what coincides: phases, visits, ends of tests, tests as listed.
_PHASE, _VISIT, _TEST_END, _TEST = range(4)

_Entry = tuple[Fraction, int, int, int]


class Instants:
    """The calendar of a plant, in exact hours so that instants coincide where they are meant to.

    Parameters
    ----------
    plan : Plan
    begin_phase, visit, end_test, begin_test : callable
        Called with the position of the phase, the name of the group, the position of the test.
    """

    def __init__(
        self,
        plan: Plan,
        begin_phase: Callable[[int], None],
        visit: Callable[[str], None],
        end_test: Callable[[int], None],
        begin_test: Callable[[int], None],
    ) -> None:
        self._plan = plan
        self._begin_phase, self._visit = begin_phase, visit
        self._end_test, self._begin_test = end_test, begin_test
        self._visited = [
            (group.name, group.visits_every) for group in plan.groups.values() if group.visits_every is not None
        ]
        self._coming: list[_Entry] = []
        for position, (_, every) in enumerate(self._visited):
            self._coming.append((every, _VISIT, position, 0))
        for position, test in enumerate(plan.tests):
            self._coming.append((test.first, _TEST, position, 0))
        if plan.phases and plan.phases[0].duration is not None:
            self._coming.append((plan.phases[0].duration, _PHASE, 0, 0))
        heapify(self._coming)
        self.next = math.inf
        self._look()

    def _look(self) -> None:
        self.next = float(self._coming[0][0]) if self._coming else math.inf

    def happen(self) -> None:
        """Let everything of the next instant happen, in order."""
        instant = self._coming[0][0]
        while self._coming and self._coming[0][0] == instant:
            _, what, position, _ = heappop(self._coming)
            if what == _PHASE:
                self._next_phase(instant, position)
            elif what == _VISIT:
                name, every = self._visited[position]
                heappush(self._coming, (instant + every, _VISIT, position, 0))
                self._visit(name)
            elif what == _TEST_END:
                self._end_test(position)
            else:
                test = self._plan.tests[position]
                heappush(self._coming, (instant + test.interval, _TEST, position, 0))
                self._begin_test(position)
                if test.duration > 0:
                    heappush(self._coming, (instant + test.duration, _TEST_END, position, 0))
                else:
                    self._end_test(position)
        self._look()

    def _next_phase(self, instant: Fraction, ended: int) -> None:
        phases = self._plan.phases
        following = ended + 1
        if following == len(phases):
            if not self._plan.repeats:
                return
            following = 0
        duration = phases[following].duration
        if duration is not None:
            heappush(self._coming, (instant + duration, _PHASE, following, 0))
        self._begin_phase(following)
