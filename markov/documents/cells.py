"""How names, numbers and references stand in the text of a report."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

from markov.documents.tree import Row, Span, Text, plain
from markov.output.wording import hours_words, subject_words, timing_words, unit_words, value_words
from markov.quantities import Quantity
from markov.results import Result, TargetResult

NONE = "—"

_UNITS = {"rate": "/h", "time": "h", "share": "1"}


def row(*cells: str | Text, anchor: str = "") -> Row:
    """Return a row of a table; plain words stand for themselves."""
    return Row(tuple(plain(cell) if isinstance(cell, str) else cell for cell in cells), anchor)


def code(text: str) -> Text:
    """Return a name, key or formula as written."""
    return (Span(text, "code"),)


def strong(text: str) -> Text:
    """Return emphasised words."""
    return (Span(text, "strong"),)


def link(target: str, text: str = "") -> Text:
    """Return a reference; without words of its own it gets the number of what it leads to."""
    return (Span(text, "link", target),)


def joined(parts: Iterable[Text], separator: str = ", ", nothing: str = NONE) -> Text:
    """Return texts one after the other; `nothing` where there are none."""
    found: list[Span] = []
    for part in parts:
        if found:
            found.append(Span(separator))
        found += part
    return tuple(found) or plain(nothing)


def linked_numbers(prefix: str, numbers: Iterable[int]) -> Text:
    """Return numbers as references to the anchors ``prefix-number``."""
    return joined(link(f"{prefix}-{number}", str(number)) for number in numbers)


def counted(number: int, word: str, several: str = "") -> str:
    """Return a number with its noun: ``1 state``, ``1,200 states``."""
    return f"{number:,} {word if number == 1 else several or f'{word}s'}"


def listed(words: Sequence[str]) -> str:
    """Return words as an enumeration: ``a, b and c``."""
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}" if words else NONE


def exact_words(value: Fraction, digits: int = 6) -> str:
    """Return an exact number with a few digits."""
    return value_words("", float(value), digits)


def every_digit(value: Fraction | float | None) -> str:
    """Return a number with all digits that its float has; nothing where there is none."""
    return "" if value is None else repr(float(value))


def dimension_unit(quantity: Quantity) -> str:
    """Return the unit of measure of a quantity once it is reckoned in hours: ``/h``, ``h``, ``1``."""
    return _UNITS[quantity.dimension]


def quantity_words(quantity: Quantity) -> str:
    """Return a quantity as written, with its value where parameters stand in it: ``interval (720 h)``."""
    if not quantity.parameters:
        return quantity.text
    unit = dimension_unit(quantity)
    value = exact_words(quantity.exact)
    return f"{quantity.text} ({value}{'' if unit == '1' else unit if unit == '/h' else f' {unit}'})"


def result_words(result: Result) -> str:
    """Return what a result answers: ``unreliability of pumps, at 8 760 h``."""
    words = subject_words(result)
    timing = timing_words(result)
    return f"{words}, {timing}" if timing else words


def result_value(result: Result) -> str:
    """Return the value of a result with its unit of measure."""
    if result.value is None:
        return NONE
    value, unit = value_words(result.measure, result.value), result_unit(result)
    return value if unit == "1" else f"{value}{unit}" if unit.startswith("/") else f"{value} {unit}"


def result_unit(result: Result) -> str:
    """Return the unit of measure of a result; 1 for a plain number."""
    return unit_words(result.unit) or "1"


def limit_words(target: TargetResult) -> str:
    """Return what a target asks for: ``at least 0.9998``."""
    return f"{target.direction.replace('_', ' ')} {target.limit_text}"


def verdict(word: str) -> Text:
    """Return a verdict by its fixed name, as words."""
    return (Span(word.replace("_", " "), "verdict"),)


def hours(value: Fraction | None) -> str:
    """Return a time in hours."""
    return hours_words(value)
