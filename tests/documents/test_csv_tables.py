"""CSV that no spreadsheet takes for a program, and that a program reads back."""

from __future__ import annotations

import csv
import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.documents.csv_tables import csv_bytes, csv_index, csv_text, harmless
from markov.documents.sheets import Sheet, sheets_of
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, sample

SIGNS = "=+-@\uff1d\uff0b\uff0d\uff20"


def sheet(*lines: tuple[str, ...], headings: tuple[str, ...] = ("Name", "Value")) -> Sheet:
    return Sheet("names", "Names", headings, lambda: iter(lines))


def read_back(text: str) -> list[list[str]]:
    return list(csv.reader(io.StringIO(text, newline=""), strict=True))


def plain(cell: str) -> str:
    """What a reader by program makes of a cell: one leading apostrophe is no part of it."""
    return cell.removeprefix("'")


@pytest.mark.parametrize(
    ("cell", "told"),
    [
        ("=1+1", "'=1+1"),
        ("@SUM(A1)", "'@SUM(A1)"),
        ("+cmd", "'+cmd"),
        ("-a", "'-a"),
        ("  =1", "'  =1"),
        ("\uff1d1", "'\uff1d1"),
        ("'quoted", "''quoted"),
        ("-1.5e-3", "-1.5e-3"),
        ("+2", "+2"),
        ("-1+cmd", "'-1+cmd"),
        ("a=1", "a=1"),
        ("− 3", "− 3"),
        ("", ""),
    ],
)
def test_a_cell_that_could_be_a_formula_gets_an_apostrophe(cell: str, told: str) -> None:
    assert harmless(cell) == told


@given(st.lists(st.tuples(st.text(), st.text()), max_size=4))
def test_any_text_is_harmless_and_comes_back(lines: list[tuple[str, ...]]) -> None:
    found = read_back(csv_text(sheet(*lines)))
    assert [[plain(cell) for cell in line] for line in found[1:]] == [list(map(legible, line)) for line in lines]
    for line in found:
        for cell in line:
            first = cell.lstrip(" \ufffd\u21b5\u00a0")[:1]
            assert not first or first not in SIGNS or float(cell) == float(cell)


def test_a_separator_of_another_country_opens_no_new_cell() -> None:
    text = csv_text(sheet(("a;=cmd|' /C calc'!A0", "x\t=1")))
    (_, line) = list(csv.reader(io.StringIO(text, newline=""), delimiter=";"))
    assert not any(cell.startswith("=") for cell in line)
    assert '"a;=cmd' in text


@pytest.mark.parametrize("name", HOSTILE.values(), ids=HOSTILE.keys())
def test_hostile_names_come_back(name: str) -> None:
    found = read_back(csv_text(sheet((name, "1"))))
    assert len(found) == 2
    assert plain(found[1][0]) == legible(name)


def test_every_table_of_a_document_is_a_sheet_and_references_read_their_numbers() -> None:
    document = sample()
    found = {each.name: each for each in sheets_of(document)}
    assert list(found) == [table.name for table in document.tables()]
    transitions = read_back(csv_text(found["transitions"]))
    assert transitions[0][:3] == ["From", "To", "Cause"]
    assert transitions[1][0] == "1"
    assert transitions[1][-1] == "2"  # a link without words of its own


def test_a_whole_sheet_stands_in_for_the_table_of_its_name() -> None:
    document = sample()
    whole = Sheet("states", "All states", ("State",), lambda: iter([("7",)]))
    found = {each.name: each for each in sheets_of(document, (whole,))}
    assert csv_text(found["states"]) == "State\r\n7\r\n"
    assert len(found) == len(list(document.tables()))


def test_the_index_names_every_file() -> None:
    index = csv_index(sheets_of(sample()), "plant")
    files = [line[0] for line in read_back(csv_text(index))[1:]]
    assert files == ["plant-states.csv", "plant-transitions.csv", "plant-names.csv"]


def test_files_are_utf8_without_a_mark_and_lines_end_as_the_standard_says() -> None:
    data = csv_bytes(sheet(("μ", "1")))
    assert data == "Name,Value\r\nμ,1\r\n".encode()
