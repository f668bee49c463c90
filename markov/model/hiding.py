"""Cautions about hidden faults: what never reveals them, and what looks for them where there are none."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from markov.model.content import Content
from markov.model.faults import quote
from markov.model.starts import Placement


def hiding_cautions(content: Content) -> Iterator[str]:
    """Yield cautions about hidden faults and tests."""
    for place in content.placements:
        yield from _never_found(content, place)
    for name, group in content.groups.items():
        if group.switch is not None and group.switch.may_hide and not content.tests_of_switch(name):
            yield f"groups.{name}: no test finds hidden faults of its switch, only a call does."
    for name, unit in content.units.items():
        if unit.is_said("revealed_by") and not unit.may_hide:
            yield f"units.{name}: `revealed_by` has no effect, for all faults are known at once."
    yield from _tests(content)


def _never_found(content: Content, place: Placement) -> Iterator[str]:
    """Name hidden faults that stay for good."""
    unit = content.units.get(place.unit)
    if unit is None or not unit.may_hide or "demand" in unit.revealed_by:
        return
    tests = [content.tests[name] for name in content.tests_of(place)]
    best = max((Fraction(1) if each.coverage is None else each.coverage.exact for each in tests), default=Fraction(0))
    if best == 1:
        return
    if "system_failure" in unit.revealed_by:
        yield (
            f"hidden faults of {quote(place.key)} are revealed when the system fails, not while it is down: one that "
            "comes then may stay for good, and the unavailability leads to 1 where it keeps the system down."
        )
        return
    share = "" if best == 0 else f"{float(100 * (1 - best)):.12g} % of "
    yield (
        f"no test ever finds {share}the hidden faults of {quote(place.key)}: unless something restores the whole "
        "group they stay for good, and its unavailability leads to 1."
    )


def _tests(content: Content) -> Iterator[str]:
    for name, test in content.tests.items():
        where = f"tests.{name}"
        for key in test.of:
            places = content.placements_meant(key)
            switched = content.switch_meant(key)
            units = [content.units[place.unit] for place in places if place.unit in content.units]
            if units and not any(unit.may_hide for unit in units):
                yield f"{where}: {quote(key)} never has a hidden fault, there is nothing to find."
            if switched is not None and not _hides(content, switched):
                yield f"{where}: the switch of {quote(switched)} never has a hidden fault, there is nothing to find."
            if not units and switched is None:
                yield f"{where}: {quote(key)} serves nowhere, the test changes nothing for it."
        if test.coverage is not None and test.coverage.is_zero:
            yield f"{where}: a coverage of zero, it never finds anything."
        if content.mission is None:
            continue
        mission = content.mission.time
        if test.interval.exact > mission.exact:
            yield f"{where}: an interval of {test.interval.text} is longer than the mission of {mission.text}."
        elif test.first.exact > mission.exact:
            yield f"{where}: the first test, at {test.first.text}, is after the mission of {mission.text}."


def _hides(content: Content, group: str) -> bool:
    switch = content.groups[group].switch
    return switch is not None and switch.may_hide
