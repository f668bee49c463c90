"""The chains behind a solution: that of the whole plant, or those of its independent parts."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol, TypeVar, cast

import numpy as np
from numpy.typing import NDArray

from markov.errors import MarkovError
from markov.evaluation.answers import Answers
from markov.evaluation.scheduled import ScheduledAnswers
from markov.evaluation.solver import Solver
from markov.model import Model
from markov.states import GeneratedSpace, StateSpace


@dataclass(frozen=True)
class ReportedChain:
    """A chain that a report lists.

    Attributes
    ----------
    number : int
        From 1 for an independent part; 0 for the whole plant.
    answers : Answers or ScheduledAnswers
    """

    number: int
    answers: Answers | ScheduledAnswers

    @property
    def space(self) -> StateSpace:
        """Its states and transitions."""
        return cast(StateSpace, self.answers.space)  # one with fixed instants is a generated one

    @property
    def suffix(self) -> str:
        """What tells its tables and anchors from those of other parts: nothing, ``-2``."""
        return f"-{self.number}" if self.number else ""

    def state_anchor(self, state: int) -> str:
        """Return the anchor of a state: ``state-3``, ``state-2-3``."""
        return f"state{self.suffix}-{state}"

    @property
    def called(self) -> str:
        """What the chain is of, in words."""
        if not self.number:
            return "the plant"
        space = self.space
        inside = [layout.name for layout in space.plan.islands] if isinstance(space, GeneratedSpace) else []
        return f"part {self.number}: {', '.join(inside)}"

    @property
    def is_scheduled(self) -> bool:
        """Whether anything happens at fixed instants."""
        return isinstance(self.space, GeneratedSpace) and self.space.timetable is not None

    @cached_property
    def long_run(self) -> NDArray[np.float64] | None:
        """Long-run share of time in each state, shape (n,); None where there is none, or with fixed instants."""
        answers = self.answers
        if not isinstance(answers, Answers):
            return None
        found: list[NDArray[np.float64]] = []
        up = answers.up(None)
        try:
            answers.long_run(lambda shares: _kept(shares, found).weighted(up))
        except MarkovError:
            return None
        return found[0] if len(found) == 1 else None


class _Shares(Protocol):
    """Long-run shares of time in the states of one chain."""

    @property
    def values(self) -> NDArray[np.float64]:
        """Shape (n,)."""


_AnyShares = TypeVar("_AnyShares", bound=_Shares)


def _kept(shares: _AnyShares, found: list[NDArray[np.float64]]) -> _AnyShares:
    found.append(shares.values)
    return shares


def chains_of(model: Model) -> tuple[ReportedChain, ...]:
    """Return the chains that a model is solved by.

    Raises
    ------
    TooLarge
        A chain has more states than are generated.
    """
    solver = Solver(model)
    if solver.parts is None:
        return (ReportedChain(0, solver.whole),)
    return tuple(ReportedChain(number, answers) for number, answers in enumerate(solver.parts.answers, 1))
