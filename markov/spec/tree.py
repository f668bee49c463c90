"""From YAML text to a tree that knows where each key and each value stands.

Nothing is resolved: every scalar is text, whatever YAML would make of it.  The tree is built from parser events with
a stack, so that neither depth nor aliases can exhaust the machine.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Any, NamedTuple, Protocol

import yaml

from markov.errors import Problem
from markov.quantities import quote

#: Deepest nesting of mappings and lists, aliases unfolded.
DEEPEST = 40
#: Most keys, values and list entries, aliases unfolded.
MOST_NODES = 400_000

_Loader: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
_PLAIN_TAGS = frozenset({"!", "tag:yaml.org,2002:str", "tag:yaml.org,2002:map", "tag:yaml.org,2002:seq"})
_EXPECTED = "plain YAML: mappings, lists, text"


class Place(NamedTuple):
    """Line and column, both from 1."""

    line: int
    column: int


class _Mark(Protocol):
    line: int
    column: int


@dataclass
class Scalar:
    """A piece of text."""

    place: Place
    text: str
    size: int = 1
    height: int = 0


@dataclass
class Entry:
    """A key with its value; `place` is where the value, or the alias for it, is written."""

    key: Scalar
    place: Place
    value: Node


@dataclass
class MappingNode:
    """Keys with values, in the order of the text; the first of a key that stands twice counts."""

    place: Place
    entries: dict[str, Entry] = field(default_factory=dict)
    size: int = 1
    height: int = 1


@dataclass
class SequenceNode:
    """List entries, each with the place where it, or the alias for it, is written."""

    place: Place
    items: list[tuple[Place, Node]] = field(default_factory=list)
    size: int = 1
    height: int = 1


Node = Scalar | MappingNode | SequenceNode


@dataclass(frozen=True)
class Tree:
    """A spec as written: its root, and the problems that are matters of YAML alone."""

    root: Node | None
    problems: tuple[Problem, ...]

    def plain(self) -> Any:
        """Return the content as dicts, lists and text."""
        return None if self.root is None else _plain(self.root)

    def locate(self, path: tuple[str | int, ...], on_key: bool) -> tuple[int, int]:
        """Return line and column of a value or its key; of the nearest thing around it if it is not written."""
        node, key_place, value_place = self.root, Place(1, 1), Place(1, 1)
        if node is not None:
            value_place = node.place
        for step in path:
            if isinstance(node, MappingNode) and isinstance(step, str):
                entry = node.entries.get(step) or _stripped(node, step)
                if entry is None:
                    return key_place
                node, key_place, value_place = entry.value, entry.key.place, entry.place
            elif isinstance(node, SequenceNode) and isinstance(step, int) and step < len(node.items):
                value_place, node = node.items[step]
                key_place = value_place
            else:
                break
        return key_place if on_key else value_place


def _stripped(node: MappingNode, step: str) -> Entry | None:
    return next((entry for key, entry in node.entries.items() if key.strip() == step), None)


def _plain(node: Node) -> Any:
    match node:
        case Scalar():
            return node.text
        case MappingNode():
            return {key: _plain(entry.value) for key, entry in node.entries.items()}
        case SequenceNode():
            return [_plain(value) for _, value in node.items]


def parse_tree(text: str, file: str) -> Tree:
    """Parse YAML text.

    Parameters
    ----------
    text : str
        The whole text, already known to hold printable characters only.
    file : str
        Name for problems.
    """
    builder = _Builder(file)
    try:
        for event in yaml.parse(text, Loader=_Loader):
            builder.take(event)
    except _Stop:
        pass
    except yaml.MarkedYAMLError as error:
        builder.problems.append(_syntax_problem(error, text, file))
        builder.root = None
    except (yaml.YAMLError, ValueError, OverflowError):
        builder.tell(builder.last, "an escape or a tag that stands for no character", _EXPECTED, "remove it")
        builder.root = None
    return Tree(builder.root, tuple(builder.problems))


class _Stop(Exception):
    """Reading ends here: what follows cannot be used."""


@dataclass
class _Open:
    """A mapping or a list that is being read."""

    node: MappingNode | SequenceNode
    anchor: str | None
    key: Scalar | None = None
    #: The value that comes next belongs to no key that is read.
    is_skipping: bool = False
    #: A key that is no text is being passed over, with its value.
    odd_key: bool = False


class _Builder:
    """Takes events one by one."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.root: Node | None = None
        self.problems: list[Problem] = []
        self.last = Place(1, 1)
        self.documents = 0
        self.open: list[_Open] = []
        self.anchors: dict[str, Node | None] = {}

    def tell(self, place: Place, found: str, expected: str, fix: str) -> None:
        self.problems.append(Problem(self.file, place.line, place.column, found, expected, fix))

    def stop(self, place: Place, found: str, expected: str, fix: str) -> None:
        self.tell(place, found, expected, fix)
        self.root = None
        raise _Stop

    def take(self, event: Any) -> None:
        place = _place(event.start_mark)
        self.last = place
        if isinstance(event, yaml.DocumentStartEvent):
            self.documents += 1
            if self.documents > 1:
                self.tell(place, "a second document begins", "one spec in a file", "put it into a file of its own")
                raise _Stop
        elif isinstance(event, yaml.AliasEvent):
            self._alias(event.anchor or "", place)
        elif isinstance(event, yaml.ScalarEvent):
            self._tag(event, place)
            text = self._checked(event.value, place)
            # A plain empty scalar stands where its line ends; the place after the colon is what a reader looks at.
            self._finish(Scalar(place, text), event.anchor, place, plain=not event.style)
        elif isinstance(event, yaml.MappingStartEvent | yaml.SequenceStartEvent):
            self._tag(event, place)
            if len(self.open) >= DEEPEST:
                self.stop(place, "the text is nested too deep", f"at most {DEEPEST} levels", "flatten it")
            node = MappingNode(place) if isinstance(event, yaml.MappingStartEvent) else SequenceNode(place)
            if event.anchor is not None:
                self.anchors[event.anchor] = None
            self.open.append(_Open(node, event.anchor))
        elif isinstance(event, yaml.MappingEndEvent | yaml.SequenceEndEvent):
            done = self.open.pop()
            self._finish(done.node, done.anchor, done.node.place)

    def _checked(self, text: str, place: Place) -> str:
        if any("\ud800" <= character <= "\udfff" for character in text):
            self.tell(place, "an escape that stands for no character", "text", "remove it")
            return "".join(character for character in text if not "\ud800" <= character <= "\udfff")
        return text

    def _tag(self, event: Any, place: Place) -> None:
        if event.tag is not None and event.tag not in _PLAIN_TAGS:
            self.tell(place, f"the tag {quote(event.tag)}", "values without tags", "remove the tag")

    def _alias(self, anchor: str, place: Place) -> None:
        if anchor not in self.anchors:
            self.tell(place, f"the alias {quote('*' + anchor)}", "an anchor before it", f"write `&{anchor}` before it")
            self._finish(Scalar(place, ""), None, place, alias=True)
            return
        node = self.anchors[anchor]
        if node is None:
            self.stop(place, f"the anchor {quote(anchor)} holds itself", "anchors without circles", "write it out")
        else:
            self._finish(node, None, place, alias=True)

    def _finish(
        self, node: Node, anchor: str | None, place: Place, *, plain: bool = False, alias: bool = False
    ) -> None:
        if node.size > MOST_NODES:
            self.stop(place, "too many keys and values", f"at most {MOST_NODES}, aliases unfolded", "make it smaller")
        if node.height + len(self.open) > DEEPEST:
            self.stop(place, "the text is nested too deep", f"at most {DEEPEST} levels, aliases unfolded", "flatten it")
        if anchor is not None:
            self.anchors[anchor] = node
        if not self.open:
            self.root = node
            return
        parent = self.open[-1]
        parent.node.size += node.size
        parent.node.height = max(parent.node.height, node.height + 1)
        if isinstance(parent.node, SequenceNode):
            parent.node.items.append((place, node))
        else:
            self._into_mapping(parent, parent.node, node, place, plain)

    def _into_mapping(self, parent: _Open, mapping: MappingNode, node: Node, place: Place, plain: bool) -> None:
        if parent.is_skipping:
            parent.is_skipping = False
        elif parent.key is None:
            parent.key = self._key(mapping, node, place, plain)
            parent.is_skipping = parent.key is None
        else:
            mapping.entries[parent.key.text] = Entry(parent.key, place, node)
            parent.key = None

    def _key(self, mapping: MappingNode, node: Node, place: Place, plain: bool) -> Scalar | None:
        """Return the key that a node is, or None where its value is to be passed over."""
        if not isinstance(node, Scalar):
            self.tell(place, "a mapping or a list as a key", "keys that are text", "write a name")
            return None
        if node.text == "<<" and plain:
            self.tell(place, "the merge key `<<`", "each mapping written out", "repeat the keys, or alias the whole")
            return None
        if not node.text.strip():
            self.tell(place, "an empty key", "a name before the colon", "write one, or remove the line")
            return None
        if (first := mapping.entries.get(node.text)) is not None:
            found = f"{quote(node.text)} stands twice in this mapping, first on line {first.key.place.line}"
            self.tell(place, found, "each key once", "remove or rename one of them")
            return None
        return Scalar(place, node.text)


