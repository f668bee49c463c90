"""The report on a plant: everything that a safety case needs from one spec, as one neutral document."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from markov.documents.arrow_reasons import ArrowReasons
from markov.documents.assumptions import assumptions_section
from markov.documents.cautions import cautions_section
from markov.documents.chains import ReportedChain, chains_of
from markov.documents.conditions import conditions_section
from markov.documents.numerics import numerics_section
from markov.documents.opening import first_paragraph
from markov.documents.outcomes import result_sheet, results_section, verdict_section
from markov.documents.parameters import data_section
from markov.documents.plant import plant_section
from markov.documents.sheets import Sheet
from markov.documents.spec_lines import SpecLines, lines_of
from markov.documents.title_block import facts_of, title_of
from markov.documents.trace import influences_of, trace_section
from markov.documents.transition_table import ChainTables, chain_section
from markov.documents.tree import Document, Paragraph, Section
from markov.documents.what_if import WhatIf
from markov.documents.written_places import WrittenPlaces
from markov.evaluation import solve_model
from markov.model import Model
from markov.results import Solution


@dataclass(frozen=True)
class Report:
    """A report, before it becomes a file.

    Attributes
    ----------
    document : Document
    solution : Solution
        What it reports.
    sheets : tuple of Sheet
        Tables with every row and digit, in place of those of the document that have the same name, for plain text.
    """

    document: Document
    solution: Solution
    sheets: tuple[Sheet, ...]


def make_report(
    model: Model,
    times: Sequence[Fraction] = (),
    *,
    lines: SpecLines | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Report:
    """Solve a model and write the report on it.

    Parameters
    ----------
    model : Model
    times : sequence of Fraction
        Times in hours to answer measures at, beside the mission time.
    lines : SpecLines, optional
        Where the spec stands in its file; found from the file if left out.
    progress : callable
        Told what is being done.

    Raises
    ------
    TooLarge
        The chain would be too large.
    """
    solution = solve_model(model, times, progress=progress)
    progress("listing the chain")
    return report_on(model, solution, chains_of(model), lines=lines, progress=progress)


def report_on(
    model: Model,
    solution: Solution,
    chains: Sequence[ReportedChain],
    *,
    lines: SpecLines | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Report:
    """Write the report on a model that is solved.

    Parameters
    ----------
    model : Model
    solution : Solution
        Of this model.
    chains : sequence of ReportedChain
        The chains that it was solved by.
    lines : SpecLines, optional
    progress : callable
    """
    lines = lines_of(model) if lines is None else lines
    places = WrittenPlaces(model, lines)
    reasons = [ArrowReasons(model, chain.space, solution.assumptions, lines) for chain in chains]
    tables = {each.number: ChainTables(model, each, why) for each, why in zip(chains, reasons, strict=True)}
    whole = chains[0].space if len(chains) == 1 else None
    what_if = WhatIf(model, solution, is_scheduled=chains[0].is_scheduled, progress=progress)
    progress("which parameter moves which result")
    influences = influences_of(model, solution, reasons)
    blocks = (
        Section("What this is about", (Paragraph(first_paragraph(model, solution, whole)),), "about"),
        verdict_section(solution),
        plant_section(model),
        data_section(model, places),
        assumptions_section(model, solution, what_if),
        conditions_section(model, places),
        results_section(model, solution, whole),
        trace_section(model, solution, places, influences),
        numerics_section(solution, chains),
        chain_section(model, solution, tables),
        cautions_section(model, solution),
    )
    sheets = (result_sheet(solution), *(sheet for each in tables.values() for sheet in each.sheets()))
    return Report(Document(title_of(model), facts_of(model, solution), blocks), solution, sheets)
