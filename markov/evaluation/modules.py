"""Parts of a plant that share nothing, with the structure of success rewritten over them."""

from __future__ import annotations

from dataclasses import dataclass

from markov.model import AllOf, AnyOf, AtLeast, Model, Named, Success, names
from markov.states import Plan


@dataclass(frozen=True)
class Modules:
    """The structure of success over independent modules.

    Attributes
    ----------
    structure : Success
        Names each module once: ``#0``, ``#1`` …
    inside : tuple of Success
        What each module is: a structure over groups and units of the plant.
    """

    structure: Success
    inside: tuple[Success, ...]


def find_modules(model: Model, plan: Plan) -> Modules | None:
    """Rewrite the structure of success over modules that share no crew and no `while_down` rule.

    Returns
    -------
    Modules or None
        None where everything is one part, or where a part stands at several places of the structure that do not join
        into one module: its places are dependent, and only the whole chain tells how.
    """
    if model.system is None:
        return None
    found: list[tuple[int, Success]] = []
    structure = _gather(model.system, _parts(model, plan), found)
    parts = [part for part, _ in found]
    if len(parts) < 2 or len(set(parts)) < len(parts):
        return None
    return Modules(structure, tuple(inside for _, inside in found))


def _parts(model: Model, plan: Plan) -> dict[str, int]:
    """Return name of an island -> number of its part."""
    leader = list(range(len(plan.islands)))

    def part(island: int) -> int:
        while leader[island] != island:
            island = leader[island]
        return island

    def join(islands: list[int]) -> None:
        for island in islands[1:]:
            leader[part(island)] = part(islands[0])

    for pool in plan.pools:
        join([island for kind in pool.kinds for island, _ in kind.places])
    in_system = set(names(model.system)) if model.system is not None else set()
    inside = [
        island for island, layout in enumerate(plan.islands) if any(node.name in in_system for node in layout.nodes)
    ]
    if any(plan.islands[island].heeds_the_system for island in inside):
        join(inside)
    return {node.name: part(island) for island, layout in enumerate(plan.islands) for node in layout.nodes}


def _gather(success: Success, part_of: dict[str, int], found: list[tuple[int, Success]]) -> Success:
    """Join what lies in one part into modules, listed in `found`; return the structure over them."""
    return _numbered(_joined(success, part_of), part_of, found)


def _only_part(success: Success, part_of: dict[str, int]) -> int | None:
    parts = {part_of[name] for name in names(success)}
    return parts.pop() if len(parts) == 1 else None


def _joined(success: Success, part_of: dict[str, int]) -> Success:
    """Put terms of one part side by side: sums and products may be taken in any order, k-of-n may not."""
    if isinstance(success, Named) or _only_part(success, part_of) is not None:
        return success
    terms = [_joined(each, part_of) for each in success.of]
    if isinstance(success, AtLeast):
        return AtLeast(success.count, tuple(terms))
    make = AllOf if isinstance(success, AllOf) else AnyOf
    parts = [_only_part(term, part_of) for term in terms]
    gathered: list[Success] = [term for term, part in zip(terms, parts, strict=True) if part is None]
    for part in dict.fromkeys(part for part in parts if part is not None):
        own = tuple(term for term, other in zip(terms, parts, strict=True) if other == part)
        gathered.append(own[0] if len(own) == 1 else make(own))
    return make(tuple(gathered))


def _numbered(success: Success, part_of: dict[str, int], found: list[tuple[int, Success]]) -> Success:
    part = _only_part(success, part_of)
    if part is not None:
        found.append((part, success))
        return Named(f"#{len(found) - 1}")
    if isinstance(success, Named):
        raise AssertionError("a name lies in one part")
    of = tuple(_numbered(each, part_of, found) for each in success.of)
    if isinstance(success, AtLeast):
        return AtLeast(success.count, of)
    return AllOf(of) if isinstance(success, AllOf) else AnyOf(of)
