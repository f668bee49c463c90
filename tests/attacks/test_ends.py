"""Where a chain ends: down for good, in one of several ways, or never down at all."""

from fractions import Fraction

import pytest

from tests.attacks.truth import Chain, holds
from tests.cli.program import Program

LONG_RUN = {
    "steady_state_availability": "at_least: 0.5",
    "steady_state_unavailability": "at_most: 0.5",
    "failures_per_year": "at_most: 5",
    "downtime_per_year": "at_most: 100 h",
    "mean_up_time": "at_least: 1 h",
    "mean_down_time": "at_most: 1 h",
    "mean_capacity": "at_least: 0.5",
}


def asking(measures: dict[str, str]) -> str:
    return "targets:\n" + "".join(f"  - {{id: {name}, measure: {name}, {limit}}}\n" for name, limit in measures.items())


# --- attack 18: a long-run value with absorbing down states

LOST = """
units: {drive: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups:
  gate:
    members: [{unit: drive, count: 2}]
    redundancy: cold_standby
    switchover: {coverage: 0.9, uncovered: {outcome: lost}}
system: gate
mission: {time: 100 h}
"""


def test_a_plant_that_is_lost_in_the_end_is_down_in_the_long_run(program: Program) -> None:
    told = program.solve(LOST + asking(LONG_RUN))
    assert told.status == 1
    assert told.verdicts == {
        "steady_state_availability": "missed",
        "steady_state_unavailability": "missed",
        "failures_per_year": "met",
        "downtime_per_year": "missed",
        "mean_up_time": "undecided",
        "mean_down_time": "undecided",
        "mean_capacity": "missed",
    }
    for measure, exact in (("steady_state_availability", 0), ("steady_state_unavailability", 1), ("mean_capacity", 0)):
        entry = told.result(measure)
        assert (entry["lower"], entry["value"], entry["upper"]) == (exact, exact, exact)
    assert told.value("failures_per_year") == 0
    assert told.value("downtime_per_year") == 8760
    for measure in ("mean_up_time", "mean_down_time"):
        assert "for good" in told.result(measure)["reason"]


def test_values_in_time_of_a_plant_that_is_lost_are_given_all_the_same(program: Program) -> None:
    told = program.solve(LOST)
    # 0 duty and standby, 1 one failed, 2 lost. The last drive's fault draws no coverage; both failed is 3.
    truth = Chain(
        {
            (0, 1): Fraction(9, 10000),
            (0, 2): Fraction(1, 10000),
            (1, 0): "1/10",
            (1, 3): "1/1000",
            (3, 1): "2/10",
        }
    )
    assert holds(told.result("unreliability"), sum(truth.at(100, stopped={2, 3})[2:]))
    assert holds(told.result("mean_time_to_first_failure"), truth.mean_time_to({2, 3}))
    assert holds(told.result("unavailability"), sum(truth.at(100)[2:]))


# --- attack 19: two closed classes

FORK = """
states: {start: {up: true, initial: true}, A: {up: true}, "A down": {up: false}, B: {up: true}, "B down": {up: false}}
transitions:
  - {from: start, to: A, rate: 1e-3 /h}
  - {from: start, to: B, rate: 2e-3 /h}
  - {from: A, to: "A down", rate: 1 /h}
  - {from: "A down", to: A, rate: 3 /h}
  - {from: B, to: "B down", rate: 1 /h}
  - {from: "B down", to: B, rate: 2 /h}
mission: {time: 10 h}
"""
LIVE_OR_DIE = """
states: {start: {up: true, initial: true}, lives: {up: true}, dies: {up: false}}
transitions: [{from: start, to: lives, rate: 1e-3 /h}, {from: start, to: dies, rate: 2e-3 /h}]
mission: {time: 10 h}
"""


@pytest.mark.parametrize("spec", [FORK, LIVE_OR_DIE], ids=["two ways to live", "live or die"])
@pytest.mark.parametrize("measure", ["steady_state_availability", "downtime_per_year", "mean_up_time", "mean_capacity"])
def test_a_long_run_that_depends_on_chance_has_a_reason_and_no_value(program: Program, spec: str, measure: str) -> None:
    told = program.solve(spec + asking({measure: LONG_RUN[measure]}))
    assert (told.status, told.verdicts) == (3, {measure: "undecided"})
    assert told.value(measure) is None
    assert told.json["targets"][0]["value"] is None
    reason = told.result(measure)["reason"]
    assert "end in several ways for good" in reason or "no one long-run value" in reason


