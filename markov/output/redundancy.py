"""What redundancy gains and costs, as rows of text for every writer."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from markov.measures import MEASURES
from markov.output.wording import bound_words, dependence_words, hours_words, measure_words, unit_words, value_words
from markov.results import Effect, Figure, Ratio, Redundancy

#: Heading of the section.
HEADING = "What redundancy gains and costs"

_DIGITS = 4


@dataclass(frozen=True)
class Grid:
    """A small table: headings, rows of as many cells, a sentence below."""

    headings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    below: str = ""


def redundancy_grids(redundancy: Redundancy) -> tuple[Grid, ...]:
    """Return the section as three tables: gains, what keeps them from being larger, costs."""
    return tuple(grid for grid in (_gains(redundancy), _effects(redundancy), _costs(redundancy)) if grid is not None)


def listed_measures(redundancy: Redundancy | None) -> frozenset[str]:
    """Name the measures whose long-run value stands in the section."""
    if redundancy is None:
        return frozenset()
    gains = {"gain_over_single_unit", "gain_over_independent_blocks"}
    return frozenset(gains | {cost.name for cost in redundancy.costs if cost.name in MEASURES})


def gain_words(figure: Figure) -> str:
    """Return a gain as a number and a power of ten: ``38.06 = 10^1.58``."""
    if figure.value is None or figure.value <= 0:
        return _words(figure)
    return f"{_words(figure)} = 10^{_tidy(math.log10(figure.value))}"


def _tidy(exponent: float) -> str:
    told = f"{exponent:.2f}"
    return "0.00" if told == "-0.00" else told


def _gains(redundancy: Redundancy) -> Grid:
    rows = (
        ("single units: each group cut down to what it requires", redundancy.over_single_unit),
        ("groups alone: each with crews of its own", redundancy.over_independent_blocks),
        ("independent blocks: all that is listed below made perfect", redundancy.over_perfect_blocks),
    )
    headings = ("the system compared with", *_times(redundancy))
    return Grid(
        (*headings, "bound, relative"),
        tuple((words, *map(gain_words, _figures([ratio])), _bound(_figures([ratio]))) for words, ratio in rows),
        "Unavailability (at a time: unreliability) of what it is compared with, over that of the system: above 1 the "
        "system is better.",
    )


def _times(redundancy: Redundancy) -> Iterator[str]:
    yield "long run"
    if redundancy.mission_hours is not None:
        yield f"at {hours_words(redundancy.mission_hours)}"


def _effects(redundancy: Redundancy) -> Grid:
    effects = redundancy.effects
    if not effects:
        below = "Nothing in the spec ties the units together or spoils a takeover: they are independent blocks."
        return Grid((), (), below)
    reasons = {figure.reason for each in effects for figure in _figures([each.factor, each.left])}
    if len(reasons) == 1 and None not in reasons:
        listed = "; ".join(map(_place, effects))
        return Grid((), (), f"What departs from independent blocks: {listed}. How much each makes: {reasons.pop()}.")
    headings = ["made perfect alone"]
    for time in _times(redundancy):
        headings += [f"better by, {time}", "left over"]
    return Grid(
        (*headings, "bound, relative"),
        tuple(
            (
                _place(each),
                *(_words(figure) for figure in _figures(_by_time(each))),
                _bound(_figures([each.factor, each.left])),
            )
            for each in effects
        ),
        f"Left over: what then remains to the answer of independent blocks, as a factor. {_cause(redundancy)}",
    )


def _by_time(effect: Effect) -> list[Ratio]:
    """Put the factor and what it leaves side by side, for the long run and for the mission."""
    pairs = [Ratio(effect.factor.long_run, effect.left.long_run)]
    if effect.factor.mission is not None:
        pairs.append(Ratio(effect.factor.mission, effect.left.mission))
    return pairs


def _cause(redundancy: Redundancy) -> str:
    told = [_named(redundancy, redundancy.long_run_cause, "in the long run")]
    if redundancy.mission_hours is not None:
        told.append(_named(redundancy, redundancy.mission_cause, f"at {hours_words(redundancy.mission_hours)}"))
    return f"Largest cause of the difference {'; '.join(told)}."


def _named(redundancy: Redundancy, cause: str | None, when: str) -> str:
    named = next((_place(each) for each in redundancy.effects if each.dependence == cause), "none by itself")
    return f"{when}: {named}"


def _place(effect: Effect) -> str:
    return f"{dependence_words(effect.dependence)} ({', '.join(effect.where)})"


def _costs(redundancy: Redundancy) -> Grid:
    rows = []
    for cost in redundancy.costs:
        unit = unit_words(cost.unit)
        words = measure_words(cost.name) + (f" ({cost.note})" if cost.note else "")
        figures = (cost.system, cost.plain)
        cells = (_with_unit(cost.name, figure, unit) for figure in figures)
        rows.append((words, *cells, _bound(figures)))
    return Grid(("price", "the system", "single units", "bound, relative"), tuple(rows))


def _with_unit(name: str, figure: Figure, unit: str) -> str:
    if figure.value is None:
        return figure.reason or "—"
    return f"{value_words(name, figure.value)}{'' if unit.startswith('/') else ' '}{unit}".rstrip()


def _words(figure: Figure) -> str:
    if figure.value is None:
        return figure.reason or "—"
    return value_words("", figure.value, _DIGITS)


def _figures(ratios: Iterable[Ratio]) -> list[Figure]:
    return [figure for ratio in ratios for figure in (ratio.long_run, ratio.mission) if figure is not None]


def _bound(figures: Iterable[Figure]) -> str:
    """Return the widest bound among some figures, in words."""
    told = [figure for figure in figures if figure.value is not None]
    return bound_words(max(told, key=_side)) if told else ""


def _side(figure: Figure) -> float:
    if figure.value is None or figure.lower is None or figure.upper is None:
        return math.inf
    side = max(figure.upper - figure.value, figure.value - figure.lower)
    return side / abs(figure.value) if figure.value else side
