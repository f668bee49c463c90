"""A report becomes files: which format, by the ending of the name; all of them, or none."""

from __future__ import annotations

import io
import os
import re
import unicodedata
import zipfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from markov.documents.report import Report
from markov.documents.sheets import sheets_of
from markov.errors import UsageError
from markov.output.storing import store, taken
from markov.results import Solution

ENDINGS = (".html", ".docx", ".pdf", ".tex", ".md", ".csv", ".zip")

_EXTRAS = {".docx": ("docx", "python-docx", "word"), ".pdf": ("typst", "typst", "pdf")}
_FIRST_DATE = (1980, 1, 1, 0, 0, 0)


@dataclass(frozen=True)
class Reported:
    """A report that has been written.

    Attributes
    ----------
    paths : tuple of Path
        The files, the one that was asked for first.
    solution : Solution
        What it reports.
    """

    paths: tuple[Path, ...]
    solution: Solution


def check_report_target(target: Path, *, overwrite: bool) -> str:
    """Return the ending that a report is to be written by; empty for a folder of CSV files.

    Raises
    ------
    UsageError
        An unknown ending, a package that is missing for it, a folder that is not there, or a file that exists already
        while `overwrite` is false.
    """
    form = target.suffix.lower()
    if target.is_dir() or (not form and not os.path.lexists(target)):
        if not target.parent.is_dir():
            raise UsageError(f"{target}: there is no folder {target.parent}; make it first")
        return ""
    if form not in ENDINGS:
        expected = f"expected one of {', '.join(ENDINGS)}, or a folder for CSV files"
        raise UsageError(f"{target}: ending {target.suffix!r}; {expected}")
    if not target.parent.is_dir():
        raise UsageError(f"{target}: there is no folder {target.parent}; make it first")
    _refuse_taken((target,), overwrite=overwrite)
    if form in _EXTRAS:
        _check_package(target, *_EXTRAS[form])
    return form


def write_report(report: Report, path: str | os.PathLike[str], *, overwrite: bool = False) -> Reported:
    """Write a report into a file; the same report gives the same bytes.

    Parameters
    ----------
    report : Report
    path
        The file, ending in .html, .docx, .pdf, .tex, .md, .csv or .zip; or a folder, which gets a CSV file a table and
        is made if it is not there. Pictures of .md, fragments and pictures of .tex and the tables of .csv stand in
        further files beside it, whose names begin like its own; .zip holds the CSV files.
    overwrite : bool
        Whether files of these names may be replaced.

    Raises
    ------
    UsageError
        See `check_report_target`; also where one of the further files exists.
    DrawingError
        A file that cannot be written.
    """
    target = Path(path)
    form = check_report_target(target, overwrite=overwrite)
    files = _folder(report, target) if not form else _files(report, target, form)
    _refuse_taken(files, overwrite=overwrite)
    if not form and not target.is_dir():
        try:
            target.mkdir()
        except OSError as error:
            raise UsageError(f"{target} cannot be made: {error.strerror or error}") from error
    for name, content in files.items():
        store(content, name, overwrite=overwrite)
    return Reported(tuple(files), report.solution)


def _refuse_taken(files: Mapping[Path, bytes] | tuple[Path, ...], *, overwrite: bool) -> None:
    for path in files:
        if path.is_dir():
            raise UsageError(f"{path} is a folder; expected the name of a file")
        if not overwrite and os.path.lexists(path):
            raise UsageError(taken(path))


def _check_package(target: Path, module: str, package: str, extra: str) -> None:
    from importlib.util import find_spec

    if find_spec(module) is None:
        raise UsageError(
            f"{target}: the package {package} is not installed; expected the extra `{extra}` for {target.suffix}; "
            f'install it with: pip install "markov[{extra}]"'
        )


def _files(report: Report, target: Path, form: str) -> dict[Path, bytes]:
    """Return the content of every file, that of the target first."""
    document = report.document
    if form == ".html":
        from markov.documents.html import write_html

        return {target: write_html(document).encode()}
    if form == ".docx":
        from markov.documents.word import write_word

        return {target: write_word(document)}
    if form == ".pdf":
        from markov.documents.pdf import write_pdf

        return {target: write_pdf(document)}
    stem = clean_stem(target)
    if form == ".tex":
        from markov.documents.latex import write_latex

        return _beside(target, write_latex(document, name=stem))
    if form == ".md":
        from markov.documents.markdown import write_markdown

        return _beside(target, write_markdown(document, name=stem))
    if form == ".zip":
        return {target: _zipped(_tables(report))}
    return _beside(target, _tables(report, stem))


def _beside(target: Path, files: Mapping[str, bytes]) -> dict[Path, bytes]:
    """Give the first file the name of the target; the others stand beside it."""
    first, *others = files
    return {target: files[first], **{target.with_name(name): files[name] for name in others}}


def _tables(report: Report, stem: str = "") -> dict[str, bytes]:
    """Return the CSV files of a report by name, first the one that lists them."""
    from markov.documents.csv_tables import csv_bytes, csv_index, csv_name

    sheets = sheets_of(report.document, report.sheets)
    index = csv_index(sheets, stem)
    return {csv_name(sheet, stem): csv_bytes(sheet) for sheet in (index, *sheets)}


def _folder(report: Report, target: Path) -> dict[Path, bytes]:
    return {target / name: content for name, content in _tables(report).items()}


def _zipped(files: Mapping[str, bytes]) -> bytes:
    """Return files as a ZIP archive, stored as they are: how well they could be squeezed differs between machines."""
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w", zipfile.ZIP_STORED) as archive:
        for name, data in files.items():
            entry = zipfile.ZipInfo(name, _FIRST_DATE)
            entry.create_system, entry.external_attr = 3, 0o644 << 16
            archive.writestr(entry, data)
    return content.getvalue()


def clean_stem(target: Path) -> str:
    """Return the stem of a file as letters, digits and hyphens."""
    plain = unicodedata.normalize("NFKD", target.stem).encode("ascii", "ignore").decode()
    return re.sub(r"[^A-Za-z0-9]+", "-", plain).strip("-") or "report"
