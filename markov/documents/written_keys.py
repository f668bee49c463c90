"""Every key that a spec writes, with its value as text, so that two specs can be held against each other."""

from __future__ import annotations

import dataclasses
from collections.abc import Hashable, Iterator, Mapping
from dataclasses import dataclass

from markov.documents.opening import criterion_words
from markov.documents.spec_lines import Path_
from markov.model import AllOf, AnyOf, AtLeast, Model, Named
from markov.model.loads import LoadSharing
from markov.model.part import Part
from markov.quantities import Quantity

#: Keys that have a section of their own among the changes.
ELSEWHERE = frozenset({"parameters", "targets"})

_CRITERIA = (Named, AllOf, AnyOf, AtLeast)


@dataclass(frozen=True)
class WrittenValue:
    """A value as written, and what tells whether another is the same.

    Attributes
    ----------
    path : tuple
        Keys and list positions from the top of the spec, to find the line.
    text : str
    same : hashable
        Equal for values that mean the same, such as ``24 h`` and ``1 d``.
    parameters : tuple of str
        Parameters that it names.
    """

    path: Path_
    text: str
    same: Hashable
    parameters: tuple[str, ...] = ()


def written_keys(model: Model) -> dict[str, WrittenValue]:
    """Return every key that a model's spec writes, but parameters and targets, under the words that documents print.

    Entries of lists go by what they are called, so that a moved entry is no change; the order of the members of a group
    and of other lists of names is part of their value.
    """
    found: dict[str, WrittenValue] = {}
    for words, value in _walk(model, "", ()):
        key, copy = words, 2
        while key in found:
            key, copy = f"{words} ({copy})", copy + 1
        found[key] = value
    return found


def _walk(part: Part, words: str, path: Path_) -> Iterator[tuple[str, WrittenValue]]:
    for name, field in type(part).model_fields.items():
        key = field.alias or name
        if not part.is_said(name) or (not path and key in ELSEWHERE):
            continue
        yield from _value(getattr(part, name), f"{words}.{key}" if words else key, (*path, key))


def _value(value: object, words: str, path: Path_) -> Iterator[tuple[str, WrittenValue]]:
    if value is None:
        return
    if isinstance(value, Part):
        yield from _walk(value, words, path)
    elif isinstance(value, Mapping):
        for key, each in value.items():
            yield from _value(each, f"{words}.{key}", (*path, str(key)))
    elif isinstance(value, tuple | list) and value and isinstance(value[0], Part) and path[-1] != "members":
        for number, each in enumerate(value):
            yield from _value(each, f"{words}[{called(each)}]", (*path, number))
    else:
        text, same, parameters = _leaf(value)
        yield words, WrittenValue(path, text, same, parameters)


def called(part: object) -> str:
    """Return what an entry of a list is called: its identity, its name, or the states that a transition joins."""
    for key in ("id", "name"):
        if isinstance(found := getattr(part, key, None), str):
            return found
    source, target, cause = (getattr(part, key, None) for key in ("source", "target", "cause"))
    if isinstance(source, str) and isinstance(target, str):
        return f"{source} to {target}" + (f", {cause}" if cause else "")
    return type(part).__name__


def _leaf(value: object) -> tuple[str, Hashable, tuple[str, ...]]:
    """Return a value as text, what it is equal by, and the parameters that it names."""
    if isinstance(value, Quantity):
        spread = _shape(value)
        text = value.text if not spread else f"{value.text}, {spread}"
        return text, (value.dimension, value.exact, value.parameters, spread), value.parameters
    if isinstance(value, bool):
        text = "true" if value else "false"
        return text, text, ()
    if isinstance(value, _CRITERIA):
        text = criterion_words(value)
        return text, text, ()
    if isinstance(value, LoadSharing):
        parts = {**{str(key): each for key, each in value.table.items()}, "exponent": value.exponent}
        return _joined({key: each for key, each in parts.items() if each is not None})
    if isinstance(value, Part):
        said = {
            field.alias or name: getattr(value, name)
            for name, field in type(value).model_fields.items()
            if value.is_said(name)
        }
        return _joined(said)
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return _joined({each.name: getattr(value, each.name) for each in dataclasses.fields(value)})
    if isinstance(value, tuple | list | frozenset):
        leaves = [_leaf(each) for each in (sorted(value) if isinstance(value, frozenset) else value)]
        names = tuple(name for _, _, used in leaves for name in used)
        return "; ".join(text for text, _, _ in leaves), tuple(same for _, same, _ in leaves), names
    return str(value), str(value), ()


def _joined(parts: Mapping[str, object]) -> tuple[str, Hashable, tuple[str, ...]]:
    leaves = {key: _leaf(each) for key, each in parts.items() if each is not None}
    names = tuple(name for _, _, used in leaves.values() for name in used)
    text = ", ".join(f"{key} {told}" for key, (told, _, _) in leaves.items())
    return text, tuple((key, same) for key, (_, same, _) in leaves.items()), names


def _shape(value: Quantity) -> str:
    """Return the spread of a time that has one, as text; empty for any other quantity."""
    shape = getattr(value, "shape", None)
    if shape is None or not dataclasses.is_dataclass(shape):
        return ""
    parts = {each.name: getattr(shape, each.name) for each in dataclasses.fields(shape) if each.name != "mean"}
    told = {key: each for key, each in parts.items() if each not in (None, False)}
    return ", ".join(
        f"{key.replace('_', ' ')} {each.text if isinstance(each, Quantity) else str(each).lower()}"
        for key, each in told.items()
    )
