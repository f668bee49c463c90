"""An explanation on paper: as text for a terminal, as JSON for a program."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from markov.documents.explanation import Explanation, Key, Passage, Reason, StateSketch, Term
from markov.documents.sentences import value_with_unit
from markov.documents.tree import Text
from markov.documents.written_places import UNSUPPORTED

_WIDTH = 110


def explanation_text(explanation: Explanation) -> str:
    """Return an explanation as plain text, ending in a newline."""
    return "".join(f"{line}\n" for line in _lines(explanation))


def explanation_json(explanation: Explanation) -> str:
    """Return an explanation as JSON text, one object, ending in a newline."""
    found: dict[str, Any] = {
        "kind": explanation.kind,
        "title": explanation.title,
        "spec_sha256": explanation.sha256,
        "version": explanation.version,
        "text": flat(explanation.text),
        "assumptions": _numbered(explanation.assumptions),
    }
    if explanation.kind == "state":
        found["state"] = _state(explanation.states[0])
        found["keys"] = [_key(key) for key in explanation.keys]
        found["leaving"] = [_passage(each) for each in explanation.leaving]
        found["entering"] = [_passage(each) for each in explanation.entering]
    if explanation.kind == "arrow":
        found["from"], found["to"] = (_state(each) for each in explanation.states)
        found["reasons"] = [_reason(each) for each in explanation.reasons]
    return json.dumps(found, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def flat(text: Text) -> str:
    """Return text without emphasis; what would break a line or steer a terminal is spelled out."""
    return printable("".join(span.text for span in text))


def printable(text: str) -> str:
    """Return text on one line, control characters and marks of direction spelled out."""
    return "".join(
        character if character.isprintable() else character.encode("unicode_escape").decode("ascii")
        for character in text
    )


# ------------------------------------------------------------------------------------------------------------- text


def _lines(explanation: Explanation) -> Iterator[str]:
    yield from _wrapped(flat(explanation.text), "", "")
    for number, reason in enumerate(explanation.reasons, 1):
        yield ""
        if len(explanation.reasons) > 1:
            yield from _wrapped(printable(f"{number}. {reason.cause}"), "", "   ")
        yield from _reason_lines(reason)
    if explanation.kind == "state":
        yield from _passage_lines("Arrows out", explanation.leaving)
        yield from _passage_lines("Arrows in", explanation.entering)
        if explanation.keys:
            yield ""
            yield "Written in the spec"
            for key in explanation.keys:
                yield from _wrapped(f"{_place(key)}", "  ", "    ")
    yield from _assumption_lines(explanation.assumptions)


def _reason_lines(reason: Reason) -> Iterator[str]:
    value = value_with_unit(reason.exact, is_share=reason.is_chance)
    yield "Why this chance" if reason.is_chance else "Why this rate"
    rate = value if value == reason.formula else f"{reason.formula} = {value}"
    when = f" {reason.when}" if reason.when and not reason.is_chance else ""
    yield from _wrapped(printable(f"{rate}{when}"), "  ", "    ")
    if reason.multiple:
        yield from _wrapped(reason.multiple, "  ", "    ")
    if reason.choices > 1:
        yield from _wrapped(f"one of {reason.choices} equally likely results", "  ", "    ")
    for term in reason.terms:
        yield from _term_lines(term)
    if reason.rules:
        yield "What decides where it leads"
        for key in reason.rules:
            yield from _wrapped(_place(key), "  ", "    ")
    if reason.assumptions:
        yield "Choices left unsaid that it rests on"
        for number, text in reason.assumptions:
            yield from _wrapped(printable(f"{number}  {text}"), "  ", "     ")


def _term_lines(term: Term) -> Iterator[str]:
    written = f", written `{term.written}`" if term.written else ""
    value = value_with_unit(term.exact, is_share=term.is_share)
    yield from _wrapped(printable(f"{term.symbol}: {term.meaning} = {value}{written}"), "  ", "    ")
    if term.rule:
        yield from _wrapped(term.rule, "    ", "    ")
    if term.keys:
        yield from _wrapped("; ".join(_place(key) for key in term.keys), "    ", "      ")
    for name, source in term.sources:
        said = f"no source: {UNSUPPORTED}" if source == UNSUPPORTED else f"source: {source}"
        yield from _wrapped(printable(f"{name}, {said}"), "    ", "      ")


def _passage_lines(heading: str, passages: tuple[Passage, ...]) -> Iterator[str]:
    yield ""
    if not passages:
        yield f"{heading}: none"
        return
    yield heading
    for passage in passages:
        total = value_with_unit(passage.exact, is_share=passage.is_chance)
        rate = total if total == passage.formula else f"{passage.formula} = {total}"
        when = f" ({passage.when})" if passage.when and not passage.is_chance else ""
        other = f"{passage.other.number} ({passage.other.name})"
        told = f"{other}: {'chance ' if passage.is_chance else ''}{rate}, {' or '.join(passage.causes)}{when}"
        yield from _wrapped(printable(told), "  ", "    ")


def _assumption_lines(assumptions: tuple[tuple[int, str], ...]) -> Iterator[str]:
    if assumptions:
        yield ""
        yield "Choices left unsaid"
        for number, text in assumptions:
            yield from _wrapped(printable(f"{number}  {text}"), "  ", "     ")


def _place(key: Key) -> str:
    return printable(key.words) + (f", line {key.line}" if key.line is not None else ", not written")


def _wrapped(text: str, first: str, rest: str) -> list[str]:
    return textwrap.wrap(
        text, _WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False, drop_whitespace=True
    ) or [first.rstrip()]


# ------------------------------------------------------------------------------------------------------------- JSON


def _state(state: StateSketch) -> dict[str, Any]:
    return {
        "number": state.number,
        "name": state.name,
        "up": state.up,
        "initial": state.initial,
        "final": state.final,
    }


def _passage(passage: Passage) -> dict[str, Any]:
    return {
        "state": _state(passage.other),
        "when": passage.when or None,
        "formula": passage.formula,
        "value": _number(passage.exact),
        "unit": "1" if passage.is_chance else "1/h",
        "causes": list(passage.causes),
    }


def _reason(reason: Reason) -> dict[str, Any]:
    return {
        "cause": reason.cause,
        "when": reason.when or None,
        "formula": reason.formula,
        "value": _number(reason.exact),
        "unit": "1" if reason.is_chance else "1/h",
        "multiple": reason.multiple or None,
        "equally_likely_results": reason.choices,
        "terms": [
            {
                "symbol": term.symbol,
                "meaning": term.meaning,
                "value": _number(term.exact),
                "unit": "1" if term.is_share else "1/h",
                "written": term.written or None,
                "rule": term.rule or None,
                "keys": [_key(key) for key in term.keys],
                "sources": dict(term.sources),
            }
            for term in reason.terms
        ],
        "rules": [_key(key) for key in reason.rules],
        "assumptions": _numbered(reason.assumptions),
    }


def _key(key: Key) -> dict[str, Any]:
    return {"key": key.words, "line": key.line}


def _numbered(assumptions: tuple[tuple[int, str], ...]) -> list[dict[str, Any]]:
    return [{"number": number, "text": text} for number, text in assumptions]


def _number(exact: Fraction) -> float:
    return float(exact)
