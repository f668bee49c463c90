"""The numbers of sections, tables and figures, the same in every format."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from markov.documents.tree import Block, Document, Figure, Items, Section, Table
from markov.errors import UsageError
from markov.output.lettering import legible

CONTENTS, SECTION, TABLE, FIGURE = "Contents", "Section", "Table", "Figure"
_ANCHOR = re.compile(r"[A-Za-z][A-Za-z0-9-]*")
_ON_EVERY_PAGE = ("reference", "revision")


@dataclass(frozen=True)
class Placed:
    """A block at its place in reading order; the blocks of a section follow it.

    Attributes
    ----------
    block : Block
    level : int
        How deep the section is, or the section around the block; 0 outside of all sections.
    number : str
        ``2.1`` for a section, ``3`` for a table or figure, otherwise empty.
    """

    block: Block
    level: int
    number: str = ""


def placed(document: Document) -> tuple[Placed, ...]:
    """Return every block in reading order with its number."""
    return tuple(_Counting().walk(document.blocks, ()))


class _Counting:
    def __init__(self) -> None:
        self._tables = 0
        self._figures = 0

    def walk(self, blocks: tuple[Block, ...], above: tuple[int, ...]) -> Iterator[Placed]:
        sections = 0
        for block in blocks:
            if isinstance(block, Section):
                sections += 1
                here = (*above, sections)
                yield Placed(block, len(here), ".".join(map(str, here)))
                yield from self.walk(block.blocks, here)
            elif isinstance(block, Table):
                self._tables += 1
                yield Placed(block, len(above), str(self._tables))
            elif isinstance(block, Figure):
                self._figures += 1
                yield Placed(block, len(above), str(self._figures))
            else:
                yield Placed(block, len(above))


def labels(places: tuple[Placed, ...]) -> Mapping[str, str]:
    """Return what each anchor is called: ``Table 3``, ``Section 2.1``; an item its number, a row its first cell.

    Raises
    ------
    UsageError
        An anchor that is used twice or holds more than letters, digits and hyphens.
    """
    found: dict[str, str] = {}
    for anchor, label in _anchored(places):
        if not _ANCHOR.fullmatch(anchor):
            raise UsageError(f"anchor {anchor!r} of the document; expected a letter, then letters, digits and hyphens")
        if anchor in found:
            raise UsageError(f"anchor {anchor!r} of the document is used twice; expected one of its own for each place")
        found[anchor] = label
    return found


def _anchored(places: tuple[Placed, ...]) -> Iterator[tuple[str, str]]:
    for place in places:
        block = place.block
        if isinstance(block, Section) and block.anchor:
            yield block.anchor, f"{SECTION} {place.number}"
        elif isinstance(block, Figure) and block.anchor:
            yield block.anchor, f"{FIGURE} {place.number}"
        elif isinstance(block, Items):
            yield from ((anchor, str(count)) for count, anchor in enumerate(block.anchors, 1) if anchor)
        elif isinstance(block, Table):
            if block.anchor:
                yield block.anchor, f"{TABLE} {place.number}"
            for row in block.rows:
                if row.anchor:
                    yield row.anchor, "".join(span.text for span in row.cells[0]) if row.cells else ""


def running_head(document: Document) -> tuple[str, str]:
    """Return what stands at the head of every page: the title, and the facts that tell one document from another."""
    facts = (
        f"{legible(label)} {legible(text)}" for label, text in document.facts if label.casefold() in _ON_EVERY_PAGE
    )
    return legible(document.title), " · ".join(facts)
