"""Simulation of a plant, item by item: an estimate of each measure, for a second look at what is solved exactly."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

from markov.errors import UsageError
from markov.model import Model
from markov.model.cycle import joint_period
from markov.studies.simulation_building import SYSTEM
from markov.studies.simulation_estimates import Estimate, bounded_mean, mean, ratio, share
from markov.studies.simulation_history import History
from markov.studies.simulation_plan import Plan, plan_of
from markov.studies.simulation_record import Key, Record

#: Batches that a long life is cut into, once its beginning is dropped.
BATCHES = 40
#: Share of a long life that is dropped.
WARM_UP = 0.1
#: Measures whose samples lie between 0 and 1, with the value that they have while all is well.
_USUAL = {"mean_unavailability": 0.0, "mean_capacity": 1.0, "level_probability": 1.0}
#: Events that a life may have before its first failure.
MOST_EVENTS = 2_000_000


@dataclass(frozen=True)
class Simulated:
    """What a simulation has found.

    Attributes
    ----------
    seed, histories : int
    horizon : float or None
        Length of the long life, in hours.
    estimates : mapping of (measure, of, hours) to Estimate
        `of` is None for the system; hours are None for values of the long run.
    """

    seed: int
    histories: int
    horizon: float | None
    estimates: dict[tuple[str, str | None, float | None], Estimate] = field(repr=False)

    def estimate(self, measure: str, *, of: str | None = None, at_hours: float | None = None) -> Estimate:
        """Return one estimate.

        Raises
        ------
        KeyError
            The simulation holds none.
        """
        try:
            return self.estimates[measure, of, at_hours]
        except KeyError:
            raise KeyError(f"no estimate of {measure!r} of {of or 'the system'} in this simulation") from None


def simulate(
    model: Model,
    *,
    histories: int,
    seed: int,
    horizon: float | None = None,
    times: Sequence[float] = (),
    first_failure: bool = False,
) -> Simulated:
    """Simulate a plant.

    Parameters
    ----------
    model : Model
        Made of units and groups.
    histories : int
        Independent lives from time 0, for values at `times` and for the first failure.
    seed : int
        The same seed gives the same numbers.
    horizon : float, optional
        Length in hours of one more life, for values of the long run.
    times : sequence of float
        In hours.
    first_failure : bool
        Whether each life goes on until the system has failed, for the mean time to the first failure.

    Raises
    ------
    UsageError
        The chain is written by hand, or a number is out of range.
    NotReached
        A life went on for `MOST_EVENTS` without a failure.

    Notes
    -----
    Chance events by the exponential race of all rates, drawn anew after each event; all else by its own end.  Times
    with a spread follow a gamma law of that mean and spread, fixed times are fixed: no stages stand in for them.
    Values of the long run by batch means, the first tenth dropped; where the plant has a cycle, batches are whole
    cycles (A. M. Law, Simulation Modeling and Analysis, 5th ed., 2015, section 9.5.3, from memory).
    """
    if histories < 1 or any(time < 0 for time in times):
        raise UsageError("a simulation needs at least one history, and times of zero or more")
    plan = plan_of(model)
    estimates: dict[tuple[str, str | None, float | None], Estimate] = {}
    if times or first_failure:
        _lives(plan, histories, seed, sorted(set(times)), first_failure, estimates)
    if horizon is not None:
        if not horizon > 0.0:
            raise UsageError("a simulation needs a horizon above zero")
        _long_run(plan, seed, horizon, estimates)
    return Simulated(seed, histories, horizon, estimates)


# ------------------------------------------------------------------------------------------------- values at a time


def _lives(
    plan: Plan,
    histories: int,
    seed: int,
    times: Sequence[float],
    first_failure: bool,
    estimates: dict[tuple[str, str | None, float | None], Estimate],
) -> None:
    down: dict[tuple[str | None, float], int] = {}
    sums: dict[tuple[str, str | None, float], list[float]] = {}
    failed_by = dict.fromkeys(times, 0)
    firsts: list[float] = []
    for number in range(histories):
        record = Record()
        life = History(plan, (seed, 1, number), record)
        for time in times:
            life.run(time)
            failed_by[time] += life.first_failure is not None
            for (what, of), value in record.lasting.items():
                subject = of or None
                if what == "down":
                    down[subject, time] = down.get((subject, time), 0) + (value == 1.0)
                    if time > 0.0:
                        _append(sums, "mean_unavailability", subject, time, record.hours["down", of] / time)
                        _append(sums, "expected_failures", subject, time, record.counts["failures", of])
                elif what == "capacity":
                    _append(sums, "mean_capacity", subject, time, value)
                elif what == "failed":
                    _append(sums, "mean_units_failed", subject, time, value)
                elif what == "level":
                    _append(sums, "level_probability", subject, time, value)
        if first_failure:
            life.run(math.inf, to_failure=True, most_events=MOST_EVENTS)
            if life.first_failure is None:
                raise UsageError("a life came to an end without a failure: there is no mean time to the first failure")
            firsts.append(life.first_failure)
    for (subject, time), number in down.items():
        estimates["unavailability", subject, time] = share(number, histories)
    for time, number in failed_by.items():
        estimates["unreliability", None, time] = share(number, histories)
    for (measure, subject, time), values in sums.items():
        if measure in _USUAL:
            found = bounded_mean(values, _USUAL[measure])
        else:
            found = mean(values, math.fsum(values) if measure == "expected_failures" else None)
        estimates[measure, subject, time] = found
    if firsts:
        estimates["mean_time_to_first_failure", None, None] = mean(firsts)


def _append(
    sums: dict[tuple[str, str | None, float], list[float]], measure: str, of: str | None, time: float, value: float
) -> None:
    sums.setdefault((measure, of, time), []).append(value)


# ------------------------------------------------------------------------------------------------------- long run


@dataclass(frozen=True)
class _Batch:
    """Counts and hours of one stretch of a life."""

    length: float
    counts: dict[Key, float]
    hours: dict[Key, float]


def _batches(plan: Plan, seed: int, horizon: float) -> list[_Batch]:
    length = horizon * (1.0 - WARM_UP) / BATCHES
    start = horizon * WARM_UP
    cycle = joint_period([period for _, period in plan.model.periods])
    if cycle is not None and length >= float(cycle):
        whole = float(cycle)
        length = math.floor(length / whole) * whole
        start = math.ceil(start / whole) * whole
    record = Record()
    life = History(plan, (seed, 2), record)
    life.run(start)
    batches = []
    for number in range(1, BATCHES + 1):
        record.clear()
        life.run(start + number * length)
        batches.append(_Batch(length, dict(record.counts), dict(record.hours)))
    return batches


def _long_run(
    plan: Plan, seed: int, horizon: float, estimates: dict[tuple[str, str | None, float | None], Estimate]
) -> None:
    batches = _batches(plan, seed, horizon)

    def lasting(what: str, of: str, scale: float = 1.0) -> Estimate:
        return mean([scale * batch.hours.get((what, of), 0.0) / batch.length for batch in batches])

    def counted(what: str, of: str, per: float) -> Estimate:
        values = [batch.counts.get((what, of), 0.0) for batch in batches]
        found = mean([per * value / batch.length for value, batch in zip(values, batches, strict=True)])
        return replace(found, events=math.fsum(values))

    def put(measure: str, of: str, estimate: Estimate) -> None:
        estimates[measure, of or None, None] = estimate

    year = plan.year
    groups = list(plan.groups)
    for of in (SYSTEM, *groups):
        failures = math.fsum(batch.counts.get(("failures", of), 0.0) for batch in batches)
        down = replace(lasting("down", of), events=failures)
        put("steady_state_availability", of, replace(down, value=1.0 - down.value, events=None))
        put("steady_state_unavailability", of, down)
        put("failure_frequency", of, counted("failures", of, 1.0))
        put("failures_per_year", of, counted("failures", of, year))
        put("downtime_per_year", of, replace(down, value=down.value * year, standard_error=down.standard_error * year))
        put("mean_units_failed", of, lasting("failed", of))
        put("mean_capacity", of, lasting("capacity", of))
    _system_measures(plan, lasting, counted, put)
    for of in (SYSTEM, *groups, *plan.kinds):
        put("repairs_per_year", of, counted("repairs", of, year))
        put("starts_per_year", of, counted("starts", of, year))
        put("spares_per_year", of, counted("spares", of, year))
    for pool in plan.pools:
        name = pool.name
        put("crew_utilisation", name, lasting("busy", name, 1.0 / pool.size))
        put("waiting_for_crew", name, lasting("waiting", name))
        put("repairs_per_year", name, counted("crew_repairs", name, year))
        waits = [batch.counts.get(("waits", name), 0.0) for batch in batches]
        calls = [batch.counts.get(("calls", name), 0.0) for batch in batches]
        waiting = ratio(waits, calls)
        if waiting is not None:
            put("probability_of_waiting", name, waiting)


def _system_measures(
    plan: Plan,
    lasting: Callable[[str, str], Estimate],
    counted: Callable[[str, str, float], Estimate],
    put: Callable[[str, str, Estimate], None],
) -> None:
    put("pfd_average", SYSTEM, lasting("dangerous", SYSTEM))
    put("pfh", SYSTEM, counted("dangerous", SYSTEM, 1.0))
    put("tests_per_year", SYSTEM, counted("tests", SYSTEM, plan.year))
    for name in plan.levels:
        put("level_probability", name, lasting("level", name))
    if plan.demand_rate > 0.0:
        put("hazardous_events_per_year", SYSTEM, counted("hazardous", SYSTEM, plan.year))
    put("spurious_failures_per_year", SYSTEM, counted("spurious", SYSTEM, plan.year))
