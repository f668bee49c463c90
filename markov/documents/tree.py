"""The neutral tree of a document: sections, paragraphs, lists, tables, figures.

Text is a tuple of spans, so that a writer can set symbols, links and emphasis in its own way; plain text is a single
span.  Names may hold any character: every writer escapes for its own format, and nothing in the tree is markup.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

Kind = Literal["plain", "strong", "code", "link", "verdict"]


@dataclass(frozen=True)
class Span:
    """A piece of text.

    Attributes
    ----------
    text : str
    kind : str
        ``plain``; ``strong``; ``code``: a name, key or formula as written; ``link``: refers to `target`; ``verdict``:
        one of the words met, missed, undecided, cannot occur.
    target : str
        Anchor of a section, table, figure or row in the same document; for links only.
    """

    text: str
    kind: Kind = "plain"
    target: str = ""


Text = tuple[Span, ...]


def plain(text: str) -> Text:
    """Return text without any emphasis."""
    return (Span(text),)


@dataclass(frozen=True)
class Paragraph:
    """A paragraph; `note` marks a caution that has to stand out."""

    text: Text
    note: bool = False


@dataclass(frozen=True)
class Items:
    """A list; numbered items are referred to by their anchors."""

    items: tuple[Text, ...]
    numbered: bool = False
    anchors: tuple[str, ...] = ()


@dataclass(frozen=True)
class Column:
    """A column of a table: its heading and how its cells stand."""

    heading: str
    align: Literal["left", "right", "decimal"] = "left"
    width: float = 1.0  # share of the width, relative to the others


@dataclass(frozen=True)
class Row:
    """A row of a table; an anchor lets the text refer to it."""

    cells: tuple[Text, ...]
    anchor: str = ""


@dataclass(frozen=True)
class Table:
    """A table with a caption; every table is also written as CSV under its name."""

    name: str  # short, for file names: letters, digits, hyphens
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    anchor: str = ""


@dataclass(frozen=True)
class Figure:
    """A picture, in every form that a writer may want.

    Attributes
    ----------
    name : str
        Short, for file names.
    caption, alt : str
        What stands under it; what it shows, for those who do not see it.
    svg : str
        The vector picture, self-contained.
    png : bytes
        The same at 300 dots an inch.
    pdf : bytes
        The same as vectors.
    width_mm, height_mm : float
        Natural size.
    """

    name: str
    caption: str
    alt: str
    svg: str
    png: bytes
    pdf: bytes
    width_mm: float
    height_mm: float
    anchor: str = ""


@dataclass(frozen=True)
class Section:
    """A section with a heading; sections inside are one level deeper."""

    heading: str
    blocks: tuple[Block, ...]
    anchor: str = ""


Block = Paragraph | Items | Table | Figure | Section


@dataclass(frozen=True)
class Document:
    """A whole document.

    Attributes
    ----------
    title : str
    facts : tuple of (str, str)
        Title block: reference, revision, spec hash, version and so on, as label and text.
    blocks : tuple of Block
    """

    title: str
    facts: tuple[tuple[str, str], ...]
    blocks: tuple[Block, ...]

    def tables(self) -> Iterator[Table]:
        """Yield every table in reading order."""
        return (block for block in _walk(self.blocks) if isinstance(block, Table))

    def figures(self) -> Iterator[Figure]:
        """Yield every figure in reading order."""
        return (block for block in _walk(self.blocks) if isinstance(block, Figure))


def _walk(blocks: tuple[Block, ...]) -> Iterator[Block]:
    for block in blocks:
        yield block
        if isinstance(block, Section):
            yield from _walk(block.blocks)
