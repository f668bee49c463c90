"""Measures of a chain in ball arithmetic of 900 bits, written from their meaning with plain matrix algebra."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from functools import cached_property

import flint
import numpy as np

from markov.evaluation.questions import Question
from markov.states import GeneratedSpace, Pool, StateSpace
from tests.chain.balls import rational

BITS = 900


class Truth:
    """One chain, exact.  Its states keep the meaning that the state space gives them."""

    def __init__(self, space: StateSpace, year: Fraction) -> None:
        self.space, self.year = space, rational(year)
        arrows = space.arrows
        rates = [space.kinds.rates.rates[kind.rate].exact for kind in space.kinds.kinds]
        self.arrows = [
            (int(a), int(b), rational(rates[k] * int(m)), int(k))
            for a, b, k, m in zip(arrows.source, arrows.target, arrows.kind, arrows.multiple, strict=True)
        ]
        self.n = space.size
        self.start = [flint.fmpq(0)] * self.n
        for state, chance in space.start:
            self.start[state] += rational(chance)
        self._moves: dict[object, flint.arb_mat] = {}

    # --- matrices ------------------------------------------------------------------------------------------------

    def generator(self, stopped: Sequence[bool]) -> flint.fmpq_mat:
        matrix = flint.fmpq_mat(self.n, self.n)
        for a, b, rate, _ in self.arrows:
            if a != b and not stopped[a]:
                matrix[a, b] += rate
                matrix[a, a] -= rate
        return matrix

    @cached_property
    def free(self) -> list[bool]:
        return [False] * self.n

    @cached_property
    def pi(self) -> list[flint.fmpq]:
        """The long-run distribution; the chain has one closed class."""
        matrix = self.generator(self.free).transpose()
        for state in range(self.n):
            matrix[self._recurrent, state] = 1
        right = flint.fmpq_mat(self.n, 1)
        right[self._recurrent, 0] = 1
        solved = matrix.solve(right)
        return [solved[state, 0] for state in range(self.n)]

    @cached_property
    def _recurrent(self) -> int:
        """A state that every state leads to: its balance may be left out."""
        leads = np.eye(self.n, dtype=bool)
        for a, b, rate, _ in self.arrows:
            leads[a, b] |= rate != 0
        for _ in range(self.n):
            leads = leads @ leads
        return int(np.flatnonzero(leads.all(axis=0))[0])

    def moves(
        self, time: Fraction, stopped: Sequence[bool], reward: Sequence[flint.fmpq] | None = None
    ) -> flint.arb_mat:
        key = (time, tuple(stopped), None if reward is None else tuple(map(str, reward)))
        if key not in self._moves:
            inside = self.generator(stopped)
            matrix = flint.fmpq_mat(self.n + 1, self.n + 1)
            for a in range(self.n):
                for b in range(self.n):
                    matrix[a, b] = inside[a, b] * rational(time)
                if reward is not None:
                    matrix[a, self.n] = reward[a] * rational(time)
            self._moves[key] = flint.arb_mat(matrix).exp()
        return self._moves[key]

    def carried(self, moves: flint.arb_mat) -> list[flint.arb]:
        return [
            sum((flint.arb(self.start[a]) * moves[a, b] for a in range(self.n)), flint.arb(0))
            for b in range(self.n + 1)
        ]

    # --- rewards -------------------------------------------------------------------------------------------------

    def up(self, of: str | None) -> list[bool]:
        return [bool(each) for each in (self.space.up if of is None else self.space.delivers(of))]

    def flow(self, count: Callable[[int, int, int], float]) -> list[flint.fmpq]:
        """Per state the rate of what a count of from, to, kind says."""
        found = [flint.fmpq(0)] * self.n
        for a, b, rate, kind in self.arrows:
            found[a] += rate * int(count(a, b, kind))
        return found

    def failures(self, of: str | None) -> list[flint.fmpq]:
        up = self.up(of)
        return self.flow(lambda a, b, _: up[a] and not up[b])

    def mean(self, values: Sequence[object], at: Fraction | None) -> flint.arb:
        weights: Sequence[object] = self.pi if at is None else self.carried(self.moves(at, self.free))[: self.n]
        return sum((_arb(w) * _arb(v) for w, v in zip(weights, values, strict=True)), flint.arb(0))

    # --- answers -------------------------------------------------------------------------------------------------

    def answer(self, question: Question) -> flint.arb:
        with flint.ctx.workprec(BITS):
            return self._answer(question.measure, question)

    def _answer(self, measure: str, q: Question) -> flint.arb:
        at, of = q.at_hours, q.of
        up = self.up(of)
        down = [int(not each) for each in up]
        time = None if at is None else _arb(rational(at))
        match measure:
            case "unavailability" | "steady_state_unavailability" | "pfd_average" | "pfd_peak":
                return self.mean(down, at)
            case "availability" | "steady_state_availability":
                return 1 - self.mean(down, at)
            case "mean_unavailability":
                return self._integral(at, [flint.fmpq(each) for each in down]) / time
            case "mean_availability":
                return 1 - self._answer("mean_unavailability", q)
            case "unreliability":
                return sum((p for p, each in zip(self._stopped(at, up), down, strict=False) if each), flint.arb(0))
            case "reliability":
                return sum((p for p, each in zip(self._stopped(at, up), up, strict=False) if each), flint.arb(0))
            case "mean_failure_rate":
                return self._answer("unreliability", q) / time
            case "hazard_rate":
                stopped = self._stopped(at, up)
                flowing = sum(
                    (p * _arb(w) for p, w, e in zip(stopped, self.failures(of), up, strict=False) if e), flint.arb(0)
                )
                return flowing / self._answer("reliability", q)
            case "interval_reliability":
                lasting = self.moves(q.for_hours, [not each for each in up])
                seen = [
                    sum((lasting[a, b] for b in range(self.n) if up[b]), flint.arb(0)) * int(up[a])
                    for a in range(self.n)
                ]
                return self.mean(seen, at)
            case "mean_time_to_first_failure":
                return self._passage(up)[0]
            case "standard_deviation_of_time_to_first_failure":
                mean, second = self._passage(up)
                return (second - mean * mean).sqrt()
            case "failure_frequency" | "pfh":
                return self.mean(self.failures(of), at)
            case "failures_per_year":
                return self._answer("failure_frequency", q) * _arb(self.year)
            case "downtime_per_year":
                return self._answer("unavailability", q) * _arb(self.year)
            case "mean_up_time":
                return self._answer("availability", q) / self._answer("failure_frequency", q)
            case "mean_down_time":
                return self._answer("unavailability", q) / self._answer("failure_frequency", q)
            case "conditional_failure_intensity":
                return self._answer("failure_frequency", q) / self._answer("availability", q)
            case "expected_failures":
                return self._integral(at, self.failures(of))
            case "mean_units_failed":
                return self.mean([int(each) for each in self.space.failed(of)], at)
            case "mean_capacity":
                return self.mean([rational(Fraction(float(each))) for each in self.space.capacity(of)], at)
            case "state_probability":
                state = self.space.find(q.state or "")
                return self.mean([int(number == state) for number in range(self.n)], at)
        return self._upkeep(measure, q)

    def _integral(self, at: Fraction | None, reward: list[flint.fmpq]) -> flint.arb:
        return self.carried(self.moves(at or Fraction(0), self.free, reward))[self.n]

    def _stopped(self, at: Fraction | None, up: list[bool]) -> list[flint.arb]:
        return self.carried(self.moves(at or Fraction(0), [not each for each in up]))

    def _passage(self, up: list[bool]) -> tuple[flint.arb, flint.arb]:
        """Mean and second moment of the time until the first down state."""
        alive = self._alive(up)
        inside = self.generator([not each for each in up])
        part = flint.fmpq_mat(len(alive), len(alive))
        for x, a in enumerate(alive):
            for y, b in enumerate(alive):
                part[x, y] = -inside[a, b]
        ones = flint.fmpq_mat(len(alive), 1, [1] * len(alive))
        once = part.solve(ones)
        twice = part.solve(once)
        mean = sum((self.start[a] * once[x, 0] for x, a in enumerate(alive)), flint.fmpq(0))
        half = sum((self.start[a] * twice[x, 0] for x, a in enumerate(alive)), flint.fmpq(0))
        return _arb(mean), _arb(2 * half)

    def _alive(self, up: list[bool]) -> list[int]:
        """Up states that can be reached without a failure."""
        reached = [state for state in range(self.n) if self.start[state] != 0 and up[state]]
        for state in reached:
            for a, b, rate, _ in self.arrows:
                if a == state and rate != 0 and up[b] and b not in reached:
                    reached.append(b)
        return reached

    def _upkeep(self, measure: str, q: Question) -> flint.arb:
        plant = self.space
        assert isinstance(plant, GeneratedSpace)
        kinds = plant.kinds.kinds
        slots = plant.slots_of(q.of)
        year = _arb(self.year)
        pools = plant.pools(q.of)
        match measure:
            case "repairs_per_year":
                return self.mean(self.flow(lambda a, b, k: (kinds[k].island, kinds[k].repaired) in slots), None) * year
            case "starts_per_year":
                return year * self.mean(
                    self.flow(lambda a, b, k: sum((kinds[k].island, each) in slots for each in kinds[k].starts)), None
                )
            case "time_without_redundancy":
                return self.mean([int(each) for each in plant.without_redundancy(q.of)], None) * year
            case "crew_utilisation":
                busy = [sum(int(plant.crews_at_work(pool)[state]) for pool in pools) for state in range(self.n)]
                return self.mean(busy, None) / sum(pool.size for pool in pools)
            case "waiting_for_crew":
                return self.mean([sum(_waiting(plant, pool, state) for pool in pools) for state in range(self.n)], None)
            case "probability_of_waiting":
                calls = [self._calls(plant, pool) for pool in pools]
                return sum((each[1] for each in calls), flint.arb(0)) / sum((each[0] for each in calls), flint.arb(0))
        raise AssertionError(measure)

    def _calls(self, plant: GeneratedSpace, pool: Pool) -> tuple[flint.arb, flint.arb]:
        slots = frozenset().union(*(plant.slots_of(kind.unit) for kind in pool.kinds))
        calling = [int(each) for each in plant.calling(pool)]
        kinds = plant.kinds.kinds

        def left(a: int, k: int) -> int:
            return calling[a] - ((kinds[k].island, kinds[k].repaired) in slots)

        def new(a: int, b: int, k: int) -> int:
            return max(calling[b] - left(a, k), 0)

        def refused(a: int, b: int, k: int) -> int:
            return max(new(a, b, k) - max(pool.size - left(a, k), 0), 0)

        return self.mean(self.flow(new), None), self.mean(self.flow(refused), None)


def _waiting(plant: GeneratedSpace, pool: Pool, state: int) -> int:
    return int(plant.calling(pool)[state] - plant.crews_at_work(pool)[state])


def _arb(x: object) -> flint.arb:
    return x if isinstance(x, flint.arb) else flint.arb(x)
