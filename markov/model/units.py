"""Units: what fails and what is repaired."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from fractions import Fraction
from typing import Annotated, Any, ClassVar, Literal

from pydantic import ConfigDict, Field

from markov.model.durations import MaybeShapedTime, TimeShape, shape_of
from markov.model.failure_modes import FailureMode, Mode
from markov.model.faults import Fault, quote
from markov.model.part import Part, at_most_one, exactly_one
from markov.model.readers import Count, KeyName, MaybeNumber, MaybeRate, MaybeShare, MaybeTimeAboveZero, Reads
from markov.quantities import Quantity

Revealer = Literal["test", "demand", "system_failure"]

_ONE_OF_FAILURE: dict[str, Any] = {
    "oneOf": [{"required": ["failure_rate"]}, {"required": ["mean_time_to_failure"]}],
    "not": {"required": ["repair_time", "repair_rate"]},
}


class Unit(Part):
    """A kind of equipment: how it fails, how it is repaired."""

    model_config = ConfigDict(json_schema_extra=_ONE_OF_FAILURE)

    kind = "unit"
    example = "{failure_rate: 5e-6 /h, repair_time: 24 h}"
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
        "diagnostic_coverage": "write `detected`",
        "dc": "write `detected`",
        "modes": "write `failure_modes`",
        "price": "write `cost`",
        "weight": "write `mass`",
    }

    failure_rate: MaybeRate = Field(
        None, description="Failure rate while carrying duty; zero means never. Exactly one of this and the next."
    )
    mean_time_to_failure: MaybeTimeAboveZero = Field(
        None, description="Mean time to failure while carrying duty, in place of `failure_rate`."
    )
    repair_time: MaybeShapedTime = Field(
        None,
        description="Mean repair time; `0 h` means renewed at once.",
        json_schema_extra={"unsaid": "never repaired, unless `repair_rate` is written"},
    )
    repair_rate: MaybeRate = Field(None, description="Repair rate, in place of `repair_time`; zero means never.")
    repair_stages: Count = Field(1, description="Stages of equal mean that a repair passes (Erlang).")
    repair_success: Annotated[Quantity | None, Reads("share", above_zero=True)] = Field(
        None,
        description="Chance that a repair succeeds; one that does not begins again from its first stage.",
        json_schema_extra={"unsaid": "`1`"},
    )
    logistic_delay: MaybeShapedTime = Field(
        None,
        description="Mean time before the crew is called; holds no crew and does not count as waiting.",
        json_schema_extra={"unsaid": "none"},
    )
    start_failure: MaybeShare = Field(
        None, description="Chance that a start attempt fails.", json_schema_extra={"unsaid": "`0`"}
    )
    detected: MaybeShare = Field(
        None,
        description="Share of faults that is known at once; the others are hidden.",
        json_schema_extra={"unsaid": "`100 %`"},
    )
    revealed_by: tuple[Revealer, ...] = Field(
        ("test",),
        description="What reveals a hidden fault: `demand` (every one), `system_failure`; a test that names the unit "
        "does so in any case.",
        json_schema_extra={"unsaid": "`[test]`"},
    )
    failure_modes: dict[KeyName, FailureMode] = Field(
        default_factory=dict,
        description="Ways in which the unit can fail, by name; their shares sum to 1.",
        json_schema_extra={"unsaid": "one mode that fails to act"},
    )
    capacity: MaybeShare = Field(
        None,
        description="Share of the group's function that one unit delivers.",
        json_schema_extra={"unsaid": "`1` ÷ `required`"},
    )
    cost: MaybeNumber = Field(None, description="Cost of one item, in a currency of your choice: changes no measure.")
    mass: MaybeNumber = Field(None, description="Mass of one item, in a unit of your choice; changes no measure.")
    power: MaybeNumber = Field(None, description="Power of one item, in a unit of your choice; changes no measure.")

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        yield from exactly_one(cls, keys, "failure_rate", "mean_time_to_failure")
        yield from at_most_one(cls, keys, "repair_time", "repair_rate")
        if not {"repair_time", "repair_rate", "failure_modes"} & set(keys):
            for key in ("repair_stages", "repair_success"):
                if key in keys:
                    yield _without_repair(key)

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        yield from self._repair_faults()
        if "failure_modes" not in unread:
            yield from self._mode_faults()
        if not self.revealed_by:
            yield Fault(("revealed_by",), "an empty list", "`test`, `demand`, `system_failure`", "take the key out")
        for position, each in enumerate(self.revealed_by):
            if each in self.revealed_by[:position]:
                yield Fault(("revealed_by", position), f"{quote(each)} stands twice", "each once", "remove one of them")

    def _repair_faults(self) -> Iterable[Fault]:
        modes = self.modes()
        delayed = self.logistic_delay is not None and not self.logistic_delay.is_zero
        if delayed and all(mode.repaired_at_once for mode in modes):
            yield Fault(
                ("logistic_delay",),
                "a `logistic_delay` for a unit that is renewed at once (`repair_time: 0 h`)",
                "a repair time above zero beside it",
                "give a `repair_time`, or remove `logistic_delay`",
                on_key=True,
            )
        if self.failure_modes and not any(mode.repair is not None for mode in modes):
            for key in ("repair_stages", "repair_success"):
                if self.is_said(key):
                    yield _without_repair(key)
        if self.is_said("repair_stages") and self.repair_time_shape is not None:
            yield Fault(
                ("repair_stages",),
                "`repair_stages` beside a `repair_time` with a spread",
                "one of the two: the spread says how many stages there are",
                "remove it",
                on_key=True,
            )

    def _mode_faults(self) -> Iterable[Fault]:
        if self.is_said("failure_modes") and not self.failure_modes:
            yield Fault(("failure_modes",), "no failure mode", "at least one", "write `NAME: {share: …}`")
        total = sum((mode.share.exact for mode in self.failure_modes.values()), Fraction(0))
        if self.failure_modes and total != 1:
            shown = f"{float(total):.12g}"
            if shown == "1":
                shown = f"a little {'less' if total < 1 else 'more'} than 1"
            yield Fault(
                ("failure_modes",),
                f"the shares sum to {shown}",
                "shares that sum to exactly 1",
                "correct them, or write one of them as 1 minus the others",
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
    def repair(self) -> Quantity | None:
        """The repair time or the repair rate, whichever is written; None: never repaired."""
        return self.repair_rate if self.repair_rate is not None else self.repair_time

    @property
    def repair_time_shape(self) -> TimeShape | None:
        """Law of `repair_time` where it has a spread."""
        return shape_of(self.repair_time)

    @property
    def logistic_delay_shape(self) -> TimeShape | None:
        """Law of `logistic_delay` where it has a spread."""
        return shape_of(self.logistic_delay)

    def modes(self) -> tuple[Mode, ...]:
        """Return the ways in which the unit can fail, at least one, each with what it takes over from the unit."""
        if not self.failure_modes:
            return (Mode("", None, self.detected, False, self.repair, self.repair_time_shape),)
        return tuple(
            Mode(
                name,
                mode.share,
                self.detected if mode.detected is None else mode.detected,
                mode.effect == "acts_needlessly",
                self.repair if mode.repair_time is None else mode.repair_time,
                self.repair_time_shape if mode.repair_time is None else mode.repair_time_shape,
            )
            for name, mode in self.failure_modes.items()
        )

    @property
    def may_hide(self) -> bool:
        """Whether some faults are not known at once."""
        return any(mode.may_hide for mode in self.modes())

    @property
    def may_act_needlessly(self) -> bool:
        """Whether some faults make the unit act without being asked."""
        return any(mode.needless and mode.occurs for mode in self.modes())

    @property
    def ever_repaired(self) -> bool:
        """Whether a fault of any mode is ever repaired."""
        return any(mode.repairable for mode in self.modes())

    @property
    def repairable(self) -> bool:
        """Whether a repair is written for the unit itself that ever ends; see `ever_repaired` for those of modes."""
        if self.repair_rate is not None:
            return not self.repair_rate.is_zero
        return self.repair_time is not None

    @property
    def repaired_at_once(self) -> bool:
        """Whether a known fault is repaired in the moment it arises."""
        return self.repair_time is not None and self.repair_time.is_zero

    @property
    def repair_hourly(self) -> Fraction:
        """One divided by the mean repair time, per hour, exact; for units whose repair takes time."""
        if self.repair_rate is not None:
            return self.repair_rate.exact
        if self.repair_time is None or self.repair_time.is_zero:
            raise ValueError("the unit has no repair that takes time")
        return 1 / self.repair_time.exact


def _without_repair(key: str) -> Fault:
    return Fault(
        (key,),
        f"{quote(key)} for a unit that is never repaired",
        "`repair_time` or `repair_rate` beside it",
        f"add one of them, or remove {quote(key)}",
        on_key=True,
    )
