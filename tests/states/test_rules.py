"""Single rules, each on the smallest plant that shows it; the oracle tests their combinations."""

import pytest

import markov
from markov.spec import read_text
from markov.states import GeneratedSpace, generate


def space_of(text: str) -> GeneratedSpace:
    return generate(read_text(text, "spec"))


def labels(space: GeneratedSpace) -> list[str]:
    return [space.label(state) for state in range(space.size)]


def arrows(space: GeneratedSpace) -> dict[tuple[str, str], list[str]]:
    """Return (from, to) -> formulas."""
    found: dict[tuple[str, str], list[str]] = {}
    columns = space.arrows
    for source, target, kind, multiple in zip(
        columns.source, columns.target, columns.kind, columns.multiple, strict=True
    ):
        rate = space.kinds.rates.rates[space.kinds.kinds[kind].rate]
        found.setdefault((space.label(source), space.label(target)), []).append(rate.formula(int(multiple)))
    return found


ONE_KIND = """
units: {{pump: {{failure_rate: 1e-3 /h, repair_time: 10 h, start_failure: 2 %}}}}
groups: {{pumps: {{members: [{{unit: pump, count: {count}}}], {rules}}}}}
crews: {{crew: {{size: 1, repairs: [pump]}}}}
system: pumps
"""


def test_identical_units_are_counted_never_enumerated() -> None:
    space = space_of(ONE_KIND.format(count=40, rules="redundancy: active, required: 20"))
    assert space.size == 41


def test_the_last_unit_draws_no_coverage() -> None:
    space = space_of(ONE_KIND.format(count=2, rules="redundancy: cold_standby, coverage: 90 %"))
    assert arrows(space)["pump: 1 on duty + 1 failed", "pump: 2 failed"] == ["λ(pump)"]


def test_a_list_of_coverages_counts_the_faults_before_the_event() -> None:
    space = space_of(ONE_KIND.format(count=4, rules="redundancy: active, coverage: [99 %, 90 %]"))
    found = arrows(space)
    assert found["all good", "pump: 1 failed"] == ["4·λ(pump)·c1(pumps)"]
    assert found["pump: 1 failed", "pump: 2 failed"] == ["3·λ(pump)·c2(pumps)"]
    assert found["pump: 2 failed", "pump: 3 failed"] == ["2·λ(pump)·c2(pumps)"]
    assert found["pump: 3 failed", "pump: 4 failed"] == ["λ(pump)"]


def test_certain_and_impossible_coverage_leave_no_unreachable_state() -> None:
    rules = "redundancy: cold_standby, coverage: {coverage}"
    certain = space_of(ONE_KIND.format(count=2, rules=rules.format(coverage=1)))
    never = space_of(ONE_KIND.format(count=2, rules=rules.format(coverage=0)))
    assert labels(certain) == ["pump: 1 on duty + 1 waiting", "pump: 1 on duty + 1 failed", "pump: 2 failed"]
    assert "pump: 1 waiting + 1 failed, uncovered" in labels(never)
    assert "pump: 2 failed" not in labels(never)  # the standby cannot fail while it waits and is never started


def test_a_second_start_is_tried_after_a_failed_one() -> None:
    space = space_of(ONE_KIND.format(count=3, rules="redundancy: cold_standby"))
    found = arrows(space)
    origin = "pump: 1 on duty + 2 waiting"
    assert found[origin, "pump: 1 on duty + 1 waiting + 1 failed"] == ["λ(pump)·(1−q(pump))"]
    assert found[origin, "pump: 1 on duty + 2 failed"] == ["λ(pump)·q(pump)·(1−q(pump))"]
    assert found[origin, "pump: 3 failed"] == ["λ(pump)·q(pump)²"]


def test_a_failed_return_to_the_preferred_member_is_counted_though_the_state_stays() -> None:
    text = """
units:
  mains: {failure_rate: 1e-3 /h, repair_time: 5 h, start_failure: 20 %}
  diesel: {failure_rate: 1e-2 /h, repair_time: 20 h}
groups:
  supply: {members: [mains, diesel], redundancy: cold_standby, return_to_preferred: true}
system: supply
"""
    solution = markov.solve(read_text(text, "spec"))
    space = space_of(text)
    still = ~space.arrows.moving
    assert still.sum() == 1
    assert space.kinds.kinds[int(space.arrows.kind[still][0])].cause == "repair of mains ends: mains fails to start"
    # Every fourth successful return has one failed attempt before it on average: starts of mains exceed its repairs
    # by none (each repair that finds diesel running makes one attempt), which a lost self-loop would break.
    targets = [
        f"{{id: {number}, measure: {measure}, of: mains, at_most: 1}}"
        for number, measure in enumerate(("repairs_per_year", "starts_per_year"))
    ]
    solution = markov.solve(read_text(f"{text}targets: [{', '.join(targets)}]\n", "spec"))
    repairs, starts = (target.result.value for target in solution.targets)
    both_failed_then_mains = repairs - starts
    assert 0 < both_failed_then_mains < 0.2 * repairs


