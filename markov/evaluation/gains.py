"""What the arrangement gains: against single units, and against the answer of independent blocks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

from markov.chain import Enclosure
from markov.errors import IllPosed
from markov.evaluation.combining import Share, combine
from markov.evaluation.plain import plain_arrangement
from markov.evaluation.questions import Question
from markov.evaluation.solver import Solver, answers_of
from markov.model import Model, Named
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
    if not single and _is_one_block(solver):
        return replace(system / system, method=f"one group alone; {system.method}")
    rival = single_units if single else independent_blocks
    method = "ratio of two chains" if single else "groups solved alone, combined through the structure"
    return replace(rival(model, question.at_hours) / system, method=f"{method}; {system.method}")


def _is_one_block(solver: Solver) -> bool:
    """Tell whether the plant is a single group that no other one affects: it is its own independent block."""
    plan = solver.plan
    return plan is not None and len(plan.islands) == 1 and len(plan.islands[0].nodes) == 1


def single_units(model: Model, at: Fraction | None) -> Enclosure:
    """Return the unavailability (at a time: unreliability) with each group cut down to its `required` first units."""
    return Solver(plain_arrangement(model), () if at is None else (at,)).answer(_badness(at))


def independent_blocks(model: Model, at: Fraction | None) -> Enclosure:
    """Return what groups solved alone, each with crews of its own, give when combined by the structure."""
    if model.system is None:
        raise AssertionError("a generated chain has a system")
    if any(phase.system is not None and phase.system != model.system for phase in model.phases):
        raise IllPosed("phases have criteria of their own, and groups solved alone do not tell which of them they meet")
    parts: dict[str, Share] = {}
    for name in model.named_in_system:
        phases = tuple(phase.model_copy(update={"system": None}) for phase in model.phases)
        alone = model.model_copy(update={"system": Named(name), "phases": phases, "targets": ()})
        space = generate(alone, alone=name)
        answers = answers_of(model, space, () if at is None else (at,))
        up = "steady_state_availability" if at is None else "reliability"
        parts[name] = Share(answers.answer(Question(up, at_hours=at)), answers.answer(_badness(at)))
    return combine(model.system, parts).down


def _badness(at: Fraction | None) -> Question:
    return Question("steady_state_unavailability" if at is None else "unreliability", at_hours=at)
