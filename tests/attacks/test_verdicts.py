"""Verdicts at the edge: equal to the target, within the bound, in the wrong direction."""

from fractions import Fraction

import pytest

from markov.results import Result
from tests.cli.program import Program

HALF = "units: {lamp: {failure_rate: 1 /h, repair_time: 1 h}}\nsystem: lamp\nmission: {time: 10 h}\n"


def asking(measure: str, limit: str) -> str:
    return f"targets: [{{id: T, measure: {measure}, {limit}}}]\n"


def judged(program: Program, spec: str, measure: str, limit: str) -> tuple[int, str]:
    told = program.solve(spec + asking(measure, limit))
    return told.status, told.verdicts["T"]


# --- attack 29: a value equal to its target, 0.9497 against 0.95


@pytest.mark.parametrize(
    ("measure", "limit"),
    [
        ("steady_state_availability", "at_least: 0.5"),
        ("steady_state_unavailability", "at_most: 50 %"),
        ("mean_time_to_first_failure", "at_least: 60 min"),
        ("mean_down_time", "at_most: 1 h"),
        ("failures_per_year", "at_most: 4380"),
        ("downtime_per_year", "at_most: 4380 h"),
        ("mean_units_failed", "at_most: 1 / 2"),
    ],
)
def test_a_value_equal_to_its_target_is_never_missed_and_met_only_by_its_bound(
    program: Program, measure: str, limit: str
) -> None:
    told = program.solve(HALF + asking(measure, limit))
    (target,) = told.json["targets"]
    lower, upper = target["lower"], target["upper"]
    assert lower <= target["limit"] <= upper
    decided = lower >= target["limit"] if "at_least" in limit else upper <= target["limit"]
    assert (told.status, target["verdict"]) == ((0, "met") if decided else (3, "undecided"))


@pytest.mark.parametrize(
    ("spec", "measure", "limit"),
    [
        ("units: {lamp: {failure_rate: 1 /h}}\nsystem: lamp\n", "downtime_per_year", "at_most: 8760 h"),
        ("units: {lamp: {failure_rate: 1 /h}}\nsystem: lamp\n", "steady_state_availability", "at_least: 0"),
        (HALF, "reliability, at: 0 h", "at_least: 1"),
        (HALF, "expected_failures, at: 0 h", "at_most: 0"),
    ],
)
def test_an_exact_value_equal_to_its_target_is_met(program: Program, spec: str, measure: str, limit: str) -> None:
    assert judged(program, spec, measure, limit) == (0, "met")


# U = 503/10000 of this pair of rates, A = 0.9497.
NEARLY = "units: {lamp: {failure_rate: 503 per million hours, repair_rate: 9497 per million hours}}\nsystem: lamp\n"


def test_a_value_that_rounds_to_its_target_misses_it(program: Program) -> None:
    told = program.solve(NEARLY + asking("steady_state_availability", "at_least: 0.95"))
    assert told.value("steady_state_availability") == pytest.approx(0.9497, rel=1e-14)
    assert (told.status, told.verdicts) == (1, {"T": "missed"})
    assert f"{told.value('steady_state_availability'):.2f}" == "0.95"


def test_the_table_shows_why_it_misses(program: Program) -> None:
    out = program.table(NEARLY + asking("steady_state_availability", "at_least: 0.95")).out
    (line,) = (line for line in out.splitlines() if line.startswith("  T "))
    assert "0.9497" in line
    assert "missed" in line


@pytest.mark.parametrize(("limit", "verdict"), [("0.9497000001", "missed"), ("0.9496999999", "met")])
def test_the_tenth_digit_decides(program: Program, limit: str, verdict: str) -> None:
    assert judged(program, NEARLY, "steady_state_availability", f"at_least: {limit}")[1] == verdict


def test_a_limit_is_taken_exactly_and_not_as_a_float(program: Program) -> None:
    # 1/3 + 1e-25 rounds to the float of 1/3, and 0 is exact: 1e-400 above it is out of range, 1e-200 is not.
    spec = "units: {lamp: {failure_rate: 1 /h}}\nsystem: lamp\n"
    assert judged(program, spec, "steady_state_availability", "at_least: 1e-200") == (1, "missed")
    assert judged(program, spec, "steady_state_unavailability", "at_most: 0.99999999999999999999") == (1, "missed")


# --- attack 30: a bound across the target

THIRDS = "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 7 h}}\nsystem: lamp\nmission: {time: 30 h}\n"
BOUNDED = ["steady_state_unavailability", "unreliability", "mean_up_time", "failures_per_year", "reliability"]


