"""States of two chains are matched by what they do, and no further than that carries."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction

from hypothesis import given, settings
from hypothesis import strategies as st

from markov.documents.alignment import align
from markov.documents.matching import match
from markov.documents.rate_tables import Entry, RateTable, rate_table
from markov.documents.refinement import bijection
from markov.evaluation import build_space
from markov.model import Model

Read = Callable[[str], Model]


def table(up: str, rates: Mapping[tuple[int, int], int | Fraction], start: int = 0, names: str = "") -> RateTable:
    """A chain: one letter a state, U up and D down."""
    return RateTable(
        names=tuple(names or [f"s{number}" for number in range(len(up))]),
        up=tuple(letter == "U" for letter in up),
        start=tuple(Fraction(number == start) for number in range(len(up))),
        entries={ends: Entry(Fraction(rate)) for ends, rate in rates.items()},
    )


def shuffled(old: RateTable, order: list[int]) -> RateTable:
    """The same chain, state n renumbered to order[n] and renamed."""
    back = {place: state for state, place in enumerate(order)}
    return RateTable(
        names=tuple(f"t{place}" for place in range(old.size)),
        up=tuple(old.up[back[place]] for place in range(old.size)),
        start=tuple(old.start[back[place]] for place in range(old.size)),
        entries={(order[one], order[other]): entry for (one, other), entry in old.entries.items()},
    )


@st.composite
def chains(draw: st.DrawFn) -> tuple[RateTable, list[int]]:
    size = draw(st.integers(2, 7))
    ends = st.tuples(st.integers(0, size - 1), st.integers(0, size - 1)).filter(lambda pair: pair[0] != pair[1])
    rates = draw(st.dictionaries(ends, st.integers(1, 3), max_size=14))
    up = draw(st.text("UD", min_size=size, max_size=size))
    return table(up, rates), draw(st.permutations(range(size)))


@given(chains())
@settings(max_examples=150)
def test_a_renumbered_chain_is_recognised_whole(drawn: tuple[RateTable, list[int]]) -> None:
    old, order = drawn
    found = bijection(old, shuffled(old, order))
    assert found is not None
    new = shuffled(old, order)
    for (one, other), entry in old.entries.items():
        assert new.entries[found[one], found[other]].exact == entry.exact
    assert [old.up[state] for state in range(old.size)] == [new.up[found[state]] for state in range(old.size)]


@given(chains())
@settings(max_examples=60)
def test_a_chain_with_one_rate_changed_is_never_taken_for_the_same(drawn: tuple[RateTable, list[int]]) -> None:
    old, order = drawn
    if not old.entries:
        return
    ends = min(old.entries)
    changed = RateTable(old.names, old.up, old.start, {**old.entries, ends: Entry(Fraction(17))})
    assert bijection(old, shuffled(changed, order)) is None
    found = match(old, shuffled(changed, order), by_name=False)
    assert {pair.basis for pair in found.pairs} <= {"most rates"}


TWO = """
units: {a: {failure_rate: 1e-4 /h, repair_time: 10 h}}
groups: {g: {members: [{unit: a, count: 2}], required: 1, redundancy: active, coverage: 0.9}}
system: g
"""


def test_states_listed_one_by_one_stand_together_for_the_counted_one(read: Read) -> None:
    counted = rate_table(build_space(read(TWO.replace("0.9", "1"))))
    one_by_one = table(
        "UUUD",
        {
            (0, 1): Fraction(1, 10_000),
            (0, 2): Fraction(1, 10_000),
            (1, 3): Fraction(1, 10_000),
            (2, 3): Fraction(1, 10_000),
            (1, 0): Fraction(1, 10),
            (2, 0): Fraction(1, 10),
            (3, 1): Fraction(1, 10),
            (3, 2): Fraction(1, 10),
        },
    )
    found = match(one_by_one, counted, by_name=False)
    assert found.is_whole
    assert {pair.old: pair.basis for pair in found.pairs} == {
        (0,): "all rates",
        (1, 2): "same future",
        (3,): "all rates",
    }


def test_a_chain_that_begins_elsewhere_is_not_the_same() -> None:
    rates = {(0, 1): 1, (1, 0): 1}
    assert bijection(table("UU", rates), table("UU", rates, start=1)) is not None
    rates = {(0, 1): 1, (1, 0): 2}
    assert bijection(table("UU", rates), table("UU", rates, start=1)) is None


def test_a_state_without_arrows_in_common_finds_no_partner() -> None:
    old = table("UDU", {(0, 1): 5, (1, 0): 700, (1, 2): 90_000})
    new = table("UDD", {(0, 1): 5, (1, 0): 700, (0, 2): 3, (2, 0): 7_000_000})
    pairs = align(old, new)
    assert pairs[0] == 0
    assert pairs[1] == 1
    assert 2 not in pairs


def test_a_changed_rate_does_not_hide_the_partner(read: Read) -> None:
    old = rate_table(build_space(read(TWO)))
    new = rate_table(build_space(read(TWO.replace("a:", "b:").replace("unit: a", "unit: b").replace("0.9", "0.8"))))
    found = match(old, new, by_name=True)
    assert found.is_whole
    assert all(old.names[pair.old[0]].replace("a:", "b:") == new.names[pair.new[0]] for pair in found.pairs)


def test_names_in_common_are_kept_even_where_rates_would_say_otherwise() -> None:
    rates = {(0, 1): 1, (0, 2): 1, (1, 0): 2, (2, 0): 2}
    old = table("UDD", rates, names="abc")
    new = table("UDD", rates, names="acb")
    found = match(old, new, by_name=True)
    assert {(pair.old, pair.new) for pair in found.pairs} == {((0,), (0,)), ((1,), (2,)), ((2,), (1,))}
