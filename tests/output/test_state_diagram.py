"""From chains to state diagrams: columns, conditions, formulas, legend."""

from pathlib import Path

import pytest

from markov.errors import TooLarge
from markov.evaluation import build_space
from markov.output import state_diagram as module
from markov.output.diagram import StateDiagram
from markov.output.drawing import write_diagram
from markov.output.state_diagram import state_diagram
from markov.spec import read, read_text


def diagram(text: str, *, values: bool = False) -> StateDiagram:
    model = read_text(text, "spec")
    return state_diagram(model, build_space(model), values=values)


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
    found = diagram("units: {a: {failure_rate: 3 /h, repair_time: 4 h}}\nsystem: a\n", values=True)
    assert sorted(arrow.label for arrow in found.arrows) == ["λ(a) = 3/h", "μ(a) = 0.25/h"]


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
