"""A state or an arrow is traced to the lines, the values and the assumptions behind it."""

from __future__ import annotations

import json
from collections.abc import Callable
from fractions import Fraction
from pathlib import Path

import pytest

from markov.documents.arrow_reasons import ArrowReasons
from markov.documents.explain import explain
from markov.documents.explain_words import explanation_json, explanation_text, flat
from markov.documents.explanation import Explanation
from markov.documents.spec_lines import SpecLines, lines_in, lines_of, read_with_lines
from markov.errors import UsageError
from markov.evaluation import build_space
from markov.evaluation.unsaid import unsaid_choices
from markov.model import Model
from markov.states import GeneratedSpace

PUMPS = """\
title: Sump of a dry dock
parameters:
  wear: {value: 100 per million hours, source: log book}
  share: 0.9
  call: share * 0.5
units:
  pump: {failure_rate: wear, repair_time: 20 h}
groups:
  pumps:
    members: [{unit: pump, count: 2}]
    required: 1
    redundancy: hot_standby
    coverage: call
system: pumps
"""

Read = Callable[[str], Model]


@pytest.fixture
def asked(read: Read) -> Callable[..., Explanation]:
    """Explain something of the pumps."""

    def of(*states: str, text: str = PUMPS) -> Explanation:
        return explain(read(text), states, lines=lines_in(text))

    return of


def line_of(text: str, begin: str) -> int:
    """Number of the line that begins so, after blanks."""
    return next(number for number, line in enumerate(text.splitlines(), 1) if line.strip().startswith(begin))


def test_an_arrow_names_its_event_its_formula_and_its_value(asked: Callable[..., Explanation]) -> None:
    found = asked("0", "1")
    assert found.kind == "arrow"
    (covered, waiting) = found.reasons
    assert covered.cause == "pump fails on duty: covered, pump starts"
    assert covered.exact == Fraction(1, 10_000) * Fraction(45, 100)
    assert waiting.cause == "pump fails while waiting"
    assert "wear·call = 4.5e-05 /h" in flat(found.text)
    assert "together 0.000145 /h" in flat(found.text)


def test_each_symbol_leads_to_its_key_its_parameters_and_their_lines(asked: Callable[..., Explanation]) -> None:
    terms = {term.symbol: term for term in asked("0", "1").reasons[0].terms}
    assert [(key.words, key.line) for key in terms["call"].keys] == [
        ("groups.pumps.coverage", line_of(PUMPS, "coverage:")),
        ("parameters.call.value", line_of(PUMPS, "call:")),
        ("parameters.share.value", line_of(PUMPS, "share:")),
    ]
    assert terms["wear"].sources == (("wear", "log book"),)
    assert terms["call"].sources == (("call", "unsupported"), ("share", "unsupported"))
    assert "recognised" in terms["call"].rule


def test_a_complement_leads_to_what_it_is_the_complement_of(asked: Callable[..., Explanation]) -> None:
    space_names = [passage.other.number for passage in asked("0").leaving]
    uncovered = next(number for number in space_names if "uncovered" in asked(str(number)).states[0].name)
    terms = {term.symbol: term for term in asked("0", str(uncovered)).reasons[0].terms}
    assert terms["(1−call)"].meaning == "1 minus the coverage of pumps"
    assert terms["(1−call)"].exact == Fraction(55, 100)
    assert terms["(1−call)"].keys[0].words == "groups.pumps.coverage"


def test_several_items_are_counted_in_words(read: Read) -> None:
    text = PUMPS.replace("hot_standby", "active").replace("count: 2", "count: 3")
    (covered,) = explain(read(text), ("0", "1"), lines=lines_in(text)).reasons
    assert covered.multiple.startswith("3 items can fail")
    assert covered.formula == "3·wear·call"


def test_a_fault_rests_on_other_assumptions_than_a_repair(asked: Callable[..., Explanation]) -> None:
    fault = [text.split(":")[0] for _, text in asked("0", "1").reasons[0].assumptions]
    repair = [text.split(":")[0] for _, text in asked("1", "0").reasons[0].assumptions]
    assert "units.pump.start_failure" in fault
    assert "units.pump.detected" in fault
    assert "units.pump.repair_stages" not in fault
    assert "units.pump.repair_stages" in repair
    assert "crews" in repair
    assert "units.pump.detected" not in repair


def test_further_faults_of_a_down_system_rest_on_what_is_unsaid_about_it(read: Read) -> None:
    text = PUMPS.replace("count: 2", "count: 3").replace("required: 1", "required: 2")
    model = read(text)
    space = build_space(model)
    assert isinstance(space, GeneratedSpace)
    unsaid = unsaid_choices(model, space.plan)
    reasons = ArrowReasons(model, space, unsaid)
    arrows = space.arrows
    rests: dict[bool, set[bool]] = {}
    for source, target, kind in zip(arrows.source.tolist(), arrows.target.tolist(), arrows.kind.tolist(), strict=True):
        if reasons.driver(kind).event == "fault":
            told = {unsaid[number - 1].split(":")[0] for number in reasons.assumptions(source, target, kind)}
            rests.setdefault(bool(space.up[source]), set()).add("while_down" in told)
    assert rests == {True: {False}, False: {True}}


