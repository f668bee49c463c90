"""Verdicts on targets, from unrounded values and their proven bounds."""

from __future__ import annotations

import math
from fractions import Fraction

from markov.measures import MEASURES
from markov.model import Target
from markov.results import Result, TargetResult, Verdict

#: Measures that speak of failures of a subject and are settled where its down states cannot be reached.
ABOUT_FAILURE = frozenset(MEASURES) - {
    "repairs_per_year",
    "starts_per_year",
    "spares_per_year",
    "tests_per_year",
    "crew_utilisation",
    "waiting_for_crew",
    "probability_of_waiting",
    "mean_units_failed",
    "mean_capacity",
    "level_probability",
    "time_without_redundancy",
    "gain_over_single_unit",
    "gain_over_independent_blocks",
    "state_probability",
}

#: Measures that are probabilities of being up: 1 where nothing fails.  Other measures with a high good end are times.
_CERTAIN = {
    "reliability",
    "interval_reliability",
    "availability",
    "mean_availability",
    "steady_state_availability",
}


def judge(target: Target, result: Result, *, can_fail: bool) -> TargetResult:
    """Give the verdict on one target.

    Parameters
    ----------
    target : Target
    result : Result
        The answer to what the target asks.
    can_fail : bool
        Whether a down state of the subject can be reached.
    """
    limit = target.limit
    if not can_fail and target.measure in ABOUT_FAILURE:
        satisfied = _holds(target.direction, _without_failures(target.measure), limit)
        why = "no down state can be reached"
        verdict: Verdict = "cannot_occur" if satisfied else "missed"
        return _told(target, result, verdict, satisfied, why)
    if result.value is None:
        return _told(target, result, "undecided", None, result.reason or "no value")
    if result.lower is None or result.upper is None:
        return _told(target, result, "undecided", None, "the value is an estimate without a proven bound")
    holds = {_holds(target.direction, end, limit) for end in (result.lower, result.upper)}
    if len(holds) == 2:
        return _told(target, result, "undecided", None, "the proven bound lies on both sides of the limit")
    satisfied = holds.pop()
    return _told(target, result, "met" if satisfied else "missed", satisfied, _margin(target, result.value))


def _without_failures(measure: str) -> float:
    """Return the value of a measure where nothing ever fails."""
    if MEASURES[measure].low_is_good and measure != "standard_deviation_of_time_to_first_failure":
        return 0.0
    return 1.0 if measure in _CERTAIN else math.inf


def _holds(direction: str, value: float, limit: Fraction) -> bool:
    if math.isinf(value):
        return direction == "at_least"
    return Fraction(value) >= limit if direction == "at_least" else Fraction(value) <= limit


def _margin(target: Target, value: float) -> str:
    """Return how far the value is from the limit, as a share of what counts."""
    limit = float(target.limit)
    if target.measure in {*_CERTAIN, "mean_capacity", "level_probability"} and 0.5 < limit < 1:
        ratio = (1 - value) / (1 - limit)
        return f"{_ratio(ratio)} the allowed shortfall from 1"
    if limit == 0:
        return f"{value:.3g} away from the limit"
    return f"{_ratio(value / limit)} the limit"


def _ratio(ratio: float) -> str:
    """Return a ratio as the beginning of a phrase: ``62.8 % of``, ``12 times``."""
    if ratio < 1e-5:
        return f"{ratio:.1e} times"
    if ratio >= 9.995:
        return f"{ratio:.3g} times"
    for digits in (3, 4, 6, 9, 12):  # a near miss, or near hit, does not print as the limit itself
        told = f"{100 * ratio:.{digits}g}"
        if float(told) != 100.0 or ratio == 1.0:
            break
    return f"{told} % of"


def _told(target: Target, result: Result, verdict: Verdict, satisfied: bool | None, why: str) -> TargetResult:
    return TargetResult(
        id=target.id,
        measure=target.measure,
        of=target.of,
        at_hours=result.at_hours,
        limit=target.limit,
        limit_text=target.limit_text,
        direction=target.direction,
        result=result,
        verdict=verdict,
        satisfied=satisfied,
        why=why,
    )
