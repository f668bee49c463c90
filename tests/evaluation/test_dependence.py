"""What ties a plant together, against plants solved by hand and against blocks that are solved apart."""

import math

import numpy as np
import pytest

import markov
from markov.evaluation import price
from markov.evaluation.dependence import DEPENDENCES, changed, dependences_of, without_all
from markov.evaluation.gains import independent_blocks
from markov.evaluation.questions import Question
from markov.evaluation.solver import Solver
from markov.model import Model
from markov.results import Effect, Redundancy
from markov.spec import read_text
from tests.studies.random_specs import random_spec

RATE, REPAIR = 2e-3, 0.05
RATIO = RATE / REPAIR

PAIR = """
units: {{u: {{failure_rate: 2e-3 /h, repair_time: 20 h {unit}}}}}
groups: {{g: {{members: [{{unit: u, count: 2}}], redundancy: active {group}}}}}
{top}
system: g
mission: {{time: 100 h}}
"""


def pair(unit: str = "", group: str = "", top: str = "") -> markov.Solution:
    return markov.solve(read_text(PAIR.format(unit=unit, group=group, top=top), "spec"))


def redundancy(solution: markov.Solution) -> Redundancy:
    assert solution.redundancy is not None
    return solution.redundancy


def only_effect(solution: markov.Solution) -> Effect:
    (effect,) = redundancy(solution).effects
    return effect


def long_run(generator: list[list[float]], down: list[int]) -> float:
    """Return the long-run chance of some states of a chain given by its rates off the diagonal."""
    rates = np.array(generator)
    np.fill_diagonal(rates, -rates.sum(axis=1))
    count = len(rates)
    equations = np.vstack([rates.T[: count - 1], np.ones(count)])
    return float(np.linalg.solve(equations, [0.0] * (count - 1) + [1.0])[down].sum())


BOTH_APART = (RATIO / (1 + RATIO)) ** 2


def test_one_crew_for_two_makes_the_factor_of_the_textbook() -> None:
    effect = only_effect(pair(top="crews: {c: {size: 1, repairs: [u]}}"))
    assert (effect.dependence, effect.where) == ("too_few_crews", ("c",))
    both_with_one_crew = 2 * RATIO**2 / (1 + 2 * RATIO + 2 * RATIO**2)
    assert effect.factor.long_run.value == pytest.approx(both_with_one_crew / BOTH_APART, rel=1e-13)
    assert effect.left.long_run.value == pytest.approx(1, rel=1e-13)


def test_imperfect_coverage_makes_the_factor_of_a_chain_by_hand() -> None:
    solution = pair(group=", coverage: 90 %")
    effect = only_effect(solution)
    # Both good; one failed; one failed and uncovered until its repair; both failed.  After an uncovered fault the good
    # unit goes on failing, and its loss leaves both failed; the first repair from there restores the group.
    f, r, c = RATE, REPAIR, 0.9
    rates = [
        [0, 2 * f * c, 2 * f * (1 - c), 0],
        [r, 0, 0, f],
        [r, 0, 0, f],
        [0, 2 * r, 0, 0],
    ]
    assert effect.dependence == "imperfect_coverage"
    assert effect.factor.long_run.value == pytest.approx(long_run(rates, [2, 3]) / BOTH_APART, rel=1e-12)
    assert redundancy(solution).long_run_cause == "imperfect_coverage"
    assert redundancy(solution).over_perfect_blocks.long_run.value == pytest.approx(
        BOTH_APART / long_run(rates, [2, 3]), rel=1e-12
    )


def test_a_common_cause_makes_the_factor_of_a_chain_by_hand() -> None:
    effect = only_effect(pair(top="common_causes: {flood: {members: u, beta: 10 %}}"))
    alone, both = 0.9 * RATE, 0.1 * RATE
    rates = [[0, 2 * alone, both], [REPAIR, 0, alone + both], [0, 2 * REPAIR, 0]]
    assert (effect.dependence, effect.where) == ("common_causes", ("flood",))
    assert effect.factor.long_run.value == pytest.approx(long_run(rates, [2]) / BOTH_APART, rel=1e-12)


