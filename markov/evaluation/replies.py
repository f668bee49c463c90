"""One question with its answer, or the reason why there is none, as a result."""

from __future__ import annotations

import math

from markov.chain import Enclosure
from markov.errors import IllPosed, NotReached
from markov.evaluation.gains import GAINS, gain
from markov.evaluation.questions import Question
from markov.evaluation.solver import Solver
from markov.model import Model
from markov.results import Result


def reply(model: Model, solver: Solver, question: Question) -> Result:
    """Answer one question of a model.

    Parameters
    ----------
    model : Model
    solver : Solver
        Of this model.
    question : Question
    """
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
