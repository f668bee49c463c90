"""A chain as a table of exact rates, ready to be held against another."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

from markov.states import Arrows, GeneratedSpace, StateSpace


@dataclass(frozen=True)
class Entry:
    """What leads from one state to another: the total rate per hour, its formula, the causes, the symbols' values."""

    exact: Fraction
    formula: str = ""
    causes: tuple[str, ...] = ()
    symbols: tuple[tuple[str, Fraction], ...] = ()


@dataclass(frozen=True)
class RateTable:
    """A chain of n states.

    Attributes
    ----------
    names : tuple of str
    up : tuple of bool
    start : tuple of Fraction
        Probability of each state at time zero.
    entries : mapping of (int, int) to Entry
        Total rate per hour between two states.
    """

    names: tuple[str, ...]
    up: tuple[bool, ...]
    start: tuple[Fraction, ...]
    entries: Mapping[tuple[int, int], Entry] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """Number of states, n."""
        return len(self.names)

    @cached_property
    def after(self) -> tuple[dict[int, Fraction], ...]:
        """For each state, the rates to the states that follow it."""
        found: tuple[dict[int, Fraction], ...] = tuple({} for _ in self.names)
        for (source, target), entry in self.entries.items():
            found[source][target] = entry.exact
        return found

    @cached_property
    def before(self) -> tuple[dict[int, Fraction], ...]:
        """For each state, the rates from the states before it."""
        found: tuple[dict[int, Fraction], ...] = tuple({} for _ in self.names)
        for (source, target), entry in self.entries.items():
            found[target][source] = entry.exact
        return found


def rate_table(space: StateSpace, phase: int = 0) -> RateTable:
    """Return the table of a chain in one phase; self-loops, which change nothing, are left out."""
    arrows = space.every_arrows[phase] if isinstance(space, GeneratedSpace) else space.arrows
    start = dict(space.start)
    return RateTable(
        names=tuple(space.label(number) for number in range(space.size)),
        up=tuple(bool(each) for each in space.up),
        start=tuple(start.get(number, Fraction(0)) for number in range(space.size)),
        entries=_entries(space, arrows),
    )


def _entries(space: StateSpace, arrows: Arrows) -> dict[tuple[int, int], Entry]:
    kinds = space.kinds
    counted: dict[tuple[int, int], dict[int, int]] = {}
    moving = arrows.moving
    for source, target, kind, multiple in zip(
        arrows.source[moving].tolist(),
        arrows.target[moving].tolist(),
        arrows.kind[moving].tolist(),
        arrows.multiple[moving].tolist(),
        strict=True,
    ):
        row = counted.setdefault((source, target), {})
        row[kind] = row.get(kind, 0) + multiple
    exact = [rate.exact for rate in kinds.rates.rates]
    made: dict[tuple[tuple[int, int], ...], Entry] = {}
    found = {}
    for pair in sorted(counted):
        row = counted[pair]
        key = tuple(sorted(row.items()))
        if key not in made:
            by_rate: dict[int, int] = {}
            for kind, multiple in key:
                rate = kinds.kinds[kind].rate
                by_rate[rate] = by_rate.get(rate, 0) + multiple
            symbols = {
                (factor.base or factor).symbol: (factor.base or factor).exact
                for rate in by_rate
                for factor in kinds.rates.rates[rate].factors
            }
            made[key] = Entry(
                sum((exact[rate] * multiple for rate, multiple in by_rate.items()), Fraction(0)),
                " + ".join(kinds.rates.rates[rate].formula(multiple) for rate, multiple in by_rate.items()),
                tuple(dict.fromkeys(kinds.kinds[kind].cause for kind, _ in key)),
                tuple(sorted(symbols.items())),
            )
        found[pair] = made[key]
    return found
