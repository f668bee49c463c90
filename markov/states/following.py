"""What follows an event for repairs, spares and lines, before the crews of the whole chain move.

The order is fixed: the failure of the system reveals what it reveals, repairs are released, spares are drawn, crews
that finish what they have begun take their next item.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed
from markov.states.branching import Apply, Branch, Dice
from markov.states.desks import settle_desk
from markov.states.layout import Digits, Layout, Node, Slot
from markov.states.revealing import reveal_some
from markov.states.stocks import settle_stock


def follow(dice: Dice, layout: Layout, apply: Apply, branch: Branch) -> list[Branch]:
    """Do what an event does, then everything that follows it inside the island."""
    done = apply(branch)
    if _reveals_at_failure(layout):
        done = [after for each in done for after in _system_failure_reveals(dice, layout, each)]
    if any(node.release not in ("at_once", "visits") for node in layout.nodes):
        for each in done:
            _release(layout, each.x)
    for stock in layout.stocks:
        done = [after for each in done for after in settle_stock(dice, layout, stock, each)]
    for number, desk in enumerate(layout.desks):
        done = [after for each in done for after in settle_desk(dice, layout, number, desk, each)]
    return done


def _reveals_at_failure(layout: Layout) -> bool:
    return any(each.by_system_failure for slot in layout.slots for each in slot.hidden)


def _system_failure_reveals(dice: Dice, layout: Layout, branch: Branch) -> list[Branch]:
    fell = layout.up(branch.before) & ~layout.up(branch.x)
    fallen, stands = branch.split(fell)
    result = [stands] if len(stands) else []
    if len(fallen):
        result += reveal_some(dice, layout, fallen, lambda slot, each: each.by_system_failure)
    return result


def _release(layout: Layout, x: Digits) -> None:
    """Release deferred repairs where their time has come, and what fails while repair goes on; in place."""
    for node in layout.nodes:
        if node.release in ("at_once", "visits"):
            continue
        lanes = [lane for entry in node.entries if isinstance(entry, Slot) for lane in entry.lanes]
        begun = np.zeros(x.shape[1], np.bool_)
        for lane in lanes:
            begun |= x[list(lane.released_rows)].sum(axis=0) > 0
        due = ~layout.up(x) if node.release == "system_down" else node.known(x) >= int(node.release)
        release(node, x, begun | due)


def release(node: Node, x: Digits, where: NDArray[np.bool_]) -> None:
    """Let the repair of every item known to be failed begin; in place, in the columns told by `where`."""
    for entry in node.entries:
        for lane in entry.lanes if isinstance(entry, Slot) else ():
            if lane.deferred >= 0:
                moved = np.where(where, x[lane.deferred], 0).astype(np.int32)
                x[lane.deferred] -= moved
                x[lane.released_row] += moved


def settle_start(dice: Dice, layout: Layout, x: Digits) -> Digits:
    """Let repairs, spares and crews begin at time zero; return the state, shape (rows, 1)."""
    one = np.ones(1, np.int64)
    branch = Branch(x.copy(), x, np.zeros(1, np.int64), one, dice.table.of(), ())
    reached = follow(dice, layout, lambda each: [each], branch)
    if len(reached) != 1:
        raise IllPosed("crews that never interrupt draw among equals at time zero; name one kind in `initial` only")
    return reached[0].x
