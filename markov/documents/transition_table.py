"""The chain of a report: its states, every transition with cause and formula, what was merged."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.documents.arrow_reasons import ArrowReasons
from markov.documents.cells import NONE, code, counted, every_digit, exact_words, joined, link, linked_numbers, row
from markov.documents.chains import ReportedChain
from markov.documents.report_pictures import chain_figures
from markov.documents.sheets import Lines, Sheet
from markov.documents.tree import Block, Column, Paragraph, Row, Section, Span, Table, plain
from markov.model import Model
from markov.output.wording import size_words
from markov.results import Solution
from markov.states import Arrows, GeneratedSpace
from markov.states.instants import told

#: Transitions that a table of the document holds at most; a file of plain text holds all of them.
LISTED_UP_TO = 2_000


@dataclass(frozen=True)
class ListedArrow:
    """A transition: of one kind, from one state to another.

    Attributes
    ----------
    source, target, kind, multiple : int
    when : str
        Phase or instant in which it holds; empty where it always does.
    is_chance : bool
        Whether its value is the chance of a fixed instant, and no rate.
    """

    source: int
    target: int
    kind: int
    multiple: int
    when: str = ""
    is_chance: bool = False


class ChainTables:
    """Tables of one chain.

    Parameters
    ----------
    model : Model
    chain : ReportedChain
    reasons : ArrowReasons
        Of this chain.
    """

    def __init__(self, model: Model, chain: ReportedChain, reasons: ArrowReasons) -> None:
        self.model = model
        self.chain = chain
        self.reasons = reasons
        self._formulas: dict[tuple[int, int], tuple[str, Fraction]] = {}

    @cached_property
    def arrows(self) -> tuple[ListedArrow, ...]:
        """Every transition that changes the state, alike ones between the same states counted together."""
        return tuple(self._every_arrow())

    @cached_property
    def count(self) -> int:
        """Number of transitions to be listed."""
        return len(self.arrows)

    @property
    def is_cut(self) -> bool:
        """Whether the table of the document holds only the first of the transitions."""
        return self.count > LISTED_UP_TO

    def _every_arrow(self) -> Iterator[ListedArrow]:
        space = self.chain.space
        if not isinstance(space, GeneratedSpace) or space.timetable is None:
            for source, target, kind, multiple in _added(space.arrows):
                yield ListedArrow(source, target, kind, multiple)
            return
        by_phase = [{each[:3]: each[3] for each in _added(arrows)} for arrows in space.every_arrows]
        for phase, found in enumerate(by_phase):
            for (source, target, kind), multiple in found.items():
                holders = [
                    number for number, each in enumerate(by_phase) if each.get((source, target, kind)) == multiple
                ]
                if holders[0] == phase:
                    when = "" if len(holders) == len(by_phase) else self._phases(holders)
                    yield ListedArrow(source, target, kind, multiple, when)
        for jumps, actions in zip(space.jumps, space.timetable.instants, strict=True):
            when = told(actions, space.plan.model)
            for source, target, kind, multiple in _added(jumps):
                yield ListedArrow(source, target, kind, multiple, when, True)

    def _phases(self, holders: Sequence[int]) -> str:
        return f"in {', '.join(self.model.phases[number].name for number in holders)}"

    def formula(self, arrow: ListedArrow) -> tuple[str, Fraction]:
        """Return formula and exact value of a transition."""
        key = (arrow.kind, arrow.multiple)
        if key not in self._formulas:
            kinds = self.chain.space.kinds
            rate = kinds.rates.rates[kinds.kinds[arrow.kind].rate]
            self._formulas[key] = rate.formula(arrow.multiple), rate.exact * arrow.multiple
        return self._formulas[key]

    # --- which rows the document holds ------------------------------------------------------------------------------

    @cached_property
    def listed(self) -> tuple[ListedArrow, ...]:
        """The transitions of the document's table, by states; where they are too many, the most telling."""
        if not self.is_cut:
            return tuple(sorted(self.arrows, key=_by_states))
        weight = self._frequencies
        order = (
            np.lexsort((np.arange(self.count), -weight, ~self._failing)) if weight is not None else self._failing_first
        )
        return tuple(self.arrows[place] for place in order[:LISTED_UP_TO].tolist())

    @cached_property
    def _failing(self) -> NDArray[np.bool_]:
        up = self.chain.space.up
        source = np.array([arrow.source for arrow in self.arrows], np.int64)
        target = np.array([arrow.target for arrow in self.arrows], np.int64)
        return np.asarray(up[source] & ~up[target])

    @property
    def _failing_first(self) -> NDArray[np.intp]:
        return np.argsort(~self._failing, kind="stable")

    @cached_property
    def _frequencies(self) -> NDArray[np.float64] | None:
        """How often an hour each transition is passed in the long run, shape (arrows,); None where not known."""
        shares = self.chain.long_run
        if shares is None:
            return None
        return np.array([float(self.formula(arrow)[1]) * float(shares[arrow.source]) for arrow in self.arrows])

    @cached_property
    def covered(self) -> float | None:
        """Share of the failure frequency that the listed transitions into failure make; None where it is not known."""
        weight = self._frequencies
        if weight is None or not self.is_cut:
            return None
        failing = np.sort(weight[self._failing])[::-1]
        total = float(failing.sum())
        return None if total == 0 else float(failing[:LISTED_UP_TO].sum()) / total

    # --- tables -----------------------------------------------------------------------------------------------------

    def transitions(self) -> Table:
        """Return the table of transitions, as far as the document holds it."""
        scheduled = self.chain.is_scheduled
        columns = [
            Column("From", "right", 0.45),
            Column("To", "right", 0.45),
            Column("Cause", width=2.2),
            Column("Formula", width=1.9),
            Column("Value", "decimal", 0.8),
            Column("Unit", width=0.5),
            *([Column("When", width=1.0)] if scheduled else []),
            Column("Assumptions", width=0.9),
            Column("Lines", width=0.6),
        ]
        caption = f"Transitions of {self.chain.called}"
        if self.is_cut:
            caption += f": {LISTED_UP_TO:,} of {self.count:,}, by their part in the failure frequency"
        rows = tuple(self._row(arrow) for arrow in self.listed)
        return Table(self._name("transitions"), caption, tuple(columns), rows, self._name("transitions"))

    def _row(self, arrow: ListedArrow) -> Row:
        formula, exact = self.formula(arrow)
        chain, reasons = self.chain, self.reasons
        cells = [
            link(chain.state_anchor(arrow.source), str(arrow.source)),
            link(chain.state_anchor(arrow.target), str(arrow.target)),
            plain(chain.space.kinds.kinds[arrow.kind].cause),
            code(formula),
            plain(exact_words(exact)),
            plain("chance" if arrow.is_chance else "/h"),
            *([plain(arrow.when or "always")] if chain.is_scheduled else []),
            linked_numbers("assumption", reasons.assumptions(arrow.source, arrow.target, arrow.kind)),
            plain(", ".join(map(str, reasons.lines(arrow.kind))) or NONE),
        ]
        return row(*cells)

    def states(self) -> Table:
        """Return the table of states: all of them, or those that the listed transitions name."""
        space, shares = self.chain.space, self.chain.long_run
        wanted: Sequence[int] = range(space.size)
        caption = f"States of {self.chain.called}"
        if self.is_cut:
            ends = {state for arrow in self.listed for state in (arrow.source, arrow.target)}
            wanted = sorted(ends | {state for state, _ in space.start})
            caption += f": {len(wanted):,} of {space.size:,}, those that the transitions listed here name"
        columns = [
            Column("State", "right", 0.4),
            Column("What it is", width=3.2),
            Column("Condition", width=0.9),
            *([Column("Long-run share", "decimal", 0.9)] if shares is not None else []),
        ]
        rows = []
        for state in wanted:
            share = [exact_words(Fraction(float(shares[state])))] if shares is not None else []
            rows.append(
                row(
                    str(state),
                    space.label(state),
                    self._condition(state),
                    *share,
                    anchor=self.chain.state_anchor(state),
                )
            )
        return Table(self._name("states"), caption, tuple(columns), tuple(rows), self._name("states"))

    @cached_property
    def _conditions(self) -> tuple[str, ...]:
        space = self.chain.space
        leaves = set(space.arrows.source[space.arrows.moving].tolist()) | {arrow.source for arrow in self.arrows}
        starts = {state for state, _ in space.start}
        degraded = space.failed_items > 0 if isinstance(space, GeneratedSpace) else space.capacity(None) < 1
        found = []
        for state, (up, reduced) in enumerate(zip(space.up.tolist(), degraded.tolist(), strict=True)):
            told = ("up, degraded" if reduced else "up") if up else "down"
            told += ", never left" if state not in leaves else ""
            found.append(f"{told}; starts here" if state in starts else told)
        return tuple(found)

    def _condition(self, state: int) -> str:
        return self._conditions[state]

    def merged(self) -> Table | None:
        """Return the table of groups that were merged because they are alike; None where there are none."""
        space = self.chain.space
        if not isinstance(space, GeneratedSpace):
            return None
        islands = [[space.plan.islands[island].name for island in alike] for alike in space.classes]
        islands += [
            [layout.nodes[number].name for number in alike]
            for layout, chart in zip(space.plan.islands, space.charts, strict=True)
            for alike in chart.alike
        ]
        if not islands:
            return None
        columns = (Column("Stands for all"), Column("Merged with it, being alike", width=3.0))
        rows = tuple(row(code(alike[0]), joined(code(name) for name in alike[1:])) for alike in islands)
        return Table(self._name("merged"), "Groups that are alike, merged exactly", columns, rows, self._name("merged"))

    def sheets(self) -> tuple[Sheet, ...]:
        """Return states and transitions in full, with every digit, for files of plain text."""
        return (
            Sheet(
                self._name("states"),
                f"States of {self.chain.called}",
                ("State", "What it is", "Condition", "Long-run share"),
                self._state_lines,
            ),
            Sheet(
                self._name("transitions"),
                f"Transitions of {self.chain.called}",
                ("From", "To", "Cause", "Formula", "Value", "Unit", "When", "Assumptions", "Lines"),
                self._arrow_lines,
            ),
        )

    def _state_lines(self) -> Lines:
        shares = self.chain.long_run
        for state in range(self.chain.space.size):
            share = "" if shares is None else every_digit(float(shares[state]))
            yield str(state), self.chain.space.label(state), self._condition(state), share

    def _arrow_lines(self) -> Lines:
        for arrow in sorted(self.arrows, key=_by_states):
            formula, exact = self.formula(arrow)
            numbers = self.reasons.assumptions(arrow.source, arrow.target, arrow.kind)
            yield (
                str(arrow.source),
                str(arrow.target),
                self.chain.space.kinds.kinds[arrow.kind].cause,
                formula,
                every_digit(exact),
                "chance" if arrow.is_chance else "/h",
                arrow.when,
                " ".join(map(str, numbers)),
                " ".join(map(str, self.reasons.lines(arrow.kind))),
            )

    def _name(self, table: str) -> str:
        return f"{table}{self.chain.suffix}"


