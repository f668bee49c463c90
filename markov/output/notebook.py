"""A solution as an HTML fragment for notebooks."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

from markov.output.redundancy import HEADING, redundancy_grids
from markov.output.wording import (
    CAUTIONS,
    bound_words,
    size_words,
    subject_words,
    timing_words,
    unit_words,
    value_words,
)
from markov.results import Result, Solution


def solution_html(solution: Solution) -> str:
    """Return tables of targets and results, the unsaid choices and the cautions as one HTML fragment."""
    parts = [
        f"<h4>{escape(solution.title or solution.source_name)}</h4>",
        f"<p>{size_words(solution.states, solution.transitions, solution.raw_states, solution.parts)}; "
        f"a year is {float(solution.year_hours):g} h; spec {solution.sha256[:12]}; markov {solution.version}</p>",
    ]
    if solution.targets:
        rows = [
            (
                target.id,
                _words(target.result),
                f"{target.direction.replace('_', ' ')} {target.limit_text}",
                _value(target.result),
                target.verdict.replace("_", " "),
                target.why,
            )
            for target in solution.targets
        ]
        parts.append(_table(("target", "measure", "limit", "value", "verdict", "why"), rows))
    results = [(_words(result), _value(result), result.reason or bound_words(result)) for result in solution.results]
    parts.append(_table(("measure", "value", "bound"), results))
    if solution.redundancy is not None:
        parts.append(f"<h5>{HEADING}</h5>")
        for grid in redundancy_grids(solution.redundancy):
            if grid.rows:
                parts.append(_table(grid.headings, grid.rows))
            if grid.below:
                parts.append(f"<p>{escape(grid.below)}</p>")
    for heading, entries in (
        ("Choices left unsaid", solution.assumptions),
        ("Warnings", solution.warnings),
        ("Cautions", CAUTIONS),
    ):
        if entries:
            items = "".join(f"<li>{escape(entry)}</li>" for entry in entries)
            parts.append(f"<details><summary>{heading} ({len(entries)})</summary><ol>{items}</ol></details>")
    return "\n".join(parts)


def _words(result: Result) -> str:
    words = subject_words(result)
    timing = timing_words(result)
    return f"{words}, {timing}" if timing else words


def _value(result: Result) -> str:
    if result.value is None:
        return "—"
    return f"{value_words(result.measure, result.value)} {unit_words(result.unit)}".strip()


def _table(head: tuple[str, ...], rows: Sequence[tuple[str, ...]]) -> str:
    cells = "".join(f"<th>{escape(cell)}</th>" for cell in head)
    body = "".join("<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>" for row in rows)
    return f"<table><thead><tr>{cells}</tr></thead><tbody>{body}</tbody></table>"
