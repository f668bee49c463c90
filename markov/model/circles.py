"""Order in which things that name each other can be worked out; circles where there is none."""

from __future__ import annotations

from collections.abc import Collection, Mapping


def ordered(uses: Mapping[str, Collection[str]]) -> tuple[list[str], list[tuple[str, ...]]]:
    """Sort names so that each follows what it uses.

    Parameters
    ----------
    uses : mapping of name to names
        Names that are no key of the mapping are passed over.

    Returns
    -------
    order : list of str
        All names; what stands in a circle has no meaningful place.
    circles : list of tuple of str
        Each circle once, as the names along it.
    """
    order: list[str] = []
    circles: list[tuple[str, ...]] = []
    seen: set[str] = set()
    for start in uses:
        if start in seen:
            continue
        seen.add(start)
        trail = [start]
        on_trail = {start}
        pending = [iter(uses[start])]
        while trail:
            for used in pending[-1]:
                if used in on_trail:
                    circles.append(tuple(trail[trail.index(used) :]))
                elif used in uses and used not in seen:
                    seen.add(used)
                    trail.append(used)
                    on_trail.add(used)
                    pending.append(iter(uses[used]))
                    break
            else:
                order.append(trail.pop())
                on_trail.discard(order[-1])
                pending.pop()
    return order, circles
