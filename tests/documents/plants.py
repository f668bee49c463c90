"""Plants for reports, and what a report says, as plain text."""

from __future__ import annotations

from markov.documents.numbering import labels, placed
from markov.documents.report import Report
from markov.documents.sheets import words
from markov.documents.tree import Block, Document, Items, Paragraph, Section, Span, Table

PUMPS = """
title: Wash water
reference: {document: WW-1, revision: C, checked by: nobody}
parameters:
  pump_failures: {value: 100 per million hours, source: invented, uncertainty: {failures: 7, exposure: 70000 h}}
  mending: 20 h
  covered: {value: 95 %, source: invented, uncertainty: {low: 90 %, high: 99 %}}
  spare_word: 3 h
units:
  pump: {failure_rate: pump_failures, repair_time: mending}
groups:
  pumps:
    members: [{unit: pump, count: 2}]
    redundancy: cold_standby
    switchover: {coverage: covered, uncovered: {outcome: manual_takeover, time: 1 h}}
crews:
  fitters: {size: 1, repairs: [pump]}
system: pumps
mission: {time: 1000 h}
targets:
  - {id: W-1, measure: steady_state_availability, at_least: 0.9999}
  - {id: W-2, measure: failures_per_year, at_most: 0.01}
"""

HATCHES = """
title: Hatches
units:
  hatch: {failure_rate: 1e-5 /h, repair_time: 5 h, detected: 50 %}
groups:
  hatches: {members: [{unit: hatch, count: 2}], redundancy: active}
tests:
  trial: {of: hatch, interval: 500 h}
system: hatches
mission: {time: 1000 h}
targets: [{id: H-1, measure: pfd_average, at_most: 1e-3}]
"""

ALIKE = """
title: Two like pairs
units: {fan: {failure_rate: 1e-4 /h, repair_time: 10 h}}
groups:
  left: {members: [{unit: fan, count: 2}], redundancy: active}
  right: {members: [{unit: fan, count: 2}], redundancy: active}
system: {any_of: [left, right]}
"""


def separate(groups: int) -> str:
    """A plant of groups that share nothing and differ, beyond what is solved whole."""
    units = "\n".join(
        f"  unit {number}: {{failure_rate: {number + 1}e-6 /h, repair_time: 9 h}}" for number in range(groups)
    )
    listed = "\n".join(
        f"  group {number}: {{members: [{{unit: unit {number}, count: 3}}], redundancy: active}}"
        for number in range(groups)
    )
    named = ", ".join(f"group {number}" for number in range(groups))
    return f"title: Apart\nunits:\n{units}\ngroups:\n{listed}\nsystem: {{all_of: [{named}]}}\nmission: {{time: 1 y}}\n"


def table(report: Report, name: str) -> Table:
    """The table of that name."""
    (found,) = (each for each in report.document.tables() if each.name == name)
    return found


def rows(report: Report, name: str) -> list[dict[str, str]]:
    """The rows of a table as plain text, by the headings of its columns."""
    called = labels(placed(report.document))
    found = table(report, name)
    headings = [column.heading for column in found.columns]
    return [dict(zip(headings, (words(cell, called) for cell in row.cells), strict=True)) for row in found.rows]


def spans(document: Document) -> list[Span]:
    """Every span of a document in reading order."""
    found: list[Span] = []

    def walk(blocks: tuple[Block, ...]) -> None:
        for block in blocks:
            if isinstance(block, Section):
                walk(block.blocks)
            elif isinstance(block, Paragraph):
                found.extend(block.text)
            elif isinstance(block, Items):
                found.extend(span for item in block.items for span in item)
            elif isinstance(block, Table):
                found.extend(span for row in block.rows for cell in row.cells for span in cell)

    walk(document.blocks)
    return found


def whole_text(document: Document) -> str:
    """All words of a document."""
    return "".join(span.text for span in spans(document))
