"""Quantities are read exactly as an engineer writes them, and nothing else passes for one."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.quantities import (
    Name,
    Negative,
    Number,
    Product,
    Quantity,
    QuantityError,
    Reciprocal,
    Sum,
    evaluate,
    names,
    parse_number,
    parse_quantity,
    quote,
)

PARAMETERS = {
    name: parse_quantity(text)
    for name, text in {
        "drive_failures": "200 per million hours",
        "coverage": "0.95",
        "repair": "24 h",
        "y": "3 h",
        "night-shift": "8 h",
        "night": "5 h",
        "shift": "1 h",
        "plain-word": "2",
        "1": "2",
    }.items()
}


def read(text: str) -> Quantity:
    return parse_quantity(text, parameters=PARAMETERS)


def refusal(text: str) -> QuantityError:
    with pytest.raises(QuantityError) as caught:
        read(text)
    return caught.value


@pytest.mark.parametrize(
    ("text", "hours"),
    [
        ("24 h", 24),
        ("24h", 24),
        ("0.75 h", Fraction(3, 4)),
        ("36 s", Fraction(1, 100)),
        ("30 min", Fraction(1, 2)),
        ("2 d", 48),
        ("1 week", 168),
        ("3 weeks", 504),
        ("1 month", 730),
        ("1 y", 8760),
        ("2 years", 17520),
        ("1.2 million hours", 1_200_000),
        ("10 minutes", Fraction(1, 6)),
        ("0 h", 0),
    ],
)
def test_times_are_hours(text: str, hours: Fraction | int) -> None:
    quantity = read(text)
    assert (quantity.dimension, quantity.exact) == ("time", hours)


@pytest.mark.parametrize(
    ("text", "hourly"),
    [
        ("5e-6 /h", Fraction(5, 10**6)),
        ("5e-6/h", Fraction(5, 10**6)),
        ("2 /d", Fraction(1, 12)),
        ("1 per year", Fraction(1, 8760)),
        ("200 per million hours", Fraction(1, 5000)),
        ("3 per 1000 h", Fraction(3, 1000)),
        ("3 / 1000 h", Fraction(3, 1000)),
        ("50 FIT", Fraction(5, 10**8)),
        ("0.5 % per 1000 h", Fraction(5, 10**6)),
        ("6 per month", Fraction(6, 730)),
        ("0 /h", 0),
    ],
)
def test_rates_are_per_hour(text: str, hourly: Fraction | int) -> None:
    quantity = read(text)
    assert (quantity.dimension, quantity.exact) == ("rate", hourly)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0.95", Fraction(19, 20)),
        ("95 %", Fraction(19, 20)),
        ("2%", Fraction(1, 50)),
        ("1e-6", Fraction(1, 10**6)),
        ("1e6", 10**6),
        ("1E+2", 100),
        ("1_000", 1000),
        (".5", Fraction(1, 2)),
        ("+3", 3),
        ("1e-0000003", Fraction(1, 1000)),
    ],
)
def test_plain_numbers_are_exact(text: str, value: Fraction | int) -> None:
    quantity = read(text)
    assert (quantity.dimension, quantity.exact) == ("share", value)


@pytest.mark.parametrize(
    "text",
    [
        "010",
        "00.5",
        "1:30",
        "1,5",
        ".nan",
        ".inf",
        "-.inf",
        "nan",
        "inf",
        "null",
        "~",
        "true",
        "no",
        "",
        "  ",
        "1__0",
        "1_",
        "0x10",
        "1e999",
        "1e-999",
        "∞",
        "1.2.3",
    ],
)
def test_number_traps_are_refused(text: str) -> None:
    assert refusal(text).fix


@pytest.mark.parametrize(
    ("text", "fix"),
    [
        ("010", "write 10"),
        ("1,5", "write 1.5"),
        ("5 H", "write h"),
        ("5 m", "write min or month"),
        ("3 × 2", "write *"),
    ],
)
def test_refusal_says_what_to_write(text: str, fix: str) -> None:
    assert refusal(text).fix == fix


def test_year_follows_the_model() -> None:
    assert parse_quantity("1 y", year=Fraction(8766)).exact == 8766
    assert parse_quantity("1 month", year=Fraction(8766)).exact == Fraction(8766, 12)


def test_length_of_the_year_cannot_be_in_years() -> None:
    with pytest.raises(QuantityError, match="before its length is known"):
        parse_quantity("1 y", year=None)
    assert parse_quantity("365.25 d", year=None).exact == 8766


@pytest.mark.parametrize(
    ("text", "dimension", "exact"),
    [
        ("drive_failures * (1 - coverage)", "rate", Fraction(1, 100_000)),
        ("1 / repair", "rate", Fraction(1, 24)),
        ("drive_failures * repair", "share", Fraction(24, 5000)),
        ("repair + 30 min", "time", Fraction(49, 2)),
        ("2 * repair", "time", 48),
        ("repair / 2", "time", 12),
        ("1 - coverage", "share", Fraction(1, 20)),
        ("drive_failures + 1 /d", "rate", Fraction(1, 5000) + Fraction(1, 24)),
        ("1 /h", "rate", 1),
        ("1 per y", "rate", Fraction(1, 8760)),
        ("2 / (repair + repair)", "rate", Fraction(1, 24)),
        ("1 / 2 h", "rate", Fraction(1, 2)),
        ("-1 * (coverage - 1)", "share", Fraction(1, 20)),
    ],
)
def test_expressions_have_dimensions(text: str, dimension: str, exact: Fraction | int) -> None:
    quantity = read(text)
    assert (quantity.dimension, quantity.exact) == (dimension, exact)


@pytest.mark.parametrize(
    "text",
    [
        "drive_failures * drive_failures",
        "drive_failures + repair",
        "drive_failures - coverage",
        "repair * repair",
        "drive_failures / repair",
        "coverage / drive_failures / drive_failures",
        "1 / (coverage - coverage)",
        "coverage - 1",
        "-3 h",
        "1 / y",
        "repair /h",
        "repair repair",
        "2 2",
        "(1",
        "1)",
        "()",
        "1 +",
        "* 2",
        "5 %%",
        "coverage %",
        "2 ** 3",
        "2 ^ 3",
        "h",
        "million",
        "5 per",
        "5 per 0 h",
        "__import__('os')",
        "=1+1",
        "1e200 * 1e200",
    ],
)
def test_what_does_not_go_together_is_refused(text: str) -> None:
    refused = refusal(text)
    assert refused.found
    assert refused.expected
    assert refused.fix


def test_error_names_the_position_inside_an_expression() -> None:
    refused = refusal("2 * repair + coverge")
    assert refused.position == 14
    assert "at character 14" in refused.found
    assert refused.unknown == "coverge"


def test_unit_of_measure_that_is_a_parameter_is_ambiguous() -> None:
    assert "two ways" in refusal("1 / y").found
    assert read("y").exact == 3
    assert read("2 * y").exact == 6


def test_parameter_name_that_is_no_word_stands_alone() -> None:
    assert read("plain-word").name == "plain-word"
    assert "neither a number nor the name" in refusal("2 * plain-word").found


def test_name_that_can_be_read_as_an_expression_is_ambiguous() -> None:
    assert "two ways" in refusal("night-shift").found
    assert "two ways" in refusal("1").found


def test_nesting_and_length_are_limited() -> None:
    assert read("(" * 50 + "1" + ")" * 50).exact == 1
    assert "too deep" in refusal("(" * 51 + "1" + ")" * 51).found
    assert "characters" in refusal("1 + " * 600 + "1").found


def test_digits_cannot_explode() -> None:
    big = {"p": parse_quantity("1.00000000001")}
    with pytest.raises(QuantityError, match="too many digits"):  # noqa: PT012
        for _ in range(20):
            big["p"] = parse_quantity("p * p", parameters=big)


def test_quantity_keeps_its_text_and_its_names() -> None:
    quantity = read("  drive_failures * (1 - coverage) ")
    assert quantity.text == "drive_failures * (1 - coverage)"
    assert quantity.parameters == ("drive_failures", "coverage")
    assert quantity.name is None
    assert read("repair").name == "repair"
    assert str(read("24 h")) == "24 h"


def test_complement_keeps_its_digits() -> None:
    assert parse_quantity("0.99999999999999999999").complement == Fraction(1, 10**20)
    assert parse_quantity("0 /h").is_zero


def test_expression_is_a_tree() -> None:
    tree = read("drive_failures * (1 - coverage) / 2").expression
    inner = Sum((Number(Fraction(1), "share"), Negative(Name("coverage"))))
    assert tree == Product((Name("drive_failures"), inner, Reciprocal(Number(Fraction(2), "share"))))
    assert names(tree) == ("drive_failures", "coverage")


def test_expression_can_be_evaluated_for_other_parameters() -> None:
    tree = read("drive_failures * (1 - coverage) + 1 / repair").expression
    values = {"drive_failures": Fraction(1, 100), "coverage": Fraction(1, 2), "repair": Fraction(4)}
    assert evaluate(tree, values) == Fraction(1, 200) + Fraction(1, 4)


def test_plain_number_reader_takes_nothing_else() -> None:
    assert parse_number("1_000") == 1000
    for text in ("2 %", "3 h", "1 + 1", "x"):
        with pytest.raises(QuantityError):
            parse_number(text)


def test_quoted_text_stays_on_one_line() -> None:
    assert quote("a\nb\x07") == "`a\\nb\\x07`"
    assert len(quote("x" * 500)) == 62


@given(st.fractions(min_value=0, max_value=10**6, max_denominator=10**6))
def test_evaluation_agrees_with_reading(value: Fraction) -> None:
    known = {"a": parse_quantity(f"{value.numerator} / {value.denominator}"), "b": parse_quantity("7 h")}
    quantity = parse_quantity("(a + 2) / b - 1 * a / b", parameters=known)
    assert quantity.exact == Fraction(2, 7)
    assert evaluate(quantity.expression, {name: each.exact for name, each in known.items()}) == quantity.exact


@given(st.text(alphabet="0123456789.eE+-*/()% _habcyFIT,:per million\t", max_size=40) | st.text(max_size=20))
def test_any_text_is_read_or_refused(text: str) -> None:
    try:
        assert read(text).exact >= 0
    except QuantityError as error:
        told = (error.found, error.expected, error.fix)
    else:
        return
    assert all(told)
