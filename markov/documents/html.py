"""A document as one HTML page that needs nothing beside itself."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Mapping
from html import escape
from importlib.resources import files

from markov.documents.breaking import pieces
from markov.documents.decimal_points import PAD, padding
from markov.documents.direction import runs
from markov.documents.inline_svg import inline
from markov.documents.numbering import CONTENTS, FIGURE, TABLE, Placed, labels, placed
from markov.documents.pages import stretches
from markov.documents.tree import Document, Figure, Items, Paragraph, Section, Span, Table, Text
from markov.documents.widths import shares
from markov.output.lettering import legible

_SEARCH, _ROWS, _CLOSE, _PICKED = "Search in all tables", "rows", "Close", "Rows about the part picked"
_DEEPEST = 6
_EMS = 6
"""Width of a column, in times the size of its type, below which a table scrolls sideways."""


def write_html(document: Document) -> str:
    """Return `document` as the text of an HTML file: style, script and pictures inside, nothing fetched.

    A click on a part of a picture that carries ``data-target`` shows every table row that is anchored at the target
    or links to it.  The page reads, links and prints without its script.

    Raises
    ------
    UsageError
        An anchor that is used twice.
    DrawingError
        A picture with parts to click that cannot stand inside a page.
    """
    style, script = _part("page.css"), _part("page.js")
    places = placed(document)
    writer = _Writer(labels(places))
    body = "\n".join(
        _stretch("\n".join(map(writer.block, stretch.places)), sideways=stretch.sideways)
        for stretch in stretches(places)
    )
    policy = f"default-src 'none'; img-src data:; style-src 'unsafe-inline'; script-src 'sha256-{_digest(script)}'"
    title = escape(legible(document.title))
    facts = "\n".join(
        f"<dt>{writer.words(label)}</dt><dd>{writer.words(text, breaking=True)}</dd>" for label, text in document.facts
    )
    return f"""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="{policy}">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{title}</title>
