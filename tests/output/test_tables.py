"""A solution on paper: table, JSON, notebook."""

import io
import json
from fractions import Fraction

import pytest
from rich.console import Console

import markov
from markov.output.as_json import solution_object
from markov.output.notebook import solution_html
from markov.output.table import print_check, solution_text
from markov.output.wording import bound_words, hours_words, value_words
from markov.results import Result
from markov.spec import read_text

HOSTILE = "pump [red]a|b[/red] <i>&amp; \\alpha =1+1"
SPEC = f"""
title: 'Plant <b>{HOSTILE}</b>'
units: {{'{HOSTILE}': {{failure_rate: 1e-3 /h, repair_time: 10 h}}}}
system: '{HOSTILE}'
mission: {{time: 100 h}}
targets: [{{id: '[bold]T|1', measure: availability, of: '{HOSTILE}', at_least: 0.9}}]
"""


@pytest.fixture(scope="module")
def solution() -> markov.Solution:
    return markov.solve(read_text(SPEC, "spec"))


def test_names_with_markup_come_out_as_they_are(solution: markov.Solution) -> None:
    text = solution_text(solution, width=400)
    assert HOSTILE in text
    assert "[bold]T|1" in text


def test_html_escapes_every_name(solution: markov.Solution) -> None:
    html = solution_html(solution)
    assert "<b>" not in html
    assert "<i>" not in html
    assert "&lt;b&gt;" in html
    assert solution._repr_html_() == html


def test_json_keeps_names_and_plain_numbers(solution: markov.Solution) -> None:
    found = json.loads(json.dumps(solution_object(solution)))
    assert found["targets"][0]["of"] == HOSTILE
    assert found["year_hours"] == 8760
    assert {"title", "spec_sha256", "version", "states", "transitions", "results", "assumptions", "warnings"} <= set(
        found
    )


def test_what_check_prints_names_the_size(solution: markov.Solution) -> None:
    stream = io.StringIO()
    print_check(markov.check(read_text(SPEC, "spec")), Console(file=stream, width=400, color_system=None))
    assert "2 states, 2 transitions" in stream.getvalue()


@pytest.mark.parametrize(
    ("measure", "value", "printed"),
    [
        ("steady_state_availability", 0.9998744850268987, "0.999874485"),
        ("steady_state_availability", 0.5, "0.5"),
        ("steady_state_availability", 1.0, "1"),
        ("steady_state_availability", 1 - 2**-53, "0.9999999999999999"),
        ("unreliability", 1.234567e-12, "1.23457e-12"),
        ("unreliability", 0.0, "0"),
        ("mean_up_time", 68378.64498, "68378.6"),
        ("mean_up_time", 3.33317e8, "3.33317e+08"),
        ("mean_up_time", 1234567.8, "1234568"),
        ("failures_per_year", 0.25, "0.25"),
    ],
)
def test_values_show_the_digits_that_tell(measure: str, value: float, printed: str) -> None:
    assert value_words(measure, value) == printed


def test_a_value_below_one_is_never_printed_as_one() -> None:
    for exponent in range(1, 16):
        value = 1 - 10.0**-exponent
        assert value_words("availability", value) != "1" or value == 1


def result(value: float | None, lower: float | None, upper: float | None) -> Result:
    return Result("availability", None, None, Fraction(1), None, value, lower, upper, "1", "method")


def test_bounds_are_told_relative_to_the_value_and_estimates_as_such() -> None:
    assert bound_words(result(0.5, 0.499999, 0.500001)) == "± 3e-06"  # 2.0000000000575e-06, rounded up
    assert bound_words(result(0.5, 0.5, 0.50000075)) == "± 2e-06"  # the farther side
    assert bound_words(result(1.0, 0.999, 1.00000099)) == "± 2e-03"
    assert bound_words(result(0.0, 0.0, 9.5e-300)) == "± 1e-299"
    assert bound_words(result(0.5, None, None)) == "estimate, no bound"
    assert bound_words(result(1.0, 1.0, 1.0)) == "exact"


def test_hours_are_grouped() -> None:
    assert hours_words(Fraction(87600)) == "87 600 h"
    assert hours_words(Fraction(1, 3)) == "0.333333 h"
