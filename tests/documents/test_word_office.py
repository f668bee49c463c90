"""The Word file in LibreOffice."""

from pathlib import Path

import pytest

from markov.documents.word import write_word
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, sample
from tests.documents.tools import module, program, run

pytestmark = pytest.mark.documents


@pytest.fixture
def office(request: pytest.FixtureRequest) -> str:
    module(request, "docx", package="python-docx")
    return program(request, "soffice", "libreoffice", package="libreoffice-writer")


def converted(office: str, folder: Path, form: str) -> bytes:
    (folder / "report.docx").write_bytes(write_word(sample(states=10)))
    done = run([office, "--headless", "--convert-to", form, "report.docx"], folder)
    made = folder / f"report.{form.partition(':')[0]}"
    assert made.exists(), done.stdout + done.stderr
    return made.read_bytes()


def test_word_file_opens_and_becomes_a_pdf(office: str, tmp_path: Path) -> None:
    made = converted(office, tmp_path, "pdf")
    assert made.startswith(b"%PDF-")
    assert made.count(b"/MediaBox") >= 4 or made.count(b"/Type/Page") >= 4


def test_word_file_reads_as_it_was_written(office: str, tmp_path: Path) -> None:
    text = converted(office, tmp_path, "txt:Text (encoded):UTF8").decode("utf-8-sig")
    lines = [line.strip() for line in text.splitlines()]
    for name in HOSTILE.values():
        assert lines.count(legible(name).strip()) + lines.count(f"• {legible(name).strip()}") >= 2
    assert "Table 1  States" in lines
    assert "See Table 2, Figure 1, Section 1, the second assumption and a place that is not there." in text.replace(
        "\n", " "
    )
