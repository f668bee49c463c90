"""Which islands of the model stand together in one, because more than crews connects them."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model import Model, names
from markov.states.membership import members


def sets_of_islands(
    model: Model, islands: list[str], contended: set[str], scheduled: bool
) -> tuple[tuple[str, ...], ...]:
    """Return the names of the groups and units of each island, in the order of the first of each.

    Parameters
    ----------
    model : Model
    islands : list of str
        Groups and units of the top level that enter the chain.
    contended : set of str
        Crew pools that can be short of crews.
    scheduled : bool
        Whether anything happens at fixed instants; then all stand together.
    """
    if scheduled:
        return (tuple(islands),)
    set_of = {name: {name} for name in islands}
    for tied in _ties(model, islands, contended):
        together = set().union(*(set_of[name] for name in tied)) if tied else set()
        for name in together:
            set_of[name] = together
    found: list[tuple[str, ...]] = []
    for name in islands:
        each = tuple(other for other in islands if other in set_of[name])
        if each not in found:
            found.append(each)
    return tuple(found)


def coupled(model: Model, one: str, other: str) -> bool:
    """Tell whether two islands draw on one pool of spares."""
    return any(
        set(pool.for_) & set(members(model, one)) and set(pool.for_) & set(members(model, other))
        for pool in model.spares.values()
    )


def _ties(model: Model, islands: list[str], contended: set[str]) -> Iterator[list[str]]:
    in_system = [name for name in islands if model.system is not None and name in set(names(model.system))]
    if needs_whole_system(model):
        yield in_system
    for pool in model.spares.values():
        yield [name for name in islands if set(pool.for_) & set(members(model, name))]
    for cause in model.common_causes.values():
        yield [name for name in islands if struck_by(model, cause.members, name)]
    for name, crew in model.crews.items():
        if name in contended and not (crew.preemptive and crew.queue == "priority"):
            yield [island for island in islands if set(crew.repairs) & set(members(model, island))]
    if model.demand is not None:
        yield [
            island
            for island in islands
            if any("demand" in model.units[unit].revealed_by for unit in members(model, island))
        ]


def needs_whole_system(model: Model) -> bool:
    """Tell whether an event asks at once whether the system has failed by it."""
    return (
        model.restoration is not None
        or any(group.repair_when == "system_down" for group in model.groups.values())
        or any("system_failure" in unit.revealed_by for unit in model.units.values())
        or any(
            mode.effect == "acts_needlessly" for unit in model.units.values() for mode in unit.failure_modes.values()
        )
    )


def struck_by(model: Model, struck: tuple[str, ...], island: str) -> bool:
    """Tell whether a cause strikes anything in an island."""
    return island in struck or bool(set(struck) & set(members(model, island)))
