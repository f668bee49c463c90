"""A solution as one JSON object."""

from __future__ import annotations

import json
from fractions import Fraction
from typing import Any

from markov.results import Check, Figure, Ratio, Redundancy, Result, Solution, TargetResult


def solution_json(solution: Solution) -> str:
    """Return the solution as JSON text, one object, ending in a newline."""
    return json.dumps(solution_object(solution), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def solution_object(solution: Solution) -> dict[str, Any]:
    """Return the solution as plain dictionaries, lists, numbers and texts."""
    return {
        "title": solution.title,
        "spec_sha256": solution.sha256,
        "version": solution.version,
        "states": solution.states,
        "transitions": solution.transitions,
        "raw_states": solution.raw_states,
        "parts": solution.parts,
        "year_hours": _number(solution.year_hours),
        "results": [_result(result) for result in solution.results],
        "targets": [_target(target) for target in solution.targets],
        "redundancy": None if solution.redundancy is None else _redundancy(solution.redundancy),
        "assumptions": list(solution.assumptions),
        "warnings": list(solution.warnings),
    }


def check_json(check: Check) -> str:
    """Return what `markov check` found as JSON text, one object, ending in a newline."""
    found = {
        "title": check.title,
        "spec_sha256": check.sha256,
        "version": check.version,
        "states": check.size.states,
        "transitions": check.size.transitions,
        "raw_states": check.size.raw_states,
        "parts": check.size.parts,
        "exact": check.size.is_exact,
        "memory_bytes": check.size.memory_bytes,
        "within_limit": check.size.is_within_limit,
        "assumptions": list(check.assumptions),
        "warnings": list(check.warnings),
    }
    return json.dumps(found, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _result(result: Result) -> dict[str, Any]:
    entry: dict[str, Any] = {
        "measure": result.measure,
        "of": result.of,
        "state": result.state,
        "at_hours": _number(result.at_hours),
        "value": result.value,
        "lower": result.lower,
        "upper": result.upper,
        "unit": result.unit,
        "method": result.method,
    }
    if result.for_hours is not None:
        entry["for_hours"] = _number(result.for_hours)
    if result.reason is not None:
        entry["reason"] = result.reason
    return entry


def _redundancy(redundancy: Redundancy) -> dict[str, Any]:
    return {
        "at_hours": _number(redundancy.mission_hours),
        "over_single_unit": _ratio(redundancy.over_single_unit),
        "over_independent_blocks": _ratio(redundancy.over_independent_blocks),
        "over_perfect_blocks": _ratio(redundancy.over_perfect_blocks),
        "effects": [
            {
                "dependence": effect.dependence,
                "where": list(effect.where),
                "factor": _ratio(effect.factor),
                "left": _ratio(effect.left),
            }
            for effect in redundancy.effects
        ],
        "cause": {"long_run": redundancy.long_run_cause, "mission": redundancy.mission_cause},
        "costs": [
            {
                "name": cost.name,
                "unit": cost.unit,
                "system": _figure(cost.system),
                "plain": _figure(cost.plain),
                "note": cost.note,
            }
            for cost in redundancy.costs
        ],
    }


def _ratio(ratio: Ratio) -> dict[str, Any]:
    return {
        "long_run": _figure(ratio.long_run),
        "mission": None if ratio.mission is None else _figure(ratio.mission),
    }


def _figure(figure: Figure) -> dict[str, Any]:
    entry: dict[str, Any] = {"value": figure.value, "lower": figure.lower, "upper": figure.upper}
    if figure.reason is not None:
        entry["reason"] = figure.reason
    return entry


def _target(target: TargetResult) -> dict[str, Any]:
    entry: dict[str, Any] = {
        "id": target.id,
        "measure": target.measure,
        "of": target.of,
        "state": target.result.state,
        "at_hours": _number(target.at_hours),
        "for_hours": _number(target.result.for_hours),
        "limit": _number(target.limit),
        "direction": target.direction,
        "value": target.result.value,
        "lower": target.result.lower,
        "upper": target.result.upper,
        "verdict": target.verdict,
        "why": target.why,
    }
    if target.result.reason is not None:
        entry["reason"] = target.result.reason
    return entry


def _number(value: Fraction | None) -> int | float | None:
    if value is None:
        return None
    return int(value) if value.denominator == 1 and abs(value) < 2**53 else float(value)
