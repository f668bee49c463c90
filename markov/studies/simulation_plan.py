"""The numbers of a model as a simulation uses them: floats, and who belongs where."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from markov.errors import UsageError
from markov.model import (
    CommonCause,
    Group,
    Mode,
    Model,
    Outcome,
    RepairAtFailed,
    RepairAtVisits,
    Success,
    Switch,
    TimeShape,
    Unit,
    WhileDown,
)
from markov.quantities import Quantity
from markov.studies.simulation_draws import Law


@dataclass(frozen=True)
class RepairPlan:
    """A repair: `stages` stages, each of the law `stage`.

    `progress` is the number of stages that a single stage counts as passing, for the rule that the most advanced goes
    first.
    """

    stage: Law
    stages: int
    progress: int

    @property
    def at_once(self) -> bool:
        """Whether it takes no time."""
        return self.stage.mean == 0.0


@dataclass(frozen=True)
class FaultKind:
    """One way in which a unit fails.

    `detected` is the share that is known at once; `spurious` tells that the unit acts needlessly.
    """

    share: float
    detected: float
    spurious: bool
    repair: RepairPlan | None


@dataclass(frozen=True)
class Kind:
    """A kind of equipment; `repair` is that of a failed start, None for a kind that is never repaired."""

    name: str
    rate: float
    modes: tuple[FaultKind, ...]
    repair: RepairPlan | None
    repair_success: float
    delay: Law
    start_failure: float
    capacity: float | None
    revealed_by: frozenset[str]


@dataclass(frozen=True)
class SwitchPlan:
    """A switch that fails itself."""

    on_demand: float
    rate: float
    latent: bool
    repair: Law | None
    false_rate: float


@dataclass(frozen=True)
class MemberPlan:
    """Members of one rank: `count` items of a kind, or a train."""

    name: str
    count: int
    is_group: bool


@dataclass(frozen=True)
class GroupPlan:
    """A group, with the rules it follows."""

    name: str
    members: tuple[MemberPlan, ...]
    required: int
    on_duty: int | None
    active: bool
    dormancy: float
    coverage: tuple[float, ...]
    takeover: Law
    outcome: Outcome
    outcome_law: Law | None
    switch: SwitchPlan | None
    prefers: bool
    starts_again: bool
    load: Callable[[int, int], float] | None
    repair_when: Literal["at_once", "system_down", "failed", "visits"]
    failed_needed: int
    visits_every: Fraction | None
    while_down: WhileDown | None
    offline_repair: bool


@dataclass(frozen=True)
class PoolPlan:
    """A pool of crews; `order` ranks the kinds, the most urgent first."""

    name: str
    size: int
    order: tuple[str, ...]
    preemptive: bool
    first_come: bool


@dataclass(frozen=True)
class SparesPlan:
    """A stock of spares."""

    name: str
    kinds: tuple[str, ...]
    stock: int
    lead: Law
    swap: Law
    when_failed: bool
    batch: int


@dataclass(frozen=True)
class TestPlan:
    """A proof test: instants are `first` + n × `interval`."""

    name: str
    of: tuple[str, ...]
    interval: Fraction
    first: Fraction
    coverage: float
    duration: Fraction
    in_service: bool
    left_out: float
    causes_failure: float
    bypass: bool


@dataclass(frozen=True)
class CausePlan:
    """A common cause.

    ``weights(m)[k - 1]`` is, with m members, the rate of the shock of each set of k over the rate of one member.
    """

    name: str
    members: tuple[str, ...]
    on_duty_only: bool
    weights: Callable[[int], tuple[float, ...]]
    beta: float | None
    beta_detected: float | None
    rate: float | None
    basis: str | None


@dataclass(frozen=True)
class PhasePlan:
    """A phase; the last may have no duration."""

    name: str
    duration: Fraction | None
    factors: dict[str, float]
    system: Success | None
    required: dict[str, int]
    repair: bool


@dataclass(frozen=True)
class Plan:
    """A whole plant."""

    model: Model
    year: float
    kinds: dict[str, Kind]
    groups: dict[str, GroupPlan]
    pools: tuple[PoolPlan, ...]
    spares: tuple[SparesPlan, ...]
    tests: tuple[TestPlan, ...]
    causes: tuple[CausePlan, ...]
    demand_rate: float
    phases: tuple[PhasePlan, ...]
    repeats: bool
    restoration: Law | None
    while_down: WhileDown
    system: Success
    levels: dict[str, float]


def plan_of(model: Model) -> Plan:
    """Return the numbers of a model.

    Raises
    ------
    UsageError
        The chain is written by hand: there are no items to simulate.
    """
    if model.explicit or model.system is None:
        raise UsageError("simulation follows units and groups; this chain is written by hand, solve it instead")
    demand, restoration = model.demand, model.restoration
    return Plan(
        model=model,
        year=float(model.year_hours),
        kinds={name: _kind(name, unit) for name, unit in model.units.items()},
        groups={name: _group(model, name) for name in model.groups},
        pools=tuple(
            PoolPlan(name, crew.size, crew.order, crew.preemptive, crew.queue == "first_come")
            for name, crew in model.crews.items()
        ),
        spares=_spares(model),
        tests=_tests(model),
        causes=_causes(model),
        demand_rate=0.0 if demand is None else _number(demand.rate),
        phases=_phases(model),
        repeats=bool(model.phases) and model.phases[-1].repeat,
        restoration=None if restoration is None else _law(restoration.time, None),
        while_down=model.while_down,
        system=model.system,
        levels={name: _number(level) for name, level in model.levels.items()},
    )


def _number(quantity: Quantity | None, unsaid: float = 0.0) -> float:
    return unsaid if quantity is None else float(quantity.exact)


def _law(time: Quantity | None, shape: TimeShape | None, stages: int = 1) -> Law:
    """Return the law of a duration: fixed where it is said to be, gamma where a spread is given."""
    variance = 1.0 / stages
    if shape is not None:
        variance = 0.0 if shape.is_fixed else float(shape.squared_variation)
    return Law(_number(time), variance)


def _repair(unit: Unit, mode: Mode) -> RepairPlan | None:
    if mode.repair is None or not mode.repairable:
        return None
    mean = float(mode.repair.exact if mode.repair.dimension == "time" else 1 / mode.repair.exact)
    if mode.repair_shape is None:
        return RepairPlan(Law(mean / unit.repair_stages), unit.repair_stages, 1)
    progress = mode.repair_shape.stages or mode.repair_shape.least_stages
    return RepairPlan(_law(mode.repair, mode.repair_shape), 1, progress)


def _kind(name: str, unit: Unit) -> Kind:
    modes = tuple(
        FaultKind(_number(mode.share, 1.0), _number(mode.detected, 1.0), mode.needless, _repair(unit, mode))
        for mode in unit.modes()
    )
    own = Mode("", None, None, False, unit.repair, unit.repair_time_shape)
    return Kind(
        name=name,
        rate=float(unit.failure_hourly),
        modes=modes,
        repair=_repair(unit, own) or next((mode.repair for mode in modes if mode.repair is not None), None),
        repair_success=_number(unit.repair_success, 1.0),
        delay=_law(unit.logistic_delay, unit.logistic_delay_shape),
        start_failure=_number(unit.start_failure),
        capacity=None if unit.capacity is None else _number(unit.capacity),
        revealed_by=frozenset(unit.revealed_by),
    )


def _switch(switch: Switch | None) -> SwitchPlan | None:
    if switch is None:
        return None
    repair = None if switch.repair_time is None else _law(switch.repair_time, switch.repair_time_shape)
    return SwitchPlan(
        on_demand=_number(switch.failure_on_demand),
        rate=_number(switch.failure_rate),
        latent=switch.latent,
        repair=repair,
        false_rate=_number(switch.false_operation_rate),
    )


def _load(group: Group) -> Callable[[int, int], float] | None:
    sharing = group.load_sharing
    if sharing is None:
        return None
    if sharing.exponent is not None:
        power = _number(sharing.exponent)
        return lambda running, places: (places / running) ** power
    table = {number: _number(factor) for number, factor in sharing.table.items()}
    most = max(table)
    return lambda running, places: table[min(running, most)]


def _group(model: Model, name: str) -> GroupPlan:
    group = model.groups[name]
    when: Literal["at_once", "system_down", "failed", "visits"] = "at_once"
    failed_needed, visits_every = 0, None
    match group.repair_when:
        case RepairAtFailed(failed=failed_needed):
            when = "failed"
        case RepairAtVisits(every=every):
            when, visits_every = "visits", every.exact
        case "system_down":
            when = "system_down"
    return GroupPlan(
        name=name,
        members=tuple(MemberPlan(member.name, member.count, member.is_group) for member in group.members),
        required=group.required,
        on_duty=group.on_duty,
        active=group.is_active,
        dormancy=float(group.dormancy),
        coverage=tuple(float(each.exact) for each in group.coverage_list) or (1.0,),
        takeover=_law(group.takeover_time, group.takeover_shape, group.takeover_stages),
        outcome=group.outcome,
        outcome_law=None if group.outcome_time is None else _law(group.outcome_time, group.outcome_shape),
        switch=_switch(group.switch),
        prefers=group.return_to_preferred and not group.is_active,
        starts_again=group.after_repair == "start_again",
        load=_load(group),
        repair_when=when,
        failed_needed=failed_needed,
        visits_every=visits_every,
        while_down=group.while_down,
        offline_repair=group.offline_repair,
    )


def _spares(model: Model) -> tuple[SparesPlan, ...]:
    return tuple(
        SparesPlan(
            name=name,
            kinds=pool.for_,
            stock=pool.stock,
            lead=_law(pool.lead_time, pool.lead_time_shape),
            swap=_law(pool.swap_time, pool.swap_time_shape),
            when_failed=pool.order == "when_failed",
            batch=pool.batch,
        )
        for name, pool in model.spares.items()
    )


def _tests(model: Model) -> tuple[TestPlan, ...]:
    return tuple(
        TestPlan(
            name=name,
            of=test.of,
            interval=test.interval.exact,
            first=test.first.exact,
            coverage=_number(test.coverage, 1.0),
            duration=Fraction(0) if test.duration is None else test.duration.exact,
            in_service=test.in_service,
            left_out=_number(test.left_out),
            causes_failure=_number(test.causes_failure),
            bypass=test.bypass,
        )
        for name, test in model.tests.items()
    )


def _causes(model: Model) -> tuple[CausePlan, ...]:
    return tuple(
        CausePlan(
            name=name,
            members=cause.members,
            on_duty_only=cause.exposed == "on_duty",
            weights=lambda size, cause=cause: _struck(cause, size),  # type: ignore[misc]
            beta=None if cause.beta is None else _number(cause.beta),
            beta_detected=None if cause.beta_detected is None else _number(cause.beta_detected),
            rate=None if cause.rate is None else _number(cause.rate),
            basis=cause.basis,
        )
        for name, cause in model.common_causes.items()
    )


def _struck(cause: CommonCause, size: int) -> tuple[float, ...]:
    """Return the rate of the shock of each named set of 1, 2, … `size` items over the rate of one item.

    Notes
    -----
    A. Mosleh and others, Procedures for Treating Common Cause Failures in Safety and Reliability Studies,
    NUREG/CR-4780, 1988, section 3 (from memory): with m items, greek letters ρ_1 = 1, ρ_2 = β, ρ_3 = γ …, ρ_(m+1) = 0
    give ρ_1 … ρ_k (1 − ρ_(k+1)) / C(m−1, k−1); alpha factors give α_k / C(m−1, k−1) where tests are staggered and
    k α_k / (α_1 + 2 α_2 + …) / C(m−1, k−1) where they are simultaneous.
    """
    if cause.beta is not None:
        return (*(0.0 for _ in range(size - 1)), _number(cause.beta))
    if cause.greek_letters is not None:
        letters = [1.0, *(_number(each) for each in cause.greek_letters[: size - 1]), 0.0]
        letters += [0.0] * (size + 1 - len(letters))
        shares = [math.prod(letters[:k]) * (1.0 - letters[k]) for k in range(1, size + 1)]
    else:
        alphas = [_number(each) for each in cause.alpha_factors or ()][:size]
        alphas += [0.0] * (size - len(alphas))
        if cause.testing == "simultaneous":
            mean = sum(k * alpha for k, alpha in enumerate(alphas, start=1))
            alphas = [k * alpha / mean for k, alpha in enumerate(alphas, start=1)]
        shares = alphas
    return tuple(share / math.comb(size - 1, k - 1) for k, share in enumerate(shares, start=1))


def _phases(model: Model) -> tuple[PhasePlan, ...]:
    return tuple(
        PhasePlan(
            name=phase.name,
            duration=None if phase.duration is None else phase.duration.exact,
            factors={unit: _number(factor) for unit, factor in phase.rate_factors.items()},
            system=phase.system,
            required=dict(phase.required),
            repair=phase.repair,
        )
        for phase in model.phases
    )
