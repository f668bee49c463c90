"""Units: what fails and what is repaired."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from fractions import Fraction
from typing import Any, ClassVar

from pydantic import ConfigDict, Field

from markov.model.faults import Fault, quote
from markov.model.part import Part, at_most_one, exactly_one
from markov.model.readers import Count, MaybeRate, MaybeShare, MaybeTime, MaybeTimeAboveZero
from markov.quantities import Quantity

_ONE_OF_FAILURE: dict[str, Any] = {
    "oneOf": [{"required": ["failure_rate"]}, {"required": ["mean_time_to_failure"]}],
    "not": {"required": ["repair_time", "repair_rate"]},
}


class Unit(Part):
    """A kind of equipment: how it fails, how it is repaired."""

    model_config = ConfigDict(json_schema_extra=_ONE_OF_FAILURE)

    kind = "unit"
    example = "{failure_rate: 5e-6 /h, repair_time: 24 h}"
    unbuilt: ClassVar[Mapping[str, str]] = {
        "revealed_by": "hidden faults",
        "failure_modes": "failure modes",
        "cost": "cost",
        "mass": "mass",
        "power": "power",
    }
    habits: ClassVar[Mapping[str, str]] = {
        "mtbf": "write `mean_time_to_failure`, and the mean repair as `repair_time`",
        "mttf": "write `mean_time_to_failure`",
        "mttr": "write `repair_time`",
        "mdt": "write `repair_time`, and what passes before the repair begins as `logistic_delay`",
        "lambda": "write `failure_rate`",
        "mu": "write `repair_rate`",
        "rate": "write `failure_rate`",
        "fit": "write `failure_rate: … FIT`",
        "repair": "write `repair_time` or `repair_rate`",
        "down_time": "write `repair_time`",
        "delay": "write `logistic_delay`",
        "stages": "write `repair_stages`",
        "count": "write the count in the group: `members: [{unit: …, count: …}]`",
        "coverage": "write `coverage` in the group",
        "dormancy_factor": "write `dormancy_factor` in the group",
        "redundancy": "write `redundancy` in the group",
    }

    failure_rate: MaybeRate = Field(
        None, description="Failure rate while carrying duty; zero means never. Exactly one of this and the next."
    )
    mean_time_to_failure: MaybeTimeAboveZero = Field(
        None, description="Mean time to failure while carrying duty, in place of `failure_rate`."
    )
    repair_time: MaybeTime = Field(
        None,
        description="Mean repair time; `0 h` means renewed at once.",
        json_schema_extra={"unsaid": "never repaired, unless `repair_rate` is written"},
    )
    repair_rate: MaybeRate = Field(None, description="Repair rate, in place of `repair_time`; zero means never.")
    repair_stages: Count = Field(1, description="Stages of equal mean that a repair passes (Erlang).")
    logistic_delay: MaybeTime = Field(
        None,
        description="Mean time before the crew is called; holds no crew and does not count as waiting.",
        json_schema_extra={"unsaid": "none"},
    )
    start_failure: MaybeShare = Field(
        None, description="Chance that a start attempt fails.", json_schema_extra={"unsaid": "`0`"}
    )
    detected: MaybeShare = Field(
        None,
        description="Share of faults that is known at once; only 100 % is built yet.",
        json_schema_extra={"unsaid": "`100 %`"},
    )
    capacity: MaybeShare = Field(
        None,
        description="Share of the group's function that one unit delivers.",
        json_schema_extra={"unsaid": "`1` ÷ `required`"},
    )

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        yield from exactly_one(cls, keys, "failure_rate", "mean_time_to_failure")
        yield from at_most_one(cls, keys, "repair_time", "repair_rate")
        if not {"repair_time", "repair_rate"} & set(keys):
            for key in ("repair_stages", "logistic_delay"):
                if key in keys:
                    yield Fault(
                        (key,),
                        f"{quote(key)} for a unit that is never repaired",
                        "`repair_time` or `repair_rate` beside it",
                        f"add one of them, or remove {quote(key)}",
                        on_key=True,
                    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.repaired_at_once and self.logistic_delay is not None and not self.logistic_delay.is_zero:
            yield Fault(
                ("logistic_delay",),
                "a `logistic_delay` for a unit that is renewed at once (`repair_time: 0 h`)",
                "a repair time above zero beside it",
                "give a `repair_time`, or remove `logistic_delay`",
                on_key=True,
            )
        if self.detected is not None and self.detected.exact != 1:
            yield Fault(
                ("detected",),
                f"hidden faults (`detected: {self.detected.text}`) are not built yet",
                "`detected: 100 %`",
                "remove it; a number without hidden faults would be for another plant",
            )

    @property
    def failure(self) -> Quantity:
        """The failure rate or the mean time to failure, whichever is written."""
        given = self.failure_rate if self.failure_rate is not None else self.mean_time_to_failure
        assert given is not None  # exactly one of the two is checked while reading
        return given

    @property
    def failure_hourly(self) -> Fraction:
        """Failure rate on duty, per hour, exact."""
        failure = self.failure
        return failure.exact if failure.dimension == "rate" else 1 / failure.exact

    @property
    def repairable(self) -> bool:
        """Whether a repair is written that ever ends."""
        if self.repair_rate is not None:
            return not self.repair_rate.is_zero
        return self.repair_time is not None

    @property
    def repaired_at_once(self) -> bool:
        """Whether a fault is repaired in the moment it arises."""
        return self.repair_time is not None and self.repair_time.is_zero

    @property
    def repair_hourly(self) -> Fraction:
        """One divided by the mean repair time, per hour, exact; for units whose repair takes time."""
        if self.repair_rate is not None:
            return self.repair_rate.exact
        if self.repair_time is None or self.repair_time.is_zero:
            raise ValueError("the unit has no repair that takes time")
        return 1 / self.repair_time.exact
