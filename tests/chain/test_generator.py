"""Chains as arrays: what is added up, what is refused, what can be reached."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from markov.chain import aggregate
from markov.chain.generator import stretch
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


def test_parallel_transitions_in_any_order_are_added_exactly():
    rng = np.random.default_rng(1)
    source, target = rng.integers(0, 6, 200), rng.integers(0, 6, 200)
    rates = 10.0 ** rng.uniform(-12, 0, 200)
    exact: dict[tuple[int, int], Fraction] = {}
    for i, j, rate in zip(source.tolist(), target.tolist(), rates.tolist(), strict=True):
        if i != j:
            exact[i, j] = exact.get((i, j), Fraction(0)) + Fraction(rate)
    order = np.lexsort((target, source))
    for chain in (
        aggregate(6, source, target, rates, rate_error=0.0),
        aggregate(6, source[order], target[order], rates[order], rate_error=0.0),
    ):
        assert list(zip(chain.source.tolist(), chain.target.tolist(), strict=True)) == sorted(exact)
        for place, pair in enumerate(sorted(exact)):
            assert abs(chain.rates.fraction(place) - exact[pair]) <= Fraction(chain.rate_error) * exact[pair]


def test_parts_of_a_rate_that_overlap_are_put_in_order():
    chain = aggregate(2, [0, 1], [1, 0], [1.0, 1e-3], [1.0, 1e-30])
    assert chain.high.tolist() == [2.0, 1e-3]
    assert chain.low.tolist() == [0.0, 1e-30]


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


def test_leading_to_is_reaching_backwards():
    rng = np.random.default_rng(2)
    for _ in range(20):
        chain = aggregate(15, rng.integers(0, 15, 20), rng.integers(0, 15, 20), np.ones(20))
        goal, blocked = rng.random(15) < 0.2, rng.random(15) < 0.2
        for stops in (None, blocked):
            kept = chain if stops is None else chain.without_exits(stops)
            assert (chain.leading_to(goal, stops) == kept.reversed().reachable(goal)).all()
            paths = [bool((kept.reachable(state) & goal).any()) for state in range(15)]
            assert chain.leading_to(goal, stops).tolist() == paths


def test_distances_count_jumps_along_the_shortest_path():
    # 0 -> 1 -> 2 -> 3 with a short cut 0 -> 2, and 4 apart
    chain = aggregate(5, [0, 1, 2, 0, 4], [1, 2, 3, 2, 0], np.ones(5))
    assert chain.distances(0).tolist() == [0, 1, 1, 2, -1]
    assert chain.distances(4).tolist() == [1, 2, 2, 3, 0]
    long = aggregate(40_000, np.arange(39_999), np.arange(1, 40_000), np.ones(39_999))
    assert long.distances(0).tolist() == list(range(40_000))


def test_classes_are_the_same_whatever_the_numbers_of_the_states():
    rng = np.random.default_rng(3)
    for _ in range(30):
        source, target = np.arange(1, 9), rng.integers(0, np.arange(1, 9))
        more = rng.integers(0, 9, (2, int(rng.integers(0, 9))))
        source, target = np.concatenate((source, more[0])), np.concatenate((target, more[1]))
        chain = aggregate(9, source, target, np.ones(source.size))
        both = [chain.reachable(i) & chain.reversed().reachable(i) for i in range(9)]
        expected = len({tuple(flags.tolist()) for flags in both})
        moved = rng.permutation(9)
        other = aggregate(9, moved[source], moved[target], np.ones(source.size))
        assert chain.classes()[0] == other.classes()[0] == expected
        closed = {frozenset(moved[members].tolist()) for members in chain.closed_classes()}
        assert {frozenset(members.tolist()) for members in other.closed_classes()} == closed


def test_states_that_are_never_left_for_the_first_make_a_class_of_their_own():
    # every state is reached from 0 and can be left, but only 3 leads back
    chain = aggregate(4, [0, 1, 2, 0, 3], [1, 2, 1, 3, 0], np.ones(5))
    assert chain.classes()[0] == 2
    assert [members.tolist() for members in chain.closed_classes()] == [[1, 2]]
    # every state can go back, but 2 is never entered
    chain = aggregate(3, [0, 1, 2], [1, 0, 0], np.ones(3))
    assert [members.tolist() for members in chain.closed_classes()] == [[0, 1]]


def test_closed_classes_can_be_asked_for_outside_of_some_states():
    chain = aggregate(5, [0, 1, 2, 0], [1, 2, 1, 3], np.ones(4))
    outside = np.array([False, False, True, False, False])
    assert [members.tolist() for members in chain.closed_classes(outside=outside)] == [[3], [4]]
    pair = aggregate(2, [0, 1], [1, 0], np.ones(2))
    assert pair.closed_classes(outside=np.array([True, False])) == []


def test_rates_that_cross_a_border_are_added_up():
    chain = aggregate(4, [0, 0, 0, 1, 1, 2], [1, 2, 3, 2, 0, 3], [1.0, 2.0, 4.0, 8.0, 16.0, 32.0], rate_error=0.0)
    here, there = np.array([True, True, False, False]), np.array([False, False, True, True])
    rates, error = chain.crossing(here, there)
    assert rates.high.tolist() == [6.0, 8.0, 0.0, 0.0]
    assert error < 1e-28


def test_a_stretch_of_rows_shares_its_rates():
    matrix = aggregate(30, np.arange(30), (np.arange(30) * 7 + 1) % 30, np.arange(30) + 1.0).matrix()
    rows = stretch(matrix, 4, 9)
    assert (rows.toarray() == matrix.toarray()[4:9]).all()
    assert np.shares_memory(rows.data, matrix.data)
    assert (rows @ np.arange(30.0) == (matrix @ np.arange(30.0))[4:9]).all()
