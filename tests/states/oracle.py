"""An independent, item by item enumeration of the chain that a spec stands for, to hold the rule engine against.

Plain and slow on purpose: every item is an individual with a condition of its own, a state is an immutable tuple of
everything, the chain is found by a breadth-first search, all rates are fractions.  Nothing is counted, merged or
shared with the engine.

The input is a dictionary in the form of the spec language with plain numbers (fractions, hours):

    {"units": {NAME: {"failure_rate", "repair_time", "repair_stages", "logistic_delay", "start_failure", "capacity"}},
     "groups": {NAME: {"members": [(UNIT, COUNT), ...], "required", "on_duty", "redundancy", "dormancy_factor",
                       "coverage": [c1, c2, ...], "switchover_time", "switchover_stages", "outcome", "outcome_time",
                       "return_to_preferred", "after_repair", "while_down"}},
     "crews": {NAME: {"size", "repairs": [UNIT, ...], "priority": [UNIT, ...]}},
     "system": NAME | {"all_of": [...]} | {"any_of": [...]} | {"at_least": k, "of": [...]},
     "while_down": "continue" | "standby_rate" | "stop",
     "initial": {UNIT or "GROUP.UNIT": number failed}}

Keys that are left out have the default of the language; no `repair_time` means never repaired, `repair_time` 0 renewed
at once.  Left out of the scope: hidden faults, tests, spares, switch objects, common causes, phases, demand,
restoration, deferred repair, load sharing, failure modes, groups as members, failing starts of units that are renewed
at once.

How sentences that leave a choice are read here:

- `until_repair` in a standby group: at the repair that brings good units to `required`, starts under way are given up
  and empty places are filled by rank without start attempts; a running unit keeps its place.  `restart_without_failed`
  does the same when its time is over, and so does the last repair during a `restart`.
- A repaired unit that takes the place of a switchover under way sends the start listed last, of these the one at its
  earliest stage, back to waiting.
- An outage of `manual_takeover` or `restart_without_failed` that a repair has ended: places still empty are tried, with
  switchover time.  A unit that starts again during such an outage: the standbys are tried for one empty place, in rank
  order, without switchover time.
- A start that is lost is begun anew during an uncovered outage, too: the takeover of that place was covered.
- An `active` group: each covered fault has a switchover of its own; a repair that leaves `required` good ends all of
  them, and so does the end of an outage.
- `return_to_preferred` holds whenever the group is in normal order, not only at the repair of the preferred member.
- `lost`: faults and repairs go on, repaired units wait, nothing is delivered.
- Whoever is outside of the system goes on while the system is down, unless the group says otherwise.
- A call finds no free crew when all are busy just before, a repair that ends in the same event not counted.
- Without redundancy: starts under way in the same group count as done.
"""

from __future__ import annotations

from collections import defaultdict, deque
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm
from scipy.sparse.csgraph import connected_components

Spec = Mapping[str, Any]
#: What one item is doing: a word, with the stage where there is one.
Condition = tuple[str, int]

DUTY: Condition = ("on duty", 0)
WAITING: Condition = ("waiting", 0)
DELAYED: Condition = ("logistic delay", 0)
QUEUED: Condition = ("waiting for a crew, never begun", 0)
BROKEN: Condition = ("never repaired", 0)
STARTING, INTERRUPTED, REPAIRING = "being switched in", "interrupted", "under repair"

NORMAL, OUT, LOST = "normal order", "uncovered outage", "lost"

ONE = Fraction(1)


class TooLarge(Exception):
    """The chain has more states than the caller wants."""


@dataclass(frozen=True)
class Item:
    """One individual piece of equipment; `rank` is its place in the list of members."""

    kind: str
    group: str | None
    rank: int


@dataclass(frozen=True)
class Moment:
    """A state while the consequences of an event are worked out, with what has been counted on the way."""

    conditions: tuple[Condition, ...]
    orders: tuple[str, ...]
    switchovers: tuple[tuple[int, ...], ...]
    starts: tuple[int, ...] = ()
    repaired: tuple[int, ...] = ()

    def put(self, item: int, condition: Condition) -> Moment:
        changed = list(self.conditions)
        changed[item] = condition
        return replace(self, conditions=tuple(changed))

    def order(self, group: int, order: str) -> Moment:
        changed = list(self.orders)
        changed[group] = order
        return replace(self, orders=tuple(changed))

    def switching(self, group: int, stages: tuple[int, ...]) -> Moment:
        changed = list(self.switchovers)
        changed[group] = stages
        return replace(self, switchovers=tuple(changed))

    @property
    def state(self) -> Moment:
        return replace(self, starts=(), repaired=())


#: Moments with their chances; the chances sum to one.
Chances = list[tuple[Fraction, Moment]]


def then(chances: Chances, step: Callable[[Moment], Chances]) -> Chances:
    """Let the next consequence follow on every branch."""
    return [(p * q, after) for p, moment in chances for q, after in step(moment)]


