"""Reads the published checks, each with the spec that stands for its model."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import yaml

HERE = Path(__file__).resolve().parent
CHECKOUT = HERE.parent.parent

#: Significant digits to which exact values are given.
DIGITS = 20


@dataclass(frozen=True)
class Check:
    """One published value: what is asked of which model, and what has to come out."""

    id: str
    asks: str
    measure: str
    of: str | None
    at: str | None
    state: str | None
    unit: str
    published: str
    is_printed: bool
    exact: str
    source: str
    source_status: str
    share_not_waiting_of: int | None
    solves_for: str | None
    to_reach: str | None

    @property
    def exact_bounds(self) -> tuple[Fraction, Fraction]:
        """The exact value, with room for the rounding of its last digit."""
        given = Decimal(self.exact)
        half = Fraction(Decimal(5).scaleb(given.adjusted() - DIGITS))
        return Fraction(given) - half, Fraction(given) + half


@dataclass(frozen=True)
class Published:
    """A spec with the checks that are made of its solution."""

    name: str
    about: str
    spec: str
    is_own_text: bool
    checks: tuple[Check, ...]


_NEEDED = ("id", "asks", "measure", "exact", "source", "source_status")
_OPTIONAL = ("of", "at", "state", "share_not_waiting_of", "solves_for", "to_reach")


def _check(entry: dict[str, Any]) -> Check:
    unknown = set(entry) - set(_NEEDED) - set(_OPTIONAL) - {"in", "printed", "evaluated", "note"}
    assert not unknown, f"{entry['id']}: unknown keys {unknown}"
    assert ("printed" in entry) != ("evaluated" in entry), f"{entry['id']}: one of printed, evaluated"
    return Check(
        unit=entry["in"],
        published=entry.get("printed", entry.get("evaluated")),
        is_printed="printed" in entry,
        **{key: entry[key] for key in _NEEDED},
        **{key: entry.get(key) for key in _OPTIONAL},
    )


def _model(entry: dict[str, Any]) -> Published:
    text = entry["spec"] if "spec" in entry else (CHECKOUT / entry["file"]).read_text(encoding="utf-8")
    return Published(entry["name"], entry["about"], text, "spec" in entry, tuple(map(_check, entry["checks"])))


_DATA = yaml.safe_load((HERE / "checks.yaml").read_text(encoding="utf-8"))

MODELS: tuple[Published, ...] = tuple(map(_model, _DATA["models"]))
FAMILIES: dict[str, list[str]] = _DATA["families"]
LEFT_OUT: tuple[tuple[str, str], ...] = tuple(
    (number, entry["reason"]) for entry in _DATA["left_out"] for number in entry["ids"]
)
