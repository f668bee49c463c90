"""The assumptions of a report: what the spec leaves unsaid and what the method takes for granted, with effects."""

from __future__ import annotations

from collections.abc import Iterator

from markov.documents.cells import row
from markov.documents.tree import Block, Column, Paragraph, Section, Table, Text, plain
from markov.documents.what_if import WhatIf
from markov.model import Model
from markov.results import Solution


def assumptions_section(model: Model, solution: Solution, what_if: WhatIf) -> Section:
    """Return the section on assumptions.

    Parameters
    ----------
    model : Model
    solution : Solution
    what_if : WhatIf
        Tells the effect of each choice left unsaid.
    """
    blocks: list[Block] = []
    if solution.assumptions:
        blocks.append(Paragraph(plain(_about(what_if))))
        columns = (
            Column("No.", "right", 0.35),
            Column("Left unsaid, taken as", width=2.2),
            Column("Effect if it is otherwise", width=2.8),
        )
        rows = tuple(
            row(str(number), choice, what_if.effect(choice), anchor=f"assumption-{number}")
            for number, choice in enumerate(solution.assumptions, 1)
        )
        blocks.append(Table("assumptions", "Choices that the spec leaves unsaid", columns, rows, "assumptions-unsaid"))
    else:
        blocks.append(Paragraph(plain("The spec leaves nothing unsaid that is able to change a result.")))
    columns = (
        Column("No.", "right", 0.35),
        Column("Taken for granted by the method", width=2.6),
        Column("Effect if it does not hold", width=2.4),
    )
    rows = tuple(
        row(f"M{number}", taken, effect, anchor=f"ground-{number}")
        for number, (taken, effect) in enumerate(_grounds(model), 1)
    )
    blocks.append(Table("grounds", "What the method takes for granted", columns, rows, "assumptions-method"))
    return Section("Assumptions", tuple(blocks), "assumptions")


def _about(what_if: WhatIf) -> str:
    told = (
        "Each choice is numbered; transitions refer to these numbers. The effect says what becomes of the results "
        "where the plant differs from the choice taken. "
    )
    if what_if.solves:
        told += (
            "Where numbers are given, the plant was solved once more with only that choice replaced by the example "
            "named; the example is ours and no datum of the plant, and effects of several choices do not add up. "
            "Where the changed chain would be large, or enough of them have been solved, words stand alone. "
        )
    else:
        told += f"No numbers are given: {what_if.why_not}. "
    return told.rstrip()


def _grounds(model: Model) -> Iterator[tuple[str | Text, str | Text]]:
    yield (
        "Failure rates are constant in time, whatever the age of a unit.",
        "Units that wear out fail less often early and more often late than stated; long-run values then mislead.",
    )
    yield (
        "Times last by exponential laws of the stated mean, or by the stages and spreads that the spec gives.",
        "Long-run values depend on the laws where crews, spares or takeovers compete; values at a time depend on "
        "them more.",
    )
    if not model.explicit:
        yield (
            "Beyond crews, spares, common causes, load and phases as stated, units fail and are repaired "
            "independently.",
            "What else they share makes joint faults more likely: results are better than the plant.",
        )
        yield (
            "A repair makes a unit as good as before and does no harm to others.",
            "Faults by maintenance come on top: results are better than the plant.",
        )
        yield (
            "The failure modes, units and events of the spec are all that matter to the system.",
            "What was forgotten is not in the numbers: results are better than the plant.",
        )
    else:
        yield (
            "The states and transitions written by hand are complete and right.",
            "A transition forgotten or misplaced changes results in either direction, unseen by any check.",
        )
    yield (
        "The values of the spec hold for this plant, its environment and its maintenance.",
        "Results move with them; the trace tells which of them move which result, and by how much.",
    )
