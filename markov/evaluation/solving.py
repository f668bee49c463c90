"""From a model to a solution: generate, answer every question, judge every target."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from fractions import Fraction

from markov._version import __version__
from markov.chain import Enclosure
from markov.errors import IllPosed, NotReached
from markov.evaluation.gains import GAINS, gain
from markov.evaluation.questions import Question, all_questions, question_of, subjects_of
from markov.evaluation.solver import Solver
from markov.evaluation.unsaid import unsaid_choices
from markov.evaluation.verdicts import judge
from markov.model import Model
from markov.results import Result, Solution
from markov.states import StateSpace, generate, take
from markov.states.generation import STATE_LIMIT

#: Called with what is being done, for a progress line.
Progress = Callable[[str], None]


def build_space(model: Model, *, limit: int = STATE_LIMIT) -> StateSpace:
    """Generate the chain of a model, or take over a hand-written one.

    Raises
    ------
    TooLarge
        The chain has more states than `limit`.
    """
    if model.explicit:
        return take(model)
    return generate(model, subjects_of(model), limit=limit)


def solve_model(
    model: Model,
    times: Sequence[Fraction] = (),
    *,
    limit: int = STATE_LIMIT,
    method: str | None = None,
    progress: Progress = lambda _: None,
) -> Solution:
    """Solve a model.

    Parameters
    ----------
    model : Model
    times : sequence of Fraction
        Times in hours to answer measures at, beside the mission time; targets keep their own.
    limit : int
        Largest number of states.
    method : str, optional
        Method for values at a time; chosen by size and time if left out.
    progress : callable
        Told what is being done.
    """
    progress("generating the chain")
    questions = all_questions(model, times)
    points = [question.at_hours for question in questions if question.at_hours is not None]
    solver = Solver(model, points, limit=limit, method=method)
    for question in questions:
        solver.expect(question)
    results: dict[Question, Result] = {}
    for question in questions:
        progress(f"{question.measure.replace('_', ' ')} of {solver.states:,} states")
        results[question] = _result(model, solver, question)
    targets = tuple(
        judge(target, results[question_of(model, target)], can_fail=_can_fail(solver, target.of))
        for target in model.targets
    )
    return Solution(
        title=model.title or "",
        source_name=model.source_name,
        sha256=model.sha256,
        version=__version__,
        states=solver.states,
        transitions=solver.transitions,
        raw_states=solver.raw_states,
        parts=1 if solver.parts is None else len(solver.parts.answers),
        year_hours=model.year_hours,
        results=tuple(results.values()),
        targets=targets,
        assumptions=unsaid_choices(model, solver.plan),
        warnings=model.warnings,
    )


def _result(model: Model, solver: Solver, question: Question) -> Result:
    found, reason, reached = None, None, True
    try:
        found = gain(model, solver, question) if question.measure in GAINS else solver.answer(question)
    except IllPosed as error:
        reason = error.reason
    except NotReached as error:
        reason, reached = f"not reached: {error}", False
    if found is not None and not math.isfinite(found.value):
        found, reason, reached = None, "not reached: the value is beyond the range of floating-point numbers", False
    elif found is not None and found.upper is not None and not math.isfinite(found.upper):
        found = Enclosure(found.value, None, None, f"{found.method} (no bound from above)")
    return Result(
        measure=question.measure,
        of=question.of,
        state=question.state,
        at_hours=question.at_hours,
        for_hours=question.for_hours,
        value=None if found is None else found.value,
        lower=None if found is None else found.lower,
        upper=None if found is None else found.upper,
        unit=question.asked.unit,
        method="none" if found is None else found.method,
        reason=reason,
        reached=reached,
    )


def _can_fail(solver: Solver, of: str | None) -> bool:
    """Tell whether a subject can go down; a crew pool, or a kind of several items, has no down state of its own."""
    try:
        return solver.can_fail(of)
    except IllPosed:
        return True
