"""What a report says follows from its spec and its solution, and from nothing else."""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from markov.documents import transition_table
from markov.documents.chains import chains_of
from markov.documents.numbering import labels, placed
from markov.documents.report import Report, make_report
from markov.documents.second_method import Comparison, comparisons
from markov.documents.tree import Section
from markov.evaluation import build_space, solve_model
from markov.output.wording import value_words
from markov.results import Result
from markov.spec import read, read_text
from tests.documents.plants import ALIKE, HATCHES, PUMPS, rows, separate, spans, table, whole_text


@pytest.fixture(autouse=True)
def no_diagrams(monkeypatch: pytest.MonkeyPatch) -> None:
    """Diagrams take longest and are looked at elsewhere."""
    monkeypatch.setattr(transition_table, "chain_figures", lambda model, chain: ())


@pytest.fixture(scope="module")
def drawn() -> Report:
    return make_report(read_text(ALIKE))


@cache
def _made(spec: str) -> Report:
    return make_report(read_text(spec))


@pytest.fixture
def pumps(no_diagrams: None) -> Report:
    return _made(PUMPS)


@pytest.fixture
def hatches(no_diagrams: None) -> Report:
    return _made(HATCHES)


# --- title block, sections, references


def test_the_title_block_names_reference_revision_and_spec(pumps: Report) -> None:
    facts = dict(pumps.document.facts)
    assert pumps.document.title == "Wash water"
    assert (facts["Reference"], facts["Revision"], facts["Checked by"]) == ("WW-1", "C", "nobody")
    assert facts["SHA-256 of the spec"] == read_text(PUMPS).sha256
    assert facts["Made by"] == f"markov {pumps.solution.version}"


def test_a_missing_revision_is_told(hatches: Report) -> None:
    facts = dict(hatches.document.facts)
    assert facts["Reference"] == facts["Revision"] == "not stated in the spec"


def test_a_report_has_every_section_that_a_safety_case_needs(pumps: Report) -> None:
    headings = [block.heading for block in pumps.document.blocks if isinstance(block, Section)]
    assert headings == [
        "What this is about",
        "Requirements and verdicts",
        "The system",
        "Data and their sources",
        "Assumptions",
        "Conditions of use",
        "Results",
        "From requirements to parameters and back",
        "How the numbers were obtained",
        "The chain",
        "Cautions",
    ]


@pytest.mark.parametrize("spec", [PUMPS, HATCHES, ALIKE, separate(14)], ids=["pumps", "tests", "alike", "parts"])
def test_every_reference_leads_somewhere(spec: str) -> None:
    document = make_report(read_text(spec)).document
    anchors = labels(placed(document))  # refuses an anchor that is used twice
    targets = {span.target for span in spans(document) if span.kind == "link"}
    assert targets
    assert targets <= set(anchors)


# --- data


def test_what_has_no_source_is_marked(pumps: Report) -> None:
    sources = {row["Parameter"]: row["Source"] for row in rows(pumps, "parameters")}
    assert sources["pump_failures"] == "invented"
    assert sources["mending"] == sources["spare_word"] == "unsupported"
    values = {row["Key of the spec"]: row["Rests on"] for row in rows(pumps, "values")}
    assert values["units.pump.repair_time"] == "mending"
    assert values["groups.pumps.switchover.uncovered.time"] == "unsupported"


def test_values_stand_as_written_and_per_hour(pumps: Report) -> None:
    failures, mending, covered, _ = rows(pumps, "parameters")
    assert (failures["As written"], failures["Value"], failures["Unit"]) == ("100 per million hours", "1e-04", "/h")
    assert failures["Uncertainty"] == "7 failures in 70000 h"
    assert (mending["Value"], mending["Unit"], mending["Uncertainty"]) == ("20", "h", "not stated")
    assert (covered["Value"], covered["Unit"]) == ("0.95", "1")
    assert covered["Uncertainty"] == "90 % (5 % point) to 99 % (95 % point)"


