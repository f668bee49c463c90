"""From chains to state diagrams: columns, conditions, formulas, legend."""

from pathlib import Path

import pytest

from markov.errors import TooLarge
from markov.evaluation import build_space
from markov.output import state_diagram as module
from markov.output.diagram import Labels, StateDiagram, arrow_lines
from markov.output.drawing import write_diagram
from markov.output.state_diagram import state_diagram
from markov.spec import read, read_text


def diagram(text: str, *, labels: Labels = "formulas") -> StateDiagram:
    model = read_text(text, "spec")
    return state_diagram(model, build_space(model), labels=labels)


def label_lines(found: StateDiagram) -> list[tuple[str, ...]]:
    return [arrow_lines([arrow], found.labels) for arrow in sorted(found.arrows, key=lambda arrow: arrow.label)]


def of_example(checkout: Path, name: str) -> StateDiagram:
    model = read(checkout / "specs" / f"{name}.yaml")
    return state_diagram(model, build_space(model))


def test_the_lock_stands_in_columns_by_failed_units(checkout: Path) -> None:
    lock = of_example(checkout, "harbour_lock")
    assert [(node.level, node.condition, node.initial) for node in lock.nodes] == [
        (0, "up", True),
        (1, "degraded", False),
        (2, "down", False),
        (1, "down", False),
    ]
    assert len(lock.arrows) == 9
    assert {arrow.kind for arrow in lock.arrows if arrow.source == 3} == {"restoration", "fault"}
    assert lock.columns == "failed units"


def test_the_legend_names_each_symbol_once_with_its_value(checkout: Path) -> None:
    legend = {entry.symbol: entry.value for entry in of_example(checkout, "harbour_lock").legend}
    assert legend == {
        "drive_failures": "0.0002 /h",
        "takeover_coverage": "0.95",
        "q(drive)": "0.02",
        "μ(drive)": "0.0416667 /h",
        "T(gate_drive)": "0.75 h",
    }


def test_a_hand_written_chain_stands_in_columns_by_steps_and_explains_its_parameters(checkout: Path) -> None:
    ramp = of_example(checkout, "ferry_ramp_control")
    assert ramp.columns == "steps"
    assert [node.level for node in ramp.nodes] == [0, 1, 1, 2, 3]
    assert [node.condition for node in ramp.nodes] == ["up", "down", "down", "degraded", "down"]
    labels = {(arrow.source, arrow.target): (arrow.label, arrow.kind) for arrow in ramp.arrows}
    assert labels[0, 1] == ("2·fault·recognised", "fault")
    assert labels[1, 3] == ("1/pause", "restoration")
    assert ("restart", "source: invented for this example", "0.2 h") in [
        (entry.symbol, entry.meaning, entry.value) for entry in ramp.legend
    ]


def test_a_parameter_without_a_source_is_marked() -> None:
    text = "parameters: {f: 2e-3 /h}\nstates: {a: {up: true, initial: true}, b: {up: false}}\n"
    found = diagram(f"{text}transitions: [{{from: a, to: b, rate: f}}]\n")
    assert [entry.meaning for entry in found.legend] == ["no source: unsupported"]
    assert [node.final for node in found.nodes] == [False, True]


def test_states_that_are_never_entered_stand_last() -> None:
    text = "states: {a: {up: true, initial: true}, b: {up: false}, c: {up: true}}\n"
    found = diagram(f"{text}transitions: [{{from: a, to: b, rate: 1 /h}}, {{from: c, to: a, rate: 1 /h}}]\n")
    assert [node.level for node in found.nodes] == [0, 1, 2]


def test_values_stand_beside_the_formulas_when_asked_for() -> None:
    text = "units: {a: {failure_rate: 3 /h, repair_time: 4 h}}\nsystem: a\n"
    assert label_lines(diagram(text)) == [("λ(a)",), ("μ(a)",)]
    assert label_lines(diagram(text, labels="both")) == [("λ(a)", "= 3/h"), ("μ(a)", "= 0.25/h")]
    assert label_lines(diagram(text, labels="values")) == [("3/h",), ("0.25/h",)]


