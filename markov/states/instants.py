"""What happens at fixed instants: tests, visits, the beginning of a phase.

An instant is one or several actions in a fixed order.  It takes every state to states with chances that sum to one.
"""

from __future__ import annotations

from fractions import Fraction
from functools import partial

import numpy as np

from markov.model import Model, ProofTest
from markov.rates import Factor
from markov.states.branching import Apply, Branch, Dice
from markov.states.faults import blocked, find_switch, place_emptied
from markov.states.following import release
from markov.states.layout import Hidden, Layout, Node, Path, Slot, node_of, total
from markov.states.outage import repair_ends_outage
from markov.states.revealing import reveal_some
from markov.states.takeover import empty_places, release_surplus_start, start_all, take_last_off
from markov.states.timetable import Action


def instant(dice: Dice, layout: Layout, model: Model, actions: tuple[Action, ...]) -> Apply:
    """Return what the actions of one instant do, one after the other."""
    steps = [_step(dice, layout, model, action) for action in actions]
    return partial(_in_turn, steps)


def told(actions: tuple[Action, ...], model: Model) -> str:
    """Say in words what happens at an instant."""
    words = {
        "phase": "phase",
        "visit": "visit to",
        "test": "test",
        "test_start": "start of test",
        "test_end": "end of test",
    }
    return ", ".join(
        f"{words[action.kind]} {model.phases[int(action.name)].name if action.kind == 'phase' else action.name}"
        + (" begins" if action.kind == "phase" else "")
        for action in actions
    )


def _in_turn(steps: list[Apply], branch: Branch) -> list[Branch]:
    done = [branch]
    for step in steps:
        done = [after for each in done for after in step(each)]
    return done


def _step(dice: Dice, layout: Layout, model: Model, action: Action) -> Apply:
    if action.kind == "phase":
        return partial(_phase_begins, dice, layout)
    if action.kind == "visit":
        return partial(_visit, layout, str(action.name))
    test = model.tests[str(action.name)]
    if action.kind == "test_start":
        return partial(_begin, dice, layout, test)
    return partial(_finish, dice, layout, str(action.name), test, action.kind == "test_end")


def _visit(layout: Layout, group: str, branch: Branch) -> list[Branch]:
    node = layout.node_named(group)
    if node is not None:
        release(node, branch.x, np.ones(len(branch), np.bool_))
    return [branch]


def _phase_begins(dice: Dice, layout: Layout, branch: Branch) -> list[Branch]:
    """Let every group have as many on duty as the new phase wants."""
    done = [branch]
    for node in layout.nodes:
        if node.active:
            continue
        after: list[Branch] = []
        for todo in done:
            for reached in _stand_down_surplus(dice, node, todo):
                tries, rests = reached.split((empty_places(node, reached.x) > 0) & ~node.in_outage(reached.x))
                if len(rests):
                    after.append(rests)
                if len(tries):
                    after += start_all(dice, node, tries)
        done = after
    return done


def _stand_down_surplus(dice: Dice, node: Node, branch: Branch) -> list[Branch]:
    """Let members wait that a phase does not want on duty, those listed last first; starts under way before others."""
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        surplus, settled = todo.split(empty_places(node, todo.x) < 0)
        if len(settled):
            done.append(settled)
        if len(surplus):
            started, running = surplus.split(node.starting(surplus.x) > 0)
            if len(started):
                release_surplus_start(node, started.x)
                work.append(started)
            if len(running):
                work += take_last_off(dice, list(node.entries), running)
    return done


def tested_slots(layout: Layout, test: ProofTest) -> list[tuple[Path, Slot]]:
    """Return the slots whose items a test tests."""
    return [(path, slot) for path, slot in layout.paths if slot.unit in test.of or slot.name in test.of]


def takes_out(test: ProofTest) -> bool:
    """Tell whether a test takes units out of service while it lasts."""
    return test.duration is not None and not test.duration.is_zero and not test.in_service


