"""A document as a Word file."""

from __future__ import annotations

import hashlib
import io
import zipfile
from collections.abc import Callable, Mapping
from importlib.resources import files
from itertools import count
from typing import Any
from xml.sax.saxutils import escape, quoteattr

from markov.documents import word_numbering
from markov.documents.decimal_points import PAD, padding
from markov.documents.direction import runs
from markov.documents.numbering import CONTENTS, FIGURE, TABLE, Placed, labels, placed, running_head
from markov.documents.pages import drawn_size, stretches
from markov.documents.tree import Document, Figure, Items, Paragraph, Section, Span, Table, Text
from markov.documents.widths import shares
from markov.documents.word_numbering import NAMESPACES
from markov.errors import UsageError
from markov.output.lettering import legible

_SHORT, _LONG, _MARGIN = 11906, 16838, 907  # A4 and its margins in twentieths of a point
_TOP = 1247
_EMU_PER_MM = 36000
_INK = "1B222B"
_PICTURE = "http://schemas.openxmlformats.org/drawingml/2006/picture"
_LONGEST_BOOKMARK = 40
_DEEPEST = 6
_EARLIEST = (1980, 1, 1, 0, 0, 0)
_NO_PART = ("/thumbnail", "/stylesWithEffects")  # of the template: neither belongs to this document


def write_word(document: Document) -> bytes:
    """Return `document` as a Word file; the same document gives the same bytes.

    Headings, lists, tables and captions are Word's own: headings are numbered by their style, captions by SEQ fields,
    header rows repeat, references are REF fields and links to bookmarks.  Pictures are PNG with alternative text.  The
    table of contents is a field that stands filled but for its page numbers, which Word adds when it updates fields.
    The file holds no date.

    Raises
    ------
    UsageError
        An anchor that is used twice, or python-docx is not installed.
    """
    try:
        import docx
        from docx.opc.constants import RELATIONSHIP_TYPE
        from docx.oxml import parse_xml
    except ImportError:
        raise UsageError(
            "a Word file needs the package python-docx, which is not installed; pip install 'markov[word]'"
        ) from None
    file = docx.Document()
    places = placed(document)
    writer = _Writer(labels(places), lambda png: file.part.get_or_add_image(io.BytesIO(png))[0])
    title, reference = running_head(document)
    _head_and_foot(file, title, reference, parse_xml)
    last = file.element.body.sectPr
    references = "".join(
        f'<w:{part}Reference w:type="default" r:id="{found.get(_R_ID)}"/>'
        for part in ("header", "footer")
        if (found := last.find(f"{_w(part)}Reference")) is not None
    )
    written = writer.document(document, places, references)
    # Whole parts are set: moving this many elements from one tree into another takes a long time.
    file.part._element = parse_xml(f"<w:document {NAMESPACES}><w:body>{written}</w:body></w:document>")
    parts = file.part.part_related_by(RELATIONSHIP_TYPE.STYLES)
    parts._element = parse_xml(_part("word_styles.xml"))  # type: ignore[attr-defined]
    file.part.numbering_part._element = parse_xml(word_numbering.numbering(writer.lists))
    _settle(file, title)
    content = io.BytesIO()
    file.save(content)
    return _dateless(content.getvalue())


_W = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}"
_R_ID = "{http://schemas.openxmlformats.org/officeDocument/2006/relationships}id"


def _part(name: str) -> bytes:
    return files("markov.documents").joinpath(name).read_bytes()


def _w(name: str) -> str:
    return _W + name


def _head_and_foot(file: Any, title: str, reference: str, parse_xml: Callable[[str], Any]) -> None:
    section = file.sections[0]
    above = " · ".join(part for part in (title, reference) if part)
    for part, content in (
        (section.header, _run(above)),
        (section.footer, _field("PAGE", "1") + _run(" / ") + _field("NUMPAGES", "1")),
    ):
        part.is_linked_to_previous = False
        paragraph = part.paragraphs[0]._p
        style = type(part).__name__.removeprefix("_")
        made = parse_xml(f"<w:p {NAMESPACES}>{_style(style)}{content}</w:p>")
        paragraph.getparent().replace(paragraph, made)


def _settle(file: Any, title: str) -> None:
    """Set what the file says of itself, none of it a date or a name of the program that wrote it."""
    said = file.core_properties._element
    for child in list(said):
        said.remove(child)
    file.core_properties.title = title[:255]
    file.core_properties.language = "en"
    for setting in file.settings.element.iter(_w("compatSetting")):
        if setting.get(_w("name")) == "compatibilityMode":
            setting.set(_w("val"), "15")
    for package_part in (file.part.package, file.part):
        rels = package_part.rels
        for key in [key for key, rel in rels.items() if rel.reltype.endswith(_NO_PART)]:
            del rels[key]


