"""Groups as members of groups: what a train does must follow from what its items do."""

import mpmath
import pytest

import markov
from markov.spec import read_text
from markov.states import generate

MEASURES = (
    "steady_state_unavailability",
    "failures_per_year",
    "mean_time_to_first_failure",
    "unreliability",
    "repairs_per_year",
    "starts_per_year",
    "mean_units_failed",
    "mean_capacity",
    "time_without_redundancy",
    "crew_utilisation",
)

UNITS = """
units:
  mains: {failure_rate: 2e-3 /h, repair_time: 5 h, start_failure: 1 %}
  diesel: {failure_rate: 9e-3 /h, repair_time: 21 h, start_failure: 4 %}
  pump: {failure_rate: 4e-3 /h, repair_time: 11 h}
crews: {crew: {size: 1, repairs: [mains, diesel, pump]}}
mission: {time: 200 h}
"""


def values(groups: str, system: str, measures: tuple[str, ...] = MEASURES) -> list[float]:
    solution = markov.solve(read_text(f"{UNITS}\ngroups:\n{groups}\nsystem: {system}\n", "spec"))
    return [solution.result(measure).value for measure in measures]


STANDBY = [
    "redundancy: cold_standby, coverage: 90 %",
    "redundancy: hot_standby, coverage: 90 %, return_to_preferred: true",
    "redundancy: warm_standby, dormancy_factor: 0.3, switchover: {coverage: 80 %, time: 1 h, stages: 2}",
    "redundancy: cold_standby, switchover: {coverage: 90 %, uncovered: {outcome: manual_takeover, time: 2 h}}",
    "redundancy: warm_standby, dormancy_factor: 0.2, after_repair: start_again, switchover: {time: 1 h}",
    "redundancy: hot_standby, switchover: {coverage: 90 %, uncovered: {outcome: restart, time: 2 h}}",
]


@pytest.mark.parametrize("rules", STANDBY)
def test_a_train_of_one_item_is_that_item(rules: str) -> None:
    plain = values(f"  supply: {{members: [mains, diesel], {rules}}}", "supply")
    nested = values(
        f"  supply: {{members: [grid, set], {rules}}}\n"
        "  grid: {members: [mains], required: 1}\n"
        "  set: {members: [diesel], required: 1}",
        "supply",
    )
    assert nested == pytest.approx(plain, rel=1e-12)


def test_trains_within_trains_of_one_item_are_that_item() -> None:
    plain = values("  supply: {members: [mains, diesel], redundancy: cold_standby, coverage: 90 %}", "supply")
    nested = values(
        "  supply: {members: [mains, house], redundancy: cold_standby, coverage: 90 %}\n"
        "  house: {members: [set]}\n"
        "  set: {members: [diesel]}",
        "supply",
    )
    assert nested == pytest.approx(plain, rel=1e-12)


def test_an_active_group_of_trains_is_the_parallel_structure() -> None:
    rates = ("steady_state_unavailability", "failures_per_year", "mean_time_to_first_failure", "unreliability")
    structure = values(
        "  left: {members: [mains, pump], required: 2}", "{any_of: [left, diesel]}", (*rates, "crew_utilisation")
    )
    nested = values(
        "  plant: {members: [left, diesel], redundancy: active}\n  left: {members: [mains, pump], required: 2}",
        "plant",
        (*rates, "crew_utilisation"),
    )
    assert nested == pytest.approx(structure, rel=1e-12)


def test_dormancy_multiplies_down_the_nesting() -> None:
    # The reserve waits at 0.5; inside it the second pump waits at 0.1 of that.  Nothing is repaired, so the mean number
    # of failed items at a time follows from three independent rates as long as the item on duty cannot fail.
    text = """
units:
  main: {failure_rate: 0 /h}
  pump: {failure_rate: 1e-3 /h}
groups:
  plant: {members: [main, reserve], redundancy: warm_standby, dormancy_factor: 0.5}
  reserve: {members: [{unit: pump, count: 2}], redundancy: warm_standby, dormancy_factor: 0.1}
system: plant
targets: [{id: T, measure: mean_units_failed, at: 1 h, at_most: 1}]
"""
    found = markov.solve(read_text(text, "spec"), at=["1 h"]).result("mean_units_failed", at_hours=1)
    # Rates out of none failed: 0.5e-3 (designated) + 0.05e-3 (second); after either, the other is designated: 0.5e-3.
    first, second = mpmath.mpf("0.00055"), mpmath.mpf("0.0005")
    none = mpmath.exp(-first)
    one = first * (mpmath.exp(-second) - mpmath.exp(-first)) / (first - second)
    assert found.value == pytest.approx(float(one + 2 * (1 - none - one)), rel=1e-9)


def test_starting_a_train_attempts_each_item_that_it_puts_on_duty() -> None:
    text = """
units:
  main: {failure_rate: 1e-3 /h}
  pump: {failure_rate: 1e-3 /h, start_failure: 10 %}
groups:
  plant: {members: [main, reserve], redundancy: cold_standby}
  reserve: {members: [{unit: pump, count: 3}], required: 2, redundancy: cold_standby}
system: plant
"""
    space = generate(read_text(text, "spec"))
    kinds = space.kinds
    chances = {}
    for kind in kinds.kinds:
        if kind.cause.startswith("main fails on duty"):
            chances[len(kind.starts), "is lost" in kind.cause] = float(kinds.rates.rates[kind.rate].exact) / 1e-3
    assert sum(float(kinds.rates.rates[kind.rate].exact) for kind in kinds.kinds if kind.cause.startswith("main")) == (
        pytest.approx(1e-3, rel=1e-12)
    )
    # Two starts succeed at once, or one of the first two or three fails, or two fail.
    assert chances[2, False] == pytest.approx(0.81)


def test_a_train_that_loses_its_criterion_lets_its_good_items_wait() -> None:
    text = """
units:
  pump: {failure_rate: 1e-3 /h}
  spare: {failure_rate: 1e-4 /h}
groups:
  plant: {members: [pair, spare], redundancy: cold_standby}
  pair: {members: [{unit: pump, count: 2}], required: 2}
system: plant
"""
    space = generate(read_text(text, "spec"))
    # After the first pump fault the pair is lost, its other pump waits cold, the spare runs, and only it can fail.
    assert [space.label(state) for state in range(space.size)] == [
        "spare: waiting, pair: on duty",
        "pump: 1 failed, spare: on duty",
        "pump: 1 failed, spare: failed",
    ]


def test_states_of_one_kind_in_several_groups_have_names_of_their_own() -> None:
    text = """
units: {a: {failure_rate: 1e-3 /h, repair_time: 1 h}}
groups:
  out: {members: [in, {unit: a, count: 2}], redundancy: active}
  in: {members: [{unit: a, count: 2}], redundancy: active}
system: out
"""
    space = generate(read_text(text, "spec"))
    labels = [space.label(state) for state in range(space.size)]
    assert len(set(labels)) == space.size
    assert "in.a: 1 failed, in: on duty" in labels
    assert "out.a: 1 failed, in: on duty" in labels
