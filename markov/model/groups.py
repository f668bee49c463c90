"""Groups: units that stand in for each other, with what happens when one on duty fails."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, PrivateAttr, ValidationInfo, model_validator
from pydantic_core import PydanticCustomError

from markov.model.faults import Fault, Path, choices, quote, raise_all
from markov.model.part import Part, at_most_one
from markov.model.readers import (
    Context,
    Count,
    Flag,
    KeyName,
    MaybeCount,
    MaybeShare,
    MaybeTime,
    MaybeTimeAboveZero,
    Reader,
    Reads,
    context_of,
)
from markov.quantities import Quantity

Redundancy = Literal["active", "hot_standby", "warm_standby", "cold_standby"]
Outcome = Literal["until_repair", "manual_takeover", "restart", "restart_without_failed", "all_failed", "lost"]
WhileDown = Literal["continue", "standby_rate", "stop"]

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
        one = Reads("share")
        if not isinstance(value, list | tuple):
            return (one.read(value, context, key),)
        shares: list[Quantity] = []
        faults: list[Fault] = []
        silent: list[Path] = []
        for position, each in enumerate(value):
            try:
                shares.append(one.read(each, context, key))
            except PydanticCustomError as error:
                told = error.context
                if told:
                    faults.append(Fault((position,), told["found"], told["expected"], told["fix"]))
                else:
                    silent.append((position,))
        if not value:
            faults.append(Fault((), "an empty list", "at least one share", "write one, or take the key out"))
        raise_all(faults, silent)
        return tuple(shares)


Coverage = Annotated[tuple[Quantity, ...] | None, ReadsCoverage()]


class Member(Part):
    """One kind of unit in a group, with its number; or a group as a member."""

    kind = "member"
    short_form = "unit"
    example = "{unit: pump, count: 2}"
    habits: ClassVar[Mapping[str, str]] = {
        "name": "write `unit`",
        "group": "write the group's name alone, without a mapping",
        "number": "write `count`",
        "quantity": "write `count`",
        "n": "write `count`",
    }

    name: KeyName = Field(alias="unit", description="Name of the unit.")
    count: Count = Field(1, description="How many of this kind.")
    _is_group: bool = PrivateAttr(False)

    @model_validator(mode="after")
    def _look_up(self, info: ValidationInfo) -> Member:
        context = context_of(info)
        self._is_group = self.name in context.groups and self.name not in context.units
        return self

    @property
    def is_group(self) -> bool:
        """Whether the name is that of a group."""
        return self._is_group


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
    time: MaybeTimeAboveZero = Field(
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


class Switchover(Part):
    """How duty passes to a standby."""

    kind = "switchover"
    example = "{coverage: 98 %, time: 20 s}"
    unbuilt: ClassVar[Mapping[str, str]] = {"switch": "switches that fail themselves"}
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
    time: MaybeTime = Field(
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


class Group(Part):
    """Units that stand in for each other."""

    kind = "group"
    example = "{members: [{unit: pump, count: 2}], required: 1, redundancy: cold_standby}"
    unbuilt: ClassVar[Mapping[str, str]] = {"load_sharing": "load sharing"}
    unbuilt_values: ClassVar[Mapping[str, Collection[str]]] = {"repair_when": ("system_down",)}
    habits: ClassVar[Mapping[str, str]] = {
        "k": "write `required`",
        "needed": "write `required`",
        "at_least": "write `required`",
        "minimum": "write `required`",
        "units": "write `members`",
        "of": "write `members`",
        "count": "write `members: [{unit: …, count: …}]`",
        "standby": "write `redundancy: hot_standby`, `warm_standby` or `cold_standby`",
        "type": "write `redundancy`",
        "kind": "write `redundancy`",
        "dormancy": "write `dormancy_factor`",
        "uncovered": "write `switchover: {uncovered: …}`",
        "switchover_time": "write `switchover: {time: …}`",
        "failover": "write `switchover`",
    }

    members: tuple[Member, ...] = Field(
        description="Units in rank order: names, or `{unit: NAME, count: n}` for several alike. A group may be a "
        "member by its name: a train of units that waits and takes over as one."
    )
    required: Count = Field(1, description="How many units on duty the function needs.")
    on_duty: MaybeCount = Field(
        None, description="How many units carry duty while all is well.", json_schema_extra={"unsaid": "`required`"}
    )
    redundancy: Redundancy | None = Field(
        None,
        description="`active`: all good units carry duty; `hot_standby`: a standby fails at the duty rate; "
        "`warm_standby`: at `dormancy_factor` of it; `cold_standby`: cannot fail while waiting.",
        json_schema_extra={"unsaid": "`active`; must be written where there are more members than `on_duty`"},
    )
    dormancy_factor: MaybeShare = Field(
        None, description="Failure rate of a warm standby ÷ duty rate; above 0, below 1; for `warm_standby` only."
    )
    coverage: Coverage = Field(
        None,
        description="Short form of `switchover: {coverage: …}`; not beside `switchover`.",
        json_schema_extra={"unsaid": "`1`"},
    )
    switchover: Switchover | None = Field(
        None, description="How duty passes to a standby.", json_schema_extra={"unsaid": "at once, always covered"}
    )
    return_to_preferred: Flag = Field(
        False, description="Whether duty goes back to a member listed earlier as soon as it is good."
    )
    after_repair: Literal["straight_to_duty", "start_again"] = Field(
        "straight_to_duty",
        description="`straight_to_duty`: a repaired unit fills an empty place without a start attempt; "
        "`start_again`: it joins the standbys and has to start.",
    )
    repair_when: Literal["at_once"] = Field("at_once", description="When repair of a failed unit begins.")
    while_down: WhileDown | None = Field(
        None,
        description="What the group's units do while the system is down: `continue` to fail at their present rate, "
        "`standby_rate`, or `stop`.",
        json_schema_extra={"unsaid": "`while_down` at the top"},
    )

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        return at_most_one(cls, keys, "switchover", "coverage")

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        yield from self._member_faults()
        yield from self._number_faults()
        if not {"required", "on_duty", "redundancy", "dormancy_factor"} & set(unread):
            yield from self._redundancy_faults()

    def _member_faults(self) -> Iterable[Fault]:
        if not self.members:
            yield Fault(("members",), "no members", "at least one", "write `members: [NAME]`")
        first: dict[str, int] = {}
        for position, member in enumerate(self.members):
            path: Path = ("members", position)
            if member.name in first:
                kind = "group" if member.is_group else "unit"
                fix = "remove it" if member.is_group else "write it once, as {unit: …, count: …}"
                yield Fault(path, f"{quote(member.name)} stands twice", f"each {kind} once in `members`", fix)
            first.setdefault(member.name, position)
            if member.is_group and member.is_said("count"):
                fault = f"a count for the group {quote(member.name)}"
                yield Fault((*path, "count"), fault, "a group is a member once", "write its name alone", on_key=True)

    def _number_faults(self) -> Iterable[Fault]:
        size = self.size
        if size and self.required > size:
            fix = f"write {size} or less, or add members"
            yield Fault(("required",), f"{self.required} required of {size}", "at most the number of members", fix)
        if self.on_duty is None:
            return
        if self.on_duty < self.required:
            found = f"{self.on_duty} on duty, {self.required} required"
            yield Fault(("on_duty",), found, "`on_duty` not below `required`", "raise `on_duty` or lower `required`")
        if size and self.on_duty > size:
            yield Fault(("on_duty",), f"{self.on_duty} on duty of {size}", "at most the number of members", "lower it")
        if self.redundancy == "active" and self.on_duty < size:
            yield Fault(
                ("on_duty",),
                f"{self.on_duty} of {size} on duty in an `active` group",
                "all good members on duty, as `active` says",
                "remove `on_duty`, or choose a standby",
            )

    def _redundancy_faults(self) -> Iterable[Fault]:
        places = self.required if self.on_duty is None else self.on_duty
        if self.redundancy is None and self.size > places:
            yield Fault(
                (),
                f"`redundancy` is missing: {self.size} members, {places} on duty",
                "`active`, `hot_standby`, `warm_standby` or `cold_standby`",
                "add `redundancy: …`",
                on_key=True,
            )
        factor = self.dormancy_factor
        if self.redundancy == "warm_standby" and factor is None:
            fix = "add `dormancy_factor: …`, above 0 and below 1"
            yield Fault(("redundancy",), "`warm_standby` without `dormancy_factor`", "the factor beside it", fix)
        if factor is None:
            return
        if self.redundancy != "warm_standby":
            written = f"`redundancy: {self.redundancy}`" if self.redundancy else "no `redundancy`"
            yield Fault(
                ("dormancy_factor",),
                f"`dormancy_factor` with {written}",
                "`dormancy_factor` with `warm_standby` only",
                "remove it, or write `redundancy: warm_standby`",
                on_key=True,
            )
        elif not 0 < factor.exact < 1:
            other = "cold_standby" if factor.is_zero else "hot_standby"
            yield Fault(
                ("dormancy_factor",),
                f"{quote(factor.text)} is not between 0 and 1",
                "a factor above 0 and below 1",
                f"write `redundancy: {other}` without it",
            )

    # -- effective values

    @property
    def size(self) -> int:
        """Number of members, each unit of a kind counted."""
        return sum(member.count for member in self.members)

    @property
    def duty_places(self) -> int:
        """How many units carry duty while all is well."""
        if self.redundancy == "active":
            return self.size
        return self.required if self.on_duty is None else self.on_duty

    @property
    def is_active(self) -> bool:
        """Whether all good members carry duty."""
        return self.redundancy == "active" or (self.redundancy is None and self.size == self.duty_places)

    @property
    def dormancy(self) -> Fraction:
        """Failure rate of a waiting unit divided by its rate on duty."""
        if self.redundancy == "warm_standby":
            assert self.dormancy_factor is not None  # checked while reading
            return self.dormancy_factor.exact
        return Fraction(0) if self.redundancy == "cold_standby" else Fraction(1)

    @property
    def coverage_list(self) -> tuple[Quantity, ...]:
        """Coverages by number of units failed before; empty where unsaid."""
        if self.coverage is not None:
            return self.coverage
        if self.switchover is not None and self.switchover.coverage is not None:
            return self.switchover.coverage
        return ()

    @property
    def outcome(self) -> Outcome:
        """What an uncovered fault leads to."""
        if self.switchover is None or self.switchover.uncovered is None:
            return "until_repair"
        return self.switchover.uncovered.outcome

    @property
    def outcome_time(self) -> Quantity | None:
        """Mean time of the outcome, where it has one."""
        return None if self.switchover is None or self.switchover.uncovered is None else self.switchover.uncovered.time

    @property
    def takeover_time(self) -> Quantity | None:
        """Mean time of a takeover; None or zero means at once."""
        return None if self.switchover is None else self.switchover.time

    @property
    def takeover_stages(self) -> int:
        """Stages of a takeover."""
        return 1 if self.switchover is None else self.switchover.stages
