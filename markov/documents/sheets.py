"""Tables as rows of plain text, for files that hold every row and digit."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from markov.documents.numbering import labels, placed
from markov.documents.tree import Document, Table, Text

Lines = Iterator[tuple[str, ...]]


@dataclass(frozen=True)
class Sheet:
    """A table of plain text; its rows are made when they are asked for.

    Attributes
    ----------
    name : str
        For file names: letters, digits, hyphens.
    caption : str
    headings : tuple of str
    rows : callable
        Yields the rows, as many cells each as there are headings.
    """

    name: str
    caption: str
    headings: tuple[str, ...]
    rows: Callable[[], Lines]


def sheets_of(document: Document, whole: tuple[Sheet, ...] = ()) -> tuple[Sheet, ...]:
    """Return every table of a document in reading order; where there is a whole sheet of the same name, that one."""
    instead = {sheet.name: sheet for sheet in whole}
    called = labels(placed(document))
    found = [instead.pop(table.name) if table.name in instead else _sheet(table, called) for table in document.tables()]
    return (*found, *instead.values())


def _sheet(table: Table, called: Mapping[str, str]) -> Sheet:
    def rows() -> Lines:
        for row in table.rows:
            yield tuple(words(cell, called) for cell in row.cells)

    return Sheet(table.name, table.caption, tuple(column.heading for column in table.columns), rows)


def words(text: Text, called: Mapping[str, str]) -> str:
    """Return text without emphasis; a reference without words of its own reads what it leads to."""
    return "".join(span.text or (called.get(span.target, "") if span.kind == "link" else "") for span in text)
