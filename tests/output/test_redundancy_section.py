"""What redundancy gains and costs, on paper: table, JSON, notebook."""

import json

import pytest

import markov
from markov.evaluation import price
from markov.evaluation.dependence import DEPENDENCES
from markov.output.as_json import solution_json
from markov.output.notebook import solution_html
from markov.output.redundancy import gain_words, redundancy_grids
from markov.output.table import solution_text
from markov.output.wording import dependence_words
from markov.results import Figure
from markov.spec import read_text

SPEC = """
units: {'a<b>': {failure_rate: 1e-3 /h, repair_time: 10 h, cost: 7}}
groups:
  'g [x]': {members: [{unit: 'a<b>', count: 2}], redundancy: active, switchover: {coverage: 90 %}}
crews: {c: {size: 1, repairs: ['a<b>']}}
system: 'g [x]'
mission: {time: 100 h}
"""


@pytest.fixture(scope="module")
def solution() -> markov.Solution:
    return markov.solve(read_text(SPEC, "spec"))


def section(text: str) -> list[str]:
    lines = text.splitlines()
    start = lines.index("What redundancy gains and costs")
    return lines[start : lines.index("Choices left unsaid")]


def test_the_section_names_gains_causes_and_costs(solution: markov.Solution) -> None:
    lines = section(solution_text(solution, width=200))
    assert solution.redundancy is not None
    gain = gain_words(solution.redundancy.over_single_unit.long_run)
    assert any(line.startswith("  single units") and gain in line for line in lines)
    assert any(line.startswith("  imperfect coverage (g [x])") for line in lines)
    assert any(line.startswith("  too few crews (c)") for line in lines)
    assert any("Largest cause of the difference in the long run: imperfect coverage (g [x])" in line for line in lines)
    assert any(line.split()[:3] == ["cost", "14", "7"] for line in lines)


def test_what_stands_in_the_section_does_not_stand_among_the_results_too(solution: markov.Solution) -> None:
    text = solution_text(solution, width=200)
    before = text[: text.index("What redundancy gains and costs")]
    assert "steady-state unavailability" in before
    for words in ("gain over single unit", "repairs per year", "crew utilisation"):
        assert words not in before


def test_a_target_keeps_its_measure_among_the_results() -> None:
    text = SPEC + "targets: [{id: T, measure: repairs_per_year, at_most: 100}]\n"
    printed = solution_text(markov.solve(read_text(text, "spec")), width=200)
    results = printed[printed.index("Results") : printed.index("What redundancy gains and costs")]
    assert "repairs per year" in results


def test_json_holds_every_figure_with_its_bound(solution: markov.Solution) -> None:
    found = json.loads(solution_json(solution))["redundancy"]
    assert found["at_hours"] == 100
    assert [effect["dependence"] for effect in found["effects"]] == ["imperfect_coverage", "too_few_crews"]
    assert found["effects"][0]["where"] == ["g [x]"]
    assert found["cause"] == {"long_run": "imperfect_coverage", "mission": "imperfect_coverage"}
    figures = [
        found[f"over_{rival}"][time]
        for rival in ("single_unit", "independent_blocks", "perfect_blocks")
        for time in ("long_run", "mission")
    ]
    figures += [cost[side] for cost in found["costs"] for side in ("system", "plain")]
    for figure in figures:
        assert figure["lower"] <= figure["value"] <= figure["upper"]
    cost = next(each for each in found["costs"] if each["name"] == "cost")
    assert (cost["system"]["value"], cost["plain"]["value"], cost["note"]) == (14, 7, "")


def test_json_says_null_for_a_chain_by_hand(checkout) -> None:
    found = json.loads(solution_json(markov.solve(checkout / "specs" / "ferry_ramp_control.yaml")))
    assert found["redundancy"] is None


def test_a_notebook_shows_the_section_with_names_escaped(solution: markov.Solution) -> None:
    html = solution_html(solution)
    assert "What redundancy gains and costs" in html
    assert "imperfect coverage (g [x])" in html
    assert "<b>" not in html


def test_a_chain_that_is_not_solved_again_is_told_in_one_sentence(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(price, "SOLVED_AGAIN_UP_TO", 2)
    solution = markov.solve(read_text(SPEC, "spec"))
    assert solution.redundancy is not None
    grids = redundancy_grids(solution.redundancy)
    assert grids[1].rows == ()
    assert grids[1].below == (
        "What departs from independent blocks: imperfect coverage (g [x]); too few crews (c). How much each makes: "
        "not solved again: 4 states; at most 2 are."
    )
    assert json.loads(solution_json(solution))["redundancy"]["effects"][0]["factor"]["long_run"]["value"] is None


def test_gains_are_told_in_powers_of_ten() -> None:
    assert gain_words(Figure(1000.0, 999.0, 1001.0)) == "1000 = 10^3.00"
    assert gain_words(Figure(0.05, 0.05, 0.05)) == "0.05 = 10^-1.30"
    assert gain_words(Figure(0.9999999, 0.9, 1.0)) == "1 = 10^0.00"
    assert gain_words(Figure(None, reason="no such thing")) == "no such thing"


def test_every_dependence_has_words_of_its_own() -> None:
    words = [dependence_words(name) for name in DEPENDENCES]
    assert len(set(words)) == len(words)
    assert not any("_" in each for each in words)
