"""report, explain, changes."""

import json

import pytest

import markov
from tests.cli.program import Program

PAIR = """
title: Two lamps
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups: {light: {members: [{unit: lamp, count: 2}], redundancy: active}}
system: light
mission: {time: 100 h}
targets: [{id: T, measure: steady_state_availability, at_least: 0.999}]
"""
WORSE = PAIR.replace("10 h", "100 h")
BY_HAND = """
title: Two lamps by hand
states: {both: {up: true, initial: true}, one: {up: true}, none: {up: false}}
transitions:
  - {from: both, to: one, rate: 2e-3 /h}
  - {from: one, to: none, rate: 1e-3 /h}
  - {from: one, to: both, mean_time: 10 h}
  - {from: none, to: one, mean_time: 5 h}
targets: [{id: T, measure: steady_state_availability, at_least: 0.999}]
"""


@pytest.mark.parametrize(("spec", "status"), [(PAIR, 0), (WORSE, 1)])
def test_a_report_is_written_and_the_status_is_that_of_the_targets(program: Program, spec: str, status: int) -> None:
    target = program.folder / "plant.md"
    told = program("report", program.file(spec), target)
    assert (told.status, told.out) == (status, "")
    assert "plant.md" in told.err
    assert target.read_text(encoding="utf-8").startswith("# Two lamps")


def test_a_report_reads_standard_input_and_takes_times(program: Program) -> None:
    told = program("report", "-", program.folder / "tables", "--at", "2 d", stdin=PAIR)
    assert told.status == 0
    results = (program.folder / "tables" / "results.csv").read_text(encoding="utf-8")
    assert "unreliability,,,48.0," in results


def test_a_report_never_takes_the_place_of_a_file(program: Program) -> None:
    target = program.folder / "plant.html"
    target.write_text("mine", encoding="utf-8")
    told = program("report", program.file(PAIR), target)
    assert told.status == 2
    assert "exists already" in told.err
    assert target.read_text(encoding="utf-8") == "mine"
    assert program("report", program.file(PAIR), target, "--overwrite").status == 0
    assert target.read_text(encoding="utf-8").startswith("<!DOCTYPE html>")


def test_a_faulty_spec_leaves_no_file(program: Program) -> None:
    told = program("report", program.file("units: {}"), program.folder / "plant.html")
    assert (told.status, told.out) == (2, "")
    assert not (program.folder / "plant.html").exists()


def test_explain_tells_the_whole_a_state_and_an_arrow(program: Program) -> None:
    spec = program.file(PAIR)
    whole = program("explain", spec)
    assert whole.status == 0
    assert "Two lamps" in whole.out
    state, arrow = program("explain", spec, "0"), program("explain", spec, "0", "1")
    assert state.status == arrow.status == 0
    assert "begins" in state.out
    assert "lamp" in arrow.out
    assert json.loads(program("explain", spec, "0", "1", "--json").out)


def test_explain_of_a_state_that_is_not_there(program: Program) -> None:
    told = program("explain", program.file(PAIR), "77")
    assert (told.status, told.out) == (2, "")
    assert "77" in told.err


def test_changes_tell_a_verdict_that_flips(program: Program) -> None:
    old, new = program.file(PAIR, "old.yaml"), program.file(WORSE, "new.yaml")
    assert program("changes", old, old).status == 0
    told = program("changes", old, new)
    assert told.status == 1
    assert "missed" in told.out
    assert json.loads(program("changes", old, new, "--json").out)


def test_changes_hold_a_hand_written_chain_against_the_generated_one(program: Program) -> None:
    told = program("changes", program.file(BY_HAND, "hand.yaml"), program.file(PAIR))
    assert told.status in (0, 1)
    assert told.out


def test_changes_of_two_specs_from_standard_input_are_refused(program: Program) -> None:
    told = program("changes", "-", "-", stdin=PAIR)
    assert told.status == 2
    assert "standard input" in told.err


def test_the_verbs_do_the_same(program: Program) -> None:
    old, new = program.file(PAIR, "old.yaml"), program.file(WORSE, "new.yaml")
    written = markov.report(old, program.folder / "plant.csv", at=["2 d"])
    assert written.paths[0] == program.folder / "plant.csv"
    assert written.solution.result("unreliability", at_hours=48).value
    assert markov.explain(old, "0", "1").text
    assert markov.changes(old, new).exit_status == 1
    with pytest.raises(markov.UsageError, match="exists already"):
        markov.report(old, program.folder / "plant.csv")


def test_plots_and_ways_to_failure_are_drawn(program: Program) -> None:
    spec = program.file(PAIR)
    for arguments in (
        ("plot", spec, "u.svg"),
        ("plot", spec, "s.svg", "--what", "structure"),
        ("draw", spec, "w.svg", "--paths", "90%"),
    ):
        told = program(*arguments)
        assert (told.status, told.out) == (0, "")
        assert "<svg" in (program.folder / str(arguments[2])).read_text(encoding="utf-8")
    assert program("plot", spec, "u.svg").status == 2
    assert program("plot", spec, "v.svg", "--what", "weather").status == 2
    assert markov.plot(spec, program.folder / "verb.pdf").path.read_bytes().startswith(b"%PDF")
