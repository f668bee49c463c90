"""What the redundancy of a plant gains, what keeps it from gaining more, and what it costs.

Each dependence of the plant is taken away alone, and the plant is solved again.  The factor between the two answers
says how much this dependence makes; what is left over against the plant without any dependence says how much the others
do.  Factors of one taken away alone do not multiply up to the whole difference.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from markov.chain import Enclosure, point
from markov.errors import IllPosed, NotReached, TooLarge
from markov.evaluation.dependence import changed, dependences_of, without_all
from markov.evaluation.gains import independent_blocks
from markov.evaluation.plain import plain_arrangement
from markov.evaluation.questions import Question
from markov.evaluation.replies import reply
from markov.evaluation.solver import Solver
from markov.model import Model
from markov.quantities import Quantity
from markov.results import Cost, Effect, Figure, Ratio, Redundancy, Result
from markov.states import Plan

#: Most states of a chain that is solved again for each dependence: without and with fixed instants.  One without a
#: dependence may be larger, up to twice as many.
SOLVED_AGAIN_UP_TO = 1000
SOLVED_AGAIN_WITH_INSTANTS = 200

#: Measures that say what redundancy costs, in the order in which they are listed.
COST_MEASURES = (
    "repairs_per_year",
    "starts_per_year",
    "tests_per_year",
    "spares_per_year",
    "crew_utilisation",
    "waiting_for_crew",
    "probability_of_waiting",
    "time_without_redundancy",
)

#: Reasons where there is nothing to divide by.
_SURE = "the system does not fail"
_SURE_WITHOUT = "does not fail without it"
_SURE_IF_PERFECT = "perfect blocks do not fail"

#: An answer, or the reason why there is none.
_Answer = Enclosure | str


@dataclass(frozen=True)
class _Badness:
    """How bad a plant is: unavailability in the long run, unreliability at the mission time."""

    long_run: _Answer
    mission: _Answer | None

    def over(self, other: _Badness, sure: str) -> Ratio:
        """Return how many times as bad as another plant this is; `sure` is the reason where the other never fails."""
        mission = None
        if self.mission is not None and other.mission is not None:
            mission = _quotient(self.mission, other.mission, sure)
        return Ratio(_quotient(self.long_run, other.long_run, sure), mission)


def redundancy_of(
    model: Model,
    solver: Solver,
    results: Mapping[Question, Result],
    progress: Callable[[str], None] = lambda _: None,
) -> Redundancy | None:
    """Tell what redundancy gains and costs in a plant; None for a chain written by hand.

    Parameters
    ----------
    model : Model
    solver : Solver
        Of this model.
    results : mapping of Question to Result
        What has been answered already; gains and costs of the system are taken from here.
    progress : callable
        Told what is being done.
    """
    plan = solver.plan
    if plan is None:
        return None
    at = None if model.mission is None else model.mission.time.exact
    most = SOLVED_AGAIN_UP_TO if plan.timetable is None else SOLVED_AGAIN_WITH_INSTANTS
    system = _badness(solver, at)
    plain_model = plain_arrangement(model)
    progress("solving the plain arrangement")
    plain = _solver(plain_model, at, most)
    dependences = dependences_of(model, plan)
    too_large = _too_large(solver, most, plan)
    if too_large is None:
        perfect = _solved(without_all(model, dependences), at, 2 * most, progress) if dependences else system
        solved = [_solved(each.without(model), at, 2 * most, progress) for each in dependences]
    else:
        unsolved = _Badness(too_large, None if at is None else too_large)
        perfect = unsolved if dependences else system
        solved = [unsolved] * len(dependences)
    effects = tuple(
        Effect(
            each.name,
            each.where,
            factor=system.over(without, _SURE_WITHOUT),
            left=without.over(perfect, _SURE_IF_PERFECT),
        )
        for each, without in zip(dependences, solved, strict=True)
    )
    over_single = _badness_or_reason(plain, at).over(system, _SURE)
    if isinstance(plain, str):  # the measure of that name has no such limit
        over_single = replace(over_single, long_run=_figure(results[Question("gain_over_single_unit")]))
    over_perfect = perfect.over(system, _SURE)
    blocks = None if at is None else too_large or _told(lambda: independent_blocks(model, at))
    return Redundancy(
        mission_hours=at,
        over_single_unit=over_single,
        over_independent_blocks=Ratio(
            _figure(results[Question("gain_over_independent_blocks")]), _Badness("", blocks).over(system, _SURE).mission
        ),
        over_perfect_blocks=over_perfect,
        effects=effects,
        long_run_cause=_cause(over_perfect.long_run, [(each.dependence, each.factor.long_run) for each in effects]),
        mission_cause=_cause(over_perfect.mission, [(each.dependence, each.factor.mission) for each in effects]),
        costs=tuple(_costs(model, plan, plain_model, plain, results)),
    )


def _too_large(solver: Solver, most: int, plan: Plan) -> str | None:
    """Return why a plant is not solved again; None where it is."""
    if solver.states <= most:
        return None
    told = "" if plan.timetable is None else " with fixed instants"
    return f"not solved again: {solver.states:,} states{told}; at most {most:,} are"


# --- answers ----------------------------------------------------------------------------------------------------------


def _solver(model: Model, at: Fraction | None, most: int) -> Solver | str:
    try:
        return Solver(model, () if at is None else (at,), limit=most)
    except TooLarge:
        return f"not solved again: more than {most:,} states"


def _solved(model: Model, at: Fraction | None, most: int, progress: Callable[[str], None]) -> _Badness:
    progress("solving without a dependence")
    return _badness_or_reason(_solver(changed(model, targets=()), at, most), at)


def _badness_or_reason(solver: Solver | str, at: Fraction | None) -> _Badness:
    if isinstance(solver, str):
        return _Badness(solver, None if at is None else solver)
    return _badness(solver, at)


def _badness(solver: Solver, at: Fraction | None) -> _Badness:
    mission = None if at is None else _told(lambda: solver.answer(Question("unreliability", at_hours=at)))
    return _Badness(_told(lambda: solver.answer(Question("steady_state_unavailability"))), mission)


def _told(answer: Callable[[], Enclosure]) -> _Answer:
    try:
        return answer()
    except IllPosed as error:
        return error.reason
    except (NotReached, TooLarge) as error:
        return f"not reached: {error}"


def _quotient(over: _Answer, under: _Answer, sure: str) -> Figure:
    if isinstance(over, str):
        return Figure(None, reason=over)
    if isinstance(under, str):
        return Figure(None, reason=under)
    if under.upper == 0:
        return Figure(None, reason=_SURE if over.upper == 0 else sure)
    ratio = over / under
    if not math.isfinite(ratio.value):
        return Figure(None, reason="not reached: the value is beyond the range of floating-point numbers")
    if ratio.upper is None or not math.isfinite(ratio.upper):
        return Figure(ratio.value)
    return Figure(ratio.value, ratio.lower, ratio.upper)


def _figure(result: Result) -> Figure:
    return Figure(result.value, result.lower, result.upper, result.reason)


# --- the cause --------------------------------------------------------------------------------------------------------


def _cause(gap: Figure | None, factors: Sequence[tuple[str, Figure | None]]) -> str | None:
    """Name the dependence that makes most of the difference between perfect blocks and the system.

    Where the system is worse than perfect blocks it is the one without which it gets better by the largest factor;
    where it is better than these, the one without which it gets worse by the largest.
    """
    if gap is None or not (_above_one(gap) or _below_one(gap)):
        return None
    worse = _below_one(gap)
    found: list[tuple[float, str]] = []
    for name, factor in factors:
        if factor is None:
            continue
        if factor.reason == _SURE_WITHOUT and worse:
            found.append((math.inf, name))
        elif factor.value is not None and (_above_one(factor) if worse else _below_one(factor)):
            found.append((factor.value if worse else -factor.value, name))
    return max(found, key=lambda each: each[0])[1] if found else None


def _above_one(figure: Figure) -> bool:
    return figure.value is not None and (figure.value if figure.lower is None else figure.lower) > 1


def _below_one(figure: Figure) -> bool:
    return figure.value is not None and (figure.value if figure.upper is None else figure.upper) < 1


# --- the price --------------------------------------------------------------------------------------------------------


def _costs(
    model: Model, plan: Plan, plain_model: Model, plain: Solver | str, results: Mapping[Question, Result]
) -> Iterator[Cost]:
    for measure in COST_MEASURES:
        question = Question(measure)
        if question not in results:
            continue
        other = Figure(None, reason=plain) if isinstance(plain, str) else _figure(reply(plain_model, plain, question))
        yield Cost(measure, question.asked.unit, _figure(results[question]), other)
    here = _items(plan)
    there = None if isinstance(plain, str) or plain.plan is None else _items(plain.plan)
    yield _installed("items", here, there, {name: Fraction(1) for name in here})
    stock = sum(pool.stock for pool in model.spares.values() if any(plan.places_of(unit) for unit in pool.for_))
    if stock:
        kept = _exactly(Fraction(stock))
        yield Cost("spares_in_stock", "1", kept, kept)
    for key in ("cost", "mass", "power"):
        each = {name: said for name in here if (said := _said(model, name, key)) is not None}
        if each:
            silent = [name for name in here if name not in each]
            yield _installed(key, here, there, each, f"without {', '.join(silent)}" if silent else "")


def _said(model: Model, unit: str, key: str) -> Fraction | None:
    said: Quantity | None = getattr(model.units[unit], key)
    return None if said is None else said.exact


def _items(plan: Plan) -> dict[str, int]:
    """Count the items of each kind in the chain."""
    counts: dict[str, int] = {}
    for layout in plan.islands:
        for slot in layout.slots:
            counts[slot.unit] = counts.get(slot.unit, 0) + slot.count
    return counts


def _installed(
    name: str, here: Mapping[str, int], there: Mapping[str, int] | None, each: Mapping[str, Fraction], note: str = ""
) -> Cost:
    def total(counts: Mapping[str, int]) -> Figure:
        return _exactly(_sum(each[unit] * count for unit, count in counts.items() if unit in each))

    plain = Figure(None, reason="not solved") if there is None else total(there)
    return Cost(name, "1", total(here), plain, note)


def _sum(values: Iterable[Fraction]) -> Fraction:
    return sum(values, Fraction(0))


def _exactly(number: Fraction) -> Figure:
    told = point(number, "counted")
    return Figure(told.value, told.lower, told.upper)
