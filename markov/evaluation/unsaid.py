"""Choices that a spec leaves unsaid, as far as they are able to change its result."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model import CommonCause, Crew, Group, Model, Phase, ProofTest, SparesPool, Switch, Unit
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
        for name, spares in model.spares.items():
            found += _of_spares(name, spares, model, plan)
        for name, test in model.tests.items():
            found += _of_a_test(name, test)
        for name, cause in model.common_causes.items():
            found += _of_a_cause(name, cause, model)
        for phase in model.phases:
            found += _of_a_phase(phase, phase is model.phases[-1], model)
    return tuple(found)


def _of_the_whole(model: Model) -> Iterator[str]:
    if "year" not in model.model_fields_set:
        yield "year: 8760 h (365 days; 8766 h is the other convention)"


def _of_the_system(model: Model, plan: Plan) -> Iterator[str]:
    inside = set(model.named_in_any_phase)
    silent = [
        node.name
        for layout in plan.islands
        for node in layout.nodes
        if node.name in inside
        and not (node.name in model.groups and model.groups[node.name].while_down is not None)
        and any(slot.failure is not None for slot in layout.slots)
        and (len(plan.islands) > 1 or len(layout.nodes) > 1 or _can_fail_while_down(plan, node.name))
    ]
    if "while_down" not in model.model_fields_set and silent:
        yield "while_down: continue (units go on failing at their present rate while the system is down)"
    slots = [slot for layout in plan.islands for slot in layout.slots]
    if any(slot.failure is not None and any(lane.repair or lane.stock >= 0 for lane in slot.lanes) for slot in slots):
        if model.restoration is None:
            yield "restoration: unit by unit (the system is restored by the repair of its units)"
        found = [group for name, group in model.groups.items() if plan.holds(name)]
        if not found or not all(group.is_said("repair_when") for group in found):
            yield "repair_when: at once (repair begins at the fault, no deferral)"
    if "initial" not in model.model_fields_set:
        yield "initial: all good (every unit good at time zero, duty filled by rank)"
    if model.restoration is not None and not model.restoration.is_said("to"):
        yield "restoration.to: all_good (every unit and every switch, hidden faults included)"
    several = any(slot.count > 1 for slot in slots) or len(slots) > 1
    if several and not model.common_causes:
        yield "common_causes: none (no shared cause of failure; rarely credible for redundant units)"


def _can_fail_while_down(plan: Plan, island: str) -> bool:
    """Tell whether a group that is the whole system can lose further units once it is down."""
    number = plan.island(island)
    if number is None:
        return False
    node = plan.islands[number].nodes[0]
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
    elif group.is_active and redundant and group.takeover_time is None:
        yield f"{where}.switchover.time: 0 h (a covered fault does not interrupt the group)"
    timed = group.takeover_time is not None and not group.takeover_time.is_zero
    shaped = group.takeover_shape is not None
    if timed and not shaped and group.switchover is not None and not group.switchover.is_said("stages"):
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
    if group.switch is not None:
        yield from _of_a_switch(f"{where}.switchover.switch", group.switch)


def _of_a_switch(where: str, switch: Switch) -> Iterator[str]:
    if switch.failure_on_demand is None:
        yield f"{where}.failure_on_demand: 0 (it never refuses while it is in order)"
    if switch.failure_rate is None:
        yield f"{where}.failure_rate: never (it does not fail by itself)"
    elif not switch.is_said("latent"):
        yield f"{where}.latent: false (a fault of the switch is known at once)"
    if switch.repair_time is None:
        yield f"{where}.repair_time: none (never repaired; a refusal leaves the switch as it was)"
    if switch.false_operation_rate is None:
        yield f"{where}.false_operation_rate: never (it starts no standby that nobody called)"


def _of_a_unit(unit: str, model: Model, plan: Plan) -> Iterator[str]:
    kind = model.units[unit]
    where = f"units.{unit}"
    slots = [plan.islands[island].slots[number] for island, number in plan.places_of(unit)]
    if all(slot.failure is None for slot in slots):
        return
    yield from _of_modes(where, kind)
    waits = any(slot.duty >= 0 for slot in slots)
    if waits and kind.start_failure is None:
        yield f"{where}.start_failure: 0 (every start succeeds)"
    spared = model.pool_of_spares(unit) is not None
    if kind.repair is None and any(mode.repair is None for mode in kind.modes()):
        told = "a failed unit is scrapped, a spare takes its place" if spared else "never repaired"
        yield f"{where}.repair_time: none ({told})"
    takes_time = any(mode.repairable and not mode.repaired_at_once for mode in kind.modes())
    unshaped = any(mode.repairable and not mode.repaired_at_once and not mode.repair_shape for mode in kind.modes())
    if unshaped and not kind.is_said("repair_stages"):
        yield f"{where}.repair_stages: 1 (repair times are exponential)"
    if (takes_time or spared) and kind.logistic_delay is None:
        called = "spare is drawn" if spared else "crew is called"
        yield f"{where}.logistic_delay: 0 h (the {called} at the fault)"
    if takes_time and not any(unit in crew.repairs for crew in model.crews.values()):
        yield f"crews: one crew per unit for {unit} (its repairs never wait)"


def _of_modes(where: str, kind: Unit) -> Iterator[str]:
    """List what is unsaid about how a fault shows."""
    modes = kind.failure_modes.values()
    if not kind.is_said("detected") and not (modes and all(mode.is_said("detected") for mode in modes)):
        yield f"{where}.detected: 100 % (every fault is revealed at once)"
    for name, mode in kind.failure_modes.items():
        if not mode.is_said("effect"):
            yield f"{where}.failure_modes.{name}.effect: fails_to_act (the unit does not deliver)"
        if not mode.is_said("detected") and kind.detected is not None:
            yield f"{where}.failure_modes.{name}.detected: {kind.detected.text} (that of the unit)"
        if mode.repair_time is None and kind.repair is not None and len(kind.failure_modes) > 1:
            yield f"{where}.failure_modes.{name}.repair_time: {kind.repair.text} (the repair of the unit)"
    if kind.may_hide and not kind.is_said("revealed_by"):
        yield f"{where}.revealed_by: test (neither a demand nor a failure of the system reveals a hidden fault)"


def _of_a_crew(name: str, crew: Crew, plan: Plan) -> Iterator[str]:
    pool = next((pool for pool in (*plan.pools, *plan.desk_pools) if pool.name == name), None)
    if pool is None or len(pool.kinds) < 2:
        return
    if not crew.is_said("queue"):
        yield f"crews.{name}.queue: priority (the most urgent unit is next, whoever waits longest)"
    if crew.queue == "first_come":
        return
    if crew.priority is None:
        yield f"crews.{name}.priority: {', '.join(crew.order)} (the order of `repairs`)"
    if "preemptive" not in crew.model_fields_set:
        yield f"crews.{name}.preemptive: true (a repair gives way to one of higher priority)"


def _of_spares(name: str, pool: SparesPool, model: Model, plan: Plan) -> Iterator[str]:
    drawing = [unit for unit in pool.for_ if plan.places_of(unit)]
    if not drawing:
        return
    where = f"spares.{name}"
    if pool.swap_time is None:
        yield f"{where}.swap_time: 0 h (the exchange takes no time)"
    if all(model.units[unit].ever_repaired for unit in drawing):
        return  # nothing is ever ordered
    if not pool.is_said("order"):
        yield f"{where}.order: when_drawn (a spare is ordered when one leaves the stock)"
    if not pool.is_said("batch"):
        yield f"{where}.batch: 1 (spares are ordered one by one)"


def _of_a_test(name: str, test: ProofTest) -> Iterator[str]:
    where = f"tests.{name}"
    if test.first_at is None:
        yield f"{where}.first_at: {test.interval.text} (the first test is after one interval)"
    if test.coverage is None:
        yield f"{where}.coverage: 100 % (it finds every hidden fault)"
    if test.duration is None:
        yield f"{where}.duration: 0 h (the test takes no time)"
    if test.lasts and not test.is_said("in_service"):
        yield f"{where}.in_service: false (the unit does not deliver during the test)"
    if test.takes_out and not test.is_said("bypass"):
        yield f"{where}.bypass: false (the group needs as many units during the test as ever)"
    if test.left_out is None:
        yield f"{where}.left_out: 0 (the unit is always put back into service)"
    if test.causes_failure is None:
        yield f"{where}.causes_failure: 0 (the test does no harm)"


def _of_a_cause(name: str, cause: CommonCause, model: Model) -> Iterator[str]:
    where = f"common_causes.{name}"
    struck = model.placements_struck(cause)
    groups = [model.groups[place.group] for place in struck if place.group is not None]
    if not cause.is_said("exposed") and any(not group.is_active for group in groups):
        yield f"{where}.exposed: all (units that wait are struck, too, cold standbys included)"
    hiding = any(model.units[place.unit].may_hide for place in struck)
    if cause.beta is not None and cause.beta_detected is None and hiding:
        yield f"{where}.beta_detected: {cause.beta.text} (the same for faults that are known at once)"


def _of_a_phase(phase: Phase, last: bool, model: Model) -> Iterator[str]:
    where = f"phases.{phase.name}"
    if not phase.is_said("rate_factors"):
        yield f"{where}.rate_factors: 1 (units fail at their own rates)"
    repaired = any(unit.ever_repaired for unit in model.units.values()) or model.restoration is not None
    if repaired and not phase.is_said("repair"):
        yield f"{where}.repair: true (crews work in this phase)"
    if last and not phase.is_said("repeat"):
        yield f"{where}.repeat: false (the last phase goes on)"
