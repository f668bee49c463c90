"""The order of states around a hub."""

from __future__ import annotations

import numpy as np
import pytest

from markov.chain import aggregate, arrangement
from markov.chain.arrangement import arrange


def ring(n: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A ring that is walked in both directions, each rate another one."""
    source = np.repeat(np.arange(n), 2)
    target = np.where(np.arange(2 * n) % 2, (source + 1) % n, (source - 1) % n)
    return source, target, np.arange(2 * n) + 1.0


@pytest.mark.parametrize("hub", [0, 3])
@pytest.mark.parametrize("side", ["row", "column"])
def test_rates_follow_their_states(hub, side):
    chain = aggregate(9, *ring(9))
    arranged = arrange(chain, hub)
    order = np.concatenate(([hub], arranged.others))
    assert sorted(order.tolist()) == list(range(9))
    dense = chain.matrix().toarray()
    expected = (dense.T if side == "row" else dense)[np.ix_(order, order)][1:]
    assert (arranged.rates(side, chain.high).toarray() == expected).all()
    other = arranged.rates(side, np.sqrt(chain.high))
    assert (other.data == np.sqrt(arranged.rates(side, chain.high).data)).all()


def test_levels_are_distances_from_the_hub():
    arranged = arrange(aggregate(9, *ring(9)), 3)
    assert arranged.others.tolist() == [2, 4, 1, 5, 0, 6, 7, 8]
    assert arranged.ends.tolist() == [2, 4, 6, 8]


def test_states_numbered_outward_are_not_moved(monkeypatch):
    # 0 - 1 - 3 and 0 - 2 - 4
    chain = aggregate(5, [0, 1, 0, 2, 1, 3, 2, 4], [1, 0, 2, 0, 3, 1, 4, 2], np.ones(8))
    arranged = arrange(chain, 0)
    assert arranged.order is None
    assert arranged.ends.tolist() == [2, 4]
    assert np.shares_memory(arranged.rates("column", chain.high).data, chain.high)
    # 0 - 4 - 1 and 0 - 2 - 3: one state of four comes a level late
    late = aggregate(5, [0, 4, 4, 1, 0, 2, 2, 3], [4, 0, 1, 4, 2, 0, 3, 2], np.ones(8))
    assert arrange(late, 0).order is None
    assert arrange(late, 0).ends.tolist() == [4]
    monkeypatch.setattr(arrangement, "_LATE", 0.0)
    assert arrange(late, 0).others.tolist() == [2, 4, 1, 3]


def test_states_that_the_hub_never_enters_come_last(monkeypatch):
    monkeypatch.setattr(arrangement, "_LATE", 0.0)
    chain = aggregate(4, [0, 1, 3, 2], [2, 0, 1, 0], np.ones(4))
    arranged = arrange(chain, 0)
    assert arranged.others.tolist() == [2, 1, 3]
    assert arranged.ends.tolist() == [1, 3]


def test_given_levels_are_followed():
    chain = aggregate(4, [0, 1, 2, 3], [1, 2, 3, 0], np.ones(4))
    assert arrange(chain, 1, np.array([3, 0, 1, 2])).others.tolist() == [2, 3, 0]