def test_load_sharing_is_judged_at_the_mission_time_where_nothing_is_repaired() -> None:
    text = """
units: {u: {failure_rate: 2e-3 /h}}
groups: {g: {members: [{unit: u, count: 2}], redundancy: active, load_sharing: {2: 1, 1: 2}}}
system: g
mission: {time: 100 h}
"""
    solution = markov.solve(read_text(text, "spec"))
    effect = only_effect(solution)
    passed = 2 * RATE * 100  # two stages of rate 2 f each, against two units of rate f side by side
    expected = (1 - math.exp(-passed) * (1 + passed)) / (1 - math.exp(-RATE * 100)) ** 2
    assert effect.factor.mission is not None
    assert effect.factor.mission.value == pytest.approx(expected, rel=1e-12)
    assert redundancy(solution).mission_cause == "load_sharing"
    assert effect.factor.long_run.value == 1
    assert redundancy(solution).long_run_cause is None


def test_hidden_faults_that_nothing_finds_end_in_a_dead_plant() -> None:
    solution = pair(unit=", detected: 40 %")
    effect = only_effect(solution)
    assert effect.dependence == "hidden_faults"
    assert effect.factor.long_run.value == pytest.approx(1 / BOTH_APART, rel=1e-12)


def spared(stock: int) -> Effect:
    text = f"""
units: {{u: {{failure_rate: 2e-3 /h}}}}
spares: {{s: {{for: u, stock: {stock}, lead_time: 300 h, swap_time: 10 h}}}}
system: u
"""
    return only_effect(markov.solve(read_text(text, "spec")))


def test_spares_always_at_hand_are_the_limit_of_a_growing_stock() -> None:
    few, many = spared(1), spared(12)
    assert few.dependence == "waiting_for_spares"
    assert few.factor.long_run.value > 1.1
    assert 1 <= many.factor.long_run.value < 1 + 1e-9


def test_an_exchange_without_a_time_takes_a_second_once_spares_are_at_hand() -> None:
    text = """
units: {u: {failure_rate: 2e-3 /h}}
spares: {s: {for: u, stock: 1, lead_time: 300 h}}
system: u
"""
    solution = markov.solve(read_text(text, "spec"))
    effect = only_effect(solution)
    second = 2e-3 / 3600
    down = solution.result("steady_state_unavailability").value
    assert effect.factor.long_run.value == pytest.approx(down / (second / (1 + second)), rel=1e-12)
    assert redundancy(solution).long_run_cause == "waiting_for_spares"


#: A matter of the language -> the dependence that it brings.
BRINGS = {
    "coverage": "imperfect_coverage",
    "coverage_list": "imperfect_coverage",
    "start_failure": "start_failures",
    "takeover_time": "switchover_time",
    "switch": "switch_faults",
    "latent_switch": "hidden_faults",
    "multiplicity": "shared_crews",
    "first_come": "shared_crews",
    "greek_letters": "common_causes",
    "cause_across_groups": "common_causes",
    "hidden_faults": "hidden_faults",
    "spurious_mode": "needless_action",
    "test_coverage": "test_coverage",
    "test_that_lasts": "test_duration",
    "left_out": "left_out_after_tests",
    "test_causes_failure": "harm_by_tests",
    "spares": "waiting_for_spares",
    "spares_repaired": "waiting_for_spares",
    "repair_at_visits": "deferred_repair",
    "repair_when_failed": "deferred_repair",
    "phase_without_repair": "phases_without_repair",
    "offline_repair": "repair_out_of_service",
    "load_sharing": "load_sharing",
    "while_down_stop": "while_down",
}


def test_every_dependence_but_one_is_brought_by_a_matter_below() -> None:
    assert {*BRINGS.values(), "too_few_crews"} == set(DEPENDENCES)


@pytest.mark.parametrize("matter", BRINGS)
def test_a_matter_brings_its_dependence_and_made_perfect_leaves_independent_blocks(matter: str) -> None:
    model = Model.from_mapping(random_spec(4, matter, matter))
    plan = Solver(model).plan
    assert plan is not None
    found = dependences_of(model, plan)
    assert BRINGS[matter] in [each.name for each in found]
    perfect = without_all(model, found)
    solver = Solver(perfect)
    assert solver.plan is not None
    assert dependences_of(perfect, solver.plan) == ()
    whole = solver.answer(Question("steady_state_unavailability"))
    assert independent_blocks(perfect, None).value == pytest.approx(whole.value, rel=1e-10)


