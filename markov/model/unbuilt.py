"""Combinations of the language that this version refuses by name; the list is to shrink."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model.content import Content
from markov.model.faults import Fault, Path, quote
from markov.model.partial import Partial


def unbuilt_faults(partial: Partial) -> Iterator[Fault]:
    """Yield what is legal in the language and not built yet: all of it about trains, groups that are members."""
    content = partial.content
    yield from _hidden_in_trains(content)
    yield from _tests_in_trains(partial)
    yield from _causes_in_trains(partial)
    yield from _spares_in_trains(partial)
    yield from _rules_of_trains(content)


def _train_of(content: Content, unit: str) -> str | None:
    """Name a train that holds items of a kind."""
    return next((place.group for place in content.placements_meant(unit) if place.group in content.trains), None)


def _refused(path: Path, what: str, train: str, *, on_key: bool = False) -> Fault:
    return Fault(
        path,
        f"{what} in the train {quote(train)}: not built yet",
        "groups whose members are units",
        "remove it, or make the train a group of its own in `system`; a number without it would be for another plant",
        on_key,
    )


def _hidden_in_trains(content: Content) -> Iterator[Fault]:
    for name, unit in content.units.items():
        train = _train_of(content, name) if unit.may_hide else None
        if train is not None:
            key = "detected" if unit.detected is not None and unit.detected.complement else "failure_modes"
            yield _refused(("units", name, key), f"hidden faults of {quote(name)}", train, on_key=True)


def _tests_in_trains(partial: Partial) -> Iterator[Fault]:
    for _, path, key in partial.listed("tests", "of"):
        for place in partial.content.placements_meant(key):
            if place.group in partial.content.trains and place.group is not None:
                yield _refused(path, f"a test of {quote(place.unit)}", place.group)
                break


def _causes_in_trains(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    for _, path, member in partial.listed("common_causes", "members"):
        meant = content.placements_in(member) if member in content.groups else content.placements_meant(member)
        for place in meant:
            if place.group in content.trains and place.group is not None:
                yield _refused(path, f"a common cause of {quote(place.unit)}", place.group)
                break


def _spares_in_trains(partial: Partial) -> Iterator[Fault]:
    for _, path, unit in partial.listed("spares", "for"):
        train = _train_of(partial.content, unit)
        if train is not None:
            yield _refused(path, f"spares for {quote(unit)}", train)


def _rules_of_trains(content: Content) -> Iterator[Fault]:
    for name, group in content.groups.items():
        path: Path = ("groups", name)
        holds = next((member.name for member in group.members if member.is_group), None)
        train = name if name in content.trains else holds
        if group.is_deferred and train is not None:
            yield _refused((*path, "repair_when"), "deferred repair", train, on_key=True)
        if group.switch is not None and name in content.trains:
            yield _refused((*path, "switchover", "switch"), "a switch", name, on_key=True)
