"""How a spec and times come in: a file or standard input, `--at` as often as needed."""

import pytest

from tests.cli.program import Program

LAMP = """
parameters: {voyage: 3 d}
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
system: lamp
mission: {time: 100 h}
targets: [{id: T, measure: reliability, at: 50 h, at_least: 0.9}]
"""


def hours(told, measure: str) -> list[float]:
    return [each["at_hours"] for each in told.json["results"] if each["measure"] == measure]


@pytest.mark.parametrize("command", ["solve", "check"])
def test_a_dash_reads_standard_input(program: Program, command: str) -> None:
    from_file = program(command, program.file(LAMP), "--json")
    piped = program(command, "-", "--json", stdin=LAMP)
    assert piped.json == from_file.json
    assert piped.err == ""


def test_a_spec_from_standard_input_is_drawn(program: Program) -> None:
    assert program("draw", "-", "lamp.svg", stdin=LAMP).status == 0
    assert (program.folder / "lamp.svg").exists()


def test_problems_of_standard_input_are_told_with_line_and_column(program: Program) -> None:
    told = program("solve", "-", stdin="units: {lamp: {failure_rate: 5}}\nsystem: lamp\n")
    assert (told.status, told.out) == (2, "")
    assert told.err.startswith("<stdin>:1:30: units.lamp.failure_rate: ")


def test_empty_standard_input_is_a_fault_of_the_spec(program: Program) -> None:
    told = program("solve", "-", stdin="")
    assert (told.status, told.out) == (2, "")
    assert told.err.startswith("<stdin>:1:1: ")


def test_times_are_added_and_the_mission_and_targets_keep_theirs(program: Program) -> None:
    told = program.solve(LAMP, "--at", "10 h", "--at", "2 d")
    assert sorted(hours(told, "reliability")) == [10, 48, 50, 100]
    assert sorted(hours(told, "unreliability")) == [10, 48, 100]
    assert told.json["targets"][0]["at_hours"] == 50
    # Where the long run is meant unless a time is given, both are told.
    assert hours(told, "failure_frequency") == [None, 10, 48]


@pytest.mark.parametrize(
    ("time", "expected"),
    [
        ("7200 s", 2),
        ("90 min", 1.5),
        ("12 h", 12),
        ("2 d", 48),
        ("1 week", 168),
        ("1 month", 730),
        ("1 y", 8760),
        ("1e3 h", 1000),
        ("0.5 years", 4380),
        ("1 d + 1 h", 25),
        ("voyage", 72),
        ("0 h", 0),
    ],
)
def test_a_time_carries_its_unit(program: Program, time: str, expected: float) -> None:
    assert expected in hours(program.solve(LAMP, "--at", time), "availability")


def test_a_year_has_the_length_that_the_spec_gives_it(program: Program) -> None:
    told = program.solve(f"year: 8766 h\n{LAMP}", "--at", "1 y")
    assert 8766 in hours(told, "availability")
    assert told.json["year_hours"] == 8766


@pytest.mark.parametrize(
    ("time", "why"),
    [
        ("5", "unit"),
        ("0", "unit"),
        ("-3 h", "negative"),
        ("inf h", "not a number"),
        (".inf h", "not a number"),
        ("nan h", "not a number"),
        ("1e999 h", "out of range"),
        ("5 /h", "not a time"),
        ("1,5 h", "comma"),
        ("1:30 h", "colon"),
        ("", "nothing"),
        ("soon", "neither a number nor"),
        ("5 furlongs", "furlongs"),
    ],
)
def test_a_time_that_is_none_is_refused(program: Program, time: str, why: str) -> None:
    told = program.solve(LAMP, "--at", "10 h", "--at", time)
    assert (told.status, told.out) == (2, "")
    assert repr(time) in told.err
    assert why in told.err
    assert len(told.err.splitlines()) == 1


def test_unsorted_and_repeated_times_are_answered_once_each(program: Program) -> None:
    mixed = program.solve(LAMP, "--at", "7 h", "--at", "3 h", "--at", "180 min", "--at", "100 h")
    assert hours(mixed, "unreliability") == [100, 7, 3]
    plain = program.solve(LAMP, "--at", "3 h", "--at", "7 h")
    for at in (3, 7, 100):
        assert mixed.result("unreliability", at_hours=at) == plain.result("unreliability", at_hours=at)


def test_without_a_mission_measures_in_time_wait_for_a_time(program: Program) -> None:
    spec = LAMP.replace("mission: {time: 100 h}\n", "")
    told = program.solve(spec)
    assert hours(told, "unreliability") == []
    assert any("mission" in warning for warning in told.json["warnings"])
    assert hours(program.solve(spec, "--at", "5 h"), "unreliability") == [5]


def test_without_any_time_a_target_in_time_is_undecided_or_refused_but_never_met(program: Program) -> None:
    spec = LAMP.replace("mission: {time: 100 h}\n", "").replace("at: 50 h, ", "")
    told = program.solve(spec)
    assert told.status in (2, 3)
    assert told.status == 2 or told.verdicts == {"T": "undecided"}


def test_methods_forced_one_after_another_agree(program: Program) -> None:
    path = program.file(LAMP)
    found = [
        program("solve", path, "--json", "--method", method).result("unreliability")["value"]
        for method in ("ladder", "uniformisation", "squaring")
    ]
    assert found == pytest.approx([found[0]] * 3, rel=1e-12)


def test_an_unknown_method_is_told_the_known_ones(program: Program) -> None:
    told = program("solve", program.file(LAMP), "--method", "guessing")
    assert told.status == 2
    assert told.out == ""
    assert "expected one of ladder, uniformisation" in told.err
