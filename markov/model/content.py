"""The whole of a spec as one mapping, before its parts are checked against each other."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from functools import cached_property
from typing import Annotated, Any, ClassVar, Self

from pydantic import Field

from markov.model.common_causes import CommonCause
from markov.model.crews import Crew
from markov.model.deferral import RepairAtVisits
from markov.model.demand import Demand
from markov.model.faults import Path
from markov.model.groups import Group, WhileDown
from markov.model.handwritten import State, Transition
from markov.model.parameters import Parameter
from markov.model.part import Part
from markov.model.phases import Phase
from markov.model.proof_tests import ProofTest
from markov.model.readers import KeyName, MaybeText, Reads, ShareAboveZero, Text
from markov.model.restoration import Restoration
from markov.model.spares import SparesPool
from markov.model.starts import InitialFaults, Placement
from markov.model.success import MaybeSuccess, Success, names
from markov.model.targets import Mission, Target
from markov.model.units import Unit
from markov.quantities import Quantity, parse_quantity


class Content(Part):
    """A spec."""

    kind = "spec"
    unbuilt: ClassVar[Mapping[str, str]] = {"variants": "variants"}
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
        "spare_parts": "write `spares`",
        "stock": "write `spares`",
        "proof_tests": "write `tests`",
        "inspections": "write `tests`",
        "ccf": "write `common_causes`",
        "beta": "write `common_causes`",
        "profile": "write `phases`",
        "demand_rate": "write `demand: {rate: …}`",
        "thresholds": "write `levels`",
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
    spares: dict[KeyName, SparesPool] = Field(default_factory=dict, description="Pools of spares by name.")
    tests: dict[KeyName, ProofTest] = Field(
        default_factory=dict,
        description="Tests at fixed instants by name; where several fall on one instant, in the order of the text.",
    )
    common_causes: dict[KeyName, CommonCause] = Field(
        default_factory=dict, description="What makes several units fail in one event, by name."
    )
    demand: Demand | None = Field(None, description="How often the plant is called to act.")
    phases: tuple[Phase, ...] = Field((), description="Phases of the mission, one after the other from the start.")
    system: MaybeSuccess = Field(
        None, description="What has to be up for the system to be up; needed unless the chain is written by hand."
    )
    while_down: WhileDown = Field(
        "continue",
        description="What units do while the system is down: `continue` to fail at their present rate, "
        "`standby_rate`, or `stop`.",
    )
    restoration: Restoration | None = Field(
        None,
        description="Restoration of the whole system once it is down, in place of repair unit by unit.",
        json_schema_extra={"unsaid": "unit by unit"},
    )
    initial: dict[KeyName, InitialFaults] = Field(
        default_factory=dict,
        description="Units failed at the start: `UNIT: failed` or `UNIT: {failed: n, hidden: m}`; `GROUP.UNIT` where a "
        "kind serves in several groups.",
    )
    levels: dict[KeyName, ShareAboveZero] = Field(
        default_factory=dict,
        description="Least delivered shares by name, such as `{full: 100 %, degraded: 50 %}`; for `level_probability`.",
    )
    mission: Mission | None = Field(None, description="How long the plant has to work.")
    targets: tuple[Target, ...] = Field((), description="Limits on measures.")
    states: dict[KeyName, State] = Field(
        default_factory=dict, description="States of a hand-written chain, in place of `units` to `initial`."
    )
    transitions: tuple[Transition, ...] = Field((), description="Transitions of a hand-written chain.")

    def model_copy(self, *, update: Mapping[str, Any] | None = None, deep: bool = False) -> Self:
        """Return a copy with some keys changed; what was worked out from the old ones is worked out anew."""
        copied = super().model_copy(update=update, deep=deep)
        for name in [name for name in copied.__dict__ if name not in type(self).model_fields]:
            del copied.__dict__[name]
        return copied

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
        """Groups and units that the success criterion at the top names, each once."""
        return () if self.system is None else names(self.system)

    @cached_property
    def criteria(self) -> tuple[Success, ...]:
        """The success criterion of each phase; that of the top alone where there are no phases."""
        if self.system is None:
            return tuple(phase.system for phase in self.phases if phase.system is not None)
        if not self.phases:
            return (self.system,)
        return tuple(self.system if phase.system is None else phase.system for phase in self.phases)

    @cached_property
    def named_in_any_phase(self) -> tuple[str, ...]:
        """Groups and units that the success criterion names at the top or in a phase, each once."""
        named = [*self.named_in_system, *(name for criterion in self.criteria for name in names(criterion))]
        return tuple(dict.fromkeys(named))

    @cached_property
    def placements(self) -> tuple[Placement, ...]:
        """All items of the plant by place, in the order of the spec.

        A unit named in `system` is one item; so is one that only loads a crew or draws spares.
        """
        placed = [
            Placement(name, member.name, member.count)
            for name, group in self.groups.items()
            for member in group.members
            if not member.is_group
        ]
        grouped = {placement.unit for placement in placed}
        calling = {unit for crew in self.crews.values() for unit in crew.repairs}
        calling |= {unit for pool in self.spares.values() for unit in pool.for_}
        named = set(self.named_in_any_phase) - set(self.groups)
        for unit in self.units:
            if unit in named or (unit in calling and unit not in grouped):
                placed.append(Placement(None, unit, 1))
        return tuple(placed)

    def placements_meant(self, key: str) -> tuple[Placement, ...]:
        """Return the places that ``UNIT`` or ``GROUP.UNIT`` means: one where it is clear, several where it is not."""
        return self._places_by_key.get(key, ())

    def placements_in(self, group: str) -> tuple[Placement, ...]:
        """Return the places in a group, those in the trains in it included."""
        inside = self.with_trains(group)
        return tuple(place for name in inside for place in self._places_by_group.get(name, ()))

    @cached_property
    def _places_by_key(self) -> dict[str, tuple[Placement, ...]]:
        found: dict[str, tuple[Placement, ...]] = {}
        for place in self.placements:
            for key in dict.fromkeys((place.unit, place.key)):
                found[key] = (*found.get(key, ()), place)
        return found

    @cached_property
    def _places_by_group(self) -> dict[str, tuple[Placement, ...]]:
        found: dict[str, tuple[Placement, ...]] = {}
        for place in self.placements:
            if place.group is not None:
                found[place.group] = (*found.get(place.group, ()), place)
        return found

    @cached_property
    def trains(self) -> frozenset[str]:
        """Groups that are members of other groups."""
        return frozenset(member.name for group in self.groups.values() for member in group.members if member.is_group)

    def with_trains(self, group: str) -> tuple[str, ...]:
        """Return the name of a group and of all trains in it, at any depth."""
        found = {group: None}
        pending = [group]
        while pending:
            inside = self.groups.get(pending.pop())
            for member in inside.members if inside is not None else ():
                if member.is_group and member.name not in found:
                    found[member.name] = None
                    pending.append(member.name)
        return tuple(found)

    def switch_meant(self, key: str) -> str | None:
        """Return the group whose switch ``GROUP.switch`` means; None where there is no such switch."""
        group = key.removesuffix(".switch")
        return group if key != group and group in self.groups and self.groups[group].switch is not None else None

    def is_tested(self, place: Placement, test: ProofTest) -> bool:
        """Tell whether a test tests the items of one place."""
        return place.unit in test.of or place.key in test.of

    def tests_of(self, place: Placement) -> tuple[str, ...]:
        """Name the tests of the items of one place, in the order of the text."""
        found = {*self._tests_by_key.get(place.unit, ()), *self._tests_by_key.get(place.key, ())}
        return tuple(self._in_order(found))

    def tests_of_switch(self, group: str) -> tuple[str, ...]:
        """Name the tests of the switch of a group, in the order of the text."""
        key = f"{group}.switch"
        return self._tests_by_key.get(key, ()) if self.switch_meant(key) == group else ()

    def _in_order(self, tests: set[str]) -> list[str]:
        return sorted(tests, key=self._test_numbers.__getitem__) if len(tests) > 1 else list(tests)

    @cached_property
    def _test_numbers(self) -> dict[str, int]:
        return {name: number for number, name in enumerate(self.tests)}

    @cached_property
    def _tests_by_key(self) -> dict[str, tuple[str, ...]]:
        return _inverted({name: test.of for name, test in self.tests.items()})

    def placements_struck(self, cause: CommonCause) -> tuple[Placement, ...]:
        """Return the places whose items a common cause can strike, each once."""
        found: dict[Placement, None] = {}
        for name in cause.members:
            meant = self.placements_in(name) if name in self.groups else self.placements_meant(name)
            found |= dict.fromkeys(meant)
        return tuple(found)

    def causes_of(self, place: Placement) -> tuple[str, ...]:
        """Name the common causes that can strike the items of one place, in the order of the text."""
        return self._causes_by_place.get(place.key, ())

    @cached_property
    def _causes_by_place(self) -> dict[str, tuple[str, ...]]:
        struck = {name: self.placements_struck(cause) for name, cause in self.common_causes.items()}
        return _inverted({name: [place.key for place in places] for name, places in struck.items()})

    def pool_of_spares(self, unit: str) -> str | None:
        """Name the pool that keeps spares for a kind; None where there is none."""
        return next(iter(self._pools_by_unit.get(unit, ())), None)

    @cached_property
    def _pools_by_unit(self) -> dict[str, tuple[str, ...]]:
        return _inverted({name: pool.for_ for name, pool in self.spares.items()})

    def required_in(self, phase: Phase | None, group: str) -> int:
        """Return how many units the function of a group needs in a phase."""
        required = self.groups[group].required
        return required if phase is None else phase.required.get(group, required)

    @cached_property
    def recurrences(self) -> tuple[tuple[str, Fraction, Path], ...]:
        """What recurs at fixed instants: tests, visits, phases that repeat; in words, its period in hours, its key."""
        return tuple(self._recurrences())

    def _recurrences(self) -> Iterator[tuple[str, Fraction, Path]]:
        for name, test in self.tests.items():
            yield f"test {name}", test.interval.exact, ("tests", name, "interval")
        for name, group in self.groups.items():
            if isinstance(group.repair_when, RepairAtVisits):
                path: Path = ("groups", name, "repair_when", "visits_every")
                yield f"visits of {name}", group.repair_when.every.exact, path
        if self.phases and self.phases[-1].repeat and all(phase.duration is not None for phase in self.phases):
            cycle = sum((each.duration.exact for each in self.phases if each.duration), Fraction(0))
            yield "the cycle of phases", cycle, ("phases",)

    @property
    def periods(self) -> tuple[tuple[str, Fraction], ...]:
        """What recurs at fixed instants, in words, with its period in hours."""
        return tuple((words, hours) for words, hours, _ in self.recurrences)

    @property
    def is_scheduled(self) -> bool:
        """Whether anything happens at fixed instants: a test, a visit, the end of a phase."""
        return bool(self.periods) or len(self.phases) > 1


def _inverted(listed: Mapping[str, Iterable[str]]) -> dict[str, tuple[str, ...]]:
    """Return, for each name in the lists, the lists it stands in, in their order."""
    found: dict[str, list[str]] = {}
    for name, keys in listed.items():
        for key in dict.fromkeys(keys):
            found.setdefault(key, []).append(name)
    return {key: tuple(names) for key, names in found.items()}