def _place(mark: _Mark) -> Place:
    return Place(mark.line + 1, mark.column + 1)


# ---------------------------------------------------------------------------------------------- errors of syntax


class _Hint(NamedTuple):
    """What a complaint of the parser means to the author of a spec."""

    pattern: str
    found: str
    expected: str
    fix: str


_HINTS = (
    _Hint("directive", "a directive that cannot be read", _EXPECTED, "remove the line that begins with `%`"),
    _Hint(" tag|tag handle|URI", "a tag that cannot be read", "values without tags", "remove what begins with `!`"),
    _Hint(
        "block scalar",
        "text on the line of `|` or `>`",
        "the text on the lines below, indented",
        "move it, or put what begins with `|` or `>` into quotation marks",
    ),
    _Hint("depth|nesting|flow level", "text that is nested too deep", f"at most {DEEPEST} levels", "flatten it"),
    _Hint(
        "mapping values are not allowed|mapping keys are not allowed|expected ':'",
        "a colon in the wrong place, or a key without one",
        "`key: value` lines, equally indented within one mapping",
        "check the indentation and the colons; put text that holds `: ` into quotation marks",
    ),
    _Hint(
        "block sequence entries|'-' indicator|expected <block end>|did not find expected key|document start",
        "a line that does not fit those above it",
        "equal indentation of all keys, or of all `-`, of one level",
        "check the indentation; put text that begins with a sign or a quotation mark into quotation marks",
    ),
    _Hint(
        "',' or '\\]'|',' or '\\}'|expected node content",
        "a bracket that is not closed, or a comma that is missing",
        "`[a, b]` or `{key: value, key: value}`",
        "close it, or put text that holds brackets or commas into quotation marks",
    ),
    _Hint(
        "end of stream|document indicator",
        "a quotation mark that is not closed",
        "text between two quotation marks",
        "close it",
    ),
    _Hint("escape|hexdec", "an unknown escape after `\\`", "plain text", "use single quotation marks, or write `\\\\`"),
    _Hint("anchor|alias|alphabetic", "`&` or `*` without a name", _EXPECTED, "put the text into quotation marks"),
)


def _syntax_problem(error: yaml.MarkedYAMLError, text: str, file: str) -> Problem:
    mark = error.problem_mark or error.context_mark
    place = _place(mark) if mark is not None else Place(1, 1)
    lines = text.splitlines()
    line = lines[place.line - 1] if place.line <= len(lines) else ""
    character = line[place.column - 1 : place.column]
    trouble = error.problem or ""
    if character == "\t" or "tab character" in trouble or ("\t" in line[: len(line) - len(line.lstrip())]):
        return Problem(file, *place, "a tab", "spaces for indentation", "replace the tab with spaces")
    if "cannot start any token" in trouble:
        found = f"text that begins with {quote(character)}"
        return Problem(file, *place, found, "text in quotation marks", "put it into quotation marks")
    complaint = f"{error.context or ''} {trouble}"
    for pattern, found, expected, fix in _HINTS:
        if re.search(pattern, complaint):
            if error.context_mark is not None and error.context_mark.line + 1 < place.line:
                found += f" (in what begins on line {error.context_mark.line + 1})"
            return Problem(file, *place, found, expected, fix)
    return Problem(file, *place, "something that is not YAML", _EXPECTED, "check this line and the one above")