def test_a_state_says_why_it_is_down_and_where_it_leads(asked: Callable[..., Explanation]) -> None:
    found = asked("pump: 2 failed")
    assert "down, because pumps does not deliver" in flat(found.text)
    assert found.states[0].up is False
    total = sum(passage.exact for passage in found.leaving)
    assert total == Fraction(2, 20)
    assert f"one stay lasts {float(1 / total):.6g} h" in flat(found.text)
    assert [(key.words, key.line) for key in found.keys] == [
        ("system", line_of(PUMPS, "system:")),
        ("groups.pumps.members", line_of(PUMPS, "members:")),
        ("groups.pumps.required", line_of(PUMPS, "required:")),
    ]


def test_the_initial_state_names_the_choice_of_the_start(asked: Callable[..., Explanation]) -> None:
    found = asked("0")
    assert "is where the plant begins" in flat(found.text)
    assert [text.split(":")[0] for _, text in found.assumptions] == ["initial"]


def test_numbers_and_names_mean_the_same_state(asked: Callable[..., Explanation]) -> None:
    for number in range(4):
        by_number = asked(str(number))
        assert asked(by_number.states[0].name) == by_number


def test_a_misspelt_state_is_answered_with_the_nearest(asked: Callable[..., Explanation]) -> None:
    with pytest.raises(UsageError, match=r"no state 'pump: 2 faild'.*nearest: \d \(pump: 2 failed\)"):
        asked("pump: 2 faild")


def test_a_number_beyond_the_last_state_is_refused(asked: Callable[..., Explanation]) -> None:
    with pytest.raises(UsageError, match="numbered 0 to"):
        asked("999")


def test_an_arrow_that_is_not_there_is_answered_with_those_that_are(asked: Callable[..., Explanation]) -> None:
    failed = asked("pump: 2 failed").states[0].number
    with pytest.raises(UsageError, match=f"no arrow from state {failed} to state 0; from it arrows lead to"):
        asked(str(failed), "0")
    with pytest.raises(UsageError, match="to itself"):
        asked("0", "0")
    with pytest.raises(UsageError, match="3 states"):
        asked("0", "1", "2")


FERRY = """\
title: Ramp
parameters: {fault: 1e-4 /h, repair: 6 h}
states:
  "7": {up: true, initial: true}
  "0": {up: false}
  lost: {up: false}
transitions:
  - {from: "7", to: "0", rate: 2 * fault, cause: fault}
  - {from: "0", to: "7", mean_time: repair}
  - {from: "0", to: lost, rate: fault}
"""


def test_in_a_hand_written_chain_a_name_comes_before_a_number(read: Read) -> None:
    model = read(FERRY)
    lines = lines_in(FERRY)
    assert explain(model, ("0",), lines=lines).states[0].number == 1
    assert explain(model, ("2",), lines=lines).states[0].name == "lost"


def test_a_hand_written_arrow_leads_to_its_line(read: Read) -> None:
    found = explain(read(FERRY), ("7", "0"), lines=lines_in(FERRY))
    (term,) = found.reasons[0].terms
    assert [(key.words, key.line) for key in term.keys] == [
        ("transitions#1.rate", 8),
        ("parameters.fault.value", 2),
    ]
    assert found.reasons[0].assumptions == ()


def test_a_state_that_is_never_left_says_so(read: Read) -> None:
    assert "never left" in flat(explain(read(FERRY), ("lost",), lines=lines_in(FERRY)).text)


def test_arrows_of_one_phase_and_of_fixed_instants_are_told_apart(checkout: Path) -> None:
    model, lines = read_with_lines(checkout / "specs" / "polar_telescope_cooling.yaml")
    repair = explain(model, ("1", "0"), lines=lines)
    assert [reason.when for reason in repair.reasons] == ["in phase summer"]
    fault = explain(model, ("1", "3"), lines=lines)
    assert {reason.when for reason in fault.reasons} == {"in phase winter", "in phase summer"}
    model, lines = read_with_lines(checkout / "specs" / "road_tunnel_fans.yaml")
    found = explain(model, ("2", "1"), lines=lines)
    assert all(reason.is_chance and reason.exact == 1 for reason in found.reasons)
    assert found.reasons[0].when == "test trial run"
    assert any(key.words == "tests.trial run.interval" and key.line for key in found.reasons[0].rules)
    assert any(text.startswith("tests.trial run.duration") for _, text in found.reasons[0].assumptions)


def test_every_rate_of_every_example_leads_to_a_line(checkout: Path) -> None:
    for path in sorted((checkout / "specs").glob("*.yaml")):
        model, lines = read_with_lines(path)
        space = build_space(model)
        reasons = ArrowReasons(model, space, (), lines)
        for kind in sorted(set(space.arrows.kind.tolist())):
            assert reasons.lines(kind), (path.name, space.kinds.kinds[kind].cause)
            for factor in reasons.factors(kind):
                assert reasons.places.of(factor), (path.name, factor.symbol)


