"""The trace of a report: from each requirement to the parameters that move its result, and back."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from markov.documents.arrow_reasons import ArrowReasons
from markov.documents.cells import (
    NONE,
    code,
    joined,
    limit_words,
    link,
    result_value,
    result_words,
    row,
    verdict,
)
from markov.documents.outcomes import result_numbers
from markov.documents.parameters import line_words, parameter_anchor, written_values
from markov.documents.tree import Block, Column, Paragraph, Section, Span, Table, Text, plain
from markov.documents.written_places import WrittenPlaces
from markov.errors import MarkovError
from markov.evaluation.questions import Question, question_of
from markov.evaluation.sensitivity import Sensitivity, sensitivities
from markov.model import Model
from markov.results import Solution

#: Measures near one, with those that hold their digits: the trace follows these.
_SHORTFALL = {
    "reliability": "unreliability",
    "availability": "unavailability",
    "mean_availability": "mean_unavailability",
    "steady_state_availability": "steady_state_unavailability",
}

#: States of a chain up to which derivatives are worked out for a report.
DERIVED_UP_TO = 2_000


@dataclass(frozen=True)
class Influence:
    """What a parameter does to the result of one requirement.

    Attributes
    ----------
    parameter : str
    elasticity : float or None
        Percent of change of the result for each percent of change of the parameter; None where only that it has a part
        is known.
    """

    parameter: str
    elasticity: float | None


@dataclass(frozen=True)
class Influences:
    """The parameters that move the result of each requirement, the strongest first.

    Attributes
    ----------
    by_target : tuple of tuples of Influence
        One entry a target, in the order of the spec.
    reasons : tuple of str
        For each target why there are no elasticities; empty where there are.
    """

    by_target: tuple[tuple[Influence, ...], ...]
    reasons: tuple[str, ...]


def influences_of(model: Model, solution: Solution, reasons: Sequence[ArrowReasons]) -> Influences:
    """Find which parameters move the result of each requirement.

    Parameters
    ----------
    model : Model
    solution : Solution
    reasons : sequence of ArrowReasons
        Of the chains that were solved.
    """
    questions = [_followed(question_of(model, target)) for target in model.targets]
    found, why = _derivatives(model, solution, questions)
    involved = _involved(reasons)
    every, told = [], []
    for question in questions:
        sensitivity = found.get(question)
        every.append(_by_strength(sensitivity) if sensitivity else tuple(Influence(name, None) for name in involved))
        told.append("" if sensitivity else why.get(question, "not worked out"))
    return Influences(tuple(every), tuple(told))


def _followed(question: Question) -> Question:
    """Return the question whose answer is followed: for a share near one its distance from one."""
    return replace(question, measure=_SHORTFALL.get(question.measure, question.measure))


def _derivatives(
    model: Model, solution: Solution, questions: Sequence[Question]
) -> tuple[Mapping[Question, Sensitivity], Mapping[Question, str]]:
    if not model.parameters or not questions:
        return {}, {}
    if solution.states > DERIVED_UP_TO or solution.parts > 1:
        return {}, dict.fromkeys(
            questions, f"derivatives are not made for chains above {DERIVED_UP_TO:,} states or in parts"
        )
    different = list(dict.fromkeys(questions))
    try:
        return sensitivities(model, different), {}
    except MarkovError:
        pass  # one of them has none: ask for each alone
    found: dict[Question, Sensitivity] = {}
    why: dict[Question, str] = {}
    for question in different:
        try:
            found |= sensitivities(model, [question])
        except MarkovError as error:
            why[question] = str(error)
    return found, why


def _by_strength(sensitivity: Sensitivity) -> tuple[Influence, ...]:
    found = []
    for name, slope in sensitivity.derivatives.items():
        if slope == 0:
            continue
        relative = sensitivity.elasticities.get(name)
        known = relative is not None and math.isfinite(relative)
        found.append(Influence(name, relative if known else None))
    return tuple(sorted(found, key=lambda each: (-abs(each.elasticity or 0.0), each.parameter)))


def _involved(reasons: Sequence[ArrowReasons]) -> tuple[str, ...]:
    """Name the parameters behind any transition of the chains, in the order of the spec."""
    used: set[str] = set()
    for each in reasons:
        for kind in range(len(each.space.kinds.kinds)):
            for factor in each.factors(kind):
                used.update(each.places.parameters_of(factor))
    names = reasons[0].model.parameters if reasons else {}
    return tuple(name for name in names if name in used)


# ------------------------------------------------------------------------------------------------------------ section


def trace_section(model: Model, solution: Solution, places: WrittenPlaces, influences: Influences) -> Section:
    """Return the section that follows each requirement to the parameters, and each parameter back."""
    if not solution.targets:
        blocks: list[Block] = [
            Paragraph(plain("Without a requirement there is nothing to trace from; the values lead back."))
        ]
    else:
        blocks = [Paragraph(plain(_about(influences))), _forward(model, solution, places, influences)]
    if model.parameters:
        blocks.append(_back(model, solution, places, influences))
    return Section("From requirements to parameters and back", tuple(blocks), "trace")


def _about(influences: Influences) -> str:
    told = (
        "A number beside a parameter says by how many percent the result changes for each percent by which the "
        "parameter grows, from exact derivatives at the values of the spec; for a reliability or an availability it "
        "is the distance from 1 that changes so. A parameter that is not named does not move the result."
    )
    missing = list(dict.fromkeys(why for why in influences.reasons if why))
    if missing:
        told += (
            " Where no number stands, all parameters behind the chain are named, and whether each moves the result "
            f"was not worked out: {'; '.join(missing)}."
        )
    return told


def _forward(model: Model, solution: Solution, places: WrittenPlaces, influences: Influences) -> Table:
    columns = (
        Column("Requirement", width=0.9),
        Column("Line", "right", 0.4),
        Column("Measure and limit", width=1.9),
        Column("Result", width=1.0),
        Column("Verdict", width=0.8),
        Column("Parameters, by influence", width=2.2),
    )
    numbers = result_numbers(solution)
    rows = []
    for number, (target, moved) in enumerate(zip(solution.targets, influences.by_target, strict=True)):
        rows.append(
            row(
                link(f"requirement-{number + 1}", target.id),
                line_words(places, ("targets", number)),
                f"{result_words(target.result)}: {limit_words(target)}",
                link(f"result-{numbers[target.result]}", result_value(target.result)),
                verdict(target.verdict),
                joined((_influence(model, each) for each in moved), nothing="no parameter of the spec"),
            )
        )
    return Table("trace", "From each requirement to the parameters", columns, tuple(rows), "trace-forward")


def _influence(model: Model, each: Influence) -> Text:
    name = link(parameter_anchor(model, each.parameter), each.parameter)
    return name if each.elasticity is None else (*name, Span(f" ({_signed(each.elasticity)})"))


def _signed(value: float) -> str:
    shown = f"{abs(value):.3g}"
    return f"{'+' if value > 0 else '−'}{shown}"


def _back(model: Model, solution: Solution, places: WrittenPlaces, influences: Influences) -> Table:
    columns = (
        Column("Parameter", width=1.4),
        Column("Line", "right", 0.4),
        Column("Used by", width=2.4),
        Column("Requirements whose result it moves", width=2.4),
    )
    used: dict[str, list[str]] = {}
    for value in written_values(model):
        for name in places.parameters_in(value.quantity):
            used.setdefault(name, []).append(places.words(value.path))
    rows = []
    for number, name in enumerate(model.parameters, 1):
        moved: list[Text] = []
        for place, (target, found) in enumerate(zip(solution.targets, influences.by_target, strict=True), 1):
            for each in found:
                if each.parameter == name:
                    shown = "" if each.elasticity is None else f" ({_signed(each.elasticity)})"
                    moved.append((*link(f"requirement-{place}", target.id), Span(shown)))
        rows.append(
            row(
                link(f"parameter-{number}", name),
                line_words(places, ("parameters", name)),
                joined((code(words) for words in used.get(name, [])), nothing="nothing in the spec"),
                joined(moved, nothing="none" if solution.targets else NONE),
            )
        )
    return Table("trace-back", "From each parameter to the requirements", columns, tuple(rows), "trace-back")