def split(share: Fraction, yes: Callable[[], Chances], no: Callable[[], Chances]) -> Chances:
    """Branch with a chance; a branch that cannot happen is left out."""
    branches: Chances = []
    if share > 0:
        branches += [(share * p, moment) for p, moment in yes()]
    if share < 1:
        branches += [((1 - share) * p, moment) for p, moment in no()]
    return branches


def evenly(items: Sequence[int], step: Callable[[int], Chances]) -> Chances:
    """Pick one of several items that look alike, each with the same chance."""
    return [(p / len(items), moment) for item in items for p, moment in step(item)]


class Plant:
    """The items, the groups, what is good and failed in a state."""

    def __init__(self, spec: Spec) -> None:
        self.units: dict[str, dict[str, Any]] = {name: dict(unit) for name, unit in spec["units"].items()}
        self.groups: dict[str, dict[str, Any]] = {name: dict(group) for name, group in spec.get("groups", {}).items()}
        self.crews: dict[str, dict[str, Any]] = {name: dict(crew) for name, crew in spec.get("crews", {}).items()}
        self.system = spec["system"]
        self.while_down = spec.get("while_down", "continue")
        self.initial: Mapping[str, int] = spec.get("initial", {})
        self.numbers = {name: number for number, name in enumerate(self.groups)}
        self.items: list[Item] = []
        for name, group in self.groups.items():
            for rank, (kind, count) in enumerate(group["members"]):
                self.items += [Item(kind, name, rank)] * count
        grouped = {item.kind for item in self.items}
        calling = {kind for crew in self.crews.values() for kind in crew["repairs"]}
        for kind in self.units:
            if kind in set(names(self.system)) or (kind in calling and kind not in grouped):
                self.items.append(Item(kind, None, 0))

    # -- what the spec says of an item or a group

    def unit(self, item: int) -> dict[str, Any]:
        return self.units[self.items[item].kind]

    def renewed_at_once(self, item: int) -> bool:
        return self.unit(item).get("repair_time") == 0

    def place(self, item: int) -> str:
        """Name of the group that an item belongs to, or its own where it stands alone."""
        return self.items[item].group or self.items[item].kind

    def start_failure(self, item: int) -> Fraction:
        return Fraction(self.unit(item).get("start_failure", 0))

    def of(self, group: str) -> list[int]:
        return [number for number, item in enumerate(self.items) if item.group == group]

    def size(self, group: str) -> int:
        return len(self.of(group))

    def required(self, group: str) -> int:
        return int(self.groups[group].get("required", 1))

    def places(self, group: str) -> int:
        if self.groups[group].get("redundancy") == "active":
            return self.size(group)
        return int(self.groups[group].get("on_duty", self.required(group)))

    def active(self, group: str) -> bool:
        said = self.groups[group].get("redundancy")
        return said == "active" or (said is None and self.places(group) == self.size(group))

    def dormancy(self, group: str) -> Fraction:
        said = self.groups[group].get("redundancy")
        if said == "warm_standby":
            return Fraction(self.groups[group]["dormancy_factor"])
        return Fraction(0) if said == "cold_standby" else ONE

    def coverage(self, group: str, failed_before: int) -> Fraction:
        listed = self.groups[group].get("coverage") or [1]
        return Fraction(listed[min(failed_before, len(listed) - 1)])

    def outcome(self, group: str) -> str:
        return str(self.groups[group].get("outcome", "until_repair"))

    def takes_time(self, group: str) -> bool:
        return bool(self.groups[group].get("switchover_time", 0) > 0)

    # -- what holds in a state

    def having(self, moment: Moment, group: str, condition: Condition) -> list[int]:
        return [item for item in self.of(group) if moment.conditions[item] == condition]

    def starting(self, moment: Moment, group: str) -> list[int]:
        return [item for item in self.of(group) if moment.conditions[item][0] == STARTING]

    def good(self, moment: Moment, item: int) -> bool:
        condition = moment.conditions[item]
        return condition in (DUTY, WAITING) or condition[0] == STARTING

    def good_of(self, moment: Moment, group: str) -> list[int]:
        return [item for item in self.of(group) if self.good(moment, item)]

    def failed_of(self, moment: Moment, group: str) -> int:
        return self.size(group) - len(self.good_of(moment, group))

    def on_duty(self, moment: Moment, group: str) -> int:
        return len(self.having(moment, group, DUTY))

    def delivers(self, moment: Moment, name: str) -> bool:
        if name not in self.groups:
            return all(self.good(moment, item) for item in self.alone(name))
        number = self.numbers[name]
        if moment.orders[number] == LOST:
            return False
        if self.active(name) and (moment.orders[number] == OUT or moment.switchovers[number]):
            return False
        return self.on_duty(moment, name) >= self.required(name)

    def capacity(self, moment: Moment, name: str) -> Fraction:
        if name not in self.groups:
            share = Fraction(self.units[name].get("capacity", 1))
            return min(ONE, share) if self.delivers(moment, name) else Fraction(0)
        number = self.numbers[name]
        if moment.orders[number] == LOST:
            return Fraction(0)
        if self.active(name) and (moment.orders[number] == OUT or moment.switchovers[number]):
            return Fraction(0)
        usual = Fraction(1, self.required(name))
        carried = self.having(moment, name, DUTY)
        return min(ONE, sum((Fraction(self.unit(item).get("capacity", usual)) for item in carried), Fraction(0)))

    def alone(self, kind: str) -> list[int]:
        return [number for number, item in enumerate(self.items) if item.group is None and item.kind == kind]

    def up(self, moment: Moment) -> bool:
        return holds(self.system, lambda name: self.delivers(moment, name))

    def failure_rate(self, moment: Moment, item: int) -> Fraction:
        """Present failure rate of a good item."""
        rate = Fraction(self.unit(item)["failure_rate"])
        group = self.items[item].group
        mode = self.while_down if self.place(item) in set(names(self.system)) else "continue"
        if group is not None:
            mode = self.groups[group].get("while_down", mode)
        down = not self.up(moment)
        if down and mode == "stop":
            return Fraction(0)
        if group is None or self.active(group):
            if mode == "standby_rate":
                raise ValueError("standby_rate is refused where there is no standby")
            return rate
        if moment.conditions[item] != DUTY or (down and mode == "standby_rate"):
            return rate * self.dormancy(group)
        return rate

    def without_redundancy(self, moment: Moment) -> bool:
        """Whether one more unit fault, covered, started and switched in at once, brings an up system down."""
        return self.up(moment) and any(
            self.good(moment, item)
            and self.failure_rate(moment, item) > 0
            and not self.renewed_at_once(item)
            and not holds(self.system, lambda name: self._delivers_after_fault(moment, name, item))  # noqa: B023
            for item in range(len(self.items))
        )

    def _delivers_after_fault(self, moment: Moment, name: str, item: int) -> bool:
        if name not in self.groups:
            return self.delivers(moment, name) and item not in self.alone(name)
        if item not in self.of(name) or moment.conditions[item] != DUTY or not self.delivers(moment, name):
            return self.delivers(moment, name)
        left = self.on_duty(moment, name) - 1 + len(self.starting(moment, name))
        if not self.active(name) and moment.orders[self.numbers[name]] == NORMAL and self.having(moment, name, WAITING):
            left += 1
        return left >= self.required(name)


