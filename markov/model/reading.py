"""From plain mappings to a checked spec: every part is read by itself, so that no fault hides another."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from decimal import Decimal
from fractions import Fraction
from numbers import Real
from typing import Any

from pydantic import ValidationError

from markov.model.content import Content
from markov.model.faults import Fault, Path, gathered, quote
from markov.model.parameters import resolve
from markov.model.partial import Partial
from markov.model.readers import Context, as_text
from markov.model.references import check
from markov.quantities import COMMON_YEAR, Quantity, QuantityError, parse_quantity

#: Deepest nesting of mappings and lists that is read.
DEEPEST = 60

_KEYED = (
    "parameters",
    "units",
    "groups",
    "crews",
    "spares",
    "tests",
    "common_causes",
    "initial",
    "levels",
    "states",
    "reference",
)
_LISTED = ("phases", "targets", "transitions")
_ROUNDS = 4


@dataclass(frozen=True)
class Reading:
    """What came of reading a spec: its content if it is in order, else its faults."""

    content: Content | None
    faults: tuple[Fault, ...]


def read_content(data: object, kind: type[Content]) -> Reading:
    """Read a spec given as nested mappings, lists and scalars.

    Parameters
    ----------
    data : object
        Text everywhere, as the YAML reader gives it, or numbers, as Python code gives them.
    kind : type of Content
        What to make of it.
    """
    faults: list[Fault] = []
    if not isinstance(data, Mapping):
        found = "no mapping stands at the top" if data else "the spec is empty"
        return Reading(None, (Fault((), found, "keys such as `units` and `system`", "see `markov draft`"),))
    raw = _plain(data, (), faults)
    assert isinstance(raw, dict)  # a mapping stays one
    odd = tuple(faults)
    odd_places = {fault.path for fault in odd}
    context, circles = _context(raw)
    faults += circles
    pruned = _Pruned(dict(raw))
    content: Content | None = None
    for _ in range(_ROUNDS):
        try:
            content = kind.model_validate(pruned.data, context=context, by_alias=True, by_name=False)
            break
        except ValidationError as error:
            found_now, others, silent = gathered(error)
            found_now += [
                Fault(path, "this cannot be read", "what specs/README.md says", "correct it") for _, path, _ in others
            ]
            faults += [replace(fault, path=pruned.as_written(fault.path)) for fault in found_now]
            pruned.remove([*(fault.path for fault in found_now), *silent])
    if content is not None:
        faults += check(Partial(content, raw, pruned.positions))
    unique = tuple(dict.fromkeys(fault for fault in faults if fault in odd or fault.path not in odd_places))
    return Reading(None if unique else content, unique)


def _context(raw: Mapping[str, Any]) -> tuple[Context, list[Fault]]:
    """Work out what the reading of single values needs: the year, the parameters, the names."""
    year = COMMON_YEAR
    try:
        written = parse_quantity(str(raw["year"]), year=None) if "year" in raw else None
    except QuantityError:
        written = None  # told where the key itself is read
    if written is not None and written.dimension == "time" and not written.is_zero:
        year = written.exact
    resolved, unresolved, circles = resolve(raw.get("parameters"), year)
    names = {key: frozenset(raw[key]) if isinstance(raw.get(key), dict) else frozenset() for key in ("units", "groups")}
    return Context(resolved, unresolved, year, names["units"], names["groups"]), circles


@dataclass
class _Pruned:
    """A spec without the parts that turned out faulty."""

    data: dict[str, Any]
    positions: dict[str, list[int]] = field(default_factory=dict)

    def as_written(self, path: Path) -> Path:
        """Return a path within what is left as one within what was written."""
        if len(path) > 1 and path[0] in self.positions and isinstance(path[1], int):
            return (path[0], self.positions[str(path[0])][path[1]], *path[2:])
        return path

    def remove(self, paths: Iterable[Path]) -> None:
        """Take out the parts that these faults stand in."""
        entries: dict[str, set[str | int]] = {}
        for path in paths:
            if not path:
                self.data = {}
            elif len(path) > 1 and path[0] in _KEYED + _LISTED:
                entries.setdefault(str(path[0]), set()).add(path[1])
            else:
                self.data.pop(str(path[0]), None)
        for top, faulty in entries.items():
            part = self.data.get(top)
            if isinstance(part, dict):
                self.data[top] = {name: value for name, value in part.items() if name not in faulty}
            elif isinstance(part, list):
                left = [at for at in range(len(part)) if at not in faulty]
                before = self.positions.get(top, list(range(len(part))))
                self.positions[top] = [before[at] for at in left]
                self.data[top] = [part[at] for at in left]


def _plain(value: object, path: Path, faults: list[Fault]) -> Any:
    """Return the same data in dicts, lists and scalars; other values become faults and an empty text."""
    if len(path) > DEEPEST:
        faults.append(Fault(path, "the spec is nested too deep", f"at most {DEEPEST} levels", "flatten it"))
        return ""
    match value:
        case str() | Quantity() | None | bool() | Fraction() | Decimal():
            return value
        case Real():
            return as_text(value)
        case Mapping():
            plain: dict[str, Any] = {}
            for key, each in value.items():
                if not isinstance(key, str | int):
                    faults.append(Fault(path, f"the key {quote(repr(key))}", "keys that are text", "write it as text"))
                    continue
                plain[str(key).strip()] = _plain(each, (*path, str(key).strip()), faults)
            return plain
        case list() | tuple():
            return [_plain(each, (*path, position), faults) for position, each in enumerate(value)]
    faults.append(Fault(path, f"a value of the kind {quote(type(value).__name__)}", "text", "write it as text"))
    return ""
