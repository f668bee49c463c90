"""Targets: what is asked of the plant, by when, against which limit."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Annotated, Any, ClassVar, Literal

from pydantic import ConfigDict, Field
from pydantic_core import PydanticCustomError

from markov.measures import MEASURES, Measure
from markov.model.faults import Fault, quote, refuse, suggest
from markov.model.part import Part, exactly_one
from markov.model.readers import Context, KeyName, MaybeName, MaybeTime, Reader, Reads, Time, as_text
from markov.quantities import Quantity

Direction = Literal["at_least", "at_most"]

_LIMITS = {
    "share": "a share from 0 to 1",
    "time": "a time",
    "rate": "a rate",
    "number": "a plain number",
}
_ONE_LIMIT: dict[str, Any] = {"oneOf": [{"required": ["at_least"]}, {"required": ["at_most"]}]}
_HABITS = {
    "mttf": "mean_time_to_first_failure",
    "mttff": "mean_time_to_first_failure",
    "mtbf": "mean_up_time",
    "mut": "mean_up_time",
    "mdt": "mean_down_time",
    "mttr": "mean_down_time",
    "pfd": "pfd_average",
    "pfdavg": "pfd_average",
    "downtime": "downtime_per_year",
    "steady_state": "steady_state_availability",
}


class Mission(Part):
    """How long the plant has to work."""

    kind = "mission"
    example = "{time: 1 y}"
    habits: ClassVar[Mapping[str, str]] = {"duration": "write `time`", "length": "write `time`"}

    time: Time = Field(description="Time at which measures that need one are taken, unless a target says `at`.")


@dataclass(frozen=True)
class ReadsMeasure(Reader):
    """Reads the name of a measure."""

    label: ClassVar[str] = "measure"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        built = [name for name, measure in MEASURES.items() if not measure.needs]
        return {"enum": built, "enumDescriptions": [MEASURES[name].meaning for name in built]}

    def read(self, value: object, context: Context, key: str) -> str:
        """See `Reader`."""
        text = as_text(value)
        measure = MEASURES.get(text)
        if measure is None:
            meant = _HABITS.get(text.lower())
            fix = f"write {quote(meant)} if that is meant" if meant else suggest(text, MEASURES, "see specs/README.md")
            refuse(f"{quote(text)} is no measure" if text else "nothing is written here", "a measure by its name", fix)
        if measure.needs:
            refuse(
                f"{quote(text)} is not built yet (it needs {quote(measure.needs)})",
                "a measure that is built",
                "remove the target",
            )
        return text


class Target(Part):
    """A limit on one measure."""

    model_config = ConfigDict(json_schema_extra=_ONE_LIMIT)

    kind = "target"
    example = "{id: A-1, measure: steady_state_availability, at_least: 0.999}"
    habits: ClassVar[Mapping[str, str]] = {
        "name": "write `id`",
        "time": "write `at`",
        "min": "write `at_least`",
        "minimum": "write `at_least`",
        "max": "write `at_most`",
        "maximum": "write `at_most`",
        "limit": "write `at_least` or `at_most`",
        "value": "write `at_least` or `at_most`",
        "above": "write `at_least`",
        "below": "write `at_most`",
        "group": "write `of`",
        "unit": "write `of`",
        "duration": "write `for`",
    }

    id: KeyName = Field(description="Name of the requirement, each once.")
    measure: Annotated[str, ReadsMeasure()] = Field(description="What is limited; see the table of measures.")
    of: MaybeName = Field(
        None, description="Group, unit or crew pool that is meant.", json_schema_extra={"unsaid": "the system"}
    )
    state: MaybeName = Field(None, description="State that is meant; for `state_probability` only.")
    at: MaybeTime = Field(
        None,
        description="Time, where the measure takes one.",
        json_schema_extra={"unsaid": "`mission.time`, or the long run where the measure allows both"},
    )
    for_: MaybeTime = Field(None, alias="for", description="Length of the interval; for `interval_reliability` only.")
    at_least: Annotated[Quantity | None, Reads("any")] = Field(None, description="Limit where high is good.")
    at_most: Annotated[Quantity | None, Reads("any")] = Field(None, description="Limit where low is good.")

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        return exactly_one(cls, keys, "at_least", "at_most")

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        measure = self.asked
        name = quote(self.measure)
        if fault := self._limit_fault(measure):
            yield fault
        if self.at is not None and measure.timing in ("steady", "none"):
            why = "a long-run value" if measure.timing == "steady" else "not taken at a time"
            yield Fault(("at",), f"`at` for {name}, which is {why}", "no time", self._timed(), on_key=True)
        if "for" not in unread:
            yield from self._paired("for", self.for_ is not None, "interval_reliability", "`for: 8 h`")
        if "state" not in unread:
            yield from self._paired("state", self.state is not None, "state_probability", "`state: NAME`")
        if self.state is not None and self.of is not None:
            yield Fault(("of",), "`of` beside `state`", "a state of the whole system", "remove `of`", on_key=True)

    def _paired(self, key: str, written: bool, measure: str, example: str) -> Iterable[Fault]:
        if written and self.measure != measure:
            found = f"{quote(key)} for {quote(self.measure)}"
            yield Fault((key,), found, f"{quote(key)} with {quote(measure)} only", "remove it", on_key=True)
        if not written and self.measure == measure:
            found = f"{quote(key)} is missing"
            yield Fault((), found, f"{quote(measure)} with its {quote(key)}", f"add {example}", on_key=True)

    def _timed(self) -> str:
        """Return the fix for a time that the measure cannot have: its relative at a time, if there is one."""
        relatives = {
            "steady_state_availability": "availability",
            "steady_state_unavailability": "unavailability",
            "failures_per_year": "expected_failures",
            "downtime_per_year": "mean_unavailability",
        }
        relative = relatives.get(self.measure)
        return f"remove it, or ask for {quote(relative)}" if relative else "remove it"

    def _limit_fault(self, measure: Measure) -> Fault | None:
        limit = self.limit_quantity
        try:
            Reads(measure.limit).read(limit, Context(), self.direction)
        except PydanticCustomError as error:
            told = error.context or {}
            fix = told["fix"]
            if measure.limit == "number" and limit.dimension == "rate" and measure.unit == "1/y":
                fix = "write the number alone: the measure counts per year"
            elif measure.name == "downtime_per_year":
                fix = "write the hours per year as a time, such as 5 h"
            expected = f"{_LIMITS[measure.limit]}, as {quote(measure.name)} is one"
            return Fault((self.direction,), told["found"], expected, fix)
        return None

    @property
    def asked(self) -> Measure:
        """The measure with its unit and timing."""
        return MEASURES[self.measure]

    @property
    def direction(self) -> Direction:
        """Which side of the limit is good."""
        return "at_least" if self.at_least is not None else "at_most"

    @property
    def limit_quantity(self) -> Quantity:
        """The limit as a quantity."""
        limit = self.at_least if self.at_least is not None else self.at_most
        assert limit is not None  # exactly one of the two is checked while reading
        return limit

    @property
    def limit(self) -> Fraction:
        """The limit, exact, in hours, per hour or plain."""
        return self.limit_quantity.exact

    @property
    def limit_text(self) -> str:
        """The limit as written."""
        return self.limit_quantity.text

    @property
    def is_against_the_measure(self) -> bool:
        """Whether the limit points the other way than what is good: availability at most, downtime at least."""
        return self.asked.low_is_good == (self.direction == "at_least") and self.measure != "state_probability"
