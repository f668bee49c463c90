"""Parameters are resolved in any order; circles and unsound uncertainties are refused."""

from fractions import Fraction

import pytest

PLANT = "units: {lamp: {failure_rate: %s}}\nsystem: lamp\nparameters:\n%s"


def spec_with(parameters, rate="1e-6 /h"):
    return PLANT % (rate, "".join(f"  {line}\n" for line in parameters))


def test_short_and_long_form_are_the_same(read):
    model = read(spec_with(["short: 2e-6 /h", "long: {value: 2e-6 /h, source: a handbook}"], "short + long"))
    assert model.parameters["short"].value == model.parameters["long"].value
    assert model.parameters["short"].source is None
    assert model.parameters["long"].source == "a handbook"
    assert model.units["lamp"].failure_hourly == Fraction(4, 10**6)


def test_parameters_may_refer_to_later_ones(read):
    model = read(spec_with(["a: b * 2", "b: c / 2", "c: 3e-6 /h"], "a"))
    assert model.units["lamp"].failure_hourly == Fraction(3, 10**6)
    assert model.units["lamp"].failure.name == "a"
    assert model.parameters["a"].value.parameters == ("b",)


def test_long_chains_of_parameters_are_read(read):
    lines = [f"p{n}: p{n + 1}" for n in range(3000)] + ["p3000: 1e-6 /h"]
    assert read(spec_with(lines, "p0")).units["lamp"].failure_hourly == Fraction(1, 10**6)


def test_circle_is_shown(told):
    problem = told(spec_with(["a: b", "b: 2 * c", "c: a", "d: c"], "d"))
    assert "a → b → c → a" in problem.found
    assert (problem.line, problem.column) == (4, 6)


def test_parameter_that_names_itself_is_a_circle(told):
    assert "a → a" in told(spec_with(["a: a + 1"])).found


def test_fault_of_a_parameter_is_told_once(told):
    problem = told(spec_with(["a: 5e-6 /parsec", "b: a * 2"], "b"))
    assert (problem.line, problem.column) == (4, 6)
    assert "parsec" in problem.found


def test_unknown_name_gets_the_nearest_one(told):
    problem = told(spec_with(["lamp_failures: 1 /y"], "lamp_failure"))
    assert problem.fix == "write `lamp_failures`"


def test_parameter_names_keep_their_spelling(read):
    model = read(spec_with(["on: 1e-6 /h", "no: on", "y: no"], "y"))
    assert list(model.parameters) == ["on", "no", "y"]
    assert model.units["lamp"].failure_hourly == Fraction(1, 10**6)


@pytest.mark.parametrize(
    ("parameter", "form"),
    [
        ("{value: 1e-6 /h, uncertainty: {error_factor: 3}}", "error_factor"),
        ("{value: 1e-6 /h, uncertainty: {failures: 7, exposure: 58400 h}}", "failures"),
        ("{value: 1e-6 /h, uncertainty: {failures: 0, exposure: 58400 h}}", "failures"),
        ("{value: 0.9, uncertainty: {low: 80 %, high: 0.95}}", "range"),
        ("{value: 24 h, uncertainty: {standard_deviation: 2 h}}", "standard_deviation"),
    ],
)
def test_four_forms_of_uncertainty(read, parameter, form):
    assert read(spec_with([f"a: {parameter}"])).parameters["a"].uncertainty.form == form


@pytest.mark.parametrize(
    ("parameter", "found"),
    [
        ("{value: 1e-6 /h, uncertainty: {error_factor: 1}}", "not above 1"),
        ("{value: 1e-6 /h, uncertainty: {error_factor: 3 h}}", "is a time"),
        ("{value: 1e-6 /h, uncertainty: {failures: 7}}", "`exposure` is missing"),
        ("{value: 1e-6 /h, uncertainty: {failures: 7.5, exposure: 1 h}}", "not a whole number"),
        ("{value: 24 h, uncertainty: {failures: 7, exposure: 1 h}}", "failures over an exposure for a time"),
        ("{value: 0.9, uncertainty: {low: 0.95, high: 0.99}}", "outside of `low` and `high`"),
        ("{value: 0.9, uncertainty: {low: 0.95, high: 0.8}}", "`high` is not above `low`"),
        ("{value: 0.9, uncertainty: {low: 1 h, high: 2 h}}", "is a time, the value a share"),
        ("{value: 24 h, uncertainty: {standard_deviation: 2}}", "is a share, the value a time"),
        ("{value: 0 /h, uncertainty: {error_factor: 3}}", "a spread around zero"),
        ("{value: 1e-6 /h, uncertainty: {error_factor: 3, low: 1 /h, high: 2 /h}}", "starts a second form"),
        ("{value: 1e-6 /h, uncertainty: {}}", "is missing"),
        ("{value: 1e-6 /h, uncertainty: 3}", "stands here"),
        ("{source: nowhere}", "`value` is missing"),
        ("[1, 2]", "a list stands here"),
        ("", "nothing is written here"),
    ],
)
def test_unsound_parameters_are_refused(told, parameter, found):
    problem = told(spec_with([f"a: {parameter}"]))
    assert found in problem.found
    assert problem.line == 4
