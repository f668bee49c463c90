"""What a fault does to its group: the empty place, the draw of coverage, takeover or outage."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Branch, Dice
from markov.states.layout import Digits, FaultKind, Node, Slot
from markov.states.outage import begin_outage
from markov.states.takeover import start_one


def duty_fault(dice: Dice, node: Node, slot: Slot, kind: FaultKind, branch: Branch) -> list[Branch]:
    """Fail one item of `slot` that carries duty in a group that carries duty; every column of `branch` has one.

    A hidden fault starts no takeover: in a standby group its place stays empty, unnoticed.
    """
    if slot.duty >= 0:
        branch.x[slot.duty] -= 1
    if kind.hidden >= 0:
        hide(slot, kind.hidden, branch.x, placed=not node.active)
        return [branch]
    slot.fail(branch.x, lane=kind.lane)
    return place_emptied(dice, node, branch)


def hide(slot: Slot, number: int, x: Digits, count: NDArray[np.int32] | int = 1, *, placed: bool) -> None:
    """Let items have hidden faults of one class, in duty places that seem filled or not; in place."""
    each = slot.hidden[number]
    x[each.placed if placed else each.apart] += count


def reveal_aside(node: Node, slot: Slot, number: int, x: Digits) -> None:
    """Make known the hidden faults of one class that leave no duty place empty; in place."""
    each = slot.hidden[number]
    rows = [each.held] if node.active and not each.returns else [each.held, each.apart]
    for row in rows:
        if row >= 0:
            if not each.returns:
                slot.fail(x, x[row].copy(), each.lane)
            x[row] = 0


def reveal_in_place(dice: Dice, node: Node, slot: Slot, number: int, branch: Branch) -> list[Branch]:
    """Make known the hidden faults of one class in duty places: each is a detected duty fault from now on."""
    each = slot.hidden[number]
    if each.returns:
        if each.placed >= 0:
            branch.x[slot.duty] += branch.x[each.placed]
            branch.x[each.placed] = 0
        return [branch]
    row = each.apart if node.active else each.placed
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        found, rest = todo.split(todo.x[row] > 0)
        if len(rest):
            done.append(rest)
        if len(found):
            found.x[row] -= 1
            slot.fail(found.x, lane=each.lane)
            work += place_emptied(dice, node, found)
    return done


def place_emptied(dice: Dice, node: Node, branch: Branch, places: int = 1) -> list[Branch]:
    """Answer a detected duty fault that has left a place empty, or several at once.

    Coverage is drawn once if the fault finds a substitute and no uncovered outage lasts: in a standby group a member
    that seems to wait, in an active group at least `required` good members left.
    """
    substitute = node.good(branch.x) >= node.required if node.active else node.callable(branch.x) > 0
    drawn, plain = branch.split(substitute & ~node.in_outage(branch.x))
    result = [plain] if len(plain) else []
    if len(drawn):
        for entry, share in _coverage_entries(node, drawn):
            covered, uncovered = dice.draw(share, entry, "covered", "uncovered")
            if covered is not None:
                result.extend(_take_over(dice, node, covered, places))
            if uncovered is not None:
                result.extend(begin_outage(node, uncovered))
    return result


def idle_fault(
    slot: Slot, kind: FaultKind, branch: Branch, *, stage: int = -1, designated: bool = False
) -> list[Branch]:
    """Fail one item that does not carry duty; nothing is drawn for it.

    Such an item waits, or is being switched in (`stage`), or is `designated` for duty in a train that itself does not
    carry duty; in a train that is being switched in, designated items already stand in their duty row.
    """
    if stage >= 0:
        branch.x[slot.start[stage]] -= 1
    elif designated and slot.duty >= 0:
        branch.x[slot.duty] -= (branch.x[slot.duty] > 0).astype(np.int32)
    if kind.hidden >= 0:  # while being switched in: the takeover seems to succeed
        hide(slot, kind.hidden, branch.x, placed=stage >= 0)
    else:
        slot.fail(branch.x, lane=kind.lane)
    return [branch]


def start_lost(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Answer the loss of a member whose switchover was under way; the next one begins a new attempt in full.

    This goes on even where another place has become uncovered meanwhile: the takeover was covered when it began.
    """
    again, left_empty = branch.split((node.callable(branch.x) > 0) & ~blocked(node, branch.x))
    result = [left_empty] if len(left_empty) else []
    if len(again):
        result.extend(start_one(dice, node, again))
    return result


def _take_over(dice: Dice, node: Node, branch: Branch, places: int) -> list[Branch]:
    """Draw the refusal of the switch, then start a standby for each place."""
    if node.active:
        done, ready = _switched(dice, node, branch)
        if ready is not None and node.switching:
            ready.x[node.switching[0]] += 1
        return done if ready is None else [*done, ready]
    work = [branch]
    for _ in range(places):
        work = [after for todo in work for after in _one_more(dice, node, todo)]
    return work


def _switched(dice: Dice, node: Node, branch: Branch) -> tuple[list[Branch], Branch | None]:
    """Let the switch act for one place: what it keeps from going on, and the rest (None: nothing)."""
    if node.switch is None:
        return [], branch
    done: list[Branch] = []
    stuck, able = branch.split(node.switch.failed(branch.x))
    if len(stuck):
        find_switch(node, stuck.x)
        stuck = stuck.told("the switch does not act")
        done += begin_outage(node, stuck) if node.active else [stuck]
    ready: Branch | None = able if len(able) else None
    if ready is not None and node.switch.refusal is not None:
        refuses, ready = dice.draw(ready, node.switch.refusal, "the switch refuses", "")
        if refuses is not None:
            if node.switch.down:
                refuses.x[node.switch.down[0]] += 1
            done += begin_outage(node, refuses)
    return done, ready


def _one_more(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Let one more place be taken over, unless nobody seems to wait or an outage has begun."""
    able, unable = branch.split((node.callable(branch.x) > 0) & ~node.in_outage(branch.x))
    result = [unable] if len(unable) else []
    if not len(able):
        return result
    done, ready = _switched(dice, node, able)
    return result + done + (start_one(dice, node, ready) if ready is not None else [])


def blocked(node: Node, x: Digits) -> NDArray[np.bool_]:
    """Tell where a failed switch keeps the group from taking over, shape (m,)."""
    return np.zeros(x.shape[1], np.bool_) if node.switch is None else node.switch.failed(x)


def find_switch(node: Node, x: Digits) -> None:
    """Let a latent fault of the switch be known; in place."""
    switch = node.switch
    if switch is not None and switch.hidden >= 0 and switch.down:
        x[switch.down[0]] += x[switch.hidden]
        x[switch.hidden] = 0


def _coverage_entries(node: Node, branch: Branch) -> Iterator[tuple[Factor | None, Branch]]:
    """Yield each entry of the coverage list with the columns that it applies to; the last entry repeats.

    Entry i applies when i − 1 members of the group were failed before the event.
    """
    if len(node.coverage) <= 1:
        yield (node.coverage[0] if node.coverage else None), branch
        return
    last = len(node.coverage) - 1
    failed_before: NDArray[np.int32] = node.failed(branch.before)
    for entry, chance in enumerate(node.coverage):
        here = failed_before == entry if entry < last else failed_before >= last
        if here.any():
            yield chance, branch.only(here)
