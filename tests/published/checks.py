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
class Term:
    """Something that is asked of the program, and how often it counts."""

    measure: str
    of: str | None
    at: str | None
    state: str | None
    times: Fraction


@dataclass(frozen=True)
class Check:
    """One published value: what is asked of which model, and what has to come out."""

    id: str
    asks: str
    terms: tuple[Term, ...]
    plus: Fraction
    unit: str
    published: str
    is_printed: bool
    formula: str | None
    formula_off_by: str | None
    exact: str
    source: str
    source_status: str
    solves_for: str | None
    to_reach: str | None

    @property
    def exact_bounds(self) -> tuple[Fraction, Fraction]:
        """The exact value, with room for the rounding of its last digit."""
        given = Decimal(self.exact)
        half = Fraction(Decimal(5).scaleb(given.adjusted() - DIGITS))
        return Fraction(given) - half, Fraction(given) + half

    @property
    def is_counted(self) -> bool:
        """Whether the value is the least whole number that reaches a level."""
        return self.solves_for is not None and self.exact.isdecimal()


@dataclass(frozen=True)
class Published:
    """A spec with the checks that are made of its solution."""

    name: str
    about: str
    spec: str
    is_own_text: bool
    checks: tuple[Check, ...]


_NEEDED = ("id", "asks", "exact", "source", "source_status")
_OPTIONAL = ("formula", "formula_off_by", "solves_for", "to_reach")
_TERM = ("measure", "of", "at", "state", "times")


def _term(entry: dict[str, Any]) -> Term:
    numerator, _, denominator = entry.get("times", "1").partition("/")
    times = Fraction(numerator) / Fraction(denominator or 1)
    return Term(entry["measure"], entry.get("of"), entry.get("at"), entry.get("state"), times)


def _terms(entry: dict[str, Any]) -> tuple[Term, ...]:
    if "sum" not in entry:
        return (_term(entry),)
    assert not set(entry) & set(_TERM), f"{entry['id']}: a sum stands in place of what is asked"
    unknown = {key for each in entry["sum"] for key in each} - set(_TERM)
    assert not unknown, f"{entry['id']}: unknown keys {unknown}"
    return tuple(map(_term, entry["sum"]))


def _check(entry: dict[str, Any]) -> Check:
    known = {*_NEEDED, *_OPTIONAL, *_TERM, "sum", "plus", "in", "printed", "evaluated", "note"}
    assert set(entry) <= known, f"{entry['id']}: unknown keys {set(entry) - known}"
    assert ("printed" in entry) != ("evaluated" in entry), f"{entry['id']}: one of printed, evaluated"
    assert ("formula" in entry) == ("formula_off_by" in entry), f"{entry['id']}: a formula and what it is off by"
    return Check(
        terms=_terms(entry),
        plus=Fraction(entry.get("plus", "0")),
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
