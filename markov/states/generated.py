"""A chain generated from units and groups, with the meaning of its states."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, partial
from math import comb, prod

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed, TooLarge
from markov.model import Model, Success, names
from markov.rates import RateTable
from markov.states.arrows import ArrowKinds
from markov.states.branching import Dice
from markov.states.chart import Chart, Moment, build_chart
from markov.states.crews import Columns, CrewDesk
from markov.states.events import followed
from markov.states.faults import hide
from markov.states.following import settle_start
from markov.states.generation import STATE_LIMIT, WHAT_HELPS, Packing, explore
from markov.states.instants import instant, told
from markov.states.layout import Digits, Lane, Layout, Node, Slot, Train, node_of, total
from markov.states.naming import island_label, join_labels
from markov.states.phases import model_in_phase
from markov.states.plan import Plan, Pool, plan
from markov.states.redundancy import critical
from markov.states.regime import Regime
from markov.states.space import Arrows, Mask, Values, no_such_state
from markov.states.structure import structure
from markov.states.symmetry import Classes, alike_nodes, interchangeable, raw_counts
from markov.states.takeover import fill_by_rank
from markov.states.timetable import Timetable


@dataclass(frozen=True)
class GeneratedSpace:
    """States and transitions generated from a plan; see `markov.states.space.StateSpace`."""

    plan: Plan
    charts: tuple[Chart, ...]
    desk: CrewDesk
    packing: Packing
    keys: NDArray[np.int64]
    every_arrows: tuple[Arrows, ...]  # one a phase
    jumps: tuple[Arrows, ...]  # one a fixed instant; the rate of a kind is its chance
    kinds: ArrowKinds
    start: tuple[tuple[int, Fraction], ...]
    classes: Classes = ()

    @property
    def arrows(self) -> Arrows:
        """Transitions as columns, in the first phase."""
        return self.every_arrows[0]

    @property
    def timetable(self) -> Timetable | None:
        """What happens at fixed instants."""
        return self.plan.timetable

    @cached_property
    def regimes(self) -> tuple[Regime, ...]:
        """The rules of every phase."""
        return tuple(Regime(self, phase) for phase in range(len(self.every_arrows)))

    @cached_property
    def raw_size(self) -> int:
        """Number of states that the chain would have without merging interchangeable groups."""
        weights = raw_counts(self.columns, self.classes)
        for chart, local in zip(self.charts, self.columns, strict=True):
            if chart.orbits is not None:
                weights = weights * chart.orbits[local]
        return round(float(weights.sum()))

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.keys)

    @cached_property
    def columns(self) -> Columns:
        """Local state numbers of all states, shape (islands, n)."""
        return self.packing.unpack(self.keys)

    @property
    def up(self) -> Mask:
        """States in which the system delivers, shape (n,); in the first phase, where there are phases."""
        return self.regimes[0].up(None)

    def delivers(self, subject: str) -> Mask:
        """States in which a group, or a kind with a single item, delivers, shape (n,)."""
        return self.regimes[0].up(subject)

    def delivers_in(self, phase: int, subject: str) -> Mask:
        """States in which a group, or a kind with a single item, delivers in one phase, shape (n,)."""
        island = self.plan.island(subject)
        if island is not None:
            chart = self.charts[island]
            layout = chart.laws[phase].layout
            return np.asarray(layout.delivers(self._called(island, subject), chart.digits)[self.columns[island]])
        for number, chart in enumerate(self.charts):
            for path in chart.laws[phase].layout.groups:
                train = path[-1]
                if isinstance(train, Train) and train.unit == subject:
                    good = train.good(chart.digits)[self.columns[number]]
                    return np.asarray(good > 0)
        places = self.plan.places_of(subject)
        items = sum(self.charts[island].layout.slots[number].count for island, number in places)
        if not places:
            raise IllPosed(f"{subject} is not in this chain")
        if items > 1:
            raise IllPosed(
                f"{subject} stands for {items} items, which are not up or down as one; ask for a group, "
                "or for mean_units_failed"
            )
        return np.asarray(self.failed(subject) == 0)

    def _called(self, island: int, subject: str) -> str:
        """Return what the chart of an island calls a node; islands that are alike share the chart of the first."""
        for islands in self.classes:
            if island in islands:
                return self.charts[island].layout.nodes[0].name
        return subject

    def acts_in(self, phase: int, subject: str) -> Mask:
        """States in which a group acts needlessly in one phase, shape (n,)."""
        island = self.plan.island(subject)
        if island is None:
            return np.zeros(self.size, np.bool_)
        chart = self.charts[island]
        layout = chart.laws[phase].layout
        return np.asarray(layout.acts(self._called(island, subject), chart.digits)[self.columns[island]])

    @cached_property
    def can_act_needlessly(self) -> bool:
        """Whether any unit can act needlessly."""
        return any(node.has_needless for layout in self.plan.islands for node in layout.nodes)

    def failed(self, subject: str | None) -> Values:
        """Failed items of the system, a group or a kind, shape (n,)."""
        count = np.zeros(self.size)
        for island, chart in enumerate(self.charts):
            for called, slot in zip(self.plan.islands[island].slots, chart.layout.slots, strict=True):
                if self._belongs(subject, island, called):
                    count += slot.failed(chart.digits)[self.columns[island]]
        return count

    @cached_property
    def failed_items(self) -> Values:
        """Failed items of the whole chain, those outside the system included, shape (n,)."""
        count = np.zeros(self.size)
        for island, chart in enumerate(self.charts):
            failed = np.zeros(chart.size)
            for slot in chart.layout.slots:
                failed += slot.failed(chart.digits)
            count += failed[self.columns[island]]
        return count

    def _belongs(self, subject: str | None, island: int, slot: Slot) -> bool:
        """Tell whether the items of a slot count for a subject: a group, a train, a kind, or the system (None)."""
        top = self.plan.islands[island].top_of(slot)
        if subject is None:
            return self.plan.model.system is not None and top in self.plan.model.named_in_any_phase
        return subject in (top, slot.group, slot.unit, slot.name)

    def slots_of(self, subject: str | None) -> frozenset[tuple[str, str]]:
        """Return (island, kind) of every slot whose events count for a subject (None: the system)."""
        return frozenset(
            (chart.layout.name, slot.name)
            for island, chart in enumerate(self.charts)
            for called, slot in zip(self.plan.islands[island].slots, chart.layout.slots, strict=True)
            if self._belongs(subject, island, called)
        )

    def capacity(self, subject: str | None) -> Values:
        """Delivered share of the system or a group, shape (n,); in the first phase, where there are phases."""
        return self.regimes[0].capacity(subject)

    def capacity_in(self, phase: int, subject: str | None) -> Values:
        """Delivered share of the system or a group in one phase, shape (n,)."""
        if subject is None:
            system = self.system_in(phase)
            return structure(system, partial(self._share_of, phase))
        if self.plan.island(subject) is None:
            raise IllPosed(f"{subject} delivers as part of its group; ask for the capacity of the group")
        return self._share_of(phase, subject)

    def system_in(self, phase: int) -> Success:
        """The structure of success in one phase."""
        system = model_in_phase(self.plan.model, phase).system
        if system is None:
            raise AssertionError("a generated chain has a system")
        return system

    def _share_of(self, phase: int, name: str) -> Values:
        island = self.plan.island(name)
        if island is None:
            raise AssertionError(f"{name} is not in the chain")
        chart = self.charts[island]
        node = chart.laws[phase].layout.node_named(self._called(island, name))
        if node is None:
            raise AssertionError(f"{name} is not in its island")
        return np.asarray(_delivered(node, chart.digits)[self.columns[island]])

    def without_redundancy(self, subject: str | None, phase: int = 0) -> Mask:
        """States that are up and in which one further unit fault would bring the system, or a group, down, shape (n,).

        The fault is taken as covered, starts as successful, takeovers as done at once.
        """
        if subject is not None:
            if self.plan.island(subject) is None:
                raise IllPosed(f"{subject} is not a group of the top level; ask for the group that it belongs to")
            return self._critical(subject, phase)
        system, up = self.system_in(phase), self.regimes[phase].up(None)
        result = np.zeros(self.size, np.bool_)
        for fallen in dict.fromkeys(names(system)):
            here = self._critical(fallen, phase)
            if not here.any():
                continue
            without = structure(system, partial(self._with_one_down, phase, fallen))
            result |= up & here & ~without
        return result

    def _with_one_down(self, phase: int, fallen: str, name: str) -> Mask:
        return np.zeros(self.size, np.bool_) if name == fallen else self.delivers_in(phase, name)

    def _critical(self, name: str, phase: int) -> Mask:
        island = self.plan.island(name)
        if island is None:
            raise AssertionError(f"{name} is not in the chain")
        chart = self.charts[island]
        flags = critical(chart.laws[phase].layout, self._called(island, name), chart.digits)
        return np.asarray(flags[self.columns[island]])

    # --- crews ---------------------------------------------------------------------------------------------------

    def pools(self, subject: str | None) -> tuple[Pool, ...]:
        """Return the crew pools that a question concerns: all of them, or the one of that name."""
        every = (*self.plan.pools, *self.plan.free_pools, *self.plan.desk_pools)
        return tuple(pool for pool in every if subject in (None, pool.name))

    def crews_at_work(self, pool: Pool, phase: int = 0) -> Values:
        """Count crews at work in one phase, shape (n,); none where the phase, or a restoration, lets them rest."""
        model = self.plan.model
        if model.phases and not model.phases[phase].repair:
            return np.zeros(self.size)
        if pool in self.plan.pools:
            busy = self.desk.busy(pool, self.columns).astype(np.float64)
        elif pool in self.plan.desk_pools:
            busy = self._lanes_count(pool, lambda lane, x: total(x, lane.serve))
        else:
            busy = self.calling(pool)
        return busy if model.restoration is None else np.where(self.regimes[phase].up(None), busy, 0.0)

    def calling(self, pool: Pool) -> Values:
        """Count items that wait for a crew or have one, shape (n,)."""
        return self._lanes_count(pool, lambda lane, x: lane.calling(x))

    def _lanes_count(self, pool: Pool, count_in: Callable[[Lane, Digits], Digits]) -> Values:
        count = np.zeros(self.size)
        for kind in pool.kinds:
            for island, number in kind.places:
                chart = self.charts[island]
                count += count_in(chart.layout.lanes[number], chart.digits)[self.columns[island]]
        return count

    # --- names ---------------------------------------------------------------------------------------------------

    @cached_property
    def _ambiguous(self) -> frozenset[str]:
        """Islands whose labels could be taken for those of another: a kind that stands in several groups."""
        seen: dict[str, list[str]] = {}
        for layout in self.plan.islands:
            for slot in layout.slots:
                seen.setdefault(slot.unit, []).append(layout.name)
        every = {island for islands in seen.values() if len(islands) > 1 for island in islands}
        bare = {layout.name for layout in self.plan.islands if _has_group_words(layout)}
        return frozenset(every | bare) if len(self.plan.islands) > 1 else frozenset()

    def label(self, state: int) -> str:
        """Name of a state."""
        parts: list[tuple[str, str]] = []
        merged = {island: islands for islands in self.classes for island in islands}
        told: set[tuple[int, int]] = set()
        for island in range(len(self.charts)):
            local = int(self.columns[island, state])
            name, text = self.plan.islands[island].name, self._local_label(island, local)
            if island in merged:
                islands = merged[island]
                if (islands[0], local) in told:
                    continue
                told.add((islands[0], local))
                alike = int((self.columns[list(islands), state] == local).sum())
                name = f"{alike} of {len(islands)} like {self.plan.islands[islands[0]].name}"
                text = f"{name}[{text}]" if text else ""
                parts.append(("", text))
            else:
                parts.append((name, text))
        return join_labels(parts, self._ambiguous)

    def _local_label(self, island: int, local: int) -> str:
        layout = self.plan.islands[island]
        column = [int(value) for value in self.charts[island].digits[:, local]]
        alike = self.charts[island].alike
        return island_label(layout, column, _ordinary(layout), alone=len(self.charts) == 1, alike=alike)

    @cached_property
    def _numbers(self) -> dict[str, int]:
        return {self.label(state): state for state in range(self.size)}

    def find(self, name: str) -> int:
        """Number of the state of that name, or of the number that the diagram prints in its box."""
        if name.isdecimal() and int(name) < self.size:
            return int(name)
        try:
            return self._numbers[name]
        except KeyError:
            raise no_such_state(name) from None


def _delivered(node: Node, x: Digits) -> Values:
    """Sum the shares of the members on duty, at most 1; an active group in an outage delivers nothing; shape (k,)."""
    count = np.zeros(x.shape[1])
    share = np.zeros(x.shape[1])
    for entry in node.entries:
        on_duty = entry.good(x) if node.active else x[entry.duty]
        if isinstance(entry, Train):
            share += on_duty * _delivered(entry.node, x) / node.required
        elif entry.capacity is not None:
            share += on_duty * float(entry.capacity.exact)
        else:
            count += on_duty
    share += count / node.required
    stopped = node.in_outage(x) if node.active or node.outcome == "lost" else np.zeros(x.shape[1], np.bool_)
    stopped = stopped | node.switching_now(x) | node.stopped(x)
    if node.has_needless:
        stopped = stopped | node.acts(x)
    share[stopped] = 0.0
    return np.minimum(share, 1.0)


def _has_group_words(layout: Layout) -> bool:
    groups = [node_of(path[-1]) for path in layout.groups]
    return len(layout.nodes) == 1 and any(node.outage >= 0 or node.switching or node.switch for node in groups)


def _ordinary(layout: Layout) -> list[int]:
    return [int(value) for value in initial_digits(layout, {})[:, 0]]


def initial_digits(layout: Layout, failed: dict[str, tuple[int, int]]) -> Digits:
    """Return the initial state of an island: the given numbers of known and hidden faults, duty filled by rank.

    Parameters
    ----------
    layout : Layout
    failed : dict
        Slot (``group.unit``) -> items known to be failed, items failed unnoticed.
    """
    x = layout.empty()
    for stock in layout.stocks:
        x[stock.shelf] = stock.stock
    for slot in layout.slots:
        known, hidden = failed.get(slot.name, (0, 0))
        slot.fail(x, known)
        if hidden and slot.hidden:
            hide(slot, 0, x, hidden, placed=False)
    for node in layout.nodes:
        fill_by_rank(node, x)
    return settle_start(Dice(RateTable()), layout, x)


#: A chain may turn out smaller than it could be, as crews rule out some states; beyond this factor it is not tried.
HOPELESS = 4


@dataclass(frozen=True)
class Prepared:
    """Everything that a chain is generated from, ready before its first state is.

    Attributes
    ----------
    plan : Plan
    charts : tuple of Chart
        One an island; interchangeable islands share theirs.
    classes : tuple of tuples of int
        Interchangeable islands.
    kinds : ArrowKinds
    """

    plan: Plan
    charts: tuple[Chart, ...]
    classes: Classes
    kinds: ArrowKinds

    @property
    def most_states(self) -> int:
        """Number of states at most: of each island any, of interchangeable ones any selection."""
        merged = {island for islands in self.classes for island in islands}
        count = prod(chart.size for island, chart in enumerate(self.charts) if island not in merged)
        for islands in self.classes:
            count *= comb(self.charts[islands[0]].size + len(islands) - 1, len(islands))
        return count

    @property
    def most_arrows(self) -> int:
        """Number of transitions at most, as far as the mean number out of a local state tells."""
        each = 0.0
        for chart in self.charts:
            laws = chart.laws[0]
            tables = (*laws.spontaneous.values(), *(table for _, table in laws.crew_driven.values()))
            each += sum(len(table) for table in tables) / chart.size
        return round(self.most_states * each)


def prepare(model: Model, subjects: tuple[str, ...] = (), *, merge: bool = True, alone: str | None = None) -> Prepared:
    """Work out the islands of a model; see `generate` for the parameters."""
    drawn = plan(model, subjects, alone=alone)
    kinds = ArrowKinds()
    contended = {unit.unit for pool in drawn.pools for unit in pool.kinds}
    starts = tuple(initial_digits(layout, _initially_failed(model, layout)) for layout in drawn.islands)
    classes = interchangeable(drawn.islands, starts, model.system, frozenset(subjects)) if merge else ()
    if drawn.timetable is not None:
        classes = ()
    first = {island: islands[0] for islands in classes for island in islands}
    charts: list[Chart] = []
    for number, (layout, begin) in enumerate(zip(drawn.islands, starts, strict=True)):
        if first.get(number, number) < number:
            charts.append(charts[first[number]])  # alike in everything but the name
            continue
        local = frozenset(at for at, lane in enumerate(layout.lanes) if lane.unit not in contended or lane.desk >= 0)
        layouts = tuple(regime[number] for regime in drawn.regimes)
        alike: Classes = ()
        if merge and len(layout.nodes) > 1:
            structures = tuple(model_in_phase(model, phase).system for phase in range(len(layouts)))
            alike = alike_nodes(layouts, begin, structures, frozenset(subjects))
        charts.append(build_chart(layouts, kinds, begin, local, _moments(drawn, layouts, kinds), alike))
    return Prepared(drawn, tuple(charts), classes, kinds)


def _moments(drawn: Plan, layouts: tuple[Layout, ...], kinds: ArrowKinds) -> tuple[Moment, ...]:
    """Return what happens at the fixed instants, each with the rules that hold from then on."""
    if drawn.timetable is None:
        return ()
    dice = Dice(kinds.rates)
    found = []
    for actions, phase in zip(drawn.timetable.instants, drawn.phase_after, strict=True):
        layout = layouts[phase]
        apply = followed(dice, layout, instant(dice, layout, drawn.model, actions))
        found.append(Moment(told(actions, drawn.model), layout, apply))
    return tuple(found)


def generate(
    model: Model,
    subjects: tuple[str, ...] = (),
    *,
    limit: int = STATE_LIMIT,
    merge: bool = True,
    alone: str | None = None,
) -> GeneratedSpace:
    """Generate the chain of a model with units and groups.

    Parameters
    ----------
    model : Model
    subjects : tuple of str
        Groups and units outside the system that a question asks about.
    limit : int
        Largest number of states.
    merge : bool
        Whether interchangeable groups are merged; false keeps every group apart, for checks and comparisons.
    alone : str, optional
        The only group or unit to take, as if it had every crew to itself.

    Raises
    ------
    TooLarge
        The chain has more states than `limit`, or cannot be numbered.
    """
    return generate_prepared(prepare(model, subjects, merge=merge, alone=alone), limit=limit)


def generate_prepared(prepared: Prepared, *, limit: int = STATE_LIMIT) -> GeneratedSpace:
    """Generate the chain from what was prepared; see `generate`.

    A chain that could be far larger than `limit` is refused before its first state is generated.
    """
    if prepared.most_states > HOPELESS * limit:
        raise TooLarge(
            f"a chain of {prepared.most_states:,} states at most, where {limit:,} are generated; {WHAT_HELPS}"
        )
    drawn, charts = prepared.plan, prepared.charts
    desk = CrewDesk(charts, drawn.pools)
    phases = range(len(drawn.regimes))
    up = tuple(partial(_up, prepared, phase) for phase in phases)
    found = explore(charts, desk, prepared.kinds, up, classes=prepared.classes, limit=limit)
    start: dict[int, Fraction] = {}
    for state, weight, choices in found.start:  # several draws may lead to one state where groups are merged
        start[state] = start.get(state, Fraction(0)) + Fraction(weight, choices)
    return GeneratedSpace(
        drawn,
        charts,
        desk,
        Packing(charts),
        found.keys,
        found.regimes,
        found.instants,
        prepared.kinds,
        tuple(start.items()),
        prepared.classes,
    )


def _up(prepared: Prepared, phase: int, columns: Columns) -> Mask:
    """Tell in which of some states the system is up in one phase, shape (m,)."""
    drawn = prepared.plan
    success = model_in_phase(drawn.model, phase).system
    if success is None:
        return np.ones(columns.shape[1], np.bool_)
    first = {island: islands[0] for islands in prepared.classes for island in islands}

    def part(ask: str, name: str) -> Mask:
        island = drawn.island(name)
        if island is None:
            raise AssertionError(f"{name} is not in the chain")
        chart = prepared.charts[island]
        layout = chart.laws[phase].layout
        called = layout.nodes[0].name if island in first else name
        flags = layout.delivers(called, chart.digits) if ask == "delivers" else layout.acts(called, chart.digits)
        return np.asarray(flags[columns[island]])

    up = structure(success, partial(part, "delivers"))
    if any(node.has_needless for layout in drawn.islands for node in layout.nodes):
        up &= ~structure(success, partial(part, "acts"))
    return up


def _initially_failed(model: Model, layout: Layout) -> dict[str, tuple[int, int]]:
    """Return slot -> items known to be failed, and items failed unnoticed, at time zero in one island."""
    failed: dict[str, tuple[int, int]] = {}
    for name, faults in model.initial.items():
        for slot in layout.slots:
            if name in (slot.unit, slot.name):
                failed[slot.name] = faults.failed, faults.hidden
    return failed
