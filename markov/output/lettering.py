"""Text in pictures: which characters may stand, how wide they run, where a line breaks."""

from __future__ import annotations

import unicodedata
from functools import cache
from pathlib import Path
from typing import Any

REPLACED = "\N{REPLACEMENT CHARACTER}"
_NEW_LINE = "\N{DOWNWARDS ARROW WITH CORNER LEFTWARDS}"
_DIRECTION_MARKS = frozenset("\u200e\u200f\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069")
_MEASURED_AT = 100.0
"""Type size at which widths are taken, large enough for rounding to the pixel grid not to matter."""


def legible(text: str) -> str:
    """Return `text` on one line and fit for every format.

    A line break becomes ↵, another white space a plain space; control characters, marks that turn the direction of
    writing, lone surrogates and code points that are no characters become U+FFFD, for XML forbids most of them and a
    name must not be able to change how its surroundings read.
    """
    text = text.replace("\r\n", "\n")
    return "".join(_legible_character(character) for character in text)


def _legible_character(character: str) -> str:
    if character in "\n\r\u2028\u2029\u0085":
        return _NEW_LINE
    if character.isspace():
        return " "
    code = ord(character)
    no_character = code & 0xFFFE == 0xFFFE or 0xFDD0 <= code <= 0xFDEF
    if unicodedata.category(character) in ("Cc", "Cs") or character in _DIRECTION_MARKS or no_character:
        return REPLACED
    return character


def wrapped(
    text: str, size: float, room: float, *, bold: bool = False, break_before: str = "", break_late: str = ""
) -> tuple[str, ...]:
    """Return `text` broken into lines no wider than `room` points.

    Lines break after spaces, or before a character of `break_before` (then not after the space that follows it). A
    piece that is too wide by itself breaks before a character of `break_late`, and where that is not enough it is cut.
    """
    lines: list[str] = []
    line = ""
    pieces: list[str] = []
    for piece in _pieces(text, break_before):
        wide = text_width(piece.rstrip(), size, bold=bold) > room
        pieces.extend(_pieces(piece, break_late) if wide else [piece])
    for piece in pieces:
        if line and text_width((line + piece).rstrip(), size, bold=bold) > room:
            lines.append(line.rstrip())
            line = piece.lstrip()
        else:
            line += piece
        while text_width(line.rstrip(), size, bold=bold) > room and len(line) > 1:
            cut = _fitting(line, size, room, bold)
            lines.append(line[:cut])
            line = line[cut:]
    if line.rstrip() or not lines:
        lines.append(line.rstrip())
    return tuple(lines)


def _pieces(text: str, break_before: str) -> list[str]:
    """Return the parts between which a line may break; a space belongs to the part before it."""
    pieces: list[str] = []
    start = 0
    for index in range(1, len(text)):
        after_space = text[index - 1] == " " and text[index] != " " and text[start : index - 1] not in break_before
        if after_space or text[index] in break_before:
            pieces.append(text[start:index])
            start = index
    pieces.append(text[start:])
    return pieces


def _fitting(text: str, size: float, room: float, bold: bool) -> int:
    """Return how many characters of `text` fit into `room`, at least one and never splitting a base from its marks."""
    low, high = 1, len(text) - 1
    while low < high:
        middle = (low + high + 1) // 2
        if text_width(text[:middle], size, bold=bold) <= room:
            low = middle
        else:
            high = middle - 1
    while low > 1 and unicodedata.combining(text[low]):
        low -= 1
    return low


def text_width(text: str, size: float, *, bold: bool = False) -> float:
    """Return the width of `text` in points, set in DejaVu Sans of `size` points."""
    return sum(_character_width(character, bold) for character in text) * size / _MEASURED_AT


@cache
def _character_width(character: str, bold: bool) -> float:
    if unicodedata.combining(character):
        return 0.0
    if ord(character) not in covered(bold):
        return _MEASURED_AT if unicodedata.east_asian_width(character) in "WF" else 0.7 * _MEASURED_AT
    face = _face(bold)
    # Measured between two letters, as the face reports the width of the ink and a space has none.
    return float(_ink(face, f"H{character}H") - _ink(face, "HH"))


def _ink(face: Any, text: str) -> float:
    face.set_text(text, 0.0)
    return float(face.get_width_height()[0]) / 64.0


@cache
def covered(bold: bool = False) -> frozenset[int]:
    """Return the code points that DejaVu Sans, as it comes with matplotlib, can draw."""
    return frozenset(_face(bold).get_charmap())


@cache
def _face(bold: bool) -> Any:
    from matplotlib.ft2font import FT2Font  # late: a fifth of a second

    face = FT2Font(str(face_file(bold)))
    face.set_size(_MEASURED_AT, 72.0)
    return face


def face_file(bold: bool) -> Path:
    """Return the font file of the pictures, from the matplotlib package."""
    import matplotlib

    return Path(matplotlib.get_data_path()) / "fonts" / "ttf" / ("DejaVuSans-Bold.ttf" if bold else "DejaVuSans.ttf")
