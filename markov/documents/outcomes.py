"""The results of a report: verdicts on targets, measures with their bounds, what redundancy gains and costs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from markov.documents.cells import (
    NONE,
    every_digit,
    joined,
    limit_words,
    link,
    result_unit,
    result_value,
    result_words,
    row,
    strong,
    verdict,
)
from markov.documents.report_pictures import result_figures
from markov.documents.sheets import Lines, Sheet
from markov.documents.tree import Block, Column, Paragraph, Section, Span, Table, Text, plain
from markov.model import Model
from markov.output.redundancy import HEADING, Grid, redundancy_grids
from markov.output.wording import bound_words, value_words
from markov.results import Result, Solution, TargetResult
from markov.states import StateSpace

_GRIDS = ("gains", "departures", "price")
_CAPTIONS = ("The system against simpler ones", "What departs from independent blocks", "What redundancy costs")


def methods_of(results: Sequence[Result]) -> dict[str, int]:
    """Number the methods that gave the results, from 1 on in the order of their first use."""
    found: dict[str, int] = {}
    for result in results:
        if result.value is not None:
            found.setdefault(method_words(result), len(found) + 1)
    return found


def method_words(result: Result) -> str:
    """Return how a number was obtained; what has no method of its own before a comma is told without it."""
    return result.method.strip(" ,;")


def result_numbers(solution: Solution) -> Mapping[Result, int]:
    """Number the results of a solution from 1 on."""
    return {result: number for number, result in enumerate(solution.results, 1)}


# --------------------------------------------------------------------------------------------------------- verdicts


def verdict_section(solution: Solution) -> Section:
    """Return the section on targets and their verdicts."""
    if not solution.targets:
        return Section("Requirements and verdicts", (Paragraph(plain("The spec sets no target.")),), "verdicts")
    columns = (
        Column("Requirement", width=0.9),
        Column("What is asked", width=1.9),
        Column("Limit", width=1.1),
        Column("Result", width=1.0),
        Column("Proven bound", width=0.9),
        Column("Verdict", width=0.8),
        Column("How far", width=1.5),
    )
    numbers = result_numbers(solution)
    rows = tuple(
        row(
            strong(target.id),
            result_words(target.result),
            limit_words(target),
            link(f"result-{numbers[target.result]}", result_value(target.result)),
            bound_words(target.result) or NONE,
            verdict(target.verdict),
            target.why,
            anchor=f"requirement-{number}",
        )
        for number, target in enumerate(solution.targets, 1)
    )
    rule = (
        "Each verdict is taken from the unrounded value and its proven bound: a requirement is met, or missed, only "
        "where both ends of the bound agree; where the limit lies between them it is undecided. A requirement on a "
        "failure that no path of the chain leads to cannot occur."
    )
    table = Table("verdicts", "Requirements and verdicts", columns, rows, "verdict-table")
    return Section("Requirements and verdicts", (Paragraph(plain(rule)), table), "verdicts")


def counted_verdicts(targets: Sequence[TargetResult]) -> Mapping[str, int]:
    """Return how many targets got each verdict."""
    found: dict[str, int] = {}
    for target in targets:
        found[target.verdict] = found.get(target.verdict, 0) + 1
    return found


# ---------------------------------------------------------------------------------------------------------- results


def results_section(model: Model, solution: Solution, space: StateSpace | None) -> Section:
    """Return the section on results: every measure with its bound and method, then redundancy.

    `space` is the chain of the whole plant, where there is one.
    """
    blocks: list[Block] = [
        Paragraph(
            plain(
                "The bound is relative to the value and proven: the exact answer of the model for the numbers of the "
                "spec is no farther away. It is about arithmetic alone. A question without an answer has its reason "
                "in place of a value."
            )
        ),
        _results(solution),
        *result_figures(model, solution, space),
    ]
    if solution.redundancy is not None:
        blocks.append(_redundancy(redundancy_grids(solution.redundancy)))
    return Section("Results", tuple(blocks), "results")


def _results(solution: Solution) -> Table:
    methods = methods_of(solution.results)
    columns = (
        Column("Measure", width=2.4),
        Column("Value", "decimal", 1.2),
        Column("Unit", width=0.5),
        Column("Proven bound", width=1.8),
        Column("Method", "right", 0.6),
    )
    rows = []
    for number, result in enumerate(solution.results, 1):
        told = result.value is not None
        rows.append(
            row(
                result_words(result),
                value_words(result.measure, result.value),
                result_unit(result) if told else NONE,
                bound_words(result) if told else result.reason or NONE,
                link(f"method-{methods[method_words(result)]}", str(methods[method_words(result)])) if told else NONE,
                anchor=f"result-{number}",
            )
        )
    return Table("results", "Results with their bounds", columns, tuple(rows), "result-table")


def _redundancy(grids: Sequence[Grid]) -> Section:
    blocks: list[Block] = []
    for name, caption, grid in zip(_GRIDS, _CAPTIONS, grids, strict=True):
        if grid.rows:
            columns = tuple(
                Column(
                    _capital(heading),
                    "left" if number in (0, len(grid.headings) - 1) else "right",
                    1.0 if number else 2.2,
                )
                for number, heading in enumerate(grid.headings)
            )
            blocks.append(Table(f"redundancy-{name}", caption, columns, tuple(row(*cells) for cells in grid.rows)))
        if grid.below:
            blocks.append(Paragraph(plain(grid.below)))
    return Section(HEADING, tuple(blocks), "redundancy")


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def result_sheet(solution: Solution) -> Sheet:
    """Return every result with all its digits, for a file of plain text."""
    headings = ("Measure", "Of", "State", "At, h", "For, h", "Value", "Lower", "Upper", "Unit", "Method", "Reason")

    def rows() -> Lines:
        for each in solution.results:
            yield (
                each.measure,
                each.of or "",
                each.state or "",
                every_digit(each.at_hours),
                every_digit(each.for_hours),
                every_digit(each.value),
                every_digit(each.lower),
                every_digit(each.upper),
                each.unit,
                method_words(each) if each.value is not None else "",
                each.reason or "",
            )

    return Sheet("results", "Results with their bounds", headings, rows)


def verdict_words(solution: Solution) -> Text:
    """Return how many targets have which verdict: ``1 met, 2 missed``."""
    found = counted_verdicts(solution.targets).items()
    return joined((Span(f"{count} "), *verdict(word)) for word, count in found)
