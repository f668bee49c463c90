"""Published values, each with its source; the recomputed exact value is held far tighter than the printed digits."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from markov import chain as room

# P. J. Courtois, Decomposability, Academic Press 1977, the 8 x 8 matrix; also W. J. Stewart, Introduction to the
# Numerical Solution of Markov Chains, 1994.  Printed: 0.0893 0.0928 0.0405 0.1585 0.1189 0.1204 0.2778 0.1018 (from
# memory).
COURTOIS = """
.85 0 .149 .0009 0 .00005 0 .00005
.1 .65 .249 0 .0009 .00005 0 .00005
.1 .8 .0996 .0003 0 0 .0001 0
0 .0004 0 .7 .2995 0 .0001 0
.0005 0 .0004 .399 .6 .0001 0 0
0 .00005 0 0 .00005 .6 .2499 .15
.00003 0 .00003 .00004 0 .1 .8 .0999
0 .00005 0 0 .00005 .1999 .25 .55
"""
PRINTED = ["0.0893", "0.0928", "0.0405", "0.1585", "0.1189", "0.1204", "0.2778", "0.1018"]
RECOMPUTED = [
    "0.089282652754501870534",
    "0.092757637505133204802",
    "0.040488312016363943722",
    "0.15853319081982592732",
    "0.11893820690417505362",
]


def chain_of(n: int, rates: dict[tuple[int, int], Fraction]) -> room.Generator:
    from markov.rates import split_exact

    pairs = sorted(rates)
    high, low = split_exact([rates[pair] for pair in pairs])
    return room.aggregate(n, [i for i, _ in pairs], [j for _, j in pairs], high, low)


def hot_pair(fail: str, repair: str) -> room.Generator:
    """Two units, both on duty, one crew; state = number failed."""
    a, b = Fraction(fail), Fraction(repair)
    return chain_of(3, {(0, 1): 2 * a, (1, 0): b, (1, 2): a, (2, 1): b})


def near(found: room.Enclosure, digits: str, width: float = 1e-14) -> bool:
    """Whether the interval meets a value known to 20 digits, and is narrow."""
    value = Fraction(digits)
    margin = value / 10**18
    return Fraction(found.lower) - margin <= value <= Fraction(found.upper) + margin and found.width < width


def test_courtois_matrix_has_the_printed_stationary_vector(linear_solver):
    rows = [[Fraction(x) for x in line.split()] for line in COURTOIS.strip().splitlines()]
    rates = {(i, j): rows[i][j] for i in range(8) for j in range(8) if i != j and rows[i][j]}
    found = room.stationary(chain_of(8, rates))
    for state, printed in enumerate(PRINTED):
        assert abs(found.values[state] - float(printed)) <= 0.5001e-4
    for state, value in enumerate(RECOMPUTED):
        assert near(found.entry(state), value), state


@pytest.mark.parametrize("method", ["ladder", "uniformisation"])
def test_ten_events_of_a_pure_birth_chain_in_a_short_time(method):
    # Poisson: e**-t t**10 / 10! with t = 0.001; entries far below 1e-16 must be relatively accurate.
    # Motivation: J. Xue, Q. Ye, exponentials of essentially non-negative matrices, 2008/2013 (from memory).
    chain = room.aggregate(12, range(11), range(1, 12), np.ones(11), rate_error=0.0)
    (states,) = room.transient(chain, 0, [Fraction(1, 1000)], method=method).states
    assert near(states.entry(10), "2.752977567882977821e-37", 1e-14 if method == "ladder" else 1e-12)


def test_stiff_pair_over_ten_years():
    # Root formula of the two-unit parallel system, about 2 l**2 t / m (from memory): l = 1e-6 /h, m = 10 /h, 87600 h.
    found = room.transient(hot_pair("1e-6", "10"), 0, [87600], absorbing=[False, False, True])
    assert near(found.absorbed[0].entry(0), "1.7519974590539170574e-8")


def test_mean_failure_rate_of_a_pair_over_a_year():
    # F(T)/T of the hot pair, l = 1e-4 /h, m = 0.125 /h, T = 8760 h, by the root formula (from memory).
    found = room.transient(hot_pair("1e-4", "0.125"), 0, [8760], absorbing=[False, False, True])
    assert near(found.absorbed[0].entry(0).over(8760), "1.5936036548522977769e-7")


def test_late_hazard_of_a_pair_is_the_smallest_root():
    # ((3 l + m) - sqrt(l**2 + 6 l m + m**2)) / 2: A. Birolini, Reliability Engineering; K. S. Trivedi, Probability and
    # Statistics; B. V. Gnedenko et al. (from memory); l = 1e-3 /h, m = 0.1 /h.
    chain = hot_pair("1e-3", "0.1")
    found = room.transient(chain, 0, [3000], absorbing=[False, False, True])
    alive = found.states[0]
    passing = room.flow(chain, [0, 1], [2])
    hazard = alive.weighted(passing) / alive.weighted(np.array([1.0, 1.0, 0.0]))
    assert near(hazard, "0.000019421137675617624217")


def test_mean_time_to_failure_of_a_pair():
    # (3 l + m) / (2 l**2) for the hot pair from new: R. E. Barlow, F. Proschan, Mathematical Theory of Reliability
    # (from memory); l = 1e-3, m = 0.1 gives 51500 h, hence 1/MTTF = 1.94175e-5.
    found = room.first_passage(hot_pair("1e-3", "0.1"), 0, [2])
    assert found.mean.lower <= 51500 <= found.mean.upper
    assert found.mean.width < 1e-15
