"""What redundancy gains, against arrangements solved by themselves."""

import numpy as np
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
    # By hand: with crews of their own (λ/(λ + μ))², with one crew, the pump first: a chain of four states.
    a, b, m, n = 1e-3, 2e-3, 0.05, 0.1  # pump, fan: failure and repair
    both = _both_down(a, b, m, n)
    assert shared == pytest.approx(a / (a + m) * b / (b + n) / both, rel=1e-12)


def _both_down(a: float, b: float, m: float, n: float) -> float:
    """Long-run chance that both are down where the pump is repaired first: states none, pump, fan, both."""
    generator = np.array([[-a - b, a, b, 0], [m, -m - b, 0, b], [n, 0, -n - a, a], [0, 0, m, -m]])
    return float(np.linalg.solve(np.vstack([generator.T[:3], np.ones(4)]), [0, 0, 0, 1])[3])


def test_a_third_group_does_not_load_the_crews_of_independent_blocks() -> None:
    text = """
units: {p: {failure_rate: 1 per 50 h, repair_time: 12 h}}
groups: {a: {members: [p]}, b: {members: [p]}}
crews: {c: {size: 1, repairs: [p]}}
system: {any_of: [a, b]}
"""
    solution = markov.solve(read_text(text, "spec"))
    alone = (12 / 62) ** 2
    found = alone / solution.result("steady_state_unavailability").value
    assert solution.result("gain_over_independent_blocks").value == pytest.approx(found, rel=1e-13)
    assert found == pytest.approx(0.518730, abs=1e-6)


def test_a_plain_plant_gains_nothing() -> None:
    assert solved(1, 1).result("gain_over_single_unit").value == pytest.approx(1, rel=1e-13)


def test_a_system_that_cannot_fail_has_nothing_to_compare() -> None:
    solution = markov.solve(read_text("units: {a: {failure_rate: 0 /h, repair_time: 1 h}}\nsystem: a\n", "spec"))
    result = solution.result("gain_over_single_unit")
    assert result.value is None
    assert "no down state" in result.reason
