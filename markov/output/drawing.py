"""A state diagram becomes files: SVG, PDF, PNG, Graphviz source or GraphML by the ending of the name."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

from markov.errors import UsageError
from markov.output.diagram import StateDiagram
from markov.output.dot_text import dot_text
from markov.output.engines import TIME_LIMIT, Engine
from markov.output.graphml import graphml_text
from markov.output.paging import A4, Paper, lay_out
from markov.output.picture import Picture
from markov.output.storing import store, taken

ENDINGS = (".svg", ".pdf", ".png", ".dot", ".graphml")
PICTURES = (".svg", ".pdf", ".png")
"""Endings of a picture; the others are lists of states and arrows for other programs."""
_MILLIMETRES_PER_POINT = 25.4 / 72
_PAGES = (("A4", 210.0, 297.0), ("A3", 297.0, 420.0), ("A2", 420.0, 594.0), ("A1", 594.0, 841.0), ("A0", 841.0, 1189.0))
_PAGE_MARGIN = 12.0


@dataclass(frozen=True)
class Drawn:
    """Files that have been written.

    Parameters
    ----------
    path
        Where it is; the first of several.
    engine
        What placed the boxes: "dot", "graphviz-pure", "own", or "none" where no boxes had to be placed.
    notes
        What the reader should know: engines that failed, folding, the page it fits, characters without a font.
    paths
        All files: several where SVG or PNG take several pages.
    """

    path: Path
    engine: Engine | Literal["none"]
    notes: tuple[str, ...]
    paths: tuple[Path, ...] = ()


def check_target(target: Path, *, overwrite: bool, endings: Sequence[str] = ENDINGS) -> str:
    """Return the ending of a file that a picture may be written to.

    Raises
    ------
    UsageError
        An unknown ending, a folder that is not there, a file that exists already while `overwrite` is false.
    """
    form = target.suffix.lower()
    if form not in endings:
        raise UsageError(f"{target}: ending {target.suffix!r}; expected one of {', '.join(endings)}")
    if not target.parent.is_dir():
        raise UsageError(f"{target}: there is no folder {target.parent}; make it first")
    if target.is_dir():
        raise UsageError(f"{target} is a folder; expected the name of a file")
    if not overwrite and os.path.lexists(target):
        raise UsageError(taken(target))
    return form


def write_diagram(
    diagram: StateDiagram,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    paper: Paper | None = A4,
    whole: bool = False,
    engine: Engine | None = None,
    time_limit: float = TIME_LIMIT,
) -> Drawn:
    """Draw `diagram` into a file; the same diagram and engine give the same bytes.

    Parameters
    ----------
    diagram
        What to draw. What does not fit the paper with words of 8 pt is folded by level, or goes over several numbered
        pages; Graphviz source and GraphML are written in full.
    path
        The file, ending in .svg, .pdf, .png (300 dots per inch), .dot or .graphml. Several pages are pages of one PDF,
        or files NAME-1.svg, NAME-2.svg and so on.
    overwrite
        Whether files of these names may be replaced. Each appears whole or not at all.
    paper
        What every page has to fit; None for one sheet of whatever size.
    whole
        Whether every state is drawn by itself, over as many pages as that takes.
    engine
        "dot", "graphviz-pure" or "own"; None tries them in this order.
    time_limit
        Seconds granted to each engine that runs as a process.

    Raises
    ------
    UsageError
        An unknown ending or engine, a folder that is not there, a file that exists already.
    DrawingError
        The named engine failed, the picture is too large for its format, or the file cannot be stored.
    """
    target = Path(path)
    form = check_target(target, overwrite=overwrite)
    if form not in PICTURES:
        text = dot_text(diagram) if form == ".dot" else graphml_text(diagram)
        store(text.encode(), target, overwrite=overwrite)
        return Drawn(target, "none", (), (target,))
    sheets = lay_out(diagram, paper, whole=whole, engine=engine, time_limit=time_limit)
    drawn = write_pictures(sheets.pictures, target, overwrite=overwrite)
    return replace(drawn, engine=sheets.engine, notes=(*sheets.notes, *drawn.notes))


def write_pictures(pictures: Sequence[Picture], target: Path, *, overwrite: bool = False) -> Drawn:
    """Write finished pictures into one PDF, or into a file each; parameters and errors as `write_diagram`."""
    form = check_target(target, overwrite=overwrite, endings=PICTURES)
    notes: dict[str, None] = {}
    contents: list[bytes] = []
    if form == ".svg":
        from markov.output.svg_writer import svg_text

        contents = [svg_text(picture).encode() for picture in pictures]
    else:
        from markov.output.page_writer import page_bytes, pdf_bytes

        made = [pdf_bytes(pictures)] if form == ".pdf" else [page_bytes(picture, "png") for picture in pictures]
        for content, said in made:
            contents.append(content)
            notes.update(dict.fromkeys(said))
    paths = [target]
    if len(contents) > 1:
        paths = [target.with_name(f"{target.stem}-{number}{target.suffix}") for number in range(1, len(contents) + 1)]
        for each in paths:
            check_target(each, overwrite=overwrite)
    for content, each in zip(contents, paths, strict=True):
        store(content, each, overwrite=overwrite)
    sizes = dict.fromkeys(map(_page, pictures))
    return Drawn(paths[0], "none", (*sizes, *notes), tuple(paths))


def _page(picture: Picture) -> str:
    width, height = picture.width * _MILLIMETRES_PER_POINT, picture.height * _MILLIMETRES_PER_POINT
    size = f"{width:.0f} × {height:.0f} mm with text of 8 pt"
    for name, short, long in _PAGES:
        inner_short, inner_long = short - 2 * _PAGE_MARGIN, long - 2 * _PAGE_MARGIN
        if width <= inner_short and height <= inner_long:
            return f"{size}: fits {name} upright"
        if width <= inner_long and height <= inner_short:
            return f"{size}: fits {name} sideways"
    return f"{size}: larger than {_PAGES[-1][0]}"
