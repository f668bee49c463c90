"""Which fonts draw the characters of a document."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterator

from markov.documents.tree import Block, Document, Figure, Items, Paragraph, Section, Table
from markov.output.lettering import covered, legible


class Typefaces:
    """DejaVu Sans, with other fonts of the machine only for characters that it lacks.

    Attributes
    ----------
    from_machine : bool
        Whether another font is needed for a character of the document.
    """

    def __init__(self, document: Document) -> None:
        wanted = {character for text in _texts(document) for character in text}
        lacking = {character for character in wanted if ord(character) not in covered() and not _unseen(character)}
        drawn = _drawn_by_machine(lacking) if lacking else frozenset()
        self.from_machine = bool(drawn)
        self._undrawable = lacking - drawn

    def shown(self, text: str) -> str:
        """Return `text` with the number of every character that no font draws in its place."""
        if not self._undrawable:
            return text
        return "".join(numbered(character) if character in self._undrawable else character for character in text)


def numbered(character: str) -> str:
    """Return what stands for a character that cannot be drawn."""
    return f"⟨U+{ord(character):04X}⟩"


def _unseen(character: str) -> bool:
    return unicodedata.category(character) in ("Cf", "Mn")  # joiners and marks are placed, or left out, by the setter


def _texts(document: Document) -> Iterator[str]:
    yield legible(document.title)
    for label, text in document.facts:
        yield legible(label)
        yield legible(text)
    yield from map(legible, _of_blocks(document.blocks))


def _of_blocks(blocks: tuple[Block, ...]) -> Iterator[str]:
    for block in blocks:
        if isinstance(block, Section):
            yield block.heading
            yield from _of_blocks(block.blocks)
        elif isinstance(block, Paragraph):
            yield from (span.text for span in block.text)
        elif isinstance(block, Items):
            yield from (span.text for item in block.items for span in item)
        elif isinstance(block, Table):
            yield block.caption
            yield from (column.heading for column in block.columns)
            yield from (span.text for row in block.rows for cell in row.cells for span in cell)
        elif isinstance(block, Figure):
            yield block.caption
            yield block.svg


def _drawn_by_machine(lacking: set[str]) -> frozenset[str]:
    """Return the characters among `lacking` that some font of this machine draws."""
    from matplotlib.font_manager import fontManager
    from matplotlib.ft2font import FT2Font

    left = set(lacking)
    for entry in sorted(fontManager.ttflist, key=lambda entry: (entry.name, str(entry.fname))):
        if not left:
            break
        if entry.name.startswith(("DejaVu", "Last Resort")):
            continue
        try:
            there = FT2Font(str(entry.fname)).get_charmap()
        except (OSError, RuntimeError):  # listed, but gone or unreadable since
            continue
        left -= {character for character in left if ord(character) in there}
    return frozenset(lacking - left)
