"""Compares the solver with the simulation, on one confidence for a whole family of comparisons."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from markov.evaluation import solve_model
from markov.model import Model
from markov.results import Result, Solution
from markov.studies.simulation import Simulated, simulate
from markov.studies.simulation_estimates import Estimate

#: Chance that every comparison of a family agrees where solver and simulation mean the same.
CONFIDENCE = 0.999

#: A measure, of whom (None: the system), at which hours (None: the long run).
Asked = tuple[str, str | None, float | None]


@dataclass(frozen=True)
class Compared:
    """One measure, solved and simulated.

    Attributes
    ----------
    agrees : bool or None
        None where there is nothing to compare; `why` says what is missing.
    """

    measure: str
    of: str | None
    at_hours: float | None
    solved: float | None
    estimate: Estimate | None
    interval: tuple[float, float] | None
    agrees: bool | None
    why: str = ""

    def __str__(self) -> str:
        subject = "" if self.of is None else f" of {self.of}"
        time = "" if self.at_hours is None else f" at {self.at_hours:g} h"
        if self.estimate is None or self.solved is None:
            return f"{self.measure}{subject}{time}: {self.why}"
        off = (
            (self.estimate.value - self.solved) / self.estimate.standard_error if self.estimate.standard_error else 0.0
        )
        verdict = "agrees" if self.agrees else "DIFFERS"
        return (
            f"{self.measure}{subject}{time}: solved {self.solved:.6g}, simulated {self.estimate.value:.6g} "
            f"± {self.estimate.standard_error:.2g} ({off:+.1f} standard errors): {verdict}"
        )


def each_confidence(family: int, confidence: float = CONFIDENCE) -> float:
    """Return the confidence of one comparison out of `family`.

    Notes
    -----
    Bonferroni's bound, which holds however the comparisons depend on each other: here several come from one life.
    """
    return 1.0 - (1.0 - confidence) / family


def compare(
    model: Model,
    measures: Iterable[Asked],
    seed: int,
    family: int,
    *,
    histories: int = 2000,
    horizon: float | None = None,
    confidence: float = CONFIDENCE,
    solver: Callable[[Model, Sequence[Fraction]], Solution] = solve_model,
) -> list[Compared]:
    """Compare the solver with the simulation.

    Parameters
    ----------
    model : Model
        What is asked `of` a group has to be a target of the model, for the solver answers nothing else of groups.
    measures : iterable of Asked
    seed : int
    family : int
        Number of comparisons, over all models, that `confidence` is meant for.
    histories, horizon
        See `simulate`; a horizon is needed for values of the long run.
    solver : callable
        Called with the model and the times.
    """
    measures = list(measures)
    times = sorted({at for _, _, at in measures if at is not None})
    first = any(measure == "mean_time_to_first_failure" for measure, _, _ in measures)
    solution = solver(model, [Fraction(time) for time in times])
    found = simulate(model, histories=histories, seed=seed, horizon=horizon, times=times, first_failure=first)
    share = each_confidence(family, confidence)
    return [_compared(solution, found, measure, share) for measure in measures]


def _compared(solution: Solution, found: Simulated, asked: Asked, confidence: float) -> Compared:
    measure, of, at = asked
    try:
        result = _result(solution, asked)
    except KeyError:
        return Compared(measure, of, at, None, None, None, None, "the solution does not hold it")
    try:
        estimate = found.estimate(measure, of=of, at_hours=at)
    except KeyError:
        return Compared(measure, of, at, result.value, None, None, None, "the simulation does not hold it")
    if result.value is None:
        return Compared(measure, of, at, None, estimate, None, None, result.reason or "no value")
    low, high = estimate.interval(confidence)
    if estimate.value == 0.0 and not (estimate.is_share or estimate.is_bounded):
        # Nothing was seen: no spread to judge by, a small value may just have been missed.
        agrees = True if result.value == 0.0 else None
        return Compared(measure, of, at, result.value, estimate, (low, high), agrees, "too rare to be seen")
    if estimate.standard_error == 0.0 and not (estimate.is_share or estimate.is_bounded):
        agrees = True if abs(result.value - estimate.value) <= 1e-9 * abs(result.value) else None
        return Compared(measure, of, at, result.value, estimate, (low, high), agrees, "nothing varied")
    slack = 1e-9 * abs(result.value)
    agrees = low - slack <= result.value <= high + slack
    return Compared(measure, of, at, result.value, estimate, (low, high), agrees)


def _result(solution: Solution, asked: Asked) -> Result:
    measure, of, at = asked
    for result in solution.results:
        if (result.measure, result.of) == (measure, of) and (
            result.at_hours is None if at is None else result.at_hours == Fraction(at)
        ):
            return result
    raise KeyError(asked)
