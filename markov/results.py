"""What a solved model says: results with bounds, verdicts on targets, choices left unsaid."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

Verdict = Literal["met", "missed", "undecided", "cannot_occur"]


@dataclass(frozen=True)
class Result:
    """One number with the bound that was proven for it, or the reason why there is none.

    Attributes
    ----------
    measure : str
    of : str or None
        Group, unit or crew pool; None is the system.
    state : str or None
        State that was asked for by name.
    at_hours, for_hours : Fraction or None
        Time asked for, and length of the interval after it.
    value : float or None
        None where the question has no answer; `reason` then says why.
    lower, upper : float or None
        The exact answer of the model lies between them, rounding included.  Both are None for an estimate.
    unit : str
        Unit of measure: ``1``, ``h``, ``1/h``, ``1/y`` or ``h/y``.
    method : str
        How the number was obtained.
    reason : str or None
    reached : bool
        False where an answer exists but no method came to it.
    """

    measure: str
    of: str | None
    state: str | None
    at_hours: Fraction | None
    for_hours: Fraction | None
    value: float | None
    lower: float | None
    upper: float | None
    unit: str
    method: str
    reason: str | None = None
    reached: bool = True

    @property
    def is_proven(self) -> bool:
        """Whether the value has a proven bound."""
        return self.lower is not None and self.upper is not None

    @property
    def relative_width(self) -> float | None:
        """Width of the bound over the value; None without a bound or a value other than zero."""
        if self.lower is None or self.upper is None or not self.value:
            return None
        return (self.upper - self.lower) / abs(self.value)


@dataclass(frozen=True)
class TargetResult:
    """The verdict on one target, from unrounded values.

    `limit` is the limit in the unit of the measure; `satisfied` tells whether the target counts as met.
    """

    id: str
    measure: str
    of: str | None
    at_hours: Fraction | None
    limit: Fraction
    limit_text: str
    direction: Literal["at_least", "at_most"]
    result: Result
    verdict: Verdict
    satisfied: bool | None
    why: str


@dataclass(frozen=True)
class Figure:
    """A number beside others, with the bound proven for it, or the reason why there is none.

    Attributes
    ----------
    value : float or None
    lower, upper : float or None
        The exact answer lies between them.  Both are None for an estimate.
    reason : str or None
    """

    value: float | None
    lower: float | None = None
    upper: float | None = None
    reason: str | None = None


@dataclass(frozen=True)
class Ratio:
    """How two plants compare: by unavailability in the long run, by unreliability at the mission time.

    `mission` is None where the spec has no mission time.
    """

    long_run: Figure
    mission: Figure | None


@dataclass(frozen=True)
class Effect:
    """What one dependence does to the answer.

    Attributes
    ----------
    dependence : str
        Fixed name, such as ``imperfect_coverage``.
    where : tuple of str
        Groups, units, crew pools, tests or phases that have it.
    factor : Ratio
        The system as it is over the system with only this made perfect.
    left : Ratio
        The system with only this made perfect over perfect blocks: the difference that remains to be explained.
    """

    dependence: str
    where: tuple[str, ...]
    factor: Ratio
    left: Ratio


@dataclass(frozen=True)
class Cost:
    """One line of the price of redundancy: a measure, or a number of things installed.

    Attributes
    ----------
    name : str
        A measure, or ``items``, ``spares_in_stock``, ``cost``, ``mass``, ``power``.
    unit : str
        Unit of measure, as in `Result`.
    system, plain : Figure
        Of the system, and of the same with each group cut down to its `required` first units.
    note : str
        What the number leaves out, if anything.
    """

    name: str
    unit: str
    system: Figure
    plain: Figure
    note: str = ""


@dataclass(frozen=True)
class Redundancy:
    """What redundancy gains, what keeps it from gaining more, and what it costs.

    Attributes
    ----------
    mission_hours : Fraction or None
    over_single_unit : Ratio
        Each group cut down to its `required` first units, over the system: how many times worse that is.
    over_independent_blocks : Ratio
        Each group solved alone with crews of its own and combined through the structure, over the system.
    over_perfect_blocks : Ratio
        The system with every dependence made perfect at once, over the system: the answer of independent blocks.
    effects : tuple of Effect
        One for each dependence of the spec.
    long_run_cause, mission_cause : str or None
        The dependence that makes most of the difference to perfect blocks, in the long run and at the mission time;
        None where no single one makes a proven difference.
    costs : tuple of Cost
    """

    mission_hours: Fraction | None
    over_single_unit: Ratio
    over_independent_blocks: Ratio
    over_perfect_blocks: Ratio
    effects: tuple[Effect, ...]
    long_run_cause: str | None
    mission_cause: str | None
    costs: tuple[Cost, ...]


@dataclass(frozen=True)
class Solution:
    """A solved model: everything that `markov solve` prints.

    Attributes
    ----------
    title, source_name, sha256, version : str
        Of the spec and of the program that solved it.
    states, transitions : int
        Size of the chain that was solved: states, distinct arrows.
    raw_states : int
        States before interchangeable groups were merged and independent parts taken apart.
    parts : int
        Number of parts that were solved apart; 1 for the whole chain.
    year_hours : Fraction
        Hours in a year, as every per-year figure uses them.
    results : tuple of Result
    targets : tuple of TargetResult
    assumptions : tuple of str
        Choices that the spec leaves unsaid and that are able to change a result.
    warnings : tuple of str
    redundancy : Redundancy or None
        None for a chain written by hand.
    """

    title: str
    source_name: str
    sha256: str
    version: str
    states: int
    transitions: int
    raw_states: int
    parts: int
    year_hours: Fraction
    results: tuple[Result, ...]
    targets: tuple[TargetResult, ...]
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
    redundancy: Redundancy | None = None

    @property
    def exit_status(self) -> int:
        """Return 0 if all targets are met, 1 if one is missed, else 3 if one is undecided or a result out of reach."""
        if any(target.satisfied is False for target in self.targets):
            return 1
        if any(target.satisfied is None for target in self.targets) or not all(each.reached for each in self.results):
            return 3
        return 0

    def result(self, measure: str, *, of: str | None = None, at_hours: Fraction | float | None = None) -> Result:
        """Return the result of one measure.

        Raises
        ------
        KeyError
            The solution holds no such result.
        """
        for result in self.results:
            if result.measure == measure and result.of == of and (at_hours is None or result.at_hours == at_hours):
                return result
        raise KeyError(f"no result {measure!r} of {of or 'the system'} in this solution")


@dataclass(frozen=True)
class Size:
    """How large the chain of a model is, or would be.

    Attributes
    ----------
    states, transitions : int
        Of the chain that is solved, or of its parts together.
    raw_states : int
        Before interchangeable groups were merged and independent parts taken apart.
    parts : int
        Number of parts that are solved apart; 1 for the whole chain.
    is_exact : bool
        False where nothing was generated and the numbers are the largest possible.
    memory_bytes : int
        Predicted peak while solving.
    is_within_limit : bool
        False where `markov solve` refuses the chain.
    """

    states: int
    transitions: int
    raw_states: int
    parts: int
    is_exact: bool
    memory_bytes: int
    is_within_limit: bool


@dataclass(frozen=True)
class Check:
    """What `markov check` finds without solving anything: size, unsaid choices, warnings."""

    title: str
    source_name: str
    sha256: str
    version: str
    size: Size
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