def names(success: Any) -> Iterator[str]:
    """Names in a success criterion."""
    if isinstance(success, str):
        yield success
    else:
        for key in ("all_of", "any_of", "of"):
            for part in success.get(key, ()):
                yield from names(part)


def holds(success: Any, delivers: Callable[[str], bool]) -> bool:
    """Whether a success criterion holds."""
    if isinstance(success, str):
        return delivers(success)
    if "all_of" in success:
        return all(holds(part, delivers) for part in success["all_of"])
    if "any_of" in success:
        return any(holds(part, delivers) for part in success["any_of"])
    return sum(holds(part, delivers) for part in success["of"]) >= success["at_least"]


def carried(success: Any, capacity: Callable[[str], Fraction]) -> Fraction:
    """Delivered share of a success criterion."""
    if isinstance(success, str):
        return capacity(success)
    if "all_of" in success:
        return min(carried(part, capacity) for part in success["all_of"])
    if "any_of" in success:
        return max(carried(part, capacity) for part in success["any_of"])
    return sorted((carried(part, capacity) for part in success["of"]), reverse=True)[success["at_least"] - 1]


class Rules:
    """What follows from each event, one sentence of the language at a time."""

    def __init__(self, plant: Plant) -> None:
        self.plant = plant

    # -- faults

    def fail(self, moment: Moment, item: int) -> Moment:
        """The item is failed from now on, and known to be."""
        unit = self.plant.unit(item)
        if unit.get("repair_time") is None:
            condition = BROKEN
        else:
            condition = DELAYED if unit.get("logistic_delay", 0) > 0 else QUEUED
        return moment.put(item, condition)

    def fault(self, moment: Moment, item: int) -> Chances:
        """One item fails by itself."""
        group = self.plant.items[item].group
        if group is None:
            return [(ONE, self.fail(moment, item))]
        if self.plant.active(group):
            return self.fault_in_active(moment, group, item)
        before = moment.conditions[item]
        after = self.fail(moment, item)
        if before == WAITING:
            return [(ONE, after)]
        if before[0] == STARTING:  # "a unit lost meanwhile begins a new attempt with full time, without a new draw"
            return self.start_one(after, group, timed=True)
        if moment.orders[self.plant.numbers[group]] != NORMAL:  # "further duty faults leave their places empty"
            return [(ONE, after)]
        if not self.plant.having(after, group, WAITING):  # no substitute, no draw
            return [(ONE, after)]
        return split(
            self.plant.coverage(group, self.plant.failed_of(moment, group)),
            lambda: self.start_one(after, group, timed=True),
            lambda: self.uncovered(after, group),
        )

    def fault_in_active(self, moment: Moment, group: str, item: int) -> Chances:
        number = self.plant.numbers[group]
        after = self.fail(moment, item)
        if moment.orders[number] != NORMAL:
            return [(ONE, after)]
        if len(self.plant.good_of(after, group)) < self.plant.required(group):
            return [(ONE, after)]
        covered = after
        if self.plant.takes_time(group):
            covered = after.switching(number, (*after.switchovers[number], 1))
        return split(
            self.plant.coverage(group, self.plant.failed_of(moment, group)),
            lambda: [(ONE, covered)],
            lambda: self.uncovered(after, group),
        )

    def uncovered(self, moment: Moment, group: str) -> Chances:
        number = self.plant.numbers[group]
        outcome = self.plant.outcome(group)
        if outcome == "lost":
            return [(ONE, moment.order(number, LOST))]
        if outcome != "all_failed":
            return [(ONE, moment.order(number, OUT))]
        for item in self.plant.good_of(moment, group):
            if not self.plant.renewed_at_once(item):
                moment = self.fail(moment, item)
            elif moment.conditions[item][0] == STARTING:
                moment = moment.put(item, WAITING)
        return self.fill_without_attempts(moment.switching(number, ()), group)

    # -- takeovers

    def start_one(self, moment: Moment, group: str, timed: bool) -> Chances:
        """Try the standbys in rank order for one empty place."""
        waiting = self.plant.having(moment, group, WAITING)
        if not waiting:
            return [(ONE, moment)]
        first = min(self.plant.items[item].rank for item in waiting)
        alike = [item for item in waiting if self.plant.items[item].rank == first]
        return evenly(alike, lambda item: self.attempt(moment, group, item, timed))

    def attempt(self, moment: Moment, group: str, item: int, timed: bool) -> Chances:
        tried = replace(moment, starts=(*moment.starts, item))
        began = (STARTING, 1) if timed and self.plant.takes_time(group) else DUTY
        return split(
            self.plant.start_failure(item),
            lambda: self.start_one(self.fail(tried, item), group, timed),
            lambda: [(ONE, tried.put(item, began))],
        )

    def start_all(self, moment: Moment, group: str, timed: bool) -> Chances:
        """Try standbys for every place that is empty and has no start under way."""
        taken = self.plant.on_duty(moment, group) + len(self.plant.starting(moment, group))
        if taken >= self.plant.places(group) or not self.plant.having(moment, group, WAITING):
            return [(ONE, moment)]
        return then(self.start_one(moment, group, timed), lambda after: self.start_all(after, group, timed))

    def fill_without_attempts(self, moment: Moment, group: str) -> Chances:
        """Put waiting units on duty by rank, without start attempts."""
        waiting = self.plant.having(moment, group, WAITING)
        if not waiting or self.plant.on_duty(moment, group) >= self.plant.places(group):
            return [(ONE, moment)]
        first = min(self.plant.items[item].rank for item in waiting)
        alike = [item for item in waiting if self.plant.items[item].rank == first]
        return evenly(alike, lambda item: self.fill_without_attempts(moment.put(item, DUTY), group))

    def give_up_starts(self, moment: Moment, group: str) -> Moment:
        for item in self.plant.starting(moment, group):
            moment = moment.put(item, WAITING)
        return moment

    def back_to_preferred(self, moment: Moment, group: str) -> Chances:
        """Switch back to members listed earlier, as often as one waits while one listed later runs."""
        if self.plant.active(group) or not self.plant.groups[group].get("return_to_preferred", False):
            return [(ONE, moment)]
        if moment.orders[self.plant.numbers[group]] != NORMAL:
            return [(ONE, moment)]
        waiting = self.plant.having(moment, group, WAITING)
        running = self.plant.having(moment, group, DUTY)
        if not waiting or not running:
            return [(ONE, moment)]
        rank = [item.rank for item in self.plant.items]
        first = min(rank[item] for item in waiting)
        last = max(rank[item] for item in running)
        if first >= last:
            return [(ONE, moment)]

        def attempt(item: int) -> Chances:
            tried = replace(moment, starts=(*moment.starts, item))
            return split(
                self.plant.start_failure(item),
                lambda: [(ONE, self.fail(tried, item))],
                lambda: evenly(
                    [other for other in running if rank[other] == last],
                    lambda other: [(ONE, tried.put(item, DUTY).put(other, WAITING))],
                ),
            )

        changed = evenly([item for item in waiting if rank[item] == first], attempt)
        return then(changed, lambda after: self.back_to_preferred(after, group))

    def switchover_step(self, moment: Moment, item: int) -> Chances:
        """A unit being switched in passes a stage."""
        stage = moment.conditions[item][1]
        group = self.plant.items[item].group
        assert group is not None
        last = int(self.plant.groups[group].get("switchover_stages", 1))
        return [(ONE, moment.put(item, DUTY if stage == last else (STARTING, stage + 1)))]

    def active_switchover_step(self, moment: Moment, group: str, which: int) -> Chances:
        """A switchover of an active group passes a stage."""
        number = self.plant.numbers[group]
        stages = list(moment.switchovers[number])
        if stages[which] == int(self.plant.groups[group].get("switchover_stages", 1)):
            del stages[which]
        else:
            stages[which] += 1
        return [(ONE, moment.switching(number, tuple(stages)))]

    # -- the end of an outage

    def outcome_comes(self, moment: Moment, group: str) -> Chances:
        """The mean time of an outcome is over."""
        number = self.plant.numbers[group]
        outcome = self.plant.outcome(group)
        over = moment.order(number, NORMAL)
        if outcome == "restart":
            return [(ONE, self.as_new(over, group))]
        if self.plant.active(group):
            return [(ONE, over.switching(number, ()))]  # "the good units are re-admitted"
        if outcome == "manual_takeover":
            return self.start_all(over, group, timed=False)
        return self.fill_without_attempts(self.give_up_starts(over, group), group)

    def as_new(self, moment: Moment, group: str) -> Moment:
        """All good, duty filled by rank."""
        moment = moment.switching(self.plant.numbers[group], ())
        for place, item in enumerate(self.plant.of(group)):
            moment = moment.put(item, DUTY if place < self.plant.places(group) else WAITING)
        return moment

    # -- repairs

    def repair_step(self, moment: Moment, item: int) -> Chances:
        """A repair passes a stage."""
        stage = moment.conditions[item][1]
        if stage < int(self.plant.unit(item).get("repair_stages", 1)):
            return [(ONE, moment.put(item, (REPAIRING, stage + 1)))]
        group = self.plant.items[item].group
        done = replace(moment, repaired=(*moment.repaired, item))
        if group is None:
            return [(ONE, done.put(item, DUTY))]
        if self.plant.active(group):
            return self.repaired_in_active(done.put(item, DUTY), group)
        return self.repaired_in_standby(done.put(item, WAITING), group, item)

    def repaired_in_active(self, moment: Moment, group: str) -> Chances:
        number = self.plant.numbers[group]
        good = len(self.plant.good_of(moment, group))
        order = moment.orders[number]
        if order == LOST:
            return [(ONE, moment)]
        enough = self.plant.size(group) if order == OUT and self.plant.outcome(group) == "restart" else None
        if good >= (enough or self.plant.required(group)):
            moment = moment.order(number, NORMAL).switching(number, ())
        return [(ONE, moment)]

    def repaired_in_standby(self, moment: Moment, group: str, item: int) -> Chances:
        number = self.plant.numbers[group]
        order = moment.orders[number]
        outcome = self.plant.outcome(group)
        again = self.plant.groups[group].get("after_repair") == "start_again"
        if order == LOST:
            return [(ONE, moment)]
        if order == NORMAL:
            return self.tried(moment, group, item, True) if again else self.take_place(moment, group, item)
        good = len(self.plant.good_of(moment, group))
        if outcome == "until_repair":
            if good < self.plant.required(group):
                return [(ONE, moment)]
            over = self.give_up_starts(moment.order(number, NORMAL), group)
            return self.fill_without_attempts(over, group)
        if outcome == "restart":
            if good < self.plant.size(group):
                return [(ONE, moment)]
            over = self.give_up_starts(moment.order(number, NORMAL), group)
            return self.fill_without_attempts(over, group)
        chances = self.tried(moment, group, item, False) if again else self.take_place(moment, group, item)
        return then(chances, lambda after: self.over_if_enough(after, group))

    def tried(self, moment: Moment, group: str, item: int, timed: bool) -> Chances:
        """A repaired unit has joined the standbys and is tried itself, if a place is empty without a start."""
        taken = self.plant.on_duty(moment, group) + len(self.plant.starting(moment, group))
        if taken >= self.plant.places(group):
            return [(ONE, moment)]
        tried = replace(moment, starts=(*moment.starts, item))
        began = (STARTING, 1) if timed and self.plant.takes_time(group) else DUTY
        return split(
            self.plant.start_failure(item),
            lambda: [(ONE, self.fail(tried, item))],
            lambda: [(ONE, tried.put(item, began))],
        )

    def over_if_enough(self, moment: Moment, group: str) -> Chances:
        """The outage is over once `required` are on duty; places still empty are tried then."""
        if self.plant.on_duty(moment, group) < self.plant.required(group):
            return [(ONE, moment)]
        return self.start_all(moment.order(self.plant.numbers[group], NORMAL), group, timed=True)

    def take_place(self, moment: Moment, group: str, item: int) -> Chances:
        """A repaired unit takes an empty place, from the start listed last if all of them have a start under way."""
        empty = self.plant.places(group) - self.plant.on_duty(moment, group)
        if empty == 0:
            return [(ONE, moment)]
        taken = moment.put(item, DUTY)
        starting = self.plant.starting(moment, group)
        if len(starting) < empty:
            return [(ONE, taken)]
        last = max(self.plant.items[other].rank for other in starting)
        listed_last = [other for other in starting if self.plant.items[other].rank == last]
        earliest = min(moment.conditions[other][1] for other in listed_last)
        alike = [other for other in listed_last if moment.conditions[other][1] == earliest]
        return evenly(alike, lambda other: [(ONE, taken.put(other, WAITING))])

    # -- crews

    def assign_crews(self, moment: Moment) -> Chances:
        """Send free crews to waiting units, call crews away from less urgent ones."""
        pooled = {kind for crew in self.plant.crews.values() for kind in crew["repairs"]}
        for item, condition in enumerate(moment.conditions):
            if condition == QUEUED and self.plant.items[item].kind not in pooled:
                moment = moment.put(item, (REPAIRING, 1))
        chances: Chances = [(ONE, moment)]
        for pool in self.plant.crews:
            chances = then(chances, lambda each: self.assign_pool(each, pool))  # noqa: B023
        return chances

    def calling(self, moment: Moment, pool: str) -> list[int]:
        """Items that are under repair by the pool or wait for one of its crews."""
        return [
            item
            for item, condition in enumerate(moment.conditions)
            if self.plant.items[item].kind in self.plant.crews[pool]["repairs"]
            and (condition == QUEUED or condition[0] in (INTERRUPTED, REPAIRING))
        ]

    def at_work(self, moment: Moment, pool: str) -> list[int]:
        return [item for item in self.calling(moment, pool) if moment.conditions[item][0] == REPAIRING]

    def assign_pool(self, moment: Moment, pool: str) -> Chances:
        crew = self.plant.crews[pool]
        order = list(crew.get("priority") or crew["repairs"])
        urgency = {item: order.index(self.plant.items[item].kind) for item in self.calling(moment, pool)}
        at_work = self.at_work(moment, pool)
        waiting = [item for item in urgency if item not in at_work]
        if not waiting:
            return [(ONE, moment)]
        # The next to be served: the most urgent, begun before new, the most advanced stage, chance among equals.
        first = min(urgency[item] for item in waiting)
        urgent = [item for item in waiting if urgency[item] == first]
        stages = {item: moment.conditions[item][1] for item in urgent}  # 0 where never begun
        served = [item for item in urgent if stages[item] == max(stages.values())]

        def serve(before: Moment, item: int) -> Chances:
            return self.assign_pool(before.put(item, (REPAIRING, max(stages[item], 1))), pool)

        if len(at_work) < crew["size"]:
            return evenly(served, lambda item: serve(moment, item))
        # No crew is free: one is called away from the least urgent, of these from the least advanced repair.
        last = max(urgency[item] for item in at_work)
        if last <= first:
            return [(ONE, moment)]
        idle = [item for item in at_work if urgency[item] == last]
        least = min(moment.conditions[item][1] for item in idle)
        left = [item for item in idle if moment.conditions[item][1] == least]
        return evenly(
            left,
            lambda other: evenly(served, lambda item: serve(moment.put(other, (INTERRUPTED, least)), item)),
        )

    # -- all together

    def events(self, moment: Moment) -> Iterator[tuple[Fraction, Chances]]:
        """Yield every event that is possible in a state: its rate, where it leads before crews are sent."""
        for item, condition in enumerate(moment.conditions):
            unit = self.plant.unit(item)
            group = self.plant.items[item].group
            if self.plant.good(moment, item) and not self.plant.renewed_at_once(item):
                yield self.plant.failure_rate(moment, item), self.fault(moment, item)
            if condition[0] == STARTING:
                assert group is not None
                yield self._switchover_rate(group), self.switchover_step(moment, item)
            if condition == DELAYED:
                yield 1 / Fraction(unit["logistic_delay"]), [(ONE, moment.put(item, QUEUED))]
            if condition[0] == REPAIRING:
                stages = Fraction(unit.get("repair_stages", 1))
                yield stages / Fraction(unit["repair_time"]), self.repair_step(moment, item)
        for group, number in self.plant.numbers.items():
            for which in range(len(moment.switchovers[number])):
                yield self._switchover_rate(group), self.active_switchover_step(moment, group, which)
            if moment.orders[number] == OUT and self.plant.outcome(group) != "until_repair":
                yield 1 / Fraction(self.plant.groups[group]["outcome_time"]), self.outcome_comes(moment, group)

    def _switchover_rate(self, group: str) -> Fraction:
        stages = Fraction(self.plant.groups[group].get("switchover_stages", 1))
        return stages / Fraction(self.plant.groups[group]["switchover_time"])

    def finish(self, chances: Chances) -> Chances:
        """What follows on every event: duty goes back to preferred members, crews are sent."""
        for group in self.plant.groups:
            chances = then(chances, lambda moment: self.back_to_preferred(moment, group))  # noqa: B023
        return then(chances, self.assign_crews)

    def first(self) -> Chances:
        """The state at the start; several where the first crew is sent by chance."""
        moment = Moment(
            (DUTY,) * len(self.plant.items), (NORMAL,) * len(self.plant.groups), ((),) * len(self.plant.groups)
        )
        for group in self.plant.groups:
            failed = [item for item in self.plant.of(group) if self._fails_at_start(item)]
            for item in self.plant.of(group):
                moment = self.fail(moment, item) if item in failed else moment.put(item, DUTY)
            good = [item for item in self.plant.of(group) if item not in failed]
            for place, item in enumerate(good):
                moment = moment.put(item, DUTY if place < self.plant.places(group) else WAITING)
        for item, each in enumerate(self.plant.items):
            if each.group is None and self._fails_at_start(item):
                moment = self.fail(moment, item)
        return [(p, after.state) for p, after in self.assign_crews(moment)]

    def _fails_at_start(self, item: int) -> bool:
        each = self.plant.items[item]
        if self.plant.renewed_at_once(item):
            return False
        alike = [number for number, other in enumerate(self.plant.items) if other == each]
        places = {other.group for other in self.plant.items if other.kind == each.kind}
        number = self.plant.initial.get(f"{each.group}.{each.kind}", 0)
        if len(places) == 1:
            number = self.plant.initial.get(each.kind, number)
        return item in alike[len(alike) - number :]


