"""Spares: who draws one, what is ordered, what comes back repaired."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from functools import partial

import numpy as np

from markov.states.branching import Branch, Dice, Event
from markov.states.clocks import clock_events
from markov.states.layout import Lane, Layout, Path, Slot, Stock
from markov.states.lines import bring_up_to_date, first_of, take_first
from markov.states.repair import put_back


def stock_events(dice: Dice, layout: Layout) -> Iterator[Event]:
    """Yield what happens by itself around spares: orders arrive, exchanges end, removed units come back."""
    for stock in layout.stocks:
        arrives = partial(_shelve, stock, stock.batch)
        yield from clock_events(dice, stock.lead, stock.orders, of="order", ends=f"{stock.name} spares", apply=arrives)
    yield from _exchanges(dice, layout)
    first = len(layout.lanes) - sum(len(stock.removed) for stock in layout.stocks)
    for stock in layout.stocks:
        for lane in () if layout.paused else stock.removed:
            if lane.repair is None:
                raise AssertionError("a removed unit that is not repaired has no lane")
            yield from clock_events(
                dice,
                lane.repair,
                lane.working_rows,
                of="repair",
                ends=f"removed {lane.unit}",
                apply=partial(_shelve, stock, 1),
                crew=first,
            )
            first += 1


def _exchanges(dice: Dice, layout: Layout) -> Iterator[Event]:
    for path, slot in layout.paths:
        for lane in slot.lanes:
            if lane.swap and lane.swap_clock is not None:
                ends = partial(_in_place, dice, path, slot)
                paused = layout.restoration is not None and layout.in_system(path[0])
                yield from clock_events(
                    dice,
                    lane.swap_clock,
                    lane.swap,
                    of="exchange",
                    ends=slot.unit,
                    apply=ends,
                    mode="system_up" if paused else "always",
                )


def _in_place(dice: Dice, path: Path, slot: Slot, branch: Branch) -> list[Branch]:
    return put_back(dice, path, slot, replace(branch, repaired=slot.name))


def _shelve(stock: Stock, number: int, branch: Branch) -> list[Branch]:
    branch.x[stock.shelf] += number
    return [branch]


def settle_stock(dice: Dice, layout: Layout, stock: Stock, branch: Branch) -> list[Branch]:
    """Let everyone who waits draw a spare while there are any, the longest-waiting first."""
    places = {
        at: (path, slot, lane)
        for at, (path, slot, lane) in enumerate((p, s, n) for p, s in layout.paths for n in s.lanes)
        if lane.stock >= 0 and layout.stocks[lane.stock] is stock
    }
    if stock.line:
        bring_up_to_date(stock.line, {at: branch.x[lane.short] for at, (_, _, lane) in places.items()}, branch.x)
    done: list[Branch] = []
    work = [branch]
    while work:
        todo = work.pop()
        wanted = np.sum([todo.x[lane.short] for _, _, lane in places.values()], axis=0) > 0
        wanted &= todo.x[stock.shelf] > 0
        if layout.restoration is not None and not layout.paused:
            wanted &= layout.up(todo.x)  # while the system is down its restoration replaces exchanges
        able, settled = todo.split(wanted)
        if len(settled):
            done.append(settled)
        if not len(able):
            continue
        if not stock.line:
            ((path, slot, lane),) = places.values()
            work += _draw(dice, stock, path, slot, lane, able)
            continue
        first = first_of(stock.line, able.x)
        for at, (path, slot, lane) in places.items():
            here = able.only(first == at)
            if len(here):
                take_first(stock.line, here.x)
                work += _draw(dice, stock, path, slot, lane, here)
    return done


def _draw(dice: Dice, stock: Stock, path: Path, slot: Slot, lane: Lane, branch: Branch) -> list[Branch]:
    """Draw one spare for one item that waits for it."""
    x = branch.x
    x[stock.shelf] -= 1
    x[lane.short] -= 1
    removed = next((each for each in stock.removed if (each.unit, each.mode) == (lane.unit, lane.mode)), None)
    if removed is not None:
        x[removed.queue_row] += 1
    elif not stock.when_failed:
        stock.ordering.order(x, 1)
    branch = replace(branch, drawn=(*branch.drawn, stock.name)).told("a spare is drawn")
    if lane.swap:
        x[lane.swap[0]] += 1
        return [branch]
    return put_back(dice, path, slot, replace(branch, repairs=(*branch.repairs, slot.name)))
