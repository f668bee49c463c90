"""The text of the PDF, read back by another program."""

import re
import unicodedata

import pytest

from markov.documents.pdf import write_pdf
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, sample
from tests.documents.tools import module, program, run

pytestmark = pytest.mark.documents


@pytest.fixture(scope="module")
def pages(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> list[str]:
    module(request, "typst", package="typst")
    reader = program(request, "pdftotext", package="poppler-utils")
    folder = tmp_path_factory.mktemp("pdf")
    (folder / "report.pdf").write_bytes(write_pdf(sample(states=120)))
    done = run([reader, "-raw", "report.pdf", "-"], folder)
    assert done.returncode == 0, done.stderr
    return done.stdout.split("\f")[:-1]


def test_every_page_has_its_number_and_all_but_the_first_the_revision_at_the_head(pages: list[str]) -> None:
    assert len(pages) > 6
    for number, page in enumerate(pages, 1):
        assert f"{number} / {len(pages)}" in page
        assert "Reference HL-07 · Revision B" in page
    assert all(page.startswith("Harbour lock gate drive: 50 % & <more>") for page in pages)


def test_headings_of_a_table_stand_on_each_of_its_pages(pages: list[str]) -> None:
    holding = [page for page in pages if "repair by the fitters" in page]
    assert len(holding) > 2
    assert all("From To Cause" in page for page in holding)


@pytest.mark.parametrize("kind", HOSTILE)
def test_hostile_names_come_out_as_they_are(kind: str, pages: list[str]) -> None:
    text = re.sub(r"\s", "", unicodedata.normalize("NFKC", "".join(pages)))
    name = legible(HOSTILE[kind])
    numbered = "".join(f"⟨U+{ord(character):04X}⟩" for character in name)
    if kind in ("hebrew", "arabic"):  # the reader takes words in the order in which they are seen
        wanted = [word for word in re.findall(r"\w+", name) if len(word) > 1]
    elif kind == "chinese" and numbered in text:  # no font of this machine has it
        wanted = [numbered]
    else:
        wanted = [re.sub(r"\s", "", unicodedata.normalize("NFKC", name))]
    assert all(text.count(part) >= 2 for part in wanted)
