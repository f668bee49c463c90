"""The Word file: Word's own headings, tables, captions, fields; every name as it is."""

import importlib.util
import io
import re
import struct
import zipfile
from typing import Any
from xml.etree import ElementTree

import pytest

from markov.documents.tree import Document, Items, Paragraph, Section, Span, plain
from markov.documents.word import write_word
from markov.errors import UsageError
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, sample
from tests.documents.tools import module

W = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}"


@pytest.fixture(autouse=True)
def installed(request: pytest.FixtureRequest) -> None:
    module(request, "docx", package="python-docx")


@pytest.fixture(scope="module")
def content() -> bytes:
    if importlib.util.find_spec("docx") is None:
        return b""
    return write_word(sample(states=6))


@pytest.fixture
def file(content: bytes) -> Any:
    import docx

    return docx.Document(io.BytesIO(content))


def xml(content: bytes, name: str = "word/document.xml") -> str:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return archive.read(name).decode()


def test_headings_carry_the_styles_that_make_the_contents(file: Any) -> None:
    styles = [paragraph.style.name for paragraph in file.paragraphs if paragraph.style.name.startswith("Heading")]
    assert styles == [
        *["Heading 1", "Heading 2", "Heading 1", "Heading 1", "Heading 1", "Heading 1"],
        *["Heading 2", "Heading 3", "Heading 4"],
    ]


def test_contents_are_a_field_that_stands_filled(content: bytes, file: Any) -> None:
    assert 'TOC \\o "1-2"' in xml(content)
    entries = ["".join(p._p.itertext(f"{W}t")) for p in file.paragraphs if p.style.name.startswith("toc")]
    assert len(entries) == 7
    assert entries[1] == "1.1  Second _level_ & $more$"


@pytest.mark.parametrize("kind", HOSTILE)
def test_hostile_names_come_out_as_they_are(kind: str, file: Any) -> None:
    rows = {row.cells[0].text: [cell.text for cell in row.cells[1:]] for row in file.tables[3].rows}
    assert rows[kind] == [legible(HOSTILE[kind])] * 2


def test_hostile_names_come_out_as_they_are_in_lists_and_headings(file: Any) -> None:
    lines = [paragraph.text for paragraph in file.paragraphs if paragraph.style.name == "List Bullet"]
    assert lines == [legible(name) for name in HOSTILE.values()]
    assert legible(HOSTILE["long"]) in [p.text for p in file.paragraphs if p.style.name == "Heading 1"]


def test_names_from_right_to_left_are_marked(content: bytes) -> None:
    found = re.findall(r"<w:r><w:rPr><w:rtl/></w:rPr><w:t[^>]*>([^<]*)</w:t>", xml(content))
    assert set(found) == {"משאבה 3 (ראשית)", "مضخة الماء"}


def test_tables_are_native_and_repeat_their_headings(file: Any) -> None:
    assert len(file.tables) == 4
    for table in file.tables[1:]:
        marks = [row._tr.find(f"{W}trPr/{W}tblHeader") is not None for row in table.rows]
        assert marks == [True] + [False] * (len(marks) - 1)


def test_tables_are_as_wide_as_the_text(file: Any) -> None:
    across = file.sections[0].page_width - file.sections[0].left_margin - file.sections[0].right_margin
    for table in file.tables:
        assert sum(column.width for column in table.columns) == pytest.approx(across, abs=8000)


def test_captions_are_counted_by_word_itself(content: bytes, file: Any) -> None:
    captions = ["".join(p._p.itertext(f"{W}t")) for p in file.paragraphs if p.style.name == "Caption"]
    assert captions[0] == "Table 1  States"
    assert captions[1] == "Figure 1  State diagram with names such as a_b & c"
    codes = re.findall(r"<w:instrText[^>]*>([^<]*)<", xml(content))
    assert [code.strip() for code in codes if "SEQ" in code] == [
        f"SEQ {word} \\* ARABIC" for word in ("Table", "Figure", "Figure", "Table", "Table")
    ]


def test_references_are_fields_and_links_lead_to_bookmarks(content: bytes) -> None:
    text = xml(content)
    marks = re.findall(r'<w:bookmarkStart [^>]*w:name="([^"]*)"', text)
    assert len(marks) == len(set(marks)) > 10
    assert all(re.fullmatch(r"[A-Za-z_][A-Za-z0-9_]{0,39}", mark) for mark in marks)
    links = set(re.findall(r'w:anchor="([^"]*)"', text)) | set(re.findall(r" REF (\S+) ", text))
    assert links <= set(marks)
    assert {"to_transitions", "to_diagram", "to_state_3", "to_assumption_2"} <= links


