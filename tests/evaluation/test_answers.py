"""Questions that need the start to be a distribution, or that have no answer."""

import numpy as np
import pytest
import scipy.linalg

import markov
from markov.spec import read_text
from markov.states import generate

DRAWN = """
units: {pump: {failure_rate: 1e-2 /h, repair_time: 10 h}}
groups:
  left: {members: [{unit: pump, count: 2}], redundancy: active}
  right: {members: [{unit: pump, count: 1}]}
crews: {crew: {size: 1, repairs: [pump]}}
system: {any_of: [left, right]}
initial: {left.pump: failed, right.pump: failed}
mission: {time: 7 h}
"""


def test_a_start_drawn_among_equals_is_a_distribution() -> None:
    model = read_text(DRAWN, "spec")
    space = generate(model)
    rates = np.zeros((space.size, space.size))
    columns = space.arrows
    for source, target, kind, multiple in zip(
        columns.source, columns.target, columns.kind, columns.multiple, strict=True
    ):
        rates[source, target] += float(space.kinds.rates.rates[space.kinds.kinds[kind].rate].exact) * multiple
    np.fill_diagonal(rates, 0)
    first = np.zeros(space.size)
    for state, chance in space.start:
        first[state] += float(chance)
    assert sorted(first[first > 0]) == [0.5, 0.5]
    generator = rates - np.diag(rates.sum(axis=1))
    later = first @ scipy.linalg.expm(generator * 7)
    inside = generator[np.ix_(space.up, space.up)]
    solution = markov.solve(model, at=[7])
    assert solution.result("unavailability", at_hours=7).value == pytest.approx(later[~space.up].sum(), rel=1e-11)
    assert solution.result("reliability", at_hours=7).value == pytest.approx(
        (first[space.up] @ scipy.linalg.expm(inside * 7)).sum(), rel=1e-11
    )
    assert solution.result("mean_time_to_first_failure").value == pytest.approx(
        first[space.up] @ np.linalg.solve(-inside, np.ones(len(inside))), rel=1e-11
    )


def chain(transitions: str, ups: str = "a b") -> str:
    names = sorted(set(transitions.replace(">", " ").split()))
    states = ", ".join(
        f"{name}: {{up: {'true' if name in ups.split() else 'false'}{', initial: true' if name == 'a' else ''}}}"
        for name in names
    )
    arrows = ", ".join(
        f"{{from: {source}, to: {target}, rate: 1 /h}}"
        for source, target in (pair.split(">") for pair in transitions.split())
    )
    return f"states: {{{states}}}\ntransitions: [{arrows}]\nmission: {{time: 1 h}}\n"


@pytest.mark.parametrize(
    ("transitions", "ups", "measure", "reason"),
    [
        ("a>b a>c", "a b", "steady_state_availability", "down for good"),
        ("a>b b>c c>b a>d d>e e>d", "a b d", "steady_state_availability", "can end in several ways"),
        ("a>b a>c", "a b", "mean_time_to_first_failure", "may never come"),
        ("a>c", "a", "mean_up_time", "no failures to count"),
        ("a>c", "a", "conditional_failure_intensity", "down for good"),
        ("a>b b>a", "a b", "mean_time_to_first_failure", "no down state"),
    ],
)
def test_a_question_without_an_answer_gets_its_reason(transitions: str, ups: str, measure: str, reason: str) -> None:
    result = markov.solve(read_text(chain(transitions, ups), "spec")).result(measure)
    assert result.value is None
    assert result.lower is None
    assert result.upper is None
    assert reason in result.reason


def test_ends_that_are_all_down_or_all_up_have_a_long_run_value() -> None:
    dead = markov.solve(read_text(chain("a>c a>d", "a"), "spec"))
    assert dead.result("steady_state_availability").value == 0
    assert dead.result("steady_state_unavailability").value == 1
    assert dead.result("failures_per_year").value == 0
    assert dead.result("downtime_per_year").value == 8760
    alive = markov.solve(read_text(chain("a>c c>b c>d", "a b d"), "spec"))
    assert alive.result("steady_state_availability").value == 1
    for result in (dead.result("steady_state_availability"), alive.result("steady_state_availability")):
        assert result.lower == result.upper == result.value


def test_nothing_has_happened_at_time_zero() -> None:
    solution = markov.solve(read_text(chain("a>c c>a", "a"), "spec"), at=[0])
    for measure, value in (("reliability", 1), ("unreliability", 0), ("availability", 1), ("expected_failures", 0)):
        result = solution.result(measure, at_hours=0)
        assert (result.value, result.lower, result.upper) == (value, value, value)
    assert solution.result("hazard_rate", at_hours=0).value == 1
    assert "time is zero" in solution.result("mean_availability", at_hours=0).reason


def test_a_system_that_is_down_at_the_start_has_failed() -> None:
    text = chain("a>c c>a", "c")
    solution = markov.solve(read_text(text, "spec"))
    assert solution.result("reliability").value == 0
    assert solution.result("mean_time_to_first_failure").value == 0
    assert "no hazard" in solution.result("hazard_rate").reason
