"""Double-double arithmetic keeps the errors that it states."""

from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest

from markov.chain import doubled
from markov.chain.doubled import Doubled


def numbers(rng: np.random.Generator, *shape: int, low: float = -12, high: float = 3) -> Doubled:
    lead = 10.0 ** rng.uniform(low, high, shape)
    return Doubled(*doubled.two_sum(lead, lead * rng.uniform(-1, 1, shape) * 2.0**-54))


def distance(found: Fraction, exact: Fraction) -> float:
    return abs(float((found - exact) / exact))


OPERATIONS = [
    (doubled.add, lambda a, b: a + b, doubled.ADD),
    (doubled.multiply, lambda a, b: a * b, doubled.MULTIPLY),
    (doubled.divide, lambda a, b: a / b, doubled.DIVIDE),
]


@pytest.mark.parametrize(("operation", "exactly", "bound"), OPERATIONS, ids=lambda x: getattr(x, "__name__", ""))
def test_an_operation_stays_within_its_stated_error(operation, exactly, bound):
    rng = np.random.default_rng(11)
    worst = 0.0
    for spread in (0, 3, 30):
        x, y = numbers(rng, 2000, low=-spread, high=0), numbers(rng, 2000, low=-spread, high=0)
        z = operation(x, y)
        assert (np.abs(z.low) <= doubled.UNIT * z.high).all()
        worst = max(worst, *(distance(z.fraction(i), exactly(x.fraction(i), y.fraction(i))) for i in range(2000)))
    assert 0.05 * bound < worst <= bound


def test_a_difference_of_close_numbers_keeps_its_absolute_error():
    rng = np.random.default_rng(12)
    x = numbers(rng, 500, low=0, high=1)
    y = doubled.multiply(x, doubled.plain(1.0 - 10.0 ** rng.uniform(-20, -1, 500)))
    z = doubled.difference(x, y)
    for i in range(500):
        exact = x.fraction(i) - y.fraction(i)
        assert abs(z.fraction(i) - exact) <= Fraction(doubled.ADD) * (x.fraction(i) + y.fraction(i))


@pytest.mark.parametrize("inner", [1, 2, 3, 7, 16, 33, 100])
def test_a_matrix_product_is_right_entry_by_entry(inner):
    rng = np.random.default_rng(inner)
    x, y = numbers(rng, 5, inner, low=-40, high=0), numbers(rng, inner, 4, low=-40, high=0)
    z = doubled.product(x, y)
    for i in range(5):
        for j in range(4):
            exact = sum(x.fraction(i, k) * y.fraction(k, j) for k in range(inner))
            assert distance(z.fraction(i, j), exact) <= doubled.product_error(inner)


def test_a_product_in_blocks_equals_the_product_of_its_rows():
    rng = np.random.default_rng(3)
    x, y = numbers(rng, 70, 61), numbers(rng, 61, 50)
    whole = doubled.product(x, y)
    for i in (0, 7, 8, 69):
        row = doubled.product(x.at(slice(i, i + 1)), y)
        assert np.allclose(row.high[0], whole.high[i], rtol=1e-15, atol=0)
        exact = sum(x.fraction(i, k) * y.fraction(k, 49) for k in range(61))
        assert distance(whole.fraction(i, 49), exact) <= doubled.product_error(61)


def test_zeros_in_a_product_stay_exact():
    x = doubled.plain(np.array([[0.0, 1.0], [0.0, 0.0]]))
    z = doubled.product(x, x)
    assert not z.high.any()
    assert not z.low.any()


def test_sums_of_lists_stay_within_their_error():
    rng = np.random.default_rng(5)
    x = numbers(rng, 3000)
    owner = np.sort(rng.integers(0, 40, 3000))
    summed = doubled.totals(x, owner, 41)
    longest = int(np.bincount(owner).max())
    for number in range(40):
        exact = sum(x.fraction(int(i)) for i in np.flatnonzero(owner == number))
        assert distance(summed.fraction(number), exact) <= doubled.total_error(longest)
    assert summed.high[40] == 0.0
    exact = sum(x.fraction(i) for i in range(3000))
    assert distance(doubled.total(x).fraction(), exact) <= doubled.total_error(3000)
    assert distance(sum(map(Fraction, doubled.exact_total(*x))), exact) <= doubled.W


@pytest.mark.parametrize(("longest", "spread"), [(1, 3), (7, 12), (40, 12), (64, 0), (200, 12)])
def test_sums_of_runs_stay_within_their_error(longest, spread):
    rng = np.random.default_rng(longest)
    lengths = rng.integers(0, longest + 1, 300)
    lengths[5] = longest
    pointers = np.concatenate(([0], np.cumsum(lengths)))
    x = numbers(rng, int(pointers[-1]), low=-spread, high=0)
    summed = doubled.run_totals(x, pointers.astype(np.int32))
    for run, (begin, end) in enumerate(pairwise(pointers.tolist())):
        exact = sum((x.fraction(int(i)) for i in range(begin, end)), Fraction(0))
        assert abs(summed.fraction(run) - exact) <= Fraction(doubled.run_error(longest)) * exact
        assert abs(summed.low[run]) <= doubled.UNIT * summed.high[run]
    assert doubled.run_error(64) < 1e-27


def test_runs_in_many_blocks_are_those_of_one(monkeypatch):
    rng = np.random.default_rng(8)
    pointers = np.concatenate(([0], np.cumsum(rng.integers(0, 9, 500))))
    x = numbers(rng, int(pointers[-1]))
    whole = doubled.run_totals(x, pointers)
    monkeypatch.setattr(doubled, "_RUN_BLOCK", 3)
    pieces = doubled.run_totals(x, pointers)
    assert (pieces.high == whole.high).all()
    assert (pieces.low == whole.low).all()
    assert [end for _, end in doubled.run_blocks(pointers, 50)][-1] == 500


@pytest.mark.parametrize("count", [1, 1000, 2048, 5000])
def test_a_sum_in_blocks_stays_within_its_error(count, monkeypatch):
    monkeypatch.setattr(doubled, "_LIST_BLOCK", 16)
    x = numbers(np.random.default_rng(count), count)
    exact = sum(x.fraction(i) for i in range(count))
    assert distance(doubled.total(x).fraction(), exact) <= doubled.total_error(count)


def test_products_that_underflow_are_off_by_the_stated_amount():
    rng = np.random.default_rng(6)
    x, y = numbers(rng, 3, 8, low=-170, high=-140), numbers(rng, 8, 3, low=-170, high=-140)
    z = doubled.product(x, y)
    for i in range(3):
        for j in range(3):
            exact = sum(x.fraction(i, k) * y.fraction(k, j) for k in range(8))
            allowed = Fraction(doubled.product_error(8)) * exact + 8 * Fraction(doubled.UNDERFLOW)
            assert abs(z.fraction(i, j) - exact) <= allowed