def _dateless(content: bytes) -> bytes:
    """Return a zip archive with the same files, each dated as early as the format can say."""
    result = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(result, "w", zipfile.ZIP_DEFLATED) as new:
        for name in old.namelist():
            entry = zipfile.ZipInfo(name, _EARLIEST)
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.external_attr = 0o600 << 16
            entry.create_system = 3
            new.writestr(entry, old.read(name))
    return result.getvalue()


class _Writer:
    """Turns blocks into the XML of Word, knowing what each anchor is called."""

    def __init__(self, called: Mapping[str, str], image: Callable[[bytes], str]) -> None:
        self._called = called
        self._image = image
        self._bookmarks = count(1)
        self._pictures = count(1)
        self._numbered: set[str] = set()  # anchors whose bookmark holds "Table 3", for REF fields
        self.lists = 0

    def document(self, document: Document, places: tuple[Placed, ...], references: str) -> str:
        self._numbered = {
            place.block.anchor for place in places if isinstance(place.block, Table | Figure) and place.block.anchor
        }
        parts = [f"<w:p>{_style('Title')}{self.words(document.title)}</w:p>"]
        if document.facts:
            parts.append(self._facts(document.facts))
        parts.append(self._contents(places))
        for stretch in stretches(places):
            if stretch.sideways:
                parts.append(
                    f"<w:p><w:pPr>{_style_only('TableText')}{_pages(references, sideways=False)}</w:pPr></w:p>"
                )
            for place in stretch.places:
                parts.append(self.block(place, _pages(references, sideways=True) if stretch.sideways else ""))
        parts.append(_pages(references, sideways=False))
        return "".join(parts)

    def _facts(self, facts: tuple[tuple[str, str], ...]) -> str:
        widths = (2400, _SHORT - 2 * _MARGIN - 2400)
        rows = "".join(
            f"<w:tr><w:trPr><w:cantSplit/></w:trPr>{_cell(widths[0], _paragraph('TableText', self.words(label)))}"
            f"{_cell(widths[1], _paragraph('TableText', self.words(text)))}</w:tr>"
            for label, text in facts
        )
        return _table(widths, rows, heading=False) + f"<w:p>{_style('TableText')}</w:p>"

    def _contents(self, places: tuple[Placed, ...]) -> str:
        entries = [place for place in places if isinstance(place.block, Section) and place.level <= 2]
        if not entries:
            return ""
        begin = _sign("begin", stale=True) + _code('TOC \\o "1-2" \\h \\z \\u') + _sign("separate")
        end = _sign("end")
        lines = [f"<w:p>{_style('TOCHeading')}{_run(CONTENTS)}</w:p>"]
        for place in entries:
            assert isinstance(place.block, Section)
            entry = _run(f"{place.number}  ") + self.words(place.block.heading)
            link = f'<w:hyperlink w:anchor="{_heading_mark(place)}" w:history="1">{entry}</w:hyperlink>'
            first = begin if place is entries[0] else ""
            last = end if place is entries[-1] else ""
            lines.append(f"<w:p>{_style(f'TOC{place.level}')}{first}{link}{last}</w:p>")
        return "".join(lines)

    def block(self, place: Placed, pages: str) -> str:
        """Return a block; `pages` ends the section of the file after a figure."""
        block = place.block
        if isinstance(block, Section):
            marks = self._mark(_heading_mark(place), self._mark(_bookmark(block.anchor), self.words(block.heading)))
            return f"<w:p>{_style(f'Heading{min(place.level, _DEEPEST)}')}{marks}</w:p>"
        if isinstance(block, Paragraph):
            return _paragraph("Caution" if block.note else "Normal", self.text(block.text))
        if isinstance(block, Items):
            return self._items(block)
        if isinstance(block, Table):
            return self._table(block, place)
        return self._figure(block, place, pages)

    def _items(self, block: Items) -> str:
        number = word_numbering.BULLETS
        if block.numbered:
            number = word_numbering.FIRST_LIST + self.lists
            self.lists += 1
        anchors = (*block.anchors, *[""] * (len(block.items) - len(block.anchors)))
        looks = (
            f"<w:pPr>{_style_only('ListNumber' if block.numbered else 'ListBullet')}"
            f'<w:numPr><w:ilvl w:val="0"/><w:numId w:val="{number}"/></w:numPr></w:pPr>'
        )
        return "".join(
            f"<w:p>{looks}{self._mark(_bookmark(anchor), self.text(item))}</w:p>"
            for item, anchor in zip(block.items, anchors, strict=True)
        )

    def _table(self, block: Table, place: Placed) -> str:
        across = _SHORT - 2 * _MARGIN
        widths = tuple(round(share * across) for share in shares(block))
        headings = "".join(
            _cell(
                width, _paragraph("TableHeading", self.words(column.heading), right=column.align == "right"), low=True
            )
            for width, column in zip(widths, block.columns, strict=True)
        )
        rows = [f"<w:tr><w:trPr><w:cantSplit/><w:tblHeader/></w:trPr>{headings}</w:tr>"]
        for row, pads in zip(block.rows, padding(block), strict=True):
            cells: list[str] = []
            for width, column, cell, pad in zip(widths, block.columns, row.cells, pads, strict=True):
                content = (_run(PAD * pad) if pad else "") + self.text(cell)
                if row.anchor and not cells:
                    content = self._mark(_bookmark(row.anchor), content)
                cells.append(_cell(width, _paragraph("TableText", content, right=column.align == "right")))
            rows.append(f"<w:tr><w:trPr><w:cantSplit/></w:trPr>{''.join(cells)}</w:tr>")
        caption = self._caption(TABLE, place.number, block.anchor, block.caption, keep=True)
        # An empty paragraph keeps two tables in a row apart, which Word would join into one.
        return f"{caption}{_table(widths, ''.join(rows), heading=True)}<w:p>{_style('TableText')}</w:p>"

    def _figure(self, block: Figure, place: Placed, pages: str) -> str:
        width, height = (round(side * _EMU_PER_MM) for side in drawn_size(block))
        identity = next(self._pictures)
        name = quoteattr(f"{FIGURE} {place.number}")
        alt = quoteattr(legible(block.alt))
        named = f'id="{identity}" name={name} descr={alt}'
        drawing = (
            '<w:drawing><wp:inline distT="0" distB="0" distL="0" distR="0">'
            f'<wp:extent cx="{width}" cy="{height}"/><wp:docPr {named}/>'
            '<wp:cNvGraphicFramePr><a:graphicFrameLocks noChangeAspect="1"/></wp:cNvGraphicFramePr>'
            f'<a:graphic><a:graphicData uri="{_PICTURE}"><pic:pic>'
            f"<pic:nvPicPr><pic:cNvPr {named}/><pic:cNvPicPr/></pic:nvPicPr>"
            f'<pic:blipFill><a:blip r:embed="{self._image(block.png)}"/>'
            "<a:stretch><a:fillRect/></a:stretch></pic:blipFill>"
            f'<pic:spPr><a:xfrm><a:off x="0" y="0"/><a:ext cx="{width}" cy="{height}"/></a:xfrm>'
            '<a:prstGeom prst="rect"><a:avLst/></a:prstGeom></pic:spPr>'
            "</pic:pic></a:graphicData></a:graphic></wp:inline></w:drawing>"
        )
        caption = self._caption(FIGURE, place.number, block.anchor, block.caption, keep=False, pages=pages)
        return f"<w:p>{_style('Figure')}<w:r>{drawing}</w:r></w:p>{caption}"

    def _caption(self, word: str, number: str, anchor: str, text: str, *, keep: bool, pages: str = "") -> str:
        counted = _run(f"{word} ", "<w:b/><w:bCs/>") + _field(f"SEQ {word} \\* ARABIC", number, "<w:b/><w:bCs/>")
        looks = f"<w:pPr>{_style_only('Caption')}{'<w:keepNext/>' if keep else ''}{pages}</w:pPr>"
        return f"<w:p>{looks}{self._mark(_bookmark(anchor), counted)}{_run('  ')}{self.words(text)}</w:p>"

    def _mark(self, name: str, content: str) -> str:
        if not name:
            return content
        identity = next(self._bookmarks)
        return f'<w:bookmarkStart w:id="{identity}" w:name="{name}"/>{content}<w:bookmarkEnd w:id="{identity}"/>'

    def text(self, text: Text) -> str:
        return "".join(map(self._span, text))

    def _span(self, span: Span) -> str:
        if span.kind == "link":
            return self._link(span)
        if span.kind == "strong":
            return self.words(span.text, '<w:rStyle w:val="Strong"/>')
        if span.kind == "verdict":
            looks = _verdict(legible(span.text))
            edge = _run("\N{NO-BREAK SPACE}", looks)
            return edge + self.words(span.text, looks) + edge
        return self.words(span.text)

    def _link(self, span: Span) -> str:
        if span.target not in self._called:
            return self.words(span.text)
        mark = _bookmark(span.target)
        if not span.text and span.target in self._numbered:
            return _field(f"REF {mark} \\h", self._called[span.target])
        words = self.words(span.text or self._called[span.target], '<w:rStyle w:val="Hyperlink"/>')
        return f'<w:hyperlink w:anchor="{mark}" w:history="1">{words}</w:hyperlink>'

    def words(self, text: str, looks: str = "") -> str:
        """Return plain text as runs, those from right to left marked as such."""
        return "".join(
            _run(run, looks + ("<w:rtl/>" if right_to_left else "")) for run, right_to_left in runs(legible(text))
        )


