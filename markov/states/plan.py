"""From a model to islands: which groups enter the chain, with which rows, factors and crews.

An island is a group of the top level or a unit that the system names directly; islands meet only through crews and
through what the system as a whole does (`while_down`).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from markov.model import Group, Model, Unit, names
from markov.quantities import Quantity
from markov.rates import Factor
from markov.states.layout import Entry, Layout, Node, RowCounter, Slot, Train, node_of
from markov.states.outage import TIMED_OUTCOMES


@dataclass(frozen=True)
class PoolKind:
    """One kind in a crew pool, with the islands and slots that hold its items."""

    unit: str
    places: tuple[tuple[int, int], ...]  # (island, slot number)
    explicit_queue: bool


@dataclass(frozen=True)
class Pool:
    """A crew pool whose size can be exceeded, its kinds in order of priority."""

    name: str
    size: int
    kinds: tuple[PoolKind, ...]


@dataclass(frozen=True)
class Plan:
    """What the chain is generated from."""

    model: Model
    islands: tuple[Layout, ...]
    pools: tuple[Pool, ...]
    free_pools: tuple[Pool, ...]  # pools with a crew for every unit: nobody ever waits

    def island(self, name: str) -> int | None:
        """Return the number of the island of that name, None where it is not in the chain."""
        for number, layout in enumerate(self.islands):
            if layout.node.name == name:
                return number
        return None

    def holds(self, group: str) -> bool:
        """Tell whether a group, or a train, is in the chain."""
        return any(node_of(path[-1]).name == group for layout in self.islands for path in layout.groups)

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
    layouts = tuple(_layout(model, name, contended) for name in islands)
    bare = Plan(model, layouts, (), ())
    busy: list[Pool] = []
    free: list[Pool] = []
    for name, crew in model.crews.items():
        kinds = tuple(
            PoolKind(unit, places, layouts[places[0][0]].slots[places[0][1]].explicit_queue)
            for unit in crew.order
            if (places := bare.places_of(unit)) and layouts[places[0][0]].slots[places[0][1]].repair is not None
        )
        if kinds:
            (busy if name in contended else free).append(Pool(name, crew.size, kinds))
    return replace(bare, pools=tuple(busy), free_pools=tuple(free))


def members(model: Model, name: str) -> dict[str, int]:
    """Return kind -> number of items of an island, those of trains included."""
    if name not in model.groups:
        return {name: 1}
    counts: dict[str, int] = {}
    for member in model.groups[name].members:
        inside = members(model, member.name) if member.is_group else {member.name: member.count}
        for unit, count in inside.items():
            counts[unit] = counts.get(unit, 0) + count
    return counts


def island_names(model: Model) -> list[str]:
    """Name every island that the model could have, those of the system first, then in the order of the text."""
    named = list(dict.fromkeys(names(model.system))) if model.system is not None else []
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
    wanted.update(name for name in every if name in subjects or any(unit in subjects for unit in members(model, name)))
    while True:
        busy = _contended_pools(model, every)
        more = {
            name
            for name in every
            if name not in wanted
            for pool in busy
            if set(model.crews[pool].repairs) & set(members(model, name))
            and any(set(model.crews[pool].repairs) & set(members(model, other)) for other in wanted)
        }
        if not more:
            return [name for name in every if name in wanted]
        wanted |= more


def _contended_pools(model: Model, islands: list[str]) -> set[str]:
    """Name the pools that have fewer crews than units which could need one at once."""
    result = set()
    for name, crew in model.crews.items():
        items = 0
        for island in islands:
            for unit, count in members(model, island).items():
                if unit in crew.repairs and model.units[unit].repairable:
                    items += count
        if items > crew.size:
            result.add(name)
    return result


def _layout(model: Model, name: str, contended: set[str]) -> Layout:
    """Draw up the rows of one island."""
    counter = RowCounter()
    node = _group(model, name, _while_down(model, name, None), contended, counter)
    return Layout(node, tuple(counter.tops), tuple(counter.labels))


def _group(model: Model, name: str, while_down: str, contended: set[str], counter: RowCounter) -> Node:
    """Draw up the rows of one group and of the trains in it."""
    group = model.groups.get(name)
    node = _node(name, group, while_down)
    entries: list[Entry] = []
    if group is None:
        entries.append(_slot(model, node, name, 0, 1, contended, counter))
    for rank, member in enumerate(() if group is None else group.members):
        if member.is_group:
            inside = _group(model, member.name, _while_down(model, member.name, while_down), contended, counter)
            label = f"train {member.name}"
            duty = counter.row(f"{label} on duty", 1)
            start = () if node.active or node.takeover_rate is None else counter.rows(label, 1, node.takeover_stages)
            entries.append(Train(inside, rank, duty, start))
        else:
            entries.append(_slot(model, node, member.name, rank, member.count, contended, counter))
    outage = -1
    if any(chance.complement().exact for chance in node.coverage) and node.outcome != "all_failed":
        outage = counter.row(f"{name} uncovered", 1)
    switching: tuple[int, ...] = ()
    if node.active and node.takeover_rate is not None:
        count = sum(entry.count for entry in entries)
        switching = counter.rows(f"{name} switchover", count, node.takeover_stages)
    return replace(node, entries=tuple(entries), outage=outage, switching=switching)


def _node(name: str, group: Group | None, while_down: str) -> Node:
    """Read the rules of one group; a unit that is its own group is an active group of one."""
    if group is None:
        return Node(name, 1, 1, True, None, False, (), "until_repair", None, None, 1, False, False, while_down)
    where = f"groups.{name}"
    outcome_rate = None
    if group.outcome in TIMED_OUTCOMES and group.outcome_time is not None:
        outcome_rate = _per(group.outcome_time, 1, f"1/T({name})", f"end of the uncovered outage of {name}", where)
    takeover_rate = None
    if group.takeover_time is not None and not group.takeover_time.is_zero:
        symbol = f"σ({name})"
        takeover_rate = _per(group.takeover_time, group.takeover_stages, symbol, f"switchover of {name}", where)
    warm = group.redundancy == "warm_standby" and group.dormancy_factor is not None
    return Node(
        name=name,
        required=group.required,
        places=group.duty_places,
        active=group.is_active,
        standby_factor=_share(group.dormancy_factor, f"κ({name})", f"dormancy factor of {name}", where)
        if warm and group.dormancy_factor is not None
        else None,
        cold=group.redundancy == "cold_standby",
        coverage=tuple(
            _share(
                entry,
                f"c{number if len(group.coverage_list) > 1 else ''}({name})",
                f"coverage of {name}" + (f", entry {number}" if len(group.coverage_list) > 1 else ""),
                where,
            )
            for number, entry in enumerate(group.coverage_list, 1)
        ),
        outcome=group.outcome,
        outcome_rate=outcome_rate,
        takeover_rate=takeover_rate,
        takeover_stages=group.takeover_stages,
        return_to_preferred=group.return_to_preferred,
        start_again=group.after_repair == "start_again",
        while_down=while_down,
    )


def _while_down(model: Model, name: str, around: str | None) -> str:
    """Return what a group does while the system is down; a train does what the group around it does.

    Outside the system it just goes on.
    """
    group = model.groups.get(name)
    if group is not None and group.while_down is not None:
        return group.while_down
    if around is not None:
        return around
    if model.system is None or name not in names(model.system):
        return "continue"
    return model.while_down


def _slot(model: Model, node: Node, unit: str, rank: int, count: int, contended: set[str], counter: RowCounter) -> Slot:
    kind = model.units[unit]
    where = f"units.{unit}"
    pool = next((crew for name, crew in model.crews.items() if unit in crew.repairs and name in contended), None)
    several = _places(model, unit) > 1
    explicit = pool is not None and several and kind.repairable
    slot = Slot(
        unit=unit,
        group=node.name,
        rank=rank,
        count=count,
        failure=_failure(unit, kind, where),
        start_failure=_start_failure(unit, kind, where),
        repair=_repair(unit, kind, where),
        repair_stages=kind.repair_stages if kind.repairable else 1,
        logistic_delay=_delay(unit, kind, where),
        capacity=None if kind.capacity is None else _share(kind.capacity, f"capacity({unit})", "capacity", where),
        renewed_at_once=kind.repaired_at_once,
        explicit_queue=explicit,
        preemptible=explicit and pool is not None and pool.order.index(unit) > 0,
    )
    label = slot.name
    stages = slot.repair_stages
    return replace(
        slot,
        delay=counter.row(f"{label} delay", count) if slot.logistic_delay is not None else -1,
        down=() if explicit else counter.rows(f"{label} failed", count, stages),
        fresh=counter.row(f"{label} queued", count) if explicit else -1,
        held=counter.rows(f"{label} interrupted", count, stages) if slot.preemptible else (),
        serve=counter.rows(f"{label} in repair", count, stages) if explicit else (),
        duty=-1 if node.active else counter.row(f"{label} on duty", count),
        start=()
        if node.active or node.takeover_rate is None
        else counter.rows(f"{label} starting", count, node.takeover_stages),
    )


def _places(model: Model, unit: str) -> int:
    """Count the groups that a kind serves in, a unit that stands alone included."""
    grouped = sum(member.name == unit for group in model.groups.values() for member in group.members)
    return grouped + (model.system is not None and unit in names(model.system))


def _failure(name: str, kind: Unit, where: str) -> Factor | None:
    if kind.repaired_at_once or kind.failure_hourly == 0:
        return None
    given = kind.failure
    if given.dimension == "rate":
        what = f"failure rate of {name}"
        return Factor(given.name or f"λ({name})", given.exact, what, f"{where}.failure_rate", quantity=given)
    return _per(given, 1, f"λ({name})", f"failure rate of {name}", f"{where}.mean_time_to_failure")


def _start_failure(name: str, kind: Unit, where: str) -> Factor | None:
    given = kind.start_failure
    if given is None or given.is_zero or kind.repaired_at_once:
        return None
    return _share(given, f"q({name})", f"probability that a start of {name} fails", f"{where}.start_failure")


def _repair(name: str, kind: Unit, where: str) -> Factor | None:
    if not kind.repairable or kind.repaired_at_once:
        return None
    stages = kind.repair_stages
    what = f"repair rate of {name}" if stages == 1 else f"rate of one of {stages} repair stages of {name}"
    if kind.repair_time is not None:
        return _per(kind.repair_time, stages, f"μ({name})", what, f"{where}.repair_time")
    given = kind.repair_rate
    if given is None:
        raise AssertionError("a repairable unit has a repair time or a repair rate")
    symbol = given.name if given.name and stages == 1 else f"μ({name})"
    return Factor(symbol, given.exact * stages, what, f"{where}.repair_rate", quantity=given, stages=stages)


def _delay(name: str, kind: Unit, where: str) -> Factor | None:
    given = kind.logistic_delay
    if given is None or given.is_zero or not kind.repairable or kind.repaired_at_once:
        return None
    return _per(given, 1, f"δ({name})", f"end of the logistic delay of {name}", f"{where}.logistic_delay")


def _per(time: Quantity, stages: int, symbol: str, meaning: str, origin: str) -> Factor:
    """Return the rate of one of some stages of a mean time."""
    return Factor(
        f"{stages}/{time.name}" if time.name else symbol,
        Fraction(stages) / time.exact,
        meaning,
        origin,
        quantity=time,
        stages=stages,
        is_reciprocal=True,
    )


def _share(share: Quantity, symbol: str, meaning: str, origin: str) -> Factor:
    return Factor(share.name or symbol, share.exact, meaning, origin, is_share=True, quantity=share)
