"""What becomes of the results where the plant differs from a choice that its spec leaves unsaid.

Where it is cheap, the plant is solved once more with only that choice replaced by an example; the numbers compare two
solutions and carry no bound of their own.  Elsewhere words tell in which direction results move.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from fractions import Fraction
from functools import cached_property

from markov.documents.other_choices import Example, other_choice
from markov.documents.tree import Span, Text, plain
from markov.errors import MarkovError
from markov.evaluation.questions import Question, question_of
from markov.evaluation.replies import reply
from markov.evaluation.solver import Solver
from markov.evaluation.verdicts import judge
from markov.model import Model
from markov.output.wording import hours_words, value_words
from markov.results import Result, Solution

#: States of a changed chain that is solved: without and with fixed instants.
SOLVED_UP_TO = 800
SOLVED_WITH_INSTANTS_UP_TO = 200

#: Work that all changed chains together may take, as the sum of the squares of their numbers of states: likewise.
_WORK = 6_000_000
_WORK_WITH_INSTANTS = 40_000

#: States of the whole plant, nothing merged or taken apart, up to which all groups may be tied together.
_COUPLED_UP_TO = 5_000

#: Marks of what is no choice but stands in for a law that the spec gives.
_STAND_INS = (" fitted to the mean", "a fixed time, approximated", "stages in place of exponential times")
_OTHER_LAW = (
    "Stages stand in for the time that the spec gives. Another law of the same mean and spread would move values at a "
    "time, and those where repairs or takeovers compete, somewhat."
)


class WhatIf:
    """Effects of the choices that one spec leaves unsaid.

    Parameters
    ----------
    model : Model
    solution : Solution
        Of this model.
    is_scheduled : bool
        Whether anything happens at fixed instants.
    progress : callable
        Told what is being done.
    """

    def __init__(
        self,
        model: Model,
        solution: Solution,
        *,
        is_scheduled: bool,
        progress: Callable[[str], None] = lambda _: None,
    ) -> None:
        self.model = model
        self.solution = solution
        self._limit = SOLVED_WITH_INSTANTS_UP_TO if is_scheduled else SOLVED_UP_TO
        self._work_left = _WORK_WITH_INSTANTS if is_scheduled else _WORK
        self._progress = progress

    @property
    def solves(self) -> bool:
        """Whether the plant is solved once more for choices at all."""
        return not self.model.explicit and self.solution.states <= self._limit

    @property
    def why_not(self) -> str:
        """Why it is not."""
        if self.model.explicit:
            return "a chain written by hand has its choices built in"
        return f"a chain of more than {self._limit:,} states is not solved again"

    def effect(self, choice: str) -> Text:
        """Tell the effect of one choice left unsaid, given as a solution lists it."""
        if any(mark in choice for mark in _STAND_INS):
            return plain(_OTHER_LAW)
        words, example = other_choice(self.model, choice)
        return (*plain(words), *self._numbers(example))

    def _numbers(self, example: Example | None) -> Iterator[Span]:
        if example is None or not self.solves or (example.couples and self.solution.raw_states > _COUPLED_UP_TO):
            return
        self._progress(f"with {example.words}")
        try:
            varied = example.change(self.model)
            solver = Solver(varied, self._points, limit=self._limit)
            if solver.states**2 > self._work_left:
                return
            self._work_left -= solver.states**2
            found = {question: reply(varied, solver, question) for question in self._questions}
        except MarkovError:
            return
        moved = [self._moved(known, found[question]) for question, known in self._compared.items()]
        told = [each for each in moved if each]
        if not told:
            return
        yield Span(f" With {example.words}: {'; '.join(told)}.")
        for target, given in zip(self.model.targets, self.solution.targets, strict=True):
            question = question_of(self.model, target)
            other = judge(target, found[question], can_fail=_can_fail(solver, target.of))
            if other.verdict != given.verdict:
                yield Span(f" {target.id} would be ")
                yield Span(other.verdict.replace("_", " "), "verdict")
                yield Span(".")

    @cached_property
    def _compared(self) -> Mapping[Question, Result]:
        """The results that effects are told by: unavailability in the long run, unreliability at the mission time."""
        found: dict[Question, Result] = {}
        for result in self.solution.results:
            wanted = result.measure in ("steady_state_unavailability", "unreliability")
            told = any(each.measure == result.measure for each in found)
            if wanted and not told and result.of is None and result.value:
                found[Question(result.measure, at_hours=result.at_hours)] = result
        return found

    @cached_property
    def _questions(self) -> Sequence[Question]:
        asked = (question_of(self.model, target) for target in self.model.targets)
        return tuple(dict.fromkeys((*self._compared, *asked)))

    @cached_property
    def _points(self) -> Sequence[Fraction]:
        return tuple(question.at_hours for question in self._questions if question.at_hours is not None)

    def _moved(self, known: Result, other: Result) -> str:
        name = "unavailability" if known.measure == "steady_state_unavailability" else "unreliability"
        when = "in the long run" if known.at_hours is None else f"at {hours_words(known.at_hours)}"
        if other.value is None or not known.value:
            return ""
        ratio = other.value / known.value
        if abs(ratio - 1) < 1e-9:
            return f"{name} {when} unchanged"
        shown = f"({value_words(other.measure, other.value, 4)})"
        if abs(ratio - 1) < 0.01:
            return f"{name} {when} {'up' if ratio > 1 else 'down'} by {100 * abs(ratio - 1):.1g} % {shown}"
        return f"{name} {when} × {value_words('', ratio, 3)} {shown}"


def _can_fail(solver: Solver, of: str | None) -> bool:
    """Tell whether a subject can go down; a crew pool, or a kind of several items, has no down state of its own."""
    try:
        return solver.can_fail(of)
    except MarkovError:
        return True