def test_equals_in_two_groups_never_interrupt_each_other() -> None:
    text = """
units: {pump: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups:
  left: {members: [{unit: pump, count: 1}]}
  right: {members: [{unit: pump, count: 1}]}
crews: {crew: {size: 1, repairs: [pump]}}
system: {any_of: [left, right]}
"""
    space = generate(read_text(text, "spec"), merge=False)
    assert sorted(labels(space)) == [
        "all good",
        "left[pump: in repair]",
        "left[pump: in repair]; right[pump: queued]",
        "left[pump: queued]; right[pump: in repair]",
        "right[pump: in repair]",
    ]


def test_a_free_crew_draws_among_equals() -> None:
    text = """
units: {pump: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups:
  left: {members: [{unit: pump, count: 2}], required: 2}
  right: {members: [{unit: pump, count: 1}]}
crews: {crew: {size: 1, repairs: [pump]}}
system: {all_of: [left, right]}
initial: {left.pump: {failed: 2}, right.pump: failed}
"""
    space = space_of(text)
    start = {space.label(state): chance for state, chance in space.start}
    assert {label: float(chance) for label, chance in start.items()} == pytest.approx(
        {
            "left[pump: 1 queued + 1 in repair]; right[pump: queued]": 2 / 3,
            "left[pump: 2 queued]; right[pump: in repair]": 1 / 3,
        }
    )
    assert sum(start.values()) == 1


def test_a_unit_outside_the_system_loads_the_crew() -> None:
    text = """
units:
  pump: {failure_rate: 1e-3 /h, repair_time: 10 h}
  lift: {failure_rate: 1e-2 /h, repair_time: 30 h}
crews: {crew: {size: 1, repairs: [lift, pump]}}
system: pump
"""
    loaded = markov.solve(read_text(text, "spec"))
    alone = markov.solve(read_text(text.replace("[lift, pump]", "[pump]"), "spec"))
    assert loaded.states == 4
    assert alone.states == 2
    assert loaded.result("mean_down_time").value > alone.result("mean_down_time").value
    assert loaded.result("mean_units_failed").value < 0.2  # units of the system only


def test_what_couples_nothing_stays_out_of_the_chain() -> None:
    text = """
units:
  pump: {failure_rate: 1e-3 /h, repair_time: 10 h}
  lift: {failure_rate: 1e-2 /h, repair_time: 30 h}
crews: {crew: {size: 2, repairs: [lift, pump]}}
system: pump
"""
    assert markov.solve(read_text(text, "spec")).states == 2  # two crews: nobody ever waits


def test_an_active_group_sums_its_units_below_required_and_nothing_in_an_outage() -> None:
    space = space_of(ONE_KIND.format(count=3, rules="redundancy: active, required: 2, coverage: 90 %"))
    share = {space.label(state): float(space.capacity(None)[state]) for state in range(space.size)}
    assert share["all good"] == 1
    assert share["pump: 2 failed"] == 0.5
    assert share["pump: 1 failed, uncovered"] == 0


def test_stages_keep_the_mean_and_lower_the_spread() -> None:
    plain = ONE_KIND.format(count=1, rules="required: 1").replace(", start_failure: 2 %", "")
    staged = plain.replace("repair_time: 10 h", "repair_time: 10 h, repair_stages: 4")
    first, second = (markov.solve(read_text(text, "spec")) for text in (plain, staged))
    assert second.states == 5
    assert second.result("mean_down_time").value == pytest.approx(first.result("mean_down_time").value, rel=1e-14)


def test_logistics_hold_no_crew() -> None:
    text = ONE_KIND.format(count=2, rules="redundancy: active").replace("10 h,", "10 h, logistic_delay: 50 h,")
    solution = markov.solve(read_text(text, "spec"))
    failed = solution.result("mean_units_failed").value
    repairs = solution.result("repairs_per_year").value / 8760
    busy = solution.result("crew_utilisation").value
    waiting = solution.result("waiting_for_crew").value
    # Little's law: failed = repairs x (delay + repair) + waiting.
    assert busy == pytest.approx(repairs * 10, rel=1e-12)
    assert failed == pytest.approx(repairs * 60 + waiting, rel=1e-12)


def test_a_unit_that_only_a_target_names_is_in_the_chain() -> None:
    text = """
units: {pump: {failure_rate: 1e-3 /h, repair_time: 10 h}, lift: {failure_rate: 1e-2 /h, repair_time: 30 h}}
system: pump
targets: [{id: T, measure: steady_state_unavailability, of: lift, at_most: 0.1}]
"""
    (target,) = markov.solve(read_text(text, "spec")).targets
    assert target.result.value == pytest.approx(0.3 / 1.3, rel=1e-14)
    assert target.verdict == "missed"