def _by_states(arrow: ListedArrow) -> tuple[bool, str, int, int, int]:
    return arrow.is_chance, arrow.when if arrow.is_chance else "", arrow.source, arrow.target, arrow.kind


def _added(arrows: Arrows) -> Iterator[tuple[int, int, int, int]]:
    """Yield source, target, kind and multiple of what changes the state, alike ones between two states added up."""
    moving = arrows.moving
    found: dict[tuple[int, int, int], int] = {}
    columns = (each[moving].tolist() for each in (arrows.source, arrows.target, arrows.kind, arrows.multiple))
    for source, target, kind, multiple in zip(*columns, strict=True):
        key = (source, target, kind)
        found[key] = found.get(key, 0) + multiple
    for (source, target, kind), multiple in found.items():
        yield source, target, kind, multiple


# ------------------------------------------------------------------------------------------------------------ section


def chain_section(model: Model, solution: Solution, tables: Mapping[int, ChainTables]) -> Section:
    """Return the section on the chain: what was made of the spec, its states, its transitions."""
    blocks: list[Block] = [Paragraph(plain(_size(solution)))]
    if len(tables) == 1:
        for each in tables.values():
            blocks += _of_one(model, each)
    else:
        for each in tables.values():
            blocks.append(
                Section(f"Part {each.chain.number}", tuple(_of_one(model, each)), f"part-{each.chain.number}")
            )
    return Section("The chain", tuple(blocks), "chain")