@pytest.mark.parametrize("matter", ["coverage", "hidden_faults", "spares", "phase_without_repair"])
def test_taking_one_away_leaves_the_others(matter: str) -> None:
    model = Model.from_mapping(random_spec(4, matter, "beta"))
    plan = Solver(model).plan
    assert plan is not None
    for each in dependences_of(model, plan):
        left = Solver(each.without(model)).plan
        assert left is not None
        names = [other.name for other in dependences_of(each.without(model), left)]
        assert each.name not in names
        assert each.name == "common_causes" or "common_causes" in names


def test_what_stops_while_the_system_is_down_is_better_than_independent_blocks() -> None:
    text = """
units: {a: {failure_rate: 2e-3 /h, repair_time: 20 h}, b: {failure_rate: 2e-3 /h, repair_time: 20 h}}
while_down: stop
system: {all_of: [a, b]}
"""
    solution = markov.solve(read_text(text, "spec"))
    effect = only_effect(solution)
    assert (effect.dependence, effect.where) == ("while_down", ("system",))
    stopped, going_on = 2 * RATIO / (1 + 2 * RATIO), 1 - 1 / (1 + RATIO) ** 2
    assert effect.factor.long_run.value == pytest.approx(stopped / going_on, rel=1e-12)
    assert redundancy(solution).long_run_cause == "while_down"


def test_crews_that_serve_two_groups_are_shared() -> None:
    text = """
units: {a: {failure_rate: 1e-3 /h, repair_time: 20 h}, b: {failure_rate: 1e-3 /h, repair_time: 20 h}}
crews: {c: {size: 1, repairs: [a, b]}}
system: {any_of: [a, b]}
"""
    effect = only_effect(markov.solve(read_text(text, "spec")))
    assert (effect.dependence, effect.where) == ("shared_crews", ("c",))


def test_independent_units_have_no_dependence() -> None:
    found = redundancy(pair())
    assert found.effects == ()
    assert found.long_run_cause is None
    assert found.over_perfect_blocks.long_run.value == pytest.approx(1, rel=1e-13)


def test_a_changed_model_remembers_nothing_of_the_old_one() -> None:
    model = read_text(PAIR.format(unit="", group="", top=""), "spec")
    assert [place.count for place in model.placements] == [2]
    assert model.named_in_system == ("g",)
    group = model.groups["g"]
    alone = group.model_copy(update={"members": (group.members[0].model_copy(update={"count": 1}),)})
    assert [place.count for place in changed(model, groups={"g": alone}).placements] == [1]
    assert [place.count for place in model.placements] == [2]


def test_every_factor_has_a_bound_around_it() -> None:
    for effect in redundancy(pair(group=", coverage: 90 %", top="crews: {c: {size: 1, repairs: [u]}}")).effects:
        for figure in (effect.factor.long_run, effect.factor.mission, effect.left.long_run, effect.left.mission):
            assert figure is not None
            assert figure.lower <= figure.value <= figure.upper
            assert figure.upper - figure.lower <= 1e-12 * figure.value


def test_a_factor_and_what_it_leaves_make_up_the_whole_difference(checkout) -> None:
    found = redundancy(markov.solve(checkout / "specs" / "harbour_lock.yaml"))
    assert len(found.effects) == 3
    for effect in found.effects:
        whole = effect.factor.long_run.value * effect.left.long_run.value
        assert whole * found.over_perfect_blocks.long_run.value == pytest.approx(1, rel=1e-13)
        later = effect.factor.mission.value * effect.left.mission.value
        assert later * found.over_perfect_blocks.mission.value == pytest.approx(1, rel=1e-13)


