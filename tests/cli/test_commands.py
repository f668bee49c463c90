"""check, draw, draft, schema, version, help."""

import json
import re
import struct
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

import markov
from markov.cli import app
from markov.spec import draft_text, read_text
from tests.cli.program import Program

PAIR = """
title: Two lamps
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups: {light: {members: [{unit: lamp, count: 2}], redundancy: active}}
system: light
targets: [{id: T, measure: steady_state_availability, at_least: 0.999999}]
"""
ENDINGS = (".svg", ".pdf", ".png", ".dot", ".graphml")


# --- check


def test_check_tells_size_unsaid_choices_and_warnings(program: Program) -> None:
    told = program("check", program.file(PAIR))
    assert told.status == 0
    assert told.err == ""
    assert "Two lamps" in told.out
    assert "3 states, 4 transitions" in told.out
    assert "Choices left unsaid" in told.out
    assert "crews: one crew per unit for lamp" in told.out
    assert "Warnings" in told.out
    assert "No `mission`" in told.out


def test_check_solves_nothing(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*arguments: object) -> object:
        raise AssertionError("solved")

    for solver in ("transient", "stationary", "first_passage"):
        monkeypatch.setattr(f"markov.evaluation.answers.{solver}", refuse)
    told = program("check", program.file(PAIR))
    assert told.status == 0
    assert "availability" not in told.out
    assert program("solve", program.file(PAIR)).status == 4


# --- draw


def kind(path: Path) -> str:
    data = path.read_bytes()
    if data.startswith(b"%PDF-") and data.rstrip().endswith(b"%%EOF"):
        return ".pdf"
    if data.startswith(b"\x89PNG\r\n\x1a\n") and min(struct.unpack(">II", data[16:24])) > 100:
        return ".png"
    if data.startswith(b"digraph") and data.rstrip().endswith(b"}"):
        return ".dot"
    tag = ET.fromstring(data).tag
    return next((ending for ending in (".svg", ".graphml") if tag.endswith(ending[1:])), "")


@pytest.mark.parametrize("ending", [*ENDINGS, ".SVG"])
def test_the_ending_decides_the_format(program: Program, ending: str) -> None:
    told = program("draw", program.file(PAIR), f"lamps{ending}")
    assert told.status == 0
    assert told.out == ""
    assert told.err.startswith(f"lamps{ending}") or f"\nlamps{ending}" in told.err
    assert kind(program.folder / f"lamps{ending}") == ending.lower()


def test_a_drawing_holds_every_state_formula_and_the_hash_of_the_spec(program: Program) -> None:
    path = program.file(PAIR)
    program("draw", path, "lamps.svg")
    words = " ".join(element.text or "" for element in ET.parse("lamps.svg").getroot().iter())
    for expected in ("Two lamps", "all good", "2·λ(lamp)", "μ(lamp)", markov.read(path).sha256[:12]):
        assert expected in words
    assert "0.002/h" not in words


