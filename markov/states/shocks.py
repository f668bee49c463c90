"""Common causes: one shock strikes the healthy items of a named set, whatever the state of the others.

Items of one kind are counted, so the sets of one size that strike so many on duty, so many waiting and so many already
failed are one event, with the number of such sets as its multiple.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import partial
from itertools import product
from math import comb

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Branch, Dice, Event, Mode
from markov.states.faults import hide, place_emptied, start_lost
from markov.states.layout import Digits, FaultKind, Layout, Node, Shock, Slot

Counts = NDArray[np.int32]


@dataclass(frozen=True)
class _Member:
    """The items of one slot that a cause can strike."""

    node: Node
    slot: Slot


@dataclass(frozen=True)
class _Part:
    """Items of one member in one condition: on duty, waiting, or in one stage of a switchover."""

    member: int
    condition: str
    row: int = -1


def shock_events(dice: Dice, layout: Layout) -> Iterator[Event]:
    """Yield the shocks of every common cause of the island."""
    for shock in layout.shocks:
        members = []
        for at, entry in shock.slots:
            slot = layout.nodes[at].entries[entry]
            if not isinstance(slot, Slot):
                raise AssertionError("a cause strikes items, not trains")
            members.append(_Member(layout.nodes[at], slot))
        for mode, exposed in _modes(members):
            yield from _events_of(dice, shock, members, exposed, mode)


def _modes(members: list[_Member]) -> Iterator[tuple[Mode, frozenset[int]]]:
    """Yield in which states of the system which members can be struck; items that are stopped cannot."""
    everyone = frozenset(range(len(members)))
    going = frozenset(at for at, member in enumerate(members) if member.node.while_down != "stop")
    if going == everyone:
        yield "always", everyone
        return
    yield "system_up", everyone
    if going:
        yield "system_down", going


def _events_of(
    dice: Dice, shock: Shock, members: list[_Member], exposed: frozenset[int], mode: Mode
) -> Iterator[Event]:
    everyone = sum(member.slot.count for member in members)
    parts = [part for at in sorted(exposed) for part in _parts(at, members[at], shock.on_duty_only)]
    for kinds in _kinds(members):
        hidden = all(kind.hidden >= 0 for kind in kinds)
        sizes = shock.sizes_hidden if hidden and shock.sizes_hidden is not None else shock.sizes
        told = f", {kinds[0].label}" if kinds[0].label else ""
        for size, share in sizes:
            if not share.exact:
                continue
            rate = dice.table.of(shock.base, share, *_factors(members, kinds))
            if size == everyone:
                yield Event(
                    f"common cause {shock.name} strikes all{told}",
                    mode,
                    rate,
                    partial(_any, members, parts),
                    partial(_strike, dice, members, kinds, parts, None),
                )
                continue
            for struck in _vectors(parts, members, size):
                yield Event(
                    f"common cause {shock.name} strikes {size} of {everyone}{told}",
                    mode,
                    rate,
                    partial(_sets, members, parts, struck, size, everyone),
                    partial(_strike, dice, members, kinds, parts, struck),
                )


def _kinds(members: list[_Member]) -> Iterator[tuple[FaultKind, ...]]:
    """Yield the kinds of fault of all members: the same kind for all where they have the same, else any."""
    labels = {tuple(kind.label for kind in member.slot.faults) for member in members}
    if len(labels) == 1:
        yield from zip(*(member.slot.faults for member in members), strict=True)
    else:
        yield from product(*(member.slot.faults for member in members))


def _factors(members: list[_Member], kinds: tuple[FaultKind, ...]) -> tuple[Factor, ...]:
    if len({tuple(kind.label for kind in member.slot.faults) for member in members}) == 1:
        shares = kinds[0].factors
    else:
        shares = tuple(factor for kind in kinds for factor in kind.factors)
    pace = members[0].slot.pace
    return shares if pace is None else (*shares, pace)


def _parts(at: int, member: _Member, on_duty_only: bool) -> Iterator[_Part]:
    yield _Part(at, "duty")
    if on_duty_only or member.node.active:
        return
    yield _Part(at, "waiting")
    for row in member.slot.start:
        yield _Part(at, "starting", row)


def _count(members: list[_Member], part: _Part, x: Digits) -> Counts:
    slot = members[part.member].slot
    if part.condition == "duty":
        return slot.good(x) if slot.duty < 0 else np.asarray(x[slot.duty])
    return np.maximum(slot.waiting(x), 0).astype(np.int32) if part.condition == "waiting" else np.asarray(x[part.row])


def _any(members: list[_Member], parts: list[_Part], x: Digits) -> Counts:
    struck: Counts = np.sum([_count(members, part, x) for part in parts], axis=0)
    return (struck > 0).astype(np.int32)


def _vectors(parts: list[_Part], members: list[_Member], size: int) -> Iterator[tuple[int, ...]]:
    """Yield how many items of each part a set of some size may strike, at least one in all."""
    ranges = [range(min(size, members[part.member].slot.count) + 1) for part in parts]
    for struck in product(*ranges):
        if 0 < sum(struck) <= size:
            yield struck


def _sets(
    members: list[_Member], parts: list[_Part], struck: tuple[int, ...], size: int, everyone: int, x: Digits
) -> Counts:
    """Count the sets that strike so many of each part, shape (m,)."""
    choose = np.array([[comb(n, k) for k in range(size + 1)] for n in range(everyone + 1)], np.int64)
    counts = [_count(members, part, x) for part in parts]
    sets = np.ones(x.shape[1], np.int64)
    for count, number in zip(counts, struck, strict=True):
        sets *= choose[count, number]
    others = everyone - np.sum(counts, axis=0)
    sets *= choose[others, size - sum(struck)]
    return sets.astype(np.int32)


def _strike(
    dice: Dice,
    members: list[_Member],
    kinds: tuple[FaultKind, ...],
    parts: list[_Part],
    struck: tuple[int, ...] | None,
    branch: Branch,
) -> list[Branch]:
    """Fail what is struck (everything, where `struck` is None), then let every group answer once."""
    counts = np.array([_count(members, part, branch.x) for part in parts])
    if struck is not None:
        counts[:] = np.array(struck)[:, None]
    done: list[Branch] = []
    for vector in np.unique(counts, axis=1).T:
        here = branch.only((counts == vector[:, None]).all(axis=0))
        done += _struck(dice, members, kinds, parts, vector.tolist(), here)
    return done


def _struck(
    dice: Dice,
    members: list[_Member],
    kinds: tuple[FaultKind, ...],
    parts: list[_Part],
    vector: list[int],
    branch: Branch,
) -> list[Branch]:
    places: dict[str, int] = {}
    starts: dict[str, int] = {}
    for part, number in zip(parts, vector, strict=True):
        member, kind = members[part.member], kinds[part.member]
        slot = member.slot
        if not number or (kind.hidden < 0 and slot.lanes[kind.lane].renewed_at_once):
            continue
        if part.condition == "duty" and slot.duty >= 0:
            branch.x[slot.duty] -= number
        elif part.condition == "starting":
            branch.x[part.row] -= number
        if kind.hidden >= 0:
            hide(slot, kind.hidden, branch.x, number, placed=part.condition != "waiting" and not member.node.active)
            continue
        slot.fail(branch.x, number, kind.lane)
        answering = places if part.condition == "duty" else starts if part.condition == "starting" else {}
        answering[member.node.name] = answering.get(member.node.name, 0) + number
    done = [branch]
    for node in {member.node.name: member.node for member in members}.values():
        if node.name in places:
            done = [after for todo in done for after in place_emptied(dice, node, todo, places[node.name])]
        for _ in range(starts.get(node.name, 0)):
            done = [after for todo in done for after in start_lost(dice, node, todo)]
    return done
