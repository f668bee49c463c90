"""A faulty spec: all its problems at once, each at its place, on standard error alone."""

import re

import pytest

from tests.cli.program import Program

FAULTY = """\
units:
  pump: {failure_rte: 1e-3 /h, repair_time: 10}
  valve: {failure_rate: -1e-4 /h}
groups:
  pressure: {members: [{unit: pump, count: 2}], required: 3, redundancy: active, coverage: 95}
system: {all_of: [pressure, vlave]}
mission: {time: .inf h}
targets:
  - {id: A, measure: availabilty, at_least: 0.9}
"""
PLACES = [(2, 10), (2, 45), (3, 25), (5, 59), (5, 92), (6, 29), (7, 17), (9, 22)]
COMMANDS = [
    ("solve", "plant.yaml"),
    ("solve", "plant.yaml", "--json"),
    ("solve", "plant.yaml", "--at", "5 h"),
    ("check", "plant.yaml"),
    ("check", "plant.yaml", "--json"),
    ("draw", "plant.yaml", "plant.svg"),
]


@pytest.mark.parametrize("arguments", COMMANDS, ids=" ".join)
def test_every_command_tells_all_problems_and_nothing_else(program: Program, arguments: tuple[str, ...]) -> None:
    program.file(FAULTY)
    told = program(*arguments)
    assert told.status == 2
    assert told.out == ""
    lines = told.err.splitlines()
    assert [tuple(map(int, line.split(":")[1:3])) for line in lines] == PLACES
    assert not (program.folder / "plant.svg").exists()


def test_each_problem_says_what_was_found_what_was_expected_and_a_fix(program: Program) -> None:
    for line in program.refused(FAULTY):
        assert re.fullmatch(r"[^:]*plant\.yaml:\d+:\d+: [^;]+; [^;]+; .+", line), line


def test_places_are_those_of_the_words_at_fault(program: Program) -> None:
    rows = FAULTY.splitlines()
    words = [rows[line - 1][column - 1 :] for line, column in PLACES]
    assert [re.split(r"[:,}\] ]", word)[0] for word in words] == [
        *("failure_rte", "10", "-1e-4", "3", "95", "vlave", ".inf", "availabilty")
    ]


def test_the_file_is_named_as_the_user_named_it(program: Program) -> None:
    program.file(FAULTY)
    assert program("check", "./plant.yaml").err.startswith("./plant.yaml:2:10: ")


@pytest.mark.parametrize(
    ("text", "place"),
    [
        ("", "1:1"),
        ("# nothing but a comment\n", "1:1"),
        ("just words", "1:1"),
        ("- a\n- list\n", "1:1"),
        ("units: {pump: {failure_rate: 1 /y}\n", "2:1"),
        ("units:\n\tpump: 1\n", "2:1"),
    ],
    ids=["empty", "comment", "words", "list", "open brace", "tab"],
)
def test_what_is_no_spec_at_all_is_told_with_its_place(program: Program, text: str, place: str) -> None:
    lines = program.refused(text)
    assert any(f"plant.yaml:{place}: " in line for line in lines), lines


def test_bytes_that_are_no_text_are_told(program: Program) -> None:
    (program.folder / "plant.yaml").write_bytes(b"title: ok\nnotes: \xff\xfe\x00")
    told = program("solve", "plant.yaml")
    assert (told.status, told.out) == (2, "")
    assert told.err.startswith("plant.yaml:2:8: ")


def test_names_with_brackets_survive_in_messages(program: Program) -> None:
    (line,) = program.refused("units: {'[red]x[/red]': {failure_rate: 1 /y}}\nsystem: '[bold]y[/bold]'\n")
    assert "[bold]y[/bold]" in line
    assert "[red]x[/red]" in line
