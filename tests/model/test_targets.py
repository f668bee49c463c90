"""Targets carry the unit, the time and the subject that their measure needs."""

from fractions import Fraction

import pytest

from markov.measures import MEASURES

PLANT = """\
parameters: {limit: 99 %}
units:
  pump: {failure_rate: 1e-4 /h, repair_time: 24 h}
groups:
  water: {members: [{unit: pump, count: 2}], redundancy: cold_standby}
crews:
  fitters: {size: 1, repairs: [pump]}
system: water
targets:
"""


@pytest.mark.parametrize(
    ("target", "limit"),
    [
        ("measure: steady_state_availability, at_least: 0.9998", Fraction(9998, 10_000)),
        ("measure: steady_state_availability, at_least: limit", Fraction(99, 100)),
        ("measure: failures_per_year, at_most: 0.10", Fraction(1, 10)),
        ("measure: failures_per_year, at_most: 12", 12),
        ("measure: downtime_per_year, at_most: 5 h", 5),
        ("measure: mean_time_to_first_failure, at_least: 2 y", 17520),
        ("measure: failure_frequency, at_most: 50 FIT", Fraction(5, 10**8)),
        ("measure: pfh, at_most: 1e-7 /h", Fraction(1, 10**7)),
        ("measure: gain_over_single_unit, at_least: 100", 100),
        ("measure: reliability, at: 10 h, at_least: 0.9", Fraction(9, 10)),
        ("measure: reliability, at: 0 h, at_least: 0.9", Fraction(9, 10)),
        ("measure: interval_reliability, for: 8 h, at_least: 0.9", Fraction(9, 10)),
        ("measure: state_probability, state: whatever, at_most: 0.1", Fraction(1, 10)),
        ("measure: availability, of: water, at: 1 h, at_least: 0.9", Fraction(9, 10)),
        ("measure: crew_utilisation, of: fitters, at_most: 0.5", Fraction(1, 2)),
        ("measure: repairs_per_year, of: pump, at_most: 3", 3),
    ],
)
def test_limit_carries_the_unit_of_its_measure(read, target, limit):
    (read_target,) = read(f"{PLANT}  - {{id: A, {target}}}\n").targets
    assert read_target.limit == limit
    assert read_target.limit_text in target
    assert read_target.direction in target


@pytest.mark.parametrize(
    ("target", "found"),
    [
        ("measure: steady_state_availability, at_least: 95", "more than 1"),
        ("measure: steady_state_availability, at_least: 1 h", "is a time"),
        ("measure: failures_per_year, at_most: 0.1 per year", "is a rate"),
        ("measure: downtime_per_year, at_most: 5", "no unit of measure"),
        ("measure: mean_up_time, at_least: 5 /h", "is a rate"),
        ("measure: failure_frequency, at_most: 1e-6", "no unit of measure"),
        ("measure: steady_state_availability", "`at_least` or `at_most` is missing"),
        ("measure: steady_state_availability, at_least: 0.9, at_most: 1", "both stand here"),
        ("measure: reliability, at_least: 0.9", "without a time"),
        ("measure: reliability, at: -1 h, at_least: 0.9", "negative"),
        ("measure: reliability, at: .inf, at_least: 0.9", "not a number"),
        ("measure: reliability, at: 10, at_least: 0.9", "no unit of measure"),
        ("measure: steady_state_availability, at: 1 h, at_least: 0.9", "a long-run value"),
        ("measure: mean_time_to_first_failure, at: 1 h, at_least: 1 h", "not taken at a time"),
        ("measure: interval_reliability, at_least: 0.9", "`for` is missing"),
        ("measure: availability, at: 1 h, for: 1 h, at_least: 0.9", "`for` for `availability`"),
        ("measure: state_probability, at_most: 0.9", "`state` is missing"),
        ("measure: availability, at: 1 h, state: x, at_least: 0.9", "`state` for `availability`"),
        ("measure: state_probability, state: x, of: water, at_most: 0.9", "`of`"),
        ("measure: availabilty, at_least: 0.9", "no measure"),
        ("measure: hazardous_events_per_year, at_most: 1", "without demands"),
        ("measure: level_probability, at_least: 1", "without a level"),
        ("measure: level_probability, of: water, at_least: 1", "`water` is a group"),
        ("measure: level_probability, of: half, at_least: 1", "`half` is not known"),
        ("measure: availability, at: 1 h, of: watr, at_least: 0.9", "`watr` is not known"),
        ("measure: availability, at: 1 h, of: fitters, at_least: 0.9", "`fitters` is a crew pool"),
        ("measure: crew_utilisation, of: water, at_most: 0.9", "`water` is a group"),
        ("measure: gain_over_single_unit, of: water, at_least: 1", "`of` for `gain_over_single_unit`"),
    ],
)
def test_unsound_targets_are_refused(problems, target, found):
    told = problems(f"{PLANT}  - {{id: A, {target}}}\n")
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 10 for problem in told)


def test_misspelt_measure_gets_the_nearest_one(told):
    assert told(f"{PLANT}  - {{id: A, measure: availabilty, at_least: 0.9}}\n").fix == "write `availability`"


def test_target_needs_an_id_of_its_own(told):
    line = "measure: steady_state_availability, at_least: 0.9"
    assert "`id` is missing" in told(f"{PLANT}  - {{{line}}}\n").found
    problem = told(f"{PLANT}  - {{id: A, {line}}}\n  - {{id: A, {line}}}\n")
    assert "stands twice" in problem.found
    assert (problem.line, problem.column) == (11, 10)


def test_mission_gives_the_time(read, told):
    line = "  - {id: A, measure: reliability, at_least: 0.9}\n"
    assert read(f"{PLANT}{line}mission: {{time: 1 y}}\n").mission.time.exact == 8760
    assert "mapping that says the mission" in told(f"{PLANT}{line}mission: 1 y\n").expected


def test_positions_are_right_after_a_faulty_target(problems):
    lines = [
        "  - {id: A, measure: availability, at: 1 parsec, at_least: 0.9}",
        "  - {id: B, measure: steady_state_availability, at_least: 0.9}",
        "  - {id: B, measure: steady_state_availability, at_least: 0.9, of: nobody}",
    ]
    told = problems(PLANT + "\n".join(lines))
    assert [(problem.line, problem.column) for problem in told] == [(10, 40), (12, 10), (12, 68)]


@pytest.mark.parametrize("measure", MEASURES.values(), ids=lambda measure: measure.name)
def test_every_measure_can_be_asked(read, measure):
    limit = {"share": "0.5", "time": "5 h", "rate": "1 /h", "number": "5"}[measure.limit]
    needed = {
        "interval_reliability": ", for: 1 h",
        "state_probability": ", state: S",
        "level_probability": ", of: half",
    }
    extra = needed.get(measure.name, "")
    top = "demand: {rate: 1 /y}\nlevels: {half: 50 %}\n"
    text = f"{top}{PLANT}  - {{id: A, measure: {measure.name}, at_most: {limit}{extra}}}\nmission: {{time: 1 h}}\n"
    (target,) = read(text).targets
    assert target.asked is measure