def test_a_failure_that_may_never_come_has_no_mean_time(program: Program) -> None:
    told = program.solve(LIVE_OR_DIE + asking({"mean_time_to_first_failure": "at_least: 1 h"}))
    assert (told.status, told.verdicts) == (3, {"mean_time_to_first_failure": "undecided"})
    for measure in ("mean_time_to_first_failure", "standard_deviation_of_time_to_first_failure"):
        assert told.value(measure) is None
        assert "may never come" in told.result(measure)["reason"]


def test_values_in_time_do_not_mind_where_the_chain_ends(program: Program) -> None:
    told = program.solve(LIVE_OR_DIE)
    truth = Chain({(0, 1): "1/1000", (0, 2): "2/1000"})
    assert holds(told.result("unreliability"), truth.at(10)[2])
    assert holds(told.result("availability"), truth.at(10)[0] + truth.at(10)[1])


def test_two_ways_to_be_down_for_good_have_one_long_run(program: Program) -> None:
    told = program.solve(LIVE_OR_DIE.replace("lives: {up: true}", "lives: {up: false}"))
    assert told.value("steady_state_availability") == 0
    assert told.value("mean_time_to_first_failure") == pytest.approx(1000 / 3, rel=1e-12)


def test_closed_classes_that_cannot_be_reached_do_not_count(program: Program) -> None:
    told = program.solve(FORK.replace("{from: start, to: B, rate: 2e-3 /h}", "{from: start, to: B, rate: 0 /h}"))
    assert holds(told.result("steady_state_availability"), Fraction(3, 4))


# --- attack 20: an unreachable down state

UNREACHABLE = """
states: {good: {up: true, initial: true}, worn: {up: true}, bad: {up: false}}
transitions:
  - {from: good, to: worn, rate: 1e-3 /h}
  - {from: worn, to: good, rate: 1e-1 /h}
  - {from: bad, to: good, rate: 1 /h}
mission: {time: 10 h}
"""
LOW_IS_GOOD = {
    "unreliability": "at_most: 1e-30",
    "unavailability": "at_most: 0",
    "steady_state_unavailability": "at_most: 1e-12",
    "failures_per_year": "at_most: 0",
    "mean_down_time": "at_most: 1 min",
    "hazard_rate": "at_most: 1e-15 /h",
}
HIGH_IS_GOOD = {
    "reliability": "at_least: 1",
    "steady_state_availability": "at_least: 0.999999999999999999",
    "mean_time_to_first_failure": "at_least: 1e12 y",
    "mean_up_time": "at_least: 1e12 y",
}


def test_what_cannot_occur_is_answered_so_and_counts_as_met(program: Program) -> None:
    told = program.solve(UNREACHABLE + asking({**LOW_IS_GOOD, **HIGH_IS_GOOD}))
    assert told.status == 0
    assert told.verdicts == dict.fromkeys({**LOW_IS_GOOD, **HIGH_IS_GOOD}, "cannot_occur")
    for target in told.json["targets"]:
        assert "no down state can be reached" in target["why"]


def test_a_failure_that_is_wanted_and_cannot_occur_is_missed(program: Program) -> None:
    told = program.solve(UNREACHABLE + asking({"unreliability": "at_least: 0.5"}))
    assert (told.status, told.verdicts) == (1, {"unreliability": "missed"})


def test_an_unreachable_down_state_leaves_no_time_to_failure(program: Program) -> None:
    told = program.solve(UNREACHABLE)
    assert told.value("mean_time_to_first_failure") is None
    assert told.result("mean_time_to_first_failure")["reason"] == "no down state can be reached"
    assert told.value("unreliability") == 0
    assert told.value("steady_state_availability") == 1


def test_a_group_that_cannot_fail_is_answered_by_itself(program: Program) -> None:
    told = program.solve(
        "units: {frame: {failure_rate: 0 /h}, lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\n"
        "groups: {frames: {members: [{unit: frame, count: 2}], redundancy: active}}\n"
        "system: {all_of: [frames, lamp]}\nmission: {time: 10 h}\ntargets:\n"
        "  - {id: group, measure: unreliability, of: frames, at_most: 1e-9}\n"
        "  - {id: plant, measure: unreliability, at_most: 1e-9}\n"
    )
    assert told.verdicts == {"group": "cannot_occur", "plant": "missed"}


def test_cannot_occur_is_told_in_words_in_the_table(program: Program) -> None:
    out = program.table(UNREACHABLE + asking({"unreliability": "at_most: 1e-30"})).out
    assert "cannot occur" in out
    assert "no down state can be reached" in out
