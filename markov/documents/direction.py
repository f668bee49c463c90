"""Which parts of a line are written from right to left."""

from __future__ import annotations

import unicodedata

_BRACKETS = {"(": ")", "[": "]", "{": "}"}
_OF_FORMULAS = frozenset("·×+−=≤≥<>|")


def runs(text: str) -> tuple[tuple[str, bool], ...]:
    """Return the parts of `text` in order, each with whether it is written from right to left.

    Such a part begins with a letter of a right-to-left script.  It goes on over spaces, signs and digits to the last
    such letter, digit or bracket that closes within it; a left-to-right letter, an operator of a formula or a bracket
    that was opened before it ends it, so that a formula keeps its order around the names in it.
    """
    found: list[tuple[str, bool]] = []
    start = place = 0
    while place < len(text):
        if unicodedata.bidirectional(text[place]) in ("R", "AL"):
            end = _end(text, place)
            if place > start:
                found.append((text[start:place], False))
            found.append((text[place:end], True))
            start = place = end
        else:
            place += 1
    if start < len(text):
        found.append((text[start:], False))
    return tuple(found)


def _end(text: str, first: int) -> int:
    """Return where the right-to-left part that begins at `first` ends."""
    end = first + 1
    open_brackets: list[str] = []
    for place in range(first, len(text)):
        character = text[place]
        kind = unicodedata.bidirectional(character)
        if kind == "L" or character in _OF_FORMULAS:
            break
        if character in _BRACKETS:
            open_brackets.append(_BRACKETS[character])
        elif character in _BRACKETS.values():
            if not open_brackets or open_brackets.pop() != character:
                break
            end = place + 1
        elif kind in ("R", "AL", "EN", "AN") or (kind == "NSM" and end == place):
            end = place + 1
    return end