def _begin(dice: Dice, layout: Layout, test: ProofTest, branch: Branch) -> list[Branch]:
    """Take the tested items out of service; duty passes to standbys by start attempts."""
    if not takes_out(test):
        return [branch]
    done = [branch]
    for path, slot in tested_slots(layout, test):
        node = node_of(path[-1])
        after: list[Branch] = []
        for todo in done:
            x = todo.x
            for each in slot.hidden:
                for row in (each.apart, each.placed):
                    if row >= 0:
                        x[slot.tested if each.returns else each.held] += x[row]
                        x[row] = 0
            x[slot.tested] += slot.good(x)
            if node.active:
                after.append(todo)
                continue
            for row in (slot.duty, *slot.start):
                x[row] = 0
            tries, rests = todo.split(~node.in_outage(x) & ~blocked(node, x))
            if len(rests):
                after.append(rests)
            if len(tries):
                after += start_all(dice, node, tries)
        done = after
    return done


def _finish(dice: Dice, layout: Layout, name: str, test: ProofTest, lasted: bool, branch: Branch) -> list[Branch]:
    """Reveal what the test finds, draw what it does harm to, and put the rest back into service."""
    out = lasted and takes_out(test)
    slots = tested_slots(layout, test)
    chosen = {slot.name for _, slot in slots}
    done = reveal_some(dice, layout, branch, lambda slot, each: slot.name in chosen and name in each.found_by)
    for node in layout.nodes:
        if node.switch is not None and name in node.switch.found_by:
            for each in done:
                find_switch(node, each.x)
    for path, slot in slots:
        node = node_of(path[-1])
        harm = _share(test.causes_failure, f"harm({name})", f"chance that test {name} makes a unit fail", name)
        if harm is not None:
            done = [after for each in done for after in _harm(dice, node, slot, harm, each, out)]
        left = _share(test.left_out, f"left({name})", f"chance that test {name} leaves a unit out of service", name)
        if left is not None:
            done = [after for each in done for after in _leave_out(dice, node, slot, left, each, out)]
        if out:
            done = [after for each in done for after in _back_in_service(dice, node, slot, each)]
    return done


def _share(given: object, symbol: str, meaning: str, name: str) -> Factor | None:
    exact = getattr(given, "exact", None)
    if given is None or not exact:
        return None
    symbol = getattr(given, "name", "") or symbol
    return Factor(symbol, Fraction(exact), meaning, f"tests.{name}", is_share=True, quantity=given)  # type: ignore[arg-type]


def _back_in_service(dice: Dice, node: Node, slot: Slot, branch: Branch) -> list[Branch]:
    """Let what a test has taken out come back: to empty places, else to the standbys; an outage may end by it.

    Items with hidden faults, or left out of service, look like the others and may be the ones that fill a place.
    """
    result: list[Branch] = []
    for todo in [branch] if node.active else _placed(dice, node, slot, branch):
        for each in slot.hidden:
            if each.held >= 0:
                todo.x[each.apart] += todo.x[each.held]
                todo.x[each.held] = 0
        came = todo.x[slot.tested] > 0
        todo.x[slot.tested] = 0
        lasting, over = todo.split(came & node.in_outage(todo.x))
        if len(over):
            result.append(over)
        if len(lasting):
            result += repair_ends_outage(dice, node, lasting, carries=True)
    return result


def _placed(dice: Dice, node: Node, slot: Slot, branch: Branch) -> list[Branch]:
    """Fill empty places with what comes back, one by one."""
    hidden = [each for each in slot.hidden if each.held >= 0 or each.returns]
    rows = [slot.tested, *(each.apart if each.returns else each.held for each in hidden)]
    during_outage = node.outcome in ("manual_takeover", "restart_without_failed")
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        fills = (empty_places(node, todo.x) > 0) & (total(todo.x, tuple(rows)) > 0)
        if not during_outage:
            fills &= ~node.in_outage(todo.x)
        able, settled = todo.split(fills)
        if len(settled):
            done.append(settled)
        if len(able):
            for number, part in dice.choose(able, [able.x[row].copy() for row in rows]):
                part.x[rows[number]] -= 1
                part.x[slot.duty if number == 0 else hidden[number - 1].placed] += 1
                work.append(part)
    return done