def _size(solution: Solution) -> str:
    told = size_words(solution.states, solution.transitions, solution.raw_states, solution.parts)
    return (
        f"The chain that was solved has {told}. A transition of this count joins two states; in the tables it is "
        "split by cause, so that each row has one event, one formula and one value. What changes no state, such as a "
        "start attempt that is only counted, has no row."
    )


def _of_one(model: Model, tables: ChainTables) -> Iterator[Block]:
    chain = tables.chain
    figures = chain_figures(model, chain)
    yield from figures
    if not figures:
        yield Paragraph(plain("This chain is too large to be drawn; the tables stand for it."))
    merged = tables.merged()
    if merged is not None:
        yield Paragraph(
            plain(
                "Groups that are alike in every number and in what the system needs of them are not told apart: a "
                "state says how many of them are in which condition. This changes no result."
            )
        )
        yield merged
    if tables.is_cut:
        yield Paragraph(_what_is_cut(tables), note=True)
    elif chain.is_scheduled:
        yield Paragraph(plain("At fixed instants the chain jumps; such a row has a chance in place of a rate."))
    yield tables.states()
    yield tables.transitions()


def _what_is_cut(tables: ChainTables) -> tuple[Span, ...]:
    told = f"{counted(tables.count, 'transition')} are more than a reader follows. "
    if tables.covered is None:
        told += f"The table holds {LISTED_UP_TO:,} of them, those that take the system down first. "
    else:
        told += (
            f"The table holds {LISTED_UP_TO:,} of them, those that take the system down first, by how often they are "
            f"passed in the long run; they make {math.floor(1e4 * tables.covered) / 100:g} % of the failure frequency. "
        )
    told += "Nothing was left out of the solution, and the same report written as .csv or .zip holds every row."
    return (Span(told),)
