"""The numerical statement of a report: methods, bounds, a second method and the digits agreed in."""

from __future__ import annotations

from collections.abc import Sequence

from markov.documents.cells import NONE, joined, link, result_value, result_words, row
from markov.documents.chains import ReportedChain
from markov.documents.outcomes import method_words, methods_of, result_numbers
from markov.documents.second_method import Comparison, comparisons, why_none
from markov.documents.tree import Block, Column, Paragraph, Row, Section, Table, plain
from markov.output.wording import bound_words, value_words
from markov.results import Result, Solution

_SHOWN = 4
"""References in one cell at most."""


def numerics_section(solution: Solution, chains: Sequence[ReportedChain]) -> Section:
    """Return the section on how the numbers were obtained."""
    blocks: list[Block] = [
        Paragraph(
            plain(
                "Every number of the spec is kept as an exact fraction up to the last step. A rate goes into the "
                "solution as the sum of two floating-point numbers, off by one part in 10^31 at most. Where a bound "
                "is given, the exact answer of the model lies inside it, rounding included; what has no proof is "
                "called an estimate, and no verdict rests on it."
            )
        ),
        _methods(solution),
    ]
    blocks += _second(solution, chains)
    return Section("How the numbers were obtained", tuple(blocks), "numerics")


def _methods(solution: Solution) -> Table:
    columns = (
        Column("No.", "right", 0.4),
        Column("Method", width=2.6),
        Column("Results", width=2.0),
        Column("Widest bound, relative", width=1.2),
    )
    numbers = result_numbers(solution)
    rows = []
    for method, number in methods_of(solution.results).items():
        given = [result for result in solution.results if result.value is not None and method_words(result) == method]
        places = [link(f"result-{numbers[each]}", result_words(each)) for each in given[:_SHOWN]]
        places += [plain(f"{len(given) - _SHOWN} more")] if len(given) > _SHOWN else []
        rows.append(row(str(number), method, joined(places, "; "), _widest(given), anchor=f"method-{number}"))
    return Table("methods", "Methods and what they gave", columns, tuple(rows), "methods")


def _widest(results: Sequence[Result]) -> str:
    if any(not each.is_proven for each in results):
        return "none: estimates"
    widths = [(each.relative_width or 0.0, each) for each in results]
    return bound_words(max(widths, key=lambda pair: pair[0])[1])


def _second(solution: Solution, chains: Sequence[ReportedChain]) -> list[Block]:
    found = comparisons(solution, chains[0]) if len(chains) == 1 else ()
    if not found:
        told = f"No second method was used: {why_none(solution, chains[0])}. The proven bounds stand alone."
        return [Paragraph(plain(told))]
    fewest = min(each.agreed_digits for each in found)
    least = "all digits that can be compared" if fewest >= 15 else f"{fewest} digits or more"
    told = (
        "A second method shares nothing with the first but the table of transitions: dense linear algebra in plain "
        f"floating point (LAPACK), without a bound. It agrees in {least}. Where it agrees in few, it has lost them "
        "itself by cancellation; a difference beyond the proven bound is therefore no fault of the first."
    )
    columns = (
        Column("Result", width=2.0),
        Column("Value with bound", "decimal", 1.2),
        Column("Second method", "decimal", 1.2),
        Column("Relative difference", "right", 1.0),
        Column("Digits agreed in", "right", 0.8),
    )
    rows = tuple(_compared(each) for each in found)
    return [
        Paragraph(plain(told)),
        Table("second-method", "The same results by a second method", columns, rows, "second-method"),
    ]


def _compared(each: Comparison) -> Row:
    return row(
        result_words(each.result),
        result_value(each.result),
        value_words(each.result.measure, each.other),
        "none" if each.difference == 0 else f"{each.difference:.0e}" if each.difference < 1e300 else NONE,
        str(each.agreed_digits),
    )
