"""What the arrangement gains: against single units, and against the answer of independent blocks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

from markov.chain import Enclosure
from markov.errors import IllPosed
from markov.evaluation.answers import Answers
from markov.evaluation.combining import Share, combine
from markov.evaluation.questions import Question
from markov.evaluation.solver import Solver
from markov.model import Group, Member, Model, Named
from markov.states import generate

#: The measures that `gain` answers.
GAINS = ("gain_over_single_unit", "gain_over_independent_blocks")

Rival = Callable[[Model, Fraction | None], Enclosure]


def gain(model: Model, solver: Solver, question: Question) -> Enclosure:
    """Return how many times worse a simpler arrangement, or a simpler answer, is than the system.

    The measure compared is the steady-state unavailability, with a time the unreliability.

    Raises
    ------
    IllPosed
        The system cannot fail, or either side has no such value.
    """
    system = solver.answer(_badness(question.at_hours))
    if not solver.can_fail(None) or system.upper == 0:
        raise IllPosed("no down state can be reached, so there is nothing to compare with")
    single = question.measure == "gain_over_single_unit"
    rival = plain_arrangement if single else independent_blocks
    method = "ratio of two chains" if single else "groups solved alone, combined through the structure"
    return replace(rival(model, question.at_hours) / system, method=f"{method}; {system.method}")


def plain_arrangement(model: Model, at: Fraction | None) -> Enclosure:
    """Return the unavailability (at a time: unreliability) with each group cut down to its `required` first units."""
    plain = model.model_copy(update={"groups": {name: _plain(group) for name, group in model.groups.items()}})
    return _solve(plain, at)


def _plain(group: Group) -> Group:
    members: list[Member] = []
    left = group.required
    for member in group.members:
        count = min(member.count, left)
        if count:
            members.append(member.model_copy(update={"count": count}))
            left -= count
    nothing = {"on_duty": None, "redundancy": None, "dormancy_factor": None, "coverage": None, "switchover": None}
    return group.model_copy(update={**nothing, "members": tuple(members)})


def independent_blocks(model: Model, at: Fraction | None) -> Enclosure:
    """Return what groups solved alone, each with crews of its own, give when combined by the structure."""
    if model.system is None:
        raise AssertionError("a generated chain has a system")
    parts: dict[str, Share] = {}
    for name in model.named_in_system:
        alone = model.model_copy(update={"system": Named(name), "targets": ()})
        space = generate(alone, alone=name)
        answers = Answers(space, model.year_hours, () if at is None else (at,))
        up = "steady_state_availability" if at is None else "reliability"
        parts[name] = Share(answers.answer(Question(up, at_hours=at)), answers.answer(_badness(at)))
    return combine(model.system, parts).down


def _solve(model: Model, at: Fraction | None) -> Enclosure:
    return Solver(model, () if at is None else (at,)).answer(_badness(at))


def _badness(at: Fraction | None) -> Question:
    return Question("steady_state_unavailability" if at is None else "unreliability", at_hours=at)