def test_alike_items_are_summed_in_one_formula() -> None:
    group = "{members: [{unit: a, count: 3}], redundancy: active}"
    text = f"units: {{a: {{failure_rate: 3 /h}}}}\ngroups: {{g: {group}}}\nsystem: g\n"
    assert [arrow.label for arrow in diagram(text).arrows] == ["3·λ(a)", "2·λ(a)", "λ(a)"]


def test_three_hundred_states_are_folded_and_say_so(tmp_path: Path) -> None:
    units = ", ".join(f"u{at}: {{failure_rate: {at + 1}e-3 /h, repair_time: 10 h}}" for at in range(8))
    system = ", ".join(f"u{at}" for at in range(8))
    found = diagram(f"units: {{{units}}}\nsystem: {{any_of: [{system}]}}\n")
    assert len(found.nodes) == 256
    drawn = write_diagram(found, tmp_path / "plant.svg", engine="own")
    assert any("folded" in note.lower() for note in drawn.notes)
    assert "256 states" in (tmp_path / "plant.svg").read_text(encoding="utf-8")


def test_far_too_many_states_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "DRAWING_LIMIT", 1)
    with pytest.raises(TooLarge, match="2 states are too many to draw"):
        diagram("units: {a: {failure_rate: 3 /h, repair_time: 4 h}}\nsystem: a\n")


def test_what_tests_do_is_drawn_as_instants_of_their_own_kind(checkout: Path) -> None:
    fans = of_example(checkout, "road_tunnel_fans")
    instants = [arrow for arrow in fans.arrows if arrow.kind == "instant"]
    assert {arrow.label for arrow in instants} == {"at trial run", "at trial run, overhaul"}
    hidden = next(node.number for node in fans.nodes if "overhaul" in " ".join(node.lines) and node.level == 1)
    assert [arrow.label for arrow in instants if arrow.source == hidden] == ["at trial run", "at trial run, overhaul"]
    assert any("trial run every 4 380 h" in remark for remark in fans.remarks)


def test_a_chance_at_an_instant_is_told_and_never_taken_for_a_rate() -> None:
    text = (
        "units: {a: {failure_rate: 1e-4 /h, repair_time: 4 h, detected: 0 %}}\n"
        "tests: {trial: {of: a, interval: 1 y, causes_failure: 25 %}}\nsystem: a\n"
    )
    instants = [arrow for arrow in diagram(text, labels="values").arrows if arrow.kind == "instant"]
    assert "at trial, chance 0.25" in {arrow.label for arrow in instants}
    assert all("/h" not in line for arrow in instants for line in arrow_lines([arrow], "both"))


def test_rates_of_some_phases_only_name_them(checkout: Path) -> None:
    cooling = of_example(checkout, "polar_telescope_cooling")
    labels = {(arrow.source, arrow.target): arrow.label for arrow in cooling.arrows if arrow.kind == "restoration"}
    assert labels[1, 0] == "1/repair in summer"
    faults = [arrow.label for arrow in cooling.arrows if (arrow.source, arrow.target) == (0, 1)]
    assert faults == [
        "compressor_failures·coverage in winter",
        "compressor_failures·coverage·summer_load in summer",
    ]


def test_a_state_that_is_up_in_one_phase_alone_says_so() -> None:
    text = (
        "units: {a: {failure_rate: 1e-4 /h}, b: {failure_rate: 1e-4 /h}}\n"
        "system: {any_of: [a, b]}\n"
        "phases: [{name: idle, duration: 10 h}, {name: busy, duration: 5 h, system: {all_of: [a, b]}, repeat: true}]\n"
    )
    lines = {node.lines[-1] for node in diagram(text).nodes if node.level == 1}
    assert lines == {"in busy: down"}


def test_merged_states_say_how_many_they_stand_for() -> None:
    groups = ", ".join(f"g{at}: {{members: [a]}}" for at in range(3))
    text = f"units: {{a: {{failure_rate: 1e-4 /h, repair_time: 4 h}}}}\ngroups: {{{groups}}}\n"
    found = diagram(f"{text}system: {{at_least: 2, of: [g0, g1, g2]}}\n")
    assert [node.lines[-1] for node in found.nodes if node.level in (1, 2)] == ["merged: 3 alike"] * 2
