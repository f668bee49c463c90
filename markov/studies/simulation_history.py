"""One life of a simulated plant: event after event."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from markov.errors import NotReached
from markov.studies.simulation_building import SYSTEM, Plant, delivered, holds
from markov.studies.simulation_clock import Clock, Timer
from markov.studies.simulation_draws import Draws
from markov.studies.simulation_duty import Duty
from markov.studies.simulation_instants import Instants
from markov.studies.simulation_plan import Plan
from markov.studies.simulation_plant import Group, Item
from markov.studies.simulation_record import Record
from markov.studies.simulation_shocks import Shocks, fault_alone
from markov.studies.simulation_upkeep import Repairs

#: Rounds in which the instant consequences of one event have to come to rest.
MOST_ROUNDS = 1000


class History:
    """One life of a plant, from time 0 on.

    Parameters
    ----------
    plan : Plan
    seed : int, or sequence of int
    record : Record
        Takes what is counted and what lasts.

    Attributes
    ----------
    up : bool
        Whether the system is up now.
    first_failure : float or None
        When the system was down for the first time, in hours.
    """

    def __init__(self, plan: Plan, seed: int | Sequence[int], record: Record) -> None:
        self.plan = plan
        self.record = record
        self.clock = Clock()
        self.draws = Draws(seed)
        self.plant = Plant(plan)
        self.duty = Duty(self.clock, self.draws, self._count)
        self.repairs = Repairs(plan, self.clock, self.draws, self._count)
        self.duty.upkeep = self.repairs
        self.repairs.duty = self.duty
        self.repairs.count_crew = record.count
        self.shocks = [Shocks(cause, self.plant) for cause in plan.causes]
        self.instants = Instants(plan, self._begin_phase, self._visit, self._end_test, self._begin_test)
        self.system = plan.system
        self.repair_allowed = True
        self.restoring: Timer | None = None
        self.under_test: dict[int, tuple[list[Item], list[Item]]] = {}
        self.up = True
        self.group_up: dict[str, bool] = {}
        self.system_spurious = False
        self.first_failure: float | None = None
        self._deferring = [group for group in self.plant.groups.values() if group.plan.repair_when != "at_once"]
        self._preferring = [group for group in self.plant.groups.values() if group.plan.prefers]
        self._offline = [group for group in self.plant.groups.values() if group.plan.offline_repair]
        self._told_by_failure = [item for item in self.plant.items if "system_failure" in item.kind.revealed_by]
        self._told_by_demand = [item for item in self.plant.items if "demand" in item.kind.revealed_by]
        self._may_be_spurious = any(mode.spurious for kind in plan.kinds.values() for mode in kind.modes)
        self._races: list[tuple[float, Callable[[], None]]] = []
        self._race_rate = 0.0
        self._set_up()

    # -- running

    def run(self, until: float, *, to_failure: bool = False, most_events: float = math.inf) -> None:
        """Let time pass, what happens at `until` included; with `to_failure` end at the first failure of the system.

        Raises
        ------
        NotReached
            More events than `most_events` came first.
        """
        clock, record = self.clock, self.record
        events = 0
        while not (to_failure and self.first_failure is not None):
            rate = self._race_rate
            race = clock.now + self.draws.exponential() / rate if rate > 0.0 else math.inf
            timer = clock.next()
            fixed = self.instants.next
            moment = min(race, timer, fixed)
            if moment > until:
                record.pass_time(until - clock.now)
                clock.now = until
                return
            if moment == math.inf:
                return
            record.pass_time(moment - clock.now)
            clock.now = moment
            if timer == moment:
                clock.end_next()
            elif fixed == moment:
                self.instants.happen()
            else:
                self._one_of_the_races()
            self._settle()
            events += 1
            if events > most_events:
                raise NotReached(f"a simulated life of more than {most_events:g} events before the system failed")

    def _one_of_the_races(self) -> None:
        point = self.draws.uniform() * self._race_rate
        for rate, action in self._races:
            point -= rate
            if point < 0.0:
                action()
                return
        self._races[-1][1]()

    # -- the start

    def _set_up(self) -> None:
        known = self.plant.place_initial(self.draws)
        self._apply_phase(0)
        for item in self.plant.items:
            item.role = "out" if item.known else "standby"
        for group in reversed(self.plant.groups.values()):
            for node in group.nodes:
                if isinstance(node, Group):
                    node.role = "standby" if node.good else "out"
            self.duty.fill_by_rank(group, lambda node: node.seems_good)
        for item in known:
            if self.repairs.renews_at_once(item, item.mode):
                self.repairs.renew(item)
                if item.group is not None:
                    self.duty.comes_back(item.group, item, repaired=True)
            else:
                self.repairs.begin(item)
        self._settle(first=True)

    # -- phases, visits, tests

    def _apply_phase(self, position: int) -> None:
        phases = self.plan.phases
        factors: dict[str, float] = {}
        required: dict[str, int] = {}
        if phases:
            phase = phases[position]
            factors, required = phase.factors, phase.required
            self.system = phase.system if phase.system is not None else self.plan.system
            self.repair_allowed = phase.repair
        for group in self.plant.groups.values():
            group.required = required.get(group.name, group.plan.required)
            if not group.plan.active:
                group.places = group.plan.on_duty or group.required
        for item in self.plant.items:
            rate = item.kind.rate * factors.get(item.kind.name, 1.0)
            seen = sum(mode.share * mode.detected for mode in item.kind.modes)
            item.alone = (rate * seen, rate * (1.0 - seen))
        for shocks in self.shocks:
            shocks.set_rates(factors)
        for item in self.plant.items:
            item.alone_sum = item.alone[0] + item.alone[1]

    def _begin_phase(self, position: int) -> None:
        before = {group: group.places for group in self.plant.groups.values()}
        self._apply_phase(position)
        for group, places in before.items():
            if group.places != places:
                self.duty.change_places(group, group.places)
            else:
                self.duty.ripple(group)

    def _visit(self, name: str) -> None:
        self.repairs.visit(self.plant.groups[name])

    def _begin_test(self, position: int) -> None:
        test = self.plan.tests[position]
        self.record.count("tests", SYSTEM)
        tested: list[Item] = []
        for name in test.of:
            group = self.plant.switch_called(name)
            if group is None:
                tested += [item for item in self.plant.items_called(name) if not item.known]
        for item in tested:
            item.left_out = False
        taken = [item for item in tested if not item.under_test]
        self.under_test[position] = tested, taken
        if test.duration > 0 and not test.in_service:
            self.duty.take_out_for_test(taken)
            if test.bypass:
                self._bypass(taken, True)

    def _bypass(self, tested: list[Item], begins: bool) -> None:
        for item in tested:
            item.bypassed = begins

    def _end_test(self, position: int) -> None:
        test = self.plan.tests[position]
        tested, taken = self.under_test.pop(position)
        taken_out = test.duration > 0 and not test.in_service
        if taken_out and test.bypass:
            self._bypass(taken, False)
        # What has become known meanwhile is under repair, and no longer under test.
        tested = [item for item in tested if not item.known]
        found: list[Item] = []
        broken: list[Item] = []
        for item in tested:
            if item.failed and item.depth < test.coverage:
                found.append(item)
            elif not item.failed and self.draws.chance(test.causes_failure):
                broken.append(item)
            else:
                item.left_out = self.draws.chance(test.left_out)
        for name in test.of:
            self._test_switch(position, name)
        self.duty.fail_in_test(found, broken)
        for item in tested:
            if item in taken and item.under_test and not item.known:
                item.under_test = False
                if item.group is not None:
                    self.duty.comes_back(item.group, item, repaired=False)

    def _test_switch(self, position: int, name: str) -> None:
        test = self.plan.tests[position]
        group = self.plant.switch_called(name)
        if group is None or group.switch is None or group.switch.known:
            return
        switch = group.switch
        if switch.left_out:
            self.duty.renew_switch(group)
        if switch.failed:
            if switch.depth < test.coverage:
                self.duty.reveal_switch(group)
        elif self.draws.chance(test.causes_failure):
            self.duty.fail_switch(group, known=True)
        elif self.draws.chance(test.left_out):
            self.duty.fail_switch(group, known=False)
            switch.left_out = True

    # -- coming to rest

    def _settle(self, *, first: bool = False) -> None:
        """Let everything that follows at once from an event come to rest, then see what the plant is now."""
        told = first
        for _ in range(MOST_ROUNDS):
            for group in self._preferring:
                self.duty.prefer(group)
            up, spurious = self._look()
            if not up and self.up and not told and self._told_by_failure:
                told = True
                hidden = [item for item in self._told_by_failure if item.hidden]
                if hidden:
                    self.duty.reveal(hidden)
                    continue
            self._stop_rules(up)
            self.repairs.release(up)
            self.repairs.assign()
            drawn = self.repairs.serve()
            self.repairs.end_releases(self._deferring)
            if not drawn and not self._offline_changes():
                break
        else:
            raise NotReached(f"the consequences of one event did not come to rest in {MOST_ROUNDS} rounds")
        self._take_note(up, spurious, first)
        self._set_races()

    def _look(self) -> tuple[bool, bool]:
        """Return whether the system is up, and whether it acts needlessly."""
        up = {name: group.up for name, group in self.plant.groups.items()}
        self.group_up = dict(up)
        for name, item in self.plant.alone.items():
            up[name] = item.good
        spurious = False
        if self._may_be_spurious:
            acts = {name: group.spurious for name, group in self.plant.groups.items()}
            acts.update((name, item.spurious) for name, item in self.plant.alone.items())
            spurious = holds(self.system, acts)
        return not spurious and holds(self.system, up), spurious

    def _stop_rules(self, up: bool) -> None:
        """Begin or cancel restoration; halt repairs or let them go on."""
        law = self.plan.restoration
        if law is not None:
            if up and self.restoring is not None:
                self.clock.hold(self.restoring)
                self.restoring = None
            elif not up and self.restoring is None:
                self.restoring = self.clock.start(law.draw(self.draws), self._restore)
            if self.restoring is not None:
                (self.clock.resume if self.repair_allowed else self.clock.hold)(self.restoring)
        self.repairs.set_halted(not self.repair_allowed or self.restoring is not None, self.restoring is not None)

    def _restore(self) -> None:
        """Make all good, save what is lost."""
        self.restoring = None
        for group in self.plant.top:
            if not group.lost:
                self.duty.reset(group)
        for item in self.plant.alone.values():
            self.repairs.renew(item)
        for group in self.plant.groups.values():
            if group.switch is not None and group.switch.failed:
                self.duty.renew_switch(group)

    def _offline_changes(self) -> bool:
        """Stop groups in which a crew, or an exchange, is at work; return whether anything has changed.

        A repair that waits for the restoration of the whole still holds its group: else the group would run again,
        which would end the restoration and let the repair go on, without end.
        """
        changed = False
        for group in self._offline:
            jobs = self.repairs.jobs
            at_work = self.repair_allowed and any(
                item.step == "swap" or (item in jobs and jobs[item].crewed) for item in group.items
            )
            if at_work != group.stopped:
                group.stopped = at_work
                changed = True
                self.duty.ripple(group)
        return changed

    # -- what the plant is now

    def _count(self, what: str, item: Item) -> None:
        for subject in item.subjects:
            self.record.count(what, subject)

    def _take_note(self, up: bool, spurious: bool, first: bool) -> None:
        record, now = self.record, self.clock.now
        if not first:
            if self.up and not up:
                record.count("failures", SYSTEM)
                if not spurious:
                    record.count("dangerous", SYSTEM)
            if spurious and not self.system_spurious:
                record.count("spurious", SYSTEM)
            for name, good in self.group_up.items():
                if record.was_up[name] and not good:
                    record.count("failures", name)
        record.was_up.update(self.group_up)
        self.up, self.system_spurious = up, spurious
        if not up and self.first_failure is None:
            self.first_failure = now
        lasting: dict[tuple[str, str], float] = {
            ("down", SYSTEM): float(not up),
            ("dangerous", SYSTEM): float(not up and not spurious),
        }
        failed = 0
        for item in self.plant.items:
            if item.failed:
                failed += item.subjects[-1] == SYSTEM
        lasting["failed", SYSTEM] = failed
        shares: dict[str, float] = {}
        for name, group in self.plant.groups.items():
            lasting["down", name] = float(not self.group_up[name])
            lasting["failed", name] = sum(item.failed for item in group.items)
            shares[name] = lasting["capacity", name] = group.capacity
        for name, item in self.plant.alone.items():
            shares[name] = (1.0 if item.kind.capacity is None else min(item.kind.capacity, 1.0)) if item.good else 0.0
        capacity = delivered(self.system, shares)
        lasting["capacity", SYSTEM] = capacity
        for name, least in self.plan.levels.items():
            lasting["level", name] = float(capacity >= least - 1e-12)
        for pool in self.repairs.pools:
            lasting["busy", pool.plan.name] = pool.busy
            lasting["waiting", pool.plan.name] = sum(not job.crewed for job in pool.jobs)
        record.lasting = lasting

    # -- what may happen next by chance

    def _set_races(self) -> None:
        races: list[tuple[float, Callable[[], None]]] = []
        for item in self.plant.items:
            if not item.failed:
                rate = item.alone_sum * self._factor(item)
                if rate > 0.0:
                    races.append((rate, lambda item=item: self.duty.fail([fault_alone(item, self.draws)])))  # type: ignore[misc]
        for shocks in self.shocks:
            if shocks.rate > 0.0 and any(self._is_exposed(item, shocks) for item in shocks.items):
                races.append((shocks.rate, lambda shocks=shocks: self._shock(shocks)))  # type: ignore[misc]
        for group in self.plant.groups.values():
            switch = group.switch
            if switch is None or switch.failed or self._is_stopped(group):
                continue
            if switch.plan.rate > 0.0:
                races.append((switch.plan.rate, lambda group=group: self._fail_switch(group)))  # type: ignore[misc]
            ready = group.live and group.outage is None and not group.lost and group.count("standby")
            if switch.plan.false_rate > 0.0 and ready and not group.plan.active:
                races.append((switch.plan.false_rate, lambda group=group: self.duty.operate_falsely(group)))  # type: ignore[misc]
        if self.plan.demand_rate > 0.0:
            races.append((self.plan.demand_rate, self._demand))
        self._races = races
        self._race_rate = math.fsum(rate for rate, _ in races)

    def _is_stopped(self, group: Group | None) -> bool:
        """Return whether no unit of a group, or outside of groups, fails now."""
        if self.up:
            return False
        if group is None:
            return self.plan.while_down == "stop"
        return group.while_down == "stop" or (group.group is not None and self._is_stopped(group.group))

    def _factor(self, item: Item) -> float:
        """Return the rate of faults of an item alone over its rate on duty."""
        if self._is_stopped(item.group):
            return 0.0
        if item.left_out:
            return 0.0
        waiting, load, on_duty, carries = 1.0, 1.0, True, True
        node: Item | Group = item
        while node.group is not None:
            group = node.group
            if node.role != "duty" or not carries or (not self.up and group.while_down == "standby_rate"):
                waiting *= group.plan.dormancy
                on_duty = False
            elif group.plan.load is not None:
                load *= group.plan.load(max(group.running, 1), group.places)
            node, carries = group, True
        return waiting * load if on_duty else waiting

    def _is_exposed(self, item: Item, shocks: Shocks) -> bool:
        if item.failed or self._is_stopped(item.group):
            return False
        if not shocks.plan.on_duty_only or item.group is None:
            return True
        return item.good and item.role == "duty" and item.group.live

    def _shock(self, shocks: Shocks) -> None:
        self.duty.fail([hit for hit in shocks.strike(self.draws) if self._is_exposed(hit[0], shocks)])

    def _fail_switch(self, group: Group) -> None:
        assert group.switch is not None
        self.duty.fail_switch(group, known=not group.switch.plan.latent, depth=self.draws.uniform())

    def _demand(self) -> None:
        self.record.count("demands", SYSTEM)
        if not self.up:
            self.record.count("hazardous", SYSTEM)
        self.duty.reveal(item for item in self._told_by_demand if item.hidden)