def test_the_lines_hold_what_the_factor_says(checkout: Path) -> None:
    path = checkout / "specs" / "harbour_lock.yaml"
    model, lines = read_with_lines(path)
    written = path.read_text(encoding="utf-8").splitlines()
    space = build_space(model)
    reasons = ArrowReasons(model, space, (), lines)
    checked = 0
    for kind in range(len(space.kinds.kinds)):
        for factor in reasons.factors(kind):
            for place in reasons.places.of(factor):
                line = reasons.places.line(place)
                assert line is not None
                assert reasons.places.text_of(factor) in written[line - 1]
                checked += 1
    assert checked > 10


def test_lines_are_told_only_while_the_file_is_unchanged(tmp_path: Path) -> None:
    path = tmp_path / "pumps.yaml"
    path.write_text(PUMPS, encoding="utf-8")
    model, _ = read_with_lines(path)
    assert lines_of(model).line(("system",)) == line_of(PUMPS, "system:")
    path.write_text(f"# a remark\n{PUMPS}", encoding="utf-8")
    assert lines_of(model).line(("system",)) is None


def test_a_key_that_is_not_written_has_no_line() -> None:
    lines = lines_in("parameters: {a: 1 h}\ngroups:\n  g: {members: [x]}\n")
    assert lines.line(("parameters", "a", "value")) == 1
    assert lines.line(("groups", "g", "members", 0)) == 3
    assert lines.line(("groups", "g", "required")) is None
    assert lines.line(("groups", "g", "members", 4)) is None
    assert SpecLines().line(("groups",)) is None


def test_json_holds_what_the_text_says(asked: Callable[..., Explanation]) -> None:
    found = json.loads(explanation_json(asked("0", "1")))
    assert (found["from"]["number"], found["to"]["number"]) == (0, 1)
    assert found["reasons"][0]["value"] == pytest.approx(4.5e-5, rel=1e-15)
    assert found["reasons"][0]["terms"][0]["keys"][0] == {"key": "units.pump.failure_rate", "line": 7}
    state = json.loads(explanation_json(asked("0")))
    assert state["state"] == {
        "number": 0,
        "name": "pump: 1 on duty + 1 waiting",
        "up": True,
        "initial": True,
        "final": False,
    }
    assert json.loads(explanation_json(asked()))["kind"] == "model"


def test_the_same_text_on_a_rerun(asked: Callable[..., Explanation]) -> None:
    assert explanation_text(asked("0", "1")) == explanation_text(asked("0", "1"))
    assert explanation_text(asked()) == explanation_text(asked())


def test_hostile_names_come_out_whole_and_on_their_line(read: Read) -> None:
    name = "=cmd|' /C'!A0 <b>&$_x שלום" + "é" * 90
    text = PUMPS.replace("  pump: {", f'  "{name}": {{').replace("unit: pump", f'unit: "{name}"')
    model = read(text)
    for states in ((), ("0",), ("0", "1")):
        found = explain(model, states, lines=lines_in(text))
        assert name in flat(found.text)
        assert all(character.isprintable() or character == "\n" for character in explanation_text(found))
        assert name in json.loads(explanation_json(found))["text"]


def test_text_that_would_steer_a_terminal_is_spelled_out(read: Read) -> None:
    text = FERRY.replace("cause: fault", 'cause: "a\\u202eb\\nc"')
    told = explanation_text(explain(read(text), ("7", "0"), lines=lines_in(text)))
    assert "a\\u202eb\\nc" in told
    assert all(character.isprintable() or character == "\n" for character in told)


# ------------------------------------------------------------------------------------------- the first paragraph


def paragraph(path: Path) -> str:
    model, lines = read_with_lines(path)
    return flat(explain(model, lines=lines).text)


def test_the_first_paragraph_says_plant_results_verdicts_and_grounds(checkout: Path) -> None:
    told = paragraph(checkout / "specs" / "harbour_lock.yaml")
    assert told.startswith("Harbour lock gate drive delivers while gate_drive is up")
    assert "2 × drive, 1 required, cold standby" in told
    assert "0.999874485" in told
    assert "LOCK-2 is missed (failures per year 0.128652 where at most 0.10 is wanted)" in told
    assert "2 parameters, 1 of them without a source" in told
    assert "local codes and licensed practice" in told


def test_the_first_paragraph_of_a_hand_written_chain_speaks_of_no_units(checkout: Path) -> None:
    told = paragraph(checkout / "specs" / "ferry_ramp_control.yaml")
    assert "given as a chain written by hand with 5 states, 2 of them up" in told
    assert "RAMP-2 is missed" in told


def test_the_first_paragraph_of_a_plant_without_targets_says_so(asked: Callable[..., Explanation]) -> None:
    assert "No target is set." in flat(asked().text)