def test_a_long_anchor_becomes_a_bookmark_that_word_allows() -> None:
    anchor = "state-" + "9" * 60
    blocks = (Paragraph((Span("there", "link", anchor),)), Section("There", (), anchor=anchor))
    marks = re.findall(r'w:(?:name|anchor)="(to_[^"]*)"', xml(write_word(Document("Title", (), blocks))))
    assert len(marks) == 2
    assert marks[0] == marks[1]
    assert len(marks[0]) <= 40


def test_pictures_have_three_hundred_dots_an_inch_and_say_what_they_show(content: bytes, file: Any) -> None:
    shapes = file.inline_shapes
    assert len(shapes) == 2
    described = [shape._inline.docPr.get("descr") for shape in shapes]
    assert described == ['States & arrows: "all good" <first>', "A box with words"]
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        pictures = sorted(name for name in archive.namelist() if name.startswith("word/media/"))
        for name, shape in zip(pictures, shapes, strict=True):
            dots = struct.unpack(">I", archive.read(name)[16:20])[0]
            assert dots / (shape.width / 914400) == pytest.approx(300, rel=0.01)


def test_a_wide_picture_lies_on_a_page_sideways(file: Any) -> None:
    assert [section.page_width > section.page_height for section in file.sections] == [False, True, False]
    wide = file.inline_shapes[1]
    inside = file.sections[1].page_width - file.sections[1].left_margin - file.sections[1].right_margin
    assert file.sections[0].page_width < wide.width + 2 * file.sections[0].left_margin
    assert wide.width <= inside


def test_lists_with_numbers_each_begin_at_one() -> None:
    lists = tuple(Items((plain("a"), plain("b")), numbered=True) for _ in range(3))
    text = xml(write_word(Document("Title", (), lists)))
    numbers = re.findall(r'<w:numId w:val="(\d+)"/>', text)
    assert len(numbers) == 6
    assert len(set(numbers)) == 3


def test_reference_and_revision_stand_on_every_page(content: bytes, file: Any) -> None:
    above = file.sections[0].header.paragraphs[0].text
    assert above == "Harbour lock gate drive: 50 % & <more> · Reference HL-07 · Revision B"
    assert all(section.header.paragraphs[0].text == above for section in file.sections)
    assert "PAGE" in xml(content, "word/footer1.xml")


def test_verdicts_are_told_apart_by_more_than_colour(content: bytes) -> None:
    text = xml(content)
    boxes = {
        word: re.search(rf"<w:r><w:rPr>((?:(?!</w:rPr>).)*)</w:rPr><w:t[^>]*>{word}</w:t>", text)
        for word in ("met", "missed", "undecided", "cannot occur")
    }
    looks = {word: found.group(1) if found else "" for word, found in boxes.items()}
    assert 'w:bdr w:val="single"' in looks["met"]
    assert looks["met"] == looks["cannot occur"]
    assert len({looks["met"], looks["missed"], looks["undecided"]}) == 3
    assert 'w:bdr w:val="dashed"' in looks["undecided"]
    assert "w:shd" in looks["missed"]


def test_the_file_holds_no_date_and_no_name_of_a_library(content: bytes) -> None:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
        said = archive.read("docProps/core.xml").decode()
        assert "thumbnail" not in " ".join(archive.namelist())
    assert "created" not in said
    assert "modified" not in said
    assert "python" not in said
    assert "Harbour lock gate drive" in said


def test_every_part_is_xml(content: bytes) -> None:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        parts = [name for name in archive.namelist() if name.endswith((".xml", ".rels"))]
        assert len(parts) > 8
        for name in parts:
            ElementTree.fromstring(archive.read(name))


def test_every_style_that_is_used_is_there(content: bytes) -> None:
    used = set(re.findall(r'<w:(?:p|r|tbl)Style w:val="([^"]*)"', xml(content)))
    there = set(re.findall(r'w:styleId="([^"]*)"', xml(content, "word/styles.xml")))
    assert len(used) > 8
    assert used <= there


def test_the_same_document_gives_the_same_bytes(content: bytes) -> None:
    assert write_word(sample(states=6)) == content


def test_an_anchor_used_twice_is_refused() -> None:
    with pytest.raises(UsageError, match="used twice"):
        write_word(Document("Title", (), (Section("A", (), "here"), Section("B", (), "here"))))
