"""A picture as PDF or PNG, drawn by matplotlib."""

from __future__ import annotations

import io
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any, Literal

from markov.errors import DrawingError
from markov.output.lettering import REPLACED, covered, face_file
from markov.output.picture import Picture, Shape, Words

RESOLUTION = 300
"""Dots per inch of a PNG."""
_LONGEST_SIDE = 2**16 - 1


def page_bytes(picture: Picture, form: Literal["pdf", "png"]) -> tuple[bytes, tuple[str, ...]]:
    """Return the file's content, and notes on characters that no font on this machine can draw.

    The PDF has one page of the size of the picture; its words stay text, its fonts are embedded. The PNG has 300 dots
    per inch. Both carry title and description, neither a date.

    Raises
    ------
    DrawingError
        A PNG that would have more than 65 535 dots along one side.
    """
    if form == "pdf":
        return pdf_bytes((picture,))
    dots = max(picture.width, picture.height) * RESOLUTION / 72
    if dots > _LONGEST_SIDE:
        raise DrawingError(
            f"a PNG of {dots:.0f} dots along one side at {RESOLUTION} dpi, more than {_LONGEST_SIDE}: "
            "write .svg or .pdf, or fold the diagram"
        )
    fonts = _Fonts((picture,))
    said = {"Title": picture.title, "Description": picture.description, "Software": None}
    content = io.BytesIO()
    with _own_settings():
        _figure(picture, fonts).savefig(content, format="png", dpi=RESOLUTION, metadata=said)
    return content.getvalue(), fonts.notes


def pdf_bytes(pictures: Sequence[Picture]) -> tuple[bytes, tuple[str, ...]]:
    """Return a PDF with a page for each picture, each of its picture's size; notes as for `page_bytes`."""
    from matplotlib.backends.backend_pdf import PdfPages

    fonts = _Fonts(pictures)
    first = pictures[0]
    described = " ".join(picture.description for picture in pictures)
    said = {"Title": first.title, "Subject": described, "CreationDate": None, "Creator": "markov"}
    content = io.BytesIO()
    with _own_settings(), PdfPages(content, metadata=said) as pages:
        for picture in pictures:
            pages.savefig(_figure(picture, fonts), dpi=RESOLUTION)
    return content.getvalue(), fonts.notes


@contextmanager
def _own_settings() -> Iterator[None]:
    """Keep the user's own matplotlib settings from changing a document: the defaults hold while it is drawn."""
    import matplotlib

    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update({"pdf.fonttype": 42, "path.simplify": False, "path.snap": False})
        yield


def _figure(picture: Picture, fonts: _Fonts) -> Any:
    from matplotlib.figure import Figure

    figure = Figure(figsize=(picture.width / 72, picture.height / 72), facecolor="white")
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set_xlim(0.0, picture.width)
    axes.set_ylim(picture.height, 0.0)
    axes.set_axis_off()
    for place, mark in enumerate(picture.marks):
        if isinstance(mark, Shape):
            axes.add_patch(_patch(mark, place))
        else:
            axes.text(
                mark.x,
                mark.y,
                fonts.drawable(mark.text),
                fontproperties=fonts.properties(mark),
                color=mark.colour,
                ha={"start": "left", "middle": "center", "end": "right"}[mark.anchor],
                va="baseline",
                zorder=place,
                parse_math=False,
            )
    return figure


def _patch(shape: Shape, place: int) -> Any:
    from matplotlib.patches import PathPatch
    from matplotlib.path import Path

    codes = {"M": Path.MOVETO, "L": Path.LINETO, "C": Path.CURVE4, "Z": Path.CLOSEPOLY}
    points: list[tuple[float, float]] = []
    kinds: list[Any] = []
    for step in shape.steps:
        held = step.points or (points[0],)
        points.extend(held)
        kinds.extend([codes[step.kind]] * len(held))
    dashes = tuple(dash / shape.width for dash in shape.dashes)  # matplotlib counts dashes in line widths
    return PathPatch(
        Path(points, kinds),
        facecolor=shape.fill or "none",
        edgecolor=shape.line or "none",
        linewidth=shape.width if shape.line else 0.0,
        linestyle=(0.0, dashes) if dashes else "solid",
        capstyle="butt",
        joinstyle="miter",
        zorder=place,
        clip_on=False,
    )


class _Fonts:
    """DejaVu Sans, with other fonts of the machine only for characters that it lacks."""

    def __init__(self, pictures: Sequence[Picture]) -> None:
        words = (mark.text for picture in pictures for mark in picture.marks if isinstance(mark, Words))
        wanted = {character for text in words for character in text}
        lacking = sorted(character for character in wanted if ord(character) not in covered() & covered(bold=True))
        self._families: list[str] = []
        self._undrawable: set[str] = set(lacking)
        if lacking:
            self._families = self._fallbacks()
        self.notes: tuple[str, ...] = ()
        if self._undrawable:
            codes = ", ".join(f"U+{ord(character):04X}" for character in sorted(self._undrawable))
            self.notes = (
                f"no font on this machine draws {codes}: shown as {REPLACED}; "
                "install a font that has them, or write .svg, which leaves the choice of font to the reader",
            )

    def _fallbacks(self) -> list[str]:
        """Return families that together draw what DejaVu Sans lacks, as far as this machine has them."""
        from matplotlib.font_manager import fontManager
        from matplotlib.ft2font import FT2Font

        families: list[str] = []
        for entry in sorted(fontManager.ttflist, key=lambda entry: (entry.name, str(entry.fname))):
            if not self._undrawable:
                break
            if entry.style != "normal" or entry.weight not in (400, "normal", "regular", "book"):
                continue
            if entry.name.startswith(("DejaVu", "Last Resort")) or not str(entry.fname).endswith(
                (".ttf", ".otf", ".ttc")
            ):
                continue
            try:
                there = FT2Font(str(entry.fname)).get_charmap()
            except (OSError, RuntimeError):  # listed, but gone or unreadable since
                continue
            drawn = {character for character in self._undrawable if ord(character) in there}
            if drawn:
                families.append(entry.name)
                self._undrawable -= drawn
        return families

    def drawable(self, text: str) -> str:
        """Return `text` with U+FFFD for every character that no font draws."""
        return "".join(REPLACED if character in self._undrawable else character for character in text)

    def properties(self, words: Words) -> Any:
        """Return the font of `words`."""
        from matplotlib.font_manager import FontProperties

        needs_more = any(ord(character) not in covered(words.bold) for character in self.drawable(words.text))
        if self._families and needs_more:
            weight = "bold" if words.bold else "normal"
            return FontProperties(family=["DejaVu Sans", *self._families], size=words.size, weight=weight)
        return FontProperties(fname=str(face_file(words.bold)), size=words.size)
