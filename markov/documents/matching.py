"""Which states of one chain stand for which of another: by their names, or by their rates where names differ."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from markov.documents.alignment import align
from markov.documents.rate_tables import Entry, RateTable
from markov.documents.refinement import bijection, futures

#: How two states were found to stand for each other.
Basis = Literal["name", "all rates", "same future", "most rates"]

#: Arrows beyond which chains are held against each other by the names of their states only.
MOST_ARROWS = 200_000


@dataclass(frozen=True)
class Pair:
    """States of two chains that stand for each other; several of one where they behave alike."""

    old: tuple[int, ...]
    new: tuple[int, ...]
    basis: Basis


@dataclass(frozen=True)
class Matching:
    """All pairs, and the states without a partner."""

    pairs: tuple[Pair, ...]
    only_old: tuple[int, ...]
    only_new: tuple[int, ...]
    note: str = ""

    @property
    def is_whole(self) -> bool:
        """Whether every state has a partner."""
        return not self.only_old and not self.only_new


def match(old: RateTable, new: RateTable, *, by_name: bool) -> Matching:
    """Find which states of two chains stand for each other.

    Parameters
    ----------
    old, new : RateTable
    by_name : bool
        Whether equal names mean the same state, as in two revisions of one plant.
    """
    named = _by_name(old, new) if by_name else {}
    if by_name and len(named) == old.size == new.size:
        return _told(old, new, [Pair((one,), (other,), "name") for one, other in named.items()])
    if len(old.entries) + len(new.entries) > MOST_ARROWS:
        pairs = [Pair((one,), (other,), "name") for one, other in named.items()]
        return _told(old, new, pairs, "the chains are too large to hold unnamed states against each other by rates")
    exact = bijection(old, new, named)
    if exact is not None:
        return _told(
            old,
            new,
            [
                Pair((one,), (other,), "name" if by_name and old.names[one] == new.names[other] else "all rates")
                for one, other in enumerate(exact)
            ],
        )
    if named:
        return _told(old, new, _around_names(old, new, named))
    together = _same_futures(old, new) if old.size != new.size else None
    return _lumped(old, new) if together is None else together


def _by_name(old: RateTable, new: RateTable) -> dict[int, int]:
    numbers = {name: number for number, name in enumerate(new.names)}
    return {number: numbers[name] for number, name in enumerate(old.names) if name in numbers}


def _around_names(old: RateTable, new: RateTable, named: Mapping[int, int]) -> list[Pair]:
    """Match the states without a common name by their arrows to and from those with one."""
    found = align(old, new, named)
    return [Pair((one,), (other,), "name" if named.get(one) == other else "most rates") for one, other in found.items()]


def _same_futures(old: RateTable, new: RateTable) -> Matching | None:
    """Return classes of states with the same future, if every state is in one with states of both chains."""
    ones, others = futures((old, new))
    if set(ones) != set(others) or _weights(old, ones) != _weights(new, others):
        return None
    pairs = []
    for colour in dict.fromkeys(ones):
        mine = tuple(state for state, each in enumerate(ones) if each == colour)
        theirs = tuple(state for state, each in enumerate(others) if each == colour)
        pairs.append(Pair(mine, theirs, "all rates" if len(mine) == len(theirs) == 1 else "same future"))
    return _told(old, new, pairs)


def _weights(table: RateTable, colours: Iterable[int]) -> dict[int, Fraction]:
    found: dict[int, Fraction] = {}
    for state, colour in enumerate(colours):
        if table.start[state]:
            found[colour] = found.get(colour, Fraction(0)) + table.start[state]
    return found


def _lumped(old: RateTable, new: RateTable) -> Matching:
    """Match as far as possible; where the sizes differ, states of one chain that behave alike count as one."""
    if old.size == new.size:
        mine, theirs = _each(old), _each(new)
    else:
        mine, theirs = _alike(old), _alike(new)
    small_old, small_new = _merged(old, mine), _merged(new, theirs)
    found = align(small_old, small_new)
    pairs = [Pair(mine[one], theirs[other], "most rates") for one, other in found.items()]
    too_many = "" if found or not old.size else "no two states have enough rates in common to be taken for each other"
    return _told(old, new, pairs, too_many)


def _each(table: RateTable) -> list[tuple[int, ...]]:
    return [(state,) for state in range(table.size)]


def _alike(table: RateTable) -> list[tuple[int, ...]]:
    """Return the states of one chain in classes with the same future and the same chance at time zero."""
    (colours,) = futures((table,))
    found: dict[tuple[int, bool], list[int]] = {}
    for state, colour in enumerate(colours):
        found.setdefault((colour, bool(table.start[state])), []).append(state)
    return [tuple(states) for states in found.values()]


def _merged(table: RateTable, classes: list[tuple[int, ...]]) -> RateTable:
    """Return the chain of the classes; the first state of each speaks for it."""
    number = {state: position for position, states in enumerate(classes) for state in states}
    rates: dict[tuple[int, int], Fraction] = {}
    for position, states in enumerate(classes):
        for other, rate in table.after[states[0]].items():
            if number[other] != position:
                key = (position, number[other])
                rates[key] = rates.get(key, Fraction(0)) + rate
    return RateTable(
        names=tuple(table.names[states[0]] for states in classes),
        up=tuple(table.up[states[0]] for states in classes),
        start=tuple(sum((table.start[state] for state in states), Fraction(0)) for states in classes),
        entries={key: Entry(rate) for key, rate in rates.items()},
    )


def _told(old: RateTable, new: RateTable, pairs: list[Pair], note: str = "") -> Matching:
    mine = {state for pair in pairs for state in pair.old}
    theirs = {state for pair in pairs for state in pair.new}
    return Matching(
        tuple(sorted(pairs, key=lambda pair: pair.old)),
        tuple(state for state in range(old.size) if state not in mine),
        tuple(state for state in range(new.size) if state not in theirs),
        note,
    )
