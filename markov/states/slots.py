"""Draws up the rows of the items of one kind in one group: lanes, hidden faults, kinds of fault."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cached_property
from math import exp, log

from markov.model import CommonCause, FailureMode, Model, Unit, names
from markov.rates import Factor
from markov.states.causes import detected_shares_of, shares_of, struck_share
from markov.states.factors import certain, clock_of, failure_of, rate_of, repair_of, share_of, start_failure_of
from markov.states.layout import Clock, FaultKind, Hidden, Lane, Node, Ordering, RowCounter, Slot
from markov.states.membership import members


@dataclass(frozen=True)
class StockRows:
    """Rows of a pool of spares, drawn before the slots that draw on it."""

    shelf: int
    orders: tuple[int, ...]
    counted: int
    most: int


@dataclass
class Drawing:
    """What is known while the rows of one island are drawn up."""

    model: Model
    contended: set[str]
    counter: RowCounter
    phase: int
    islands: tuple[str, ...]
    ordering: dict[str, StockRows] = field(default_factory=dict)

    def __post_init__(self) -> None:
        for name in self.stock_names:
            self.ordering[name] = self._stock_rows(name)

    @cached_property
    def here(self) -> dict[str, int]:
        """Kind -> number of items in the island."""
        counts: dict[str, int] = {}
        for island in self.islands:
            for unit, count in members(self.model, island).items():
                counts[unit] = counts.get(unit, 0) + count
        return counts

    @cached_property
    def stock_names(self) -> tuple[str, ...]:
        """Pools of spares that items of the island draw on."""
        return tuple(name for name, pool in self.model.spares.items() if set(pool.for_) & set(self.here))

    @cached_property
    def desk_names(self) -> tuple[str, ...]:
        """Crew pools whose crews finish what they have begun, and that items of the island may wait for."""
        return tuple(
            name
            for name, crew in self.model.crews.items()
            if name in self.contended
            and not (crew.preemptive and crew.queue == "priority")
            and set(crew.repairs) & set(self.here)
        )

    def items_of(self, units: tuple[str, ...]) -> int:
        """Count the items of some kinds in the island."""
        return sum(self.here.get(unit, 0) for unit in units)

    def strikes(self, struck: tuple[str, ...], group: str, unit: str) -> bool:
        """Tell whether a cause that names some kinds and groups strikes the items of a kind in a group."""
        return group in struck or unit in struck

    def causes_of(self, group: str, unit: str) -> list[tuple[str, CommonCause, int]]:
        """Return the causes that strike the items of a kind in a group, each with how many items it may strike."""
        return [
            (name, cause, self.struck_items(cause))
            for name, cause in self.model.common_causes.items()
            if self.strikes(cause.members, group, unit)
        ]

    def struck_kinds(self, cause: CommonCause) -> dict[tuple[str, str], int]:
        """Return (group, kind) -> number of items that a cause may strike."""
        found: dict[tuple[str, str], int] = {}
        for island in self.islands:
            if island in self.model.groups:
                for member in self.model.groups[island].members:
                    if not member.is_group and self.strikes(cause.members, island, member.name):
                        found[island, member.name] = member.count
            elif island in cause.members:
                found[island, island] = 1
        return found

    def struck_items(self, cause: CommonCause) -> int:
        """Count the items of the island that a cause may strike."""
        return sum(self.struck_kinds(cause).values())

    def base_of(self, cause: CommonCause, name: str, struck: list[Slot]) -> Factor:
        """Return the failure rate that the shares of a cause are taken of."""
        rates = [slot.failure for slot in struck if slot.failure is not None for _ in range(slot.count)]
        return self._base(cause, name, rates)

    def _base(self, cause: CommonCause, name: str, rates: list[Factor]) -> Factor:
        if cause.rate is not None:
            factor = rate_of(cause.rate, f"λ({name})", f"rate that cause {name} is a share of", f"common_causes.{name}")
            if factor is not None:
                return factor
        if len({rate.exact for rate in rates}) == 1:
            return rates[0]
        if cause.basis == "geometric_mean":
            mean = Fraction(exp(sum(log(rate.exact) for rate in rates) / len(rates)))
            meaning = f"geometric mean of the failure rates that cause {name} strikes"
            return Factor(f"λ({name})", mean, meaning, f"common_causes.{name}.basis")
        return min(rates, key=lambda rate: rate.exact)

    def base_rate(self, cause: CommonCause, name: str) -> Fraction:
        """Return the failure rate per hour that the shares of a cause are taken of."""
        rates = []
        for (_, unit), count in self.struck_kinds(cause).items():
            factor = failure_of(unit, self.model.units[unit], f"units.{unit}")
            if factor is not None:
                rates += [factor] * count
        return self._base(cause, name, rates).exact if rates else Fraction(0)

    def _stock_rows(self, name: str) -> StockRows:
        pool, counter = self.model.spares[name], self.counter
        items = self.items_of(pool.for_)
        most = pool.stock + items + pool.batch
        stages = 1
        clock = clock_of(pool.lead_time, "", "", f"spares.{name}", shape=pool.lead_time_shape)
        if clock is not None:
            stages = clock.stages
        orders = most // pool.batch + 1
        return StockRows(
            counter.row(f"{name} on the shelf", most + pool.batch),
            counter.rows(f"{name} on order", orders, stages),
            counter.row(f"{name} towards the next order", pool.batch - 1) if pool.batch > 1 else -1,
            orders,
        )

    def pace(self, unit: str) -> Factor | None:
        """Return the rate factor of the phase for a kind; None where it is one."""
        if not self.model.phases:
            return None
        phase = self.model.phases[self.phase]
        given = phase.rate_factors.get(unit)
        if given is None or given.exact == 1:
            return None
        meaning = f"rate factor of {unit} in phase {phase.name}"
        return Factor(given.name or f"f({phase.name}, {unit})", given.exact, meaning, f"phases[{self.phase}]", True)


def tests_of(model: Model, *called: str) -> list[str]:
    """Name the tests that test any of these names, in the order of the text."""
    return [name for name, test in model.tests.items() if set(called) & set(test.of)]


def draw_slot(drawing: Drawing, node: Node, unit: str, rank: int, count: int) -> Slot:
    """Draw up the rows of the items of one kind in one group."""
    model, counter = drawing.model, drawing.counter
    kind = model.units[unit]
    where = f"units.{unit}"
    name = unit if unit == node.name else f"{node.name}.{unit}"
    lanes, lane_of = _lanes(drawing, node, unit, name, count)
    tests = tests_of(model, unit, name)
    found = _Faults(drawing, node, unit, kind, tests, lane_of)
    faults = found.kinds()
    takes_out = [
        test
        for test in tests
        if (each := model.tests[test]).duration is not None and not each.duration.is_zero and not each.in_service
    ]
    hidden = [
        replace(
            each,
            held=counter.row(f"{name} {each.label}, under test", count) if takes_out and not each.returns else -1,
            apart=counter.row(f"{name} {each.label}", count),
            placed=-1 if node.active else counter.row(f"{name} {each.label}, in a duty place", count),
        )
        for each in found.hidden
    ]
    failure = failure_of(unit, kind, where)
    if all(each.hidden < 0 and lanes[each.lane].renewed_at_once for each in faults):
        failure = None
    return Slot(
        unit=unit,
        group=node.name,
        rank=rank,
        count=count,
        failure=failure,
        pace=drawing.pace(unit),
        start_failure=None if lanes[0].renewed_at_once else start_failure_of(unit, kind, where),
        capacity=None if kind.capacity is None else share_of(kind.capacity, f"capacity({unit})", "capacity", where),
        faults=faults,
        lanes=lanes,
        hidden=tuple(hidden),
        tested=counter.row(f"{name} under test", count) if takes_out else -1,
        bypass=any(model.tests[test].bypass for test in takes_out),
        duty=-1 if node.active else counter.row(f"{name} on duty", count),
        start=()
        if node.active or node.takeover is None
        else counter.rows(f"{name} starting", count, node.takeover.stages),
    )


def _modes(kind: Unit) -> dict[str, FailureMode | None]:
    return dict(kind.failure_modes) if kind.failure_modes else {"": None}


def _lane_keys(kind: Unit) -> dict[tuple[bool, object], list[str]]:
    """Return (acts needlessly, own repair time) -> failure modes that are repaired alike, ordinary ones first."""
    keys: dict[tuple[bool, object], list[str]] = {}
    modes = _modes(kind)
    ordered = sorted(modes, key=lambda mode: (each := modes[mode]) is not None and each.effect == "acts_needlessly")
    for mode in ordered:
        each = modes[mode]
        needless = each is not None and each.effect == "acts_needlessly"
        own = None if each is None or each.repair_time is None else each.repair_time.exact
        keys.setdefault((needless, own), []).append(mode)
    if (False, None) not in keys and kind.repairable:  # a failed start, or harm by a test, is of no mode
        keys = {(False, None): [""], **keys}
    return keys


def _repair_of_mode(kind: Unit, unit: str, mode: str) -> Clock | None:
    """Return the repair of a failure mode; None where there is none, or it takes no time."""
    given = _modes(kind).get(mode)
    where = f"units.{unit}"
    if given is None or given.repair_time is None:
        return repair_of(unit, kind, where)
    origin = f"{where}.failure_modes.{mode}"
    shape = given.repair_time_shape
    return clock_of(given.repair_time, f"μ({unit}, {mode})", f"repair of {unit}, {mode}", origin, shape=shape)


def _lanes(drawing: Drawing, node: Node, unit: str, name: str, count: int) -> tuple[tuple[Lane, ...], dict[str, int]]:
    """Return the ways of being known to be failed, the ordinary one first, and which one each mode takes."""
    kind = drawing.model.units[unit]
    keys, modes = _lane_keys(kind), _modes(kind)
    lanes, lane_of = [], {}
    for number, ((needless, _), named) in enumerate(keys.items()):
        told = " or ".join(named) if len(keys) > 1 else ""
        lanes.append(_lane(drawing, node, unit, name, count, told, named[0], needless, modes.get(named[0]), len(keys)))
        lane_of.update(dict.fromkeys(named, number))
    return tuple(lanes), lane_of


def _lane(
    drawing: Drawing,
    node: Node,
    unit: str,
    name: str,
    count: int,
    mode: str,
    named: str,
    needless: bool,
    given: FailureMode | None,
    lanes: int,
) -> Lane:
    model, counter = drawing.model, drawing.counter
    kind = model.units[unit]
    where = f"units.{unit}"
    stock = next((at for at, pool in enumerate(drawing.stock_names) if unit in model.spares[pool].for_), -1)
    repair = repair_of(unit, kind, where)
    at_once = kind.repaired_at_once
    if given is not None and given.repair_time is not None:
        at_once = given.repair_time.is_zero
        repair = _repair_of_mode(kind, unit, named)
    if at_once:
        stock = -1  # renewed where it stands
    repaired = repair is not None
    if stock >= 0:
        repair = None
    delays = None
    if (repair is not None or stock >= 0) and kind.logistic_delay is not None:
        delays = clock_of(
            kind.logistic_delay,
            f"δ({unit})",
            f"end of the logistic delay of {unit}",
            f"{where}.logistic_delay",
            shape=kind.logistic_delay_shape,
        )
    explicit, preemptible, desk = _service(drawing, unit, lanes, repair is not None, node.offline)
    success = None
    if repair is not None and not certain(kind.repair_success) and kind.repair_success is not None:
        success = share_of(kind.repair_success, f"s({unit})", f"chance that a repair of {unit} succeeds", where)
    label = f"{name} ({mode})" if mode else name
    stages = 1 if repair is None else repair.stages
    swap, ordering = None, None
    if stock >= 0:
        pool = model.spares[drawing.stock_names[stock]]
        swap = clock_of(
            pool.swap_time,
            f"1/X({unit})",
            f"exchange of {unit}",
            f"spares.{drawing.stock_names[stock]}",
            shape=pool.swap_time_shape,
        )
        rows = drawing.ordering[drawing.stock_names[stock]]
        if pool.order == "when_failed" and not repaired:
            ordering = Ordering(rows.counted, rows.orders[0], pool.batch, rows.most)
    deferred = node.release != "at_once" and (repair is not None or stock >= 0)
    return Lane(
        unit,
        name,
        mode,
        needless,
        repair,
        success,
        delays,
        swap,
        at_once,
        explicit,
        preemptible,
        desk,
        stock,
        ordering,
        deferred=counter.row(f"{label} repair not begun", count) if deferred else -1,
        delay=counter.rows(f"{label} delay", count, delays.stages) if delays is not None else (),
        down=() if explicit or stock >= 0 else counter.rows(f"{label} failed", count, stages),
        fresh=counter.row(f"{label} queued", count) if explicit else -1,
        held=counter.rows(f"{label} interrupted", count, stages) if preemptible else (),
        serve=counter.rows(f"{label} in repair", count, stages) if explicit else (),
        short=counter.row(f"{label} waits for a spare", count) if stock >= 0 else -1,
        swap=counter.rows(f"{label} being exchanged", count, swap.stages) if swap is not None else (),
    )


def _service(drawing: Drawing, unit: str, lanes: int, repairable: bool, offline: bool) -> tuple[bool, bool, int]:
    """Tell whether the queue must be told apart, whether repairs are interrupted, and which desk serves (-1: none)."""
    model = drawing.model
    pool = next(
        (name for name, crew in model.crews.items() if unit in crew.repairs and name in drawing.contended), None
    )
    if pool is None or not repairable:
        return False, False, -1
    if pool in drawing.desk_names:
        return True, False, drawing.desk_names.index(pool)
    explicit = _places(model, unit) * lanes > 1 or offline
    return explicit, explicit and model.crews[pool].order.index(unit) > 0, -1


def _places(model: Model, unit: str) -> int:
    """Count the groups that a kind serves in, a unit that stands alone included."""
    grouped = sum(member.name == unit for group in model.groups.values() for member in group.members)
    return grouped + (model.system is not None and unit in names(model.system))


def draw_removed(drawing: Drawing, stock: str) -> tuple[Lane, ...]:
    """Draw up the rows of removed units under repair, one lane for each kind of a pool that is repaired."""
    lanes = []
    pool = drawing.model.spares[stock]
    for unit in pool.for_:
        kind = drawing.model.units[unit]
        keys = _lane_keys(kind)
        for named in keys.values() if unit in drawing.here else ():
            repair = _repair_of_mode(kind, unit, named[0])
            if repair is None:
                continue
            told = " or ".join(named) if len(keys) > 1 else ""
            explicit, preemptible, desk = _service(drawing, unit, len(keys), True, False)
            most = pool.stock + drawing.here[unit]
            label = f"removed {unit}" + (f" ({told})" if told else "")
            lanes.append(
                Lane(
                    unit,
                    stock,
                    told,
                    False,
                    repair,
                    None,
                    None,
                    None,
                    False,
                    explicit,
                    preemptible,
                    desk,
                    down=() if explicit else drawing.counter.rows(f"{label} failed", most, repair.stages),
                    fresh=drawing.counter.row(f"{label} queued", most) if explicit else -1,
                    held=drawing.counter.rows(f"{label} interrupted", most, repair.stages) if preemptible else (),
                    serve=drawing.counter.rows(f"{label} in repair", most, repair.stages) if explicit else (),
                )
            )
    return tuple(lanes)


class _Faults:
    """Works out the kinds of fault of one slot, and the classes of hidden faults that they lead to."""

    def __init__(
        self, drawing: Drawing, node: Node, unit: str, kind: Unit, tests: list[str], lane_of: dict[str, int]
    ) -> None:
        self._drawing = drawing
        self._node = node
        self._unit = unit
        self._kind = kind
        self._tests = tests
        self._lane_of = lane_of
        self.hidden: list[Hidden] = []

    def kinds(self) -> tuple[FaultKind, ...]:
        """Return the kinds of fault; the classes of hidden faults are in `hidden` afterwards."""
        found: list[FaultKind] = []
        for mode, given in _modes(self._kind).items():
            found += self._of_mode(mode, given)
        left_out = [test for test in self._tests if not _zero(self._drawing.model.tests[test].left_out)]
        if left_out:
            by_demand = "demand" in self._kind.revealed_by
            self.hidden.append(Hidden("left out", 0, False, frozenset(self._tests), by_demand, False, True))
        return tuple(found)

    def _of_mode(self, mode: str, given: FailureMode | None) -> list[FaultKind]:
        where = f"units.{self._unit}"
        lane = self._lane_of[mode]
        shares: tuple[Factor, ...] = ()
        if given is not None and given.share.exact != 1:
            shares = (
                share_of(given.share, f"m({self._unit}, {mode})", f"share of {mode} faults of {self._unit}", where),
            )
        detected = given.detected if given is not None and given.detected is not None else self._kind.detected
        struck, struck_hidden = self._alone(detected=True), self._alone(detected=False)
        told = f"({mode})" if mode else ""
        if certain(detected) or detected is None:
            return [FaultKind(told, shares, lane, -1, struck)]
        symbol = f"d({self._unit}{', ' + mode if mode else ''})"
        seen = share_of(detected, symbol, f"share of the faults of {self._unit} revealed at once", where)
        found = [FaultKind(told, (*shares, seen), lane, -1, struck)] if seen.exact else []
        unseen = seen.complement()
        needless = given is not None and given.effect == "acts_needlessly"
        for part, found_by in self._classes():
            factors = (*shares, unseen) if part is None else (*shares, unseen, part)
            label = "unnoticed" + ("" if part is None else _told_by(found_by))
            number = self._class(
                Hidden(
                    f"failed {label}" + (f" {told}" if needless or len(set(self._lane_of.values())) > 1 else ""),
                    lane,
                    needless,
                    frozenset(found_by),
                    "demand" in self._kind.revealed_by,
                    "system_failure" in self._kind.revealed_by,
                )
            )
            found.append(FaultKind(f"{told} {label}".strip(), factors, lane, number, struck_hidden))
        return found

    def _class(self, hidden: Hidden) -> int:
        if hidden not in self.hidden:
            self.hidden.append(hidden)
        return self.hidden.index(hidden)

    def _classes(self) -> list[tuple[Factor | None, tuple[str, ...]]]:
        """Return the shares of hidden faults by the tests that find them; what a test finds, any better one finds."""
        model = self._drawing.model
        levels: dict[Fraction, list[str]] = {}
        for test in self._tests:
            given = model.tests[test].coverage
            levels.setdefault(Fraction(1) if given is None else given.exact, []).append(test)
        if not levels:
            return [(None, ())]
        found: list[tuple[Factor | None, tuple[str, ...]]] = []
        below, below_symbol = Fraction(0), ""
        for level in sorted(levels):
            given = model.tests[levels[level][0]].coverage
            symbol = (given.name if given is not None else "") or f"C({levels[level][0]})"
            finding = tuple(test for each in sorted(levels) if each >= level for test in levels[each])
            if level > below:
                if level == 1 and not below:
                    found.append((None, finding))
                else:
                    found.append((self._part(level - below, _difference(symbol, level, below_symbol)), finding))
            below, below_symbol = level, symbol
        if below < 1:
            found.append((self._part(1 - below, f"(1−{below_symbol})" if below_symbol else "1"), ()))
        return found

    def _part(self, exact: Fraction, symbol: str) -> Factor:
        return Factor(
            symbol, exact, f"share of the hidden faults of {self._unit}", f"tests ({self._unit})", is_share=True
        )

    def _alone(self, *, detected: bool) -> Factor | None:
        """Return the share of the failure rate that strikes an item alone; None where that is all of it."""
        causes = self._drawing.causes_of(self._node.name, self._unit)
        if not causes:
            return None
        own = failure_of(self._unit, self._kind, "")
        if own is None:
            return None
        taken, symbols = Fraction(0), []
        for name, cause, items in causes:
            shares = (detected_shares_of(cause, name, items) if detected else None) or shares_of(cause, name, items)
            part = struck_share(shares, items) * self._drawing.base_rate(cause, name) / own.exact
            taken += part
            symbols.append(shares[-1][1].symbol if len(shares) == 1 and part == shares[0][1].exact else f"β({name})")
        if not taken:
            return None
        if taken > 1:
            raise AssertionError("causes take more than the failure rate")
        symbol = f"(1−{'−'.join(symbols)})"
        return Factor(
            symbol, 1 - taken, f"share of the faults of {self._unit} by itself", f"common_causes ({self._unit})", True
        )


def _difference(symbol: str, level: Fraction, below: str) -> str:
    upper = "1" if level == 1 else symbol
    return f"({upper}−{below})" if below else upper


def _told_by(found_by: tuple[str, ...]) -> str:
    return f", found by {' or '.join(found_by)}" if found_by else ", found by no test"


def _zero(share: object) -> bool:
    return share is None or getattr(share, "exact", 0) == 0
