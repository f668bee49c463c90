"""The finished chain: its states, its transitions as columns, and what each state means."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed
from markov.states.arrows import ArrowKinds

Mask = NDArray[np.bool_]
Values = NDArray[np.float64]


@dataclass(frozen=True)
class Arrows:
    """Transitions as columns, one entry a transition; shape (a,) each.

    `source` and `target` are state numbers, `kind` numbers an arrow kind, `multiple` is the whole number of alike
    items that the rate of the kind is multiplied by.  An entry whose ends agree changes nothing and is kept only
    because it counts a start or a repair.
    """

    source: NDArray[np.int32]
    target: NDArray[np.int32]
    kind: NDArray[np.int32]
    multiple: NDArray[np.int32]

    def __len__(self) -> int:
        return len(self.source)

    @property
    def moving(self) -> Mask:
        """Which transitions change the state."""
        return np.asarray(self.source != self.target)


class StateSpace(Protocol):
    """What the bridge asks of a chain, generated or written by hand."""

    @property
    def size(self) -> int:
        """Number of states, n."""

    @property
    def arrows(self) -> Arrows:
        """Transitions as columns."""

    @property
    def kinds(self) -> ArrowKinds:
        """Kinds of transition, with their symbolic rates."""

    @property
    def start(self) -> tuple[tuple[int, Fraction], ...]:
        """Initial states with their probabilities."""

    @property
    def up(self) -> Mask:
        """States in which the system delivers, shape (n,)."""

    def delivers(self, subject: str) -> Mask:
        """States in which a group or unit delivers, shape (n,)."""

    def failed(self, subject: str | None) -> Values:
        """Failed items of the system, a group or a kind, shape (n,)."""

    def capacity(self, subject: str | None) -> Values:
        """Delivered share, shape (n,)."""

    def label(self, state: int) -> str:
        """Name of a state, as the diagram shows it and a target may ask for it."""

    def find(self, name: str) -> int:
        """Number of the state of that name."""


def no_such_state(name: str) -> IllPosed:
    """Return the reason given for a state that is not in the chain."""
    return IllPosed(f"no state of this chain is named {name!r}; `markov draw` shows the names")
