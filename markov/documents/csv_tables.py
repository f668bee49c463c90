"""Tables as CSV (RFC 4180): one file a table, UTF-8, harmless where a spreadsheet opens it.

A spreadsheet takes a cell that begins with ``=``, ``+``, ``-`` or ``@`` for a formula and may run it.  Names in a
spec are free text, so such a cell gets an apostrophe in front: spreadsheets read that as the mark of plain text.
White space and control characters before the sign are passed over by some of them, so they do not help; full-width
forms of the signs are taken for the signs themselves in some languages.  A number keeps its sign: it is no formula,
and a reader by program wants it as it is.  A cell that begins with an apostrophe by itself gets another one, so that
whoever reads the files by program gets every text back by taking one leading apostrophe away.

Fields are quoted where they hold a comma, a quote, a semicolon or a tab, for a spreadsheet that separates by one of
these would otherwise begin a new cell inside a name; line ends are CR LF, as the standard has them.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from markov.documents.sheets import Sheet
from markov.output.lettering import legible

#: What a spreadsheet may take for the beginning of a formula, full-width forms included.
_SIGNS = frozenset("=+-@\uff1d\uff0b\uff0d\uff20")
_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
_QUOTED = re.compile('[",;\t\r\n]|^\\s|\\s$')


def csv_text(sheet: Sheet) -> str:
    """Return a sheet as the text of a CSV file, headings first."""
    return "".join(_line(cells) for cells in (sheet.headings, *sheet.rows()))


def csv_bytes(sheet: Sheet) -> bytes:
    """Return a sheet as the content of a CSV file."""
    return csv_text(sheet).encode()


def csv_index(sheets: Iterable[Sheet], stem: str = "") -> Sheet:
    """Return the sheet that says which table stands in which file.

    Parameters
    ----------
    sheets : iterable of Sheet
    stem : str
        What the names of the files begin with.
    """
    listed = tuple((csv_name(sheet, stem), sheet.caption) for sheet in sheets)
    return Sheet("index", "Tables and their files", ("File", "Table"), lambda: iter(listed))


def csv_name(sheet: Sheet, stem: str = "") -> str:
    """Return the name of the file of a sheet: ``results.csv``, ``stem-results.csv``."""
    return f"{stem}-{sheet.name}.csv" if stem else f"{sheet.name}.csv"


def harmless(cell: str) -> str:
    """Return the text of a cell such that no spreadsheet takes it for a formula."""
    text = legible(cell)
    if _NUMBER.fullmatch(text):
        return text
    begins = text.lstrip(" \N{NO-BREAK SPACE}\N{REPLACEMENT CHARACTER}\N{DOWNWARDS ARROW WITH CORNER LEFTWARDS}")[:1]
    return f"'{text}" if (begins in _SIGNS and begins) or text.startswith("'") else text


def _line(cells: Iterable[str]) -> str:
    return ",".join(_field(harmless(cell)) for cell in cells) + "\r\n"


def _field(text: str) -> str:
    return '"' + text.replace('"', '""') + '"' if _QUOTED.search(text) else text
