"""Other choices than those a spec leaves unsaid: what each would do, in words, and an example to solve."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from markov.evaluation.dependence import changed
from markov.model import CommonCause, Crew, Group, Model, ProofTest, SparesPool, Switchover, Unit
from markov.quantities import Quantity, parse_quantity

Change = Callable[[Model], Model]


@dataclass(frozen=True)
class Example:
    """Another choice: in words, and what makes a model have it; whether it ties all groups to the whole system."""

    words: str
    change: Change
    couples: bool = False


_Told = tuple[str, Example | None]


def other_choice(model: Model, choice: str) -> tuple[str, Example | None]:
    """Tell in which direction another choice moves the results, with an example where there is one to be solved.

    Parameters
    ----------
    model : Model
    choice : str
        A choice left unsaid, as a solution lists it.
    """
    for pattern, tell in _RULES:
        match = re.match(pattern, choice, re.DOTALL)
        if match is not None and _is_there(model, choice, match.groups()):
            return tell(model, *match.groups())
    return "Depends on the plant; either direction.", None


def _is_there(model: Model, choice: str, found: tuple[str, ...]) -> bool:
    """Tell whether the name found in a choice is one of the spec: names may hold what looks like a key."""
    if not found:
        return True
    top = "units" if choice.startswith("crews: ") else choice.split(".", 1)[0]
    every: Mapping[str, object] = (
        {phase.name: phase for phase in model.phases} if top == "phases" else getattr(model, top)
    )
    return found[0] in every


def _q(text: str) -> Quantity:
    return parse_quantity(text)


def _in_group(model: Model, name: str, change: Callable[[Group], Group]) -> Model:
    return changed(model, groups={**model.groups, name: change(model.groups[name])})


def _group(name: str, **update: object) -> Change:
    return lambda model: _in_group(model, name, lambda group: group.model_copy(update=update))


def _switchover(name: str, **update: object) -> Change:
    """Change the switchover of a group, which gets one if it has none; a short coverage moves into it."""

    def change(group: Group) -> Group:
        held = group.switchover or Switchover.model_construct(coverage=group.coverage)
        return group.model_copy(update={"switchover": held.model_copy(update=update), "coverage": None})

    return lambda model: _in_group(model, name, change)


def _switch(name: str, **update: object) -> Change:
    def change(group: Group) -> Group:
        held = group.switchover
        if held is None or held.switch is None:
            return group
        return group.model_copy(
            update={"switchover": held.model_copy(update={"switch": held.switch.model_copy(update=update)})}
        )

    return lambda model: _in_group(model, name, change)


def _unit(name: str, **update: object) -> Change:
    def change(model: Model) -> Model:
        unit: Unit = model.units[name]
        return changed(model, units={**model.units, name: unit.model_copy(update=update)})

    return change


def _crew(name: str, **update: object) -> Change:
    def change(model: Model) -> Model:
        crew: Crew = model.crews[name]
        return changed(model, crews={**model.crews, name: crew.model_copy(update=update)})

    return change


def _pool(name: str, **update: object) -> Change:
    def change(model: Model) -> Model:
        pool: SparesPool = model.spares[name]
        return changed(model, spares={**model.spares, name: pool.model_copy(update=update)})

    return change


def _test(name: str, **update: object) -> Change:
    def change(model: Model) -> Model:
        test: ProofTest = model.tests[name]
        return changed(model, tests={**model.tests, name: test.model_copy(update=update)})

    return change


def _year(model: Model) -> _Told:
    return (
        "With 8766 h, numbers per year grow by 0.07 %, and so do times that the spec gives in years.",
        None,
    )


def _while_down(model: Model) -> _Told:
    words = "units that stop failing while the system is down"
    stop = Example(words, lambda model: changed(model, while_down="stop"), couples=True)
    return "Units that rest while the system is down leave less to repair: down times get shorter.", stop


def _restoration(model: Model) -> _Told:
    return "A restoration of the whole plant ends a failure at its own time in place of the next repair.", None


def _restored(model: Model) -> _Told:
    return "Faults left behind by a restoration bring the next failure nearer.", None


def _repair_when(model: Model) -> _Told:
    def change(model: Model) -> Model:
        deferred = {
            name: group if group.is_said("repair_when") else group.model_copy(update={"repair_when": "system_down"})
            for name, group in model.groups.items()
        }
        return changed(model, groups=deferred)

    example = None if model.trains else Example("repair that begins once the system is down", change, couples=True)
    return "A repair that is put off leaves less redundancy meanwhile: results get worse.", example


def _initial(model: Model) -> _Told:
    return (
        "Faults at time zero make values at a time worse; long-run values stay, unless the plant can end in several "
        "ways.",
        None,
    )


def _common_causes(model: Model) -> _Told:
    words = "Each shared cause makes units fail together in spite of redundancy: results get worse, often by far."
    causes = {
        f"within {name}": CommonCause.model_construct(
            _fields_set={"members", "beta", "basis"}, members=(name,), beta=_q("2 %"), basis="lowest"
        )
        for name, group in model.groups.items()
        if group.size > 1 and not any(member.is_group for member in group.members) and name not in model.trains
        if all(_can_fail(model, member.name) for member in group.members)
    }
    if not causes:
        return words, None
    return words, Example(
        "2 % of each failure rate shared within each group", lambda model: changed(model, common_causes=causes)
    )


def _can_fail(model: Model, unit: str) -> bool:
    return unit in model.units and not model.units[unit].failure.is_zero


def _coverage(model: Model, group: str) -> _Told:
    words = "A fault that the takeover does not cope with defeats redundancy at once: results get worse."
    return words, Example("a coverage of 99 %", _switchover(group, coverage=(_q("99 %"),)))


def _uncovered(model: Model, group: str) -> _Told:
    return (
        "Someone who starts a standby, or a restart, ends an uncovered outage sooner; a loss for good never ends it.",
        None,
    )


def _takeover_time(model: Model, group: str) -> _Told:
    words = "A takeover that takes time is down time at every duty fault, where no other unit fills the need."
    return words, Example("a takeover of 1 min", _switchover(group, time=_q("1 min")))


def _takeover_stages(model: Model, group: str) -> _Told:
    words = "A more regular switchover time changes little unless it competes with repairs."
    return words, Example("takeovers of 3 stages", _switchover(group, stages=3))


def _preferred(model: Model, group: str) -> _Told:
    words = (
        "Duty that returns needs one more start attempt after each repair; the preferred unit carries more of the duty."
    )
    return words, Example("duty that returns to the member listed first", _group(group, return_to_preferred=True))


def _after_repair(model: Model, group: str) -> _Told:
    words = "A repaired unit that has to start may fail to: results get worse where starts fail or take time."
    return words, Example("repaired units that have to start", _group(group, after_repair="start_again"))


def _refusal(model: Model, group: str) -> _Told:
    words = "A switch that refuses defeats the takeover: results get worse."
    return words, Example("1 % refusals", _switch(group, failure_on_demand=_q("1 %")))


def _switch_rate(model: Model, group: str) -> _Told:
    return "A switch that fails by itself blocks takeovers until it is repaired: results get worse.", None


def _switch_latent(model: Model, group: str) -> _Told:
    return "A fault of the switch that nobody knows of waits for the call or a test: results get worse.", None


def _switch_repair(model: Model, group: str) -> _Told:
    return "A switch that is repaired blocks takeovers for a while and not for good.", None


def _false_operation(model: Model, group: str) -> _Told:
    return "Starts that nobody called for wear on standbys and may fail: results get slightly worse.", None


def _detected(model: Model, unit: str) -> _Told:
    return (
        "A fault that stays hidden is neither repaired nor taken over until something reveals it: results get worse.",
        None,
    )


def _mode_effect(model: Model, unit: str, mode: str) -> _Told:
    return "A unit that acts without being asked counts as down and is counted apart from failures on demand.", None


def _mode_repair(model: Model, unit: str, mode: str) -> _Told:
    return "Longer repairs of this mode add down time in proportion to its share.", None


def _revealed_by(model: Model, unit: str) -> _Told:
    return (
        "A demand, or a failure of the system, that reveals hidden faults shortens their stay: results get better.",
        None,
    )


def _start_failure(model: Model, unit: str) -> _Told:
    words = "A start that fails costs a standby at the moment of need: results get worse."
    return words, Example("1 % failed starts", _unit(unit, start_failure=_q("1 %")))


def _no_repair(model: Model, unit: str) -> _Told:
    return "With a repair, long-run values and values late in the mission get better.", None


def _repair_stages(model: Model, unit: str) -> _Told:
    words = "More regular repair times change what happens while several units are failed; means stay."
    return words, Example("repairs of 3 stages", _unit(unit, repair_stages=3))


def _delay(model: Model, unit: str) -> _Told:
    words = "A delay before each repair adds to the time without redundancy: results get worse."
    return words, Example("a mean delay of 8 h", _unit(unit, logistic_delay=_q("8 h")))


def _one_crew(model: Model, unit: str) -> _Told:
    def change(model: Model) -> Model:
        name = "the one crew"
        while name in model.crews:
            name += "."
        crew = Crew.model_construct(_fields_set={"size", "repairs"}, size=1, repairs=(unit,))
        return changed(model, crews={**model.crews, name: crew})

    return "Repairs that wait for a crew last longer: results get worse.", Example("one crew for all of them", change)


def _queue(model: Model, crew: str) -> _Told:
    words = "Served as they come, urgent units wait longer and others less."
    return words, Example("first come, first served", _crew(crew, queue="first_come", priority=None))


def _priority(model: Model, crew: str) -> _Told:
    order = tuple(reversed(model.crews[crew].order)) if crew in model.crews else ()
    words = "Units served later wait longer; which order is best depends on what each of them means to the system."
    return words, Example("the reverse order", _crew(crew, priority=order))


def _preemptive(model: Model, crew: str) -> _Told:
    words = "Where a repair begun is finished, urgent units wait longer."
    return words, Example("repairs that are finished once begun", _crew(crew, preemptive=False))


def _swap(model: Model, pool: str) -> _Told:
    words = "An exchange that takes time adds to every repair: results get worse."
    return words, Example("a mean exchange of 8 h", _pool(pool, swap_time=_q("8 h")))


def _order(model: Model, pool: str) -> _Told:
    words = "Spares ordered at every fault arrive sooner while the stock is empty: results get better."
    return words, Example("orders at every fault", _pool(pool, order="when_failed"))


def _batch(model: Model, pool: str) -> _Told:
    words = "Orders put together leave the stock empty more often: results get worse."
    return words, Example("orders of two", _pool(pool, batch=2))


def _first_test(model: Model, test: str) -> _Told:
    return "Long-run values stay, unless tests are staggered by it; values before and around the first test move.", None


def _test_coverage(model: Model, test: str) -> _Told:
    words = "Hidden faults that no test finds add up over the years: results get worse."
    return words, Example("tests that find 90 %", _test(test, coverage=_q("90 %")))


def _test_duration(model: Model, test: str) -> _Told:
    words = "A test that takes units out of service is down time of these units: results get worse."
    return words, Example("tests of 1 h", _test(test, duration=_q("1 h")))


def _in_service(model: Model, test: str) -> _Told:
    return "A unit that delivers during its test costs nothing by being tested: results get better.", None


def _left_out(model: Model, test: str) -> _Told:
    words = "A unit left out of service stays so, unnoticed, until the next test: results get worse."
    return words, Example("1 % of units left out", _test(test, left_out=_q("1 %")))


def _harm(model: Model, test: str) -> _Told:
    words = "Tests that do harm cost a repair each time: results get worse the more often is tested."
    return words, Example("1 % of units harmed", _test(test, causes_failure=_q("1 %")))


def _exposed(model: Model, cause: str) -> _Told:
    def change(model: Model) -> Model:
        struck = model.common_causes[cause].model_copy(update={"exposed": "on_duty"})
        return changed(model, common_causes={**model.common_causes, cause: struck})

    return "Waiting units that are spared by the cause can take over: results get better.", Example(
        "units on duty alone struck", change
    )


def _beta_detected(model: Model, cause: str) -> _Told:
    return "A smaller share for faults known at once takes joint faults away that would be repaired soon.", None


def _factors(model: Model, phase: str) -> _Told:
    return "Harder service in this phase makes units fail more often in it, in proportion.", None


def _phase_repair(model: Model, phase: str) -> _Told:
    def change(model: Model) -> Model:
        return changed(
            model,
            phases=tuple(
                each.model_copy(update={"repair": False}) if each.name == phase else each for each in model.phases
            ),
        )

    return "Without repair in this phase faults add up: results get worse.", Example("no repair in it", change)


def _repeat(model: Model, phase: str) -> _Told:
    return "Phases that begin again give another long run; values up to the last phase stay.", None


_RULES: tuple[tuple[str, Callable[..., _Told]], ...] = (
    (r"year: ", _year),
    (r"while_down: ", _while_down),
    (r"restoration: ", _restoration),
    (r"restoration\.to: ", _restored),
    (r"repair_when: ", _repair_when),
    (r"initial: ", _initial),
    (r"common_causes: ", _common_causes),
    (r"groups\.(.+?)\.coverage: ", _coverage),
    (r"groups\.(.+?)\.switchover\.uncovered: ", _uncovered),
    (r"groups\.(.+?)\.switchover\.time: ", _takeover_time),
    (r"groups\.(.+?)\.switchover\.stages: ", _takeover_stages),
    (r"groups\.(.+?)\.return_to_preferred: ", _preferred),
    (r"groups\.(.+?)\.after_repair: ", _after_repair),
    (r"groups\.(.+?)\.switchover\.switch\.failure_on_demand: ", _refusal),
    (r"groups\.(.+?)\.switchover\.switch\.failure_rate: ", _switch_rate),
    (r"groups\.(.+?)\.switchover\.switch\.latent: ", _switch_latent),
    (r"groups\.(.+?)\.switchover\.switch\.repair_time: ", _switch_repair),
    (r"groups\.(.+?)\.switchover\.switch\.false_operation_rate: ", _false_operation),
    (r"units\.(.+?)\.failure_modes\.(.+?)\.effect: ", _mode_effect),
    (r"units\.(.+?)\.failure_modes\.(.+?)\.repair_time: ", _mode_repair),
    (r"units\.(.+?)(?:\.failure_modes\..+)?\.detected: ", _detected),
    (r"units\.(.+?)\.revealed_by: ", _revealed_by),
    (r"units\.(.+?)\.start_failure: ", _start_failure),
    (r"units\.(.+?)\.repair_time: ", _no_repair),
    (r"units\.(.+?)\.repair_stages: ", _repair_stages),
    (r"units\.(.+?)\.logistic_delay: ", _delay),
    (r"crews: one crew per unit for (.+) \(its repairs never wait\)", _one_crew),
    (r"crews\.(.+?)\.queue: ", _queue),
    (r"crews\.(.+?)\.priority: ", _priority),
    (r"crews\.(.+?)\.preemptive: ", _preemptive),
    (r"spares\.(.+?)\.swap_time: ", _swap),
    (r"spares\.(.+?)\.order: ", _order),
    (r"spares\.(.+?)\.batch: ", _batch),
    (r"tests\.(.+?)\.first_at: ", _first_test),
    (r"tests\.(.+?)\.coverage: ", _test_coverage),
    (r"tests\.(.+?)\.duration: ", _test_duration),
    (r"tests\.(.+?)\.(?:in_service|bypass): ", _in_service),
    (r"tests\.(.+?)\.left_out: ", _left_out),
    (r"tests\.(.+?)\.causes_failure: ", _harm),
    (r"common_causes\.(.+?)\.exposed: ", _exposed),
    (r"common_causes\.(.+?)\.beta_detected: ", _beta_detected),
    (r"phases\.(.+?)\.rate_factors: ", _factors),
    (r"phases\.(.+?)\.repair: ", _phase_repair),
    (r"phases\.(.+?)\.repeat: ", _repeat),
)
