"""What a fault does to its group: the empty place, the draw of coverage, takeover or outage."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Branch, Dice
from markov.states.layout import Node, Slot
from markov.states.outage import begin_outage
from markov.states.takeover import start_one


def duty_fault(dice: Dice, node: Node, slot: Slot, branch: Branch) -> list[Branch]:
    """Fail one item of `slot` that carries duty in a group that carries duty; every column of `branch` has one."""
    if slot.duty >= 0:
        branch.x[slot.duty] -= 1
    branch.x[slot.entry_row] += 1
    return place_emptied(dice, node, branch)


def place_emptied(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Answer a detected duty fault that has left a place empty.

    Coverage is drawn once if the fault finds a substitute and no uncovered outage lasts: in a standby group a member
    that waits, in an active group at least `required` good members left.
    """
    substitute = node.good(branch.x) >= node.required if node.active else node.waiting(branch.x) > 0
    drawn, plain = branch.split(substitute & ~node.in_outage(branch.x))
    result = [plain] if len(plain) else []
    if len(drawn):
        for entry, share in _coverage_entries(node, drawn):
            covered, uncovered = dice.draw(share, entry, "covered", "uncovered")
            if covered is not None:
                result.extend(_take_over(dice, node, covered))
            if uncovered is not None:
                result.extend(begin_outage(node, uncovered))
    return result


def idle_fault(slot: Slot, branch: Branch, *, stage: int = -1, designated: bool = False) -> list[Branch]:
    """Fail one item that does not carry duty; nothing is drawn for it.

    Such an item waits, or is being switched in (`stage`), or is `designated` for duty in a train that itself does not
    carry duty; in a train that is being switched in, designated items already stand in their duty row.
    """
    if stage >= 0:
        branch.x[slot.start[stage]] -= 1
    elif designated and slot.duty >= 0:
        branch.x[slot.duty] -= (branch.x[slot.duty] > 0).astype(np.int32)
    branch.x[slot.entry_row] += 1
    return [branch]


def start_lost(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Answer the loss of a member whose switchover was under way; the next one begins a new attempt in full.

    This goes on even where another place has become uncovered meanwhile: the takeover was covered when it began.
    """
    again, left_empty = branch.split(node.waiting(branch.x) > 0)
    result = [left_empty] if len(left_empty) else []
    if len(again):
        result.extend(start_one(dice, node, again))
    return result


def _take_over(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    if not node.active:
        return start_one(dice, node, branch)
    if node.switching:
        branch.x[node.switching[0]] += 1
    return [branch]


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
