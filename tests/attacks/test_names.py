"""Attack 40: names with markup, formula signs and other scripts come out as they went in, everywhere."""

import json
import re
import xml.etree.ElementTree as ET

import pytest

from tests.cli.program import Program

NAMES = [
    "a|b",
    "<b>x</b>",
    "</text><script>alert(1)</script>",
    "R&D &lt; &#60;",
    "[red]hot[/red]",
    "[/]",
    "[link=file:///etc/passwd]x",
    ":warning:",
    "$\\lambda_{1}^{2}$ \\input{x} %",
    "=1+2",
    "+1",
    "-1",
    "@SUM(A1)",
    '=HYPERLINK("http://x","y")',
    "насос № 2",
    "給水ポンプ",
    "مضخة",
    "{curly}",
    "back\\slash\\n",
    'it\'s "quoted"',
    "a]]>b",
    "%s %d {0}",
    "../../etc/passwd",
    "#comment",
    "* & !",
]


def quoted(name: str) -> str:
    return json.dumps(name, ensure_ascii=False)


def spec(name: str) -> str:
    """A spec that bears one name wherever a name may stand."""
    unit, group, crew, parameter, target = (quoted(f"{name} {kind}") for kind in "ugcpt")
    return (
        f"title: {quoted(name)}\nreference: {{document: {quoted(name)}}}\n"
        f"parameters: {{{parameter}: {{value: 1e-3 /h, source: {quoted(name)}}}, {quoted(name + ' unused')}: 5 h}}\n"
        f"units: {{{unit}: {{failure_rate: {parameter}, repair_time: 10 h}}}}\n"
        f"groups: {{{group}: {{members: [{{unit: {unit}, count: 2}}], redundancy: cold_standby}}}}\n"
        f"crews: {{{crew}: {{size: 1, repairs: [{unit}]}}}}\nsystem: {group}\nmission: {{time: 100 h}}\n"
        f"targets:\n  - {{id: {target}, measure: unavailability, of: {group}, at_most: 0.5}}\n"
        f"  - {{id: {quoted(name)}, measure: crew_utilisation, of: {crew}, at_most: 0.5}}\n"
    )


def flat(text: str) -> str:
    """Text with all white space removed: cells of a table may be folded."""
    return "".join(text.split())


@pytest.mark.parametrize("name", NAMES)
def test_a_name_survives_in_json(program: Program, name: str) -> None:
    told = program.solve(spec(name))
    assert told.status == 0, told.err
    assert told.json["title"] == name
    assert told.verdicts == {f"{name} t": "met", name: "met"}
    assert told.result("unavailability", of=f"{name} g")["value"] is not None
    assert any(f"{name} unused" in warning for warning in told.json["warnings"])
    assert any(f"{name} u" in choice for choice in told.json["assumptions"])


@pytest.mark.parametrize("name", NAMES)
def test_a_name_survives_in_the_table(program: Program, monkeypatch: pytest.MonkeyPatch, name: str) -> None:
    monkeypatch.setenv("COLUMNS", "400")
    out = program.table(spec(name)).out
    assert out.splitlines()[0].rstrip() == name
    rows = [line for line in out.splitlines() if line.startswith("  ")]
    assert any(line.startswith(f"  {name} t ") and " met " in line for line in rows)
    assert any(f"crew utilisation of {name} c" in line for line in rows)
    assert any(f"{name} unused" in line for line in rows)
    told = program("check", program.file(spec(name))).out
    assert told.splitlines()[0].rstrip() == name
    assert f"{name} unused" in told


def test_a_name_that_is_long_is_folded_and_not_cut(program: Program) -> None:
    name = "x" * 60 + "y" * 50
    out = program.table(spec(name)).out
    assert "…" not in out
    assert out.splitlines()[0].rstrip() == name
    noted = out.split("\nWarnings\n")[1].split("\nCautions\n")[0]
    assert flat(f"parameters.{name} unused") in flat(noted)


@pytest.mark.parametrize("name", NAMES)
def test_a_name_survives_in_a_drawing_that_parses(program: Program, name: str) -> None:
    told = program("draw", program.file(spec(name)), "plant.svg")
    assert told.status == 0, told.err
    root = ET.parse("plant.svg").getroot()
    words = [element.text or "" for element in root.iter()]
    assert not any(element.tag.endswith("script") for element in root.iter())
    assert any(name in word for word in words)
    everything = flat("".join(words))
    assert flat(f"{name} u: 2 failed") in everything
    assert flat(f"{name} p") in everything


@pytest.mark.parametrize("name", NAMES)
def test_a_name_survives_in_graphviz_source(program: Program, name: str) -> None:
    told = program("draw", program.file(spec(name)), "plant.dot")
    assert told.status == 0, told.err
    source = (program.folder / "plant.dot").read_text(encoding="utf-8")
    # Outside of quoted texts no part of a name is left: no name can end its quotes.
    bare = re.sub(r'"(?:[^"\\]|\\.)*"', "", source)
    assert '"' not in bare
    assert not set("<>|$№=*") & set(re.sub(r"->|[a-z]+=", "", bare))


@pytest.mark.parametrize(
    ("ending", "name"), [*(("pdf", name) for name in NAMES), *(("png", name) for name in NAMES[::5])]
)
def test_a_name_stops_no_drawing(program: Program, ending: str, name: str) -> None:
    assert program("draw", program.file(spec(name)), f"plant.{ending}").status == 0


@pytest.mark.parametrize("name", NAMES)
def test_a_name_survives_in_a_message(program: Program, name: str) -> None:
    (line,) = program.refused(f"units: {{u: {{failure_rate: 1 /y}}}}\nsystem: {quoted(name)}\n")
    assert f"`{name}`" in line


@pytest.mark.parametrize("name", ["two\nlines", "tab\there", "", " ", "x" * 200])
def test_what_is_no_name_is_refused(program: Program, name: str) -> None:
    program.refused(f"units: {{{quoted(name)}: {{failure_rate: 1 /y}}}}\nsystem: {quoted(name)}\n")


@pytest.mark.parametrize("character", ["\x1b[31m", "\x00", "\x07", "\x7f", "\u202e"])
def test_control_characters_do_not_reach_the_terminal(program: Program, character: str) -> None:
    for written in (character, quoted(character)[1:-1]):
        text = f'units: {{"x{written}y": {{failure_rate: 1 /y}}}}\nsystem: "x{written}y"\n'
        told = program("solve", program.file(text))
        assert character not in told.out
        assert character not in told.err
