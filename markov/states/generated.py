"""A chain generated from units and groups, with the meaning of its states."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, partial
from math import comb, prod

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed, TooLarge
from markov.model import Model, names
from markov.states.arrows import ArrowKinds
from markov.states.chart import Chart, build_chart
from markov.states.crews import Columns, CrewDesk
from markov.states.generation import STATE_LIMIT, WHAT_HELPS, Packing, explore
from markov.states.layout import Digits, Layout, Node, Slot, Train, node_of
from markov.states.naming import island_label, join_labels
from markov.states.plan import Plan, Pool, plan
from markov.states.redundancy import critical
from markov.states.space import Arrows, Mask, Values, no_such_state, structure
from markov.states.symmetry import Classes, interchangeable, raw_count
from markov.states.takeover import fill_by_rank


@dataclass(frozen=True)
class GeneratedSpace:
    """States and transitions generated from a plan; see `markov.states.space.StateSpace`."""

    plan: Plan
    charts: tuple[Chart, ...]
    desk: CrewDesk
    packing: Packing
    keys: NDArray[np.int64]
    arrows: Arrows
    kinds: ArrowKinds
    start: tuple[tuple[int, Fraction], ...]
    classes: Classes = ()

    @cached_property
    def raw_size(self) -> int:
        """Number of states that the chain would have without merging interchangeable groups."""
        return raw_count(self.columns, self.classes)

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.keys)

    @cached_property
    def columns(self) -> Columns:
        """Local state numbers of all states, shape (islands, n)."""
        return self.packing.unpack(self.keys)

    @cached_property
    def up(self) -> Mask:
        """States in which the system delivers, shape (n,)."""
        if self.plan.model.system is None:
            raise AssertionError("a generated chain has a system")
        return structure(self.plan.model.system, self.delivers)

    def delivers(self, subject: str) -> Mask:
        """States in which a group, or a kind with a single item, delivers, shape (n,)."""
        island = self.plan.island(subject)
        if island is not None:
            chart = self.charts[island]
            return np.asarray(chart.layout.node.delivers(chart.digits)[self.columns[island]])
        for number, chart in enumerate(self.charts):
            for path in chart.layout.groups[1:]:
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

    def failed(self, subject: str | None) -> Values:
        """Failed items of the system, a group or a kind, shape (n,)."""
        count = np.zeros(self.size)
        for island, chart in enumerate(self.charts):
            for slot in chart.layout.slots:
                if self._belongs(subject, chart.layout.node.name, slot):
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

    def _belongs(self, subject: str | None, island: str, slot: Slot) -> bool:
        """Tell whether the items of a slot count for a subject: a group, a train, a kind, or the system (None)."""
        if subject is None:
            return self.plan.model.system is not None and island in names(self.plan.model.system)
        return subject in (island, slot.group, slot.unit, slot.name)

    def slots_of(self, subject: str | None) -> frozenset[tuple[str, str]]:
        """Return (island, kind) of every slot whose events count for a subject (None: the system)."""
        return frozenset(
            (chart.layout.node.name, slot.name)
            for chart in self.charts
            for slot in chart.layout.slots
            if self._belongs(subject, chart.layout.node.name, slot)
        )

    def capacity(self, subject: str | None) -> Values:
        """Delivered share of the system or a group, shape (n,)."""
        if subject is None:
            if self.plan.model.system is None:
                raise AssertionError("a generated chain has a system")
            return structure(self.plan.model.system, self._share_of)
        if self.plan.island(subject) is None:
            raise IllPosed(f"{subject} delivers as part of its group; ask for the capacity of the group")
        return self._share_of(subject)

    def _share_of(self, name: str) -> Values:
        island = self.plan.island(name)
        if island is None:
            raise AssertionError(f"{name} is not in the chain")
        chart = self.charts[island]
        return np.asarray(_delivered(chart.layout.node, chart.digits)[self.columns[island]])

    def without_redundancy(self, subject: str | None) -> Mask:
        """States that are up and in which one further unit fault would bring the system, or a group, down, shape (n,).

        The fault is taken as covered, starts as successful, takeovers as done at once.
        """
        if subject is not None:
            island = self.plan.island(subject)
            if island is None:
                raise IllPosed(f"{subject} is not a group of the top level; ask for the group that it belongs to")
            return np.asarray(self._critical[island][self.columns[island]])
        model = self.plan.model
        if model.system is None:
            raise AssertionError("a generated chain has a system")
        result = np.zeros(self.size, np.bool_)
        for island, flags in enumerate(self._critical):
            fallen = self.plan.islands[island].node.name
            here = flags[self.columns[island]]
            if fallen not in names(model.system) or not here.any():
                continue
            without = structure(model.system, partial(self._with_one_down, fallen))
            result |= self.up & here & ~without
        return result

    def _with_one_down(self, fallen: str, name: str) -> Mask:
        return np.zeros(self.size, np.bool_) if name == fallen else self.delivers(name)

    @cached_property
    def _critical(self) -> tuple[Mask, ...]:
        return tuple(critical(chart.layout, chart.digits) for chart in self.charts)

    # --- crews ---------------------------------------------------------------------------------------------------

    def pools(self, subject: str | None) -> tuple[Pool, ...]:
        """Return the crew pools that a question concerns: all of them, or the one of that name."""
        every = (*self.plan.pools, *self.plan.free_pools)
        return tuple(pool for pool in every if subject in (None, pool.name))

    def crews_at_work(self, pool: Pool) -> Values:
        """Count crews at work, shape (n,)."""
        if pool in self.plan.pools:
            return self.desk.busy(pool, self.columns).astype(np.float64)
        return self.calling(pool)

    def calling(self, pool: Pool) -> Values:
        """Count items that wait for a crew or have one, shape (n,)."""
        count = np.zeros(self.size)
        for kind in pool.kinds:
            for island, number in kind.places:
                slot = self.charts[island].layout.slots[number]
                if slot.repair is not None:
                    count += slot.calling(self.charts[island].digits)[self.columns[island]]
        return count

    # --- names ---------------------------------------------------------------------------------------------------

    @cached_property
    def _ambiguous(self) -> frozenset[str]:
        """Islands whose labels could be taken for those of another: a kind that stands in several groups."""
        seen: dict[str, list[str]] = {}
        for layout in self.plan.islands:
            for slot in layout.slots:
                seen.setdefault(slot.unit, []).append(layout.node.name)
        every = {island for islands in seen.values() if len(islands) > 1 for island in islands}
        bare = {layout.node.name for layout in self.plan.islands if _has_group_words(layout)}
        return frozenset(every | bare) if len(self.plan.islands) > 1 else frozenset()

    def label(self, state: int) -> str:
        """Name of a state."""
        parts: list[tuple[str, str]] = []
        merged = {island: islands for islands in self.classes for island in islands}
        told: set[tuple[int, int]] = set()
        for island in range(len(self.charts)):
            local = int(self.columns[island, state])
            name, text = self.plan.islands[island].node.name, self._local_label(island, local)
            if island in merged:
                islands = merged[island]
                if (islands[0], local) in told:
                    continue
                told.add((islands[0], local))
                alike = int((self.columns[list(islands), state] == local).sum())
                name = f"{alike} of {len(islands)} like {self.plan.islands[islands[0]].node.name}"
                text = f"{name}[{text}]" if text else ""
                parts.append(("", text))
            else:
                parts.append((name, text))
        return join_labels(parts, self._ambiguous)

    def _local_label(self, island: int, local: int) -> str:
        layout = self.plan.islands[island]
        column = [int(value) for value in self.charts[island].digits[:, local]]
        return island_label(layout, column, _ordinary(layout), alone=len(self.charts) == 1)

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
    share[stopped | node.switching_now(x)] = 0.0
    return np.minimum(share, 1.0)


def _has_group_words(layout: Layout) -> bool:
    groups = [node_of(path[-1]) for path in layout.groups]
    return any(node.outage >= 0 or node.switching for node in groups)


def _ordinary(layout: Layout) -> list[int]:
    return [int(value) for value in initial_digits(layout, {})[:, 0]]


def initial_digits(layout: Layout, failed: dict[str, int]) -> Digits:
    """Return the initial state of an island: the given numbers of failed items, duty filled by rank."""
    x = layout.empty()
    for slot in layout.slots:
        if not slot.renewed_at_once:
            x[slot.entry_row] += failed.get(slot.unit, 0)
    fill_by_rank(layout.node, x)
    return x


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
            tables = (*chart.spontaneous.values(), *chart.crew_driven.values())
            each += sum(len(table) for table in tables) / chart.size
        return round(self.most_states * each)


def prepare(model: Model, subjects: tuple[str, ...] = (), *, merge: bool = True, alone: str | None = None) -> Prepared:
    """Work out the islands of a model; see `generate` for the parameters."""
    drawn = plan(model, subjects, alone=alone)
    kinds = ArrowKinds()
    contended = {unit.unit for pool in drawn.pools for unit in pool.kinds}
    starts = tuple(initial_digits(layout, _initially_failed(model, layout)) for layout in drawn.islands)
    classes = interchangeable(drawn.islands, starts, model.system, frozenset(subjects)) if merge else ()
    first = {island: islands[0] for islands in classes for island in islands}
    charts: list[Chart] = []
    for number, (layout, begin) in enumerate(zip(drawn.islands, starts, strict=True)):
        if first.get(number, number) < number:
            charts.append(charts[first[number]])  # alike in everything but the name
            continue
        local = frozenset(at for at, slot in enumerate(layout.slots) if slot.unit not in contended)
        charts.append(build_chart(layout, kinds, begin, local))
    return Prepared(drawn, tuple(charts), classes, kinds)


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
    island_of = {layout.node.name: number for number, layout in enumerate(drawn.islands)}
    system = drawn.model.system
    found = explore(charts, desk, prepared.kinds, system, island_of, classes=prepared.classes, limit=limit)
    start: dict[int, Fraction] = {}
    for state, weight, choices in found.start:  # several draws may lead to one state where groups are merged
        start[state] = start.get(state, Fraction(0)) + Fraction(weight, choices)
    return GeneratedSpace(
        drawn,
        charts,
        desk,
        Packing(charts),
        found.keys,
        found.arrows,
        prepared.kinds,
        tuple(start.items()),
        prepared.classes,
    )


def _initially_failed(model: Model, layout: Layout) -> dict[str, int]:
    """Return kind -> items failed at time zero in one island."""
    failed: dict[str, int] = {}
    for name, faults in model.initial.items():
        for slot in layout.slots:
            if name in (slot.unit, f"{slot.group}.{slot.unit}"):
                failed[slot.unit] = faults.failed
    return failed
