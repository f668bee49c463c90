"""Load sharing: how the failure rate of a unit follows from the number of units on duty."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import Decimal, localcontext
from fractions import Fraction
from typing import Annotated, Any, ClassVar

from pydantic_core import PydanticCustomError

from markov.model.faults import Fault, Path, quote, raise_all, refuse
from markov.model.part import describe
from markov.model.readers import Context, Reader, Reads, ReadsCount
from markov.quantities import Quantity

_FORMS = "a factor for each number of units on duty, or an exponent"
_EXAMPLE = "write `{2: 1, 1: 1.8}` or `{exponent: 1.5}`"
#: Digits of a power that is no fraction; far beyond those of any solution.
_DIGITS = 80
#: Largest exponent that is worked out.
LARGEST_EXPONENT = 100


@dataclass(frozen=True)
class LoadSharing:
    """Factor on the failure rate of a unit on duty, by the number of units on duty.

    Attributes
    ----------
    table : mapping of int to Quantity
        Units on duty -> factor; empty where an exponent is given.
    exponent : Quantity or None
    """

    table: Mapping[int, Quantity] = field(default_factory=dict)
    exponent: Quantity | None = None

    def factor(self, on_duty: int, places: int) -> Fraction:
        """Return the factor while `on_duty` of `places` units carry duty.

        Exact, save for powers with a broken exponent, which are right to 80 digits.
        """
        if self.exponent is None:
            return self.table[on_duty].exact
        base, power = Fraction(places, on_duty), self.exponent.exact
        if power.denominator == 1:
            return base ** int(power)
        with localcontext() as context:
            context.prec = _DIGITS
            logarithm = (Decimal(base.numerator) / Decimal(base.denominator)).ln()
            return Fraction((logarithm * Decimal(power.numerator) / Decimal(power.denominator)).exp())


@dataclass(frozen=True)
class ReadsLoadSharing(Reader):
    """Reads factors by number of units on duty, or an exponent."""

    label: ClassVar[str] = "mapping: factors by units on duty, or `exponent`"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        number = Reads("number").json_schema()
        return {
            "anyOf": [
                {
                    "type": "object",
                    "properties": {"exponent": {**number, "description": "Power of `on_duty` ÷ units on duty."}},
                    "required": ["exponent"],
                    "additionalProperties": False,
                },
                {
                    "type": "object",
                    "patternProperties": {"^[1-9][0-9]*$": number},
                    "additionalProperties": False,
                    "minProperties": 1,
                },
            ]
        }

    def read(self, value: object, context: Context, key: str) -> LoadSharing:
        """See `Reader`."""
        if isinstance(value, LoadSharing):
            return value
        if not isinstance(value, Mapping) or not value:
            refuse("an empty mapping stands here" if isinstance(value, Mapping) else describe(value), _FORMS, _EXAMPLE)
        faults: list[Fault] = []
        silent: list[Path] = []
        table: dict[int, Quantity] = {}
        exponent: Quantity | None = None
        for written, each in value.items():
            name = str(written)
            try:
                factor: Quantity = Reads("number").read(each, context, key)
                if name == "exponent":
                    exponent = factor
                    continue
            except PydanticCustomError as error:
                _note(error, (name,), faults, silent)
            if name == "exponent":
                continue
            try:
                number: int = ReadsCount().read(name, context, key)
            except PydanticCustomError:
                found = f"{quote(name)} is no number of units"
                faults.append(Fault((name,), found, _FORMS, _EXAMPLE, on_key=True))
                continue
            if number in table:
                faults.append(
                    Fault((name,), f"{number} units stand twice", "each number once", "remove one", on_key=True)
                )
            if not faults and not silent:
                table[number] = factor
        if exponent is not None and len(value) > 1:
            found = "`exponent` beside factors"
            faults.append(Fault(("exponent",), found, "one of the two", "remove one", on_key=True))
        if exponent is not None and exponent.exact > LARGEST_EXPONENT:
            found = f"{quote(exponent.text)} is out of range"
            faults.append(Fault(("exponent",), found, f"an exponent up to {LARGEST_EXPONENT}", "lower it"))
        raise_all(faults, silent)
        return LoadSharing(table, exponent)


def _note(error: PydanticCustomError, path: Path, faults: list[Fault], silent: list[Path]) -> None:
    told = error.context
    if told:
        faults.append(Fault(path, told["found"], told["expected"], told["fix"]))
    else:
        silent.append(path)


MaybeLoadSharing = Annotated[LoadSharing | None, ReadsLoadSharing()]
