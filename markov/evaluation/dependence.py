"""What ties the units of a plant together or spoils a takeover, and the plant with one of these made perfect.

Arithmetic of independent blocks takes every unit to fail and to be repaired by itself, every takeover to succeed at
once and every fault to be known.  A dependence is one way in which a spec departs from that.  Made perfect means: the
rate at which each unit fails on duty stays what it is, and only this one departure is taken away.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from functools import partial
from typing import Any

from markov.model import Crew, Group, InitialFaults, Model, ProofTest, SparesPool, Unit
from markov.quantities import Quantity, parse_quantity
from markov.states import Plan

_MOMENT = parse_quantity("1 s")


@dataclass(frozen=True)
class Dependence:
    """One departure from independent blocks.

    Attributes
    ----------
    name : str
        Fixed name, one of `DEPENDENCES`.
    where : tuple of str
        Groups, units, crew pools, tests or other parts of the spec that have it.
    without : callable
        Model -> the same model with this made perfect and all else as it was.
    """

    name: str
    where: tuple[str, ...]
    without: Callable[[Model], Model]


def dependences_of(model: Model, plan: Plan) -> tuple[Dependence, ...]:
    """List the dependences that a model has.

    Parameters
    ----------
    model : Model
    plan : Plan
        What the chain was generated from; parts of the spec that are not in the chain are passed over.
    """
    found = []
    for name, (find, without) in _RULES.items():
        where = tuple(dict.fromkeys(find(model, plan)))
        if where:
            found.append(Dependence(name, where, partial(_without_pools, where) if without is None else without))
    return tuple(found)


def without_all(model: Model, dependences: Iterable[Dependence]) -> Model:
    """Return the model with several dependences made perfect at once."""
    for each in dependences:
        model = each.without(model)
    return model


def changed(model: Model, **update: object) -> Model:
    """Return a copy of a model with some keys changed, and nothing kept that was worked out from the old ones."""
    copy = model.model_copy(update=update)
    for key in [key for key in copy.__dict__ if key not in type(copy).model_fields]:
        del copy.__dict__[key]
    return copy


def relieved(crew: Crew, unit: str) -> Crew:
    """Return a crew pool that no longer repairs a unit; its `repairs` may be empty then."""
    update: dict[str, object] = {"repairs": tuple(name for name in crew.repairs if name != unit)}
    if crew.priority is not None:
        update["priority"] = tuple(name for name in crew.priority if name != unit)
    return crew.model_copy(update=update)


# --- groups: coverage, takeover, switch, deferral, load ---------------------------------------------------------------


def _groups(model: Model, plan: Plan, has: Callable[[Group], bool]) -> list[str]:
    return [name for name, group in model.groups.items() if plan.holds(name) and has(group)]


def _each_group(model: Model, change: Callable[[Group], Mapping[str, object]]) -> Model:
    groups = {name: group.model_copy(update=dict(change(group))) for name, group in model.groups.items()}
    return changed(model, groups=groups)


def _switchover_changed(group: Group, **update: object) -> dict[str, object]:
    return {} if group.switchover is None else {"switchover": group.switchover.model_copy(update=update)}


def _uncovered(model: Model, plan: Plan) -> list[str]:
    return _groups(
        model,
        plan,
        lambda group: group.size > group.required and any(each.complement != 0 for each in group.coverage_list),
    )


def _covered(model: Model) -> Model:
    return _each_group(model, lambda group: {"coverage": None, **_switchover_changed(group, coverage=None)})


def _slow_takeovers(model: Model, plan: Plan) -> list[str]:
    return _groups(
        model,
        plan,
        lambda group: (
            group.size > group.required and group.takeover_time is not None and not group.takeover_time.is_zero
        ),
    )


def _quick_takeovers(model: Model) -> Model:
    return _each_group(model, lambda group: _switchover_changed(group, time=None, stages=1))


def _switches(model: Model, plan: Plan) -> list[str]:
    return _groups(model, plan, lambda group: group.switch is not None and not group.is_active)


def _perfect_switches(model: Model) -> Model:
    """Take switches out, and the tests of them."""
    switches = {f"{name}.switch" for name, group in model.groups.items() if group.switch is not None}
    tests = {
        name: test.model_copy(update={"of": of})
        for name, test in model.tests.items()
        if (of := tuple(each for each in test.of if each not in switches))
    }
    return changed(_each_group(model, lambda group: _switchover_changed(group, switch=None)), tests=tests)


def _deferring(model: Model, plan: Plan) -> list[str]:
    return _groups(model, plan, lambda group: group.is_deferred)


def _repaired_at_once(model: Model) -> Model:
    return _each_group(model, lambda _: {"repair_when": "at_once"})


def _stopping_for_repair(model: Model, plan: Plan) -> list[str]:
    return _groups(model, plan, lambda group: group.offline_repair)


def _repaired_in_service(model: Model) -> Model:
    return _each_group(model, lambda _: {"offline_repair": False})


def _sharing_load(model: Model, plan: Plan) -> list[str]:
    return _groups(model, plan, lambda group: group.load_sharing is not None)


def _same_load(model: Model) -> Model:
    return _each_group(model, lambda _: {"load_sharing": None})


def _heeding_the_system(model: Model, plan: Plan) -> list[str]:
    found = ["system"] if model.while_down != "continue" else []
    return found + _groups(model, plan, lambda group: group.while_down not in (None, "continue"))


def _going_on(model: Model) -> Model:
    return changed(_each_group(model, lambda _: {"while_down": None}), while_down="continue")


# --- units: starts, hidden faults, needless action --------------------------------------------------------------------


def _units(model: Model, plan: Plan, has: Callable[[Unit], bool]) -> list[str]:
    return [name for name, unit in model.units.items() if has(unit) and plan.places_of(name)]


def _each_unit(model: Model, change: Callable[[Unit], Mapping[str, object]]) -> Model:
    units = {name: unit.model_copy(update=dict(change(unit))) for name, unit in model.units.items()}
    return changed(model, units=units)


def _modes_changed(unit: Unit, **update: object) -> dict[str, Any]:
    return {name: mode.model_copy(update=update) for name, mode in unit.failure_modes.items()}


def _failing_starts(model: Model, plan: Plan) -> list[str]:
    waiting = {slot.unit for layout in plan.islands for slot in layout.slots if slot.duty >= 0}
    may_fail = _units(model, plan, lambda unit: unit.start_failure is not None and not unit.start_failure.is_zero)
    return [name for name in may_fail if name in waiting]


def _sure_starts(model: Model) -> Model:
    return _each_unit(model, lambda _: {"start_failure": None})


def _hiding(model: Model, plan: Plan) -> list[str]:
    latent = _groups(
        model, plan, lambda group: group.switch is not None and group.switch.may_hide and not group.is_active
    )
    return _units(model, plan, lambda unit: unit.may_hide) + [f"{name}.switch" for name in latent]


def _all_known(model: Model) -> Model:
    """Let every fault be known at once, those at the start included."""
    known = _each_unit(model, lambda unit: {"detected": None, "failure_modes": _modes_changed(unit, detected=None)})
    known = _each_group(
        known,
        lambda group: (
            {}
            if group.switch is None
            else _switchover_changed(group, switch=group.switch.model_copy(update={"latent": False}))
        ),
    )
    return changed(known, initial={name: _known(faults) for name, faults in model.initial.items()})


def _known(faults: InitialFaults) -> InitialFaults:
    return faults.model_copy(update={"failed": faults.failed + faults.hidden, "hidden": 0})


def _acting(model: Model, plan: Plan) -> list[str]:
    return _units(model, plan, lambda unit: unit.may_act_needlessly)


def _never_acting(model: Model) -> Model:
    return _each_unit(model, lambda unit: {"failure_modes": _modes_changed(unit, effect="fails_to_act")})


# --- what serves several groups: crews, causes, spares ----------------------------------------------------------------


def _short_pools(plan: Plan) -> list[str]:
    return [pool.name for pool in (*plan.pools, *plan.desk_pools)]


def _is_shared(model: Model, plan: Plan, crew: Crew) -> bool:
    """Tell whether a pool serves several groups of the chain."""
    served = {place.name for place in model.placements if place.unit in crew.repairs and plan.places_of(place.unit)}
    return len(served) > 1


def _shared_crews(model: Model, plan: Plan) -> list[str]:
    return [name for name in _short_pools(plan) if _is_shared(model, plan, model.crews[name])]


def _too_few_crews(model: Model, plan: Plan) -> list[str]:
    return [name for name in _short_pools(plan) if not _is_shared(model, plan, model.crews[name])]


def _without_pools(pools: tuple[str, ...], model: Model) -> Model:
    """Give every unit of some pools a crew of its own."""
    return changed(model, crews={name: crew for name, crew in model.crews.items() if name not in pools})


def _striking(model: Model, plan: Plan) -> list[str]:
    return [
        name
        for name, cause in model.common_causes.items()
        if any(plan.places_of(place.unit) for place in model.placements_struck(cause))
    ]


def _no_common_causes(model: Model) -> Model:
    return changed(model, common_causes={})


def _waiting_for_spares(model: Model, plan: Plan) -> list[str]:
    return [name for name, pool in model.spares.items() if any(plan.places_of(unit) for unit in pool.for_)]


def _spares_at_hand(model: Model) -> Model:
    """Let a spare always be there: what is left of a repair is the delay before it and the exchange, without a crew."""
    units, crews = dict(model.units), dict(model.crews)
    at_once: set[str] = set()
    for pool in model.spares.values():
        for name in pool.for_:
            units[name], instantly = _exchanged(model.units[name], pool)
            at_once |= {name} if instantly else set()
            crews = {key: relieved(crew, name) for key, crew in crews.items()}
    initial = {
        key: faults.model_copy(update={"failed": 0}) if key.rsplit(".", 1)[-1] in at_once else faults
        for key, faults in model.initial.items()
    }
    return changed(
        model,
        units=units,
        crews={key: crew for key, crew in crews.items() if crew.repairs},
        spares={},
        initial={key: faults for key, faults in initial.items() if faults.failed or faults.hidden},
    )


def _exchanged(unit: Unit, pool: SparesPool) -> tuple[Unit, bool]:
    """Return a unit whose repair is the exchange by a spare at hand, and whether that takes no time at all."""
    swap, delay = pool.swap_time, unit.logistic_delay
    if swap is None or swap.is_zero:  # the delay alone, if there is one; a moment, so that the fault still is a fault
        swap, delay = (_MOMENT if delay is None or delay.is_zero else delay), None
    update: dict[str, Quantity | int | dict[str, Any] | None] = {
        "repair_time": swap,
        "repair_rate": None,
        "repair_stages": 1,
        "repair_success": None,
        "logistic_delay": delay,
        "failure_modes": _modes_changed(unit, repair_time=None),
    }
    return unit.model_copy(update=update), swap.is_zero


# --- fixed instants: tests, phases ------------------------------------------------------------------------------------


def _tests(model: Model, plan: Plan, has: Callable[[ProofTest], bool]) -> list[str]:
    return [
        name
        for name, test in model.tests.items()
        if has(test)
        and (
            any(plan.places_of(place.unit) for key in test.of for place in model.placements_meant(key))
            or any((group := model.switch_meant(key)) is not None and plan.holds(group) for key in test.of)
        )
    ]


def _each_test(model: Model, **update: object) -> Model:
    return changed(model, tests={name: test.model_copy(update=update) for name, test in model.tests.items()})


def _overlooking(model: Model, plan: Plan) -> list[str]:
    return _tests(model, plan, lambda test: test.coverage is not None and test.coverage.complement != 0)


def _finding_all(model: Model) -> Model:
    return _each_test(model, coverage=None)


def _lasting(model: Model, plan: Plan) -> list[str]:
    return _tests(model, plan, lambda test: test.takes_out)


def _lasting_no_time(model: Model) -> Model:
    return _each_test(model, duration=None)


def _leaving_out(model: Model, plan: Plan) -> list[str]:
    return _tests(model, plan, lambda test: test.left_out is not None and not test.left_out.is_zero)


def _put_back(model: Model) -> Model:
    return _each_test(model, left_out=None)


def _harming(model: Model, plan: Plan) -> list[str]:
    return _tests(model, plan, lambda test: test.causes_failure is not None and not test.causes_failure.is_zero)


def _harmless(model: Model) -> Model:
    return _each_test(model, causes_failure=None)


def _idle_phases(model: Model, plan: Plan) -> list[str]:
    return [phase.name for phase in model.phases if not phase.repair]


def _repaired_in_all_phases(model: Model) -> Model:
    return changed(model, phases=tuple(phase.model_copy(update={"repair": True}) for phase in model.phases))


#: How each is found, and how it is made perfect; None: the crew pools found are taken out.
_RULES: dict[str, tuple[Callable[[Model, Plan], list[str]], Callable[[Model], Model] | None]] = {
    "imperfect_coverage": (_uncovered, _covered),
    "start_failures": (_failing_starts, _sure_starts),
    "switchover_time": (_slow_takeovers, _quick_takeovers),
    "switch_faults": (_switches, _perfect_switches),
    "shared_crews": (_shared_crews, None),
    "too_few_crews": (_too_few_crews, None),
    "common_causes": (_striking, _no_common_causes),
    "hidden_faults": (_hiding, _all_known),
    "needless_action": (_acting, _never_acting),
    "test_coverage": (_overlooking, _finding_all),
    "test_duration": (_lasting, _lasting_no_time),
    "left_out_after_tests": (_leaving_out, _put_back),
    "harm_by_tests": (_harming, _harmless),
    "waiting_for_spares": (_waiting_for_spares, _spares_at_hand),
    "deferred_repair": (_deferring, _repaired_at_once),
    "phases_without_repair": (_idle_phases, _repaired_in_all_phases),
    "repair_out_of_service": (_stopping_for_repair, _repaired_in_service),
    "load_sharing": (_sharing_load, _same_load),
    "while_down": (_heeding_the_system, _going_on),
}

#: Names of all dependences, in the order in which they are listed.
DEPENDENCES = tuple(_RULES)
