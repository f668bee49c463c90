"""What changed between two specs, before it is put into words."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from markov.documents.matching import Basis
from markov.results import Result, TargetResult

#: What became of a thing.
Fate = Literal["added", "removed", "changed"]
#: What became of a verdict: the same, turned over, or to or from undecided; or it cannot be compared.
Turn = Literal["kept", "flipped", "unsettled", "added", "removed"]
#: Whether a result became better for the plant; ``same`` where the proven bounds allow no difference to be told.
Trend = Literal["better", "worse", "same", "differs", "added", "removed"]


@dataclass(frozen=True)
class Side:
    """One of the two specs."""

    source_name: str
    title: str
    reference: tuple[tuple[str, str], ...]
    sha256: str
    states: int
    transitions: int
    by_hand: bool


@dataclass(frozen=True)
class Alone:
    """What a target would say if one change alone were made to the old spec."""

    change: str
    value: float | None
    verdict: str


@dataclass(frozen=True)
class VerdictChange:
    """A target in both specs, or in one.

    `old_limit_verdict` is what the new value would be worth under the old limit; None where the limit is the same.
    `alone` tells what single changes do, where that was worked out.
    """

    id: str
    turn: Turn
    old: TargetResult | None
    new: TargetResult | None
    asks_differently: bool
    old_limit_verdict: str | None
    alone: tuple[Alone, ...] = ()


@dataclass(frozen=True)
class ResultChange:
    """A result in both solutions, or in one."""

    old: Result | None
    new: Result | None
    trend: Trend

    @property
    def any(self) -> Result:
        """The result of either side, for its name."""
        found = self.new if self.new is not None else self.old
        if found is None:
            raise AssertionError("a change of a result has a result")
        return found


@dataclass(frozen=True)
class ParameterChange:
    """A parameter: what was written on either side; a text is empty where nothing is."""

    name: str
    fate: Fate
    old_value: str
    new_value: str
    ratio: float | None
    old_source: str
    new_source: str
    old_uncertainty: str
    new_uncertainty: str
    line_old: int | None
    line_new: int | None


@dataclass(frozen=True)
class KeyChange:
    """A key of the spec that is no parameter and no target.

    `renamed` marks an entry that says the same under another name; `old` and `new` are then the names.
    """

    words: str
    fate: Fate
    old: str
    new: str
    same_value: bool
    line_old: int | None
    line_new: int | None
    renamed: bool = False


@dataclass(frozen=True)
class Listed:
    """Lines that a list gained and lost."""

    added: tuple[str, ...]
    removed: tuple[str, ...]

    def __bool__(self) -> bool:
        """Tell whether there is any."""
        return bool(self.added or self.removed)


@dataclass(frozen=True)
class StatePair:
    """States that stand for each other: numbers and names on either side."""

    old: tuple[tuple[int, str], ...]
    new: tuple[tuple[int, str], ...]
    basis: Basis
    differences: tuple[str, ...]


@dataclass(frozen=True)
class ArrowChange:
    """What leads from one state to another, in both chains or in one.

    `source` and `target` are state numbers, in the new chain where the arrow is there, else in the old one.
    `phases` names the phases concerned, where there are several.
    """

    fate: Fate
    source: int
    target: int
    source_name: str
    target_name: str
    old_formula: str
    new_formula: str
    old_exact: Fraction | None
    new_exact: Fraction | None
    causes: tuple[str, ...]
    moved: tuple[str, ...]
    phases: tuple[str, ...] = ()

    @property
    def keeps_formula(self) -> bool:
        """Whether only values behind the symbols changed."""
        return self.fate == "changed" and self.old_formula == self.new_formula

    @property
    def relative(self) -> float | None:
        """Return the change of the rate relative to the old one."""
        if self.old_exact is None or self.new_exact is None or not self.old_exact:
            return None
        return float(self.new_exact / self.old_exact - 1)


@dataclass(frozen=True)
class Changes:
    """Everything that changed from one spec to another.

    Attributes
    ----------
    old, new : Side
    verdicts : tuple of VerdictChange
        Every target, those whose verdict turned first.
    results : tuple of ResultChange
        Every result that differs, or is on one side only.
    parameters : tuple of ParameterChange
    keys : tuple of KeyChange
    assumptions, warnings : Listed
    pairs : tuple of StatePair
    only_old, only_new : tuple of (int, str)
        States without a partner.
    arrows : tuple of ArrowChange
    notes : tuple of str
        What could not be compared, and why.
    """

    old: Side
    new: Side
    verdicts: tuple[VerdictChange, ...]
    results: tuple[ResultChange, ...]
    parameters: tuple[ParameterChange, ...]
    keys: tuple[KeyChange, ...]
    assumptions: Listed
    warnings: Listed
    pairs: tuple[StatePair, ...]
    only_old: tuple[tuple[int, str], ...]
    only_new: tuple[tuple[int, str], ...]
    arrows: tuple[ArrowChange, ...]
    notes: tuple[str, ...]

    @property
    def holds_hand_against_generated(self) -> bool:
        """Whether one chain is written by hand and the other generated."""
        return self.old.by_hand != self.new.by_hand

    @property
    def chains_differ(self) -> bool:
        """Whether a state has no partner, differs from it, or an arrow differs."""
        return bool(self.only_old or self.only_new or self.arrows or any(pair.differences for pair in self.pairs))

    @property
    def nothing_changed(self) -> bool:
        """Whether neither the spec nor what comes out of it differs in anything but the way it is written down."""
        texts = any(not key.same_value or key.renamed for key in self.keys)
        turned = any(verdict.turn != "kept" or verdict.asks_differently for verdict in self.verdicts)
        return not (
            self.results
            or self.parameters
            or texts
            or turned
            or self.assumptions
            or self.warnings
            or self.chains_differ
        )

    @property
    def exit_status(self) -> int:
        """Return 1 where a verdict flipped or the chains held against each other differ, 3 where one is unsettled.

        0: no verdict flipped.  1: a verdict flipped, either way; or one chain is written by hand, the other generated,
        and they differ.  3: a verdict became or ceased to be undecided, or a target is gone.
        """
        turns = {verdict.turn for verdict in self.verdicts}
        if "flipped" in turns or (self.holds_hand_against_generated and self.chains_differ):
            return 1
        return 3 if turns & {"unsettled", "removed"} else 0
