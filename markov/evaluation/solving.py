"""From a model to a solution: generate, answer every question, judge every target."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

from markov._version import __version__
from markov.errors import IllPosed
from markov.evaluation.fits import fitted_times
from markov.evaluation.price import redundancy_of
from markov.evaluation.questions import Question, all_questions, question_of, subjects_of
from markov.evaluation.replies import reply
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
        results[question] = reply(model, solver, question)
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
        assumptions=(*unsaid_choices(model, solver.plan), *fitted_times(model)),
        warnings=model.warnings,
        redundancy=redundancy_of(model, solver, results, progress),
    )


def _can_fail(solver: Solver, of: str | None) -> bool:
    """Tell whether a subject can go down; a crew pool, or a kind of several items, has no down state of its own."""
    try:
        return solver.can_fail(of)
    except IllPosed:
        return True