def test_lines_of_the_spec_are_told_where_it_stands_in_a_file(tmp_path: Path) -> None:
    path = tmp_path / "plant.yaml"
    path.write_text(PUMPS, encoding="utf-8")
    report = make_report(read(path))
    lines = PUMPS.splitlines()
    for row in rows(report, "parameters"):
        assert row["Parameter"] in lines[int(row["Line"]) - 1]
    for number, row in enumerate(rows(report, "trace"), 1):
        assert f"W-{number}" in lines[int(row["Line"]) - 1]
    (failing,) = (row for row in rows(report, "transitions") if "uncovered" in row["Cause"])
    told = [lines[int(number) - 1] for number in failing["Lines"].split(", ")]
    assert any("failure_rate" in line for line in told)
    assert any("coverage" in line for line in told)


# --- the transition table


@pytest.mark.parametrize("spec", [PUMPS, ALIKE], ids=["pumps", "alike"])
def test_every_arrow_is_a_row_and_every_row_an_arrow(spec: str) -> None:
    model = read_text(spec)
    space = build_space(model)
    wanted: dict[tuple[int, int], Fraction] = {}
    arrows = space.arrows
    for source, target, kind, multiple in zip(
        arrows.source.tolist(), arrows.target.tolist(), arrows.kind.tolist(), arrows.multiple.tolist(), strict=True
    ):
        if source != target:
            rate = space.kinds.rates.rates[space.kinds.kinds[kind].rate].exact * multiple
            wanted[source, target] = wanted.get((source, target), Fraction(0)) + rate
    found: dict[tuple[int, int], float] = {}
    report = make_report(model)
    for row in rows(report, "transitions"):
        assert row["Cause"]
        assert row["Formula"]
        assert row["Unit"] == "/h"
        ends = int(row["From"]), int(row["To"])
        found[ends] = found.get(ends, 0.0) + float(row["Value"])
    assert set(found) == set(wanted)
    assert len(found) == report.solution.transitions
    for ends, value in found.items():
        assert value == pytest.approx(float(wanted[ends]), rel=1e-5)


def test_states_have_a_row_each_with_their_condition(pumps: Report) -> None:
    space = build_space(read_text(PUMPS))
    found = rows(pumps, "states")
    assert [row["What it is"] for row in found] == [space.label(state) for state in range(space.size)]
    assert [row["Condition"].startswith("up") for row in found] == space.up.tolist()
    assert found[0]["Condition"] == "up; starts here"
    assert sum(float(row["Long-run share"]) for row in found) == pytest.approx(1.0, rel=1e-4)


def test_assumption_numbers_in_the_table_lead_to_those_assumptions(pumps: Report) -> None:
    (repair, *_) = (row for row in rows(pumps, "transitions") if row["Cause"].startswith("repair"))
    numbers = [int(number) for number in repair["Assumptions"].split(", ")]
    told = [pumps.solution.assumptions[number - 1] for number in numbers]
    assert any(each.startswith("units.pump.repair_stages") for each in told)


def test_groups_that_are_alike_are_listed_as_merged() -> None:
    (row,) = rows(make_report(read_text(ALIKE)), "merged")
    assert sorted(row.values()) == ["left", "right"]


def test_jumps_at_fixed_instants_are_rows_with_a_chance(hatches: Report) -> None:
    found = rows(hatches, "transitions")
    jumps = [row for row in found if row["Unit"] == "chance"]
    assert jumps
    assert all("trial" in row["When"] for row in jumps)
    assert all(0 < float(row["Value"]) <= 1 for row in jumps)
    leaving: dict[str, float] = {}
    for row in jumps:
        leaving[row["From"]] = leaving.get(row["From"], 0.0) + float(row["Value"])
    assert max(leaving.values()) <= 1 + 1e-9
    assert {row["Unit"] for row in found} == {"chance", "/h"}


