"""Independent parts through a structure of success, against summing over every combination."""

import itertools
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.chain import point
from markov.errors import NotReached
from markov.evaluation.combining import Share, combine
from markov.model import AllOf, AnyOf, AtLeast, Named, Success

NAMES = "abcde"


def structures(depth: int = 3) -> st.SearchStrategy[Success]:
    leaf = st.sampled_from(NAMES).map(lambda name: Named(name))
    return st.recursive(leaf, _grown, max_leaves=8)


def _grown(children: st.SearchStrategy[Success]) -> st.SearchStrategy[Success]:
    parts = st.lists(children, min_size=1, max_size=4).map(tuple)
    return st.one_of(
        parts.map(lambda of: AllOf(of)),
        parts.map(lambda of: AnyOf(of)),
        parts.flatmap(lambda of: st.integers(1, len(of)).map(lambda count: AtLeast(count, of))),
    )


def holds(success: Success, state: dict[str, bool]) -> bool:
    if isinstance(success, Named):
        return state[success.name]
    parts = [holds(part, state) for part in success.of]
    if isinstance(success, AllOf):
        return all(parts)
    if isinstance(success, AnyOf):
        return any(parts)
    return sum(parts) >= success.count


@given(structures(), st.lists(st.integers(1, 2**20 - 1), min_size=5, max_size=5))
def test_the_combination_is_the_sum_over_every_state(success: Success, numerators: list[int]) -> None:
    # Dyadic shares are exact in floats, and so is what is put in; the rest is covered by the bounds.
    down = {name: Fraction(each, 2**20) for name, each in zip(NAMES, numerators, strict=True)}
    exact = Fraction(0)
    for state in itertools.product((True, False), repeat=len(NAMES)):
        up = dict(zip(NAMES, state, strict=True))
        if not holds(success, up):
            chance = Fraction(1)
            for name, delivers in up.items():
                chance *= 1 - down[name] if delivers else down[name]
            exact += chance
    shares = {name: Share(point(1 - each, "given"), point(each, "given")) for name, each in down.items()}
    found = combine(success, shares)
    assert found.down.lower <= exact <= found.down.upper
    assert found.up.lower <= 1 - exact <= found.up.upper
    assert found.down.upper - found.down.lower <= Fraction(1, 10**13) * exact


def test_small_shares_keep_their_digits() -> None:
    tiny = Fraction(1, 2**60)
    share = Share(point(1 - tiny, "given"), point(tiny, "given"))
    found = combine(AnyOf((Named("a"), Named("b"))), {"a": share, "b": share})
    assert found.down.value == float(tiny**2)


def test_too_many_repeated_names_are_refused() -> None:
    names = [f"part{number}" for number in range(13)]
    structure = AllOf(tuple(Named(name) for name in names * 2))
    share = Share(point(1, ""), point(0, ""))
    with pytest.raises(NotReached, match="13 parts"):
        combine(structure, dict.fromkeys(names, share))
