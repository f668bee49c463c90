"""A time is a mean, or says its spread."""

from fractions import Fraction

import pytest

SPEC = "units:\n  pump: {failure_rate: 1 /y, repair_time: %s}\nsystem: pump\n"


def test_mean_alone_has_no_shape(read):
    assert read(SPEC % "24 h").units["pump"].repair_time_shape is None


def test_mean_with_a_standard_deviation(read):
    unit = read(SPEC % "{mean: 1 d, standard_deviation: 12 h}").units["pump"]
    shape = unit.repair_time_shape
    assert unit.repair_time.exact == shape.mean.exact == 24
    assert (shape.is_fixed, shape.stages) == (False, None)
    assert shape.squared_variation == Fraction(1, 4)
    assert shape.least_stages == 4


@pytest.mark.parametrize(("deviation", "stages"), [("24 h", 1), ("48 h", 1), ("12 h", 4), ("10 h", 6), ("2.4 h", 100)])
def test_least_stages_follow_the_spread(read, deviation, stages):
    text = SPEC % f"{{mean: 24 h, standard_deviation: {deviation}}}"
    assert read(text).units["pump"].repair_time_shape.least_stages == stages


def test_fixed_time_passes_in_stages(read):
    shape = read(SPEC % "{fixed: 24 h}").units["pump"].repair_time_shape
    assert (shape.is_fixed, shape.stages, shape.standard_deviation) == (True, 20, None)
    assert read(SPEC % "{fixed: 24 h, stages: 5}").units["pump"].repair_time_shape.squared_variation == Fraction(1, 5)


def test_shape_takes_parameters(read):
    text = "parameters: {mend: {value: 8 h, source: a log}, spread: {value: 3 h, source: a log}}\n"
    model = read(text + SPEC % "{mean: mend, standard_deviation: spread}" + "mission: {time: 1 y}\n")
    unit = model.units["pump"]
    assert unit.repair_time.parameters == ("mend",)
    assert unit.repair_time_shape.standard_deviation.name == "spread"
    assert model.warnings == ()


@pytest.mark.parametrize(
    ("time", "found"),
    [
        ("{}", "`mean` or `fixed` is missing"),
        ("{mean: 24 h}", "`standard_deviation` is missing"),
        ("{standard_deviation: 24 h}", "`mean` is missing"),
        ("{fixed: 24 h, mean: 24 h}", "`mean` beside `fixed`"),
        ("{mean: 24 h, standard_deviation: 2 h, stages: 3}", "`stages` beside"),
        ("{stages: 3}", "is missing"),
        ("{fixed: 0 h}", "is zero"),
        ("{mean: 24 h, standard_deviation: 0 h}", "is zero"),
        ("{mean: 24 h, standard_deviation: 1 h}", "it takes 576 stages"),
        ("{mean: 24, standard_deviation: 2 h}", "no unit of measure"),
        ("{fixed: 24 h, stages: 0}", "out of range"),
        ("{mean: 24 h, sd: 2 h}", "`sd` is not a key here"),
        ("[24 h, 2 h]", "a list stands here"),
        ("{fixed: 24 h}, repair_stages: 3", "`repair_stages` beside"),
    ],
)
def test_unsound_shapes_are_refused(problems, time, found):
    told = problems(SPEC % time)
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 2 for problem in told)


def test_place_of_a_fault_inside_a_shape(told):
    problem = told(SPEC % "{fixed: soon}")
    assert problem.found.startswith("units.pump.repair_time.fixed: ")
    assert (problem.line, problem.column) == (2, 51)


def test_every_time_of_the_language_may_have_a_shape(read):
    shaped = "{mean: 4 h, standard_deviation: 2 h}"
    model = read(
        f"""\
units:
  pump:
    failure_rate: 1 /y
    logistic_delay: {shaped}
    repair_time: 1 h
    failure_modes: {{open: {{share: 1, repair_time: {shaped}}}}}
groups:
  pair:
    members: [{{unit: pump, count: 2}}]
    redundancy: cold_standby
    switchover:
      time: {shaped}
      uncovered: {{outcome: restart, time: {shaped}}}
      switch: {{failure_rate: 1 /y, repair_time: {shaped}}}
spares: {{shelf: {{for: pump, stock: 1, lead_time: {shaped}, swap_time: {shaped}}}}}
system: pair
"""
    )
    unit, group, pool = model.units["pump"], model.groups["pair"], model.spares["shelf"]
    shapes = [
        unit.logistic_delay_shape,
        unit.failure_modes["open"].repair_time_shape,
        group.takeover_shape,
        group.outcome_shape,
        group.switch.repair_time_shape,
        pool.lead_time_shape,
        pool.swap_time_shape,
    ]
    assert [shape.squared_variation for shape in shapes] == [Fraction(1, 4)] * 7


def test_stages_beside_a_shaped_switchover_are_refused(told):
    group = "{members: [{unit: pump, count: 2}], redundancy: cold_standby, switchover: {time: {fixed: 1 h}, stages: 2}}"
    text = f"units: {{pump: {{failure_rate: 1 /y}}}}\ngroups: {{g: {group}}}\nsystem: g\n"
    assert "`stages` beside" in told(text).found


def test_a_fixed_time_takes_no_more_stages_than_a_spread(told):
    assert told(SPEC % "{fixed: 24 h, stages: 201}").expected == "at most 200"