def test_values_stand_beside_the_formulas_if_asked(program: Program) -> None:
    program("draw", program.file(PAIR), "lamps.svg", "--labels", "both")
    assert "0.002/h" in Path("lamps.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize("name", ["lamps", "lamps.jpg", "lamps.svg.txt", "svg"])
def test_an_unknown_ending_is_refused_with_those_that_are_known(program: Program, name: str) -> None:
    told = program("draw", program.file(PAIR), name)
    assert (told.status, told.out) == (2, "")
    assert all(ending in told.err for ending in ENDINGS)
    assert not Path(name).exists()


@pytest.mark.parametrize("ending", ENDINGS)
def test_an_existing_file_is_replaced_only_if_asked(program: Program, ending: str) -> None:
    path = program.folder / f"mine{ending}"
    path.write_text("mine", encoding="utf-8")
    told = program("draw", program.file(PAIR), path)
    assert (told.status, told.out) == (2, "")
    assert "overwrite" in told.err
    assert path.read_text(encoding="utf-8") == "mine"
    assert program("draw", program.file(PAIR), path, "--overwrite").status == 0
    assert kind(path) == ending


def test_a_missing_folder_is_refused_and_not_made(program: Program) -> None:
    told = program("draw", program.file(PAIR), "pictures/lamps.svg")
    assert (told.status, told.out) == (2, "")
    assert "pictures" in told.err
    assert not Path("pictures").exists()


def test_a_call_that_cannot_end_well_does_not_read_the_spec_first(program: Program) -> None:
    told = program("draw", "missing.yaml", "lamps.jpg")
    assert "lamps.jpg" in told.err


# --- draft


def test_a_draft_is_in_order_and_solves(program: Program) -> None:
    assert program("draft", "plant.yaml").status == 0
    assert Path("plant.yaml").read_text(encoding="utf-8") == draft_text()
    told = program("check", "plant.yaml")
    assert told.status == 0
    assert "Warnings" not in told.out
    told = program("solve", "plant.yaml", "--json")
    assert told.status in (0, 1)
    assert set(told.verdicts.values()) <= {"met", "missed"}
    assert all(each["lower"] is not None for each in told.json["results"])


def test_a_draft_is_drawn(program: Program) -> None:
    program("draft", "plant.yaml")
    assert program("draw", "plant.yaml", "plant.svg").status == 0
    assert kind(Path("plant.svg")) == ".svg"


def test_a_draft_is_never_written_over_a_file(program: Program) -> None:
    path = program.file("mine")
    told = program("draft", path)
    assert (told.status, told.out) == (2, "")
    assert "never written over" in told.err
    assert path.read_text(encoding="utf-8") == "mine"


@pytest.mark.parametrize("name", [".", "nowhere/plant.yaml"])
def test_a_draft_needs_a_folder_and_a_name(program: Program, name: str) -> None:
    told = program("draft", name)
    assert (told.status, told.out) == (2, "")
    assert list(program.folder.iterdir()) == []


def test_a_draft_leaves_a_dangling_link_alone(program: Program) -> None:
    Path("plant.yaml").symlink_to("elsewhere.yaml")
    assert program("draft", "plant.yaml").status == 2
    assert not Path("elsewhere.yaml").exists()


# --- schema


def test_the_schema_is_one_json_object_that_names_every_key_of_a_draft(program: Program) -> None:
    told = program("schema")
    assert (told.status, told.err) == (0, "")
    schema = json.loads(told.out)
    assert schema["type"] == "object"
    assert set(read_text(draft_text()).model_fields_set) <= set(schema["properties"])


# --- version, help


def test_the_version_is_that_of_the_package(program: Program) -> None:
    told = program("--version")
    assert (told.status, told.out, told.err) == (0, f"markov {markov.__version__}\n", "")


@pytest.mark.parametrize("flag", ["--help", "-h"])
@pytest.mark.parametrize("command", [None, *sorted(app.commands)])
def test_help_teaches_by_an_example(program: Program, command: str | None, flag: str) -> None:
    told = program(*([command] if command else []), flag)
    assert (told.status, told.err) == (0, "")
    assert re.search(r"^  +markov " + (command or r"\w+"), told.out.split("Example")[1], flags=re.M)


def test_help_explains_the_exit_status(program: Program) -> None:
    words = " ".join(program("--help").out.split())
    for meaning in ("0 all targets met", "1 a target missed", "2 the spec or the call", "3 undecided", "4 an internal"):
        assert meaning in words


@pytest.mark.parametrize("command", sorted(app.commands))
def test_examples_in_the_help_are_calls_that_exist(program: Program, command: str) -> None:
    told = program(command, "--help")
    known = {name for each in app.commands.values() for option in each.params for name in option.opts}
    for called in re.findall(r"markov (\w+)([^|\n&>]*)", told.out.split("Example")[1]):
        assert called[0] in app.commands
        assert set(re.findall(r"--\w+", called[1])) <= known


def test_the_list_of_commands_tells_what_each_does(program: Program) -> None:
    listed = program("--help").out.split("Commands:")[1]
    for command in app.commands:
        assert re.search(rf"^  {command} +\w+", listed, flags=re.M)
