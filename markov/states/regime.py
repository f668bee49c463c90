"""The chain in one phase: its transitions, and which states are up."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, partial
from typing import Protocol

import numpy as np

from markov.model import Success
from markov.states.space import Arrows, Mask, Values
from markov.states.structure import structure


class Plant(Protocol):
    """What a phase asks of the whole chain."""

    @property
    def size(self) -> int:
        """Number of states, n."""

    @property
    def every_arrows(self) -> tuple[Arrows, ...]:
        """Transitions as columns, one set a phase."""

    @property
    def can_act_needlessly(self) -> bool:
        """Whether any unit can act needlessly."""

    def system_in(self, phase: int) -> Success:
        """The structure of success in one phase."""

    def delivers_in(self, phase: int, subject: str) -> Mask:
        """States in which a group, or a kind with a single item, delivers in one phase, shape (n,)."""

    def acts_in(self, phase: int, subject: str) -> Mask:
        """States in which a group acts needlessly in one phase, shape (n,)."""

    def capacity_in(self, phase: int, subject: str | None) -> Values:
        """Delivered share of the system or a group in one phase, shape (n,)."""


@dataclass(frozen=True)
class Regime:
    """The rules of one phase of a mission, or of the whole time where there are no phases."""

    space: Plant
    phase: int

    @property
    def arrows(self) -> Arrows:
        """Transitions as columns; the rate factors of the phase are in the symbolic rates."""
        return self.space.every_arrows[self.phase]

    def up(self, of: str | None) -> Mask:
        """States in which the system, a group or a unit delivers, shape (n,)."""
        if of is not None:
            return self.space.delivers_in(self.phase, of)
        return self._system_up

    @cached_property
    def _system_up(self) -> Mask:
        success = self.space.system_in(self.phase)
        up = structure(success, partial(self.space.delivers_in, self.phase))
        return up & ~self.acts(None) if self.space.can_act_needlessly else up

    def acts(self, of: str | None) -> Mask:
        """States in which the system or a group acts needlessly, shape (n,)."""
        if not self.space.can_act_needlessly:
            return np.zeros(self.space.size, np.bool_)
        if of is not None:
            return self.space.acts_in(self.phase, of)
        return structure(self.space.system_in(self.phase), partial(self.space.acts_in, self.phase))

    def capacity(self, of: str | None) -> Values:
        """Delivered share of the system or a group, shape (n,)."""
        return self.space.capacity_in(self.phase, of)
