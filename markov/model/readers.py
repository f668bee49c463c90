"""Annotations that tell how the text behind each key is read as a value."""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from decimal import Decimal
from fractions import Fraction
from numbers import Integral, Real
from typing import Annotated, Any, ClassVar, Literal, NoReturn

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from markov.model.faults import Fault, Path, nearest, quote, raise_all, refuse, refuse_silently
from markov.quantities import COMMON_YEAR, Dimension, Quantity, QuantityError, parse_expression, parse_quantity
from markov.quantities import names as names_in

#: Longest name, in characters.
LONGEST_NAME = 120
#: Largest count of anything.
LARGEST_COUNT = 10**6


@dataclass(frozen=True)
class Context:
    """What the reading of one value needs to know of the rest of the spec.

    Attributes
    ----------
    parameters : mapping of name to Quantity
        Those that could be resolved.
    unresolved : collection of str
        Parameters that have a fault of their own; what uses them is not reported again.
    year : Fraction
        Hours.
    units, groups : collection of str
        Names only.
    """

    parameters: Mapping[str, Quantity] = field(default_factory=dict)
    unresolved: Collection[str] = frozenset()
    year: Fraction = COMMON_YEAR
    units: Collection[str] = frozenset()
    groups: Collection[str] = frozenset()

    @property
    def known(self) -> set[str]:
        """Names of all parameters, resolved or not."""
        return {*self.parameters, *self.unresolved}


_NO_CONTEXT = Context()


def context_of(info: core_schema.ValidationInfo[Any]) -> Context:
    """Return the context of a validation, or an empty one."""
    return info.context if isinstance(info.context, Context) else _NO_CONTEXT


def as_text(value: object) -> str:
    """Return a scalar as the text that would stand in a spec; refuse everything else.

    Specs hold text only.  Numbers come from the Python interface; floats are taken at their shortest decimal form.
    """
    match value:
        case str():
            return value.strip()
        case Mapping():
            refuse("a mapping stands here", "a single value", "write the value alone")
        case list() | tuple():
            refuse("a list stands here", "a single value", "write the value alone")
        case bool():
            return "true" if value else "false"
        case None:
            return "null"
        case Fraction() | Decimal():
            return str(value)
        case Integral():
            return str(int(value))
        case Real():
            return repr(float(value))
    refuse("something else than text stands here", "text or a number", "write it as text")


class Reader:
    """How one kind of value is read, and what an editor is told about it."""

    label: ClassVar[str]

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(
            self._read, serialization=core_schema.plain_serializer_function_ser_schema(_written)
        )

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        return self.json_schema()

    def _read(self, value: Any, info: core_schema.ValidationInfo[Any]) -> Any:
        return self.read(value, context_of(info), info.field_name or "")

    def read(self, value: object, context: Context, key: str) -> Any:
        """Return the value that is meant, or refuse it."""
        raise NotImplementedError

    def json_schema(self) -> dict[str, Any]:
        """Return the JSON Schema of the text."""
        raise NotImplementedError


def _written(value: Any) -> Any:
    if isinstance(value, tuple):
        return [_written(each) for each in value]
    return value if value is None or isinstance(value, bool | int) else str(value)


# ---------------------------------------------------------------------------------------------------- quantities

_COUNTERPARTS = {
    "failure_rate": "mean_time_to_failure",
    "mean_time_to_failure": "failure_rate",
    "repair_time": "repair_rate",
    "repair_rate": "repair_time",
    "rate": "mean_time",
    "mean_time": "rate",
}
_EXAMPLES = {"time": "24 h", "rate": "5e-6 /h", "share": "0.95 or 95 %"}
_ARTICLES = {"time": "a time", "rate": "a rate", "share": "a share"}
_WRONG_NUMBER_PATTERN = r"^(?!\s*[+-]?0\d)(?!\s*[\d.]+[,:]\d)\s*\S"

Wanted = Literal["time", "rate", "share", "number", "any"]


