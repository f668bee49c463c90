"""What is legal in a spec, yet likely not what its author means."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from markov.model.content import Content
from markov.model.faults import choices, quote
from markov.model.units import Unit
from markov.quantities import Quantity

#: Two values closer than this, relative, and not equal, are called nearly alike.
NEARLY = Fraction(1, 100)
_MOST_COMPARED = 200
_PLAUSIBLE_YEAR = (Fraction(8000), Fraction(9000))


def cautions(content: Content) -> tuple[str, ...]:
    """Return all cautions about a spec that is in order, each as one sentence."""
    rules = (_years, _parameters, _rates, _alike, _unused, _groups, _crews, _targets)
    return tuple(dict.fromkeys(text for rule in rules for text in rule(content)))


def _years(content: Content) -> Iterator[str]:
    low, high = _PLAUSIBLE_YEAR
    if not low <= content.year_hours <= high:
        yield f"year: {content.year.text} is far from 8760 h."


def _quantities(content: Content) -> Iterator[tuple[str, Quantity]]:
    """Yield every quantity of a spec outside of `parameters`, with its place."""
    for name, unit in content.units.items():
        for key in type(unit).model_fields:
            value = getattr(unit, key)
            if isinstance(value, Quantity):
                yield f"units.{name}.{key}", value
    for name, group in content.groups.items():
        for position, share in enumerate(group.coverage_list, start=1):
            yield f"groups.{name}, coverage {position}", share
        for key, each in (
            ("dormancy_factor", group.dormancy_factor),
            ("switchover.time", group.takeover_time),
            ("switchover.uncovered.time", group.outcome_time),
        ):
            if each is not None:
                yield f"groups.{name}.{key}", each
    for name, state in content.states.items():
        if state.capacity is not None:
            yield f"states.{name}.capacity", state.capacity
    for number, transition in enumerate(content.transitions, start=1):
        yield f"transitions#{number}", transition.given
    if content.mission is not None:
        yield "mission.time", content.mission.time
    for target in content.targets:
        for key in ("at", "for_", "at_least", "at_most"):
            value = getattr(target, key)
            if isinstance(value, Quantity):
                yield f"target {target.id}", value


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
        if unit.repaired_at_once and (unit.repair_stages > 1):
            yield f"units.{name}: `repair_stages` has no effect on a repair that takes no time."
    for number, transition in enumerate(content.transitions, start=1):
        if transition.hourly == 0:
            yield (
                f"transitions#{number} from {quote(transition.source)} to {quote(transition.target)}: "
                "a rate of zero, it never happens."
            )


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
    if (one.repairable, one.repaired_at_once, one.repair_stages) != (
        other.repairable,
        other.repaired_at_once,
        other.repair_stages,
    ):
        return False
    pairs = [(one.failure_hourly, other.failure_hourly)]
    if one.repairable and not one.repaired_at_once:
        pairs.append((one.repair_hourly, other.repair_hourly))
    for key in ("logistic_delay", "start_failure", "capacity"):
        first, second = getattr(one, key), getattr(other, key)
        if (first is None) != (second is None):
            return False
        if first is not None:
            pairs.append((first.exact, second.exact))
    close = all(abs(first - second) <= NEARLY * max(first, second) for first, second in pairs)
    return close and any(first != second for first, second in pairs)


def _unused(content: Content) -> Iterator[str]:
    if content.explicit:
        return
    in_system = set(content.named_in_system)
    pending = [name for name in in_system if name in content.groups]
    while pending:
        for member in content.groups[pending.pop()].members:
            if member.name not in in_system:
                in_system.add(member.name)
                if member.name in content.groups:
                    pending.append(member.name)
    pooled = {unit: name for name, crew in content.crews.items() for unit in crew.repairs}
    grouped = {place.unit for place in content.placements if place.group is not None}
    for name, group in content.groups.items():
        if name not in in_system:
            loads = any(member.name in pooled for member in group.members)
            why = "it only loads a crew" if loads else "it changes no measure of the system"
            yield f"groups.{name} is outside of `system`: {why}."
    for name in content.units:
        if name in in_system or name in grouped:
            continue
        if name in pooled:
            yield f"units.{name} is outside of `system`: it only loads the crew {quote(pooled[name])}."
        else:
            yield f"units.{name}: nothing uses this unit."


def _groups(content: Content) -> Iterator[str]:
    for name, group in content.groups.items():
        place = f"groups.{name}"
        covered = group.coverage_list
        if covered and group.size == (group.required if group.is_active else group.duty_places):
            yield f"{place}: `coverage` has no effect, there is no redundancy that a covered fault could use."
        elif len(covered) > max(group.size - 1, 1):
            yield f"{place}: of {len(covered)} coverages only the first {group.size - 1} can ever apply."
        if not group.is_active and group.size == group.duty_places:
            yield f"{place}: `{group.redundancy}`, and all {group.size} members are on duty: none ever waits at first."
        if group.takeover_stages > 1 and (group.takeover_time is None or group.takeover_time.is_zero):
            yield f"{place}: `switchover.stages` has no effect without a `time`."
        if group.is_active:
            for key, written in (
                ("return_to_preferred", group.return_to_preferred),
                ("after_repair", group.after_repair == "start_again"),
            ):
                if written:
                    yield f"{place}: `{key}` has no effect in an active group, where all good members carry duty."


def _crews(content: Content) -> Iterator[str]:
    items: dict[str, int] = {}
    for place in content.placements:
        items[place.unit] = items.get(place.unit, 0) + place.count
    for name, crew in content.crews.items():
        served = sum(items.get(unit, 0) for unit in crew.repairs)
        if crew.size > served:
            yield f"crews.{name}: a size of {crew.size} for {served} unit{'' if served == 1 else 's'}."
        idle = [unit for unit in crew.repairs if not content.units[unit].repairable]
        if idle:
            yield f"crews.{name}: {choices(idle, 'and')} never repaired, the crew is not called for it."


def _targets(content: Content) -> Iterator[str]:
    for target in content.targets:
        if target.is_against_the_measure:
            good = "low" if target.asked.low_is_good else "high"
            yield (
                f"target {target.id}: `{target.direction}` on {quote(target.measure)}, where {good} is good: "
                "check the direction."
            )
    if content.mission is None:
        yield "No `mission`: measures that need a time are given only for times that are asked."
