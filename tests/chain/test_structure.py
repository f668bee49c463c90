"""What the structure decides comes out exact; questions without an answer get a reason."""

from __future__ import annotations

import numpy as np
import pytest

from markov import chain as room
from markov.errors import IllPosed, NotReached, UsageError

ONE, ZERO = (1.0, 1.0, 1.0), (0.0, 0.0, 0.0)


def ends(found: room.Enclosure) -> tuple[float, float | None, float | None]:
    return found.value, found.lower, found.upper


@pytest.fixture
def pair() -> room.Generator:
    """Two units with one crew: good, one failed, both failed; state 3 cannot be reached."""
    return room.aggregate(4, [0, 1, 1, 2, 3], [1, 0, 2, 1, 0], [2e-4, 0.1, 1e-4, 0.1, 1.0])


@pytest.mark.parametrize("method", ["ladder", "uniformisation"])
def test_at_time_zero_the_start_stands_as_given(pair, method):
    found = room.transient(pair, 0, [0, 10], [np.ones(4)], absorbing=[False, False, True, False], method=method)
    assert ends(found.states[0].entry(0)) == ONE
    assert ends(found.states[0].entry(1)) == ZERO
    assert ends(found.absorbed[0].entry(0)) == ZERO
    assert ends(found.integrals[0].entry(0)) == ZERO
    assert found.states[1].entry(1).lower > 0.0


@pytest.mark.parametrize("method", ["ladder", "uniformisation"])
def test_what_cannot_be_reached_is_exactly_zero(pair, method):
    (states,) = room.transient(pair, 0, [1e3], method=method).states
    assert ends(states.entry(3)) == ZERO
    assert ends(states.weighted(np.array([0, 0, 0, 1.0]))) == ZERO
    assert ends(states.weighted(np.ones(4))) == ONE
    (absorbed,) = room.transient(pair, 0, [1e3], absorbing=[False, False, False, True], method=method).absorbed
    assert ends(absorbed.entry(0)) == ZERO


def test_a_start_inside_the_stopped_states_is_absorbed_at_once(pair):
    found = room.transient(pair, 2, [0, 5], absorbing=[False, False, True, False])
    for absorbed, states in zip(found.absorbed, found.states, strict=True):
        assert absorbed.entry(0).lower == 1.0
        assert not states.values.any()
    passage = room.first_passage(pair, 2, [2])
    assert ends(passage.probability) == ONE
    assert ends(passage.mean) == ZERO
    assert ends(passage.standard_deviation) == ZERO


def test_survival_where_no_way_leads_out_is_certain():
    chain = room.aggregate(4, [0, 1, 2], [1, 0, 3], np.ones(3))
    found = room.survival(chain, [True, True, True, False], 5.0)
    assert found.values[0] == found.values[1] == 1.0
    assert found.entry(2).upper < 0.01
    assert ends(found.entry(3)) == ZERO
    certain = room.survival(chain, [0, 1], 5.0)
    assert ends(certain.entry(0)) == ONE


def test_stationary_sums_are_exact_where_they_must_be(pair):
    found = room.stationary(pair)
    assert ends(found.weighted(np.ones(4))) == ONE
    assert ends(found.entry(3)) == ZERO
    lonely = room.stationary(room.aggregate(2, [0], [1], [1.0]))
    assert ends(lonely.entry(1)) == ONE


def test_several_ends_have_no_common_long_run_but_one_for_each_start():
    chain = room.aggregate(4, [0, 0, 2, 3], [1, 2, 3, 2], [1.0, 3.0, 1.0, 1.0])
    with pytest.raises(IllPosed, match="2 closed classes"):
        room.stationary(chain)
    with pytest.raises(IllPosed, match="not one closed"):
        room.stationary(chain, [0, 1])
    mixed = room.long_run(chain, 0)
    assert mixed.entry(1).lower <= 0.25 <= mixed.entry(1).upper
    assert mixed.entry(2).lower <= 0.375 <= mixed.entry(2).upper
    assert ends(mixed.entry(0)) == ZERO
    assert ends(room.long_run(chain, 1).entry(1)) == ONE


