"""What to plot of a solved model: survival, unavailability over time and over the cycle of tests, what makes it.

Lines go through values with the bounds of the solver; where those are wider than a line, the picture says so.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from itertools import islice

from markov.errors import MarkovError
from markov.evaluation import build_space
from markov.evaluation.failure_paths import failure_paths
from markov.evaluation.questions import Question
from markov.evaluation.replies import reply
from markov.evaluation.scheduled import ScheduledAnswers
from markov.evaluation.solver import Solver
from markov.model import Model
from markov.output.axes import Bar, Chart, Curve, Level, Stretch, bars_picture, chart_picture
from markov.output.failure_paths import percent, way_words
from markov.output.picture import Picture
from markov.output.wording import dependence_words, hours_words, measure_words, value_words
from markov.results import Result, Solution, TargetResult
from markov.states import GeneratedSpace, StateSpace
from markov.states.timetable import Step, Timetable

_POINTS = 33
"""Values on each line."""
_FEWER_POINTS = 13
_MANY_STATES = 3_000
"""States from which lines go through fewer values."""
_MOST_STATES = 50_000
"""States beyond which nothing is plotted that has to be solved for anew."""
_DECADES = 4
"""Powers of ten of time on a logarithmic time axis."""
_QUICK = 3_000.0
"""Expected jumps between two instants up to which uniformisation is quick."""
_FEW_STEPS = 200
"""Instants up to the horizon that are passed one by one; powers of a matrix pass more."""
_JUST_BEFORE = Fraction(999_999, 1_000_000)
"""Share of the time between two instants at which the value just before the second one is taken."""
_SOON = (Fraction(1, 128), Fraction(1, 64), Fraction(1, 32))
"""Shares of it soon after an instant, where what was found is being repaired."""
_MOST_INSTANTS = 80
"""Instants shown of a cycle."""
_BARS = 10
_HIGH = {"reliability": "unreliability", "availability": "unavailability"}
_HIGH |= {"steady_state_availability": "steady_state_unavailability", "mean_availability": "mean_unavailability"}
_VISIBLE = 1e-3
"""Relative width of a bound that shows on paper."""


@dataclass(frozen=True)
class Plot:
    """A picture of results with its short name and a caption."""

    name: str
    caption: str
    picture: Picture


class Plots:
    """Makes the plots of one model, solving for what they share once.

    Parameters
    ----------
    model : Model
    solution : Solution
        Of this model; its targets are drawn in.
    space : StateSpace, optional
        Its chain, if it is at hand.
    """

    def __init__(self, model: Model, solution: Solution, space: StateSpace | None = None) -> None:
        self.model, self.solution = model, solution
        self._space = space

    # --- what is asked ------------------------------------------------------------------------------------------------

    @cached_property
    def horizon(self) -> Fraction:
        """The time up to which is plotted: the mission, else the latest time of a target, else a year."""
        if self.model.mission is not None and self.model.mission.time.exact > 0:
            return self.model.mission.time.exact
        asked = [target.at_hours for target in self.solution.targets if target.at_hours]
        return max(asked, default=self.model.year_hours)

    @property
    def _is_resolved(self) -> bool:
        """Whether there are values around every fixed instant: a line through few would lie about them."""
        return self._table is None or bool(self._instants_up_to_horizon)

    @property
    def _is_too_large(self) -> bool:
        return self.solution.states > _MOST_STATES

    @cached_property
    def _points(self) -> int:
        return _POINTS if self.solution.states < _MANY_STATES else _FEWER_POINTS

    @cached_property
    def _even(self) -> tuple[Fraction, ...]:
        """Times in equal steps; with fixed instants, times around each where they are few enough to be told apart."""
        if self._table is not None and self._instants_up_to_horizon:
            return tuple(
                sorted({*(time for time in self._instants_up_to_horizon if time < self.horizon), self.horizon})
            )
        return tuple(self.horizon * number / (self._points - 1) for number in range(self._points))

    @cached_property
    def _instants_up_to_horizon(self) -> tuple[Fraction, ...]:
        """Times around the fixed instants up to the horizon; none where they are too many to be told apart."""
        assert self._table is not None
        steps: list[Step] = []
        now = Fraction(0)
        for step in _steps(self._table):
            if now >= self.horizon:
                break
            if len(steps) == _MOST_INSTANTS:
                return ()
            steps.append(step)
            now += step.hours
        inside = max(4, 2 * self._points // max(len(steps), 1))
        return _around(steps, (*_SOON[-1:], *(Fraction(number, inside) for number in range(1, inside))))

    @cached_property
    def _by_decades(self) -> tuple[Fraction, ...]:
        """Times in equal steps of their logarithm, rounded to four digits so that they are short fractions."""
        last = self._points - 1
        powers = (_DECADES * (number / last - 1) for number in range(last))
        return (*(self.horizon * Fraction(f"{10**power:.3e}") for power in powers), self.horizon)

    @cached_property
    def _solver(self) -> Solver:
        times = sorted({*self._even, *(() if self._table is not None else self._by_decades), *self._cycle_times})
        return Solver(self.model, times, method=self._method)

    @cached_property
    def _method(self) -> str | None:
        """Uniformisation between fixed instants where it is quick: matrices pay where lengths of time are few."""
        if self._table is None:
            return None
        whole = Solver(self.model).whole
        if not isinstance(whole, ScheduledAnswers):
            return None
        fastest = max(float(each.exits.high.max(initial=0.0)) for each in whole.schedule.generators)
        longest = max(float(step.hours) for step in (*self._table.prefix, *self._table.cycle))
        steps = self.horizon * (len(self._table.cycle) or 1) / (self._table.period or self.horizon)
        return "uniformisation" if fastest * longest <= _QUICK and steps <= _FEW_STEPS else None

    @cached_property
    def _table(self) -> Timetable | None:
        if self.model.explicit or not (self.model.tests or self.model.phases or self._has_visits):
            return None
        return self.space.timetable if isinstance(self.space, GeneratedSpace) else None

    @property
    def _has_visits(self) -> bool:
        return any(group.repair_when is not None and group.is_deferred for group in self.model.groups.values())

    @cached_property
    def space(self) -> StateSpace:
        """The chain of the whole plant."""
        return self._space if self._space is not None else build_space(self.model)

    def _values(self, measure: str, times: Iterable[Fraction]) -> list[Result]:
        return [reply(self.model, self._solver, Question(measure, at_hours=time)) for time in times]

    # --- time axes ----------------------------------------------------------------------------------------------------

    def _unit(self, until: Fraction) -> tuple[Fraction, str]:
        year = self.model.year_hours
        if until >= 2 * year:
            return year, f"time in years of {hours_words(year)}"
        return Fraction(1), "time in hours"

    def _curve(self, name: str, results: Sequence[Result], unit: Fraction) -> Curve:
        points = (
            (float(each.at_hours / unit), each.value)
            for each in results
            if each.value is not None and each.at_hours is not None
        )
        return Curve(name, tuple(points))

    def _phases(self, until: Fraction, unit: Fraction) -> tuple[Stretch, ...]:
        """Return the phases up to a time."""
        if self._table is None or len(self.model.phases) < 2:
            return ()
        found: list[Stretch] = []
        now = Fraction(0)
        for step in _steps(self._table):
            if now >= until:
                break
            name = self.model.phases[step.regime].name
            begin, end = float(now / unit), float(min(now + step.hours, until) / unit)
            if found and found[-1].name == name:
                found[-1] = Stretch(found[-1].begin, end, name)
            else:
                found.append(Stretch(begin, end, name))
            now += step.hours
        if now < until:
            name = self.model.phases[self._table.final].name
            found.append(Stretch(float(now / unit), float(until / unit), name))
        return tuple(found)

    def _levels(self, measures: Iterable[str], unit: Fraction, turned: bool) -> Iterator[Level]:
        """Yield the limits of targets of the system on some measures; `turned`: as one minus where high is good."""
        wanted = set(measures)
        for target in self.solution.targets:
            measure = _HIGH.get(target.measure, target.measure) if turned else target.measure
            if target.of is None and measure in wanted:
                limit = 1 - target.limit if turned and target.measure in _HIGH else target.limit
                at = None if target.at_hours is None else float(target.at_hours / unit)
                yield Level(float(limit), target.id, _target_words(target), at)

    # --- the plots ----------------------------------------------------------------------------------------------------

    def reliability(self) -> Plot | None:
        """R(t) on plain axes."""
        if self._is_too_large or not self._is_resolved:
            return None
        results = self._values("reliability", self._even)
        unit, words = self._unit(self.horizon)
        curve = self._curve("R(t)", results, unit)
        if len(curve.points) < 2:
            return None
        at_end = value_words("reliability", curve.points[-1][1])
        caption = f"Reliability up to {hours_words(self.horizon)}"
        chart = Chart(
            title=f"{self._title}: reliability",
            x_words=words,
            y_words="probability of no failure until then",
            curves=(curve,),
            levels=tuple(self._levels(("reliability",), unit, turned=False)),
            stretches=self._phases(self.horizon, unit),
            description=f"{caption}: from {value_words('reliability', curve.points[0][1])} to {at_end}.",
            subtitle=self._origin(results),
        )
        return Plot("plot-reliability", f"{caption}{_with_phases(chart)}", chart_picture(chart))

    def unreliability(self) -> Plot | None:
        """Unreliability and unavailability on logarithmic axes, with the limits of targets."""
        if self._is_too_large or not self._is_resolved:
            return None
        is_scheduled = self._table is not None
        times = tuple(time for time in self._even if time) if is_scheduled else self._by_decades
        unit, words = self._unit(self.horizon)
        failed = self._values("unreliability", times)
        down = self._values("unavailability", times)
        both = (self._curve("unreliability", failed, unit), self._curve("unavailability", down, unit))
        curves = tuple(each for each in both if sum(y > 0 for _, y in each.points) > 1)
        if not curves:
            return None
        measures = (
            "unreliability",
            "unavailability",
            "steady_state_unavailability",
            "mean_unavailability",
            "pfd_average",
        )
        what = " and ".join(each.name for each in curves)
        caption = f"{what.capitalize()} up to {hours_words(self.horizon)}"
        told = [f"{each.name} {value_words('', each.points[-1][1])} at {hours_words(self.horizon)}" for each in curves]
        chart = Chart(
            title=f"{self._title}: {what}",
            x_words=words,
            y_words="probability of at least one failure until then" + ("; of being down" if len(curves) > 1 else ""),
            curves=curves,
            levels=tuple(self._levels(measures, unit, turned=True)),
            stretches=self._phases(self.horizon, unit) if is_scheduled else (),
            x_log=not is_scheduled,
            y_log=True,
            description=f"{caption}: {'; '.join(told)}.",
            subtitle=self._origin([*failed, *down]),
        )
        return Plot("plot-unreliability", f"{caption}, logarithmic{_with_phases(chart)}", chart_picture(chart))

    @cached_property
    def _cycle_times(self) -> tuple[Fraction, ...]:
        """Times over the prefix and one cycle, just before and at every instant; none without instants."""
        if self._table is None:
            return ()
        steps = list(islice((*self._table.prefix, *self._table.cycle), _MOST_INSTANTS))
        inside = max(2, 160 // len(steps))
        return _around(steps, (*_SOON, *(Fraction(number, inside) for number in range(1, inside))))

    def saw_tooth(self) -> Plot | None:
        """Unavailability over the first cycle of tests, visits and phases."""
        if self._is_too_large:
            return None
        times = self._cycle_times
        if not times or self._table is None:
            return None
        results = self._values("unavailability", times)
        unit, words = self._unit(times[-1])
        curve = self._curve("unavailability", results, unit)
        if len(curve.points) < 2:
            return None
        levels = list(self._levels(("pfd_average", "pfd_peak", "steady_state_unavailability"), unit, turned=True))
        for measure in (
            ("pfd_average", "steady_state_unavailability") if self.model.tests else ("steady_state_unavailability",)
        ):
            mean = next((each for each in self.solution.results if each.measure == measure and each.of is None), None)
            if mean is not None and mean.value is not None:
                told = f"{measure_words(measure)} {value_words(measure, mean.value, 4)}"
                levels.append(Level(mean.value, "mean", told, is_limit=False))
                break
        highest = max(y for _, y in curve.points)
        caption = f"Unavailability over the first {hours_words(times[-1])} with {self._instants_words}"
        chart = Chart(
            title=f"{self._title}: unavailability between fixed instants",
            x_words=words,
            y_words="probability of being down",
            curves=(curve,),
            levels=tuple(levels),
            stretches=self._phases(times[-1], unit),
            description=f"{caption}; at most {value_words('', highest, 4)}.",
            subtitle=self._origin(results),
            y_zero=True,
        )
        return Plot("plot-cycle", f"{caption}{_with_phases(chart)}", chart_picture(chart))

    @property
    def _instants_words(self) -> str:
        words = [*self.model.tests, *(phase.name for phase in self.model.phases)]
        return ", ".join(words) if words else "visits"

    def dependences(self) -> Plot | None:
        """How much of the unavailability each dependence makes, as bars."""
        redundancy = self.solution.redundancy
        if redundancy is None:
            return None
        found = []
        for effect in redundancy.effects:
            factor = effect.factor.long_run
            when = "in the long run"
            if factor.value is None and effect.factor.mission is not None:
                factor, when = effect.factor.mission, f"at {hours_words(redundancy.mission_hours)}"
            if factor.value is not None and factor.value > 0:
                found.append((1 - 1 / factor.value, effect, when))
        if not found:
            return None
        found.sort(key=lambda each: (-each[0], each[1].dependence))
        bars = []
        for share, effect, _ in found[:_BARS]:
            name = f"{dependence_words(effect.dependence)} ({', '.join(effect.where)})"
            bars.append(Bar(name, share, percent(share) if share >= 0 else f"{percent(-share)} more"))
        when = found[0][2]
        caption = f"How much of the unavailability {when} would go if one dependence alone were made perfect"
        return Plot(
            "plot-dependences",
            caption,
            bars_picture(
                f"{self._title}: what makes the unavailability",
                f"Share that would go if this alone were made perfect, {when}; the shares overlap and do not add up.",
                bars,
                f"{caption}: {'; '.join(f'{bar.name} {bar.words}' for bar in bars)}.",
            ),
        )

    def ways(self) -> Plot | None:
        """The most frequent ways to failure, as bars."""
        if self._is_too_large or self.solution.parts > 1:
            return None
        try:
            found = failure_paths(self.model, self.space).first(0.95, _BARS)
        except MarkovError:
            return None
        if len(found.paths) < 2:
            return None
        bars = []
        for path in found.paths:
            end = self.space.label(path.states[-1])
            bars.append(Bar(f"{way_words(path)}: {end}", path.share, percent(path.share)))
        if found.covered < 1:
            bars.append(Bar("all other ways", 1 - found.covered, percent(1 - found.covered)))
        basis = "the failure frequency" if found.basis == "failure frequency" else "all first failures"
        caption = f"The most frequent ways to failure, by their share of {basis}"
        bound = "estimated" if found.least is None else f"at least {percent(found.least)}, proven,"
        subtitle = f"Numbers of states from the start to the down state named. Together {bound} of {basis}."
        described = f"{caption}: {'; '.join(f'{bar.name} {bar.words}' for bar in bars)}."
        return Plot("plot-ways", caption, bars_picture(f"{self._title}: ways to failure", subtitle, bars, described))

    def every(self) -> tuple[Plot, ...]:
        """Return all plots that mean something for the model."""
        made = (make() for make in (self.reliability, self.unreliability, self.saw_tooth, self.dependences, self.ways))
        return tuple(plot for plot in made if plot is not None)

    # --- words --------------------------------------------------------------------------------------------------------

    @property
    def _title(self) -> str:
        return self.model.title or self.model.source_name

    def _origin(self, results: Sequence[Result]) -> str:
        """Tell spec and version, and whether the bounds of the values are wider than a line."""
        told = f"spec {self.model.sha256[:12]}, markov {self.solution.version}"
        if any(each.value is not None and not each.is_proven for each in results):
            return f"{told}; some values are estimates without a proven bound"
        widest = max((each.relative_width or 0.0 for each in results), default=0.0)
        if math.isfinite(widest) and widest < _VISIBLE:
            return f"{told}; every value with a proven bound, relative width at most {_rounded_up(widest)}"
        return f"{told}; bounds as wide as {_rounded_up(widest)} of the value"


def _rounded_up(value: float) -> str:
    return "1e-16" if value < 1e-16 else f"1e{math.ceil(math.log10(value)):+03d}"


def _target_words(target: TargetResult) -> str:
    verdict = target.verdict.replace("_", " ")
    when = "" if target.at_hours is None else f" at {hours_words(target.at_hours)}"
    direction = target.direction.replace("_", " ")
    return f"{target.id}: {measure_words(target.measure)}{when} {direction} {target.limit_text}, {verdict}"


def _with_phases(chart: Chart) -> str:
    return "; phases shaded" if chart.stretches else ""


def _steps(table: Timetable) -> Iterator[Step]:
    """Yield the steps of a timetable for ever, or to the end of its prefix."""
    yield from table.prefix
    while table.cycle:
        yield from table.cycle


def _around(steps: Sequence[Step], inside: Iterable[Fraction]) -> tuple[Fraction, ...]:
    """Return times at the beginning of each step, at some shares of its length, and just before its end."""
    shares = sorted({Fraction(0), *inside, _JUST_BEFORE})
    times: list[Fraction] = []
    now = Fraction(0)
    for step in steps:
        times += [now + step.hours * share for share in shares]
        now += step.hours
    return (*times, now)


#: Plots by the word that asks for each.
PLOTS: dict[str, Callable[[Plots], Plot | None]] = {
    "reliability": Plots.reliability,
    "unreliability": Plots.unreliability,
    "cycle": Plots.saw_tooth,
    "dependences": Plots.dependences,
    "ways": Plots.ways,
}