<style>{style}</style>
</head>
<body data-rows="{_ROWS}">
<div class="head">
<h1>{writer.words(document.title, breaking=True)}</h1>
<dl class="facts">
{facts}
</dl>
</div>
<div class="bar" role="search"><form>
<label for="search">{_SEARCH}</label> <input id="search" type="search" autocomplete="off">
<output id="count" for="search"></output>
</form></div>
<main>
{_contents(writer, places)}{body}
</main>
<aside id="picked" aria-label="{_PICKED}" hidden><div>
<div class="title"><h2>{_PICKED}</h2><button type="button">{_CLOSE}</button></div>
<div class="rows"></div>
</div></aside>
<script>{script}</script>
</body>
</html>
"""


def _part(name: str) -> str:
    return files("markov.documents").joinpath(name).read_text(encoding="utf-8")


def _digest(script: str) -> str:
    return base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()


def _contents(writer: _Writer, places: tuple[Placed, ...]) -> str:
    entries = []
    for place in places:
        if isinstance(place.block, Section) and place.level <= 2:
            deeper = ' class="deeper"' if place.level > 1 else ""
            heading = writer.words(place.block.heading)
            entries.append(f'<li{deeper}><a href="#{_identity(place)}">{place.number} {heading}</a></li>')
    if not entries:
        return ""
    listed = "\n".join(entries)
    return f'<nav class="contents" aria-label="{CONTENTS}"><h2>{CONTENTS}</h2><ol>\n{listed}\n</ol></nav>\n'


def _identity(place: Placed) -> str:
    block = place.block
    if isinstance(block, Section | Table | Figure) and block.anchor:
        return block.anchor
    kind = type(block).__name__.lower()
    return f"_{kind}-{place.number}"  # an anchor of the tree begins with a letter, so this is taken by none


def _stretch(body: str, *, sideways: bool) -> str:
    return f'<div class="wide">{body}</div>' if sideways else body


class _Writer:
    """Turns blocks into HTML, knowing what each anchor is called."""

    def __init__(self, called: Mapping[str, str]) -> None:
        self._called = called

    def block(self, place: Placed) -> str:
        block = place.block
        if isinstance(block, Section):
            level = min(place.level + 1, _DEEPEST)
            heading = self.words(block.heading, breaking=True)
            return f'<h{level} id="{_identity(place)}"><span>{place.number}</span>{heading}</h{level}>'
        if isinstance(block, Paragraph):
            looks = ' class="note" role="note"' if block.note else ""
            return f"<p{looks}>{self.text(block.text)}</p>"
        if isinstance(block, Items):
            return self._items(block)
        if isinstance(block, Table):
            return self._table(block, place)
        return self._figure(block, place)

    def _items(self, block: Items) -> str:
        anchors = (*block.anchors, *[""] * (len(block.items) - len(block.anchors)))
        lines = [f"<li{_id(anchor)}>{self.text(item)}</li>" for item, anchor in zip(block.items, anchors, strict=True)]
        tag = "ol" if block.numbered else "ul"
        return f"<{tag}>\n" + "\n".join(lines) + f"\n</{tag}>"

    def _table(self, block: Table, place: Placed) -> str:
        widths = "".join(f'<col style="width:{100 * share:.2f}%">' for share in shares(block))
        headings = "".join(
            f'<th scope="col"{_stands(column.align)}>{self.words(column.heading, breaking=True)}</th>'
            for column in block.columns
        )
        lines = []
        for row, pads in zip(block.rows, padding(block), strict=True):
            cells: list[str] = []
            for column, cell, pad in zip(block.columns, row.cells, pads, strict=True):
                tag, scope = ("td", "") if cells else ("th", ' scope="row"')
                moved = f'<span class="pad">{PAD * pad}</span>' if pad else ""
                cells.append(f"<{tag}{scope}{_stands(column.align)}>{moved}{self.text(cell, breaking=True)}</{tag}>")
            lines.append(f"<tr{_id(row.anchor)}>{''.join(cells)}</tr>")
        rows = "\n".join(lines)
        label = f"{TABLE} {place.number}"
        named = _identity(place)
        return (
            f'<div class="sheet" role="region" tabindex="0" aria-labelledby="{named}-caption">'
            f'<table id="{named}" data-label="{label}" style="min-width:{_EMS * len(block.columns)}em">'
            f'<caption id="{named}-caption"><b>{label}</b>{self.words(block.caption)}<span class="found"></span>'
            f"</caption><colgroup>{widths}</colgroup>\n<thead><tr>{headings}</tr></thead>\n"
            f"<tbody>\n{rows}\n</tbody></table></div>"
        )

    def _figure(self, block: Figure, place: Placed) -> str:
        alt = escape(legible(block.alt))
        size = f"width:{block.width_mm:.1f}mm"
        drawn = inline(block.svg, prefix=f"f{place.number}-", alt=legible(block.alt), style=size, targets=self._called)
        if drawn is None:
            data = base64.b64encode(block.svg.encode()).decode()
            drawn = f'<img src="data:image/svg+xml;base64,{data}" alt="{alt}" style="{size}">'
        caption = f"<figcaption><b>{FIGURE} {place.number}</b>{self.words(block.caption)}</figcaption>"
        return f'<figure id="{_identity(place)}"><div class="picture">{drawn}</div>{caption}</figure>'

    def text(self, text: Text, *, breaking: bool = False) -> str:
        return "".join(self._span(span, breaking) for span in text)

    def _span(self, span: Span, breaking: bool) -> str:
        if span.kind == "link":
            label = self.words(span.text or self._called.get(span.target, ""), breaking=breaking)
            return f'<a href="#{span.target}">{label}</a>' if span.target in self._called else label
        words = self.words(span.text, breaking=breaking)
        if span.kind == "strong":
            return f"<strong>{words}</strong>"
        if span.kind == "code":
            return f"<code>{words}</code>"
        if span.kind == "verdict":
            return f'<span class="verdict {escape(legible(span.text).replace(" ", "-"))}">{words}</span>'
        return words

    def words(self, text: str, *, breaking: bool = False) -> str:
        """Return plain text escaped; parts from right to left stand apart, so that their surroundings keep in order."""
        parts = []
        for run, right_to_left in runs(legible(text)):
            broken = "<wbr>".join(map(escape, pieces(run))) if breaking else escape(run)
            parts.append(f"<bdi>{broken}</bdi>" if right_to_left else broken)
        return "".join(parts)


def _id(anchor: str) -> str:
    return f' id="{anchor}"' if anchor else ""


def _stands(align: str) -> str:
    return ' class="right"' if align == "right" else ""
