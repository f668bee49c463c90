"""The PDF: A4 pages set by typst, the same bytes on every run."""

import importlib.util
import re
import zlib

import pytest

from markov.documents.pdf import write_pdf
from markov.documents.tree import Document, Figure, Section
from markov.errors import DrawingError, UsageError
from tests.documents.sample import HOSTILE, sample
from tests.documents.tools import module


@pytest.fixture(autouse=True)
def installed(request: pytest.FixtureRequest) -> None:
    module(request, "typst", package="typst")


@pytest.fixture(scope="module")
def content() -> bytes:
    return write_pdf(sample(states=6)) if importlib.util.find_spec("typst") else b""


def objects(content: bytes) -> bytes:
    """Return the file with its compressed streams opened, as far as they are objects."""
    opened = [content]
    for stream in re.findall(rb"/ObjStm.*?stream\r?\n(.*?)\r?\nendstream", content, re.DOTALL):
        opened.append(zlib.decompress(stream))
    return b"\n".join(opened)


def test_pages_are_a4_and_a_wide_picture_lies_sideways(content: bytes) -> None:
    boxes = re.findall(rb"/MediaBox ?\[ ?0 0 ([\d.]+) ([\d.]+) ?\]", objects(content))
    sizes = [(round(float(width)), round(float(height))) for width, height in boxes]
    assert set(sizes) == {(595, 842), (842, 595)}
    assert sizes.count((842, 595)) == 1


def test_the_file_holds_no_date(content: bytes) -> None:
    assert b"CreationDate" not in objects(content)
    assert b"ModDate" not in objects(content)
    assert b"CreateDate" not in objects(content)


def test_pages_are_tagged_for_those_who_do_not_see_them(content: bytes) -> None:
    text = objects(content)
    for tag in (b"/StructTreeRoot", b"/Table", b"/TH", b"/H1", b"/Figure", b"/Alt", b"/Lang"):
        assert tag in text


def test_figures_stay_vectors(content: bytes) -> None:
    assert b"/Subtype /Image" not in objects(content).replace(b"/Subtype/Image", b"/Subtype /Image")


def test_sections_stand_in_the_bookmarks(content: bytes) -> None:
    assert b"/Outlines" in objects(content)


@pytest.mark.parametrize("kind", HOSTILE)
def test_a_hostile_name_is_never_markup(kind: str) -> None:
    name = HOSTILE[kind]
    made = write_pdf(Document(name, ((name, name), ("Reference", name)), (Section(name, ()),)))
    assert made.startswith(b"%PDF-")


def test_the_same_document_gives_the_same_bytes(content: bytes) -> None:
    assert write_pdf(sample(states=6)) == content


def test_a_picture_that_cannot_be_read_is_refused() -> None:
    broken = Figure("broken", "Broken", "nothing", "<svg", b"", b"", 10.0, 10.0)
    with pytest.raises(DrawingError, match="could not be set"):
        write_pdf(Document("Title", (), (broken,)))


def test_an_anchor_used_twice_is_refused() -> None:
    with pytest.raises(UsageError, match="used twice"):
        write_pdf(Document("Title", (), (Section("A", (), "here"), Section("B", (), "here"))))


def test_an_empty_document_is_a_page_too() -> None:
    assert write_pdf(Document("Title", (), ())).startswith(b"%PDF-")
