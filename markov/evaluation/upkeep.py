"""What redundancy costs: repairs, starts, crews at work and waiting, time without redundancy."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from functools import reduce
from operator import add

import numpy as np
from numpy.typing import NDArray

from markov.chain import Enclosure
from markov.errors import IllPosed
from markov.evaluation.answers import Answers
from markov.evaluation.questions import Question
from markov.evaluation.scheduled import ScheduledAnswers
from markov.states import ArrowKind, Arrows, GeneratedSpace, Pool

Values = NDArray[np.float64]


class Upkeep:
    """Answers questions about upkeep from the arrows of one generated chain.

    Parameters
    ----------
    answers : Answers or ScheduledAnswers
    serving : set of str, optional
        Crew pools that count where no pool is named; all that this chain loads if left out.

    Raises
    ------
    IllPosed
        The chain is written by hand and does not tell units, crews or starts apart.
    """

    def __init__(self, answers: Answers | ScheduledAnswers, serving: frozenset[str] | None = None) -> None:
        if not isinstance(answers.space, GeneratedSpace):
            raise IllPosed("a hand-written chain does not tell units, crews or starts apart")
        self._answers = answers
        self._plant = answers.space
        self._serving = serving

    def answer(self, question: Question) -> Enclosure:
        """Answer one question of `UPKEEP`."""
        return UPKEEP[question.measure](self, question)

    def _count_rate(self, counts: Callable[[Arrows, int], Values]) -> Enclosure:
        """Return the long-run number per hour of something that each transition, or jump, counts so many times."""
        return self._answers.count_rate(counts)

    def _count_kinds(self, per_kind: Values) -> Enclosure:
        return self._count_rate(lambda arrows, _: per_kind[arrows.kind])

    def _repairs_per_year(self, question: Question) -> Enclosure:
        slots = self._slots(question.of)
        kinds = self._plant.kinds.kinds
        counts = np.array([float(_repairs_in(kind, slots)) for kind in kinds])
        return self._answers.per_year(self._count_kinds(counts))

    def _spares_per_year(self, question: Question) -> Enclosure:
        """Count spares drawn by the items of a subject; of what stands in the system, where none is named."""
        plant = self._plant
        if question.of is None:
            counts = [float(len(kind.spares)) for kind in plant.kinds.kinds]
        else:
            units = {called.rsplit(".", 1)[-1] for _, called in self._slots(question.of)}
            pools = {name for name, pool in plant.plan.model.spares.items() if set(pool.for_) <= units}
            counts = [float(sum(name in pools for name in kind.spares)) for kind in plant.kinds.kinds]
        return self._answers.per_year(self._count_kinds(np.array(counts)))

    def _slots(self, of: str | None) -> frozenset[tuple[str, str]]:
        """Return (island, slot) of everything that a subject covers: the system, a group, a unit or a crew pool."""
        plant = self._plant
        for pool in plant.pools(of) if of is not None else ():
            return frozenset().union(*(plant.slots_of(kind.unit) for kind in pool.kinds))
        return plant.slots_of(of)

    def _starts_per_year(self, question: Question) -> Enclosure:
        slots = self._slots(question.of)
        counts = np.array(
            [float(sum((kind.island, start) in slots for start in kind.starts)) for kind in self._plant.kinds.kinds]
        )
        return self._answers.per_year(self._count_kinds(counts))

    def busy(self, of: str | None) -> Enclosure:
        """Return the long-run mean number of crews at work."""
        return self._mean(lambda phase: self._at_work(of, phase))

    def _at_work(self, of: str | None, phase: int) -> Values:
        return np.asarray(np.sum([self._plant.crews_at_work(pool, phase) for pool in self.pools(of)], axis=0))

    def _mean(self, values: Callable[[int], Values]) -> Enclosure:
        """Return the long-run mean of a number that each state has in a phase."""
        if isinstance(self._answers, ScheduledAnswers):
            return self._answers.mean_of(values, None)
        return self._answers.mean_of(values(0), None)

    def waiting(self, of: str | None) -> Enclosure:
        """Return the long-run mean number of items that wait for a crew."""
        calling: Values = np.sum([self._plant.calling(pool) for pool in self.pools(of)], axis=0)
        return self._mean(lambda phase: calling - self._at_work(of, phase))

    def calls(self, of: str | None) -> tuple[Enclosure, Enclosure]:
        """Return how many faults per hour call for a crew, and how many of them find none free."""
        return self._count_rate(lambda arrows, phase: self._calls(of, arrows, phase)[0]), self._count_rate(
            lambda arrows, phase: self._calls(of, arrows, phase)[1]
        )

    def _calls(self, of: str | None, arrows: Arrows, phase: int) -> tuple[Values, Values]:
        """Count, for every transition or jump, the faults that call for a crew and those that find none free."""
        kinds = self._plant.kinds.kinds
        phases = self._plant.plan.model.phases
        calls = np.zeros(len(arrows))
        refused = np.zeros(len(arrows))
        for pool in self.pools(of):
            slots = self._slots(pool.name)
            calling = self._plant.calling(pool)
            ended = np.array([float(_repairs_in(kind, slots)) for kind in kinds])[arrows.kind]
            before = calling[arrows.source] - ended
            new = np.maximum(calling[arrows.target] - before, 0)
            size = 0 if phases and not phases[phase].repair else pool.size
            calls += new
            refused += np.maximum(new - np.maximum(size - before, 0), 0)
        return calls, refused

    def pools(self, of: str | None) -> tuple[Pool, ...]:
        """Return the crew pools of this chain that a question concerns."""
        found = self._plant.pools(of)
        return found if of is not None or self._serving is None else tuple(p for p in found if p.name in self._serving)

    def _time_without_redundancy(self, question: Question) -> Enclosure:
        answers, plant, of = self._answers, self._plant, question.of
        if isinstance(answers, ScheduledAnswers):
            return answers.per_year(
                answers.long_run_share(lambda phase: plant.without_redundancy(of, phase).astype(np.float64))
            )
        return answers.per_year(answers.long_run_share(plant.without_redundancy(of)))


def _repairs_in(kind: ArrowKind, slots: frozenset[tuple[str, str]]) -> int:
    """Count the repairs that a kind of transition completes among some slots."""
    done = (kind.repaired, *kind.repairs) if kind.repaired else kind.repairs
    return sum((kind.island, slot) in slots for slot in done)


UPKEEP: dict[str, Callable[[Upkeep, Question], Enclosure]] = {
    "repairs_per_year": Upkeep._repairs_per_year,
    "starts_per_year": Upkeep._starts_per_year,
    "spares_per_year": Upkeep._spares_per_year,
    "time_without_redundancy": Upkeep._time_without_redundancy,
}


#: The measures that `crew_measure` answers.
CREW_MEASURES = ("crew_utilisation", "waiting_for_crew", "probability_of_waiting")


def crew_measure(question: Question, chains: Sequence[Upkeep]) -> Enclosure:
    """Answer a question about crews from all chains that load them.

    Parameters
    ----------
    question : Question
        Of one crew pool, or of all pools that serve the system.
    chains : sequence of Upkeep
        Independent of each other; a pool that serves several of them has a crew for every unit.

    Raises
    ------
    IllPosed
        There is no such pool, or nothing ever calls for it.
    """
    loading = [each for each in chains if each.pools(question.of)]
    if not loading:
        raise IllPosed(
            "the chain has no crew pool" if question.of is None else f"crew pool {question.of} serves nothing here"
        )
    if question.measure == "waiting_for_crew":
        return _sum(each.waiting(question.of) for each in loading)
    if question.measure == "crew_utilisation":
        sizes = {pool.name: pool.size for each in loading for pool in each.pools(question.of)}
        return _sum(each.busy(question.of) for each in loading).over(sum(sizes.values())).capped()
    calls = [each.calls(question.of) for each in loading]
    total, refused = _sum(call for call, _ in calls), _sum(none_free for _, none_free in calls)
    if total.upper == 0:
        raise IllPosed("in the long run no fault calls for a crew")
    return (refused / total).capped()


def _sum(values: Iterable[Enclosure]) -> Enclosure:
    return reduce(add, values)
