"""Times with a spread of their own, where a mean alone would stand for an exponential time."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Annotated, Any, ClassVar

from pydantic import Field

from markov.model.faults import Fault, quote
from markov.model.part import Part
from markov.model.readers import Context, MaybeCount, MaybeTimeAboveZero, Reader, Reads
from markov.quantities import Quantity

#: Stages that stand in for a fixed time where a spec does not say how many.
FIXED_STAGES = 20
#: Most stages that may stand in for a mean with its standard deviation.
MOST_STAGES = 200

#: Stands in a schema where a time may have a spread; `markov.model.schema` puts the reference in its place.
SPREAD_MARK = {"x-markov": "spread"}


class SpreadTime(Part):
    """A time given by its mean and its standard deviation, or a fixed time; stages stand in for it in the chain."""

    kind = "time with a spread"
    example = "{mean: 24 h, standard_deviation: 12 h}"
    habits: ClassVar[Mapping[str, str]] = {
        "sd": "write `standard_deviation`",
        "sigma": "write `standard_deviation`",
        "deviation": "write `standard_deviation`",
        "time": "write `mean`, or `fixed`",
        "constant": "write `fixed`",
        "exactly": "write `fixed`",
    }

    mean: MaybeTimeAboveZero = Field(None, description="Mean; stands with `standard_deviation`.")
    standard_deviation: MaybeTimeAboveZero = Field(None, description="Standard deviation; stands with `mean`.")
    fixed: MaybeTimeAboveZero = Field(None, description="A time that is always the same, in place of the other two.")
    stages: MaybeCount = Field(
        None,
        description="Stages of equal mean that stand in for a `fixed` time; its spread in the chain is 1 ÷ √stages.",
        json_schema_extra={"unsaid": f"`{FIXED_STAGES}`"},
    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.stages is not None and self.stages > MOST_STAGES:
            found = f"{self.stages:,} stages"
            fix = f"write {MOST_STAGES} or less: the spread is then {100 / MOST_STAGES**0.5:.2g} % of the mean already"
            yield Fault(("stages",), found, f"at most {MOST_STAGES}", fix)
        if self.mean is None or self.standard_deviation is None:
            return
        shape = TimeShape(self.mean, self.standard_deviation, None, False)
        if shape.least_stages > MOST_STAGES:
            found = f"a spread so small that it takes {shape.least_stages:,} stages"
            fix = "write `{fixed: …}` in its place"
            yield Fault(("standard_deviation",), found, f"at most {MOST_STAGES}: 7.1 % of the mean or more", fix)

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        if "fixed" not in keys and not {"mean", "standard_deviation"} & set(keys):
            yield cls.missing("mean", "fixed")
            return
        spread = [key for key in ("mean", "standard_deviation") if key in keys]
        if "fixed" in keys:
            for key in spread:
                found = f"{quote(key)} beside `fixed`"
                yield Fault((key,), found, "`mean` and `standard_deviation`, or `fixed`", "remove one", on_key=True)
            return
        if len(spread) == 1:
            yield cls.missing("standard_deviation" if spread == ["mean"] else "mean")
        if "stages" in keys:
            found = "`stages` beside a mean and its standard deviation"
            fix = "remove it: the spread says how many stages there are"
            yield Fault(("stages",), found, "`stages` with `fixed` only", fix, on_key=True)


@dataclass(frozen=True)
class TimeShape:
    """The law of a time with a spread.

    Attributes
    ----------
    mean : Quantity
    standard_deviation : Quantity or None
        None for a fixed time.
    stages : int or None
        Stages of equal mean that stand in for a fixed time; None where the spread decides.
    is_fixed : bool
    """

    mean: Quantity
    standard_deviation: Quantity | None
    stages: int | None
    is_fixed: bool

    @property
    def squared_variation(self) -> Fraction:
        """Square of standard deviation ÷ mean, exact: that of the stages for a fixed time."""
        if self.standard_deviation is None:
            return Fraction(1, self.stages or FIXED_STAGES)
        return (self.standard_deviation.exact / self.mean.exact) ** 2

    @property
    def least_stages(self) -> int:
        """Fewest stages that can have this spread: 1 ÷ squared variation, rounded up."""
        inverse = 1 / self.squared_variation
        return -(-inverse.numerator // inverse.denominator)


@dataclass(frozen=True)
class ShapedTime(Quantity):
    """The mean of a time that has a spread, as a quantity, with its law."""

    shape: TimeShape


def shape_of(time: Quantity | None) -> TimeShape | None:
    """Return the law of a time that has a spread; None for an exponential one."""
    return time.shape if isinstance(time, ShapedTime) else None


@dataclass(frozen=True)
class ReadsTime(Reader):
    """Reads a mean time, or a mapping that gives the time a spread."""

    above_zero: bool = False
    label: ClassVar[str] = "time, or mapping: time with a spread"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return {"anyOf": [Reads("time").json_schema(), dict(SPREAD_MARK)]}

    def read(self, value: object, context: Context, key: str) -> Quantity:
        """See `Reader`."""
        if not isinstance(value, Mapping):
            time: Quantity = Reads("time", self.above_zero).read(value, context, key)
            return time
        told = SpreadTime.model_validate(value, context=context, by_alias=True, by_name=False)
        mean = told.mean if told.fixed is None else told.fixed
        assert mean is not None  # one of the two is checked while reading
        stages = None if told.fixed is None else told.stages or FIXED_STAGES
        shape = TimeShape(mean, told.standard_deviation, stages, told.fixed is not None)
        return ShapedTime(mean.text, mean.dimension, mean.exact, mean.parameters, mean.expression, shape)


MaybeShapedTime = Annotated[Quantity | None, ReadsTime()]
MaybeShapedTimeAboveZero = Annotated[Quantity | None, ReadsTime(above_zero=True)]
ShapedTimeAboveZero = Annotated[Quantity, ReadsTime(above_zero=True)]
