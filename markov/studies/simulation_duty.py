"""Who carries duty in a simulated plant: coverage, takeover, outages, trains."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Protocol

from markov.studies.simulation_clock import Clock
from markov.studies.simulation_draws import Draws
from markov.studies.simulation_plan import FaultKind
from markov.studies.simulation_plant import Group, Item, Node


class Upkeep(Protocol):
    """What the rules of duty ask of those who repair."""

    def begin(self, item: Item) -> None:
        """Take note of a fault that has just become known."""

    def renews_at_once(self, item: Item, mode: FaultKind | None) -> bool:
        """Return whether a fault is repaired in the moment it is known."""

    def renew(self, item: Item) -> None:
        """Make an item good, whatever its repair has come to."""

    def begin_switch(self, group: Group) -> None:
        """Begin the repair of a failed switch, if it has one."""


class Duty:
    """The rules of groups; each method leaves all groups as the instant consequences of an event leave them."""

    def __init__(self, clock: Clock, draws: Draws, count: Callable[[str, Item], None]) -> None:
        self.clock = clock
        self.draws = draws
        self.count = count
        self.upkeep: Upkeep

    # -- faults

    def fail(self, hits: Iterable[tuple[Item, FaultKind | None, bool, float]]) -> None:
        """Let items fail in one event: each with its mode, whether it is detected, and the depth of the fault."""
        hits = [hit for hit in hits if not hit[0].failed]
        before = self._failed_before([item for item, *_ in hits])
        known = []
        for item, mode, detected, depth in hits:
            if detected and self.upkeep.renews_at_once(item, mode):
                continue
            item.failed, item.mode, item.depth = True, mode, depth
            if detected:
                known.append(item)
        self._learn(known, before)

    def fail_in_test(self, found: list[Item], broken: list[Item]) -> None:
        """Make known what a test finds, with what it breaks, in one event."""
        before = self._failed_before([*found, *broken])
        for item in broken:
            if not self.upkeep.renews_at_once(item, None):
                item.failed, item.mode = True, None
        self._learn([*found, *(item for item in broken if item.failed)], before, separately=True)

    def reveal(self, items: Iterable[Item]) -> None:
        """Make hidden faults known in one event."""
        items = [item for item in items if item.hidden]
        self._learn(items, self._failed_before(items), separately=True)

    def _failed_before(self, items: list[Item]) -> dict[Group, int]:
        """Count for each group around the items how many of its members are failed, these items aside."""
        before: dict[Group, int] = {}
        for item in items:
            group = item.group
            while group is not None:
                if group not in before:
                    before[group] = group.failed_members
                group = group.group
        return before

    def _learn(self, items: list[Item], before: dict[Group, int], *, separately: bool = False) -> None:
        """Make faults known: one draw of coverage a group for one event, one for each where `separately`."""
        lost: dict[Group, list[int]] = {}
        for item in sorted(items, key=lambda each: each.role == "duty"):
            if self.upkeep.renews_at_once(item, item.mode):
                self.upkeep.renew(item)
                continue
            self._make_known(item, lost)
            if (separately and item.role == "duty") or (separately and lost and any(duty for duty, _ in lost.values())):
                self._react(lost, before)
                lost = {}
        self._react(lost, before)

    def _make_known(self, item: Item, lost: dict[Group, list[int]]) -> None:
        item.known = True
        item.left_out = item.under_test = item.bypassed = False
        if item.group is not None:
            self._take_out(item, item.group, lost)
        self.upkeep.begin(item)

    def _take_out(self, node: Node, group: Group, lost: dict[Group, list[int]]) -> None:
        losses = lost.setdefault(group, [0, 0])
        if node.role == "duty":
            losses[0] += 1
        elif node.role == "starting":
            losses[1] += 1
        self._give_up_start(node)
        node.role = "out"

    def _give_up_start(self, node: Node) -> None:
        if node.start is not None:
            self.clock.hold(node.start)
            node.start = None

    def _react(self, lost: dict[Group, list[int]], before: dict[Group, int]) -> None:
        """Let groups answer their losses, (on duty, being started), the innermost first."""
        while lost:
            group = max(lost, key=lambda each: each.depth)
            on_duty, starting = lost.pop(group)
            if not group.live:
                self._designate(group)
            elif group.plan.active:
                self._react_active(group, on_duty, before)
            else:
                self._react_standby(group, on_duty, starting, before)
            self._check_train(group, lost, before)

    def ripple(self, group: Group) -> None:
        """Let the groups around a group take note of what it has become."""
        lost: dict[Group, list[int]] = {}
        before: dict[Group, int] = {}
        self._check_train(group, lost, before)
        self._react(lost, before)

    def _check_train(self, train: Group, lost: dict[Group, list[int]], before: dict[Group, int]) -> None:
        group = train.group
        if group is None:
            return
        if train.role == "duty":
            if not train.delivers:
                before.setdefault(group, group.failed_members - (not train.good))
                self._take_out(train, group, lost)
                self._wait(train)
        elif train.role == "starting":
            if not train.could_start:
                before.setdefault(group, group.failed_members - (not train.good))
                self._take_out(train, group, lost)
                self._wait(train)
        elif train.role == "standby":
            if not train.good:
                self._take_out(train, group, lost)
        elif train.good:
            self.comes_back(group, train, repaired=True)

    def _wait(self, train: Group) -> None:
        """Let the good units of a train that has lost its criterion wait."""
        if train.good:
            train.role = "standby"
        self._designate(train)

    def _designate(self, train: Group) -> None:
        """In a train that waits, set by rank who would carry duty."""
        if train.outage is not None or train.lost or train.role == "starting":
            return
        if any(node.role == "starting" for node in train.nodes):
            return
        self.fill_by_rank(train, lambda node: node.seems_good)

    def fill_by_rank(self, group: Group, fits: Callable[[Node], bool]) -> None:
        """Give duty to the first members that fit; the others wait."""
        places = group.places
        for node in group.nodes:
            if node.role == "out":
                continue
            if places > 0 and fits(node):
                node.role = "duty"
                places -= 1
            else:
                node.role = "standby"
            if isinstance(node, Group):
                self._designate(node)

    # -- coverage

    def _coverage(self, group: Group, before: dict[Group, int]) -> float:
        listed = group.plan.coverage
        return listed[min(before.get(group, 0), len(listed) - 1)]

    def _react_active(self, group: Group, faults: int, before: dict[Group, int]) -> None:
        if not faults or group.outage is not None or group.lost or group.good_members < max(group.needed, 1):
            return
        if not self.draws.chance(self._coverage(group, before)) or self._refused(group):
            self._uncover(group)
        elif group.plan.takeover.mean > 0.0:
            timer = self.clock.start(
                group.plan.takeover.draw(self.draws), lambda: self._end_active_switchover(group, timer)
            )
            group.switchovers.append(timer)

    def _end_active_switchover(self, group: Group, timer: object) -> None:
        group.switchovers = [each for each in group.switchovers if each is not timer]
        self.ripple(group)

    def _react_standby(self, group: Group, faults: int, starts: int, before: dict[Group, int]) -> None:
        if group.lost:
            return
        if starts:
            self.fill(group, starts, timed=True)
        if not faults or group.outage is not None or not group.count("standby"):
            return
        if not self.draws.chance(self._coverage(group, before)):
            self._uncover(group)
            return
        for _ in range(faults):
            if not group.count("standby"):
                return
            if group.switch is not None and group.switch.failed:
                self.reveal_switch(group)
                return
            if self._refused(group):
                self._uncover(group)
                return
            self.fill(group, 1, timed=True)

    def _refused(self, group: Group) -> bool:
        """Draw whether the switch refuses; in an active group a failed switch refuses always."""
        switch = group.switch
        if switch is None:
            return False
        if switch.failed:
            self.reveal_switch(group)
            return True
        if not self.draws.chance(switch.plan.on_demand):
            return False
        if switch.plan.repair is not None:
            self.fail_switch(group, known=True)
        return True

    # -- the switch

    def fail_switch(self, group: Group, *, known: bool, depth: float = 0.0) -> None:
        """Let the switch of a group fail."""
        switch = group.switch
        assert switch is not None
        if switch.failed:
            return
        if known and switch.plan.repair is not None and switch.plan.repair.mean == 0.0:
            return
        switch.failed, switch.known, switch.depth = True, known, depth
        if known:
            self.upkeep.begin_switch(group)

    def reveal_switch(self, group: Group) -> None:
        """Make known that the switch of a group is failed."""
        switch = group.switch
        if switch is not None and switch.failed and not switch.known:
            switch.known = True
            self.upkeep.begin_switch(group)

    def renew_switch(self, group: Group) -> None:
        """Make a switch good; it tries places that are empty, without a draw of coverage."""
        switch = group.switch
        assert switch is not None
        if switch.repair is not None:
            self.clock.hold(switch.repair)
        switch.failed = switch.known = switch.left_out = False
        switch.repair = None
        if not group.plan.active and group.live and group.outage is None and not group.lost:
            self.fill(group, group.empty_places, timed=True)
            self.ripple(group)

    def operate_falsely(self, group: Group) -> None:
        """Let a good switch act without need: one start attempt of a standby."""
        tried = self._in_order(group)
        on_duty = [node for node in group.nodes if node.role == "duty"]
        running = [node for node in on_duty if node.rank == max(each.rank for each in on_duty)]
        if tried and self._attempt(group, tried[0], timed=False) and group.empty_places < 0 and running:
            self._send_back(group, self.draws.one_of(running))
        self.ripple(group)

    # -- start attempts

    def _in_order(self, group: Group) -> list[Node]:
        """Return the standbys by rank, those of one rank in random order."""
        waiting = [node for node in group.nodes if node.role == "standby" and node.seems_good]
        if len(waiting) > 1:
            waiting = sorted(self.draws.shuffled(waiting), key=lambda node: node.rank)
        return waiting

    def fill(self, group: Group, places: int, *, timed: bool) -> None:
        """Start standbys for empty places, unless the switch is failed."""
        if places <= 0 or group.empty_places <= 0 or not group.count("standby"):
            return
        if group.switch is not None and group.switch.failed:
            self.reveal_switch(group)
            return
        self._start_standbys(group, places, timed=timed)

    def _start_standbys(self, group: Group, places: int, *, timed: bool) -> None:
        for node in self._in_order(group):
            if places <= 0 or group.empty_places <= 0:
                return
            if node.role == "standby" and self._attempt(group, node, timed=timed):
                places -= 1

    def _attempt(self, group: Group, node: Node, *, timed: bool) -> bool:
        started = self._attempt_item(node) if isinstance(node, Item) else self._attempt_train(node)
        if not started:
            return False
        takeover = group.plan.takeover
        if timed and takeover.mean > 0.0:
            node.role = "starting"
            node.start = self.clock.start(takeover.draw(self.draws), lambda: self._end_start(group, node))
        else:
            node.role = "duty"
        return True

    def _attempt_item(self, item: Item) -> bool:
        self.count("starts", item)
        if item.failed:
            if self.upkeep.renews_at_once(item, item.mode):
                self.upkeep.renew(item)
                return item.group is not None and not item.group.plan.starts_again
        elif item.left_out:
            item.left_out = False
            item.failed, item.mode = True, None
        elif self.draws.chance(item.kind.start_failure):
            if self.upkeep.renews_at_once(item, None):
                return item.group is not None and not item.group.plan.starts_again
            item.failed, item.mode = True, None
        else:
            return True
        item.known = True
        item.role = "out"
        self.upkeep.begin(item)
        return False

    def _attempt_train(self, train: Group) -> bool:
        for node in train.nodes:
            self._give_up_start(node)
            if node.role != "out":
                node.role = "standby"
        for node in train.nodes:
            if train.count("duty") >= train.places:
                break
            if node.role == "standby":
                self._attempt(train, node, timed=False)
        if train.running >= train.needed:
            return True
        train.role = "standby" if train.good else "out"
        self._designate(train)
        return False

    def _end_start(self, group: Group, node: Node) -> None:
        node.start = None
        node.role = "duty"
        if isinstance(node, Group):
            self._designate(node)
            self.ripple(node)
        if not group.live:
            self._designate(group)
        self.ripple(group)

    def _send_back(self, group: Group, node: Node) -> None:
        """Let a member that runs or is being started wait again."""
        self._give_up_start(node)
        node.role = "standby"
        if isinstance(node, Group):
            self._designate(node)

    def prefer(self, group: Group) -> None:
        """Give duty back to members listed earlier, where that is wanted."""
        if not group.live or group.outage is not None or group.lost:
            return
        tried: set[Node] = set()
        while True:
            running = [node for node in group.nodes if node.role == "duty"]
            if not running:
                return
            last = max(node.rank for node in running)
            better = [node for node in self._in_order(group) if node.rank < last and node not in tried]
            if not better:
                return
            if group.switch is not None and group.switch.failed:
                self.reveal_switch(group)
                return
            tried.add(better[0])
            if self._attempt(group, better[0], timed=False):
                self._send_back(group, self.draws.one_of([node for node in running if node.rank == last]))
            self.ripple(group)

    # -- outages

    def _uncover(self, group: Group) -> None:
        outcome = group.plan.outcome
        if outcome == "all_failed":
            self._fail_all(group)
        elif outcome == "lost":
            group.lost = True
        else:
            group.outage = outcome
            law = group.plan.outcome_law
            if law is not None:
                group.outage_end = self.clock.start(law.draw(self.draws), lambda: self._end_outage(group))

    def _fail_all(self, group: Group) -> None:
        for timer in group.switchovers:
            self.clock.hold(timer)
        group.switchovers = []
        for node in group.nodes:
            if isinstance(node, Group):
                self._fail_all(node)
                self._give_up_start(node)
                node.role = "standby" if node.good else "out"
            elif not node.failed and not self.upkeep.renews_at_once(node, None):
                node.failed, node.mode = True, None
                self._make_known(node, {})

    def _end_outage(self, group: Group) -> None:
        outcome, group.outage, group.outage_end = group.outage, None, None
        if outcome == "restart":
            self.reset(group)
        elif outcome == "restart_without_failed":
            self._readmit(group)
        elif not group.plan.active and group.live:
            self._start_standbys(group, group.empty_places, timed=False)
        else:
            self._designate(group)
        self.ripple(group)

    def _over(self, group: Group) -> None:
        group.outage = None
        if group.outage_end is not None:
            self.clock.hold(group.outage_end)
            group.outage_end = None

    def _end_switchovers(self, group: Group) -> None:
        for timer in group.switchovers:
            self.clock.hold(timer)
        group.switchovers = []

    def _readmit(self, group: Group) -> None:
        """End an outage: starts under way are given up, empty places are filled by rank with good members."""
        self._over(group)
        self._end_switchovers(group)
        if group.plan.active:
            return
        for node in group.nodes:
            if node.role == "starting":
                self._send_back(group, node)
        for node in group.nodes:
            if node.role == "standby" and node.good and group.empty_places > 0:
                node.role = "duty"
                if isinstance(node, Group):
                    self._designate(node)

    def reset(self, group: Group) -> None:
        """Make all of a group good and set it up as at the start; a group that is lost stays lost."""
        self._over(group)
        self._end_switchovers(group)
        for node in group.nodes:
            self._give_up_start(node)
            if isinstance(node, Group):
                self.reset(node)
            else:
                self.upkeep.renew(node)
            node.role = "standby" if node.seems_good else "out"
        if group.switch is not None and group.switch.failed:
            if group.switch.repair is not None:
                self.clock.hold(group.switch.repair)
            group.switch.failed = group.switch.known = group.switch.left_out = False
            group.switch.repair = None
        self.fill_by_rank(group, lambda node: node.seems_good)

    # -- coming back

    def comes_back(self, group: Group, node: Node, *, repaired: bool) -> None:
        """Let a member return that is good again: repaired, or after a test."""
        if group.plan.active:
            self._comes_back_active(group, node, repaired)
        else:
            node.role = "standby"
            if isinstance(node, Group):
                self._designate(node)
            if group.outage is not None or group.lost:
                self._comes_back_in_outage(group, node, repaired)
            elif group.live:
                self._place(group, node, again=repaired and group.plan.starts_again)
            else:
                self._designate(group)
        self.ripple(group)

    def _comes_back_active(self, group: Group, node: Node, repaired: bool) -> None:
        node.role = "duty"
        if isinstance(node, Group):
            self._designate(node)
        if not repaired or group.lost:
            return
        enough = group.good_members >= group.needed
        if group.outage == "restart":
            if not group.failed_members:
                self._over(group)
                self._end_switchovers(group)
        elif enough:
            self._over(group)
            self._end_switchovers(group)

    def _comes_back_in_outage(self, group: Group, node: Node, repaired: bool) -> None:
        if group.lost or not repaired:
            return
        if group.outage == "until_repair":
            if group.good_members >= group.needed:
                self._readmit(group)
            return
        if group.outage == "restart":
            if not group.failed_members:
                self._readmit(group)
            return
        if not group.live:
            if group.good_members >= group.needed:
                self._over(group)
                self._designate(group)
            return
        if group.empty_places > 0 and group.plan.starts_again:
            self._attempt(group, node, timed=False)
        else:
            self._place(group, node, again=False)
        if group.running >= group.needed:
            self._over(group)
            self.fill(group, group.empty_places, timed=True)

    def _place(self, group: Group, node: Node, *, again: bool) -> None:
        """Put a member that waits where it is needed."""
        starting = [each for each in group.nodes if each.role == "starting"]
        if again:
            if group.empty_places > 0 and not starting:
                if group.switch is not None and group.switch.failed:
                    self.reveal_switch(group)
                else:
                    self._attempt(group, node, timed=True)
        elif group.empty_places > 0:
            node.role = "duty"
        elif starting:
            node.role = "duty"
            self._send_back(group, starting[-1])

    # -- out of service for a test

    def take_out_for_test(self, items: Iterable[Item]) -> None:
        """Take items out of service; duty passes to standbys by start attempts, without a draw of coverage."""
        lost: dict[Group, list[int]] = {}
        for item in items:
            item.under_test = True
            if item.group is not None:
                self._take_out(item, item.group, lost)
        for group, (on_duty, starting) in lost.items():
            if not group.live:
                self._designate(group)
            elif not group.plan.active and not group.lost:
                self.fill(group, starting if group.outage is not None else on_duty + starting, timed=True)
            self.ripple(group)

    def change_places(self, group: Group, places: int) -> None:
        """Set how many members carry duty, as a phase begins."""
        group.places = places
        if group.plan.active:
            pass
        elif not group.live:
            self._designate(group)
        else:
            while group.empty_places < 0:
                extra = [node for node in group.nodes if node.role == "starting"] or [
                    node for node in group.nodes if node.role == "duty"
                ]
                self._send_back(group, extra[-1])
            if group.outage is None and not group.lost:
                self.fill(group, group.empty_places, timed=True)
        self.ripple(group)
