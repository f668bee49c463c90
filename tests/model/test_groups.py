"""Groups hold members, numbers and redundancy that fit each other."""

from fractions import Fraction

import pytest

from markov.model import RepairAtFailed, RepairAtVisits

SPEC = """\
units:
  pump: {failure_rate: 1e-4 /h, repair_time: 24 h}
  diesel: {failure_rate: 2e-4 /h, repair_time: 24 h}
groups:
  water: {%s}
system: water
"""
PAIR = "members: [{unit: pump, count: 2}], redundancy: cold_standby"


def test_members_are_ranked_and_may_be_mixed(read):
    group = read(SPEC % "members: [pump, {unit: diesel, count: 2}], redundancy: hot_standby").groups["water"]
    assert [(member.name, member.count, member.is_group) for member in group.members] == [
        ("pump", 1, False),
        ("diesel", 2, False),
    ]
    assert group.size == 3
    assert group.duty_places == 1


def test_defaults_of_a_pair(read):
    group = read(SPEC % PAIR).groups["water"]
    assert (group.required, group.duty_places, group.is_active) == (1, 1, False)
    assert group.coverage_list == ()
    assert (group.outcome, group.outcome_time, group.takeover_time, group.takeover_stages) == (
        "until_repair",
        None,
        None,
        1,
    )
    assert group.return_to_preferred is False
    assert group.after_repair == "straight_to_duty"
    assert group.while_down is None
    assert not group.is_said("after_repair")


@pytest.mark.parametrize(
    ("keys", "dormancy"),
    [
        ("redundancy: hot_standby", Fraction(1)),
        ("redundancy: cold_standby", Fraction(0)),
        ("redundancy: warm_standby, dormancy_factor: 20 %", Fraction(1, 5)),
    ],
)
def test_dormancy_follows_redundancy(read, keys, dormancy):
    group = read(SPEC % f"members: [{{unit: pump, count: 2}}], {keys}").groups["water"]
    assert group.dormancy == dormancy


def test_active_group_puts_all_on_duty(read):
    group = read(SPEC % "members: [{unit: pump, count: 3}], required: 2, redundancy: active").groups["water"]
    assert group.is_active
    assert group.duty_places == 3


def test_group_without_redundancy_is_active(read):
    group = read(SPEC % "members: [pump, diesel], required: 2").groups["water"]
    assert group.is_active
    assert group.redundancy is None


def test_short_and_long_coverage_are_the_same(read):
    short = read(SPEC % f"{PAIR}, coverage: 0.9").groups["water"]
    long = read(SPEC % f"{PAIR}, switchover: {{coverage: 0.9}}").groups["water"]
    assert short.coverage_list == long.coverage_list
    assert [each.exact for each in short.coverage_list] == [Fraction(9, 10)]


def test_coverage_may_be_a_list(read):
    keys = "members: [{unit: pump, count: 3}], redundancy: hot_standby, coverage: [99 %, 0.9]"
    assert [each.exact for each in read(SPEC % keys).groups["water"].coverage_list] == [
        Fraction(99, 100),
        Fraction(9, 10),
    ]


@pytest.mark.parametrize("coverage", ["0", "1", "0 %", "100 %"])
def test_coverage_of_zero_and_one_are_legal(read, coverage):
    group = read(SPEC % f"{PAIR}, coverage: {coverage}").groups["water"]
    assert group.coverage_list[0].exact in (0, 1)


def test_switchover_is_read_whole(read):
    keys = f"{PAIR}, switchover: {{time: 20 s, stages: 3, uncovered: {{outcome: restart, time: 10 min}}}}"
    group = read(SPEC % keys).groups["water"]
    assert group.takeover_time.exact == Fraction(1, 180)
    assert group.takeover_stages == 3
    assert group.outcome == "restart"
    assert group.outcome_time.exact == Fraction(1, 6)


def test_train_is_a_member_by_its_name(read):
    text = SPEC % "members: [train, diesel], redundancy: hot_standby"
    text = text.replace("groups:\n", "groups:\n  train: {members: [{unit: pump, count: 2}], required: 2}\n")
    group = read(text).groups["water"]
    assert [member.is_group for member in group.members] == [True, False]
    assert group.size == 2