def _verdict(word: str) -> str:
    box = '<w:bdr w:val="{}" w:sz="{}" w:space="0" w:color="' + _INK + '"/>'
    if word == "missed":
        return (
            f'<w:b/><w:bCs/><w:color w:val="FFFFFF"/>{box.format("single", 8)}'
            f'<w:shd w:val="clear" w:color="auto" w:fill="{_INK}"/>'
        )
    return "<w:b/><w:bCs/>" + (box.format("dashed", 8) if word == "undecided" else box.format("single", 4))


def _run(text: str, looks: str = "") -> str:
    if not text:
        return ""
    return f'<w:r>{_looks(looks)}<w:t xml:space="preserve">{escape(text)}</w:t></w:r>'


def _field(code: str, result: str, looks: str = "") -> str:
    parts = (
        _sign("begin", looks),
        _code(code, looks),
        _sign("separate", looks),
        _run(result, looks),
        _sign("end", looks),
    )
    return "".join(parts)


def _sign(kind: str, looks: str = "", *, stale: bool = False) -> str:
    """Return a mark of where a field begins, where its result begins, where it ends."""
    dirty = ' w:dirty="true"' if stale else ""
    return f'<w:r>{_looks(looks)}<w:fldChar w:fldCharType="{kind}"{dirty}/></w:r>'


