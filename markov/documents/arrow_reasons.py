"""What stands behind an arrow of the chain: the keys of the spec, their lines, the assumptions that it rests on."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

from markov.documents.spec_lines import Path_, SpecLines
from markov.documents.written_places import WrittenPlaces
from markov.model import Model
from markov.rates import Factor
from markov.states import GeneratedSpace, StateSpace
from markov.states.arrows import ArrowKind

#: Keys of a unit and of a crew pool that a repair rests on.
_REPAIR_KEYS = ("repair_stages", "logistic_delay")
_CREW_KEYS = ("queue", "priority", "preemptive")


@dataclass(frozen=True)
class Driver:
    """What makes an event happen: the key of its rate, and whom it concerns.

    Attributes
    ----------
    event : str
        ``fault``, ``common cause``, ``repair``, ``logistics``, ``outage``, ``switchover``, ``switch``, ``order``,
        ``exchange``, ``restoration``, ``demand``, ``written``, or ``instant`` for one without a rate.
    name : str
        Unit, group, cause or pool; empty where there is none.
    """

    event: str
    name: str = ""


class ArrowReasons:
    """Reasons for the arrows of one chain.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain.
    assumptions : sequence of str
        Choices left unsaid, as a solution lists them.
    lines : SpecLines, optional
        Where the spec stands in a file; without it no line is told.
    """

    def __init__(
        self, model: Model, space: StateSpace, assumptions: Sequence[str], lines: SpecLines | None = None
    ) -> None:
        self.model = model
        self.space = space
        self.places = WrittenPlaces(model, SpecLines() if lines is None else lines)
        self._assumptions = tuple(assumptions)
        self._drivers: dict[int, Driver] = {}
        self._lines: dict[int, tuple[int, ...]] = {}
        self._numbers: dict[tuple[int, bool], tuple[int, ...]] = {}

    def factors(self, kind: int) -> tuple[Factor, ...]:
        """Return the factors of the rate of an arrow kind, each once."""
        kinds = self.space.kinds
        return tuple(dict.fromkeys(kinds.rates.rates[kinds.kinds[kind].rate].factors))

    def driver(self, kind: int) -> Driver:
        """Tell what makes the events of an arrow kind happen."""
        if kind not in self._drivers:
            self._drivers[kind] = self._driven_by(kind)
        return self._drivers[kind]

    def keys(self, kind: int) -> tuple[Path_, ...]:
        """Return the keys of the spec behind the rate of an arrow kind: those of its factors, then the parameters."""
        found: dict[Path_, None] = {}
        for factor in self.factors(kind):
            found |= dict.fromkeys(self.places.of(factor))
        for factor in self.factors(kind):
            found |= {("parameters", name, "value"): None for name in self.places.parameters_of(factor)}
        return tuple(found)

    def rules(self, kind: int) -> tuple[Path_, ...]:
        """Return the keys that decide what an event leads to, beside those of its rate."""
        driver, called = self.driver(kind), self.space.kinds.kinds[kind]
        found: list[Path_] = []
        units = self._units(driver, called)
        if driver.event == "written":
            found += [(*path[:2], "cause") for path in self.keys(kind) if path[0] == "transitions"]
        for group in self._groups(driver, called, units):
            found += [("groups", group, key) for key in ("members", "required", "redundancy", "repair_when")]
        if driver.event in ("repair", "logistics"):
            found += [("crews", name, "size") for name, crew in self.model.crews.items() if driver.name in crew.repairs]
        found += [("spares", pool, key) for pool in called.spares for key in ("stock", "order")]
        return tuple(dict.fromkeys(found))

    def lines(self, kind: int) -> tuple[int, ...]:
        """Return the lines of the spec behind the rate of an arrow kind, in ascending order."""
        if kind not in self._lines:
            found = {self.places.line(path) for path in self.keys(kind)}
            self._lines[kind] = tuple(sorted(line for line in found if line is not None))
        return self._lines[kind]

    def assumptions(self, source: int, target: int, kind: int) -> tuple[int, ...]:
        """Return the numbers, from 1, of the choices left unsaid that an arrow rests on."""
        down = not bool(self._up[source])
        if (kind, down) not in self._numbers:
            wanted = [f"{key}: " for key in self._expected(kind, down)]
            driver = self.driver(kind)
            if driver.event == "repair":
                wanted.append(f"crews: one crew per unit for {driver.name} (")
            self._numbers[kind, down] = self._beginning_with(wanted)
        return self._numbers[kind, down]

    def numbered(self, keys: Iterable[str]) -> tuple[int, ...]:
        """Return the numbers, from 1, of the choices left unsaid under some keys."""
        return self._beginning_with(f"{key}: " for key in keys)

    def _beginning_with(self, wanted: Iterable[str]) -> tuple[int, ...]:
        beginnings = tuple(wanted)
        return tuple(number for number, each in enumerate(self._assumptions, 1) if each.startswith(beginnings))

    def text(self, number: int) -> str:
        """Return a choice left unsaid by its number, from 1."""
        return self._assumptions[number - 1]

    # --- what drives an event -------------------------------------------------------------------------------------

    @cached_property
    def _up(self) -> Sequence[bool]:
        found: list[bool] = self.space.up.tolist()
        return found

    def _driven_by(self, kind: int) -> Driver:
        factors = self.factors(kind)
        for factor in factors:
            for path in self.places.of(factor):
                if path[0] == "common_causes" and not factor.origin.startswith("common_causes ("):
                    return Driver("common cause", str(path[1]))
        for factor in factors:
            if not factor.is_share:
                for path in self.places.of(factor):
                    return _driver_at(path)
        return Driver("instant")

    # --- assumptions ----------------------------------------------------------------------------------------------

    def _expected(self, kind: int, down: bool) -> Iterator[str]:
        """Yield the keys whose unsaid value an arrow rests on."""
        driver, called = self.driver(kind), self.space.kinds.kinds[kind]
        if driver.event == "written":
            return
        units = self._units(driver, called)
        groups = self._groups(driver, called, units)
        fault = driver.event in ("fault", "common cause")
        if fault:
            yield from self._of_a_fault(driver, called, units, groups)
            if down:
                yield "while_down"
        if driver.event in ("repair", "logistics", "exchange"):
            yield from self._of_a_repair(driver, groups)
        if driver.event == "outage":
            yield from (f"groups.{group}.switchover.uncovered" for group in groups)
        if driver.event in ("switchover", "switch"):
            for group in groups:
                yield f"groups.{group}.switchover.stages"
                if driver.event == "switch":
                    keys = ("failure_on_demand", "failure_rate", "latent", "repair_time", "false_operation_rate")
                    yield from (f"groups.{group}.switchover.switch.{key}" for key in keys)
        if driver.event == "restoration":
            yield "restoration.to"
        for pool in dict.fromkeys((*called.spares, *([driver.name] if driver.event in ("order", "exchange") else []))):
            yield from (f"spares.{pool}.{key}" for key in ("order", "batch", "swap_time"))
        for slot in called.starts:
            yield f"units.{self._unit_of(slot)}.start_failure"
            yield from (f"groups.{group}.switchover.time" for group in groups)
        for phase in self.model.phases:
            if fault:
                yield f"phases.{phase.name}.rate_factors"
            if driver.event == "repair":
                yield f"phases.{phase.name}.repair"

    def _of_a_fault(
        self, driver: Driver, called: ArrowKind, units: Sequence[str], groups: Sequence[str]
    ) -> Iterator[str]:
        for unit in units:
            yield f"units.{unit}.detected"
            for mode in self.model.units[unit].failure_modes:
                yield from (f"units.{unit}.failure_modes.{mode}.{key}" for key in ("effect", "detected"))
        if driver.event == "common cause":
            yield from (f"common_causes.{driver.name}.{key}" for key in ("exposed", "beta_detected"))
        else:
            yield "common_causes"
        rest = called.cause.removeprefix(driver.name)
        if " while waiting" in rest.split(":")[0]:
            return
        for group in groups:
            yield f"groups.{group}.coverage"
            if "uncovered" in rest:
                yield f"groups.{group}.switchover.uncovered"

    def _of_a_repair(self, driver: Driver, groups: Sequence[str]) -> Iterator[str]:
        unit = driver.name
        if driver.event != "exchange" and unit in self.model.units:
            yield from (f"units.{unit}.{key}" for key in _REPAIR_KEYS)
            yield from (
                f"units.{unit}.failure_modes.{mode}.repair_time" for mode in self.model.units[unit].failure_modes
            )
            for name, crew in self.model.crews.items():
                if unit in crew.repairs:
                    yield from (f"crews.{name}.{key}" for key in _CREW_KEYS)
        yield from ("repair_when", "restoration")
        for group in groups:
            yield from (f"groups.{group}.{key}" for key in ("after_repair", "return_to_preferred"))

    # --- whom it concerns -----------------------------------------------------------------------------------------

    def _units(self, driver: Driver, called: ArrowKind) -> tuple[str, ...]:
        """Return the kinds that an event concerns."""
        if driver.event in ("fault", "repair", "logistics"):
            return (driver.name,)
        if driver.event == "common cause":
            struck = self.model.placements_struck(self.model.common_causes[driver.name])
            return tuple(dict.fromkeys(place.unit for place in struck))
        slots = (*called.starts, *((called.repaired,) if called.repaired else ()))
        return tuple(dict.fromkeys(self._unit_of(slot) for slot in slots))

    def _groups(self, driver: Driver, called: ArrowKind, units: Sequence[str]) -> tuple[str, ...]:
        """Return the groups whose rules an event follows."""
        if driver.event in ("outage", "switchover", "switch"):
            return (driver.name,)
        inside = self._groups_of_island(called.island)
        found = [
            place.group
            for unit in units
            for place in self.model.placements_meant(unit)
            if place.group is not None and (not inside or place.group in inside)
        ]
        return tuple(dict.fromkeys(found))

    def _groups_of_island(self, island: str) -> frozenset[str]:
        return self._islands.get(island, frozenset())

    @cached_property
    def _islands(self) -> dict[str, frozenset[str]]:
        if not isinstance(self.space, GeneratedSpace):
            return {}
        return {
            layout.name: frozenset(name for node in layout.nodes for name in self.model.with_trains(node.name))
            for layout in self.space.plan.islands
        }

    def _unit_of(self, slot: str) -> str:
        """Return the kind of a slot, ``group.unit`` or the unit alone."""
        return self._slots.get(slot, slot)

    @cached_property
    def _slots(self) -> dict[str, str]:
        return {place.key: place.unit for place in self.model.placements}


def _driver_at(path: Path_) -> Driver:
    """Return what the key of a rate drives."""
    words = [str(step) for step in path]
    name = words[1] if len(words) > 1 else ""
    match words:
        case ["units", _, "failure_rate" | "mean_time_to_failure", *_]:
            return Driver("fault", name)
        case ["units", _, "logistic_delay", *_]:
            return Driver("logistics", name)
        case ["units", *_]:
            return Driver("repair", name)
        case ["groups", _, "switchover", "time", *_]:
            return Driver("switchover", name)
        case ["groups", _, "switchover", "switch", *_]:
            return Driver("switch", name)
        case ["groups", *_]:
            return Driver("outage", name)
        case ["spares", _, "lead_time", *_]:
            return Driver("order", name)
        case ["spares", *_]:
            return Driver("exchange", name)
        case ["transitions", *_]:
            return Driver("written", "")
        case [top, *_] if top in ("restoration", "demand"):
            return Driver(top, "")
        case ["common_causes", *_]:
            return Driver("common cause", name)
    return Driver("instant")
