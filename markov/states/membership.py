"""Which kinds of unit a group holds, those of trains included."""

from __future__ import annotations

from markov.model import Model


def members(model: Model, name: str) -> dict[str, int]:
    """Return kind -> number of items of an island, those of trains included."""
    if name not in model.groups:
        return {name: 1}
    counts: dict[str, int] = {}
    for member in model.groups[name].members:
        inside = members(model, member.name) if member.is_group else {member.name: member.count}
        for unit, count in inside.items():
            counts[unit] = counts.get(unit, 0) + count
    return counts