def test_a_passage_that_may_never_happen_has_a_probability_but_no_mean():
    chain = room.aggregate(3, [0, 0], [1, 2], [1.0, 3.0])
    found = room.first_passage(chain, 0, [1])
    assert found.probability.lower <= 0.25 <= found.probability.upper
    assert found.mean is None
    never = room.first_passage(chain, 2, [1])
    assert ends(never.probability) == ZERO
    assert never.mean is None
    with pytest.raises(IllPosed, match="no absorbing state can be reached"):
        room.absorption(chain, 0, [False, True, False])
    assert ends(room.absorption(chain, 0, [False, True, True]).entry(0)) == ONE


def test_flow_adds_the_rates_across_a_border(pair):
    found = room.flow(pair, [0, 1], [2, 3])
    assert found.values.tolist() == [0.0, 1e-4, 0.0, 0.0]
    with pytest.raises(UsageError, match="overlap"):
        room.flow(pair, [0, 1], [1])


@pytest.mark.parametrize(
    "call",
    [
        lambda chain: room.transient(chain, 0, [-1.0]),
        lambda chain: room.transient(chain, 0, [float("inf")]),
        lambda chain: room.transient(chain, 9, [1.0]),
        lambda chain: room.transient(chain, np.zeros(4), [1.0]),
        lambda chain: room.transient(chain, np.ones(3), [1.0]),
        lambda chain: room.transient(chain, 0, [1.0], [np.array([-1.0, 0, 0, 0])]),
        lambda chain: room.transient(chain, 0, [1.0], [np.ones(3)]),
        lambda chain: room.transient(chain, 0, [1.0], absorbing=[True]),
        lambda chain: room.survival(chain, np.ones(3, dtype=bool), 1.0),
    ],
)
def test_arguments_that_do_not_fit_are_refused(pair, call):
    with pytest.raises(UsageError):
        call(pair)


def test_too_many_jumps_for_uniformisation_are_declined(pair):
    with pytest.raises(NotReached, match="too dear or too wide"):
        room.transient(pair, 0, [1e12], method="uniformisation")


def test_an_estimate_is_marked_as_one(pair):
    found = room.transient(pair, 0, [1e6], [np.ones(4)], method="squaring")
    assert "estimate" in found.method
    for number in (found.states[0].entry(1), found.integrals[0].entry(0), found.states[0].weighted([0, 0, 1, 0])):
        assert number.lower is None
        assert number.upper is None


def test_products_of_rates_that_underflow_are_refused():
    chain = room.aggregate(
        4, [0, 1, 2, 3, 1, 2, 3], [1, 2, 3, 0, 0, 1, 2], [1e-140, 1e-140, 1e-140, 1.0, 1.0, 1.0, 1.0]
    )
    with pytest.raises(NotReached, match="digits are lost"):
        room.first_passage(chain, 0, [3])
    wide = room.aggregate(2, [0, 1], [1, 0], [1e-140, 1e140])
    with pytest.raises(NotReached, match="orders of magnitude"):
        room.transient(wide, 0, [1.0])


def test_a_chain_without_any_exit_stays_where_it_is():
    still = room.aggregate(2, [1], [0], [1.0])
    found = room.transient(still, 0, [10**6], [np.ones(2)])
    assert ends(found.states[0].entry(0)) == ONE
    assert found.integrals[0].entry(0).lower <= 10**6 <= found.integrals[0].entry(0).upper
    assert ends(room.long_run(still, 0).entry(0)) == ONE


def test_a_start_spread_over_stopped_states_counts_them_at_once(pair):
    start = np.array([0.5, 0.0, 0.25, 0.25])
    found = room.transient(pair, start, [0, 50], absorbing=[-1, -1, 0, 1])
    assert [found.absorbed[0].entry(number).value for number in (0, 1)] == [0.25, 0.25]
    assert found.absorbed[1].entry(0).lower > 0.25
    assert found.absorbed[1].entry(1).lower <= 0.25 <= found.absorbed[1].entry(1).upper
    passage = room.first_passage(pair, start, [2, 3])
    alone = room.first_passage(pair, 0, [2, 3])
    assert passage.mean.lower <= alone.mean.upper / 2
    assert passage.mean.upper >= alone.mean.lower / 2
