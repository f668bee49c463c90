"""Repair in a simulated plant: delays, crews, spares, deferred repair."""

from __future__ import annotations

import math
from collections.abc import Callable

from markov.studies.simulation_clock import Clock, Timer
from markov.studies.simulation_draws import Draws
from markov.studies.simulation_duty import Duty
from markov.studies.simulation_plan import FaultKind, Kind, Plan, PoolPlan, RepairPlan, SparesPlan
from markov.studies.simulation_plant import Group, Item


class Job:
    """A repair: of an item in its place, or of a removed unit in the workshop, where `stock` gets it back.

    Attributes
    ----------
    stage : int
        Stages finished.
    timer : Timer or None
        Of the present stage; None before its first moment.
    answered : bool
        Whether its call for a crew has been counted.
    """

    def __init__(self, kind: Kind, plan: RepairPlan, item: Item | None, stock: Stock | None, called: float) -> None:
        self.kind = kind
        self.plan = plan
        self.item = item
        self.stock = stock
        self.called = called
        self.stage = 0
        self.timer: Timer | None = None
        self.stage_time = 0.0
        self.crewed = False
        self.started = False
        self.answered = False


class Pool:
    """Crews with the repairs that wait for one or have one."""

    def __init__(self, plan: PoolPlan) -> None:
        self.plan = plan
        self.rank = {kind: rank for rank, kind in enumerate(plan.order)}
        self.jobs: list[Job] = []
        self.busy = 0


class Stock:
    """Spares with the items that wait for one, the longest waiting first."""

    def __init__(self, plan: SparesPlan) -> None:
        self.plan = plan
        self.held = plan.stock
        self.waiting: list[Item] = []
        self.counted = 0