def test_a_large_chain_is_not_solved_again_but_told_what_ties_it(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(price, "SOLVED_AGAIN_UP_TO", 2)
    found = redundancy(pair(group=", coverage: 90 %"))
    (effect,) = found.effects
    assert effect.dependence == "imperfect_coverage"
    assert effect.factor.long_run.value is None
    assert effect.factor.long_run.reason == "not solved again: 4 states; at most 2 are"
    assert found.long_run_cause is None
    assert found.over_single_unit.long_run.value is not None


def test_a_chain_by_hand_has_no_redundancy_to_judge(checkout) -> None:
    assert markov.solve(checkout / "specs" / "ferry_ramp_control.yaml").redundancy is None


# --- gains and costs --------------------------------------------------------------------------------------------------

PRICED = """
units:
  pump: {{failure_rate: 1e-3 /h, repair_time: 20 h, cost: 1200, mass: 80}}
  spare: {{failure_rate: 1e-3 /h, repair_time: 20 h, cost: 300}}
groups: {{g: {{members: [{members}], required: 1, redundancy: {redundancy}}}}}
crews: {{c: {{size: 1, repairs: [pump, spare]}}}}
system: g
mission: {{time: 1000 h}}
"""


def priced(members: str, arrangement: str = "cold_standby") -> markov.Solution:
    return markov.solve(read_text(PRICED.format(members=members, redundancy=arrangement), "spec"))


def test_costs_stand_beside_those_of_single_units() -> None:
    costs = {cost.name: cost for cost in redundancy(priced("pump, {unit: spare, count: 2}")).costs}
    plain = markov.solve(
        read_text(
            "units: {pump: {failure_rate: 1e-3 /h, repair_time: 20 h}}\nsystem: pump\n"
            "crews: {c: {size: 1, repairs: [pump]}}",
            "spec",
        )
    )
    system = priced("pump, {unit: spare, count: 2}")
    for measure in ("repairs_per_year", "crew_utilisation", "time_without_redundancy"):
        assert costs[measure].plain.value == pytest.approx(plain.result(measure).value, rel=1e-13)
        assert costs[measure].system.value == system.result(measure).value
    assert costs["starts_per_year"].plain.value == 0
    assert (costs["items"].system.value, costs["items"].plain.value) == (3, 1)
    assert (costs["cost"].system.value, costs["cost"].plain.value) == (1800, 1200)
    assert (costs["mass"].system.value, costs["mass"].plain.value) == (80, 80)
    assert costs["mass"].note == "without spare"
    assert costs["cost"].note == ""
    assert "power" not in costs


def test_a_unit_cut_from_its_group_no_longer_loads_the_crew() -> None:
    text = PRICED.format(members="pump, {unit: spare, count: 2}", redundancy="cold_standby")
    model = read_text(text.replace("repairs: [pump, spare]", "repairs: [spare, pump]"), "spec")
    found = redundancy(markov.solve(model))
    unavailability = markov.solve(model).result("steady_state_unavailability").value
    assert found.over_single_unit.long_run.value == pytest.approx(1e-3 / (1e-3 + 0.05) / unavailability, rel=1e-12)
    waiting = next(cost for cost in found.costs if cost.name == "waiting_for_crew")
    assert waiting.plain.value == 0


def test_gains_at_the_mission_time_are_those_of_the_measure() -> None:
    text = PRICED.format(members="{unit: pump, count: 3}", redundancy="cold_standby")
    solution = markov.solve(read_text(text.replace(", spare]", "]"), "spec"), at=["1000 h"])
    found = redundancy(solution)
    for name, ratio in (
        ("gain_over_single_unit", found.over_single_unit),
        ("gain_over_independent_blocks", found.over_independent_blocks),
    ):
        assert ratio.long_run.value == pytest.approx(solution.result(name).value, rel=1e-13)
        assert ratio.mission is not None
        assert ratio.mission.value == pytest.approx(solution.result(name, at_hours=1000).value, rel=1e-13)


def test_the_lock_is_held_back_by_starts_in_the_long_run_and_by_coverage_in_its_first_year(checkout) -> None:
    found = redundancy(markov.solve(checkout / "specs" / "harbour_lock.yaml"))
    assert found.long_run_cause == "start_failures"
    assert found.mission_cause == "imperfect_coverage"


def test_spares_at_hand_do_not_hide_what_coverage_loses() -> None:
    text = """
units: {p: {failure_rate: 100 per million hours}}
groups:
  g:
    members: [{unit: p, count: 2}]
    redundancy: hot_standby
    switchover: {coverage: 99 %, uncovered: {outcome: lost}}
spares: {s: {for: p, stock: 1, lead_time: 30 d}}
system: g
"""
    assert redundancy(markov.solve(read_text(text, "spec"))).long_run_cause == "imperfect_coverage"
