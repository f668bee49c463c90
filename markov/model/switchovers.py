"""Switchovers: how duty passes to a standby, what an uncovered fault leads to, the switch that does it."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field

from markov.model.durations import MaybeShapedTime, MaybeShapedTimeAboveZero, TimeShape, shape_of
from markov.model.faults import Fault, choices, quote
from markov.model.part import Part
from markov.model.readers import Context, Count, Flag, MaybeRate, MaybeShare, Reader, Reads, read_each
from markov.quantities import Quantity

Outcome = Literal["until_repair", "manual_takeover", "restart", "restart_without_failed", "all_failed", "lost"]

#: Outcomes of an uncovered fault that end after a mean time of their own.
TIMED_OUTCOMES: tuple[Outcome, ...] = ("manual_takeover", "restart", "restart_without_failed")


@dataclass(frozen=True)
class ReadsCoverage(Reader):
    """Reads one share, or a list of them: one for each number of units failed before."""

    label: ClassVar[str] = "share, or list of shares"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        share = Reads("share").json_schema()
        return {"anyOf": [share, {"type": "array", "items": share, "minItems": 1}]}

    def read(self, value: object, context: Context, key: str) -> tuple[Quantity, ...]:
        """See `Reader`."""
        if not isinstance(value, list | tuple):
            return (Reads("share").read(value, context, key),)
        shares: tuple[Quantity, ...] = read_each(Reads("share"), value, context, key, "one share")
        return shares


Coverage = Annotated[tuple[Quantity, ...] | None, ReadsCoverage()]


class Uncovered(Part):
    """What an uncovered fault leads to."""

    kind = "uncovered fault"
    example = "{outcome: manual_takeover, time: 0.75 h}"
    habits: ClassVar[Mapping[str, str]] = {"mean_time": "write `time`", "duration": "write `time`"}

    outcome: Outcome = Field(
        description="`until_repair`: out until a repair leaves enough good units; `manual_takeover`: someone starts "
        "standbys after `time`; `restart`: all good again after `time`; `restart_without_failed`: the good ones are "
        "back after `time`; `all_failed`: the healthy units fail too; `lost`: down for good."
    )
    time: MaybeShapedTimeAboveZero = Field(
        None, description=f"Mean time; needed for {choices(TIMED_OUTCOMES, 'and')}, refused otherwise."
    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        timed = self.outcome in TIMED_OUTCOMES
        if timed and self.time is None and "time" not in unread:
            yield Fault(
                (),
                "`time` is missing",
                f"a mean time for {quote(self.outcome)}",
                "add `time: …`",
                on_key=True,
            )
        if not timed and self.time is not None:
            yield Fault(
                ("time",),
                f"{quote(self.outcome)} with a `time`",
                f"`time` with {choices(TIMED_OUTCOMES)} only",
                "remove it, or choose another outcome",
                on_key=True,
            )

    @property
    def time_shape(self) -> TimeShape | None:
        """Law of `time` where it has a spread."""
        return shape_of(self.time)


class Switch(Part):
    """What passes duty from one unit to another, with faults of its own."""

    kind = "switch"
    example = "{failure_on_demand: 1 %}"
    habits: ClassVar[Mapping[str, str]] = {
        "refusal": "write `failure_on_demand`",
        "start_failure": "write `failure_on_demand`",
        "probability": "write `failure_on_demand`",
        "hidden": "write `latent: true`",
        "detected": "write `latent`",
        "false_operation": "write `false_operation_rate`",
        "spurious_rate": "write `false_operation_rate`",
    }

    failure_on_demand: MaybeShare = Field(
        None, description="Chance that the switch refuses when it is called.", json_schema_extra={"unsaid": "`0`"}
    )
    failure_rate: MaybeRate = Field(
        None, description="Rate at which the switch fails by itself.", json_schema_extra={"unsaid": "never"}
    )
    latent: Flag = Field(False, description="Whether its own faults stay hidden until it is called or tested.")
    repair_time: MaybeShapedTime = Field(
        None,
        description="Mean repair time; needs no crew.",
        json_schema_extra={"unsaid": "never repaired, and a refusal leaves the switch as it was"},
    )
    false_operation_rate: MaybeRate = Field(
        None,
        description="Rate at which it starts a standby that nobody called.",
        json_schema_extra={"unsaid": "never"},
    )

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        faults = ("failure_on_demand", "failure_rate", "false_operation_rate")
        if not set(faults) & set(keys):
            yield cls.missing(*faults)

    @property
    def repair_time_shape(self) -> TimeShape | None:
        """Law of `repair_time` where it has a spread."""
        return shape_of(self.repair_time)

    @property
    def may_hide(self) -> bool:
        """Whether it can be failed without anybody knowing."""
        return self.latent and self.failure_rate is not None and not self.failure_rate.is_zero


class Switchover(Part):
    """How duty passes to a standby."""

    kind = "switchover"
    example = "{coverage: 98 %, time: 20 s}"
    habits: ClassVar[Mapping[str, str]] = {
        "mean_time": "write `time`",
        "duration": "write `time`",
        "outcome": "write `uncovered: {outcome: …}`",
        "probability": "write `coverage`",
    }

    coverage: Coverage = Field(
        None,
        description="Chance that a detected duty fault is covered; in a list, entry i applies when i − 1 units of the "
        "group are failed before the fault, and the last entry repeats.",
        json_schema_extra={"unsaid": "`1`"},
    )
    time: MaybeShapedTime = Field(
        None,
        description="Mean time of a takeover, the place being empty meanwhile.",
        json_schema_extra={"unsaid": "`0 h`"},
    )
    stages: Count = Field(1, description="Stages of equal mean that `time` passes.")
    uncovered: Uncovered | None = Field(
        None,
        description="What an uncovered fault leads to.",
        json_schema_extra={"unsaid": "`{outcome: until_repair}`"},
    )
    switch: Switch | None = Field(
        None,
        description="What passes duty on, with faults of its own.",
        json_schema_extra={"unsaid": "never fails, beyond `coverage`"},
    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.is_said("stages") and self.time_shape is not None:
            yield Fault(
                ("stages",),
                "`stages` beside a `time` with a spread",
                "one of the two: the spread says how many stages there are",
                "remove it",
                on_key=True,
            )

    @property
    def time_shape(self) -> TimeShape | None:
        """Law of `time` where it has a spread."""
        return shape_of(self.time)
