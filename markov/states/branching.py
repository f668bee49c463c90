"""Branches of an event: many states at once, all on the same path of chance.

A `Branch` holds the columns of digits that an event has reached so far, the states it came from, a whole-number
multiple for each and one symbolic rate for all.  Every chance draw splits a branch into branches with one more factor
each; every test of a condition splits it into the columns that meet it and the rest.  Rules own the branch they are
given and may write into its digits.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor, RateTable
from markov.states.layout import Digits


@dataclass(frozen=True)
class Branch:
    """Columns on one path of chance.

    Attributes
    ----------
    x : int32[rows, m]
        Digits reached so far.
    before : int32[rows, m]
        Digits of the states that the columns came from; not to be written into.
    origin : int64[m]
        Number of the state that each column came from.
    multiple : int64[m]
        How many alike items take part; multiplies the rate.
    rate : int
        Number of the rate in the rate table.
    story : tuple of str
        What happened on the path, for the transition table.
    starts : tuple of str
        Slots (``group.unit``) of which a start was attempted on the path, once per attempt.
    repaired : str
        Slot of which a repair was completed, or an empty text.
    repairs : tuple of str
        Slots of which further repairs were completed on the path, once per repair.
    drawn : tuple of str
        Pools that a spare was drawn from on the path, once per spare.
    """

    x: Digits
    before: Digits
    origin: NDArray[np.int64]
    multiple: NDArray[np.int64]
    rate: int
    story: tuple[str, ...]
    starts: tuple[str, ...] = ()
    repaired: str = ""
    repairs: tuple[str, ...] = ()
    drawn: tuple[str, ...] = ()

    def __len__(self) -> int:
        return int(self.x.shape[1])

    def split(self, condition: NDArray[np.bool_]) -> tuple[Branch, Branch]:
        """Return the columns that meet a condition and the rest, as copies."""
        return self.only(condition), self.only(~condition)

    def only(self, condition: NDArray[np.bool_]) -> Branch:
        """Return a copy of the columns that meet a condition."""
        return replace(
            self,
            x=self.x[:, condition],
            before=self.before[:, condition],
            origin=self.origin[condition],
            multiple=self.multiple[condition],
        )

    def copy(self) -> Branch:
        """Return the same branch with digits of its own."""
        return replace(self, x=self.x.copy())

    def told(self, note: str) -> Branch:
        """Return the branch with one more line of its story."""
        return replace(self, story=(*self.story, note))

    def counted_start(self, slot: str) -> Branch:
        """Return the branch with one more start attempt of `slot`."""
        return replace(self, starts=(*self.starts, slot))


Mode = Literal["always", "system_up", "system_down"]
Exposed = Callable[[Digits], NDArray[np.int32]]
Apply = Callable[[Branch], list[Branch]]


@dataclass(frozen=True)
class Event:
    """One random event of an island.

    Attributes
    ----------
    cause : str
        First line of the story in the transition table.
    mode : {"always", "system_up", "system_down"}
        In which states of the whole system the event can happen.
    rate : int
        Number of the rate of one item.
    exposed : callable
        Digits -> number of items that may cause the event, shape (m,).
    apply : callable
        Branch -> branches after all consequences inside the island.
    crew : tuple (lane number, stage) or None
        Set where one item under repair causes the event; how many crews work there is known only to the whole chain.
    is_fault : bool
        Whether the event is the fault of a unit.
    """

    cause: str
    mode: Mode
    rate: int
    exposed: Exposed
    apply: Apply
    crew: tuple[int, int] | None = None
    is_fault: bool = False


def row_count(row: int, x: Digits) -> NDArray[np.int32]:
    """Count the items in one row, shape (m,)."""
    return np.asarray(x[row])


@dataclass(frozen=True)
class Dice:
    """Draws of chance, written into one rate table."""

    table: RateTable

    def draw(self, branch: Branch, chance: Factor | None, yes: str, no: str) -> tuple[Branch | None, Branch | None]:
        """Split a branch by one draw.

        Parameters
        ----------
        branch : Branch
            Owned by the caller, given up here.
        chance : Factor or None
            Probability of `yes`; None stands for certainty.
        yes, no : str
            What the story says of either result; empty says nothing.

        Returns
        -------
        yes, no : Branch or None
            None where the probability is exactly zero.
        """
        if chance is None:
            return (branch.told(yes) if yes else branch), None
        against = chance.complement()
        hit = self._with(branch.copy(), chance, yes) if chance.exact else None
        miss = self._with(branch, against, no) if against.exact else None
        return hit, miss

    def choose(self, branch: Branch, weights: list[NDArray[np.int32]]) -> Iterator[tuple[int, Branch]]:
        """Split a branch by a draw among alike items.

        Parameters
        ----------
        branch : Branch
            Owned by the caller, given up here.
        weights : list of int32[m]
            How many of the items each alternative holds.

        Yields
        ------
        alternative, branch
            Columns where it has a chance; the rate carries it.
        """
        everyone = np.sum(weights, axis=0)
        for number, weight in enumerate(weights):
            for choices in np.unique(everyone[weight > 0]).tolist():
                here = (weight > 0) & (everyone == choices)
                sure = here & (weight == choices)
                if sure.any():
                    yield number, branch.only(sure)
                torn = here & (weight < choices)
                if torn.any():
                    part = branch.only(torn)
                    rate = self.table.times(part.rate, Fraction(1, int(choices)))
                    yield number, replace(part, rate=rate, multiple=part.multiple * weight[torn])

    def _with(self, branch: Branch, factor: Factor, note: str) -> Branch:
        weighed = replace(branch, rate=self.table.times(branch.rate, factor))
        return weighed.told(note) if note else weighed
