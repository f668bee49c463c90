"""Results never claim more than they know."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.chain import Enclosure, Vector, distribution, point
from markov.chain.bounds import above, around, below

positive = st.floats(min_value=0.0, max_value=1e100, allow_subnormal=True)
SPREAD = Fraction(1, 10**6)


def box(value: float, spread: float = 1e-6) -> Enclosure:
    return around(value, spread, 0.0, "test")


@given(positive, positive)
def test_arithmetic_of_enclosures_contains_every_combination(a, b):
    x, y = box(a), box(b)
    for p in (Fraction(x.lower), Fraction(x.upper)):
        for q in (Fraction(y.lower), Fraction(y.upper)):
            assert Fraction((x + y).lower) <= p + q <= Fraction((x + y).upper)
            assert Fraction((x * y).lower) <= p * q <= Fraction((x * y).upper)
            if y.lower > 0:
                quotient = x / y
                assert Fraction(quotient.lower) <= p / q
                assert math.isinf(quotient.upper) or p / q <= Fraction(quotient.upper)


@given(st.floats(min_value=0.0, max_value=1.0))
def test_complement_and_root_contain_both_ends(a):
    x = box(a, 1e-12).capped()
    rest, root = x.complement(), box(a).root()
    for end in (Fraction(x.lower), Fraction(x.upper)):
        assert Fraction(rest.lower) <= 1 - end <= Fraction(rest.upper)
    assert Fraction(root.lower) ** 2 <= Fraction(box(a).lower)
    assert Fraction(box(a).upper) <= Fraction(root.upper) ** 2


@given(st.fractions())
def test_floats_below_and_above_are_the_nearest_ones(x):
    low, high = below(x), above(x)
    assert Fraction(low) <= x <= Fraction(high)
    assert high == low or math.nextafter(low, math.inf) == high


def test_an_exact_number_stays_exact():
    third = point(Fraction(1, 3), "given")
    assert third.lower < third.upper == math.nextafter(third.lower, 1.0)
    one = point(1, "given")
    assert (one * one, one + point(0, "")) == (one, one)
    assert one.width == 0.0


def test_an_estimate_spoils_what_it_touches():
    guess = Enclosure(0.5, None, None, "guess")
    for mixed in (guess + box(1.0), box(1.0) * guess, guess / box(1.0), guess.complement(), guess.root()):
        assert mixed.lower is None
        assert mixed.upper is None
        assert not mixed.certified


def test_a_divisor_that_may_vanish_gives_no_upper_end():
    quotient = box(1.0) / around(1e-3, 2.0, 0.0, "wide")
    assert quotient.upper == math.inf
    with pytest.raises(ZeroDivisionError):
        box(1.0) / point(0, "zero")


def test_intervals_that_do_not_meet_are_a_fault():
    with pytest.raises(ArithmeticError):
        box(1.0).meet(box(2.0))


@given(
    st.lists(st.floats(min_value=1e-300, max_value=1.0), min_size=1, max_size=12),
    st.integers(min_value=0, max_value=2**32),
    st.sampled_from([0.0, 1e-16, 1e-9]),
    st.sampled_from([0.0, 1e-100, 1e-3]),
)
def test_weighted_sums_contain_every_vector_within_the_error(values, seed, relative, absolute):
    rng = np.random.default_rng(seed)
    weights = rng.uniform(0, 5, len(values))
    found = Vector(np.array(values), relative, absolute, "test").weighted(weights, 1e-12)
    for sign in (-1, 1):
        exact = Fraction(0)
        for value, weight in zip(values, weights.tolist(), strict=True):
            entry = Fraction(value) * (1 + sign * Fraction(relative)) + sign * Fraction(absolute)
            exact += max(Fraction(0), entry) * Fraction(weight) * (1 + sign * Fraction(1e-12))
        assert Fraction(found.lower) <= exact <= Fraction(found.upper)


def test_a_sum_over_everything_is_exactly_one():
    thirds = Vector(np.full(3, 1 / 3), 1e-9, 0.0, "test", np.ones(3, dtype=bool), 1.0)
    assert thirds.weighted(np.ones(3)) == point(1, "test")
    assert thirds.weighted(np.full(3, 0.25)) == point(0.25, "test")
    assert thirds.weighted(np.zeros(3)) == point(0, "test")


def test_a_sum_next_to_one_is_as_narrow_as_its_complement():
    small = 1e-12
    pair = Vector(np.array([1.0 - small, small]), 1e-9, 0.0, "test", np.ones(2, dtype=bool), 1.0)
    good = pair.weighted(np.array([1.0, 0.0]))
    assert good.upper - good.lower < 1e-15
    assert Fraction(good.lower) <= 1 - Fraction(small) <= Fraction(good.upper)


def test_an_impossible_entry_is_exactly_zero():
    vector = Vector(np.array([0.5, 0.0]), 1e-9, 1e-20, "test", np.array([True, False]))
    assert vector.entry(1) == point(0, "test")
    assert vector.weighted(np.array([0.0, 3.0])) == point(0, "test")


def test_a_vector_as_weight_brings_its_error():
    p = distribution([0.5, 0.5], "given")
    w = Vector(np.array([0.25, 0.75]), 1e-3, 0.0, "test")
    found = p.weighted(w)
    assert found.lower <= 0.5 * (1 - 1e-3) + 1e-12
    assert found.upper >= 0.5 * (1 + 1e-3) - 1e-12
    unknown = Vector(w.values, None, 0.0, "test")
    assert not p.weighted(unknown).certified


@pytest.mark.parametrize("weights", [np.array([-1.0, 1.0]), np.array([np.nan, 1.0]), np.ones(3)])
def test_weights_that_make_no_sense_are_refused(weights):
    with pytest.raises(ValueError, match="weights"):
        distribution([0.5, 0.5], "given").weighted(weights)
