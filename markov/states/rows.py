"""Draws up the rows of one island: its groups, its slots, and what several groups share."""

from __future__ import annotations

from dataclasses import replace

from markov.model import Group, Model, RepairAtFailed, RepairAtVisits, names
from markov.rates import Factor
from markov.states.causes import detected_shares_of, shares_of
from markov.states.coupling import needs_whole_system
from markov.states.factors import clock_of, rate_of, share_of
from markov.states.layout import Desk, Entry, Layout, Node, Ordering, RowCounter, Shock, Slot, Stock, Switch, Train
from markov.states.outage import TIMED_OUTCOMES
from markov.states.slots import Drawing, draw_removed, draw_slot, tests_of


def draw_up(model: Model, islands: tuple[str, ...], contended: set[str], phase: int) -> Layout:
    """Draw up the rows of the groups and units that stand in one island.

    The same rows come out in every phase; only numbers, rates and the structure of success differ.
    """
    counter = RowCounter()
    drawing = Drawing(model, contended, counter, phase, islands)
    nodes = tuple(_group(drawing, name, _while_down(model, name, None)) for name in islands)
    paused = bool(model.phases) and not model.phases[phase].repair
    if paused:
        nodes = tuple(replace(node, crews_rest=True) for node in nodes)
    stocks = tuple(_stock(drawing, name, nodes) for name in drawing.stock_names)
    desks = tuple(_desk(drawing, name, nodes, stocks) for name in drawing.desk_names)
    whole = model.system is not None and set(names(model.system)) <= set(islands)
    system = set(names(model.system)) if model.system is not None else set()
    restores = model.restoration is not None and bool(system & set(islands))
    demanded = model.demand is not None and any(
        each.by_demand for node in nodes for entry in node.entries if isinstance(entry, Slot) for each in entry.hidden
    )
    return Layout(
        nodes,
        tuple(counter.tops),
        tuple(counter.labels),
        stocks,
        desks,
        tuple(shock for name in model.common_causes if (shock := _shock(drawing, name, nodes)) is not None),
        model.system if whole and needs_whole_system(model) else None,
        _restoration(model) if restores else None,
        _demand(model) if demanded else None,
        paused,
    )


def _restoration(model: Model) -> Factor:
    if model.restoration is None:
        raise AssertionError("there is no restoration")
    clock = clock_of(model.restoration.time, "1/T(restoration)", "restoration of the system", "restoration.time")
    if clock is None:
        raise AssertionError("a restoration takes time")
    return clock.rates[0]


def _demand(model: Model) -> Factor | None:
    return None if model.demand is None else rate_of(model.demand.rate, "demand", "rate of demands", "demand.rate")


def _group(drawing: Drawing, name: str, while_down: str) -> Node:
    """Draw up the rows of one group and of the trains in it."""
    model, counter = drawing.model, drawing.counter
    group = model.groups.get(name)
    node = _node(model, name, group, while_down)
    entries: list[Entry] = []
    if group is None:
        entries.append(draw_slot(drawing, node, name, 0, 1))
    for rank, member in enumerate(() if group is None else group.members):
        if member.is_group:
            inside = _group(drawing, member.name, _while_down(model, member.name, while_down))
            label = f"train {member.name}"
            duty = counter.row(f"{label} on duty", 1)
            start = () if node.active or node.takeover is None else counter.rows(label, 1, node.takeover.stages)
            entries.append(Train(inside, rank, duty, start))
        else:
            entries.append(draw_slot(drawing, node, member.name, rank, member.count))
    switch = _switch(drawing, name, group)
    outage = -1
    refuses = switch is not None and switch.refusal is not None
    if (any(chance.complement().exact for chance in node.coverage) or refuses) and node.outcome != "all_failed":
        outage = counter.row(f"{name} uncovered", 1 if node.outcome_clock is None else node.outcome_clock.stages)
    switching: tuple[int, ...] = ()
    if node.active and node.takeover is not None:
        count = sum(entry.count for entry in entries)
        switching = counter.rows(f"{name} switchover", count, node.takeover.stages)
    return replace(node, entries=tuple(entries), outage=outage, switching=switching, switch=switch)


def _node(model: Model, name: str, group: Group | None, while_down: str) -> Node:
    """Read the rules of one group; a unit that is its own group is an active group of one."""
    if group is None:
        return Node(name, 1, 1, True, None, False, (), "until_repair", None, None, False, False, while_down)
    where = f"groups.{name}"
    outcome_clock = None
    if group.outcome in TIMED_OUTCOMES:
        uncovered = None if group.switchover is None else group.switchover.uncovered
        outcome_clock = clock_of(
            group.outcome_time,
            f"1/T({name})",
            f"end of the uncovered outage of {name}",
            where,
            shape=None if uncovered is None else uncovered.time_shape,
        )
    warm = group.redundancy == "warm_standby" and group.dormancy_factor is not None
    return Node(
        name=name,
        required=group.required,
        places=group.duty_places,
        active=group.is_active,
        standby_factor=share_of(group.dormancy_factor, f"κ({name})", f"dormancy factor of {name}", where)
        if warm and group.dormancy_factor is not None
        else None,
        cold=group.redundancy == "cold_standby",
        coverage=tuple(
            share_of(
                entry,
                f"c{number if len(group.coverage_list) > 1 else ''}({name})",
                f"coverage of {name}" + (f", entry {number}" if len(group.coverage_list) > 1 else ""),
                where,
            )
            for number, entry in enumerate(group.coverage_list, 1)
        ),
        outcome=group.outcome,
        outcome_clock=outcome_clock,
        takeover=clock_of(
            group.takeover_time,
            f"σ({name})",
            f"switchover of {name}",
            where,
            stages=group.takeover_stages,
            shape=None if group.switchover is None else group.switchover.time_shape,
        ),
        return_to_preferred=group.return_to_preferred,
        start_again=group.after_repair == "start_again",
        while_down=while_down,
        load=_load(group, name),
        release=_release(group),
        offline=group.offline_repair,
    )