@pytest.mark.parametrize(
    ("keys", "found"),
    [
        ("required: 1", "`members` is missing"),
        ("members: []", "no members"),
        ("members: pump", "`pump` stands here"),
        ("members: [{unit: pump}, {unit: pump}], required: 2", "stands twice"),
        ("members: [{unit: pump, count: 0}]", "out of range"),
        ("members: [{unit: pump, count: -1}]", "negative"),
        ("members: [{count: 2}]", "`unit` is missing"),
        ("members: [pmp]", "`pmp` is not known"),
        ("members: [pump], required: 2", "2 required of 1"),
        ("members: [pump], required: 0", "out of range"),
        (
            "members: [{unit: pump, count: 3}], required: 2, on_duty: 1, redundancy: hot_standby",
            "1 on duty, 2 required",
        ),
        ("members: [{unit: pump, count: 3}], on_duty: 4, redundancy: hot_standby", "4 on duty of 3"),
        ("members: [{unit: pump, count: 3}], on_duty: 2, redundancy: active", "2 of 3 on duty in an `active` group"),
        ("members: [{unit: pump, count: 2}]", "`redundancy` is missing: 2 members, 1 on duty"),
        ("members: [{unit: pump, count: 2}], redundancy: cold", "no choice"),
        ("members: [{unit: pump, count: 2}], redundancy: warm_standby", "without `dormancy_factor`"),
        (f"{PAIR}, dormancy_factor: 0.5", "`dormancy_factor` with"),
        ("members: [{unit: pump, count: 2}], redundancy: warm_standby, dormancy_factor: 0", "not between 0 and 1"),
        ("members: [{unit: pump, count: 2}], redundancy: warm_standby, dormancy_factor: 1", "not between 0 and 1"),
        (f"{PAIR}, coverage: 0.9, switchover: {{time: 1 s}}", "both stand here"),
        (f"{PAIR}, coverage: 95", "more than 1"),
        (f"{PAIR}, coverage: []", "an empty list"),
        (f"{PAIR}, coverage: [0.9, 9]", "more than 1"),
        (f"{PAIR}, switchover: {{uncovered: {{outcome: restart}}}}", "`time` is missing"),
        (f"{PAIR}, switchover: {{uncovered: {{outcome: restart, time: 0 h}}}}", "is zero"),
        (f"{PAIR}, switchover: {{uncovered: {{outcome: lost, time: 1 h}}}}", "`lost` with a `time`"),
        (f"{PAIR}, switchover: {{uncovered: {{time: 1 h}}}}", "`outcome` is missing"),
        (f"{PAIR}, switchover: {{uncovered: restart}}", "`restart` stands here"),
        (f"{PAIR}, switchover: {{switch: {{}}}}", "is missing"),
        (f"{PAIR}, switchover: {{switch: {{latent: true}}}}", "is missing"),
        (f"{PAIR}, switchover: {{switch: {{failure_on_demand: 5}}}}", "more than 1"),
        (f"{PAIR}, switchover: {{switch: {{failure_rate: 5 h}}}}", "is a time"),
        (f"{PAIR}, load_sharing: {{exponent: -1}}", "negative"),
        (f"{PAIR}, load_sharing: {{exponent: 1000}}", "out of range"),
        (f"{PAIR}, load_sharing: {{exponent: 1, 1: 1}}", "beside factors"),
        (f"{PAIR}, load_sharing: {{}}", "an empty mapping"),
        (f"{PAIR}, load_sharing: 1.5", "`1.5` stands here"),
        (f"{PAIR}, load_sharing: {{one: 1}}", "no number of units"),
        (f"{PAIR}, load_sharing: {{1: 1 h}}", "is a time"),
        (f"{PAIR}, load_sharing: {{1: 1, 2: 1}}", "1 are on duty at most"),
        (f"{PAIR}, on_duty: 2, load_sharing: {{1: 1}}", "no factor for 2 on duty"),
        (f"{PAIR}, repair_when: sometime", "no choice"),
        (f"{PAIR}, repair_when: {{failed: 3}}", "once 3 of 2"),
        (f"{PAIR}, repair_when: {{failed: 0}}", "out of range"),
        (f"{PAIR}, repair_when: {{failed: 1, visits_every: 1 y}}", "both stand here"),
        (f"{PAIR}, repair_when: {{visits_every: 0 h}}", "is zero"),
        (f"{PAIR}, repair_when: {{every: 1 y}}", "`every` is not a key"),
        (f"{PAIR}, repair_when: {{}}", "an empty mapping"),
        (f"{PAIR}, repair_when: [1 y]", "a list stands here"),
        (f"{PAIR}, offline_repair: sometimes", "neither"),
        (f"{PAIR}, return_to_preferred: yes", "`yes` is neither"),
        ("members: [{unit: pump, count: 2}], redundancy: active, while_down: standby_rate", "no standby there"),
        ("members: [water, pump], redundancy: active", "holds itself"),
    ],
)
def test_unsound_groups_are_refused(told, keys, found):
    problem = told(SPEC % keys)
    assert found in problem.found
    assert problem.line == 5