@dataclass
class Chain:
    """The enumerated chain: rates as fractions by pair of states, what happens per hour by state."""

    plant: Plant
    rules: Rules
    start: dict[Moment, Fraction]
    states: dict[Moment, int]
    rates: dict[Moment, dict[Moment, Fraction]]
    happening: dict[str, dict[Moment, Fraction]] = field(
        default_factory=lambda: defaultdict(lambda: defaultdict(Fraction))
    )

    def values(self, of: Callable[[Moment], Any]) -> NDArray[np.float64]:
        """Return one number for each state."""
        return np.array([float(of(state)) for state in self.states])

    def generator(self) -> NDArray[np.float64]:
        """Return the generator matrix, shape (n, n)."""
        matrix = np.zeros((len(self.states), len(self.states)))
        for source, row in self.rates.items():
            for target, rate in row.items():
                if source != target:
                    matrix[self.states[source], self.states[target]] = float(rate)
        return matrix - np.diag(matrix.sum(axis=1))

    def first(self) -> NDArray[np.float64]:
        """Return the distribution at the start, shape (n,)."""
        return self.values(lambda state: self.start.get(state, 0))

    def up(self) -> NDArray[np.bool_]:
        """Return which states are up, shape (n,)."""
        return self.values(self.plant.up) > 0

    def rewards(self) -> dict[str, NDArray[np.float64]]:
        """Return what is to be compared, one number for each state, by name."""
        plant, rules = self.plant, self.rules
        in_system = set(names(plant.system))

        def failed(state: Moment, place: str) -> int:
            return sum(not plant.good(state, item) for item in range(len(plant.items)) if plant.place(item) == place)

        rewards = {
            "units failed": self.values(lambda state: sum(failed(state, place) for place in in_system)),
            "capacity": self.values(lambda state: carried(plant.system, lambda name: plant.capacity(state, name))),
            "without redundancy": self.values(plant.without_redundancy),
        }
        for place in dict.fromkeys(plant.place(item) for item in range(len(plant.items))):
            if place in plant.groups or all(item.group is None for item in plant.items if item.kind == place):
                rewards[f"{place}: units failed"] = self.values(lambda state: failed(state, place))  # noqa: B023
            rewards[f"{place}: capacity"] = self.values(lambda state: plant.capacity(state, place))  # noqa: B023
            rewards[f"{place}: delivers"] = self.values(lambda state: plant.delivers(state, place))  # noqa: B023
        for pool in plant.crews:
            busy = self.values(lambda state: len(rules.at_work(state, pool)))  # noqa: B023
            rewards[f"{pool}: busy"] = busy
            rewards[f"{pool}: waiting"] = self.values(lambda state: len(rules.calling(state, pool))) - busy  # noqa: B023
        for name, per_hour in self.happening.items():
            rewards[name] = self.values(lambda state: per_hour.get(state, 0))  # noqa: B023
        return rewards


