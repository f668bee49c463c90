"""Which states of two chains agree in every rate: partitions refined until nothing tells their states apart.

Two methods, both on exact rates.  A bijection is sought by colour refinement in both directions of the arrows, with
individualisation where equals remain (B. D. McKay, Practical graph isomorphism, Congressus Numerantium 30, 1981; from
memory).  Where none exists, the coarsest partition is taken in which all states of a class pass to every other class at
the same total rate (ordinary lumpability: J. G. Kemeny, J. L. Snell, Finite Markov Chains, 1960, section 6.3; from
memory): states of one class, of whichever chain, have the same future.
"""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping, Sequence
from fractions import Fraction

from markov.documents.rate_tables import RateTable

Colours = list[int]
#: Colour of a state, then colour and rate of what follows it and of what is before it.
_Surroundings = tuple[int, tuple[tuple[int, Fraction], ...], tuple[tuple[int, Fraction], ...]]
#: More refinements than this are not tried for states that remain equals.
_MOST_TRIES = 200


def bijection(old: RateTable, new: RateTable, known: Mapping[int, int] | None = None) -> tuple[int, ...] | None:
    """Return, for each state of one chain, the state of the other with the same rates; None if there is none.

    Pairs that are known stay together.  Rates, delivery and the probabilities at time zero agree under it; that is
    checked before it is returned.
    """
    if old.size != new.size or len(old.entries) != len(new.entries):
        return None
    taken = dict(known or {})
    marks = ({one: one for one in taken}, {other: one for one, other in taken.items()})
    first = _numbered(
        [
            (table.up[state], table.start[state], mark.get(state))
            for table, mark in zip((old, new), marks, strict=True)
            for state in range(table.size)
        ]
    )
    tries = [0]
    return _search(old, new, first, tries)


def _search(old: RateTable, new: RateTable, colours: Colours, tries: list[int]) -> tuple[int, ...] | None:
    tries[0] += 1
    if tries[0] > _MOST_TRIES:
        return None
    colours = _stable(old, new, colours)
    left, right = _classes(colours[: old.size]), _classes(colours[old.size :])
    if {colour: len(held) for colour, held in left.items()} != {colour: len(held) for colour, held in right.items()}:
        return None
    several = [colour for colour, held in left.items() if len(held) > 1]
    if not several:
        found = [0] * old.size
        for colour, held in left.items():
            found[held[0]] = right[colour][0]
        return tuple(found) if _agrees(old, new, found) else None
    chosen = min(several, key=lambda colour: (len(left[colour]), left[colour][0]))
    alone = max(colours) + 1
    one = left[chosen][0]
    for other in right[chosen]:
        told = list(colours)
        told[one] = told[old.size + other] = alone
        found_below = _search(old, new, told, tries)
        if found_below is not None:
            return found_below
    return None


def _agrees(old: RateTable, new: RateTable, found: Sequence[int]) -> bool:
    return all(
        (other := new.entries.get((found[source], found[target]))) is not None and other.exact == entry.exact
        for (source, target), entry in old.entries.items()
    )


def _stable(old: RateTable, new: RateTable, colours: Colours) -> Colours:
    count = len(set(colours))
    while True:
        colours = _numbered(_both_ways(old, new, colours))
        if len(set(colours)) == count:
            return colours
        count = len(set(colours))


def _both_ways(old: RateTable, new: RateTable, colours: Colours) -> list[_Surroundings]:
    told: list[_Surroundings] = []
    for table, shift in ((old, 0), (new, old.size)):
        for state in range(table.size):
            out = sorted((colours[shift + other], rate) for other, rate in table.after[state].items())
            into = sorted((colours[shift + other], rate) for other, rate in table.before[state].items())
            told.append((colours[shift + state], tuple(out), tuple(into)))
    return told


def futures(tables: Sequence[RateTable]) -> list[Colours]:
    """Return, for each chain, the class of each state; states of one class have the same future.

    Classes are numbered across all chains.  Delivery is told apart from the start, the probabilities at time zero are
    not.
    """
    colours = _numbered([table.up[state] for table in tables for state in range(table.size)])
    count = len(set(colours))
    while True:
        told: list[Hashable] = []
        shift = 0
        for table in tables:
            for state in range(table.size):
                own = colours[shift + state]
                rates: dict[int, Fraction] = {}
                for other, rate in table.after[state].items():
                    colour = colours[shift + other]
                    if colour != own:
                        rates[colour] = rates.get(colour, Fraction(0)) + rate
                told.append((own, tuple(sorted(rates.items()))))
            shift += table.size
        colours = _numbered(told)
        if len(set(colours)) == count:
            break
        count = len(set(colours))
    found, shift = [], 0
    for table in tables:
        found.append(colours[shift : shift + table.size])
        shift += table.size
    return found


def _numbered(told: Iterable[Hashable]) -> Colours:
    numbers: dict[Hashable, int] = {}
    return [numbers.setdefault(each, len(numbers)) for each in told]


def _classes(colours: Sequence[int]) -> dict[int, list[int]]:
    found: dict[int, list[int]] = {}
    for state, colour in enumerate(colours):
        found.setdefault(colour, []).append(state)
    return found


def depths(old: RateTable, new: RateTable, rounds: int, *, rates: bool) -> list[tuple[Colours, Colours]]:
    """Return the colours of the states of both chains after 1, 2, … rounds of refinement.

    Parameters
    ----------
    old, new : RateTable
    rounds : int
    rates : bool
        Whether equal rates are asked for, or equal numbers of arrows only.
    """
    colours = _numbered([table.up[state] for table in (old, new) for state in range(table.size)])
    found = []
    for _ in range(rounds):
        told = _both_ways(old, new, colours)
        colours = _numbered(told) if rates else _numbered(_without_rates(each) for each in told)
        found.append((colours[: old.size], colours[old.size :]))
    return found


def _without_rates(told: _Surroundings) -> Hashable:
    own, out, into = told
    return own, tuple(colour for colour, _ in out), tuple(colour for colour, _ in into)
