"""The parts of a spec that could be read, beside all that is written: what checks between parts look at."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from markov.model.content import Content
from markov.model.faults import Fault, Path, choices, quote, suggest


@dataclass(frozen=True)
class Partial:
    """The parts of a spec that could be read, beside all that is written.

    Attributes
    ----------
    content : Content
        Faulty parts are left out.
    raw : mapping
        As written.
    kept : mapping of key to list of int
        For lists with faulty entries: the positions, as written, of the entries that are left.
    """

    content: Content
    raw: Mapping[str, Any]
    kept: Mapping[str, list[int]] = field(default_factory=dict)

    def position(self, key: str, index: int) -> int:
        """Return where an entry of a list stands as written."""
        return self.kept[key][index] if key in self.kept else index

    def names(self, key: str) -> frozenset[str]:
        """Return all names written under a key, faulty or not."""
        written = self.raw.get(key)
        return frozenset(written) if isinstance(written, Mapping) else frozenset()

    def is_said(self, key: str) -> bool:
        """Whether a top key is written, be it misspelt."""
        return key in self.raw or key in self.content.meant_by(self.raw).values()

    def is_readable(self, key: str) -> bool:
        """Whether names under a key are known: it is absent, or a mapping."""
        return key not in self.raw or isinstance(self.raw[key], Mapping)

    def is_whole(self, *keys: str) -> bool:
        """Whether no part under these keys was faulty."""
        for key in keys:
            written = self.raw.get(key)
            read = getattr(self.content, key)
            if written is not None and (read is None or (isinstance(written, Mapping | list) and not read and written)):
                return False
            if isinstance(written, Mapping) and isinstance(read, Mapping) and len(written) != len(read):
                return False
        return True

    @property
    def knows_places(self) -> bool:
        """Whether all is in order that says where units serve."""
        return self.is_whole("units", "groups", "system", "crews", "spares", "phases")

    def listed(self, top: str, key: str) -> Iterator[tuple[str, Path, str]]:
        """Yield (part, path, name) for the names under one key of all parts as written, faulty parts included."""
        written = self.raw.get(top)
        for name, part in written.items() if isinstance(written, Mapping) else ():
            entries = part.get(key) if isinstance(part, Mapping) else None
            if entries and isinstance(entries, str):
                yield name, (top, name, key), entries
            for position, entry in enumerate(entries if isinstance(entries, list) else ()):
                unit = entry.get("unit") if isinstance(entry, Mapping) else entry
                if unit and isinstance(unit, str):
                    yield name, (top, name, key, position), unit


def unknown(path: Path, name: str, known: Collection[str], expected: str, *, on_key: bool = False) -> Fault:
    """Return the fault of a name that nothing has, with the one that is most likely meant."""
    fix = suggest(name, known, f"write one of {choices(sorted(known))}" if known else "define it first")
    return Fault(path, f"{quote(name)} is not known", expected, fix, on_key)