def _harm(dice: Dice, node: Node, slot: Slot, chance: Factor, branch: Branch, out: bool) -> list[Branch]:
    """Draw for every tested item that is sound whether the test makes it fail."""
    if out:
        return _strike(dice, slot, chance, branch, slot.tested)
    on_duty = slot.good(branch.x) if node.active else branch.x[slot.duty].copy()
    others = (slot.good(branch.x) - on_duty).astype(np.int32)
    done: list[Branch] = []
    for number in np.unique(others).tolist():
        for failed, part in _binomial(dice, chance, int(number), branch.only(others == number), slot, "the test harms"):
            placed = slot.good(part.x) if node.active else part.x[slot.duty].copy()
            slot.fail(part.x, failed)
            for count in np.unique(placed).tolist():
                done += _harm_on_duty(dice, node, slot, chance, int(count), part.only(placed == count))
    return done


def _strike(dice: Dice, slot: Slot, chance: Factor, branch: Branch, row: int) -> list[Branch]:
    done: list[Branch] = []
    count = branch.x[row].copy()
    for number in np.unique(count).tolist():
        for failed, part in _binomial(dice, chance, int(number), branch.only(count == number), slot, "the test harms"):
            part.x[row] -= failed
            slot.fail(part.x, failed)
            done.append(part)
    return done


def _harm_on_duty(dice: Dice, node: Node, slot: Slot, chance: Factor, number: int, branch: Branch) -> list[Branch]:
    done: list[Branch] = []
    for failed, part in _binomial(dice, chance, number, branch, slot, "the test harms"):
        work = [part]
        for _ in range(failed):
            after: list[Branch] = []
            for todo in work:
                if slot.duty >= 0:
                    todo.x[slot.duty] -= 1
                slot.fail(todo.x)
                after += place_emptied(dice, node, todo)
            work = after
        done += work
    return done


def _leave_out(dice: Dice, node: Node, slot: Slot, chance: Factor, branch: Branch, out: bool) -> list[Branch]:
    """Draw for every tested item that is sound whether the test leaves it out of service, unnoticed."""
    class_left = next(each for each in slot.hidden if each.returns)
    done: list[Branch] = []
    count = branch.x[slot.tested].copy() if out else slot.good(branch.x)
    for number in np.unique(count).tolist():
        for left, part in _binomial(
            dice, chance, int(number), branch.only(count == number), slot, "the test leaves out"
        ):
            if out or node.active:
                if out:
                    part.x[slot.tested] -= left
                part.x[class_left.apart] += left
                done.append(part)
            else:
                done += _from_either(dice, slot, class_left, left, part)
    return done


def _from_either(dice: Dice, slot: Slot, left: Hidden, number: int, branch: Branch) -> list[Branch]:
    """Take so many items out of service, each as likely from duty as from the standbys."""
    work = [branch]
    for _ in range(number):
        after: list[Branch] = []
        for todo in work:
            weights = [todo.x[slot.duty].copy(), (slot.good(todo.x) - todo.x[slot.duty]).astype(np.int32)]
            for which, part in dice.choose(todo, weights):
                if which == 0:
                    part.x[slot.duty] -= 1
                part.x[left.placed if which == 0 else left.apart] += 1
                after.append(part)
        work = after
    return work


def _binomial(
    dice: Dice, chance: Factor, number: int, branch: Branch, slot: Slot, told: str
) -> list[tuple[int, Branch]]:
    """Split by how many of some items a chance strikes, each by itself."""
    done: list[tuple[int, Branch]] = []
    work = [(0, branch)]
    for _ in range(number):
        after: list[tuple[int, Branch]] = []
        for struck, todo in work:
            hit, miss = dice.draw(todo, chance, f"{told} {slot.unit}", "")
            if hit is not None:
                after.append((struck + 1, hit))
            if miss is not None:
                after.append((struck, miss))
        work = after
    done.extend(work)
    return done
