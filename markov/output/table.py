"""A solution as tables for a person at a terminal."""

from __future__ import annotations

import io

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from markov.output.redundancy import HEADING, Grid, listed_measures, redundancy_grids
from markov.output.wording import (
    CAUTIONS,
    bound_words,
    measure_words,
    size_words,
    timing_words,
    unit_words,
    value_words,
)
from markov.results import Check, Result, Solution, TargetResult
from markov.states.generation import WHAT_HELPS

#: System measures that the table always holds; the JSON holds every measure.
_ALWAYS = {
    "steady_state_availability",
    "steady_state_unavailability",
    "failures_per_year",
    "downtime_per_year",
    "mean_time_to_first_failure",
    "mean_up_time",
    "mean_down_time",
    "unreliability",
    "reliability",
    "mean_unavailability",
    "expected_failures",
    "repairs_per_year",
    "starts_per_year",
    "crew_utilisation",
    "time_without_redundancy",
    "gain_over_single_unit",
    "gain_over_independent_blocks",
    "hazardous_events_per_year",
    "spurious_failures_per_year",
}

#: Measures that matter where something is tested; elsewhere they are the long-run values under another name.
_WITH_TESTS = {"pfd_average", "pfd_peak"}

_VERDICT_STYLE = {"met": "bold green", "cannot_occur": "bold green", "missed": "bold red", "undecided": "bold yellow"}


def print_solution(solution: Solution, console: Console) -> None:
    """Print a solution on a console."""
    console.print(Text(solution.title or solution.source_name, style="bold"))
    console.print(
        f"{size_words(solution.states, solution.transitions, solution.raw_states, solution.parts)}; a year is "
        f"{float(solution.year_hours):g} h; spec {solution.sha256[:12]}; markov {solution.version}",
        style="dim",
    )
    if solution.targets:
        _heading(console, "Targets")
        console.print(_target_table(solution.targets))
    _heading(console, "Results")
    asked = {target.result for target in solution.targets}
    elsewhere = listed_measures(solution.redundancy)
    tested = any(each.measure == "tests_per_year" for each in solution.results)
    shown = [
        each for each in solution.results if each in asked or (_matters(each, tested) and not _is_in(each, elsewhere))
    ]
    console.print(_result_table(tuple(shown)))
    console.print(
        Padding(
            "The last column is proven: the exact answer of the model is no farther from the value, relative to it.",
            (0, 0, 0, 2),
        ),
        style="dim",
    )
    if solution.redundancy is not None:
        _heading(console, HEADING)
        for number, grid in enumerate(redundancy_grids(solution.redundancy)):
            if number:
                console.print()
            _print_grid(console, grid)
    _list(console, "Choices left unsaid", solution.assumptions)
    _list(console, "Warnings", solution.warnings)
    _list(console, "Cautions", CAUTIONS)


def print_check(check: Check, console: Console) -> None:
    """Print what `markov check` found on a console."""
    console.print(Text(check.title or check.source_name, style="bold"))
    size = check.size
    told = size_words(size.states, size.transitions, size.raw_states, size.parts)
    console.print(
        f"{told if size.is_exact else f'at most {told}'}; spec {check.sha256[:12]}; markov {check.version}",
        style="dim",
    )
    console.print(f"Solving takes about {size.memory_bytes / 1e6:,.0f} MB of memory at its peak.")
    if not size.is_within_limit:
        console.print(f"This is more than is generated; {WHAT_HELPS}.")
    console.print("The spec is in order; nothing was solved.")
    _list(console, "Choices left unsaid", check.assumptions)
    _list(console, "Warnings", check.warnings)


def solution_text(solution: Solution, width: int = 110) -> str:
    """Return the tables as plain text of a fixed width."""
    stream = io.StringIO()
    print_solution(solution, Console(file=stream, width=width, color_system=None, highlight=False))
    return "\n".join(line.rstrip() for line in stream.getvalue().splitlines()) + "\n"


def _matters(result: Result, tested: bool) -> bool:
    if result.measure in _WITH_TESTS and tested:
        return True
    return result.measure in _ALWAYS or result.of is not None or result.state is not None


def _heading(console: Console, text: str) -> None:
    console.print()
    console.print(Text(text, style="bold"))


def _target_table(targets: tuple[TargetResult, ...]) -> Table:
    table = _plain_table("", "target", "measure", "limit", "value", "verdict", "why")
    for column in table.columns[4:6]:
        column.no_wrap = True
    for target in targets:
        table.add_row(
            "",
            Text(target.id),
            Text(_measure_cell(target.measure, target.of, timing_words(target.result), target.result.state)),
            Text(f"{target.direction.replace('_', ' ')} {target.limit_text}"),
            Text(_value_cell(target.result)),
            Text(target.verdict.replace("_", " "), style=_VERDICT_STYLE[target.verdict]),
            Text(target.why),
        )
    return table


def _result_table(results: tuple[Result, ...]) -> Table:
    table = _plain_table("", "measure", "value", "bound, relative")
    table.columns[2].justify = "right"
    table.columns[2].no_wrap = True
    for result in results:
        table.add_row(
            "",
            Text(_measure_cell(result.measure, result.of, timing_words(result), result.state)),
            Text(_value_cell(result)),
            Text(bound_words(result) if result.reason is None else result.reason),
        )
    return table


def _is_in(result: Result, measures: frozenset[str]) -> bool:
    """Tell whether a result stands in another section already."""
    return result.of is None and result.at_hours is None and result.measure in measures


def _print_grid(console: Console, grid: Grid) -> None:
    if grid.rows:
        table = _plain_table("", *grid.headings)
        for column in table.columns[2:]:
            column.justify = "right"
        for row in grid.rows:
            table.add_row("", *(Text(cell) for cell in row))
        console.print(table)
    if grid.below:
        console.print(Padding(Text(grid.below), (0, 0, 0, 2)), style="dim")


def _plain_table(*headings: str) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for heading in headings:
        table.add_column(heading, overflow="fold")
    return table


def _measure_cell(measure: str, of: str | None, timing: str, state: str | None = None) -> str:
    words = measure_words(measure)
    if of is not None:
        words += f" of {of}"
    if state is not None:
        words += f" of [{state}]"
    return f"{words}, {timing}" if timing and timing != "long run" else words


def _value_cell(result: Result) -> str:
    if result.value is None:
        return "—"
    unit = unit_words(result.unit)
    value = value_words(result.measure, result.value)
    return f"{value} {unit}".rstrip() if not unit.startswith("/") else f"{value}{unit}"


def _list(console: Console, heading: str, entries: tuple[str, ...]) -> None:
    if not entries:
        return
    _heading(console, heading)
    table = Table.grid(padding=(0, 1, 0, 0))
    table.add_column(justify="right", style="dim")
    table.add_column(overflow="fold")
    for number, entry in enumerate(entries, 1):
        table.add_row(f"  {number}", Text(entry))
    console.print(table)
