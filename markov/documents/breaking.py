"""Where a long word may break though it holds no space: formulas, hashes, names."""

from __future__ import annotations

import re
import unicodedata

_SHORT = 12
"""Words up to this length stay whole."""
_LONGEST = 16
"""Characters without any natural break before one is made."""
_AFTER = frozenset("·_/,;:.)]}|&=+×÷")
_BEFORE = frozenset("·([{+−")
_WORD = re.compile(r"\S+")


def pieces(text: str) -> tuple[str, ...]:
    """Return the parts of `text` between which a line may break, besides its spaces; joined they are `text`."""
    found: list[str] = []
    done = 0
    for word in _WORD.finditer(text):
        if word.end() - word.start() <= _SHORT:
            continue
        for cut in _cuts(word.group()):
            found.append(text[done : word.start() + cut])
            done = word.start() + cut
    found.append(text[done:])
    return tuple(found)


def _cuts(word: str) -> list[int]:
    cuts: list[int] = []
    last = 0
    for place in range(2, len(word) - 1):
        if unicodedata.combining(word[place]) or word[place] == "\u200d" or word[place - 1] == "\u200d":
            continue
        if place - last >= _LONGEST or (place - last >= 2 and _natural(word, place)):
            cuts.append(place)
            last = place
    return cuts


def _natural(word: str, place: int) -> bool:
    before, after = word[place - 1], word[place]
    if before in ".,:" and after.isdigit():
        return False  # within a number
    return (before in _AFTER and after not in _AFTER) or after in _BEFORE
