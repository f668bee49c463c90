"""On which line of a spec a key or a value is written."""

from __future__ import annotations

import hashlib
import os
import sys
from dataclasses import dataclass
from pathlib import Path

from markov.errors import UsageError
from markov.model import Model
from markov.spec import LARGEST, STANDARD_INPUT, read, read_bytes
from markov.spec.tree import Entry, MappingNode, Node, Scalar, SequenceNode, Tree, parse_tree

#: Keys and list positions (from 0) from the top of a spec.
Path_ = tuple[str | int, ...]


@dataclass(frozen=True)
class SpecLines:
    """The lines of one spec; without a tree none is known."""

    tree: Tree | None = None

    def line(self, path: Path_) -> int | None:
        """Return the line, from 1, of the key at a path or of the list entry; None where it is not written.

        The short form of a mapping, and a single entry in place of a list, stand for what they mean.
        """
        node: Node | None = None if self.tree is None else self.tree.root
        if node is None or not path:
            return None
        line: int | None = None
        for step in path:
            if isinstance(node, Scalar):
                return line  # the short form says the rest
            if isinstance(node, MappingNode):
                if isinstance(step, int):
                    continue  # a single entry in place of a list
                entry = _entry(node, step)
                if entry is None:
                    return None
                node, line = entry.value, entry.key.place.line
            elif isinstance(node, SequenceNode):
                if not isinstance(step, int) or step >= len(node.items):
                    return None
                place, node = node.items[step]
                line = place.line
        return line


def _entry(node: MappingNode, key: str) -> Entry | None:
    found = node.entries.get(key)
    if found is not None:
        return found
    return next((entry for name, entry in node.entries.items() if name.strip() == key), None)


def read_with_lines(path: str | os.PathLike[str]) -> tuple[Model, SpecLines]:
    """Read a spec from a file, or from standard input where the path is ``-``, with its lines.

    Raises
    ------
    SpecError
        With every problem of the spec.
    UsageError
        Where there is no such file, or it cannot be opened.
    """
    if os.fspath(path) == "-":
        if sys.stdin is None:
            raise UsageError("cannot read the spec -: there is no standard input")
        data = sys.stdin.buffer.read(LARGEST + 1)
        return read_bytes(data, STANDARD_INPUT), _lines(data)
    model = read(path)
    return model, lines_of(model)


def lines_of(model: Model) -> SpecLines:
    """Return the lines of the file that a model was read from, as long as that file is unchanged.

    A model made in Python, read from text, or from a file that has changed since, has no lines.
    """
    try:
        with Path(model.source_name).open("rb") as file:
            data = file.read(LARGEST + 1)
    except (OSError, ValueError):
        return SpecLines()
    return _lines(data) if hashlib.sha256(data).hexdigest() == model.sha256 else SpecLines()


def lines_in(text: str) -> SpecLines:
    """Return the lines of a spec that is at hand as text."""
    return _lines(text.encode("utf-8", errors="surrogatepass"))


def _lines(data: bytes) -> SpecLines:
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        return SpecLines()
    return SpecLines(parse_tree(text, ""))
