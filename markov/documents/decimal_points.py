"""Numbers of a column with their decimal points below each other."""

from __future__ import annotations

import re

from markov.documents.tree import Table

PAD = "\N{FIGURE SPACE}"
"""A space as wide as a digit."""
_NUMBER = re.compile(r"[≤≥<>≈±+−-]?\s?(\d+)")


def padding(table: Table) -> tuple[tuple[int, ...], ...]:
    """Return, for each row, by how many digits' width each cell moves to the right; 0 outside decimal columns."""
    columns = []
    for place, column in enumerate(table.columns):
        if column.align != "decimal":
            columns.append([0] * len(table.rows))
            continue
        lengths = [_before_point("".join(span.text for span in row.cells[place])) for row in table.rows]
        longest = max((length for length in lengths if length is not None), default=0)
        columns.append([longest - length if length is not None else 0 for length in lengths])
    return tuple(zip(*columns, strict=True)) if table.rows else ()


def _before_point(text: str) -> int | None:
    """Return how many characters stand before the decimal point of a number; None where there is no number."""
    match = _NUMBER.match(text)
    return match.end() if match else None
