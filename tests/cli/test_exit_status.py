"""The exit status says how it went: 4, 2, 1, 3 in this order of weight, else 0."""

import pytest

from markov.errors import NotReached, TooLarge
from markov.evaluation.answers import Answers
from tests.cli.program import Program

LAMP = """
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
system: lamp
mission: {time: 100 h}
"""
MET = "{id: M, measure: steady_state_availability, at_least: 0.9}"
MISSED = "{id: N, measure: steady_state_availability, at_least: 0.999}"
# A mean time that a target asks for, of a system that may live for ever.
FORK = """
states: {good: {up: true, initial: true}, safe: {up: true}, lost: {up: false}}
transitions: [{from: good, to: safe, rate: 1e-3 /h}, {from: good, to: lost, rate: 1e-3 /h}]
mission: {time: 100 h}
"""
UNDECIDED = "{id: U, measure: mean_time_to_first_failure, at_least: 1 h}"
FORK_MET = "{id: M, measure: unreliability, at_most: 0.5}"
FORK_MISSED = "{id: N, measure: unreliability, at_most: 1e-9}"


def asking(spec: str, *targets: str) -> str:
    return f"{spec}targets: [{', '.join(targets)}]\n" if targets else spec


def broken(*arguments: object, **options: object) -> object:
    raise RuntimeError("a fault of the program")


@pytest.mark.parametrize("options", [(), ("--json",)])
@pytest.mark.parametrize(
    ("spec", "status"),
    [
        (asking(LAMP), 0),
        (asking(LAMP, MET), 0),
        (asking(LAMP, MISSED), 1),
        (asking(LAMP, MET, MISSED), 1),
        (asking(LAMP, MISSED, MET), 1),
        (asking(FORK, UNDECIDED), 3),
        (asking(FORK, FORK_MET, UNDECIDED), 3),
        (asking(FORK, FORK_MISSED, UNDECIDED), 1),
        (asking(FORK, UNDECIDED, FORK_MISSED), 1),
        (asking(LAMP, MET, MET), 2),
    ],
    ids=[
        "no target",
        "met",
        "missed",
        "met, missed",
        "missed, met",
        "undecided",
        "met, undecided",
        "missed, undecided",
        "undecided, missed",
        "an id twice",
    ],
)
def test_verdicts_decide_the_status(program: Program, spec: str, status: int, options: tuple[str, ...]) -> None:
    assert program("solve", program.file(spec), *options).status == status


@pytest.mark.parametrize("spec", [asking(LAMP, MISSED), asking(FORK, UNDECIDED)], ids=["missed", "undecided"])
def test_a_faulty_call_outweighs_what_a_target_would_say(program: Program, spec: str) -> None:
    told = program("solve", program.file(spec), "--at", "5")
    assert (told.status, told.out) == (2, "")


@pytest.mark.parametrize(
    "arguments",
    [
        (),
        ("solve",),
        ("nosuch", "plant.yaml"),
        ("--nosuch",),
        ("solve", "plant.yaml", "--nosuch"),
        ("solve", "plant.yaml", "another.yaml"),
        ("solve", "plant.yaml", "--at"),
        ("solve", "missing.yaml"),
        ("solve", "."),
        ("check", "missing.yaml"),
        ("check",),
        ("draw", "plant.yaml"),
        ("draft",),
        ("schema", "plant.yaml"),
    ],
    ids=" ".join,
)
def test_a_faulty_call_is_told_on_standard_error_alone(program: Program, arguments: tuple[str, ...]) -> None:
    program.file(LAMP)
    told = program(*arguments)
    assert told.status == 2
    assert told.out == ""
    assert told.err.strip()
    assert "Traceback" not in told.err


def test_a_missing_file_is_named_with_the_reason(program: Program) -> None:
    assert "missing.yaml: No such file or directory" in program("solve", "missing.yaml").err