class Repairs:
    """Everything between a known fault and the moment the item is good again."""

    def __init__(self, plan: Plan, clock: Clock, draws: Draws, count: Callable[[str, Item], None]) -> None:
        self.clock = clock
        self.draws = draws
        self.count = count
        self.duty: Duty
        self.count_crew: Callable[[str, str], None]
        self.pools = [Pool(pool) for pool in plan.pools]
        self.pool_of = {kind: pool for pool in self.pools for kind in pool.plan.order}
        self.stocks = [Stock(stock) for stock in plan.spares]
        self.stock_of = {kind: stock for stock in self.stocks for kind in stock.plan.kinds}
        self.own_crew: list[Job] = []
        self.jobs: dict[Item, Job] = {}
        self.delays: dict[Item, Timer] = {}
        self.swaps: dict[Item, Timer] = {}
        self.switch_repairs: list[Timer] = []
        self.deferred: list[Item] = []
        self.halted = False
        self.exchanges_halted = False

    # -- from the fault to the call

    def _repair(self, kind: Kind, mode: FaultKind | None) -> RepairPlan | None:
        return kind.repair if mode is None else mode.repair

    def renews_at_once(self, item: Item, mode: FaultKind | None) -> bool:
        """Return whether a fault is repaired in the moment it is known; such a repair needs no spare either."""
        repair = self._repair(item.kind, mode)
        return repair is not None and repair.at_once

    def begin(self, item: Item) -> None:
        """Take note of a fault that has just become known."""
        stock = self.stock_of.get(item.kind.name)
        if stock is not None and stock.plan.when_failed:
            self._order(stock, item)
        if stock is None and self._repair(item.kind, item.mode) is None:
            return
        if item.group is not None and item.group.plan.repair_when != "at_once":
            item.step = "deferred"
            self.deferred.append(item)
        else:
            self._dispatch(item)

    def _dispatch(self, item: Item) -> None:
        delay = item.kind.delay.draw(self.draws)
        if delay > 0.0:
            item.step = "delay"
            self.delays[item] = self.clock.start(delay, lambda: self._call(item))
        else:
            self._call(item)

    def _call(self, item: Item) -> None:
        self.delays.pop(item, None)
        stock = self.stock_of.get(item.kind.name)
        if stock is not None:
            item.step = "spare"
            stock.waiting.append(item)
            return
        item.step = "crew"
        repair = self._repair(item.kind, item.mode)
        assert repair is not None
        self.jobs[item] = self._ask_crew(Job(item.kind, repair, item, None, self.clock.now))

    def _ask_crew(self, job: Job) -> Job:
        pool = self.pool_of.get(job.kind.name)
        if pool is not None:
            pool.jobs.append(job)
        else:
            job.crewed = True
            self.own_crew.append(job)
        return job

    def renew(self, item: Item) -> None:
        """Make an item good, whatever its repair has come to."""
        job = self.jobs.pop(item, None)
        if job is not None:
            self._drop(job)
        for timers in (self.delays, self.swaps):
            timer = timers.pop(item, None)
            if timer is not None:
                self.clock.hold(timer)
        if item.step == "spare":
            self.stock_of[item.kind.name].waiting.remove(item)
        elif item.step == "deferred":
            self.deferred.remove(item)
        item.step = "none"
        item.failed = item.known = item.left_out = False
        item.mode = None

    def _drop(self, job: Job) -> None:
        if job.timer is not None:
            self.clock.hold(job.timer)
        jobs = self.own_crew if job.kind.name not in self.pool_of else self.pool_of[job.kind.name].jobs
        jobs.remove(job)

    def _in_place(self, item: Item) -> None:
        """Put an item back that is good again."""
        self.renew(item)
        self.count("repairs", item)
        if item.group is not None:
            self.duty.comes_back(item.group, item, repaired=True)

    # -- deferred repair

    def release(self, up: bool) -> None:
        """Let deferred repairs begin whose condition holds."""
        if not self.deferred:
            return
        for group in dict.fromkeys(item.group for item in self.deferred):
            assert group is not None
            when = group.plan.repair_when
            if when == "visits":
                continue
            known = [item for item in group.items if item.known]
            # Once begun, repair goes on until nothing is left to repair.
            begun = any(item.step not in ("deferred", "none") for item in known) or group.released
            if begun or (not up if when == "system_down" else len(known) >= group.plan.failed_needed):
                group.released = True
                self._release(group)

    def end_releases(self, groups: list[Group]) -> None:
        """Defer again in groups where no fault is known any more."""
        for group in groups:
            if group.released and not any(item.known for item in group.items):
                group.released = False

    def _release(self, group: Group) -> None:
        for item in [item for item in self.deferred if item.group is group]:
            self.deferred.remove(item)
            self._dispatch(item)

    def visit(self, group: Group) -> None:
        """Let the repair of everything begin that is known to be failed now."""
        self._release(group)

    # -- crews

    def set_halted(self, crews: bool, exchanges: bool) -> None:
        """Halt the work of crews, and exchanges with the draw of spares, or let them go on."""
        self.halted, self.exchanges_halted = crews, exchanges
        for timer in self.swaps.values():
            (self.clock.hold if exchanges else self.clock.resume)(timer)

    def assign(self) -> None:
        """Give crews to repairs, then let those go on that have one."""
        for pool in self.pools:
            free = 0 if self.halted else pool.plan.size - sum(job.answered for job in pool.jobs)
            if not self.halted:
                self._assign(pool)
            for job in pool.jobs:
                self._let_run(job)
                if not job.answered:
                    job.answered = True
                    self.count_crew("calls", pool.plan.name)
                    if free <= 0:  # none is free, even where a more urgent repair then takes one away
                        self.count_crew("waits", pool.plan.name)
                    free -= 1
            pool.busy = 0 if self.halted else sum(job.crewed for job in pool.jobs)
        for job in self.own_crew:
            self._let_run(job)

    def _let_run(self, job: Job) -> None:
        if job.crewed and not self.halted:
            job.started = True
            if job.timer is None:
                job.stage_time = job.plan.stage.draw(self.draws)
                job.timer = self.clock.start(job.stage_time, lambda: self._end_stage(job))
            else:
                self.clock.resume(job.timer)
        elif job.timer is not None:
            self.clock.hold(job.timer)

    def _advance(self, job: Job) -> float:
        """Return how many stages a repair has passed."""
        if job.plan.progress == 1 or job.timer is None or job.stage_time in (0.0, math.inf):
            return job.stage
        done = 1.0 - self.clock.left(job.timer) / job.stage_time
        return job.stage + math.floor(done * job.plan.progress)

    def _assign(self, pool: Pool) -> None:
        waiting = [job for job in pool.jobs if not job.crewed]
        if not waiting:
            return
        rank = pool.rank
        waiting = self.draws.shuffled(waiting)
        if pool.plan.first_come:
            waiting.sort(key=lambda job: (job.called, rank[job.kind.name]))
        else:
            waiting.sort(key=lambda job: (rank[job.kind.name], not job.started, -self._advance(job)))
        free = pool.plan.size - (len(pool.jobs) - len(waiting))
        for job in waiting:
            if free <= 0:
                if pool.plan.first_come or not pool.plan.preemptive:
                    return
                mine = rank[job.kind.name]
                lesser = [each for each in pool.jobs if each.crewed and rank[each.kind.name] > mine]
                if not lesser:
                    return
                lowest = max(rank[each.kind.name] for each in lesser)
                leaving = [each for each in lesser if rank[each.kind.name] == lowest]
                least = min(self._advance(each) for each in leaving)
                self.draws.one_of([each for each in leaving if self._advance(each) == least]).crewed = False
            else:
                free -= 1
            job.crewed = True

    def _end_stage(self, job: Job) -> None:
        job.timer = None
        job.stage += 1
        if job.stage < job.plan.stages:
            return
        if not self.draws.chance(job.kind.repair_success):
            job.stage = 0
            return
        if job.kind.name in self.pool_of:
            self.count_crew("crew_repairs", self.pool_of[job.kind.name].plan.name)
        if job.item is not None:
            self._in_place(job.item)
        else:
            self._drop(job)
            assert job.stock is not None
            job.stock.held += 1

    # -- spares

    def serve(self) -> bool:
        """Draw spares for items that wait for one; return whether any is drawn."""
        drawn = False
        if self.exchanges_halted:
            return drawn
        for stock in self.stocks:
            while stock.held > 0 and stock.waiting:
                item = stock.waiting.pop(0)
                stock.held -= 1
                drawn = True
                self.count("spares", item)
                if not stock.plan.when_failed:
                    self._order(stock, item)
                repair = self._repair(item.kind, item.mode)
                if repair is not None:
                    self._ask_crew(Job(item.kind, repair, None, stock, self.clock.now))
                swap = stock.plan.swap.draw(self.draws)
                item.step = "swap"
                if swap > 0.0:
                    self.swaps[item] = self.clock.start(swap, lambda item=item: self._in_place(item))  # type: ignore[misc]
                else:
                    self._in_place(item)
        return drawn

    def _order(self, stock: Stock, item: Item) -> None:
        """Count a draw or a fault; every so many bring an order.  What is repaired comes back instead."""
        if self._repair(item.kind, item.mode) is not None:
            return
        stock.counted += 1
        if stock.counted % stock.plan.batch == 0:
            self.clock.start(stock.plan.lead.draw(self.draws), lambda: self._deliver(stock))

    def _deliver(self, stock: Stock) -> None:
        stock.held += stock.plan.batch

    # -- switches

    def begin_switch(self, group: Group) -> None:
        """Begin the repair of a failed switch, if it has one."""
        switch = group.switch
        assert switch is not None
        law = switch.plan.repair
        if law is None:
            return
        switch.repair = self.clock.start(law.draw(self.draws), lambda: self.duty.renew_switch(group))
        self.switch_repairs = [timer for timer in self.switch_repairs if timer.stamp or timer.left > 0.0]
        self.switch_repairs.append(switch.repair)
