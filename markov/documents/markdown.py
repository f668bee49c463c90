"""A document as Markdown (CommonMark with tables), its pictures in files beside it."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping

from markov.documents.numbering import FIGURE, TABLE, Placed, labels, placed
from markov.documents.tree import Document, Figure, Items, Paragraph, Section, Span, Table, Text
from markov.output.lettering import legible

_MARKS = re.compile(r"[\\`*{}\[\]<>#|~$^&]|(?<![^\W_])_|_(?![^\W_])|--+|\.\.+")
"""What can be markup anywhere; an underline between letters or digits cannot."""
_BEGINNING = re.compile(r"(\d{1,9}(?=[.)])|(?=[-+=:]))")
"""Where a line would begin a list, an underlined heading or a definition."""
_BACKTICKS = re.compile("`+")
_ALIGNED = {"left": ":---", "right": "---:", "decimal": "---:"}
_DEEPEST = 6


def write_markdown(document: Document, *, name: str = "report") -> dict[str, bytes]:
    """Return `document` as files by name: the text first, then a picture a figure.

    Every character that Markdown or the HTML in it could take for markup is escaped; anchors are empty HTML elements,
    which readers without HTML leave out.

    Parameters
    ----------
    document : Document
    name : str
        What the names of the files begin with: letters, digits, hyphens.

    Raises
    ------
    UsageError
        An anchor that is used twice.
    """
    places = placed(document)
    writer = _Writer(labels(places), name)
    lines = [f"# {writer.words(document.title)}", ""]
    for label, text in document.facts:
        lines.append(f"- **{writer.words(label)}:** {writer.words(text)}")
    lines.append("")
    for place in places:
        lines += writer.block(place)
        lines.append("")
    files = {f"{name}.md": "\n".join(lines).rstrip().encode() + b"\n"}
    for figure in document.figures():
        files[writer.picture(figure)] = figure.svg.encode()
    return files


class _Writer:
    """Turns blocks into lines, knowing what each anchor is called."""

    def __init__(self, called: Mapping[str, str], name: str) -> None:
        self._called = called
        self._name = name

    def block(self, place: Placed) -> Iterator[str]:
        block = place.block
        if isinstance(block, Section):
            yield from self._anchor(block.anchor)
            yield f"{'#' * min(place.level + 1, _DEEPEST)} {place.number} {self.words(block.heading)}"
        elif isinstance(block, Paragraph):
            text = self.text(block.text)
            yield f"> **Note:** {text}" if block.note else _begun(text)
        elif isinstance(block, Items):
            yield from self._items(block)
        elif isinstance(block, Table):
            yield from self._table(block, place)
        else:
            yield from self._anchor(block.anchor)
            yield f"![{self.words(block.alt)}]({self.picture(block)})"
            yield ""
            yield f"**{FIGURE} {place.number}.** {self.words(block.caption)}"

    def picture(self, figure: Figure) -> str:
        """Return the name of the file of a picture."""
        return f"{self._name}-{figure.name}.svg"

    def _anchor(self, anchor: str) -> Iterator[str]:
        if anchor:
            yield self._mark(anchor)
            yield ""

    @staticmethod
    def _mark(anchor: str) -> str:
        return f'<a id="{anchor}"></a>' if anchor else ""

    def _items(self, block: Items) -> Iterator[str]:
        anchors = (*block.anchors, *[""] * (len(block.items) - len(block.anchors)))
        for number, (item, anchor) in enumerate(zip(block.items, anchors, strict=True), 1):
            yield f"{f'{number}.' if block.numbered else '-'} {self._mark(anchor)}{_begun(self.text(item))}"

    def _table(self, block: Table, place: Placed) -> Iterator[str]:
        yield f"{self._mark(block.anchor)}**{TABLE} {place.number}.** {self.words(block.caption)}"
        yield ""
        yield f"| {' | '.join(self.words(column.heading) for column in block.columns)} |"
        yield f"| {' | '.join(_ALIGNED[column.align] for column in block.columns)} |"
        for row in block.rows:
            cells = [self.text(cell, in_table=True) for cell in row.cells]
            cells[:1] = [self._mark(row.anchor) + cells[0]] if cells else []
            yield f"| {' | '.join(cells)} |"

    def text(self, text: Text, *, in_table: bool = False) -> str:
        return "".join(self._span(span, in_table) for span in text)

    def _span(self, span: Span, in_table: bool) -> str:
        if span.kind == "link":
            label = self.words(span.text or self._called.get(span.target, ""))
            return f"[{label}](#{span.target})" if span.target in self._called else label
        if span.kind == "code":
            return _code(legible(span.text), in_table)
        words = self.words(span.text)
        if span.kind not in ("strong", "verdict") or not words.strip():
            return words
        inside = words.strip()
        before = words[: len(words) - len(words.lstrip())]
        return f"{before}**{inside}**{words[len(before) + len(inside) :]}"

    def words(self, text: str) -> str:
        """Return plain text, escaped."""
        return _MARKS.sub(_escaped, legible(text))


def _escaped(mark: re.Match[str]) -> str:
    return "".join({"<": "&lt;", ">": "&gt;", "&": "&amp;"}.get(sign, f"\\{sign}") for sign in mark.group())


def _begun(text: str) -> str:
    """Return escaped text that may begin a line."""
    text = text.lstrip()
    found = _BEGINNING.match(text)
    return text if found is None else f"{found.group()}\\{text[found.end() :]}"


def _code(text: str, in_table: bool) -> str:
    """Return a code span; between backticks nothing is markup but a pipe, which would end a cell of a table."""
    if not text.strip():
        return text
    fence = "`" * (1 + max((len(run) for run in _BACKTICKS.findall(text)), default=0))
    inside = text.replace("|", "\\|") if in_table else text
    pad = " " if inside.startswith("`") or inside.endswith("`") else ""
    return f"{fence}{pad}{inside}{pad}{fence}"
