"""What is legal in a spec, yet likely not what its author means."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields, is_dataclass
from fractions import Fraction

from markov.model.content import Content
from markov.model.durations import shape_of
from markov.model.faults import choices, quote
from markov.model.hiding import hiding_cautions
from markov.model.idle import idle_cautions
from markov.model.part import Part
from markov.model.units import Unit
from markov.quantities import Quantity

#: Two values closer than this, relative, and not equal, are called nearly alike.
NEARLY = Fraction(1, 100)
#: More stages than this for one time are noted.
MANY_STAGES = 50
_MOST_COMPARED = 200
_PLAUSIBLE_YEAR = (Fraction(8000), Fraction(9000))


def cautions(content: Content) -> tuple[str, ...]:
    """Return all cautions about a spec that is in order, each as one sentence."""
    rules = (
        _years,
        _parameters,
        _rates,
        _spreads,
        _alike,
        _unused,
        _crew_sizes,
        hiding_cautions,
        idle_cautions,
        _phases,
        _targets,
    )
    return tuple(dict.fromkeys(text for rule in rules for text in rule(content)))


def _years(content: Content) -> Iterator[str]:
    low, high = _PLAUSIBLE_YEAR
    if not low <= content.year_hours <= high:
        yield f"year: {content.year.text} is far from 8760 h."


def _quantities(value: object, place: str = "") -> Iterator[tuple[str, Quantity]]:
    """Yield every quantity of a spec outside of `parameters`, with its place."""
    spread = shape_of(value) if isinstance(value, Quantity) else None
    if spread is not None and spread.standard_deviation is not None:
        yield f"{place}.standard_deviation", spread.standard_deviation
    entries: Iterator[tuple[str, object]]
    match value:
        case Quantity():
            yield place, value
            return
        case Part():
            entries = ((key, getattr(value, key)) for key in type(value).model_fields if key != "parameters")
        case Mapping():
            entries = ((str(key), each) for key, each in value.items())
        case tuple():
            entries = ((str(number), each) for number, each in enumerate(value, start=1))
        case _ if is_dataclass(value):
            entries = ((each.name, getattr(value, each.name)) for each in fields(value))
        case _:
            return
    for key, each in entries:
        yield from _quantities(each, f"{place}.{key}" if place else key)


def _parameters(content: Content) -> Iterator[str]:
    used = {name for _, quantity in _quantities(content) for name in quantity.parameters}
    pending = list(used)
    while pending:
        parameter = content.parameters.get(pending.pop())
        spread = parameter.uncertainty if parameter is not None else None
        behind = [] if parameter is None else [parameter.value]
        if spread is not None:
            behind += [each for each in (spread.low, spread.high, spread.standard_deviation) if each is not None]
        for quantity in behind:
            new = set(quantity.parameters) - used
            used |= new
            pending += new
    for name in content.parameters:
        if name not in used:
            yield f"parameters.{name}: nothing uses this parameter."
    bare = [name for name, parameter in content.parameters.items() if parameter.source is None and name in used]
    if bare:
        yield f"Unsupported, as no `source` is given: {choices(bare, 'and')}."


def _rates(content: Content) -> Iterator[str]:
    for name, unit in content.units.items():
        if unit.failure_hourly == 0:
            yield f"units.{name}: a failure rate of zero, it never fails."
        if unit.repair_rate is not None and unit.repair_rate.is_zero:
            yield f"units.{name}: a repair rate of zero, it is never repaired."
        for mode in unit.modes():
            if not mode.occurs:
                yield f"units.{name}: the failure mode {quote(mode.name)} has a share of zero, it never occurs."
    for name, group in content.groups.items():
        switch = group.switch
        for key in ("failure_rate", "false_operation_rate"):
            rate = getattr(switch, key) if switch is not None else None
            if rate is not None and rate.is_zero:
                yield f"groups.{name}.switchover.switch: a `{key}` of zero, it never happens."
    if content.demand is not None and content.demand.rate.is_zero:
        yield "demand: a rate of zero, it never comes."
    for number, phase in enumerate(content.phases, start=1):
        for name, factor in phase.rate_factors.items():
            if factor.is_zero:
                yield f"phases#{number} {quote(phase.name)}: a factor of zero, {quote(name)} never fails in it."
    for number, transition in enumerate(content.transitions, start=1):
        if transition.hourly == 0:
            yield (
                f"transitions#{number} from {quote(transition.source)} to {quote(transition.target)}: "
                "a rate of zero, it never happens."
            )


def _spreads(content: Content) -> Iterator[str]:
    """Name times whose spread needs so many stages that the chain grows by them."""
    for place, quantity in _quantities(content):
        spread = shape_of(quantity)
        if spread is not None and spread.least_stages > MANY_STAGES:
            yield f"{place}: {spread.least_stages} stages stand in for it, and the chain grows by each of them."


def _alike(content: Content) -> Iterator[str]:
    """Name pairs of units that are nearly, not exactly, alike: they are told apart, never merged."""
    units = sorted(content.units.items(), key=lambda item: item[1].failure_hourly)
    window = len(units) if len(units) <= _MOST_COMPARED else 2
    for index, (name, unit) in enumerate(units):
        for other_name, other in units[index + 1 : index + window]:
            if other.failure_hourly > unit.failure_hourly * (1 + 2 * NEARLY):
                break
            if _nearly(unit, other):
                first, second = sorted((name, other_name), key=list(content.units).index)
                yield (
                    f"units.{first} and units.{second} differ by less than 1 %: they are kept apart as two kinds; "
                    "if they are meant to be alike, write one kind with a count."
                )


def _nearly(one: Unit, other: Unit) -> bool:
    if _character(one) != _character(other):
        return False
    pairs = [(one.failure_hourly, other.failure_hourly)]
    if one.repairable and not one.repaired_at_once:
        pairs.append((one.repair_hourly, other.repair_hourly))
    for key in ("logistic_delay", "start_failure", "capacity", "detected", "repair_success"):
        first, second = getattr(one, key), getattr(other, key)
        if (first is None) != (second is None):
            return False
        if first is not None:
            pairs.append((first.exact, second.exact))
    close = all(abs(first - second) <= NEARLY * max(first, second) for first, second in pairs)
    return close and any(first != second for first, second in pairs)


def _character(unit: Unit) -> tuple[object, ...]:
    """Return what has to be the same in two units for their numbers to be compared."""
    return (
        unit.repairable,
        unit.repaired_at_once,
        unit.repair_stages,
        unit.repair_time_shape,
        unit.logistic_delay_shape,
        unit.failure_modes,
        frozenset(unit.revealed_by),
    )


def _unused(content: Content) -> Iterator[str]:
    if content.explicit:
        return
    in_system = set(content.named_in_any_phase)
    pending = [name for name in in_system if name in content.groups]
    while pending:
        for member in content.groups[pending.pop()].members:
            if member.name not in in_system:
                in_system.add(member.name)
                if member.name in content.groups:
                    pending.append(member.name)
    pooled = {unit: f"loads the crew {quote(name)}" for name, crew in content.crews.items() for unit in crew.repairs}
    for name, pool in content.spares.items():
        for unit in pool.for_:
            pooled.setdefault(unit, f"draws spares from {quote(name)}")
    grouped = {place.unit for place in content.placements if place.group is not None}
    for name, group in content.groups.items():
        if name not in in_system:
            loads = any(member.name in pooled for member in group.members)
            why = "it only loads a crew or draws spares" if loads else "it changes no measure of the system"
            yield f"groups.{name} is outside of `system`: {why}."
    for name in content.units:
        if name in in_system or name in grouped:
            continue
        if name in pooled:
            yield f"units.{name} is outside of `system`: it only {pooled[name]}."
        else:
            yield f"units.{name}: nothing uses this unit."


def _crew_sizes(content: Content) -> Iterator[str]:
    items: dict[str, int] = {}
    for place in content.placements:
        items[place.unit] = items.get(place.unit, 0) + place.count
    for name, crew in content.crews.items():
        spares = {content.pool_of_spares(unit) for unit in crew.repairs} - {None}
        served = sum(items.get(unit, 0) for unit in crew.repairs)
        served += sum(content.spares[pool].stock for pool in spares if pool is not None)
        if crew.size > served:
            yield f"crews.{name}: a size of {crew.size} for {served} unit{'' if served == 1 else 's'}."


def _phases(content: Content) -> Iterator[str]:
    """Name phases that the mission never enters."""
    if content.mission is None:
        return
    begin = Fraction(0)
    for phase in content.phases:
        if begin > 0 and begin >= content.mission.time.exact:
            yield f"phases: the mission of {content.mission.time.text} ends before {quote(phase.name)} begins."
        if phase.duration is None:
            return
        begin += phase.duration.exact


def _targets(content: Content) -> Iterator[str]:
    for target in content.targets:
        if target.is_against_the_measure:
            good = "low" if target.asked.low_is_good else "high"
            yield (
                f"target {target.id}: `{target.direction}` on {quote(target.measure)}, where {good} is good: "
                "check the direction."
            )
        acting = any(unit.may_act_needlessly for unit in content.units.values())
        if target.measure == "spurious_failures_per_year" and not acting:
            yield f"target {target.id}: no failure mode acts needlessly, so it is 0."
    if content.mission is None:
        yield "No `mission`: measures that need a time are given only for times that are asked."
