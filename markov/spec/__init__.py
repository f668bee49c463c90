"""The spec reader: from a file, or from text, to a checked model, all problems at once.

A spec is YAML of which nothing but its shape is used: every scalar is text, and the model decides what it means.
"""

from __future__ import annotations

import hashlib
import os
import re
import sys
from pathlib import Path

from markov.errors import Problem, SpecError, UsageError
from markov.model import Model
from markov.spec.draft import draft_text
from markov.spec.tree import parse_tree

__all__ = ["LARGEST", "STANDARD_INPUT", "draft_text", "read", "read_bytes", "read_text"]

#: Largest spec, in bytes.
LARGEST = 4 * 1024 * 1024
#: What problems name as the file of a spec that comes through standard input.
STANDARD_INPUT = "<stdin>"

_UNPRINTABLE = re.compile("[^\t\n\r\x20-\x7e\x85\xa0-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def read(path: str | os.PathLike[str]) -> Model:
    """Read a spec from a file, or from standard input where the path is ``-``.

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
        return read_bytes(sys.stdin.buffer.read(LARGEST + 1), STANDARD_INPUT)
    try:
        with Path(path).open("rb") as file:
            data = file.read(LARGEST + 1)
    except (OSError, ValueError) as error:
        why = error.strerror if isinstance(error, OSError) and error.strerror else "not a usable path"
        raise UsageError(f"cannot read the spec {os.fspath(path)!s}: {why}") from error
    return read_bytes(data, os.fspath(path))


def read_text(text: str, name: str = "spec") -> Model:
    """Read a spec from text; `name` is what problems call it.

    Raises
    ------
    SpecError
        With every problem of the spec.
    """
    return read_bytes(text.encode("utf-8", errors="surrogatepass"), name)


def read_bytes(data: bytes, name: str) -> Model:
    """Read a spec from bytes in UTF-8, with or without a byte order mark.

    Raises
    ------
    SpecError
        With every problem of the spec.
    """
    if len(data) > LARGEST:
        found = f"a spec of more than {LARGEST // 1024 // 1024} MB"
        raise SpecError([Problem(name, 1, 1, found, "a smaller one", "split it, or count units that are alike")])
    text = _decoded(data, name)
    tree = parse_tree(text, name)
    if tree.root is None:
        problems = tree.problems or (Problem(name, 1, 1, "the spec is empty", "a spec", "see `markov draft`"),)
        raise SpecError(problems)
    return Model.from_mapping(
        tree.plain(),
        file=name,
        sha256=hashlib.sha256(data).hexdigest(),
        locate=tree.locate,
        problems=tree.problems,
    )


def _decoded(data: bytes, name: str) -> str:
    """Return the text of a spec; refuse other encodings and control characters, with their place."""
    for mark, encoding in ((b"\xff\xfe", "UTF-16"), (b"\xfe\xff", "UTF-16"), (b"\x00\x00\xfe\xff", "UTF-32")):
        if data.startswith(mark):
            raise SpecError([Problem(name, 1, 1, f"text in {encoding}", "text in UTF-8", "save it as UTF-8")])
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        before = data[: error.start].decode("utf-8-sig", errors="replace")
        found = f"the byte 0x{data[error.start]:02x}, which is not UTF-8"
        raise SpecError([Problem(name, *_end_of(before), found, "text in UTF-8", "save the file as UTF-8")]) from None
    if match := _UNPRINTABLE.search(text):
        found = f"the control character U+{ord(match.group()):04X}"
        raise SpecError([Problem(name, *_end_of(text[: match.start()]), found, "printable text", "remove it")])
    return text


def _end_of(text: str) -> tuple[int, int]:
    """Return line and column of what follows a text."""
    line = text.count("\n") + 1
    return line, len(text) - (text.rfind("\n") + 1) + 1
