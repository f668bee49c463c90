"""Groups: units that stand in for each other, with what happens when one on duty fails."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from fractions import Fraction
from typing import ClassVar, Literal

from pydantic import Field, PrivateAttr, ValidationInfo, model_validator

from markov.model.deferral import AT_ONCE, RepairAtFailed, RepairWhen
from markov.model.durations import TimeShape
from markov.model.faults import Fault, Path, quote
from markov.model.loads import MaybeLoadSharing
from markov.model.part import Part, at_most_one
from markov.model.readers import Count, Flag, KeyName, MaybeCount, MaybeShare, context_of
from markov.model.switchovers import Coverage, Outcome, Switch, Switchover
from markov.quantities import Quantity

Redundancy = Literal["active", "hot_standby", "warm_standby", "cold_standby"]
WhileDown = Literal["continue", "standby_rate", "stop"]


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


class Group(Part):
    """Units that stand in for each other."""

    kind = "group"
    example = "{members: [{unit: pump, count: 2}], required: 1, redundancy: cold_standby}"
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
        "switch": "write `switchover: {switch: …}`",
        "load": "write `load_sharing`",
        "deferred_repair": "write `repair_when`",
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
    load_sharing: MaybeLoadSharing = Field(
        None,
        description="Factor on the failure rate of a unit on duty by the number of units on duty: `{2: 1, 1: 1.8}`, or "
        "`{exponent: a}` for (`on_duty` ÷ units on duty) to the power a.",
        json_schema_extra={"unsaid": "the rate is the same whatever the number"},
    )
    repair_when: RepairWhen = Field(
        AT_ONCE,
        description="When repair of failed units begins: `at_once`, `system_down`, `{failed: k}` once k units of the "
        "group are known to be failed, `{visits_every: time}` at fixed instants.",
    )
    offline_repair: Flag = Field(
        False, description="Whether the whole group stops while a crew is at work on one of its units."
    )
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
        if not {"members", "required", "on_duty", "redundancy", "repair_when"} & set(unread):
            yield from self._deferral_faults()
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

    def _deferral_faults(self) -> Iterable[Fault]:
        when = self.repair_when
        if isinstance(when, RepairAtFailed) and when.failed > self.size > 0:
            found = f"repair once {when.failed} of {self.size} units are failed"
            yield Fault(("repair_when", "failed"), found, "at most the number of members", "lower it")

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

    def places_for(self, required: int) -> int:
        """Return how many units carry duty in a phase that requires so many."""
        if self.redundancy == "active":
            return self.size
        return required if self.on_duty is None else self.on_duty

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

    @property
    def takeover_shape(self) -> TimeShape | None:
        """Law of the takeover time where it has a spread."""
        return None if self.switchover is None else self.switchover.time_shape

    @property
    def outcome_shape(self) -> TimeShape | None:
        """Law of the time of the outcome where it has a spread."""
        if self.switchover is None or self.switchover.uncovered is None:
            return None
        return self.switchover.uncovered.time_shape

    @property
    def switch(self) -> Switch | None:
        """The switch of the group, where it has faults of its own."""
        return None if self.switchover is None else self.switchover.switch

    @property
    def is_deferred(self) -> bool:
        """Whether repair waits for something after a fault."""
        return self.repair_when != "at_once"