def _code(code: str, looks: str = "") -> str:
    return f'<w:r>{_looks(looks)}<w:instrText xml:space="preserve"> {code} </w:instrText></w:r>'


def _looks(looks: str) -> str:
    return f"<w:rPr>{looks}</w:rPr>" if looks else ""


def _style_only(style: str) -> str:
    return f'<w:pStyle w:val="{style}"/>'


def _style(style: str) -> str:
    return f"<w:pPr>{_style_only(style)}</w:pPr>"


def _paragraph(style: str, content: str, *, right: bool = False) -> str:
    stands = '<w:jc w:val="right"/>' if right else ""
    return f"<w:p><w:pPr>{_style_only(style)}{stands}</w:pPr>{content}</w:p>"


def _cell(width: int, content: str, *, low: bool = False) -> str:
    stands = '<w:vAlign w:val="bottom"/>' if low else ""
    return f'<w:tc><w:tcPr><w:tcW w:w="{width}" w:type="dxa"/>{stands}</w:tcPr>{content}</w:tc>'


def _table(widths: tuple[int, ...], rows: str, *, heading: bool) -> str:
    grid = "".join(f'<w:gridCol w:w="{width}"/>' for width in widths)
    looks = f'w:firstRow="{int(heading)}" w:lastRow="0" w:firstColumn="0" w:lastColumn="0" w:noHBand="0" w:noVBand="1"'
    return (
        f'<w:tbl><w:tblPr><w:tblStyle w:val="ReportTable"/><w:tblW w:w="{sum(widths)}" w:type="dxa"/>'
        f'<w:tblLayout w:type="fixed"/><w:tblLook w:val="04{2 * heading}0" {looks}/></w:tblPr>'
        f"<w:tblGrid>{grid}</w:tblGrid>{rows}</w:tbl>"
    )


def _pages(references: str, *, sideways: bool) -> str:
    size = f'w:w="{_LONG}" w:h="{_SHORT}" w:orient="landscape"' if sideways else f'w:w="{_SHORT}" w:h="{_LONG}"'
    margins = f'w:top="{_TOP}" w:right="{_MARGIN}" w:bottom="{_TOP}" w:left="{_MARGIN}"'
    return (
        f"<w:sectPr>{references}<w:pgSz {size}/>"
        f'<w:pgMar {margins} w:header="600" w:footer="500" w:gutter="0"/></w:sectPr>'
    )


def _bookmark(anchor: str) -> str:
    """Return a name that Word allows: letters, digits and underscores, 40 at most."""
    if not anchor:
        return ""
    name = "to_" + anchor.replace("-", "_")
    if len(name) > _LONGEST_BOOKMARK:
        name = name[:30] + "_" + hashlib.sha256(anchor.encode()).hexdigest()[:9]
    return name


def _heading_mark(place: Placed) -> str:
    return "_Toc" + place.number.replace(".", "_")