@dataclass(frozen=True)
class Reads(Reader):
    """Reads a quantity of one dimension; a ``share`` lies between 0 and 1, a ``number`` is any plain number."""

    wanted: Wanted
    above_zero: bool = False
    year_known: bool = True

    @property
    def label(self) -> str:  # type: ignore[override]
        """What the reference calls it."""
        return {"any": "quantity", "number": "plain number"}.get(self.wanted, self.wanted)

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        if self.wanted in ("time", "rate"):
            return {"type": "string", "pattern": _WRONG_NUMBER_PATTERN, "examples": [_EXAMPLES[self.wanted]]}
        schema: dict[str, Any] = {"type": ["number", "string"], "pattern": _WRONG_NUMBER_PATTERN, "minimum": 0}
        if self.wanted == "share":
            schema |= {"maximum": 1, "examples": [0.95, "95 %"]}
        return schema

    def read(self, value: object, context: Context, key: str) -> Quantity:
        """See `Reader`."""
        quantity = value if isinstance(value, Quantity) else self._parse(as_text(value), context)
        if self.wanted != "any":
            self._check(quantity, key)
        if self.above_zero and quantity.is_zero:
            refuse(f"{quote(quantity.text)} is zero", f"{self.label} above zero", "write the value that is meant")
        return quantity

    def _parse(self, text: str, context: Context) -> Quantity:
        year = context.year if self.year_known else None
        try:
            if context.unresolved:
                used = names_in(parse_expression(text, context.known, year=year))
                if not set(used).isdisjoint(context.unresolved):
                    refuse_silently()
            if not self.year_known:
                return self._parse_year(text, context)
            return parse_quantity(text, parameters=context.parameters, year=year)
        except QuantityError as error:
            self._refuse(error, text, context)

    def _parse_year(self, text: str, context: Context) -> Quantity:
        if text in context.parameters:
            refuse(
                f"{quote(text)} is a parameter, and parameters are read with the length of the year",
                "a time written out",
                "write 8760 h or 8766 h",
            )
        return parse_quantity(text, year=None)

    def _refuse(self, error: QuantityError, text: str, context: Context) -> NoReturn:
        fix = error.fix
        if error.unknown:
            near = nearest(error.unknown, context.known)
            if near is not None:
                fix = f"write {quote(near)}"
            elif self.wanted in _EXAMPLES and text == error.unknown:
                refuse(
                    error.found,
                    f"{_ARTICLES[self.wanted]} such as {_EXAMPLES[self.wanted]}, or a parameter's name",
                    fix,
                )
        refuse(error.found, error.expected, fix)

    def _check(self, quantity: Quantity, key: str) -> None:
        dimension: Dimension = quantity.dimension
        wanted = "share" if self.wanted == "number" else self.wanted
        if dimension != wanted:
            self._refuse_dimension(quantity, key)
        if self.wanted == "share" and quantity.exact > 1:
            fix = "write a number from 0 to 1"
            if quantity.exact <= 100 and re.fullmatch(r"[0-9.]+", quantity.text):
                fix = f"write {quantity.text} % or {_decimal(quantity.exact / 100)}"
            refuse(f"{quote(quantity.text)} is more than 1", "a share from 0 to 1, or 0 % to 100 %", fix)

    def _refuse_dimension(self, quantity: Quantity, key: str) -> NoReturn:
        text = quote(quantity.text)
        if self.wanted in ("share", "number"):
            kind = "a share from 0 to 1" if self.wanted == "share" else "a plain number"
            refuse(f"{text} is {_ARTICLES[quantity.dimension]}", kind, "write the number without a unit of measure")
        expected = f"{_ARTICLES[self.wanted]} such as {_EXAMPLES[self.wanted]}"
        if quantity.dimension == "share":
            fix = f"write `{quantity.text} h`" if self.wanted == "time" else f"write `{quantity.text} /h`"
            if quantity.name is not None:
                refuse(f"{text} is a plain number, without a unit of measure", expected, "give the parameter a unit")
            refuse(f"{text} has no unit of measure", expected, f"{fix}, or another unit if that is meant")
        fix = "write the unit that is meant"
        if key in _COUNTERPARTS:
            fix = f"use the key {quote(_COUNTERPARTS[key])}, or write {_ARTICLES[self.wanted]}"
        refuse(f"{text} is {_ARTICLES[quantity.dimension]}", expected, fix)


def _decimal(value: Fraction) -> str:
    return format(float(value), ".12g")


# ------------------------------------------------------------------------------------------------ plain values


@dataclass(frozen=True)
class ReadsCount(Reader):
    """Reads a whole number of at least `least`."""

    label: ClassVar[str] = "whole number"
    least: int = 1

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return {"type": "integer", "minimum": self.least}

    def read(self, value: object, context: Context, key: str) -> int:
        """See `Reader`."""
        text = as_text(value)
        expected = f"a whole number of at least {self.least}"
        try:
            quantity = parse_quantity(text)
        except QuantityError as error:
            refuse(error.found if not error.unknown else f"{quote(text)} is not a number", expected, "write the number")
        if quantity.dimension != "share" or "%" in text or quantity.exact.denominator != 1:
            refuse(f"{quote(text)} is not a whole number", expected, "write it without a unit or decimals")
        if not self.least <= quantity.exact <= LARGEST_COUNT:
            bound = f"write {self.least} or more" if quantity.exact < self.least else f"write {LARGEST_COUNT} or less"
            refuse(f"{quote(text)} is out of range", expected, bound)
        return int(quantity.exact)


