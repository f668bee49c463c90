"""The values of a state diagram: what is drawn, free of any layout or file format.

Words: a state is *up*, *degraded* (it still delivers) or *down*; it is *final* if nothing leads out of it; its *level*
is the number of failed units, and every level is one column of the picture. A *fault* arrow leads to more failed
units, a *restoration* arrow to fewer; an *instant* arrow is taken at a fixed time, with a chance in place of a rate.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

from markov.errors import UsageError

Condition = Literal["up", "degraded", "down", "mixed"]
ArrowKind = Literal["fault", "restoration", "instant"]
Columns = Literal["failed units", "steps"]
Labels = Literal["formulas", "values", "both"]

_CONDITIONS: tuple[str, ...] = get_args(Condition)
_KINDS: tuple[str, ...] = get_args(ArrowKind)


@dataclass(frozen=True)
class DiagramNode:
    """One state of the diagram, or one box of folded states.

    Parameters
    ----------
    number
        The number of the state, the same as in every table; unique in the diagram.
    lines
        Short text under the number, a line each. Any characters are allowed; every format escapes them.
    condition
        "up", "degraded" or "down"; "mixed" for a box that holds states of several conditions.
    initial, final
        Whether the system starts here; whether nothing leads out of it.
    level
        Number of failed units, 0 or more: the column.
    holds
        The numbers of the states in a folded box; empty for a single state.
    top_level
        The greatest number of failed units in a column of several folded levels; None for one level.
    elsewhere
        The page on which the state stands in full, where this is only a reference to it; 0 for the state itself.
    """

    number: int
    lines: tuple[str, ...]
    condition: Condition
    initial: bool = False
    final: bool = False
    level: int = 0
    holds: tuple[int, ...] = ()
    top_level: int | None = None
    elsewhere: int = 0

    def __post_init__(self) -> None:
        if self.condition not in _CONDITIONS:
            raise UsageError(
                f"state {self.number}: condition {self.condition!r}; expected one of {_listed(_CONDITIONS)}"
            )
        if self.level < 0:
            raise UsageError(f"state {self.number}: level {self.level}; expected the number of failed units, 0 or more")
        if self.top_level is not None and self.top_level < self.level:
            raise UsageError(f"state {self.number}: top level {self.top_level}; expected level {self.level} or more")


@dataclass(frozen=True)
class DiagramArrow:
    """One transition between two different states.

    Parameters
    ----------
    source, target
        Numbers of the states.
    label
        The rate as a formula in Unicode, such as ``2·λ(drive)·c·(1−q)``; what happens, for an instant.
    kind
        "fault", "restoration" or "instant".
    value
        Least and greatest rate per hour (chance, for an instant) over the states in a folded box, the same for a single
        state; None where it is not told.
    """

    source: int
    target: int
    label: str
    kind: ArrowKind
    value: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        if self.kind not in _KINDS:
            raise UsageError(
                f"arrow {self.source} → {self.target}: kind {self.kind!r}; expected one of {_listed(_KINDS)}"
            )
        if self.source == self.target:
            raise UsageError(
                f"arrow {self.source} → {self.target} leads back to its own state; "
                "expected two different states: leave it out, a chain in continuous time has no self-loops"
            )


@dataclass(frozen=True)
class LegendEntry:
    """One symbol of the rate formulas: the symbol, what it means, its value with unit of measure as text."""

    symbol: str
    meaning: str
    value: str


@dataclass(frozen=True)
class StateDiagram:
    """A state diagram, ready to be laid out.

    Parameters
    ----------
    title
        Heading of the picture.
    nodes, arrows
        The states and the transitions. Several arrows of one kind between the same two states are drawn as one arrow
        that carries the sum of their formulas, a line each.
    subtitle
        Lines under the heading: document reference, revision, spec hash, program version.
    legend
        The symbols used in the formulas.
    alt_text
        What a reader who does not see the picture is told; a count of states and arrows where it is left out.
    remarks
        Sentences to be printed in the picture, such as how states were folded.
    columns
        What the level of a state counts: failed units, or steps from the start where units are not known.
    labels
        What stands on the arrows: formulas, values per hour, or both.
    is_page
        Whether it is one page of several, which need not show where the system starts.

    Raises
    ------
    UsageError
        No state or no initial state, a number used twice, an arrow to a state that is not there, an arrow out of a
        final state.
    """

    title: str
    nodes: tuple[DiagramNode, ...]
    arrows: tuple[DiagramArrow, ...]
    subtitle: tuple[str, ...] = ()
    legend: tuple[LegendEntry, ...] = ()
    alt_text: str = ""
    remarks: tuple[str, ...] = ()
    columns: Columns = "failed units"
    labels: Labels = "formulas"
    is_page: bool = False

    def __post_init__(self) -> None:
        if not self.nodes:
            raise UsageError("the diagram has no state; expected at least one")
        by_number: dict[int, DiagramNode] = {}
        for node in self.nodes:
            if node.number in by_number:
                raise UsageError(
                    f"state number {node.number} is used twice; expected a number of its own for each state"
                )
            by_number[node.number] = node
        if not self.is_page and not any(node.initial for node in self.nodes):
            raise UsageError("no state of the diagram is marked initial; expected at least one")
        for arrow in self.arrows:
            for number in (arrow.source, arrow.target):
                if number not in by_number:
                    raise UsageError(
                        f"arrow {arrow.source} → {arrow.target}: there is no state {number} in the diagram"
                    )
            if by_number[arrow.source].final:
                raise UsageError(
                    f"arrow {arrow.source} → {arrow.target} leads out of a final state; "
                    f"expected none: state {arrow.source} is not final, or the arrow is to be left out"
                )

    def described(self) -> str:
        """Return the alternative text: the one given, else a count of what is drawn."""
        if self.alt_text:
            return self.alt_text
        own = [node for node in self.nodes if not node.elsewhere]
        counts = [f"{count} {word}" for word in _CONDITIONS if (count := sum(node.condition == word for node in own))]
        finals = sum(node.final for node in own)
        if finals:
            counts.append(f"{finals} of them final")
        faults, restorations, instants = (sum(arrow.kind == kind for arrow in self.arrows) for kind in _KINDS)
        word = "boxes" if any(node.holds for node in own) else "states"
        at_once = f", {instants} arrows taken at fixed instants" if instants else ""
        named = {"formulas": "formula", "values": "value", "both": "formula and value"}[self.labels]
        return (
            f"State diagram: {len(own)} {word} ({', '.join(counts)}), ordered from left to right by the number "
            f"of {self.columns}; {faults} fault arrows and {restorations} restoration arrows{at_once}, "
            f"each with its {named}."
        )


def value_text(value: tuple[float, float], kind: ArrowKind) -> str:
    """Return a value with its unit of measure: ``0.25/h``, ``1e-05 to 2e-05/h``; a chance for an instant."""
    least, most = (f"{each:.4g}" for each in value)
    unit = "" if kind == "instant" else "/h"
    return f"{least}{unit}" if least == most else f"{least} to {most}{unit}"


def arrow_lines(arrows: Sequence[DiagramArrow], labels: Labels) -> tuple[str, ...]:
    """Return what stands on a line that several parallel arrows of one kind share, a text for each line."""
    kind = arrows[0].kind
    formulas = [arrow.label for arrow in arrows if arrow.label.strip()]
    joined = [
        text if place == 0 else f"{'or' if kind == 'instant' else '+'} {text}" for place, text in enumerate(formulas)
    ]
    known = [arrow.value for arrow in arrows if arrow.value is not None]
    if labels == "formulas" or len(known) < len(arrows) or kind == "instant":
        return tuple(joined)
    total = value_text((sum(least for least, _ in known), sum(most for _, most in known)), kind)
    return (total,) if labels == "values" else (*joined, f"= {total}")


def _listed(words: tuple[str, ...]) -> str:
    return ", ".join(words)
