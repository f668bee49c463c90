"""Whatever the text, it is read or refused with places; nothing else comes out."""

from pathlib import Path

from hypothesis import example, given, settings
from hypothesis import strategies as st

from markov import spec
from markov.errors import SpecError

FRAGMENTS = [
    *("!!int ", "!<%ff> ", "!%zz", "&a ", "*a", "<<: ", "- ", "{", "}", "[", "]", ": ", "\t", "\n", "  ", "'", '"'),
    *("\\", "\\x", '"\\ud800"', '"\\U00110000"', "|\n", "> ", "---\n", "...\n", "%YAML 1.1\n", "%TAG ! x\n", "?", "#"),
    *("null", "~", ".nan", "1e999", "010", "1:30", "/h", "(", ")", "%", "é", "\x85", "\u2028", "\ufeff", "@", "`"),
    *(
        "[[[[",
        "{a: ",
        "&a [*a]",
        "y: ",
        "0",
        "-1",
        "count: 2",
        "of",
        "unit: ",
        "required: 0",
        "\x00",
        "\ud800",
        "a" * 150,
    ),
]
WORDS = [
    *("units", "groups", "crews", "system", "targets", "parameters", "states", "transitions", "initial", "mission"),
    *("pump", "members", "unit", "count", "required", "redundancy", "switchover", "uncovered", "outcome", "coverage"),
    *("failure_rate", "repair_time", "from", "to", "rate", "up", "at_least", "of", "all_of", "measure", "id", "time"),
    *("1 /h", "24 h", "0.5", "95", "true", "cold_standby", "active", "restart", "availability", "a + b", "1 / 0", ""),
]
PLANT_WORDS = [
    *("spares", "tests", "common_causes", "phases", "demand", "restoration", "levels", "initial", "units", "groups"),
    *("for", "stock", "lead_time", "interval", "first_at", "members", "beta", "greek_letters", "alpha_factors", "name"),
    *("duration", "repeat", "rate_factors", "fixed", "mean", "standard_deviation", "stages", "share", "failure_modes"),
    *("load_sharing", "repair_when", "visits_every", "failed", "hidden", "switch", "exponent", "2", "pump", "1 y", "1"),
]
WHOLE_PLANT = (Path(__file__).parent / "whole_plant.yaml").read_text(encoding="utf-8")
VALUES = st.recursive(
    st.sampled_from(WORDS),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.sampled_from(WORDS), inner, max_size=5),
    max_leaves=25,
)

PLANT_VALUES = st.recursive(
    st.sampled_from(PLANT_WORDS),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(PLANT_WORDS), inner, max_size=4),
    max_leaves=20,
)


def outcome(text: str) -> None:
    """Read a text; a refusal has places inside of it and speaks no Python."""
    try:
        spec.read_text(text)
    except SpecError as error:
        problems = error.problems
    else:
        return
    lines = text.count("\n") + text.count("\x85") + text.count("\u2028") + text.count("\r") + 1
    assert problems
    for problem in problems:
        assert 1 <= problem.line <= lines + 1
        assert problem.column >= 1
        assert problem.found
        assert problem.expected
        assert problem.fix
        assert "Input should" not in str(problem)
        assert "<class" not in str(problem)


@st.composite
def damaged(draw: st.DrawFn) -> str:
    """Return the first spec, or one that says everything, with a few places overwritten."""
    text = draw(st.sampled_from([spec.draft_text(), WHOLE_PLANT]))
    for _ in range(draw(st.integers(1, 6))):
        start = draw(st.integers(0, len(text)))
        end = min(len(text), start + draw(st.sampled_from([0, 0, 1, 3, 12, 80])))
        text = text[:start] + draw(st.sampled_from(FRAGMENTS + WORDS + PLANT_WORDS)) + text[end:]
    return text


def written(value: object) -> str:
    """Write nested values as YAML in one line."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key or 'x'}: {written(each)}" for key, each in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(written(each) for each in value) + "]"
    return str(value)


@settings(max_examples=400)
@given(damaged())
@example("!<%ff> a")
@example('title: "\\ud800"')
@example("units: &a {a: *a}")
def test_damaged_specs(text: str) -> None:
    outcome(text)


@settings(max_examples=300)
@given(st.lists(st.sampled_from(FRAGMENTS + WORDS), max_size=30).map("".join) | st.text(max_size=60))
def test_random_text(text: str) -> None:
    outcome(text)


@settings(max_examples=400)
@given(st.dictionaries(st.sampled_from(WORDS[:10]), VALUES, max_size=6).map(written))
def test_keys_and_values_in_the_wrong_places(text: str) -> None:
    outcome(text)


@settings(max_examples=300)
@given(st.dictionaries(st.sampled_from(PLANT_WORDS[:10]), PLANT_VALUES, max_size=6).map(written))
def test_keys_of_plants_in_the_wrong_places(text: str) -> None:
    outcome("units: {pump: {failure_rate: 1 /h}}\nsystem: pump\n" if text == "{}" else text)
