"""Answers about a plant whose parts share nothing: each part solved apart, combined exactly.

What combines without the whole chain: shares of time, frequencies, delivered shares, upkeep, and, where the parts stand
in series, everything about the first failure at a time.  Integrals over time and mean times to a first failure of
several parts do not, and are left to the whole chain.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

import numpy as np

from markov.chain import Enclosure, Method, point
from markov.errors import IllPosed
from markov.evaluation.answers import Answers
from markov.evaluation.combining import Share, Thirds, combine, critical, exposed
from markov.evaluation.modules import Modules
from markov.evaluation.questions import Question
from markov.evaluation.upkeep import UPKEEP, Upkeep
from markov.model import AllOf, Model, Named
from markov.states import GeneratedSpace, generate

_METHOD = "parts solved apart, combined through the structure"


class NeedsWhole(Exception):
    """A question that parts cannot answer: the whole chain must."""


class Parts:
    """Answers questions about a plant from its independent modules.

    Parameters
    ----------
    model : Model
    modules : Modules
    times : sequence of Fraction
        Times in hours at which values will be asked for.
    limit : int
        Largest number of states of one part.
    method : str, optional
        Method for values at a time.
    """

    def __init__(
        self, model: Model, modules: Modules, times: Sequence[Fraction], limit: int, method: Method | None = None
    ) -> None:
        self.model = model
        self.structure = modules.structure
        self.answers: list[Answers] = []
        for inside in modules.inside:
            part = model.model_copy(update={"system": inside, "targets": ()})
            self.answers.append(Answers(generate(part, limit=limit), model.year_hours, times, method))

    @property
    def spaces(self) -> tuple[GeneratedSpace, ...]:
        """The chains of the parts."""
        return tuple(each.space for each in self.answers if isinstance(each.space, GeneratedSpace))

    @property
    def states(self) -> int:
        """Number of states of all parts together."""
        return sum(each.space.size for each in self.answers)

    @property
    def transitions(self) -> int:
        """Number of distinct arrows of all parts together."""
        return sum(each.arrow_count for each in self.answers)

    def can_fail(self) -> bool:
        """Tell whether a down state of the system can be reached."""
        ends = {
            f"#{number}": Share(point(1 - fails, ""), point(fails, ""))
            for number, fails in enumerate(int(each.can_fail(None)) for each in self.answers)
        }
        return combine(self.structure, ends).down.value > 0

    def answer(self, question: Question) -> Enclosure:
        """Answer one question of the whole system.

        Raises
        ------
        NeedsWhole
            Parts cannot answer it.
        IllPosed
            The question has no answer.
        """
        if question.of is not None:
            return self._inside(question)
        found = _MEASURES.get(question.measure)
        if found is None:
            raise NeedsWhole
        value = found(self, question)
        return Enclosure(value.value, value.lower, value.upper, _METHOD)

    def _inside(self, question: Question) -> Enclosure:
        """Answer a question about a group, unit or crew pool that lies in one part."""
        holding = [each for each in self.answers if _holds(each, question.of)]
        if len(holding) != 1:
            raise NeedsWhole
        if question.measure in UPKEEP:
            return Upkeep(holding[0]).answer(question)
        holding[0].expect(question)
        return holding[0].answer(question)

    # --- shares of time ------------------------------------------------------------------------------------------

    def _shares(self, at: Fraction | None) -> dict[str, Share]:
        up, down = Question("availability", at_hours=at), Question("unavailability", at_hours=at)
        return {f"#{number}": Share(each.answer(up), each.answer(down)) for number, each in enumerate(self.answers)}

    def _availability(self, question: Question) -> Enclosure:
        return combine(self.structure, self._shares(question.at_hours)).up

    def _unavailability(self, question: Question) -> Enclosure:
        return combine(self.structure, self._shares(question.at_hours)).down

    def _frequency(self, question: Question) -> Enclosure:
        shares = self._shares(question.at_hours)
        asked = Question("failure_frequency", at_hours=question.at_hours)
        total = point(0, "")
        for number, each in enumerate(self.answers):
            total = total + each.answer(asked) * critical(self.structure, shares, f"#{number}")
        return total

    def _per_year(self, value: Enclosure) -> Enclosure:
        return value.times(self.model.year_hours)

    def _failures_per_year(self, question: Question) -> Enclosure:
        return self._per_year(self._frequency(question))

    def _downtime_per_year(self, question: Question) -> Enclosure:
        return self._per_year(self._unavailability(question))

    def _divisor(self, value: Enclosure, reason: str) -> Enclosure:
        if value.upper == 0:
            raise IllPosed(reason)
        return value

    def _mean_up_time(self, question: Question) -> Enclosure:
        return self._availability(question) / self._divisor(self._frequency(question), "there are no failures to count")

    def _mean_down_time(self, question: Question) -> Enclosure:
        return self._unavailability(question) / self._divisor(
            self._frequency(question), "there are no failures to count"
        )

    def _conditional_failure_intensity(self, question: Question) -> Enclosure:
        return self._frequency(question) / self._divisor(self._availability(question), "the system is down for good")

    def _mean_capacity(self, question: Question) -> Enclosure:
        """Sum, over the levels of delivered share, the step times the probability of at least that level."""
        capacities = [each.space.capacity(None) for each in self.answers]
        levels = np.unique(np.concatenate([[0.0], *capacities]))
        total = point(0, "")
        for low, high in zip(levels[:-1].tolist(), levels[1:].tolist(), strict=True):
            shares = {
                f"#{number}": Share(
                    each.share_of_states(capacity >= high, question.at_hours),
                    each.share_of_states(capacity < high, question.at_hours),
                )
                for number, (each, capacity) in enumerate(zip(self.answers, capacities, strict=True))
            }
            total = total + combine(self.structure, shares).up.times(Fraction(high) - Fraction(low))
        return total.capped()

    def _time_without_redundancy(self, question: Question) -> Enclosure:
        thirds = {}
        for number, (each, space) in enumerate(zip(self.answers, self.spaces, strict=True)):
            open_ = space.without_redundancy(None)
            thirds[f"#{number}"] = Thirds(
                each.long_run_share(~space.up),
                each.long_run_share(space.up & ~open_),
                each.long_run_share(open_),
            )
        return self._per_year(exposed(self.structure, thirds).exposed)

    # --- first failures in series ----------------------------------------------------------------------------------

    def _series(self) -> None:
        if not isinstance(self.structure, AllOf) or not all(isinstance(part, Named) for part in self.structure.of):
            raise NeedsWhole

    def _survival(self, question: Question) -> Share:
        self._series()
        at = question.at_hours
        shares = {
            f"#{number}": Share(
                each.answer(Question("reliability", at_hours=at)), each.answer(Question("unreliability", at_hours=at))
            )
            for number, each in enumerate(self.answers)
        }
        return combine(self.structure, shares)

    def _reliability(self, question: Question) -> Enclosure:
        return self._survival(question).up

    def _unreliability(self, question: Question) -> Enclosure:
        return self._survival(question).down

    def _mean_failure_rate(self, question: Question) -> Enclosure:
        return self._survival(question).down.over(question.positive_time)

    def _hazard_rate(self, question: Question) -> Enclosure:
        self._series()
        return self._sum(question)

    def _interval_reliability(self, question: Question) -> Enclosure:
        self._series()
        total = point(1, "")
        for each in self.answers:
            total = total * each.answer(question)
        return total

    # --- what adds up ------------------------------------------------------------------------------------------------

    def _sum(self, question: Question) -> Enclosure:
        total = point(0, "")
        for each in self.answers:
            total = total + (Upkeep(each).answer(question) if question.measure in UPKEEP else each.answer(question))
        return total


def _holds(answers: Answers, subject: str | None) -> bool:
    space = answers.space
    if not isinstance(space, GeneratedSpace) or subject is None:
        return False
    return bool(space.slots_of(subject)) or any(pool.name == subject for pool in space.pools(None))


_MEASURES: dict[str, Callable[[Parts, Question], Enclosure]] = {
    "reliability": Parts._reliability,
    "unreliability": Parts._unreliability,
    "interval_reliability": Parts._interval_reliability,
    "availability": Parts._availability,
    "unavailability": Parts._unavailability,
    "steady_state_availability": Parts._availability,
    "steady_state_unavailability": Parts._unavailability,
    "pfd_average": Parts._unavailability,
    "pfd_peak": Parts._unavailability,
    "pfh": Parts._frequency,
    "failure_frequency": Parts._frequency,
    "failures_per_year": Parts._failures_per_year,
    "downtime_per_year": Parts._downtime_per_year,
    "mean_up_time": Parts._mean_up_time,
    "mean_down_time": Parts._mean_down_time,
    "conditional_failure_intensity": Parts._conditional_failure_intensity,
    "hazard_rate": Parts._hazard_rate,
    "mean_failure_rate": Parts._mean_failure_rate,
    "mean_capacity": Parts._mean_capacity,
    "mean_units_failed": Parts._sum,
    "repairs_per_year": Parts._sum,
    "starts_per_year": Parts._sum,
    "time_without_redundancy": Parts._time_without_redundancy,
}
