"""Checks of what happens at fixed instants: tests, visits, phases, and the period that they have together."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from markov.model.cycle import LONGEST_CYCLE, joint_period
from markov.model.faults import Fault, Path, choices, quote
from markov.model.partial import Partial, unknown
from markov.model.phases import Phase
from markov.model.starts import Placement
from markov.model.success import places


def schedule_faults(partial: Partial) -> Iterator[Fault]:
    """Yield what is wrong with tests and phases, and between their periods."""
    yield from _test_faults(partial)
    yield from _phase_order_faults(partial)
    for index, phase in enumerate(partial.content.phases):
        yield from _phase_faults(partial, phase, ("phases", partial.position("phases", index)))
    yield from _cycle_faults(partial)


# -------------------------------------------------------------------------------------------------------- tests


def _test_faults(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    if not partial.is_readable("units") or not partial.is_readable("groups"):
        return
    taken: dict[tuple[str, Placement], str] = {}
    for test, path, key in partial.listed("tests", "of"):
        meant = content.placements_meant(key)
        switched = content.switch_meant(key)
        if switched is not None and meant:
            found = f"{quote(key)} is the switch of {quote(switched)}, and a unit of it"
            yield Fault(path, found, "one thing", "rename the unit")
        if switched is None and not meant and (fault := _untestable(partial, path, key)):
            yield fault
        for place in meant:
            first = taken.setdefault((test, place), key)
            if first != key:
                found = f"{quote(key)} means units that {quote(first)} means, too"
                yield Fault(path, found, "each unit once in a test", "remove one of them")


def _untestable(partial: Partial, path: Path, key: str) -> Fault | None:
    """Return what is wrong with a name that means neither units in their places nor a switch."""
    units, groups = partial.names("units"), partial.names("groups")
    if key in units:
        return None  # it serves nowhere, which is noted
    if key in groups:
        return Fault(path, f"{quote(key)} is a group", "units, or the switch of a group", "name the units of the group")
    group = key.removesuffix(".switch")
    if group != key and group in groups:
        if group not in partial.content.groups:
            return None  # faulty itself
        found = f"the group {quote(group)} has no switch with faults of its own"
        return Fault(path, found, "a switch that is written", "add `switchover: {switch: …}` to the group")
    if not partial.knows_places:
        return None
    known = [*units, *(place.key for place in partial.content.placements)]
    known += [f"{name}.switch" for name, each in partial.content.groups.items() if each.switch is not None]
    return unknown(path, key, list(dict.fromkeys(known)), "a unit, `GROUP.UNIT` or `GROUP.switch`")


# ------------------------------------------------------------------------------------------------------- phases


def _phase_order_faults(partial: Partial) -> Iterator[Fault]:
    written = partial.raw.get("phases")
    last = len(written) - 1 if isinstance(written, list) else -1
    first: dict[str, int] = {}
    for index, phase in enumerate(partial.content.phases):
        at = partial.position("phases", index)
        path: Path = ("phases", at)
        if first.setdefault(phase.name, at) != at:
            yield Fault((*path, "name"), f"{quote(phase.name)} stands twice", "each name once", "rename one of them")
        if phase.repeat and at != last:
            found = f"{quote(phase.name)} repeats, and is not the last phase"
            yield Fault((*path, "repeat"), found, "`repeat` on the last phase", "move it there", on_key=True)
        if phase.duration is None and (phase.repeat or at != last):
            why = "repeats" if phase.repeat else "is followed by another"
            found = f"`duration` is missing: the phase {quote(phase.name)} {why}"
            yield Fault(path, found, "how long it lasts", "add `duration: …`", on_key=True)


def _phase_faults(partial: Partial, phase: Phase, path: Path) -> Iterator[Fault]:
    units, groups = partial.names("units"), partial.names("groups")
    for name in phase.rate_factors:
        if name not in units and partial.is_readable("units"):
            yield unknown((*path, "rate_factors", name), name, units, "a unit of `units`", on_key=True)
    for name, required in phase.required.items():
        where: Path = (*path, "required", name)
        if name not in groups:
            if partial.is_readable("groups"):
                yield unknown(where, name, groups, "a group of `groups`", on_key=True)
            continue
        group = partial.content.groups.get(name)
        if group is None:
            continue
        if required > group.size:
            found = f"{required} required of {group.size}"
            yield Fault(where, found, "at most the number of members", f"write {group.size} or less")
        elif group.on_duty is not None and required > group.on_duty:
            found = f"{required} required, and {group.on_duty} on duty"
            yield Fault(where, found, "`on_duty` of the group not below it", "raise `on_duty` there, or lower this")
    if phase.system is None:
        return
    known = units | groups
    for steps, name in places(phase.system):
        if name not in known and partial.is_readable("units") and partial.is_readable("groups"):
            yield unknown((*path, "system", *steps), name, known, "a group or a unit")


# -------------------------------------------------------------------------------------------------------- cycle


def _cycle_faults(partial: Partial) -> Iterator[Fault]:
    if not partial.is_whole("tests", "groups", "phases"):
        return
    joint = shortest = Fraction(0)
    before: list[str] = []
    for words, hours, path in partial.content.recurrences:
        shortest = min(shortest, hours) if before else hours
        joint = joint_period((joint, hours) if before else (hours,)) or hours
        if joint > LONGEST_CYCLE * shortest:
            number = f"{float(joint / shortest):,.6g}"
            others = choices(before, "and", most=4)
            found = f"{words} and {others} meet again only after {number} of the shortest intervals"
            expected = f"a joint period of at most {LONGEST_CYCLE:,} of them"
            yield Fault(path, found, expected, "make the intervals simple multiples of each other")
            return
        before.append(words)