@pytest.mark.parametrize("measure", BOUNDED)
@pytest.mark.parametrize("direction", ["at_least", "at_most"])
def test_a_bound_across_the_target_is_undecided_and_says_so(program: Program, measure: str, direction: str) -> None:
    entry = program.solve(THIRDS).result(measure)
    assert entry["lower"] < entry["upper"]
    inside = (Fraction(entry["lower"]) + Fraction(entry["upper"])) / 2
    limit = f"{inside.numerator} / {inside.denominator}" + (" * 1 h" if measure == "mean_up_time" else "")
    told = program.solve(THIRDS + asking(measure, f"{direction}: {limit}"))
    (target,) = told.json["targets"]
    assert (told.status, target["verdict"]) == (3, "undecided")
    assert "both sides of the limit" in target["why"]
    assert "undecided" in program.table(THIRDS + asking(measure, f"{direction}: {limit}")).out


@pytest.mark.parametrize("measure", BOUNDED)
def test_the_ends_of_the_bound_decide(program: Program, measure: str) -> None:
    entry = program.solve(THIRDS).result(measure)
    hours = " * 1 h" if measure == "mean_up_time" else ""

    def limit(value: Fraction) -> str:
        return f"{value.numerator} / {value.denominator}{hours}"

    lower, upper = Fraction(entry["lower"]), Fraction(entry["upper"])
    assert judged(program, THIRDS, measure, f"at_least: {limit(lower)}") == (0, "met")
    assert judged(program, THIRDS, measure, f"at_most: {limit(upper)}") == (0, "met")
    assert judged(program, THIRDS, measure, f"at_least: {limit(upper * (1 + Fraction(1, 2**60)))}") == (1, "missed")
    assert judged(program, THIRDS, measure, f"at_most: {limit(lower * (1 - Fraction(1, 2**60)))}") == (1, "missed")


def test_an_estimate_without_a_bound_decides_nothing(program: Program, monkeypatch: pytest.MonkeyPatch) -> None:
    def estimated(**given: object) -> Result:
        return Result(**{**given, "lower": None, "upper": None, "method": "estimate"})

    monkeypatch.setattr("markov.evaluation.replies.Result", estimated)
    found = program.solve(THIRDS + asking("unreliability", "at_most: 0.9"))
    assert (found.status, found.verdicts) == (3, {"T": "undecided"})
    assert "estimate" in found.json["targets"][0]["why"]
    assert "estimate" in program.table(THIRDS + asking("unreliability", "at_most: 0.9")).out


# --- attack 31: a target in the wrong direction


@pytest.mark.parametrize(
    ("measure", "limit", "verdict"),
    [
        ("steady_state_availability", "at_most: 0.9", "missed"),
        ("steady_state_availability", "at_most: 0.999", "met"),
        ("unreliability", "at_least: 0.9", "missed"),
        ("mean_up_time", "at_most: 1 h", "missed"),
        ("downtime_per_year", "at_least: 1 h", "met"),
        ("failures_per_year", "at_least: 1", "met"),
    ],
)
def test_a_target_in_the_wrong_direction_is_judged_as_written_and_noted(
    program: Program, measure: str, limit: str, verdict: str
) -> None:
    told = program.solve(THIRDS + asking(measure, limit))
    assert told.verdicts == {"T": verdict}
    (warning,) = (warning for warning in told.json["warnings"] if "target T" in warning)
    assert "check the direction" in warning
    assert "check the direction" in program("check", program.file(THIRDS + asking(measure, limit))).out


def test_a_target_in_the_right_direction_is_not_noted(program: Program) -> None:
    told = program.solve(THIRDS + asking("steady_state_availability", "at_least: 0.9"))
    assert not [warning for warning in told.json["warnings"] if "direction" in warning]


@pytest.mark.parametrize("limit", ["", "at_least: 0.1, at_most: 0.9", "at_leats: 0.9"])
def test_a_target_has_exactly_one_limit(program: Program, limit: str) -> None:
    program.refused(THIRDS + asking("reliability", limit or "of: lamp"))


@pytest.mark.parametrize(
    ("measure", "limit"),
    [
        ("reliability", "at_least: 95"),
        ("mean_up_time", "at_least: 1000"),
        ("mean_up_time", "at_least: 1e-3 /h"),
        ("failures_per_year", "at_most: 0.1 /y"),
        ("hazard_rate", "at_most: 1e-9"),
        ("downtime_per_year", "at_most: 5"),
        ("steady_state_availability, at: 10 h", "at_least: 0.9"),
    ],
)
def test_a_limit_of_another_kind_than_its_measure_is_refused(program: Program, measure: str, limit: str) -> None:
    assert len(program.refused(THIRDS + asking(measure, limit))) == 1
