"""From a model to islands: which groups enter the chain, which of them stand in one island, which crews serve them.

An island is a group of the top level or a unit that the system names directly, or several of them that more than crews
connects (see `coupling`); islands meet only through crews and through what the system as a whole does (`while_down`).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from markov.model import Model, names
from markov.states.coupling import coupled, sets_of_islands
from markov.states.layout import Layout, node_of
from markov.states.membership import members
from markov.states.phases import by_phase, model_in_phase
from markov.states.rows import draw_up
from markov.states.timetable import Timetable, timetable


@dataclass(frozen=True)
class PoolKind:
    """One kind in a crew pool, with the islands and lanes that hold its failed items."""

    unit: str
    places: tuple[tuple[int, int], ...]  # (island, lane number)
    explicit_queue: bool


@dataclass(frozen=True)
class Pool:
    """A crew pool whose size can be exceeded, its kinds in order of priority."""

    name: str
    size: int
    kinds: tuple[PoolKind, ...]


@dataclass(frozen=True)
class Plan:
    """What the chain is generated from.

    Attributes
    ----------
    model : Model
    islands : tuple of Layout
        In the first phase, where there are phases.
    pools : tuple of Pool
        Whose size can be exceeded, and whose crews act last.
    free_pools : tuple of Pool
        With a crew for every unit: nobody ever waits.
    desk_pools : tuple of Pool
        Whose crews finish what they have begun; they act inside of their island.
    timetable : Timetable, optional
        What happens at fixed instants.
    phases : tuple of tuple of Layout
        The islands in every phase but the first.
    """

    model: Model
    islands: tuple[Layout, ...]
    pools: tuple[Pool, ...]
    free_pools: tuple[Pool, ...]
    desk_pools: tuple[Pool, ...] = ()
    timetable: Timetable | None = None
    phases: tuple[tuple[Layout, ...], ...] = ()

    phase_after: tuple[int, ...] = ()  # of each instant of the timetable

    @property
    def regimes(self) -> tuple[tuple[Layout, ...], ...]:
        """The islands in every phase."""
        return (self.islands, *self.phases)

    def island(self, name: str) -> int | None:
        """Return the number of the island that holds a group or unit of the top level, None where none does."""
        for number, layout in enumerate(self.islands):
            if layout.node_named(name) is not None:
                return number
        return None

    def holds(self, group: str) -> bool:
        """Tell whether a group, or a train, is in the chain."""
        return any(node_of(path[-1]).name == group for layout in self.islands for path in layout.groups)

    def lanes_of(self, unit: str) -> tuple[tuple[int, int], ...]:
        """Return every (island, lane number) in which failed items of a kind stand before a crew."""
        return tuple(
            (island, number)
            for island, layout in enumerate(self.islands)
            for number, lane in enumerate(layout.lanes)
            if lane.unit == unit and lane.repair is not None and lane.stock < 0
        )

    def places_of(self, unit: str) -> tuple[tuple[int, int], ...]:
        """Return every (island, slot number) that holds items of a kind."""
        return tuple(
            (island, number)
            for island, layout in enumerate(self.islands)
            for number, slot in enumerate(layout.slots)
            if slot.unit == unit
        )


def plan(model: Model, subjects: tuple[str, ...] = (), *, alone: str | None = None) -> Plan:
    """Decide which islands enter the chain and draw up their rows.

    Parameters
    ----------
    model : Model
        A model with units and groups (not a hand-written chain).
    subjects : tuple of str
        Groups and units outside the system that a question asks about; they enter the chain too.
    alone : str, optional
        The only island to take, as if it had every crew to itself.
    """
    islands = _islands_in_chain(model, subjects) if alone is None else [alone]
    contended = _contended_pools(model, islands)
    table, phase_after = by_phase(timetable(model))
    sets = sets_of_islands(model, islands, contended, table is not None)
    phases = range(1, len(model.phases))
    layouts = tuple(draw_up(model_in_phase(model, 0), each, contended, 0) for each in sets)
    bare = Plan(model, layouts, (), ())
    busy: list[Pool] = []
    free: list[Pool] = []
    desks: list[Pool] = []
    for name, crew in model.crews.items():
        kinds = tuple(
            PoolKind(unit, places, layouts[places[0][0]].lanes[places[0][1]].explicit_queue)
            for unit in crew.order
            if (places := bare.lanes_of(unit))
        )
        if kinds:
            where = free if name not in contended else busy if is_preemptive(model, name) else desks
            where.append(Pool(name, crew.size, kinds))
    return replace(
        bare,
        pools=tuple(busy),
        free_pools=tuple(free),
        desk_pools=tuple(desks),
        timetable=table,
        phase_after=phase_after,
        phases=tuple(
            tuple(draw_up(model_in_phase(model, phase), each, contended, phase) for each in sets) for phase in phases
        ),
    )


def is_preemptive(model: Model, crew: str) -> bool:
    """Tell whether a pool interrupts repairs for more urgent ones."""
    return model.crews[crew].preemptive and model.crews[crew].queue == "priority"


def island_names(model: Model) -> list[str]:
    """Name every island that the model could have, those of the system first, then in the order of the text."""
    named = list(model.named_in_any_phase) if model.system is not None else []
    grouped = {member.name for group in model.groups.values() for member in group.members}
    pooled = {unit for crew in model.crews.values() for unit in crew.repairs}
    trains = {member.name for group in model.groups.values() for member in group.members if member.is_group}
    others = [name for name in model.groups if name not in named and name not in trains]
    loose = [name for name in model.units if name not in named and name not in grouped and name in pooled]
    return named + others + loose


def _islands_in_chain(model: Model, subjects: tuple[str, ...]) -> list[str]:
    every = island_names(model)
    grouped = {member.name for group in model.groups.values() for member in group.members}
    every += [name for name in subjects if name in model.units and name not in grouped and name not in every]
    wanted = set(names(model.system)) if model.system is not None else set()
    for phase in model.phases:
        wanted.update(names(phase.system) if phase.system is not None else ())
    wanted.update(name for name in every if name in subjects or any(unit in subjects for unit in members(model, name)))
    while True:
        busy = _contended_pools(model, every)
        more = {
            name
            for name in every
            if name not in wanted
            if any(_load_one_crew(model, pool, name, other) for pool in busy for other in wanted)
            or any(coupled(model, name, other) for other in wanted)
        }
        if not more:
            return [name for name in every if name in wanted]
        wanted |= more


def _load_one_crew(model: Model, pool: str, name: str, other: str) -> bool:
    repairs = set(model.crews[pool].repairs)
    return bool(repairs & set(members(model, name)) and repairs & set(members(model, other)))


def spares_of(model: Model, unit: str) -> int:
    """Count the spares of a kind that could stand before a crew beside its items in place."""
    pool = model.pool_of_spares(unit)
    return 0 if pool is None else model.spares[pool].stock


def _contended_pools(model: Model, islands: list[str]) -> set[str]:
    """Name the pools that have fewer crews than units which could need one at once."""
    result = set()
    for name, crew in model.crews.items():
        items = 0
        for island in islands:
            for unit, count in members(model, island).items():
                if unit in crew.repairs and model.units[unit].ever_repaired:
                    items += count + spares_of(model, unit)
        if items > crew.size:
            result.add(name)
    return result
