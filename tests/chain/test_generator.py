"""Chains as arrays: what is added up, what is refused, what can be reached."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from markov.chain import aggregate
from markov.errors import NotReached, UsageError


def test_parallel_transitions_are_added_and_self_loops_left_out():
    chain = aggregate(3, [0, 0, 0, 1, 2, 2], [1, 1, 2, 1, 0, 1], [1e-3, 1e-20, 2.0, 5.0, 0.0, 7.0], rate_error=0.0)
    assert list(zip(chain.source.tolist(), chain.target.tolist(), strict=True)) == [(0, 1), (0, 2), (2, 1)]
    assert chain.rates.fraction(0) == Fraction(1e-3) + Fraction(1e-20)
    leaving = Fraction(1e-3) + Fraction(1e-20) + 2
    assert abs(chain.exits.fraction(0) - leaving) <= leaving * Fraction(chain.exit_error)
    assert chain.exits.high[1] == 0.0


def test_transitions_come_out_sorted_whatever_their_order():
    rng = np.random.default_rng(0)
    source, target = rng.integers(0, 30, 400), rng.integers(0, 30, 400)
    rates = rng.random(400)
    chain = aggregate(30, source, target, rates)
    order = chain.source.astype(int) * 30 + chain.target
    assert (np.diff(order) > 0).all()
    dense = np.zeros((30, 30))
    np.add.at(dense, (source, target), rates)
    np.fill_diagonal(dense, 0.0)
    assert np.allclose(chain.matrix().toarray(), dense, rtol=1e-15)
    assert np.allclose(chain.dense().high, dense, rtol=1e-15)


@pytest.mark.parametrize(
    ("arguments", "error"),
    [
        ((2, [0], [2], [1.0]), UsageError),
        ((2, [0], [1], [-1.0]), UsageError),
        ((2, [0], [1], [np.nan]), UsageError),
        ((2, [0, 1], [1], [1.0]), UsageError),
        ((2, [0], [1], [1e-200]), NotReached),
        ((2, [0], [1], [1e200]), NotReached),
    ],
)
def test_arrays_that_make_no_chain_are_refused(arguments, error):
    with pytest.raises(error):
        aggregate(*arguments)


def test_closed_classes_are_those_reached_from_the_start():
    # 0 -> {1 <-> 2}, 0 -> 3, and 4 apart
    chain = aggregate(5, [0, 1, 2, 0], [1, 2, 1, 3], np.ones(4))
    assert [members.tolist() for members in chain.closed_classes()] == [[1, 2], [3], [4]]
    assert [members.tolist() for members in chain.closed_classes(0)] == [[1, 2], [3]]
    assert [members.tolist() for members in chain.closed_classes(1)] == [[1, 2]]


def test_paths_stop_at_blocked_states():
    chain = aggregate(4, [0, 1, 2], [1, 2, 3], np.ones(3))
    assert chain.reachable(0).tolist() == [True] * 4
    blocked = np.array([False, True, False, False])
    assert chain.reachable(0, blocked).tolist() == [True, True, False, False]
    assert chain.reversed().reachable(3).tolist() == [True] * 4
    assert chain.without_exits(blocked).reachable(0).tolist() == [True, True, False, False]


def test_a_restriction_keeps_rates_inside_and_sums_those_out():
    chain = aggregate(4, [0, 0, 0, 1, 1], [1, 2, 3, 2, 0], [1.0, 2.0, 4.0, 8.0, 16.0], rate_error=0.0)
    part = chain.restricted(np.array([1, 0]), np.array([-1, -1, 0, 0]), 1)
    assert part.chain.dense().high.tolist() == [[0.0, 16.0], [1.0, 0.0]]
    assert part.absorption.high[:, 0].tolist() == [8.0, 6.0]
