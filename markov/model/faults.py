"""Faults found while a model is read: how they are raised, collected, worded."""

from __future__ import annotations

import re
from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import NoReturn

from pydantic import ValidationError
from pydantic_core import InitErrorDetails, PydanticCustomError

from markov.quantities import quote

__all__ = ["Fault", "Path", "choices", "gathered", "nearest", "place", "quote", "raise_all", "refuse", "suggest"]

#: Keys and list positions (from 0) that lead from the top of a spec to a value.
Path = tuple[str | int, ...]

_FAULT = "fault"
_SILENT = "silent"
_MOST_CANDIDATES = 400
_LONGEST_COMPARED = 60


@dataclass(frozen=True)
class Fault:
    """One fault by its path in the spec; `on_key` where the key rather than the value is to be pointed at."""

    path: Path
    found: str
    expected: str
    fix: str
    on_key: bool = False

    def under(self, prefix: Path) -> Fault:
        """Return the same fault seen from further up."""
        return Fault(prefix + self.path, self.found, self.expected, self.fix, self.on_key)


def place(path: Path) -> str:
    """Return a path in words: ``units.pump.repair_time``, list entries counted from 1 as in ``targets#2.at``."""
    text = ""
    for step in path:
        text += f"#{step + 1}" if isinstance(step, int) else f".{_shortened(step)}" if text else _shortened(step)
    return text


def _shortened(step: str) -> str:
    return step if step.isprintable() and 0 < len(step) <= 40 else quote(step, longest=40)


def _error(fault: Fault) -> PydanticCustomError:
    context = {"found": fault.found, "expected": fault.expected, "fix": fault.fix, "on_key": fault.on_key}
    return PydanticCustomError(_FAULT, "{found}; {expected}; {fix}", context)


def refuse(found: str, expected: str, fix: str) -> NoReturn:
    """Refuse the value that is being read."""
    raise _error(Fault((), found, expected, fix))


def refuse_silently() -> NoReturn:
    """Give up on a value whose fault is reported elsewhere."""
    raise PydanticCustomError(_SILENT, "reported elsewhere")


def raise_all(faults: Iterable[Fault], silent: Iterable[Path] = ()) -> None:
    """Raise all faults at once, if there are any; `silent` are places of faults that are reported elsewhere."""
    lines = [InitErrorDetails(type=_error(fault), loc=fault.path, input=None) for fault in faults]
    for path in silent:
        lines.append(InitErrorDetails(type=PydanticCustomError(_SILENT, "reported elsewhere"), loc=path, input=None))
    if lines:
        raise ValidationError.from_exception_data("spec", lines)


def gathered(error: ValidationError) -> tuple[list[Fault], list[tuple[str, Path, object]], list[Path]]:
    """Take a validation error apart.

    Returns
    -------
    faults : list of Fault
        What was raised by this package.
    others : list of (type, path, input)
        What the validation library found by itself, to be worded by the caller.
    silent : list of Path
        Where something was given up because of a fault that is reported elsewhere.
    """
    faults: list[Fault] = []
    others: list[tuple[str, Path, object]] = []
    silent: list[Path] = []
    for line in error.errors(include_url=False):
        path, on_key = tuple(line["loc"]), False
        if path and path[-1] == "[key]":
            path, on_key = path[:-1], True
        if line["type"] == _FAULT:
            context = line["ctx"]
            faults.append(
                Fault(path, context["found"], context["expected"], context["fix"], on_key or context["on_key"])
            )
        elif line["type"] == _SILENT:
            silent.append(path)
        elif line["type"] in ("assertion_error", "value_error"):
            raise RuntimeError(f"the check of {place(path)} failed itself") from line["ctx"]["error"]
        else:
            others.append((line["type"], path, line["input"]))
    return faults, others, silent


def nearest(word: str, candidates: Collection[str]) -> str | None:
    """Return the candidate that `word` most likely is a misspelling of."""
    if not candidates or len(word) > _LONGEST_COMPARED:
        return None
    if len(candidates) > _MOST_CANDIDATES:
        candidates = [name for name in candidates if abs(len(name) - len(word)) <= 2 and name[:1] == word[:1]]
    return _nearest(word, tuple(sorted(candidates)[:_MOST_CANDIDATES]))


@lru_cache(maxsize=1024)
def _nearest(word: str, candidates: tuple[str, ...]) -> str | None:
    from difflib import get_close_matches

    by_plain: dict[str, str] = {}
    for name in candidates:
        by_plain.setdefault(_comparable(name), name)
    plain = _comparable(word)
    if plain not in by_plain and sum(plain in each for each in by_plain) > 1:
        return None  # part of several: a guess between `cold_standby` and `hot_standby` would change the numbers
    close = get_close_matches(plain, list(by_plain), n=1, cutoff=0.72)
    return by_plain[close[0]] if close else None


def _comparable(text: str) -> str:
    return re.sub(r"[\s_.-]+", "_", text).lower()


def suggest(word: str, candidates: Collection[str], otherwise: str) -> str:
    """Return a fix: the nearest candidate if there is one, else `otherwise`."""
    near = nearest(word, candidates)
    return f"write {quote(near)}" if near is not None else otherwise


def choices(words: Sequence[str], joint: str = "or", most: int = 12) -> str:
    """Return words as a list in a sentence."""
    if not words:
        return "none"
    shown = [quote(word, longest=40) for word in words[:most]]
    if len(words) > most:
        shown.append(f"{len(words) - most} more")
    return shown[0] if len(shown) == 1 else ", ".join(shown[:-1]) + f" {joint} " + shown[-1]
