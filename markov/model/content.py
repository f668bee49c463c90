"""The whole of a spec as one mapping, before its parts are checked against each other."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Annotated, ClassVar

from pydantic import Field

from markov.model.crews import Crew
from markov.model.faults import refuse
from markov.model.groups import Group, WhileDown
from markov.model.handwritten import State, Transition
from markov.model.parameters import Parameter
from markov.model.part import Part, describe
from markov.model.readers import CountFromZero, KeyName, MaybeText, Reads, Text
from markov.model.success import MaybeSuccess, names
from markov.model.targets import Mission, Target
from markov.model.units import Unit
from markov.quantities import Quantity, parse_quantity


class InitialFaults(Part):
    """How many units of a kind are failed at the start."""

    kind = "number of units failed at the start"
    example = "{failed: 1}"
    unbuilt: ClassVar[Mapping[str, str]] = {"hidden": "hidden faults"}

    failed: CountFromZero = Field(description="How many are failed at the start, from the lowest rank up.")

    @classmethod
    def expand(cls, data: object) -> Mapping[str, object]:
        """Read the word ``failed`` as one unit failed."""
        if data == "failed":
            return {"failed": 1}
        if data == "hidden":
            refuse("`hidden` is not built yet (hidden faults)", "`failed`", "use what is built")
        refuse(describe(data), "`failed` or `{failed: n}`", "write one of these")


@dataclass(frozen=True)
class Placement:
    """Items of one kind in one place: in a group, or alone where `group` is None."""

    group: str | None
    unit: str
    count: int

    @property
    def key(self) -> str:
        """How `initial` may call it without doubt."""
        return self.unit if self.group is None else f"{self.group}.{self.unit}"


class Content(Part):
    """A spec."""

    kind = "spec"
    unbuilt: ClassVar[Mapping[str, str]] = {
        "spares": "spare stocks",
        "tests": "tests of hidden faults",
        "common_causes": "common cause",
        "demand": "demands",
        "phases": "phases of a mission",
        "restoration": "restoration of the whole system",
        "variants": "variants",
    }
    habits: ClassVar[Mapping[str, str]] = {
        "name": "write `title`",
        "description": "write `notes`",
        "components": "write `units`",
        "blocks": "write `units`",
        "structure": "write `system`",
        "success": "write `system`",
        "repair": "write `crews`, or `repair_time` in each unit",
        "repairmen": "write `crews`",
        "requirements": "write `targets`",
        "measures": "write `targets`",
        "mission_time": "write `mission: {time: …}`",
        "time": "write `mission: {time: …}`",
        "revision": "write it under `reference`",
        "document": "write it under `reference`",
        "author": "write it under `reference`",
        "constants": "write `parameters`",
    }

    title: MaybeText = Field(None, description="What the plant is called.")
    reference: dict[KeyName, Text] = Field(
        default_factory=dict,
        description="Goes on every document: `document`, `revision`, `author` or any other key, each with text.",
    )
    notes: MaybeText = Field(None, description="Free text.")
    year: Annotated[Quantity, Reads("time", above_zero=True, year_known=False)] = Field(
        parse_quantity("8760 h"),
        description="Length of a year; `y` and `month` (a twelfth of it) follow it.",
        json_schema_extra={"default": "8760 h"},
    )
    parameters: dict[KeyName, Parameter] = Field(
        default_factory=dict, description="Named values: `NAME: value`, or a mapping with source and uncertainty."
    )
    units: dict[KeyName, Unit] = Field(
        default_factory=dict, description="Kinds of equipment by name; needed unless the chain is written by hand."
    )
    groups: dict[KeyName, Group] = Field(
        default_factory=dict, description="Units that stand in for each other, by name."
    )
    crews: dict[KeyName, Crew] = Field(
        default_factory=dict,
        description="Pools of repair crews by name; a repairable unit in no pool has a crew for each item.",
    )
    system: MaybeSuccess = Field(
        None, description="What has to be up for the system to be up; needed unless the chain is written by hand."
    )
    while_down: WhileDown = Field(
        "continue",
        description="What units do while the system is down: `continue` to fail at their present rate, "
        "`standby_rate`, or `stop`.",
    )
    initial: dict[KeyName, InitialFaults] = Field(
        default_factory=dict,
        description="Units failed at the start: `UNIT: failed` or `UNIT: {failed: n}`; `GROUP.UNIT` where a kind "
        "serves in several groups.",
    )
    mission: Mission | None = Field(None, description="How long the plant has to work.")
    targets: tuple[Target, ...] = Field((), description="Limits on measures.")
    states: dict[KeyName, State] = Field(
        default_factory=dict, description="States of a hand-written chain, in place of `units` to `initial`."
    )
    transitions: tuple[Transition, ...] = Field((), description="Transitions of a hand-written chain.")

    @property
    def year_hours(self) -> Fraction:
        """Length of a year in hours."""
        return self.year.exact

    @property
    def explicit(self) -> bool:
        """Whether the chain is written by hand."""
        return bool(self.states)

    @cached_property
    def named_in_system(self) -> tuple[str, ...]:
        """Groups and units that the success criterion names, each once."""
        return () if self.system is None else names(self.system)

    @cached_property
    def placements(self) -> tuple[Placement, ...]:
        """All items of the plant by place, in the order of the spec.

        A unit named in `system` is one item; so is one that only loads a crew.
        """
        placed = [
            Placement(name, member.name, member.count)
            for name, group in self.groups.items()
            for member in group.members
            if not member.is_group
        ]
        grouped = {placement.unit for placement in placed}
        calling = {unit for crew in self.crews.values() for unit in crew.repairs}
        named = set(self.named_in_system) - set(self.groups)
        for unit in self.units:
            if unit in named or (unit in calling and unit not in grouped):
                placed.append(Placement(None, unit, 1))
        return tuple(placed)

    def placements_meant(self, key: str) -> tuple[Placement, ...]:
        """Return the places that a key of `initial` may mean: one where it is clear, several where it is not."""
        found = (place for place in self.placements if key in (place.unit, place.key))
        return tuple(found)