@pytest.mark.parametrize(
    ("arguments", "broken_part"),
    [
        (("solve", "plant.yaml"), "markov.evaluation.solve_model"),
        (("solve", "plant.yaml", "--json"), "markov.evaluation.solve_model"),
        (("solve", "plant.yaml", "--json"), "markov.output.as_json.solution_json"),
        (("check", "plant.yaml"), "markov.evaluation.check_model"),
        (("draw", "plant.yaml", "plant.svg"), "markov.output.draw_model.build_space"),
        (("report", "plant.yaml", "plant.html"), "markov.documents.report.solve_model"),
        (("draft", "new.yaml"), "markov.verbs.draft"),
        (("schema",), "markov.model.json_schema"),
    ],
    ids=lambda value: value if isinstance(value, str) else " ".join(value),
)
def test_a_fault_of_the_program_is_never_taken_for_a_missed_target(
    program: Program, monkeypatch: pytest.MonkeyPatch, arguments: tuple[str, ...], broken_part: str
) -> None:
    program.file(asking(LAMP, MISSED))
    monkeypatch.setattr(broken_part, broken)
    told = program(*arguments)
    assert told.status == 4
    assert told.out == ""
    assert "a fault of the program, not of the spec" in told.err
    assert "RuntimeError: a fault of the program" in told.err


@pytest.mark.parametrize("spec", [asking(LAMP, MISSED), asking(FORK, UNDECIDED)], ids=["missed", "undecided"])
def test_a_fault_while_printing_outweighs_every_verdict(
    program: Program, monkeypatch: pytest.MonkeyPatch, spec: str
) -> None:
    monkeypatch.setattr("markov.output.table.print_solution", broken)
    assert program("solve", program.file(spec)).status == 4


@pytest.mark.parametrize("error", [NotReached("the tolerance"), TooLarge("5,000,001 states")], ids=["accuracy", "size"])
def test_what_is_out_of_reach_is_three(program: Program, monkeypatch: pytest.MonkeyPatch, error: Exception) -> None:
    def refuse(*arguments: object, **options: object) -> object:
        raise error

    monkeypatch.setattr("markov.evaluation.solve_model", refuse)
    told = program("solve", program.file(asking(LAMP, MISSED)))
    assert (told.status, told.out) == (3, "")
    assert str(error) in told.err


def _miss_the_mean(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let one measure miss its tolerance."""
    answer = Answers.answer

    def miss(self: Answers, question: object) -> object:
        if question.measure == "mean_time_to_first_failure":
            raise NotReached("the sweeps did not settle")
        return answer(self, question)

    monkeypatch.setattr(Answers, "answer", miss)


def test_a_target_on_a_number_that_was_not_reached_is_undecided(
    program: Program, monkeypatch: pytest.MonkeyPatch
) -> None:
    _miss_the_mean(monkeypatch)
    told = program.solve(asking(LAMP, UNDECIDED))
    assert (told.status, told.verdicts) == (3, {"U": "undecided"})
    found = told.result("mean_time_to_first_failure")
    assert (found["value"], found["lower"], found["upper"]) == (None, None, None)
    assert "the sweeps did not settle" in found["reason"]


def test_a_number_that_was_not_reached_is_three_without_a_target_too(
    program: Program, monkeypatch: pytest.MonkeyPatch
) -> None:
    _miss_the_mean(monkeypatch)
    assert program.solve(asking(LAMP, MET)).status == 3


def test_a_missed_target_outweighs_a_number_that_was_not_reached(
    program: Program, monkeypatch: pytest.MonkeyPatch
) -> None:
    _miss_the_mean(monkeypatch)
    assert program.solve(asking(LAMP, MISSED)).status == 1


def test_check_judges_the_spec_and_not_the_targets(program: Program) -> None:
    assert program("check", program.file(asking(LAMP, MISSED))).status == 0
    assert program("check", program.file(asking(LAMP, MET, MET))).status == 2


def test_a_reason_in_place_of_a_number_that_nobody_asked_for_is_no_failure(program: Program) -> None:
    told = program.solve(asking(FORK, FORK_MET))
    assert told.value("mean_time_to_first_failure") is None
    assert told.status == 0
