"""A report becomes files: all or none, never in place of others, the same bytes again."""

from __future__ import annotations

import csv
import hashlib
import os
import subprocess
import sys
import zipfile
from collections.abc import Iterator
from pathlib import Path

import pytest

import markov
from markov.documents.report import Report
from markov.documents.sheets import Sheet
from markov.documents.writing import check_report_target, clean_stem, write_report
from markov.errors import UsageError
from markov.spec import read_text
from tests.documents.plants import PUMPS
from tests.documents.sample import sample

FIRST_BYTES = {
    ".html": b"<!DOCTYPE html>",
    ".docx": b"PK",
    ".pdf": b"%PDF-",
    ".tex": b"\\documentclass",
    ".md": b"# ",
    ".csv": b"File,Table\r\n",
    ".zip": b"PK",
}


@pytest.fixture(scope="module")
def report() -> Report:
    def rows() -> Iterator[tuple[str, ...]]:
        return iter([("every row",)])

    document = sample()
    return Report(document, markov.solve(read_text(PUMPS)), (Sheet("states", "All states", ("State",), rows),))


@pytest.mark.parametrize("ending", FIRST_BYTES)
def test_the_ending_decides_the_format(report: Report, tmp_path: Path, ending: str) -> None:
    target = tmp_path / f"plant{ending.upper()}"
    written = write_report(report, target)
    assert written.paths[0] == target
    assert target.read_bytes().startswith(FIRST_BYTES[ending])
    assert sorted(tmp_path.iterdir()) == sorted(written.paths)
    assert all(path.name.startswith("plant") for path in written.paths)


@pytest.mark.parametrize("ending", FIRST_BYTES)
def test_the_same_report_gives_the_same_bytes(report: Report, tmp_path: Path, ending: str) -> None:
    both = []
    for name in ("first", "second"):
        (tmp_path / name).mkdir()
        written = write_report(report, tmp_path / name / f"plant{ending}")
        both.append({path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in written.paths})
    assert both[0] == both[1]


def test_a_folder_gets_a_file_a_table_and_an_index(report: Report, tmp_path: Path) -> None:
    folder = tmp_path / "tables"
    written = write_report(report, folder)
    names = sorted(path.name for path in folder.iterdir())
    assert names == ["index.csv", "names.csv", "states.csv", "transitions.csv"]
    assert (folder / "states.csv").read_text(encoding="utf-8") == "State\nevery row\n"
    with (folder / "index.csv").open(encoding="utf-8", newline="") as file:
        listed = [line[0] for line in csv.reader(file)][1:]
    assert sorted(listed) == sorted(set(names) - {"index.csv"})
    assert len(written.paths) == 4


def test_an_archive_holds_the_same_tables(report: Report, tmp_path: Path) -> None:
    write_report(report, tmp_path / "tables")
    write_report(report, tmp_path / "tables.zip")
    with zipfile.ZipFile(tmp_path / "tables.zip") as archive:
        assert archive.testzip() is None
        for path in (tmp_path / "tables").iterdir():
            assert archive.read(path.name) == path.read_bytes()


@pytest.mark.parametrize("ending", FIRST_BYTES)
def test_a_file_that_exists_is_kept_unless_asked(report: Report, tmp_path: Path, ending: str) -> None:
    target = tmp_path / f"plant{ending}"
    target.write_text("mine", encoding="utf-8")
    with pytest.raises(UsageError, match="exists already"):
        write_report(report, target)
    assert target.read_text(encoding="utf-8") == "mine"
    assert list(tmp_path.iterdir()) == [target]
    write_report(report, target, overwrite=True)
    assert target.read_bytes().startswith(FIRST_BYTES[ending])


@pytest.mark.parametrize(("ending", "beside"), [(".md", "plant-course.svg"), (".csv", "plant-names.csv")])
def test_one_file_that_exists_beside_it_stops_all(report: Report, tmp_path: Path, ending: str, beside: str) -> None:
    (tmp_path / beside).write_text("mine", encoding="utf-8")
    with pytest.raises(UsageError, match=beside):
        write_report(report, tmp_path / f"plant{ending}")
    assert [path.name for path in tmp_path.iterdir()] == [beside]


def test_a_file_in_a_folder_stops_all(report: Report, tmp_path: Path) -> None:
    folder = tmp_path / "tables"
    folder.mkdir()
    (folder / "states.csv").write_text("mine", encoding="utf-8")
    with pytest.raises(UsageError, match="states"):
        write_report(report, folder)
    assert [path.name for path in folder.iterdir()] == ["states.csv"]
    write_report(report, folder, overwrite=True)
    assert len(list(folder.iterdir())) == 4


@pytest.mark.parametrize(
    ("name", "why"), [("plant.doc", "expected one of"), ("gone/plant.html", "no folder"), ("gone/tables", "no folder")]
)
def test_a_target_that_cannot_be_is_refused(tmp_path: Path, name: str, why: str) -> None:
    with pytest.raises(UsageError, match=why):
        check_report_target(tmp_path / name, overwrite=True)


def test_a_file_without_an_ending_is_no_folder(tmp_path: Path) -> None:
    (tmp_path / "tables").write_text("mine", encoding="utf-8")
    with pytest.raises(UsageError, match="expected one of"):
        check_report_target(tmp_path / "tables", overwrite=True)


@pytest.mark.parametrize(("ending", "module", "extra"), [(".docx", "docx", "word"), (".pdf", "typst", "pdf")])
def test_a_missing_package_is_told_before_anything_is_solved(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, ending: str, module: str, extra: str
) -> None:
    import importlib.util

    find = importlib.util.find_spec
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None if name == module else find(name))
    with pytest.raises(UsageError, match=rf"markov\[{extra}\]"):
        check_report_target(tmp_path / f"plant{ending}", overwrite=False)


@pytest.mark.parametrize(
    ("name", "stem"),
    [("plant.tex", "plant"), ("My plant, v2.tex", "My-plant-v2"), ("Насос.md", "report"), ("ä_b.md", "a-b")],
)
def test_names_beside_a_file_are_plain(name: str, stem: str) -> None:
    assert clean_stem(Path(name)) == stem


def test_a_name_with_spaces_keeps_its_own_file(report: Report, tmp_path: Path) -> None:
    written = write_report(report, tmp_path / "my plant.md")
    assert sorted(path.name for path in written.paths) == ["my plant.md", "my-plant-course.svg", "my-plant-states.svg"]
    assert "](my-plant-course.svg)" in (tmp_path / "my plant.md").read_text(encoding="utf-8")


def test_a_report_of_a_spec_is_the_same_in_another_process(tmp_path: Path, checkout: Path) -> None:
    spec = tmp_path / "plant.yaml"
    spec.write_text(PUMPS, encoding="utf-8")
    found = []
    for seed in ("1", "2"):
        target = tmp_path / f"seed-{seed}" / "plant.html"
        target.parent.mkdir()
        command = [sys.executable, "-m", "markov", "report", str(spec), str(target)]
        environment = {**os.environ, "PYTHONHASHSEED": seed}
        done = subprocess.run(command, cwd=checkout, env=environment, capture_output=True, text=True, timeout=120)
        assert done.returncode == 1, done.stderr
        found.append(target.read_bytes())
    assert found[0] == found[1]
    assert str(tmp_path).encode() not in found[0]