def test_circle_of_groups_is_shown(told):
    text = SPEC % "members: [oil, pump], redundancy: active"
    text = text.replace("groups:\n", "groups:\n  oil: {members: [gas]}\n  gas: {members: [water]}\n")
    assert "`oil` → `gas` → `water` → `oil`" in told(text).found


def test_count_for_a_group_is_refused(told):
    text = SPEC % "members: [{unit: train, count: 2}, diesel], redundancy: hot_standby"
    text = text.replace("groups:\n", "groups:\n  train: {members: [pump]}\n")
    assert "a count for the group `train`" in told(text).found


def test_group_is_a_member_once(told):
    text = SPEC % "members: [train, diesel], redundancy: hot_standby"
    text = text.replace("groups:\n", "groups:\n  train: {members: [pump]}\n  other: {members: [train]}\n")
    assert "is a member of `other`, too" in told(text).found


def test_unit_and_group_need_different_names(told):
    text = SPEC.replace("diesel", "water") % "members: [pump]"
    assert "is the name of a unit, too" in told(text).found


def test_half_a_word_is_not_taken_for_one_of_several(told):
    group = "{members: [{unit: a, count: 2}], redundancy: standby}"
    assert (
        told(f"units: {{a: {{failure_rate: 1 /h}}}}\ngroups: {{g: {group}}}\nsystem: g\n").fix == "write one of these"
    )


def test_switch_has_faults_of_its_own(read):
    switch = "{failure_on_demand: 1 %, failure_rate: 2 /y, latent: true, repair_time: 4 h, false_operation_rate: 1 /y}"
    group = read(SPEC % f"{PAIR}, switchover: {{switch: {switch}}}").groups["water"]
    assert group.switch.failure_on_demand.exact == Fraction(1, 100)
    assert group.switch.may_hide
    assert group.switch.repair_time.exact == 4
    assert read(SPEC % PAIR).groups["water"].switch is None


def test_load_is_shared_by_a_table_or_by_a_power(read):
    trio = "members: [{unit: pump, count: 3}], redundancy: active"
    table = read(SPEC % f"{trio}, load_sharing: {{3: 1, 2: 1.3, 1: 2}}").groups["water"].load_sharing
    assert [table.factor(number, 3) for number in (1, 2, 3)] == [2, Fraction(13, 10), 1]
    power = read(SPEC % f"{trio}, load_sharing: {{exponent: 2}}").groups["water"].load_sharing
    assert [power.factor(number, 3) for number in (1, 2, 3)] == [9, Fraction(9, 4), 1]


def test_a_power_with_a_broken_exponent_is_good_to_many_digits(read):
    group = read(SPEC % "members: [{unit: pump, count: 2}], redundancy: active, load_sharing: {exponent: 0.5}")
    factor = group.groups["water"].load_sharing.factor(1, 2)
    assert abs(factor * factor - 2) < Fraction(1, 10**70)


def test_table_of_loads_reaches_to_the_phase_that_wants_most(read, told):
    phases = "phases: [{name: calm, duration: 1 d}, {name: storm, required: {water: 2}}]\n"
    group = "members: [{unit: pump, count: 2}], redundancy: hot_standby, load_sharing: {%s}"
    assert read(SPEC % (group % "1: 1, 2: 1") + phases).groups["water"].load_sharing.table[2].exact == 1
    assert "no factor for 2 on duty" in told(SPEC % (group % "1: 1") + phases).found


@pytest.mark.parametrize(
    ("when", "meant"),
    [("at_once", "at_once"), ("system_down", "system_down"), ("{failed: 2}", RepairAtFailed(2))],
)
def test_repair_may_wait(read, when, meant):
    group = read(SPEC % f"{PAIR}, repair_when: {when}").groups["water"]
    assert group.repair_when == meant
    assert group.is_deferred is (when != "at_once")


def test_repair_may_wait_for_visits(read):
    when = read(SPEC % f"{PAIR}, repair_when: {{visits_every: 6 months}}").groups["water"].repair_when
    assert isinstance(when, RepairAtVisits)
    assert when.every.exact == 4380


def test_misspelt_time_of_repair_gets_its_fix(told):
    assert told(SPEC % f"{PAIR}, repair_when: system_dwn").fix == "write `system_down`"
    assert told(SPEC % f"{PAIR}, repair_when: {{visits: 1 y}}").fix == "write `visits_every`"