def test_a_long_table_is_cut_by_failure_frequency_and_whole_in_the_sheet(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = make_report(read_text(PUMPS))
    monkeypatch.setattr(transition_table, "LISTED_UP_TO", 3)
    cut = make_report(read_text(PUMPS))
    found = rows(cut, "transitions")
    assert len(found) == 3
    up = {row["State"]: row["Condition"].startswith("up") for row in rows(whole, "states")}
    share = {row["State"]: float(row["Long-run share"]) for row in rows(whole, "states")}
    failing = [row for row in rows(whole, "transitions") if up[row["From"]] and not up[row["To"]]]
    failing.sort(key=lambda row: -share[row["From"]] * float(row["Value"]))
    assert found[:2] == failing[:2]
    assert {row["State"] for row in rows(cut, "states")} >= {row["From"] for row in found}
    assert "Nothing was left out of the solution" in whole_text(cut.document)
    assert "make 100 % of the failure frequency" in whole_text(cut.document)
    (sheet,) = (sheet for sheet in cut.sheets if sheet.name == "transitions")
    lines = list(sheet.rows())
    assert [line[:4] for line in lines] == [
        (row["From"], row["To"], row["Cause"], row["Formula"]) for row in rows(whole, "transitions")
    ]


def test_parts_that_share_nothing_are_listed_apart() -> None:
    report = make_report(read_text(separate(14)))
    assert report.solution.parts == 14
    names = [each.name for each in report.document.tables()]
    assert [name for name in names if name.startswith("transitions")] == [f"transitions-{n}" for n in range(1, 15)]
    assert "the plant was solved in independent parts" in whole_text(report.document)
    assert len(rows(report, "transitions-3")) == 6


# --- results, verdicts, trace


def test_verdicts_and_results_are_those_of_the_solution(pumps: Report) -> None:
    assert [(row["Requirement"], row["Verdict"]) for row in rows(pumps, "verdicts")] == [
        (target.id, target.verdict) for target in pumps.solution.targets
    ]
    assert len(rows(pumps, "results")) == len(pumps.solution.results)
    for row, result in zip(rows(pumps, "results"), pumps.solution.results, strict=True):
        assert row["Value"] == value_words(result.measure, result.value)


def test_a_value_that_rounds_to_its_limit_is_missed() -> None:
    exact = solve_model(read_text(PUMPS)).result("failures_per_year").value
    assert exact is not None
    below = f"{exact * (1 - 1e-9):.15g}"
    report = make_report(read_text(PUMPS.replace("at_most: 0.01", f"at_most: {below}")))
    row = rows(report, "verdicts")[1]
    assert row["Verdict"] == "missed"
    assert float(row["Result"].removesuffix("/y")) == pytest.approx(float(below), rel=1e-6)


def test_a_result_sheet_holds_every_digit(pumps: Report) -> None:
    (sheet,) = (sheet for sheet in pumps.sheets if sheet.name == "results")
    for line, result in zip(sheet.rows(), pumps.solution.results, strict=True):
        assert [float(cell) if cell else None for cell in line[5:8]] == [result.value, result.lower, result.upper]


def test_the_trace_goes_forth_and_back(pumps: Report) -> None:
    forth = {row["Requirement"]: row["Parameters, by influence"] for row in rows(pumps, "trace")}
    assert "pump_failures (+" in forth["W-2"]
    assert "covered (−" in forth["W-2"]
    assert "spare_word" not in forth["W-1"] + forth["W-2"]
    back = {row["Parameter"]: row for row in rows(pumps, "trace-back")}
    assert back["spare_word"]["Used by"] == "nothing in the spec"
    assert back["spare_word"]["Requirements whose result it moves"] == "none"
    assert back["mending"]["Used by"] == "units.pump.repair_time"
    for name in ("pump_failures", "covered"):
        (told,) = (part for part in forth["W-2"].split(", ") if part.startswith(name))
        assert told.replace(name, "W-2") in back[name]["Requirements whose result it moves"]


def test_influence_is_the_change_in_percent_per_percent(pumps: Report) -> None:
    def failures(rate: str) -> float:
        value = solve_model(read_text(PUMPS.replace("100 per million hours", rate))).result("failures_per_year").value
        assert value is not None
        return value

    slope = np.log(failures("100.001 per million hours") / failures("99.999 per million hours")) / np.log(
        100.001 / 99.999
    )
    told = {row["Requirement"]: row["Parameters, by influence"] for row in rows(pumps, "trace")}["W-2"]
    (part,) = (each for each in told.split(", ") if each.startswith("pump_failures"))
    assert float(part.split("(+")[1].rstrip(")")) == pytest.approx(float(slope), rel=5e-3)


def test_without_derivatives_all_parameters_behind_the_chain_are_named() -> None:
    text = HATCHES.replace("title:", "parameters: {rate: 1e-5 /h, unused: 3 h}\ntitle:").replace("1e-5 /h,", "rate,", 2)
    text = text.replace("{rate: rate,", "{rate: 1e-5 /h,")
    report = make_report(read_text(text))
    (row,) = rows(report, "trace")
    assert row["Parameters, by influence"] == "rate"
    assert "fixed instants" in whole_text(report.document)


# --- assumptions


def effects(report: Report) -> dict[str, str]:
    return {
        row["Left unsaid, taken as"].split(": ")[0]: row["Effect if it is otherwise"]
        for row in rows(report, "assumptions")
    }


def test_every_choice_left_unsaid_has_a_number_and_an_effect(pumps: Report) -> None:
    found = rows(pumps, "assumptions")
    assert tuple(row["Left unsaid, taken as"] for row in found) == pumps.solution.assumptions
    assert [row["No."] for row in found] == [str(number) for number in range(1, len(found) + 1)]
    assert all(row["Effect if it is otherwise"] for row in found)
    assert not any(row["Effect if it is otherwise"].startswith("Depends on the plant") for row in found)


@pytest.mark.parametrize(
    ("key", "old", "new"),
    [
        ("units.pump.start_failure", "repair_time: mending", "repair_time: mending, start_failure: 1 %"),
        ("units.pump.logistic_delay", "repair_time: mending", "repair_time: mending, logistic_delay: 8 h"),
        ("units.pump.repair_stages", "repair_time: mending", "repair_time: mending, repair_stages: 3"),
        ("groups.pumps.switchover.time", "{coverage: covered,", "{coverage: covered, time: 1 min,"),
        ("common_causes", "system: pumps", "common_causes: {c: {members: [pumps], beta: 2 %}}\nsystem: pumps"),
        ("repair_when", "redundancy: cold_standby", "redundancy: cold_standby\n    repair_when: system_down"),
    ],
)
def test_the_effect_of_an_example_is_what_the_spec_with_it_gives(pumps: Report, key: str, old: str, new: str) -> None:
    assert old in PUMPS
    told = effects(pumps)[key]
    solution = solve_model(read_text(PUMPS.replace(old, new)))
    for measure in ("steady_state_unavailability", "unreliability"):
        value, before = solution.result(measure).value, pumps.solution.result(measure).value
        assert value is not None
        assert before is not None
        if abs(value / before - 1) > 1e-6:
            assert f"({value_words(measure, value, 4)})" in told
    for target, other in zip(pumps.solution.targets, solution.targets, strict=True):
        assert (f"{target.id} would be {other.verdict}" in told) == (target.verdict != other.verdict)


def test_a_chain_beyond_the_limit_gets_words_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("markov.documents.what_if._WORK", 3)
    told = effects(make_report(read_text(PUMPS)))
    assert (
        told["units.pump.start_failure"]
        == "A start that fails costs a standby at the moment of need: results get worse."
    )


# --- numerics


def result(measure: str, value: float) -> Result:
    return Result(measure, None, None, None, None, value, value, value, "1", "")


@pytest.mark.parametrize(
    ("value", "other", "digits"),
    [(1.0, 1.0, 15), (1.0, 1.0 + 3e-9, 8), (2e-9, 2.2e-9, 1), (1.0, 3.0, 0), (1e-5, 1e-5 * (1 + 2e-16), 15)],
)
def test_digits_agreed_in_are_counted(value: float, other: float, digits: int) -> None:
    assert Comparison(result("unreliability", value), other).agreed_digits == digits


def test_the_second_method_agrees_where_the_answer_is_known() -> None:
    model = read_text("units: {u: {failure_rate: 1e-3 /h, repair_time: 10 h}}\nsystem: u\nmission: {time: 100 h}\n")
    found = {each.result.measure: each.other for each in comparisons(solve_model(model), chains_of(model)[0])}
    assert found["steady_state_unavailability"] == pytest.approx(1e-3 / (1e-3 + 0.1), rel=1e-13)
    assert found["mean_time_to_first_failure"] == pytest.approx(1000.0, rel=1e-13)
    assert found["unreliability"] == pytest.approx(-np.expm1(-0.1), rel=1e-12)
    assert found["failures_per_year"] == pytest.approx(8760 * 1e-4 / 0.101, rel=1e-13)


def test_the_second_method_does_not_see_the_first(pumps: Report) -> None:
    model = read_text(PUMPS)
    (chain,) = chains_of(model)
    other = solve_model(read_text(PUMPS.replace("100 per million", "150 per million")))
    assert all(each.agreed_digits == 0 for each in comparisons(other, chain))
    assert min(each.agreed_digits for each in comparisons(pumps.solution, chain)) >= 10


def test_a_plant_that_may_be_lost_is_reported() -> None:
    text = PUMPS.replace("{outcome: manual_takeover, time: 1 h}", "{outcome: lost}")
    report = make_report(read_text(text))
    assert any("never left" in row["Condition"] for row in rows(report, "states"))


def test_a_chain_written_by_hand_is_reported() -> None:
    text = """
states: {good: {up: true, initial: true}, bad: {up: false}}
transitions:
  - {from: good, to: bad, rate: 1e-3 /h, cause: it breaks}
  - {from: bad, to: good, mean_time: 5 h, cause: mended}
"""
    report = make_report(read_text(text))
    assert [row["Cause"] for row in rows(report, "transitions")] == ["it breaks", "mended"]
    assert "written by hand" in whole_text(report.document)


def test_cautions_defer_to_local_codes_and_licensed_practice(pumps: Report) -> None:
    text = whole_text(pumps.document)
    assert "local codes and licensed practice decide" in text
    assert "No common cause is modelled" in text
    assert read_text(PUMPS).sha256 in text


def test_the_diagram_has_words_for_those_who_do_not_see_it(drawn: Report) -> None:
    figures = list(drawn.document.figures())
    assert figures
    assert all(figure.alt and figure.svg and figure.png and figure.pdf for figure in figures)


def test_names_stand_as_they_are_written() -> None:
    name = "=a|b <c> & $d_e$ Насос"
    text = PUMPS.replace("pumps", f"'{name}'").replace("pump:", "'<unit>':").replace("unit: pump,", "unit: <unit>,")
    text = text.replace("repairs: [pump]", "repairs: ['<unit>']")
    report = make_report(read_text(text))
    assert rows(report, "groups")[0]["Group"] == name
    assert rows(report, "units")[0]["Kind of unit"] == "<unit>"
    assert effects(report)["units.<unit>.start_failure"].startswith("A start that fails")
    assert "With 1 % failed starts" in effects(report)["units.<unit>.start_failure"]
    assert table(report, "transitions").rows
