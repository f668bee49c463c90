"""Cautions about keys that are written and have no effect."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model.content import Content
from markov.model.deferral import RepairAtFailed
from markov.model.faults import choices, quote
from markov.model.groups import Group


def idle_cautions(content: Content) -> Iterator[str]:
    """Yield cautions about keys without effect."""
    yield from _units(content)
    yield from _groups(content)
    for name, group in content.groups.items():
        yield from _repair_rules(content, f"groups.{name}", group)
        yield from _switch(f"groups.{name}", group)
    yield from _crews(content)
    yield from _spares(content)
    yield from _tests(content)
    yield from _causes(content)


def _units(content: Content) -> Iterator[str]:
    trains = content.trains
    for name, unit in content.units.items():
        homes = [(key, group) for key, group in content.groups.items() if any(m.name == name for m in group.members)]
        starts = unit.start_failure is not None and not unit.start_failure.is_zero
        if starts and homes and all(group.is_active and key not in trains for key, group in homes):
            yield f"units.{name}: `start_failure` has no effect in active groups, where nothing is ever started."
        if not all(mode.repaired_at_once for mode in unit.modes()):
            continue
        for key, written in (
            ("repair_stages", unit.repair_stages > 1),
            ("repair_success", unit.repair_success is not None and unit.repair_success.complement != 0),
        ):
            if written:
                yield f"units.{name}: `{key}` has no effect on a repair that takes no time."


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


def _repair_rules(content: Content, place: str, group: Group) -> Iterator[str]:
    inside = [content.units[member.name] for member in group.members if member.name in content.units]
    trains = any(member.is_group for member in group.members)
    spared = any(content.pool_of_spares(member.name) for member in group.members)
    if not trains and not spared and not any(unit.ever_repaired for unit in inside):
        for key, written in (("repair_when", group.is_deferred), ("offline_repair", group.offline_repair)):
            if written:
                yield f"{place}: `{key}` has no effect, no unit of the group is ever repaired."
    if isinstance(group.repair_when, RepairAtFailed) and group.repair_when.failed == 1:
        yield f"{place}: `repair_when: {{failed: 1}}` is the same as `at_once`."
    sharing = group.load_sharing
    if sharing is not None and sharing.exponent is not None and sharing.exponent.is_zero:
        yield f"{place}: `load_sharing` has no effect, an exponent of zero makes every factor 1."


def _switch(place: str, group: Group) -> Iterator[str]:
    switch = group.switch
    if switch is None:
        return
    if group.size <= (group.required if group.is_active else group.duty_places):
        yield f"{place}: the switch has no effect, there is nothing to pass duty to."
    elif group.is_active and switch.false_operation_rate is not None:
        yield f"{place}: `false_operation_rate` has no effect in an active group, where no standby waits."
    if switch.latent and switch.failure_rate is None:
        yield f"{place}: `latent` has no effect on a switch without a `failure_rate`."
    refusal = switch.failure_on_demand
    imperfect = any(share.complement != 0 for share in group.coverage_list)
    if refusal is not None and not refusal.is_zero and imperfect:
        yield (
            f"{place}: `coverage` and `failure_on_demand` are two chances, drawn one after the other; make sure that "
            "the refusals of the switch are not counted in both."
        )


def _crews(content: Content) -> Iterator[str]:
    for name, crew in content.crews.items():
        idle = [unit for unit in crew.repairs if not content.units[unit].ever_repaired]
        if idle:
            yield f"crews.{name}: {choices(idle, 'and')} never repaired, the crew is not called for it."
        if crew.queue == "first_come":
            for key in ("priority", "preemptive"):
                if crew.is_said(key) and getattr(crew, key):
                    yield f"crews.{name}: `{key}` has no effect with `queue: first_come`."


def _spares(content: Content) -> Iterator[str]:
    for name, pool in content.spares.items():
        serving = [unit for unit in pool.for_ if content.placements_meant(unit)]
        if not serving:
            yield f"spares.{name}: nothing that is in use draws from it."
        elif all(content.units[unit].ever_repaired for unit in pool.for_):
            kinds = f"{choices(pool.for_, 'and', most=4)} {'returns' if len(pool.for_) == 1 else 'return'}"
            yield f"spares.{name}: nothing is ever ordered, for {kinds} to stock once repaired."


def _tests(content: Content) -> Iterator[str]:
    for name, test in content.tests.items():
        if not test.lasts:
            for key in ("in_service", "bypass"):
                if getattr(test, key):
                    yield f"tests.{name}: `{key}` has no effect on a test without a `duration`."
        elif test.in_service and test.bypass:
            yield f"tests.{name}: `bypass` has no effect on a test that leaves the unit in service."


def _causes(content: Content) -> Iterator[str]:
    for name, cause in content.common_causes.items():
        struck = content.placements_struck(cause)
        waiting = [
            place
            for place in struck
            if place.group is not None
            and not content.groups[place.group].is_active
            and content.groups[place.group].size > content.groups[place.group].duty_places
        ]
        if cause.exposed == "on_duty" and not waiting:
            yield f"common_causes.{name}: `exposed: on_duty` has no effect, none of its members ever waits."
        shares = (cause.beta, cause.beta_detected, *(cause.greek_letters or ())[:1])
        if all(share is None or share.is_zero for share in shares) and cause.alpha_factors is None:
            yield f"common_causes.{name}: a share of zero, it never strikes {quote(cause.members[0])}."
