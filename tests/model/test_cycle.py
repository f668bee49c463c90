"""What recurs at fixed instants has a joint period, and it is not too long."""

from fractions import Fraction
from math import lcm

from hypothesis import given
from hypothesis import strategies as st

from markov.model.cycle import intervals_in_cycle, joint_period

PERIODS = st.lists(st.fractions(Fraction(1, 30), 50, max_denominator=30), min_size=1, max_size=4)


def test_nothing_has_no_period():
    assert joint_period([]) is None
    assert intervals_in_cycle([]) == 0


def test_months_and_years():
    year, months = Fraction(8760), Fraction(8760, 12)
    assert joint_period([year, 5 * months]) == 5 * year
    assert intervals_in_cycle([year, 5 * months]) == 12


@given(PERIODS)
def test_joint_period_is_the_least_one_that_holds_each_wholly(periods):
    joint = joint_period(periods)
    counts = [joint / period for period in periods]
    assert all(count.denominator == 1 for count in counts)
    # No whole part of it holds each wholly, too: the counts have no common divisor.
    assert not any(all(count % divisor == 0 for count in counts) for divisor in range(2, 200))


@given(st.lists(st.integers(1, 60), min_size=1, max_size=5))
def test_whole_hours_are_the_least_common_multiple(hours):
    assert joint_period([Fraction(each) for each in hours]) == lcm(*hours)
