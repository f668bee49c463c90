"""What can be asked of a model: each measure with its unit, its time and the limit a target may set."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

#: How a measure takes its time.  ``point``: needs one.  ``steady``: long run only.  ``either``: long run
#: unless a time is given.  ``none``: no time at all.
Timing = Literal["point", "steady", "either", "none"]

#: What a target's limit is: a probability, a time, a rate, or a plain number.
LimitKind = Literal["share", "time", "rate", "number"]

#: Which subjects (`of`) a measure may have besides the system.
Subject = Literal["group", "unit", "crew", "level"]

_UP_DOWN: tuple[Subject, ...] = ("group", "unit")


@dataclass(frozen=True)
class Measure:
    """One measure: its fixed name, its meaning in a sentence, its unit of measure and what it may be asked of."""

    name: str
    meaning: str
    timing: Timing
    unit: str
    limit: LimitKind
    low_is_good: bool
    subjects: tuple[Subject, ...] = _UP_DOWN
    needs: str = ""  # what a spec must hold for this measure that this version does not build yet


def _table(*measures: Measure) -> dict[str, Measure]:
    return {measure.name: measure for measure in measures}


MEASURES: dict[str, Measure] = _table(
    Measure("reliability", "no failure in (0, t]", "point", "1", "share", False),
    Measure("unreliability", "at least one failure in (0, t]", "point", "1", "share", True),
    Measure("interval_reliability", "up at t and no failure during `for` after it", "either", "1", "share", False),
    Measure("availability", "up at t", "point", "1", "share", False),
    Measure("unavailability", "down at t", "point", "1", "share", True),
    Measure("mean_availability", "share of (0, t] spent up", "point", "1", "share", False),
    Measure("mean_unavailability", "share of (0, t] spent down", "point", "1", "share", True),
    Measure("steady_state_availability", "long-run share of time up", "steady", "1", "share", False),
    Measure("steady_state_unavailability", "long-run share of time down", "steady", "1", "share", True),
    Measure("mean_time_to_first_failure", "mean time from the start to the first failure", "none", "h", "time", False),
    Measure(
        "standard_deviation_of_time_to_first_failure",
        "spread of the time from the start to the first failure",
        "none",
        "h",
        "time",
        True,
    ),
    Measure("mean_up_time", "long-run mean length of an up period", "steady", "h", "time", False),
    Measure("mean_down_time", "long-run mean length of a down period", "steady", "h", "time", True),
    Measure("failure_frequency", "failures per hour", "either", "1/h", "rate", True),
    Measure("expected_failures", "mean number of failures in (0, t]", "point", "1", "number", True),
    Measure("failures_per_year", "long-run failures per year", "steady", "1/y", "number", True),
    Measure("downtime_per_year", "long-run time down per year", "steady", "h/y", "time", True),
    Measure("conditional_failure_intensity", "failure frequency given up", "either", "1/h", "rate", True),
    Measure("hazard_rate", "rate of first failure given none before", "point", "1/h", "rate", True),
    Measure("mean_failure_rate", "unreliability divided by the time", "point", "1/h", "rate", True),
    Measure("pfd_average", "mean unavailability over the test cycle", "steady", "1", "share", True),
    Measure("pfd_peak", "highest unavailability in the test cycle", "steady", "1", "share", True),
    Measure("pfh", "mean failure frequency over the test cycle", "steady", "1/h", "rate", True),
    Measure(
        "hazardous_events_per_year",
        "demands per year that meet a down system",
        "steady",
        "1/y",
        "number",
        True,
    ),
    Measure(
        "spurious_failures_per_year",
        "needless actions per year",
        "steady",
        "1/y",
        "number",
        True,
    ),
    Measure(
        "repairs_per_year", "completed repairs per year", "steady", "1/y", "number", True, ("group", "unit", "crew")
    ),
    Measure("starts_per_year", "start attempts per year", "steady", "1/y", "number", True),
    Measure("spares_per_year", "spares used per year", "steady", "1/y", "number", True),
    Measure("tests_per_year", "tests per year", "steady", "1/y", "number", True),
    Measure("crew_utilisation", "mean share of the crews at work", "steady", "1", "share", True, ("crew",)),
    Measure("waiting_for_crew", "mean number of units waiting for a crew", "steady", "1", "number", True, ("crew",)),
    Measure(
        "probability_of_waiting", "share of faults that find no free crew", "steady", "1", "share", True, ("crew",)
    ),
    Measure("mean_units_failed", "mean number of failed units", "either", "1", "number", True),
    Measure("mean_capacity", "expected delivered share", "either", "1", "share", False),
    Measure(
        "level_probability",
        "probability that at least the share of the level `of` is delivered",
        "either",
        "1",
        "share",
        False,
        ("level",),
    ),
    Measure(
        "time_without_redundancy",
        "time per year up while one further unit fault would bring the system down",
        "steady",
        "h/y",
        "time",
        True,
        ("group",),
    ),
    Measure(
        "gain_over_single_unit",
        "unavailability (with a time: unreliability) of the plain arrangement over that of the system",
        "either",
        "1",
        "number",
        False,
        (),
    ),
    Measure(
        "gain_over_independent_blocks",
        "unavailability (with a time: unreliability) of independent groups over that of the system",
        "either",
        "1",
        "number",
        False,
        (),
    ),
    Measure("state_probability", "probability of one state", "either", "1", "share", True, ()),
)
