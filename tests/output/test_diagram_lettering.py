"""Text in pictures is measured and broken so that it stays inside what holds it."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.output.lettering import legible, text_width, wrapped

NAMES = st.text(st.characters(codec=None), max_size=40)


def test_a_line_break_in_a_name_is_shown_and_keeps_one_line() -> None:
    assert legible("pump\nA\r\nB\tC") == "pump↵A↵B C"


@pytest.mark.parametrize("character", ["\x00", "\x1b", "\ud800", "\ufffe", "\u202e", "\u2066"])
def test_characters_that_xml_forbids_or_that_turn_the_writing_are_replaced(character: str) -> None:
    assert legible(f"a{character}b") == "a\ufffdb"


@given(NAMES)
def test_legible_text_can_be_encoded_and_has_no_line_break(name: str) -> None:
    text = legible(name)
    text.encode()
    assert len(text.splitlines()) <= 1


def test_width_grows_with_size_and_with_weight() -> None:
    assert text_width("λ(drive)", 16) == pytest.approx(2 * text_width("λ(drive)", 8))
    assert text_width("drive", 8, bold=True) > text_width("drive", 8)


def test_a_space_has_width_and_a_combining_mark_has_none() -> None:
    assert text_width("a b", 8) > text_width("ab", 8)
    assert text_width("e\u0301", 8) == text_width("e", 8)


def test_a_character_without_a_glyph_is_given_room() -> None:
    assert text_width("水", 8) == 8.0


@given(NAMES.map(legible), st.floats(20, 120))
def test_wrapped_lines_fit_and_lose_nothing_but_spaces(text: str, room: float) -> None:
    lines = wrapped(text, 8, room, break_before="+", break_late="·")
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")
    assert all(text_width(line, 8) <= room or len(line) == 1 for line in lines)


def test_a_sum_breaks_before_plus_rather_than_inside_a_product() -> None:
    assert wrapped("5·λ(feed) + 6·λ(fan)", 8, 60, break_before="+", break_late="·") == ("5·λ(feed)", "+ 6·λ(fan)")


def test_a_long_product_breaks_before_a_factor() -> None:
    assert wrapped("2·λ(drive)·c·(1−q)", 8, 50, break_before="+", break_late="·") == ("2·λ(drive)·c", "·(1−q)")
