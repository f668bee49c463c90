"""The paragraph about a plant that an assessor reads first."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from markov.documents.tree import Span, Text
from markov.model import AllOf, AnyOf, AtLeast, Group, Model, Named, Success
from markov.output.wording import bound_words, dependence_words, hours_words, measure_words, size_words, unit_words
from markov.output.wording import value_words as digits
from markov.results import Result, Solution, TargetResult
from markov.states import StateSpace

#: Measures of the system that the paragraph gives, as far as they have a value, the first two of them.
_TOLD = ("steady_state_availability", "failures_per_year", "unreliability", "mean_time_to_first_failure")
_MOST_TOLD = 3
_MOST_GROUPS = 6

_STANDBY = {
    "active": "all at work",
    "hot_standby": "hot standby",
    "warm_standby": "warm standby",
    "cold_standby": "cold standby",
}


def first_paragraph(model: Model, solution: Solution, space: StateSpace | None) -> Text:
    """Say what the plant is, what was computed, what came out, and what that rests on.

    Parameters
    ----------
    model : Model
    solution : Solution
        Of this model.
    space : StateSpace or None
        Its chain; None where only parts of it were solved.
    """
    spans: list[Span] = []
    spans += _plant(model)
    spans += _chain(model, solution, space)
    spans += _results(solution)
    spans += _verdicts(solution)
    spans += _cause(solution)
    spans += _grounds(model, solution)
    spans.append(
        Span(
            "Systematic faults, software, human error and ageing are not in these numbers; local codes and licensed "
            "practice decide what they are worth."
        )
    )
    return tuple(spans)


def _plant(model: Model) -> Iterator[Span]:
    yield Span(model.title or model.source_name, "strong")
    if model.explicit:
        up = sum(state.up for state in model.states.values())
        yield Span(
            f" is given as a chain written by hand with {_count(len(model.states), 'state')}, {up} of them up, and "
            f"{_count(len(model.transitions), 'transition')}. "
        )
        return
    if model.system is not None:
        yield Span(f" delivers while {criterion_words(model.system)} {_verb(model.system)} up")
    inside = [(name, model.groups[name]) for name in model.named_in_any_phase if name in model.groups]
    if inside:
        told = [f"{name} has {group_words(group)}" for name, group in inside[:_MOST_GROUPS]]
        if len(inside) > _MOST_GROUPS:
            told.append(f"{_count(len(inside) - _MOST_GROUPS, 'further group')} as listed")
        yield Span(f": {'; '.join(told)}")
    yield Span(". ")
    yield Span(_upkeep(model))


def criterion_words(success: Success) -> str:
    """Return a success criterion in words: ``gate and one of a, b``."""
    match success:
        case Named():
            return success.name
        case AllOf():
            return " and ".join(_inner(each) for each in success.of)
        case AnyOf():
            return " or ".join(_inner(each) for each in success.of)
        case AtLeast():
            return f"at least {success.count} of {', '.join(_inner(each) for each in success.of)}"


def _inner(success: Success) -> str:
    told = criterion_words(success)
    return told if isinstance(success, Named) else f"({told})"


def _verb(success: Success) -> str:
    return "are" if isinstance(success, AllOf | AtLeast) and len(success.of) > 1 else "is"


def group_words(group: Group) -> str:
    """Return what a group consists of: ``2 × drive, 1 required, cold standby``."""
    members = " + ".join(
        member.name if member.is_group else f"{member.count} × {member.name}" for member in group.members
    )
    told = [members, f"{group.required} required"]
    if group.size > group.required or len(group.members) > 1:
        told.append(_STANDBY["active" if group.is_active else str(group.redundancy)])
    return ", ".join(told)


def _upkeep(model: Model) -> str:
    told = []
    if model.crews:
        pools = [f"{name} ({_count(crew.size, 'crew')})" for name, crew in model.crews.items()]
        told.append(f"{_listed(pools)} {'repairs' if len(pools) == 1 else 'repair'} what fails")
    elif not any(unit.ever_repaired for unit in model.units.values()):
        told.append("Nothing is repaired")
    if model.spares:
        told.append(f"spares come from {_listed(list(model.spares))}")
    if model.tests:
        told.append(f"hidden faults are sought by {_listed(list(model.tests))}")
    if model.common_causes:
        told.append(f"{_listed(list(model.common_causes))} may strike several units at once")
    if model.phases:
        told.append(f"the mission passes the phases {_listed([phase.name for phase in model.phases])}")
    if not told:
        return ""
    text = "; ".join(told) + ". "
    return text if model.crews else text[0].upper() + text[1:]


def _chain(model: Model, solution: Solution, space: StateSpace | None) -> Iterator[Span]:
    size = size_words(solution.states, solution.transitions, solution.raw_states, solution.parts)
    made = "Taken as written, it" if model.explicit else "The chain that follows from this"
    yield Span(f"{made} has {size}")
    if space is not None and space.size == solution.states:
        down = int((~space.up).sum())
        yield Span(f", {down} of them down" if down else ", none of them down")
    yield Span(". ")


def _results(solution: Solution) -> Iterator[Span]:
    told: list[Result] = []
    for measure in _TOLD:
        told += [
            each
            for each in solution.results
            if each.measure == measure and each.of is None and each.state is None and each.value is not None
        ][:1]
    for number, result in enumerate(told[:_MOST_TOLD]):
        yield Span("What comes out: " if number == 0 else "; ")
        when = f" at {hours_words(result.at_hours)}" if result.at_hours is not None else ""
        yield Span(f"{measure_words(result.measure)}{when} ")
        yield Span(_value(result), "strong")
        yield Span(f" ({bound_words(result)})")
    if told:
        yield Span(
            "; each bound is proven and relative to the value. " if any(each.is_proven for each in told) else ". "
        )


def _value(result: Result) -> str:
    unit = "" if result.measure.endswith("_per_year") and result.unit == "1/y" else unit_words(result.unit)
    value = digits(result.measure, result.value)
    return f"{value}{unit}" if unit.startswith("/") else f"{value} {unit}".rstrip()


def _verdicts(solution: Solution) -> Iterator[Span]:
    targets = solution.targets
    if not targets:
        yield Span("No target is set. ")
        return
    failing = [each for each in targets if each.satisfied is not True]
    if not failing:
        yield Span(f"{'The target is' if len(targets) == 1 else f'All {len(targets)} targets are'} ")
        yield Span("met", "verdict")
        yield Span(". ")
        return
    yield Span(f"Of {_count(len(targets), 'target')} ")
    kept = len(targets) - len(failing)
    if kept:
        yield Span(f"{kept} {'is' if kept == 1 else 'are'} ")
        yield Span("met", "verdict")
        yield Span("; ")
    for number, target in enumerate(failing):
        yield Span("; " if number else "")
        yield from _failing(target)
    yield Span(". ")


def _failing(target: TargetResult) -> Iterator[Span]:
    yield Span(target.id, "strong")
    yield Span(" is ")
    yield Span(target.verdict.replace("_", " "), "verdict")
    limit = f"{target.direction.replace('_', ' ')} {target.limit_text}"
    words = measure_words(target.measure) + ("" if target.of is None else f" of {target.of}")
    if target.result.value is None:
        yield Span(f" ({words}: {target.why})")
    else:
        yield Span(f" ({words} {_value(target.result)} where {limit} is wanted)")


def _cause(solution: Solution) -> Iterator[Span]:
    found = solution.redundancy
    if found is None or found.long_run_cause is None:
        return
    yield Span(
        "What keeps redundancy from gaining more in the long run is, above all, "
        f"{dependence_words(found.long_run_cause)}. "
    )


def _grounds(model: Model, solution: Solution) -> Iterator[Span]:
    unsupported = sum(parameter.source is None for parameter in model.parameters.values())
    told = []
    if model.parameters:
        named = _count(len(model.parameters), "parameter")
        told.append(f"{named}, {unsupported or 'none'} of them without a source")
    told.append(f"{_count(len(solution.assumptions), 'choice')} that the spec leaves unsaid")
    if solution.warnings:
        told.append(f"{_count(len(solution.warnings), 'warning')} to be read")
    yield Span(f"All this rests on {_listed(told)}. ")


def _count(number: int, word: str) -> str:
    return f"{number:,} {word}" if number == 1 else f"{number:,} {word}s"


def _listed(words: Sequence[str]) -> str:
    shown = [*words[:6], f"{len(words) - 6} more"] if len(words) > 6 else list(words)
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"
