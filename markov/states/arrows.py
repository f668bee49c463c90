"""The kinds of transition of a chain: cause, symbolic rate and what the transition counts."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from fractions import Fraction

from markov.rates import RateTable


@dataclass(frozen=True)
class ArrowKind:
    """What many transitions have in common: everything but their ends and their multiple.

    Attributes
    ----------
    cause : str
        The event and the results of its draws, in words.
    rate : int
        Number of the symbolic rate in the rate table.
    starts : tuple of str
        Slots (``group.unit``) of which a start was attempted, once per attempt.
    repaired : str
        Slot of which a repair was completed, or an empty text.
    island : str
        Name of the group or unit that the event belongs to; empty in a hand-written chain.
    repairs : tuple of str
        Slots of which further repairs were completed at the same instant.
    spares : tuple of str
        Pools that a spare was drawn from, once per spare.
    """

    cause: str
    rate: int
    starts: tuple[str, ...] = ()
    repaired: str = ""
    island: str = ""
    repairs: tuple[str, ...] = ()
    spares: tuple[str, ...] = ()

    @property
    def counts(self) -> bool:
        """Whether it counts something, so that it matters even where it changes no state."""
        return bool(self.starts or self.repaired or self.repairs or self.spares)


@dataclass
class ArrowKinds:
    """All kinds of transition of one chain, each stored once and named by its number."""

    rates: RateTable = field(default_factory=RateTable)
    kinds: list[ArrowKind] = field(default_factory=list)
    _numbers: dict[ArrowKind, int] = field(default_factory=dict)

    def intern(self, kind: ArrowKind) -> int:
        """Return the number of `kind`, adding it if it is new."""
        number = self._numbers.get(kind)
        if number is None:
            number = len(self.kinds)
            self.kinds.append(kind)
            self._numbers[kind] = number
        return number

    def shared(self, number: int, choices: int) -> int:
        """Return the kind that stands for one of `choices` equally likely results of `number`."""
        kind = self.kinds[number]
        rate = self.rates.times(kind.rate, Fraction(1, choices))
        return self.intern(replace(kind, rate=rate))