def enumerate_chain(spec: Spec, most: int = 5000) -> Chain:
    """Find every state that can be reached, by a breadth-first search."""
    plant = Plant(spec)
    rules = Rules(plant)
    start: dict[Moment, Fraction] = defaultdict(Fraction)
    for p, state in rules.first():
        start[state] += p
    chain = Chain(plant, rules, dict(start), {state: n for n, state in enumerate(start)}, {})
    unvisited = deque(chain.states)
    while unvisited:
        source = unvisited.popleft()
        row: dict[Moment, Fraction] = defaultdict(Fraction)
        for rate, consequences in rules.events(source):
            if rate == 0:
                continue
            chances = rules.finish(consequences)
            assert sum(p for p, _ in chances) == 1
            for p, moment in chances:
                target = moment.state
                if target not in chain.states:
                    chain.states[target] = len(chain.states)
                    unvisited.append(target)
                    if len(chain.states) > most:
                        raise TooLarge
                row[target] += rate * p
                for name, count in _happened(plant, rules, source, moment):
                    chain.happening[name][source] += rate * p * count
        chain.rates[source] = dict(row)
    return chain


def _happened(plant: Plant, rules: Rules, source: Moment, moment: Moment) -> Iterator[tuple[str, int]]:
    """Yield what one event counts: starts, repairs, calls for a crew, calls that find no free one."""
    for item in moment.starts:
        yield f"{plant.place(item)}: starts of {plant.items[item].kind}", 1
    for item in moment.repaired:
        yield f"{plant.place(item)}: repairs of {plant.items[item].kind}", 1
    for pool, crew in plant.crews.items():
        before = set(rules.calling(source, pool)) - set(moment.repaired)
        new = len(set(rules.calling(moment, pool)) - before)
        free = max(crew["size"] - len(before), 0)
        if new:
            yield f"{pool}: calls", new
        if new > free:
            yield f"{pool}: calls that wait", new - free


