"""How wide the columns of a table stand on an A4 page."""

from __future__ import annotations

from markov.documents.tree import Table
from markov.output.lettering import legible

_ACROSS = 92.0
"""Bold letters of 8 pt across the text of an upright A4 page."""
_GAP = 2.5
"""Letters taken by the space between two columns."""


def shares(table: Table) -> tuple[float, ...]:
    """Return the share of each column; they sum to 1.

    The shares asked for hold, but for columns narrower than the longest word of their heading: these get its width,
    at the cost of the others.
    """
    least = [_longest_word(column.heading) / _ACROSS for column in table.columns]
    if sum(least) >= 1.0:
        return tuple(width / sum(least) for width in least)
    wanted = [max(column.width, 1e-6) for column in table.columns]
    fixed: set[int] = set()
    while True:
        room = 1.0 - sum(least[place] for place in fixed)
        total = sum(width for place, width in enumerate(wanted) if place not in fixed)
        found = [least[place] if place in fixed else width / total * room for place, width in enumerate(wanted)]
        narrow = {place for place, width in enumerate(found) if place not in fixed and width < least[place]}
        if not narrow:
            return tuple(found)
        fixed |= narrow


def _longest_word(heading: str) -> float:
    return max((len(word) for word in legible(heading).split()), default=0) + _GAP