def _load(group: Group, name: str) -> tuple[tuple[int, Factor], ...]:
    """Return the rate factor for every number of units on duty that has one, in ascending order."""
    sharing = group.load_sharing
    if sharing is None:
        return ()
    most = group.size if group.is_active else group.duty_places
    return tuple(
        (
            number,
            Factor(
                f"l{number}({name})",
                sharing.factor(number, group.duty_places),
                f"load factor of {name} with {number} on duty",
                f"groups.{name}.load_sharing",
                is_share=True,
            ),
        )
        for number in range(1, most + 1)
    )


def _release(group: Group) -> str | int:
    when = group.repair_when
    if isinstance(when, RepairAtFailed):
        return when.failed
    return "visits" if isinstance(when, RepairAtVisits) else when


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


def _switch(drawing: Drawing, name: str, group: Group | None) -> Switch | None:
    given = None if group is None or group.switchover is None else group.switchover.switch
    if given is None:
        return None
    where = f"groups.{name}.switchover.switch"
    of = f"the switch of {name}"
    refusal = given.failure_on_demand
    failure = None
    if given.failure_rate is not None:
        failure = rate_of(given.failure_rate, f"λ({name}.switch)", f"failure rate of {of}", where)
    false = None
    if given.false_operation_rate is not None:
        false = rate_of(given.false_operation_rate, f"φ({name})", f"rate of false operations of {of}", where)
    repair = clock_of(given.repair_time, f"μ({name}.switch)", f"repair of {of}", where)
    fails = failure is not None or (repair is not None and refusal is not None and not refusal.is_zero)
    known = fails and (repair is not None or not given.latent)
    return Switch(
        None
        if refusal is None or refusal.is_zero
        else share_of(refusal, f"r({name})", f"chance that {of} refuses", where),
        failure,
        given.latent,
        repair,
        false,
        frozenset(tests_of(drawing.model, f"{name}.switch")),
        drawing.counter.rows(f"{name} switch failed", 1, 1 if repair is None else repair.stages) if known else (),
        drawing.counter.row(f"{name} switch failed unnoticed", 1) if failure is not None and given.latent else -1,
    )


def _stock(drawing: Drawing, name: str, nodes: tuple[Node, ...]) -> Stock:
    pool, counter = drawing.model.spares[name], drawing.counter
    where = f"spares.{name}.lead_time"
    lead = clock_of(pool.lead_time, f"1/L({name})", f"arrival of an order of {name}", where, shape=pool.lead_time_shape)
    if lead is None:
        raise AssertionError("an order takes time")
    rows = drawing.ordering[name]
    lanes = sum(
        lane.stock >= 0 and drawing.stock_names[lane.stock] == name
        for node in nodes
        for entry in node.entries
        if isinstance(entry, Slot)
        for lane in entry.lanes
    )
    items = drawing.items_of(pool.for_)
    return Stock(
        name,
        pool.stock,
        pool.for_,
        lead,
        pool.batch,
        pool.order == "when_failed",
        Ordering(rows.counted, rows.orders[0], pool.batch, rows.most),
        rows.shelf,
        rows.orders,
        tuple(counter.row(f"{name} line, place {place + 1}", 10_000) for place in range(items)) if lanes > 1 else (),
        draw_removed(drawing, name),
    )


def _desk(drawing: Drawing, name: str, nodes: tuple[Node, ...], stocks: tuple[Stock, ...]) -> Desk:
    crew = drawing.model.crews[name]
    first_come = crew.queue == "first_come"
    lanes = [lane for node in nodes for entry in node.entries if isinstance(entry, Slot) for lane in entry.lanes]
    lanes += [lane for stock in stocks for lane in stock.removed]
    mine = [lane for lane in lanes if lane.desk >= 0 and drawing.desk_names[lane.desk] == name]
    items = drawing.items_of(crew.repairs) + sum(stock.stock for stock in stocks)
    line: tuple[int, ...] = ()
    if first_come and mine:
        line = tuple(
            drawing.counter.row(f"{name} line, place {place + 1}", len(lanes)) for place in range(items - crew.size)
        )
    return Desk(name, crew.size, first_come, crew.order, line)


def _shock(drawing: Drawing, name: str, nodes: tuple[Node, ...]) -> Shock | None:
    cause = drawing.model.common_causes[name]
    slots = tuple(
        (at, number)
        for at, node in enumerate(nodes)
        for number, entry in enumerate(node.entries)
        if isinstance(entry, Slot) and drawing.strikes(cause.members, node.name, entry.unit)
    )
    struck = [entry for at, number in slots if isinstance(entry := nodes[at].entries[number], Slot)]
    if not struck or any(slot.failure is None for slot in struck):
        return None
    items = sum(slot.count for slot in struck)
    shares = shares_of(cause, name, items)
    detected = detected_shares_of(cause, name, items)
    base = drawing.base_of(cause, name, struck)
    exposed = cause.exposed == "on_duty"
    if detected is None:
        return Shock(name, slots, base, shares, exposed)
    return Shock(name, slots, base, detected, exposed, shares)