@dataclass(frozen=True)
class ReadsFlag(Reader):
    """Reads ``true`` or ``false``."""

    label: ClassVar[str] = "`true` or `false`"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return {"type": "boolean"}

    def read(self, value: object, context: Context, key: str) -> bool:
        """See `Reader`."""
        text = as_text(value)
        if text in ("true", "false"):
            return text == "true"
        meant = {"yes": "true", "on": "true", "y": "true", "1": "true", "no": "false", "off": "false", "n": "false"}
        word = meant.get(text.lower(), text.lower() if text.lower() in ("true", "false") else "")
        refuse(f"{quote(text)} is neither", "`true` or `false`", f"write {word}" if word else "write true or false")


@dataclass(frozen=True)
class ReadsText(Reader):
    """Reads text of any kind."""

    label: ClassVar[str] = "text"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return {"type": ["string", "number", "integer", "boolean"]}

    def read(self, value: object, context: Context, key: str) -> str:
        """See `Reader`."""
        text = "" if value is None else as_text(value)
        if not text:
            refuse("nothing is written here", "text", "write it, or take the key out")
        return text


@dataclass(frozen=True)
class ReadsName(Reader):
    """Reads the name of something in the spec; the spelling is kept."""

    label: ClassVar[str] = "name"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return {"type": ["string", "number", "integer", "boolean"]}

    def read(self, value: object, context: Context, key: str) -> str:
        """See `Reader`."""
        text = "" if value is None else as_text(value)
        if not text:
            refuse("an empty name", "a name", "write one")
        if len(text) > LONGEST_NAME:
            refuse(f"a name of {len(text)} characters", f"at most {LONGEST_NAME}", "shorten it")
        if not text.isprintable():
            refuse(f"{quote(text)} holds a line break or a control character", "a name on one line", "remove it")
        return text


@dataclass(frozen=True)
class ReadsNames(Reader):
    """Reads names in a list, or one name alone."""

    label: ClassVar[str] = "name, or list of names"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        name = ReadsName().json_schema()
        return {"anyOf": [name, {"type": "array", "items": name, "minItems": 1}]}

    def read(self, value: object, context: Context, key: str) -> tuple[str, ...]:
        """See `Reader`."""
        if not isinstance(value, list | tuple):
            return (ReadsName().read(value, context, key),)
        read: tuple[str, ...] = read_each(ReadsName(), value, context, key, "one name")
        return read


def read_each(reader: Reader, values: list[Any] | tuple[Any, ...], context: Context, key: str, least: str) -> Any:
    """Read the entries of a list, all their faults at once; `least` says what an empty list lacks."""
    good: list[Any] = []
    faults: list[Fault] = []
    silent: list[Path] = []
    for position, each in enumerate(values):
        try:
            good.append(reader.read(each, context, key))
        except PydanticCustomError as error:
            told = error.context
            if told:
                faults.append(Fault((position,), told["found"], told["expected"], told["fix"]))
            else:
                silent.append((position,))
    if not values:
        faults.append(Fault((), "an empty list", f"at least {least}", "write one, or take the key out"))
    raise_all(faults, silent)
    return tuple(good)


Time = Annotated[Quantity, Reads("time")]
TimeAboveZero = Annotated[Quantity, Reads("time", above_zero=True)]
HourlyRate = Annotated[Quantity, Reads("rate")]
Share = Annotated[Quantity, Reads("share")]
ShareAboveZero = Annotated[Quantity, Reads("share", above_zero=True)]
Number = Annotated[Quantity, Reads("number")]
AnyQuantity = Annotated[Quantity, Reads("any")]
Count = Annotated[int, ReadsCount()]
CountFromZero = Annotated[int, ReadsCount(0)]
Flag = Annotated[bool, ReadsFlag()]
Text = Annotated[str, ReadsText()]
KeyName = Annotated[str, ReadsName()]
Names = Annotated[tuple[str, ...], ReadsNames()]

# Keys that may be left out.  The annotation stands around the whole union, so that a written `null` is refused.
MaybeTime = Annotated[Quantity | None, Reads("time")]
MaybeTimeAboveZero = Annotated[Quantity | None, Reads("time", above_zero=True)]
MaybeRate = Annotated[Quantity | None, Reads("rate")]
MaybeShare = Annotated[Quantity | None, Reads("share")]
MaybeNumber = Annotated[Quantity | None, Reads("number")]
MaybeCount = Annotated[int | None, ReadsCount()]
MaybeText = Annotated[str | None, ReadsText()]
MaybeName = Annotated[str | None, ReadsName()]
