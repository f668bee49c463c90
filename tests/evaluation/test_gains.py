"""What redundancy gains, against arrangements solved by themselves."""

import pytest

import markov
from markov.spec import read_text

TWO_GROUPS = """
units:
  pump: {{failure_rate: 1e-3 /h, repair_time: 20 h}}
  fan: {{failure_rate: 2e-3 /h, repair_time: 10 h}}
groups:
  pumps: {{members: [{{unit: pump, count: {pumps}}}], redundancy: active}}
  fans: {{members: [{{unit: fan, count: {fans}}}], redundancy: active}}
crews: {{{crews}}}
system: {{{structure}: [pumps, fans]}}
"""
SHARED = "crew: {size: 1, repairs: [pump, fan]}"
OWN = "one: {size: 1, repairs: [pump]}, two: {size: 1, repairs: [fan]}"


def solved(pumps: int = 2, fans: int = 2, crews: str = SHARED, structure: str = "all_of") -> markov.Solution:
    return markov.solve(
        read_text(TWO_GROUPS.format(pumps=pumps, fans=fans, crews=crews, structure=structure), "spec"), at=["100 h"]
    )


def test_the_plain_arrangement_is_each_group_cut_to_what_it_needs() -> None:
    redundant, plain = solved(), solved(1, 1)
    worse = plain.result("steady_state_unavailability").value / redundant.result("steady_state_unavailability").value
    assert redundant.result("gain_over_single_unit").value == pytest.approx(worse, rel=1e-13)
    later = plain.result("unreliability", at_hours=100).value / redundant.result("unreliability", at_hours=100).value
    assert redundant.result("gain_over_single_unit", at_hours=100).value == pytest.approx(later, rel=1e-13)


def test_groups_with_crews_of_their_own_are_independent_blocks() -> None:
    assert solved(crews=OWN).result("gain_over_independent_blocks").value == pytest.approx(1, rel=1e-12)


def test_a_shared_crew_makes_the_independent_answer_too_good() -> None:
    # Two single units in parallel, one crew: while one is repaired, the other must wait.
    shared = solved(1, 1, SHARED, "any_of").result("gain_over_independent_blocks").value
    own = solved(1, 1, OWN, "any_of").result("gain_over_independent_blocks").value
    assert own == pytest.approx(1, rel=1e-12)
    assert shared < 0.8


def test_a_plain_plant_gains_nothing() -> None:
    assert solved(1, 1).result("gain_over_single_unit").value == pytest.approx(1, rel=1e-13)


def test_a_system_that_cannot_fail_has_nothing_to_compare() -> None:
    solution = markov.solve(read_text("units: {a: {failure_rate: 0 /h, repair_time: 1 h}}\nsystem: a\n", "spec"))
    result = solution.result("gain_over_single_unit")
    assert result.value is None
    assert "no down state" in result.reason
