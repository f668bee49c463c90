"""Chains that may be refilled: generated once, good for every value of the parameters that keeps their structure."""

from __future__ import annotations

from collections.abc import Hashable, Iterator, Sequence
from functools import cached_property

from markov.errors import UsageError
from markov.evaluation.answers import Answers
from markov.evaluation.questions import Question, subjects_of
from markov.model import Model, Named
from markov.rates import Factor
from markov.states import GeneratedSpace, Prepared, generate_prepared, island_names, plan, prepare, take
from markov.states.generation import STATE_LIMIT
from markov.states.layout import Clock, Node, Train


class Chains:
    """The chains of one model that its questions go to.

    Groups that are alike are merged only where they follow from the same parameters: two that merely have the same
    numbers today are not alike once one of their parameters moves.

    Parameters
    ----------
    model : Model
    questions : sequence of Question
        What will be asked.
    limit : int
        Largest number of states of any chain.
    """

    def __init__(self, model: Model, questions: Sequence[Question], *, limit: int = STATE_LIMIT) -> None:
        unknown = _not_refilled(model)
        if unknown:
            raise UsageError(f"samples and derivatives are not built for models with {' and '.join(unknown)}")
        self.model = model
        self._limit = limit
        self._subjects = tuple(dict.fromkeys(q.of for q in questions if q.of is not None))
        self._known = frozenset(_names(model))

    def is_outside(self, question: Question) -> bool:
        """Tell whether a question is about something that is not in the chain of the plant."""
        return not self.model.explicit and question.of is not None and question.of not in self._known

    @cached_property
    def plant(self) -> Answers:
        """The chain of the plant.

        Raises
        ------
        TooLarge
            It has more states than the limit.
        """
        if self.model.explicit:
            return Answers(take(self.model), self.model.year_hours)
        inside = tuple(name for name in self._subjects if name in self._known)
        return self._generated(self.model, (*subjects_of(self.model), *inside))

    @cached_property
    def extended(self) -> Answers:
        """The chain of the plant with everything outside of it that is asked about."""
        return self._generated(self.model, (*subjects_of(self.model), *self._subjects))

    @cached_property
    def loading(self) -> list[Answers]:
        """All chains that load crews: that of the plant, then those of what stands outside of it and never waits."""
        chains = [self.plant]
        solved = {node.name for layout in plan(self.model, subjects_of(self.model)).islands for node in layout.nodes}
        for name in island_names(self.model):
            if name not in solved:
                alone = {"system": Named(name), "while_down": "continue", "targets": ()}
                chains.append(self._generated(self.model.model_copy(update=alone), ()))
                space = chains[-1].space
                if isinstance(space, GeneratedSpace):
                    solved.update(node.name for layout in space.plan.islands for node in layout.nodes)
        return chains

    def _generated(self, model: Model, subjects: tuple[str, ...]) -> Answers:
        space = generate_prepared(_prepare(model, tuple(dict.fromkeys(subjects))), limit=self._limit)
        return Answers(space, self.model.year_hours)


def _not_refilled(model: Model) -> list[str]:
    """Name what a model has whose rates do not follow from single parameters."""
    fitted = any(
        shape is not None
        for unit in model.units.values()
        for shape in (unit.repair_time_shape, unit.logistic_delay_shape)
    ) or any(group.takeover_shape is not None or group.outcome_shape is not None for group in model.groups.values())
    found = {
        "fixed instants": model.is_scheduled,
        "common causes": bool(model.common_causes),
        "load sharing": any(group.load_sharing is not None for group in model.groups.values()),
        "fitted times": fitted,
    }
    return [what for what, there in found.items() if there]


def _names(model: Model) -> Iterator[str]:
    """Yield the groups, trains, units and crew pools of the chain of a plant."""
    yield from model.crews
    for layout in () if model.explicit else plan(model, subjects_of(model)).islands:
        yield from (node.name for node in layout.nodes)
        for slot in layout.slots:
            yield from (slot.unit, slot.group, slot.name)
        for path in layout.groups:
            yield from (entry.unit for entry in path if isinstance(entry, Train))


def _prepare(model: Model, subjects: tuple[str, ...]) -> Prepared:
    prepared = prepare(model, subjects)
    for islands in prepared.classes:
        if len({tuple(_parameters(prepared.plan.islands[island].nodes[0])) for island in islands}) > 1:
            return prepare(model, subjects, merge=False)
    return prepared


def _first(clock: Clock | None) -> tuple[Factor | None, ...]:
    return (None,) if clock is None else clock.rates[:1]


def _parameters(node: Node) -> Iterator[Hashable]:
    """Yield how the factors of a group and of the trains in it follow from parameters."""
    factors: list[Factor | None] = [
        *node.coverage,
        node.standby_factor,
        *_first(node.outcome_clock),
        *_first(node.takeover),
    ]
    for entry in node.entries:
        if isinstance(entry, Train):
            yield from _parameters(entry.node)
        else:
            lane = entry.lanes[0]
            factors += [entry.failure, entry.start_failure, *_first(lane.repair), *_first(lane.delays), entry.capacity]
    for factor in factors:
        given = None if factor is None else factor.quantity
        yield given.expression if given is not None and given.parameters else None
