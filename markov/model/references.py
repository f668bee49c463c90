"""Checks of the parts of a spec against each other: names, numbers, what goes together."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator

from markov.measures import Subject
from markov.model.circles import ordered
from markov.model.faults import Fault, Path, choices, quote
from markov.model.partial import Partial, unknown
from markov.model.schedules import schedule_faults
from markov.model.stocking import stock_faults
from markov.model.striking import cause_faults
from markov.model.success import places
from markov.model.targets import Target
from markov.model.unbuilt import unbuilt_faults

_GENERATED = (
    "units",
    "groups",
    "crews",
    "spares",
    "tests",
    "common_causes",
    "demand",
    "phases",
    "system",
    "while_down",
    "restoration",
    "initial",
)


def check(partial: Partial) -> list[Fault]:
    """Return every fault between parts, in no particular order."""
    rules = (_explicit_faults, _transition_faults) if _is_explicit(partial) else _GENERATED_RULES
    return [fault for rule in (*rules, _target_faults) for fault in rule(partial)]


def _is_explicit(partial: Partial) -> bool:
    return "states" in partial.raw or "transitions" in partial.raw


# ------------------------------------------------------------------------------------------- hand-written chains


def _explicit_faults(partial: Partial) -> Iterator[Fault]:
    mixed = [key for key in _GENERATED if key in partial.raw]
    for key in mixed:
        found = f"{quote(key)} beside a hand-written chain"
        fix = "remove it, or remove `states` and `transitions`"
        yield Fault((key,), found, "`states` and `transitions`, or units and groups", fix, on_key=True)
    states = partial.content.states
    if not partial.is_said("states"):
        yield Fault(("transitions",), "`transitions` without `states`", "both", "add `states`", on_key=True)
    elif partial.raw["states"] in ({}, [], ()):
        yield Fault(("states",), "no state", "at least one", "write `NAME: {up: true, initial: true}`")
    starts = [name for name, state in states.items() if state.initial]
    for name in starts[1:]:
        found = f"{quote(name)} and {quote(starts[0])} are both initial"
        yield Fault(("states", name, "initial"), found, "one initial state", "remove one of them", on_key=True)
    if states and not starts and partial.is_whole("states"):
        yield Fault(("states",), "no state is initial", "one", "add `initial: true` to one", on_key=True)


def _transition_faults(partial: Partial) -> Iterator[Fault]:
    known = partial.names("states")
    if "states" not in partial.raw or not partial.is_readable("states"):
        return
    for index, transition in enumerate(partial.content.transitions):
        at = partial.position("transitions", index)
        for key, name in (("from", transition.source), ("to", transition.target)):
            if name not in known:
                yield unknown(("transitions", at, key), name, known, "a state of `states`")


# ------------------------------------------------------------------------------------------------------- plants


def _presence_faults(partial: Partial) -> Iterator[Fault]:
    if not partial.is_said("units"):
        fix = "add `units: {NAME: {failure_rate: …}}`"
        yield Fault((), "`units` is missing", "units, or `states` and `transitions`", fix, on_key=True)
    elif partial.raw.get("units") == {}:
        yield Fault(("units",), "no unit", "at least one", "write `NAME: {failure_rate: …}`")
    if not partial.is_said("system"):
        names = sorted(partial.names("groups") or partial.names("units"))
        fix = f"add `system: {names[0]}`" if len(names) == 1 else "add `system: NAME`, or `{all_of: [NAME, NAME]}`"
        yield Fault((), "`system` is missing", "what has to be up for the system to be up", fix, on_key=True)


def _name_faults(partial: Partial) -> Iterator[Fault]:
    for name in sorted(partial.names("units") & partial.names("groups")):
        yield Fault(
            ("groups", name),
            f"{quote(name)} is the name of a unit, too",
            "different names for units and groups",
            "rename one of them",
            on_key=True,
        )


def _member_faults(partial: Partial) -> Iterator[Fault]:
    units, groups = partial.names("units"), partial.names("groups")
    known = units | groups
    inside: dict[str, str] = {}
    for name, path, member in partial.listed("groups", "members"):
        if member not in known:
            if partial.is_readable("units"):
                yield unknown(path, member, known, "a unit of `units` or a group")
        elif member not in units and inside.setdefault(member, name) != name:
            found = f"the group {quote(member)} is a member of {quote(inside[member])}, too"
            yield Fault(path, found, "a group is a member once", "write a second group of the same units")
    uses = {
        name: [member.name for member in group.members if member.is_group]
        for name, group in partial.content.groups.items()
    }
    for circle in ordered(uses)[1]:
        shown = " → ".join(quote(name) for name in (*circle, circle[0]))
        found = f"the group holds itself: {shown}"
        yield Fault(("groups", circle[0], "members"), found, "groups without circles", "remove one of these members")


def _crew_faults(partial: Partial) -> Iterator[Fault]:
    units, groups = partial.names("units"), partial.names("groups")
    pools: dict[str, str] = {}
    for name, path, unit in partial.listed("crews", "repairs"):
        if unit in groups and unit not in units:
            yield Fault(path, f"{quote(unit)} is a group", "units", "name the units of the group")
        elif unit not in units and partial.is_readable("units"):
            yield unknown(path, unit, units, "a unit of `units`")
        elif pools.setdefault(unit, name) != name:
            found = f"{quote(unit)} is repaired by {quote(pools[unit])}, too"
            yield Fault(path, found, "each unit in one pool at most", "remove it from one of them")


def _system_faults(partial: Partial) -> Iterator[Fault]:
    if partial.content.system is None:
        return
    known = partial.names("units") | partial.names("groups")
    for path, name in places(partial.content.system):
        if name not in known and partial.is_readable("units") and partial.is_readable("groups"):
            yield unknown(("system", *path), name, known, "a group or a unit")


def _while_down_faults(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    refused = "`standby_rate`, and no standby there: good units on duty keep the duty rate"
    for name, group in content.groups.items():
        if group.while_down == "standby_rate" and group.is_active:
            path: Path = ("groups", name, "while_down")
            yield Fault(path, refused, "`continue` or `stop` for an active group", "write one of these")
    if content.while_down != "standby_rate":
        return
    # Groups outside of the system go on in any case, and a train does what the group around it does.
    named = {name: content.groups[name] for name in content.named_in_any_phase if name in content.groups}
    active = [name for name, group in named.items() if group.is_active and group.while_down is None]
    units = partial.names("units") - partial.names("groups")
    alone = [name for name in content.named_in_any_phase if name in units]
    if active:
        found = f"`standby_rate` for the active {_plural('group', active)} {choices(active, 'and')}"
        fix = "write `while_down: continue` or `stop` in each of them"
        yield Fault(("while_down",), found, "`standby_rate` for standby groups only", fix)
    if alone:
        found = f"`standby_rate` for the single {_plural('unit', alone)} {choices(alone, 'and')} in `system`"
        fix = "put each into a group of its own with `while_down: continue`"
        yield Fault(("while_down",), found, "`standby_rate` for standby groups only", fix)


def _initial_faults(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    whole = partial.knows_places
    taken: dict[str, str] = {}
    for key, faults in content.initial.items():
        path: Path = ("initial", key)
        meant = content.placements_meant(key)
        if not meant:
            if whole:
                known = [place.key for place in content.placements] + [place.unit for place in content.placements]
                yield unknown(path, key, list(dict.fromkeys(known)), "a unit that serves somewhere", on_key=True)
            continue
        if len(meant) > 1:
            keys = [place.key for place in meant if place.group is not None]
            found = f"{quote(key)} serves in several places"
            fix = f"write {quote(keys[0])} if that is meant"
            yield Fault(path, found, f"the place, too: {choices(keys)}", fix, on_key=True)
            continue
        place = meant[0]
        if taken.setdefault(place.key, key) != key:
            found = f"{quote(key)} means the same units as {quote(taken[place.key])}"
            yield Fault(path, found, "each place once", "remove one of them", on_key=True)
        if faults.failed > place.count:
            found = f"{faults.failed} failed of {place.count}"
            yield Fault((*path, "failed"), found, f"at most {place.count}", "lower it")
        elif faults.failed + faults.hidden > place.count:
            found = f"{faults.failed + faults.hidden} failed of {place.count}, hidden faults included"
            yield Fault((*path, "hidden"), found, f"at most {place.count}", "lower it")
        unit = content.units.get(place.unit)
        if faults.hidden and unit is not None and not unit.may_hide:
            found = f"a hidden fault of {quote(place.unit)}, whose faults are all known at once"
            fix = "write `detected: …` below 100 % in the unit, or `failed`"
            yield Fault((*path, "hidden"), found, "a unit that can have hidden faults", fix)


def _load_faults(partial: Partial) -> Iterator[Fault]:
    """A table of loads has a factor for every number of units that can carry duty, and for no other."""
    content = partial.content
    for name, group in content.groups.items():
        if group.load_sharing is None or group.load_sharing.exponent is not None:
            continue
        required = [group.required, *(content.required_in(phase, name) for phase in content.phases)]
        most = min(max(group.places_for(each) for each in required), group.size)
        path: Path = ("groups", name, "load_sharing")
        table = group.load_sharing.table
        lacking = [str(number) for number in range(1, most + 1) if number not in table]
        if lacking and partial.is_whole("phases"):
            found = f"no factor for {', '.join(lacking[:12])} on duty"
            yield Fault(path, found, f"a factor for each number from 1 to {most}", "add what is missing")
        for number in table:
            if number > most:
                found = f"a factor for {number} on duty, and {most} are on duty at most"
                yield Fault((*path, str(number)), found, f"numbers from 1 to {most}", "remove it", on_key=True)


def _revealing_faults(partial: Partial) -> Iterator[Fault]:
    if partial.is_said("demand"):
        return
    for name, unit in partial.content.units.items():
        if "demand" in unit.revealed_by:
            found = "hidden faults revealed by demands, and there are none"
            fix = "add `demand: {rate: …}` at the top, or remove `demand` here"
            yield Fault(("units", name, "revealed_by"), found, "`demand` at the top, too", fix)


# ------------------------------------------------------------------------------------------------------ targets


def _target_faults(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    first: dict[str, int] = {}
    for index, target in enumerate(content.targets):
        path: Path = ("targets", partial.position("targets", index))
        if first.setdefault(target.id, index) != index:
            yield Fault((*path, "id"), f"{quote(target.id)} stands twice", "each `id` once", "rename one of them")
        measure = target.asked
        if (
            measure.timing == "point"
            and target.at is None
            and content.mission is None
            and not partial.is_said("mission")
        ):
            found = f"{quote(target.measure)} without a time"
            yield Fault(path, found, "`at` in the target, or a mission", "add `at: …` or `mission: {time: …}`")
        if target.measure == "hazardous_events_per_year" and not partial.is_said("demand"):
            found = f"{quote(target.measure)} without demands"
            yield Fault((*path, "measure"), found, "`demand` at the top", "add `demand: {rate: …}`")
        yield from _subject_faults(partial, target, path)
        if target.state is not None and _is_explicit(partial) and partial.is_readable("states"):
            states = partial.names("states")
            if target.state not in states:
                yield unknown((*path, "state"), target.state, states, "a state of `states`")


def _subject_faults(partial: Partial, target: Target, path: Path) -> Iterator[Fault]:
    name = target.of
    if name is None:
        if target.asked.subjects == ("level",):
            found = f"{quote(target.measure)} without a level"
            fix = "add `of: NAME`, a name of `levels`"
            yield Fault(path, found, "`of` with the name of a level", fix, on_key=True)
        return
    where: Path = (*path, "of")
    if _is_explicit(partial) and target.asked.subjects != ("level",):
        found = "`of` in a hand-written chain"
        yield Fault(where, found, "measures of the whole chain", "remove it", on_key=True)
        return
    allowed = target.asked.subjects
    subjects: dict[Subject, Collection[str]] = {
        "group": partial.names("groups"),
        "unit": partial.names("units"),
        "crew": partial.names("crews"),
        "level": partial.names("levels"),
    }
    kinds = [kind for kind, names in subjects.items() if name in names]
    if not allowed:
        expected = f"{quote(target.measure)} of the whole system"
        yield Fault(where, f"`of` for {quote(target.measure)}", expected, "remove it", on_key=True)
    elif not kinds:
        known = [each for kind in allowed for each in subjects[kind]]
        if all(partial.is_readable(key) for key in ("units", "groups", "crews", "levels")):
            yield unknown(where, name, known, f"the name of a {_words(allowed)}")
    elif not set(kinds) & set(allowed):
        found = f"{quote(name)} is a {_words(kinds)}"
        expected = f"a {_words(allowed)} for {quote(target.measure)}"
        yield Fault(where, found, expected, "name one, or remove `of` to mean the system")


# -------------------------------------------------------------------------------------------------------- words


def _words(kinds: Iterable[Subject]) -> str:
    return " or ".join("crew pool" if kind == "crew" else kind for kind in kinds)


def _plural(word: str, of: Collection[str]) -> str:
    return word if len(of) == 1 else f"{word}s"


_GENERATED_RULES = (
    _presence_faults,
    _name_faults,
    _member_faults,
    _crew_faults,
    _system_faults,
    _load_faults,
    _revealing_faults,
    stock_faults,
    schedule_faults,
    cause_faults,
    _while_down_faults,
    _initial_faults,
    unbuilt_faults,
)
