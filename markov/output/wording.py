"""Words and digits shared by everything that prints a solution."""

from __future__ import annotations

from fractions import Fraction
from math import ceil

from markov.measures import MEASURES
from markov.results import Figure, Result

#: Printed with every verdict.  What they say is common practice of the trade.
CAUTIONS = (
    "The numbers hold for the model and the data of the spec.  Systematic faults, software, human error, ageing and "
    "data used outside their range are not in them.",
    "A met target is not an approval: where people can be hurt, local codes and licensed practice decide, "
    "not this program.",
)

#: Measures whose digits lie in their distance from one.
_NEAR_ONE = {
    "reliability",
    "interval_reliability",
    "availability",
    "mean_availability",
    "steady_state_availability",
    "mean_capacity",
}

_UNITS = {"1": "", "h": "h", "1/h": "/h", "1/y": "/y", "h/y": "h/y"}


def measure_words(measure: str) -> str:
    """Return a measure's name as words: ``steady-state availability``."""
    words = measure.replace("_", " ").replace("steady state", "steady-state")
    return words.replace("pfd", "PFD").replace("pfh", "PFH")


#: Dependences whose fixed name says too little.
_DEPENDENCES = {
    "test_coverage": "imperfect coverage of tests",
    "test_duration": "duration of tests",
    "left_out_after_tests": "units left out of service after tests",
    "harm_by_tests": "harm by tests",
    "repair_out_of_service": "repair that stops the group",
    "while_down": "what units do while the system is down",
}


def dependence_words(dependence: str) -> str:
    """Return the name of a dependence as words: ``imperfect coverage``."""
    return _DEPENDENCES.get(dependence, dependence.replace("_", " "))


def unit_words(unit: str) -> str:
    """Return the unit of measure as printed; nothing for a plain number."""
    return _UNITS[unit]


def hours_words(hours: Fraction | None) -> str:
    """Return a time in hours with its unit; an em dash where there is none."""
    if hours is None:
        return "—"
    return f"{int(hours):,} h".replace(",", " ") if hours.denominator == 1 else f"{float(hours):.6g} h"


def size_words(states: int, transitions: int, raw_states: int, parts: int = 1) -> str:
    """Return the size of what is solved, with the size before alike groups were merged and parts taken apart."""
    told = f"{_counted(states, 'state')}, {_counted(transitions, 'transition')}"
    if parts > 1:
        return f"{told} in {parts} independent parts (of {_large(raw_states)} states together)"
    return f"{told} (alike groups merged, from {_large(raw_states)} states)" if raw_states != states else told


def _counted(number: int, word: str) -> str:
    return f"{number:,} {word}" if number == 1 else f"{number:,} {word}s"


def _large(number: int) -> str:
    return f"{number:,}" if number < 10**9 else f"{number:.2e}"


def value_words(measure: str, value: float | None, digits: int = 6) -> str:
    """Return a value with the digits that tell: of the distance from one where the value is meant to be near one."""
    if value is None:
        return "—"
    if measure in _NEAR_ONE and 0.9 < value < 1:
        return f"{value:.{min(digits - 1 - _exponent(1 - value), 16)}f}"
    if value != 0 and not 1e-3 <= abs(value) < 1e7:
        mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
        return f"{mantissa.rstrip('0').rstrip('.')}e{exponent}"
    return f"{value:.0f}" if abs(value) >= 10 ** (digits - 1) else f"{value:.{digits}g}"


def _exponent(value: float) -> int:
    return int(f"{value:.0e}".split("e")[1])


def bound_words(result: Result | Figure) -> str:
    """Return how far the exact answer can be from the value at most, relative to it, rounded up."""
    if result.value is None:
        return ""
    if result.lower is None or result.upper is None:
        return "estimate, no bound"
    if result.lower == result.upper:
        return "exact"
    side = max(result.upper - result.value, result.value - result.lower)
    return f"± {_rounded_up(side / abs(result.value) if result.value else side)}"


def _rounded_up(value: float) -> str:
    """Return a positive number with one digit, never below it."""
    mantissa, exponent = f"{value:.17e}".split("e")
    digit = ceil(float(mantissa))
    return f"{digit}e{exponent}" if digit < 10 else f"1e{int(exponent) + 1:+03d}"


def subject_words(result: Result) -> str:
    """Return the measure of a result and whom it is of: ``unreliability of pumps``."""
    words = measure_words(result.measure)
    if result.of is not None:
        words += f" of {result.of}"
    return words if result.state is None else f"{words} of [{result.state}]"


def timing_words(result: Result) -> str:
    """Return the time a result belongs to: hours, the long run, or nothing."""
    if result.at_hours is not None:
        told = f"at {hours_words(result.at_hours)}"
    else:
        told = "" if MEASURES[result.measure].timing == "none" else "long run"
    if result.for_hours is not None:
        told += f" for {hours_words(result.for_hours)}"
    return told
