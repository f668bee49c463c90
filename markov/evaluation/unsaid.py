"""Choices that a spec leaves unsaid, as far as they are able to change its result."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model import Crew, Group, Model, names
from markov.states import Plan
from markov.states.layout import node_of


def unsaid_choices(model: Model, plan: Plan | None) -> tuple[str, ...]:
    """List the unsaid choices of a model, each with the value taken and what it means.

    Parameters
    ----------
    model : Model
    plan : Plan or None
        What the chain was generated from; None for a hand-written chain.
    """
    found = list(_of_the_whole(model))
    if plan is not None:
        groups = [node_of(path[-1]).name for layout in plan.islands for path in layout.groups]
        found += _of_the_system(model, plan)
        for name in groups:
            if name in model.groups:
                found += _of_a_group(name, model.groups[name], model)
        for unit in dict.fromkeys(slot.unit for layout in plan.islands for slot in layout.slots):
            found += _of_a_unit(unit, model, plan)
        for name, crew in model.crews.items():
            found += _of_a_crew(name, crew, plan)
    return tuple(found)


def _of_the_whole(model: Model) -> Iterator[str]:
    if "year" not in model.model_fields_set:
        yield "year: 8760 h (365 days; 8766 h is the other convention)"


def _of_the_system(model: Model, plan: Plan) -> Iterator[str]:
    inside = set(names(model.system)) if model.system is not None else set()
    silent = [
        layout.node.name
        for layout in plan.islands
        if layout.node.name in inside
        and not (layout.node.name in model.groups and model.groups[layout.node.name].while_down is not None)
        and any(slot.failure is not None for slot in layout.slots)
        and (len(plan.islands) > 1 or _can_fail_while_down(plan, layout.node.name))
    ]
    if "while_down" not in model.model_fields_set and silent:
        yield "while_down: continue (units go on failing at their present rate while the system is down)"
    slots = [slot for layout in plan.islands for slot in layout.slots]
    if any(slot.repair is not None and slot.failure is not None for slot in slots):
        yield "restoration: unit by unit (the system is restored by the repair of its units)"
        found = [group for name, group in model.groups.items() if plan.holds(name)]
        if not found or not all(group.is_said("repair_when") for group in found):
            yield "repair_when: at once (repair begins at the fault, no deferral)"
    if "initial" not in model.model_fields_set:
        yield "initial: all good (every unit good at time zero, duty filled by rank)"
    if any(slot.count > 1 for layout in plan.islands for slot in layout.slots) or len(plan.islands) > 1:
        yield "common_causes: none (no shared cause of failure; rarely credible for redundant units)"


def _can_fail_while_down(plan: Plan, island: str) -> bool:
    """Tell whether a group that is the whole system can lose further units once it is down."""
    number = plan.island(island)
    if number is None:
        return False
    node = plan.islands[number].node
    if node.active:
        return node.required > 1 or node.outage >= 0 or bool(node.switching)
    return node.required > 1 or not node.cold


def _of_a_group(name: str, group: Group, model: Model) -> Iterator[str]:
    where = f"groups.{name}"
    redundant = group.size > group.required
    standby = not group.is_active and group.size > group.duty_places
    if redundant and not group.coverage_list and group.size > 1:
        yield f"{where}.coverage: 1 (every duty fault that finds a substitute is covered)"
    imperfect = any(entry.complement != 0 for entry in group.coverage_list)
    said = group.switchover is not None and group.switchover.uncovered is not None
    if imperfect and redundant and not said:
        yield f"{where}.switchover.uncovered: until_repair (an uncovered fault ends with the next repair that suffices)"
    if standby and group.takeover_time is None:
        yield f"{where}.switchover.time: 0 h (a standby takes over at once)"
    timed = group.takeover_time is not None and not group.takeover_time.is_zero
    if timed and group.switchover is not None and not group.switchover.is_said("stages"):
        yield f"{where}.switchover.stages: 1 (switchover times are exponential)"
    if standby and len(group.members) > 1 and "return_to_preferred" not in group.model_fields_set:
        yield f"{where}.return_to_preferred: false (the running unit stays on duty after a repair)"
    can_refuse = any(
        (start := model.units[member.name].start_failure) is not None and not start.is_zero
        for member in group.members
        if member.name in model.units
    )
    if standby and (can_refuse or timed) and "after_repair" not in group.model_fields_set:
        yield f"{where}.after_repair: straight_to_duty (a repair ends with a functional check, so no start attempt)"


def _of_a_unit(unit: str, model: Model, plan: Plan) -> Iterator[str]:
    kind = model.units[unit]
    where = f"units.{unit}"
    slots = [plan.islands[island].slots[number] for island, number in plan.places_of(unit)]
    if all(slot.failure is None for slot in slots):
        return
    said = kind.model_fields_set
    if "detected" not in said:
        yield f"{where}.detected: 100 % (every fault is revealed at once)"
    waits = any(not plan.islands[island].node.active for island, _ in plan.places_of(unit))
    if waits and kind.start_failure is None:
        yield f"{where}.start_failure: 0 (every start succeeds)"
    if not kind.repairable:
        if kind.repair_time is None and kind.repair_rate is None:
            yield f"{where}.repair_time: none (never repaired)"
        return
    if kind.repaired_at_once:
        return
    if "repair_stages" not in said:
        yield f"{where}.repair_stages: 1 (repair times are exponential)"
    if kind.logistic_delay is None:
        yield f"{where}.logistic_delay: 0 h (the crew is called at the fault)"
    if not any(unit in crew.repairs for crew in model.crews.values()):
        yield f"crews: one crew per unit for {unit} (its repairs never wait)"


def _of_a_crew(name: str, crew: Crew, plan: Plan) -> Iterator[str]:
    pool = next((pool for pool in plan.pools if pool.name == name), None)
    if pool is None or len(pool.kinds) < 2:
        return
    if crew.priority is None:
        yield f"crews.{name}.priority: {', '.join(crew.order)} (the order of `repairs`)"
    if "preemptive" not in crew.model_fields_set:
        yield f"crews.{name}.preemptive: true (a repair gives way to one of higher priority)"
