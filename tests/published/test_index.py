"""Holds the list of published checks: each one made, or left out for a reason."""

from collections import Counter

import pytest

from tests.published.checks import DIGITS, FAMILIES, LEFT_OUT, MODELS, Check

CHECKS = [check for model in MODELS for check in model.checks]

#: Checks of this project's own, outside of the families.
OWN = {
    *("series", "parallel", "year", "leap year", "one fault at a time"),
    *("lock availability", "lock failures", "lock first failure", "lock down time"),
}

#: Families that the program covers from end to end.
COVERED = {"A", "B", "C", "D", "E", "F", "G", "I", "J", "K", "M", "P"}


def test_each_check_known_is_made_or_left_out_for_a_reason() -> None:
    known = Counter(number for numbers in FAMILIES.values() for number in numbers)
    made = Counter(check.id for check in CHECKS if check.id not in OWN)
    left_out = Counter(number for number, _ in LEFT_OUT)
    assert made + left_out == known
    assert set(known.values()) == {1}


def test_own_checks_are_made_once() -> None:
    assert Counter(check.id for check in CHECKS if check.id in OWN) == Counter(OWN)


def test_numbers_begin_with_their_family() -> None:
    for family, numbers in FAMILIES.items():
        assert all(number.startswith(family) for number in numbers)


def test_nothing_is_left_out_of_the_families_covered() -> None:
    assert [number for number, _ in LEFT_OUT if number[0] in COVERED] == []


@pytest.mark.parametrize(("number", "reason"), LEFT_OUT, ids=[number for number, _ in LEFT_OUT])
def test_what_is_left_out_has_a_reason(number: str, reason: str) -> None:
    assert len(reason.split()) > 3


@pytest.mark.parametrize("check", CHECKS, ids=[check.id for check in CHECKS])
def test_each_check_names_source_and_where_it_was_seen(check: Check) -> None:
    seen = ("read in the source", "from memory", "own derivation", "common practice, no source")
    assert check.source_status.startswith(seen)
    assert (check.source == "none") == (check.source_status == "common practice, no source")
    assert check.asks


@pytest.mark.parametrize("check", CHECKS, ids=[check.id for check in CHECKS])
def test_exact_values_have_no_more_digits_than_allowed_for(check: Check) -> None:
    digits = check.exact.lower().partition("e")[0].replace(".", "").strip("0")
    assert len(digits) <= DIGITS


def test_each_model_is_named_once() -> None:
    assert max(Counter(model.name for model in MODELS).values()) == 1
