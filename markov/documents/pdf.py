"""A document as PDF, set by typst."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from importlib.resources import files
from typing import Any

from markov.documents.breaking import pieces
from markov.documents.decimal_points import PAD, padding
from markov.documents.direction import runs
from markov.documents.numbering import CONTENTS, FIGURE, TABLE, Placed, labels, placed, running_head
from markov.documents.pages import drawn_size, stretches
from markov.documents.tree import Document, Figure, Items, Paragraph, Section, Span, Table, Text
from markov.documents.typefaces import Typefaces
from markov.documents.widths import shares
from markov.errors import DrawingError, UsageError
from markov.output.lettering import face_file, legible

_ISOLATE, _ISOLATED = "\N{RIGHT-TO-LEFT ISOLATE}", "\N{POP DIRECTIONAL ISOLATE}"


def write_pdf(document: Document) -> bytes:
    """Return `document` as a PDF of A4 pages; the same document gives the same bytes.

    Figures stay vectors; headings, tables and figures are tagged for readers who do not see the pages.  Type is DejaVu
    Sans, as in the pictures; other fonts of the machine serve only for characters that it lacks, and a character that
    no font draws is shown by its number, as ``⟨U+4E2D⟩``.

    Raises
    ------
    UsageError
        An anchor that is used twice, or typst is not installed.
    DrawingError
        A picture that cannot be read.
    """
    try:
        import typst
    except ImportError:
        raise UsageError("a PDF needs the package typst, which is not installed; pip install 'markov[pdf]'") from None
    typefaces = Typefaces(document)
    source = _source(document, typefaces)
    fonts: Any = [str(face_file(False).parent)]
    try:
        made = typst.compile(source.encode(), font_paths=fonts, ignore_system_fonts=not typefaces.from_machine)
    except typst.TypstError as error:
        raise DrawingError(f"the PDF could not be set: {error.message}") from error
    if not isinstance(made, bytes):
        raise DrawingError("the PDF could not be set: typst returned no single file")
    return made


def _source(document: Document, typefaces: Typefaces) -> str:
    """Return the document in typst's language: the look, then calls with strings."""
    places = placed(document)
    writer = _Writer(labels(places), typefaces)
    title, reference = running_head(document)
    look = files("markov.documents").joinpath("pdf.typ").read_text(encoding="utf-8")
    pairs = ", ".join(
        f"text(fill: faint, {writer.words(label)}), {writer.words(text)}" for label, text in document.facts
    )
    lines = [
        look,
        f"#show: body => shape({_string(typefaces.shown(title))}, {_string(typefaces.shown(reference))}, body)",
        f'#block(below: 12pt, text(size: 18pt, weight: "bold", {writer.words(document.title)}))',
        f"#facts({pairs})",
    ]
    if any(isinstance(place.block, Section) for place in places):
        lines.append(f"#outline(title: {_string(CONTENTS)}, depth: 2, indent: 1.5em)")
    for stretch in stretches(places):
        blocks = [writer.block(place) for place in stretch.places]
        lines.extend([f"#aside({{ {'; '.join(blocks)} }})"] if stretch.sideways else [f"#{block}" for block in blocks])
    return "\n".join(lines) + "\n"


class _Writer:
    """Turns blocks into typst calls, knowing what each anchor is called."""

    def __init__(self, called: Mapping[str, str], typefaces: Typefaces) -> None:
        self._called = called
        self._typefaces = typefaces

    def block(self, place: Placed) -> str:
        block = place.block
        if isinstance(block, Section):
            anchor = _string(block.anchor)
            return f"section({place.level}, {_string(place.number)}, {anchor}, {self.words(block.heading)})"
        if isinstance(block, Paragraph):
            body = self.text(block.text)
            return f"note({body})" if block.note else f"par({body})"
        if isinstance(block, Items):
            return self._items(block)
        if isinstance(block, Table):
            return self._table(block, place)
        return self._figure(block, place)

    def _items(self, block: Items) -> str:
        anchors = (*block.anchors, *[""] * (len(block.items) - len(block.anchors)))
        items = [
            f"spot({_string(anchor)}) + {self.text(item)}" if anchor else self.text(item)
            for item, anchor in zip(block.items, anchors, strict=True)
        ]
        kind = "enum" if block.numbered else "list"
        return f"{kind}({', '.join(items)})"

    def _table(self, block: Table, place: Placed) -> str:
        widths = _tuple(f"{share:.5f}fr" for share in shares(block))
        aligns = _tuple("right" if column.align == "right" else "left" for column in block.columns)
        headings = _tuple(self.words(column.heading) for column in block.columns)
        cells = []
        for row, pads in zip(block.rows, padding(block), strict=True):
            for cell, pad in zip(row.cells, pads, strict=True):
                body = self.text(cell)
                cells.append(f"{_string(PAD * pad)} + {body}" if pad else body)
            if row.anchor:
                first = len(cells) - len(row.cells)
                cells[first] = f"spot({_string(row.anchor)}) + {cells[first]}"
        title = self._caption(TABLE, place.number, block.caption)
        listed = "".join(f",\n  {cell}" for cell in cells)
        return (
            f"sheet({_string(place.number)}, {_string(block.anchor)}, {title}, {widths}, {aligns}, {headings}{listed})"
        )

    def _figure(self, block: Figure, place: Placed) -> str:
        title = self._caption(FIGURE, place.number, block.caption)
        alt = _string(legible(block.alt))
        width, _ = drawn_size(block)
        return f"picture({_string(block.anchor)}, {title}, {width:.2f}mm, {alt}, {_string(block.svg)})"

    def _caption(self, word: str, number: str, text: str) -> str:
        return f"caption({_string(word)}, {_string(number)}, {self.words(text)})"

    def text(self, text: Text) -> str:
        return " + ".join(map(self._span, text)) or '""'

    def _span(self, span: Span) -> str:
        if span.kind == "link":
            label = self.words(span.text or self._called.get(span.target, ""))
            return f"to({_string(span.target)}, {label})" if span.target in self._called else label
        words = self.words(span.text)
        if span.kind == "strong":
            return f"strong({words})"
        if span.kind == "verdict":
            return f"verdict({_string(legible(span.text))}, {words})"
        return words

    def words(self, text: str) -> str:
        """Return plain text as a string or as several between which a line may break."""
        parts: list[str] = []
        for run, right_to_left in runs(self._typefaces.shown(legible(text))):
            broken = [_ISOLATE + run + _ISOLATED] if right_to_left else list(pieces(run))
            if parts:
                parts[-1] += broken.pop(0)
            parts.extend(broken)
        if len(parts) <= 1:
            return f"text({_string(parts[0] if parts else '')})"
        return f"broken({', '.join(map(_string, parts))})"


def _tuple(parts: Iterable[str]) -> str:
    return "(" + "".join(f"{part}, " for part in parts) + ")"


def _string(text: str) -> str:
    """Return `text` as a string literal of typst, in which only the backslash and the quotation mark mean anything."""
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'
