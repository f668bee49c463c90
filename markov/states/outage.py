"""What follows an uncovered fault, and how each outcome ends."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from markov.states.branching import Branch, Dice
from markov.states.layout import Digits, Node, Path, Train, node_of, running
from markov.states.takeover import fill_by_rank, stand_down, start_all

#: Outcomes that end by an event of their own after a mean time.
TIMED_OUTCOMES = ("manual_takeover", "restart", "restart_without_failed")


def begin_outage(node: Node, branch: Branch) -> list[Branch]:
    """Apply the outcome of an uncovered fault; the draw of coverage has been made."""
    if node.outcome == "all_failed":
        fail_all(node, branch.x)
        return [branch.told("every healthy item of the group fails too")]
    branch.x[node.outage] = 1
    return [branch]


def fail_all(node: Node, x: Digits) -> None:
    """Fail every healthy item of the group; in place."""
    for entry in node.entries:
        if isinstance(entry, Train):
            fail_all(entry.node, x)
        else:
            entry.fail(x, entry.sound(x))
    stand_down(node, x)
    fill_by_rank(node, x)  # what is renewed at once is good again and takes the empty places


def end_outage(dice: Dice, path: Path, branch: Branch) -> list[Branch]:
    """Apply the end of a timed outcome: manual takeover, restart, or restart without the failed items."""
    node = node_of(path[-1])
    runs, idle = branch.split(running(path, branch.x))
    result: list[Branch] = []
    for part, carries in ((runs, True), (idle, False)):
        if not len(part):
            continue
        if node.outcome == "restart":
            make_all_good(node, part.x)
            if carries:
                fill_by_rank(node, part.x)
            result.append(part)
            continue
        part.x[node.outage] = 0
        for row in node.switching:  # the good items are re-admitted, whatever switchovers were under way
            part.x[row] = 0
        if not carries or node.active:
            result.append(part)
        elif node.outcome == "manual_takeover":
            result.extend(start_all(dice, node, part, timed=False))
        else:
            fill_by_rank(node, part.x)
            result.append(part)
    return result


def make_all_good(node: Node, x: Digits, where: NDArray[np.bool_] | None = None) -> None:
    """Make every item of the group good, none on duty yet; in place, in the columns told by `where`."""
    here = np.ones(x.shape[1], np.bool_) if where is None else where
    if node.outage >= 0:
        x[node.outage][here] = 0
    if node.switch is not None:
        for row in (*node.switch.down, node.switch.hidden):
            if row >= 0:
                x[row][here] = 0
    for entry in node.entries:
        if isinstance(entry, Train):
            make_all_good(entry.node, x, where)
        else:
            for row in entry.out_rows:
                x[row][here] = 0
    stand_down(node, x, where)


def repair_ends_outage(dice: Dice, node: Node, branch: Branch, *, carries: bool) -> list[Branch]:
    """Test, after a repair during an outage, whether the outage is over, by the row of its outcome.

    The repaired item has been put where its outcome says.  In an active group the outage is over once `required` items
    are good; in a standby group see each outcome.  With `carries` false the group itself waits, and nothing is started.
    """
    x = branch.x
    if node.outcome == "lost":
        return [branch]
    if node.outcome == "restart":
        over = node.failed(x) == 0
    elif node.outcome == "until_repair" or node.active or not carries:
        over = node.good(x) >= node.required
    else:
        over = node.on_duty(x) >= node.required
    ended, lasting = branch.split(over)
    result = [lasting] if len(lasting) else []
    if len(ended):
        ended.x[node.outage] = 0
        for row in node.switching:
            ended.x[row] = 0
        if node.active or not carries:
            result.append(ended)
        elif node.outcome in ("until_repair", "restart"):
            fill_by_rank(node, ended.x)
            result.append(ended)
        else:  # automatic takeover resumes: places still empty are tried without a draw of coverage
            result.extend(start_all(dice, node, ended))
    return result


def drop_idle_outage(node: Node, x: Digits) -> None:
    """Clear an outage or a switchover that can no longer make a difference; in place.

    In an active group that needs one item and has none good nothing is delivered anyway, and the repair that brings
    one back would end the outage.  (Where more are needed, those left would deliver a part outside of an outage.)  In a
    standby group without a waiting item there is nothing that a manual takeover could start, and every repaired item
    goes to duty either way.  Both states have the same future as the state without the outage, so they are one state.
    """
    for entry in node.entries:
        if isinstance(entry, Train):
            drop_idle_outage(entry.node, x)
    if node.active:
        short = (node.good(x) == 0) & (node.required == 1)
        for row in node.switching:
            x[row][short] = 0
        if node.outage >= 0 and node.outcome in ("until_repair", "manual_takeover", "restart_without_failed"):
            x[node.outage][short] = 0
    elif node.outage >= 0 and node.outcome in ("manual_takeover", "restart_without_failed"):
        started_in_another_way = node.start_again and node.takeover is not None
        x[node.outage][(node.callable(x) + node.starting(x) == 0) & (not started_in_another_way)] = 0
