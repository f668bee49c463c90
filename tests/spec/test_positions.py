"""Every problem is told at once, each at its place, in words of the trade."""

import re

FAULTY = """\
title: Many mistakes
parameters:
  lam: 5e-6
  loop: loop2 * 2
  loop2: loop
units:
  drive: {failure_rat: 5e-6 /h, repair_time: 24}
  pump: {failure_rate: lamb, repair_time: 24 h, repair_rate: 1 /h}
  valve: {failure_rate: lam, mtbf: 3 y}
  fan: {failure_rate: loop, repair_time: 1 h}
  fan: {failure_rate: 1 /h}
  seal: {repair_time: 2 h}
groups:
  first:
    members: [driv, {unit: pump, count: 0}]
    required: 1
  second:
    members: [drive, pump, drive]
    required: 4
    redundancy: cold
    coverage: 95
crews:
  early: {size: 0, repairs: [pump]}
  late: {repairs: [pump, nobody]}
sytem: first
spares: {pump: {stock: 1}}
mission: 1 y
targets:
  - {id: A, measure: availabilty, at_least: 0.9}
  - {measure: availability, at_least: 95, at: -3 h}
  - {id: B, measure: availability, at_most: 0.5, of: nobody}
"""

PLACES = """\
4:9 parameters.loop
7:11 units.drive.failure_rat
7:46 units.drive.repair_time
8:24 units.pump.failure_rate
8:49 units.pump.repair_rate
9:25 units.valve.failure_rate
9:30 units.valve.mtbf
11:3 `fan` stands twice
12:3 units.seal
15:15 groups.first.members#1
15:41 groups.first.members#2.count
18:28 groups.second.members#3
19:15 groups.second.required
20:17 groups.second.redundancy
21:15 groups.second.coverage
23:17 crews.early.size
24:3 crews.late
24:20 crews.late.repairs#1
24:26 crews.late.repairs#2
25:1 sytem
26:10 spares.pump
26:10 spares.pump
27:10 mission
29:22 targets#1.measure
30:5 targets#2
30:47 targets#2.at
31:54 targets#3.of
"""


def test_all_problems_are_told_at_once_in_the_order_of_the_text(problems):
    told = [f"{each.line}:{each.column} {each.found}" for each in problems(FAULTY)]
    expected = PLACES.splitlines()
    assert len(told) == len(expected)
    for line, start in zip(told, expected, strict=True):
        assert line.startswith(start)


def test_each_problem_says_what_was_found_what_was_expected_and_a_fix(problems):
    for problem in problems(FAULTY):
        assert re.fullmatch(r"spec:\d+:\d+: [^;]+; [^;]+; .+", str(problem))


def test_no_word_of_the_libraries_leaks(problems):
    text = "\n".join(str(problem) for problem in problems(FAULTY))
    leaks = r"pydantic|[Ii]nput should|NoneType|\bdict\b|\btuple\b|\bstr\b|validation|Extra inputs|Fraction|<class"
    assert re.search(leaks, text) is None


def test_missing_key_points_at_the_key_of_its_mapping(told):
    problem = told("units:\n  lamp:\n    repair_time: 3 h\nsystem: lamp\n")
    assert (problem.line, problem.column) == (2, 3)


def test_misspelt_key_points_at_itself_and_bad_value_at_the_value(problems):
    told = problems("units:\n  lamp:\n    failure_rte: 1 /y\n    repair_time:   soon\nsystem: lamp\n")
    assert [(each.line, each.column) for each in told] == [(3, 5), (4, 20)]


def test_value_inside_a_criterion_has_its_place(told):
    text = "units: {a: {failure_rate: 1 /y}}\nsystem:\n  all_of:\n    - a\n    - any_of: [a, b]\n"
    problem = told(text)
    assert (problem.line, problem.column) == (5, 19)
    assert problem.found.startswith("system.all_of#2.any_of#2: ")


def test_empty_value_points_after_its_key(told):
    problem = told("units:\n  lamp:\n    failure_rate:\n    repair_time: 1 h\nsystem: lamp\n")
    assert problem.line == 3
    assert "nothing is written" in problem.found


def test_very_many_problems_are_counted(problems):
    units = "".join(f"  u{n}: {{failure_rat: 1 /y}}\n" for n in range(1000))
    told = problems(f"units:\n{units}system: u1\n")
    assert len(told) == 300
    assert told[-1].found == "701 more problems"


def test_messages_are_the_same_each_time(problems):
    assert problems(FAULTY) == problems(FAULTY)


def test_long_values_are_shortened_in_messages(told):
    text = f"units: {{lamp: {{failure_rate: {'x' * 1000}}}}}\nsystem: lamp\n"
    assert len(str(told(text))) < 400
