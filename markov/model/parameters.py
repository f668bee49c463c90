"""Parameters: named values with their source, resolved in any order of reference."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping
from fractions import Fraction
from typing import Annotated, ClassVar, Literal

from pydantic import Field
from pydantic_core import PydanticCustomError

from markov.model.circles import ordered
from markov.model.faults import Fault, quote
from markov.model.part import Part
from markov.model.readers import AnyQuantity, MaybeText, Reads, ReadsCount, as_text
from markov.quantities import Quantity, QuantityError, names, parse_expression, parse_quantity

Form = Literal["error_factor", "failures", "range", "standard_deviation"]


class Uncertainty(Part):
    """How well a parameter is known, in one of four forms."""

    kind = "uncertainty"
    example = "{error_factor: 3}"
    habits: ClassVar[Mapping[str, str]] = {
        "ef": "write `error_factor`",
        "sd": "write `standard_deviation`",
        "sigma": "write `standard_deviation`",
        "min": "write `low`",
        "max": "write `high`",
        "hours": "write `exposure`",
        "time": "write `exposure`",
    }

    error_factor: Annotated[Quantity | None, Reads("number")] = Field(
        None, description="Ratio of the 95 % point to the median of a log-normal spread; above 1."
    )
    failures: Annotated[int | None, ReadsCount(0)] = Field(
        None, description="Number of failures seen; stands with `exposure`."
    )
    exposure: Annotated[Quantity | None, Reads("time", above_zero=True)] = Field(
        None, description="Unit-time over which `failures` were seen."
    )
    low: Annotated[Quantity | None, Reads("any")] = Field(
        None, description="Lower limit of the value (5 % point); stands with `high`."
    )
    high: Annotated[Quantity | None, Reads("any")] = Field(None, description="Upper limit of the value (95 % point).")
    standard_deviation: Annotated[Quantity | None, Reads("any")] = Field(
        None, description="Standard deviation, of the dimension of the value."
    )

    @property
    def form(self) -> Form:
        """Which of the four forms is written."""
        if self.error_factor is not None:
            return "error_factor"
        if self.failures is not None:
            return "failures"
        return "range" if self.low is not None else "standard_deviation"

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        forms = {
            "error_factor": ("error_factor",),
            "failures": ("failures", "exposure"),
            "low": ("low", "high"),
            "standard_deviation": ("standard_deviation",),
        }
        begun = [form for form, parts in forms.items() if any(part in keys for part in parts)]
        if not begun:
            yield cls.missing("error_factor", "failures", "low", "standard_deviation")
        for form in begun[1:]:
            part = next(part for part in forms[form] if part in keys)
            yield Fault((part,), f"{quote(part)} starts a second form", "one form", "remove one of them", on_key=True)
        for form in begun:
            for part in forms[form]:
                if part not in keys:
                    yield cls.missing(part)

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.error_factor is not None and self.error_factor.exact <= 1:
            text = quote(self.error_factor.text)
            yield Fault(("error_factor",), f"{text} is not above 1", "a ratio above 1", "write such as 3")


class Parameter(Part):
    """A named value with its source and its uncertainty."""

    kind = "parameter"
    short_form = "value"
    example = "{value: 5e-6 /h, source: …}"
    habits: ClassVar[Mapping[str, str]] = {"reference": "write `source`", "rate": "write `value`"}

    value: AnyQuantity = Field(description="The value: a rate, a time, a share, a plain number or an expression.")
    source: MaybeText = Field(None, description="Where the value is from; without it every document marks the value.")
    uncertainty: Uncertainty | None = Field(None, description="How well the value is known.")

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        doubt = self.uncertainty
        if doubt is None:
            return
        for key in ("low", "high", "standard_deviation"):
            spread: Quantity | None = getattr(doubt, key)
            if spread is not None and spread.dimension != self.value.dimension:
                yield Fault(
                    ("uncertainty", key),
                    f"{quote(spread.text)} is a {spread.dimension}, the value a {self.value.dimension}",
                    f"a {self.value.dimension} as the value is",
                    "write it in the unit of the value",
                )
                return
        yield from self._spread_faults(doubt)

    def _spread_faults(self, doubt: Uncertainty) -> Iterable[Fault]:
        low, high = doubt.low, doubt.high
        if low is not None and high is not None:
            if low.exact >= high.exact:
                yield Fault(("uncertainty", "high"), "`high` is not above `low`", "low < high", "exchange them")
            elif not low.exact <= self.value.exact <= high.exact:
                yield Fault(
                    ("uncertainty",),
                    f"the value {quote(self.value.text)} lies outside of `low` and `high`",
                    "low ≤ value ≤ high",
                    "correct the value or its limits",
                )
        if doubt.failures is not None and self.value.dimension != "rate":
            yield Fault(
                ("uncertainty", "failures"),
                f"failures over an exposure for a {self.value.dimension}",
                "a rate as the value",
                "use another form, or give the value as a rate",
                on_key=True,
            )
        if self.value.is_zero and doubt.form in ("error_factor", "standard_deviation"):
            yield Fault(("uncertainty",), "a spread around zero", "a value above zero", "remove the uncertainty")


def resolve(raw: object, year: Fraction) -> tuple[dict[str, Quantity], frozenset[str], list[Fault]]:
    """Work out all parameters before anything else is read.

    Parameters
    ----------
    raw : object
        What stands under ``parameters``.
    year : Fraction
        Hours.

    Returns
    -------
    resolved : dict of name to Quantity
    unresolved : frozenset of str
        Parameters with a fault of their own or behind one; the fault of a single value is told where it is read.
    faults : list of Fault
        Circles.
    """
    if not isinstance(raw, Mapping):
        return {}, frozenset(), []
    texts: dict[str, str] = {}
    for name, entry in raw.items():
        value = entry.get("value", "") if isinstance(entry, Mapping) else entry
        try:
            texts[str(name)] = value.text if isinstance(value, Quantity) else as_text(value)
        except PydanticCustomError:
            texts[str(name)] = ""
    uses: dict[str, tuple[str, ...]] = {}
    for name, text in texts.items():
        try:
            uses[name] = names(parse_expression(text, texts, year=year))
        except QuantityError:
            uses[name] = ()
    order, circles = ordered(uses)
    resolved: dict[str, Quantity] = {}
    known = _Known(resolved, texts)
    for name in order:
        if all(used in resolved for used in uses[name]):
            try:
                resolved[name] = parse_quantity(texts[name], parameters=known, year=year)
            except QuantityError:
                continue
    faults = [
        Fault(
            ("parameters", circle[0]),
            f"the parameter stands for itself: {' → '.join([*circle, circle[0]])}",
            "parameters that lead to numbers",
            "write a number in one of them" if len(circle) > 1 else "write its number",
        )
        for circle in circles
    ]
    return resolved, frozenset(texts) - frozenset(resolved), faults


class _Known(Mapping[str, Quantity]):
    """The parameters resolved so far, all others known by name."""

    def __init__(self, resolved: Mapping[str, Quantity], every: Collection[str]) -> None:
        self._resolved = resolved
        self._every = every

    def __contains__(self, name: object) -> bool:
        return name in self._every

    def __getitem__(self, name: str) -> Quantity:
        return self._resolved[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._resolved)

    def __len__(self) -> int:
        return len(self._resolved)
