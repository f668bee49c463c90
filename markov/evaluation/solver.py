"""Which chain a question goes to: that of the whole plant, or those of its independent parts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from functools import cached_property
from typing import get_args

from markov.chain import Enclosure, Method
from markov.errors import IllPosed, TooLarge, UsageError
from markov.evaluation.answers import Answers
from markov.evaluation.modules import find_modules
from markov.evaluation.parts import NeedsWhole, Parts
from markov.evaluation.questions import Question, subjects_of
from markov.evaluation.scheduled import ScheduledAnswers
from markov.evaluation.upkeep import CREW_MEASURES, UPKEEP, Upkeep, crew_measure
from markov.model import Model, Named
from markov.states import (
    GeneratedSpace,
    Plan,
    Prepared,
    StateSpace,
    generate,
    generate_prepared,
    island_names,
    prepare,
    take,
)
from markov.states.generation import STATE_LIMIT

#: Chains up to this size are solved whole even where they fall into independent parts.
WHOLE_UP_TO = 20_000


def known_method(name: str | None) -> Method | None:
    """Return a method for values at a time by its name.

    Raises
    ------
    UsageError
        There is no method of that name.
    """
    for method in get_args(Method):
        if method == name:
            known: Method = method
            return known
    if name is not None:
        raise UsageError(f"method {name!r}; expected one of {', '.join(get_args(Method))}")
    return None


def answers_of(
    model: Model, space: StateSpace, times: Sequence[Fraction] = (), method: Method | None = None
) -> Answers | ScheduledAnswers:
    """Return the answers of one chain, with fixed instants or without."""
    levels = {name: share.exact for name, share in model.levels.items()}
    if not isinstance(space, GeneratedSpace) or space.timetable is None:
        return Answers(space, model.year_hours, times, method, levels=levels)
    return ScheduledAnswers(
        space,
        model.year_hours,
        times,
        method,
        covers={
            name: {word for each in test.of for word in (each, *each.split("."))} for name, test in model.tests.items()
        },
        levels=levels,
    )


class Solver:
    """Answers the questions of one model, from as small a chain as each question allows.

    Parameters
    ----------
    model : Model
    times : sequence of Fraction
        Times in hours at which values will be asked for.
    limit : int
        Largest number of states of any chain.
    whole_up_to : int
        Size up to which the whole chain is preferred.
    method : str, optional
        Method for values at a time; chosen by size and time if left out.

    Raises
    ------
    TooLarge
        The chain, or one of its parts, would be larger than `limit`.
    """

    def __init__(
        self,
        model: Model,
        times: Sequence[Fraction] = (),
        *,
        limit: int = STATE_LIMIT,
        whole_up_to: int = WHOLE_UP_TO,
        method: str | None = None,
    ) -> None:
        self.model = model
        self._method = known_method(method)
        self._times = tuple(times)
        self._limit = limit
        self._expected: list[Question] = []
        self._prepared: Prepared | None = None
        self.parts: Parts | None = None
        if not model.explicit:
            self._prepared = prepare(model, subjects_of(model))
            modules = find_modules(model, self._prepared.plan) if self.most_states > whole_up_to else None
            if modules is not None:
                self.parts = Parts(model, modules, self._times, limit, self._method)
        if self.parts is None:
            self.whole  # noqa: B018  (a chain that is too large is refused at once)

    @property
    def plan(self) -> Plan | None:
        """What the chain is generated from; None for a hand-written chain."""
        return None if self._prepared is None else self._prepared.plan

    @property
    def most_states(self) -> int:
        """Number of states of the whole chain at most."""
        return len(self.model.states) if self._prepared is None else self._prepared.most_states

    @cached_property
    def whole(self) -> Answers | ScheduledAnswers:
        """Answers from the chain of the whole plant."""
        space: StateSpace
        space = take(self.model) if self._prepared is None else generate_prepared(self._prepared, limit=self._limit)
        answers = answers_of(self.model, space, self._times, self._method)
        for question in self._expected:
            answers.expect(question)
        return answers

    @property
    def states(self) -> int:
        """Number of states solved: of the whole chain, or of its parts together."""
        return self.whole.space.size if self.parts is None else self.parts.states

    @property
    def transitions(self) -> int:
        """Number of distinct arrows of the chain or chains solved."""
        return self.whole.arrow_count if self.parts is None else self.parts.transitions

    @property
    def raw_states(self) -> int:
        """Number of states of the whole plant, before merging and, at most, before parting."""
        if self.parts is not None:
            return self.most_states
        space = self.whole.space
        return space.raw_size if isinstance(space, GeneratedSpace) else space.size

    def expect(self, question: Question) -> None:
        """Tell in advance what will be asked."""
        self._expected.append(question)
        if self.parts is None:
            self.whole.expect(question)

    def can_fail(self, of: str | None) -> bool:
        """Tell whether a down state of a subject can be reached at all."""
        if self.parts is None:
            return self.whole.can_fail(of)
        return self.parts.can_fail() if of is None else True

    def answer(self, question: Question) -> Enclosure:
        """Answer one question.

        Raises
        ------
        IllPosed
            The question has no answer, or needs a chain beyond the limit.
        NotReached
            No method reached its tolerance.
        """
        if question.measure in CREW_MEASURES:
            return crew_measure(question, self._loading)
        if question.measure == "hazardous_events_per_year":
            return self._hazardous_events(question)
        if self.parts is not None:
            try:
                return self.parts.answer(question)
            except NeedsWhole:
                self._must_fit()
        if question.measure in UPKEEP:
            return Upkeep(self.whole).answer(question)
        return self.whole.answer(question)

    def _hazardous_events(self, question: Question) -> Enclosure:
        """Demands per year that meet a down system."""
        if self.model.demand is None:
            raise IllPosed("the spec has no `demand`")
        down = self.answer(replace(question, measure="steady_state_unavailability"))
        return down.times(self.model.demand.rate.exact * self.model.year_hours)

    @cached_property
    def _loading(self) -> list[Upkeep]:
        """The chains that load crews: those solved, and those of what stands outside of the system and never waits."""
        chains: list[Answers | ScheduledAnswers] = [self.whole] if self.parts is None else [*self.parts.answers]
        spaces = [each.space for each in chains if isinstance(each.space, GeneratedSpace)]
        serving = frozenset(pool.name for space in spaces for pool in space.pools(None))
        solved = {node.name for space in spaces for layout in space.plan.islands for node in layout.nodes}
        for name in island_names(self.model) if self._prepared is not None else ():
            if name in solved:
                continue
            alone = {"system": Named(name), "while_down": "continue", "targets": ()}
            space = generate(self.model.model_copy(update=alone), limit=self._limit)
            chains.append(answers_of(self.model, space))
            solved.update(node.name for layout in space.plan.islands for node in layout.nodes)
        return [Upkeep(each, serving) for each in chains]

    def _must_fit(self) -> None:
        told = f"needs the chain of the whole plant, with up to {self.most_states:,} states"
        if self.most_states > self._limit:
            raise IllPosed(f"{told}; at most {self._limit:,} are generated")
        try:
            self.whole  # noqa: B018
        except TooLarge as error:
            raise IllPosed(f"{told}: {error}") from error