# ---------------------------------------------------------------------------------------- numbers from any chain


def long_run(generator: NDArray[np.float64], first: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the long-run shares of the states from a start, shape (n,); several closed classes are allowed."""
    off = generator - np.diag(np.diag(generator))
    count, label = connected_components(off > 0, directed=True, connection="strong")
    leaves = np.zeros(count, dtype=bool)
    for source, target in zip(*np.nonzero(off > 0), strict=True):
        leaves[label[source]] |= label[source] != label[target]
    passing = leaves[label]
    mass = np.where(passing, 0.0, first)
    if passing.any():
        times = np.linalg.solve(-generator[np.ix_(passing, passing)].T, first[passing])
        mass[~passing] += times @ generator[np.ix_(passing, ~passing)]
    result = np.zeros(len(first))
    for closed in np.flatnonzero(~leaves):
        members = np.flatnonzero(label == closed)
        result[members] = mass[members].sum() * stationary(off[np.ix_(members, members)])
    return result


def stationary(off: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the stationary distribution of one closed class by elimination without subtraction, shape (n,)."""
    rates = off.copy()
    size = len(rates)
    for last in range(size - 1, 0, -1):
        rates[:last, last] /= rates[last, :last].sum()
        rates[:last, :last] += np.outer(rates[:last, last], rates[last, :last])
    weights = np.ones(size)
    for state in range(1, size):
        weights[state] = weights[:state] @ rates[:state, state]
    return weights / weights.sum()


def mean_time_up(generator: NDArray[np.float64], first: NDArray[np.float64], up: NDArray[np.bool_]) -> float:
    """Return the mean time to the first down state; infinite where it may never come."""
    leads = generator > 0
    met = (first > 0) & up  # reached before any failure
    for _ in up:
        met = met | (leads[met].any(axis=0) & up)
    fails = ~up  # from here a failure comes
    for _ in up:
        fails = fails | leads[:, fails].any(axis=1)
    if not fails[met].all():
        return float("inf")
    inner = generator[np.ix_(met, met)]
    return float(np.linalg.solve(-inner, np.ones(len(inner))) @ first[met])


def numbers(
    generator: NDArray[np.float64],
    first: NDArray[np.float64],
    up: NDArray[np.bool_],
    rewards: Mapping[str, NDArray[np.float64]],
    times: Sequence[float],
) -> dict[str, float]:
    """Return all numbers of a chain that are compared, by name.

    Only probability mass is summed, so that small numbers keep their digits.
    """
    steady = long_run(generator, first)
    falling = np.where(up, np.where(up, 0.0, generator).sum(axis=1), 0.0)
    result = {
        "steady-state availability": steady @ up,
        "steady-state unavailability": steady @ ~up,
        "failure frequency": steady @ falling,
        **{f"{name} in the long run": steady @ reward for name, reward in rewards.items()},
    }
    result["mean time to first failure"] = mean_time_up(generator, first, up)
    absorbing = np.where(up[:, None], generator, 0.0)
    for time in times:
        result[f"unreliability at {time}"] = first @ expm(absorbing * time) @ ~up
        then_on = first @ expm(generator * time)
        result[f"unavailability at {time}"] = then_on @ ~up
        result[f"failure frequency at {time}"] = then_on @ falling
        result |= {f"{name} at {time}": then_on @ reward for name, reward in rewards.items()}
    return {name: float(value) for name, value in result.items()}
