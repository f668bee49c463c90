"""The LaTeX files under the programs that read them."""

import shutil
from pathlib import Path

import pytest

from markov.documents.latex import write_latex
from tests.documents.sample import sample
from tests.documents.tools import program, run

pytestmark = pytest.mark.documents

PROGRAMS = {
    "pdflatex": "texlive-latex-recommended texlive-fonts-recommended lmodern",
    "xelatex": "texlive-xetex",
    "lualatex": "texlive-luatex",
}
HOST = r"""\documentclass{report}
\usepackage{iftex}
\ifpdftex\usepackage[T1]{fontenc}\fi
\newcommand{\MarkovFolder}{parts/}
\input{parts/report-preamble}
\renewcommand{\MarkovHeadingA}{\section}
\begin{document}
\chapter{Reliability of the drive}
See Table~\ref{report:transitions}.
\input{parts/report-table-transitions}
\end{document}
"""


def set_twice(engine: str, folder: Path, source: str) -> str:
    for _ in range(2):
        done = run([engine, "-interaction=nonstopmode", "-halt-on-error", "-no-shell-escape", source], folder)
        assert done.returncode == 0, done.stdout[-3000:]
    return (folder / source).with_suffix(".log").read_text(encoding="utf-8", errors="replace")


@pytest.fixture(params=PROGRAMS)
def engine(request: pytest.FixtureRequest) -> str:
    return program(request, request.param, package=PROGRAMS[request.param])


def written(folder: Path) -> None:
    for name, content in write_latex(sample(states=60)).items():
        (folder / name).write_bytes(content)


def test_the_whole_compiles_with_every_name_in_it(engine: str, tmp_path: Path) -> None:
    written(tmp_path)
    log = set_twice(engine, tmp_path, "report.tex")
    assert (tmp_path / "report.pdf").read_bytes().startswith(b"%PDF-")
    for complaint in ("Overfull", "undefined", "multiply defined", "Missing character", "Rerun to get"):
        assert complaint not in log


def test_a_table_stands_in_a_document_of_the_users_own(engine: str, tmp_path: Path) -> None:
    (tmp_path / "parts").mkdir()
    written(tmp_path / "parts")
    (tmp_path / "host.tex").write_text(HOST)
    log = set_twice(engine, tmp_path, "host.tex")
    assert "undefined" not in log


def test_tectonic_sets_it_where_it_is_there(tmp_path: Path) -> None:
    path = shutil.which("tectonic")
    if path is None:
        pytest.skip("tectonic is not there; the other programs stand for it")
    written(tmp_path)
    done = run([path, "--only-cached", "report.tex"], tmp_path)
    assert done.returncode == 0, done.stderr
