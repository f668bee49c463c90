"""Proof tests: what is tested when, what a test finds, what it does to the unit."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from typing import ClassVar

from pydantic import Field

from markov.model.faults import Fault, quote
from markov.model.part import Part
from markov.model.readers import Flag, MaybeShare, MaybeTime, MaybeTimeAboveZero, Names, TimeAboveZero
from markov.quantities import Quantity


class ProofTest(Part):
    """A test at fixed instants that finds hidden faults."""

    kind = "test"
    example = "{of: [fan], interval: 1 y, coverage: 90 %}"
    habits: ClassVar[Mapping[str, str]] = {
        "units": "write `of`",
        "for": "write `of`",
        "members": "write `of`",
        "every": "write `interval`",
        "period": "write `interval`",
        "first": "write `first_at`",
        "offset": "write `first_at`",
        "time": "write `duration`",
        "test_time": "write `duration`",
        "online": "write `in_service`",
    }

    of: Names = Field(
        description="What is tested: kinds of unit, `GROUP.unit` for those in one group, `GROUP.switch` for its switch."
    )
    interval: TimeAboveZero = Field(description="Time from one test to the next.")
    first_at: MaybeTimeAboveZero = Field(
        None, description="Time of the first test, from the start.", json_schema_extra={"unsaid": "one `interval`"}
    )
    coverage: MaybeShare = Field(
        None,
        description="Share of the hidden faults that the test can find; what one test can find, one of a higher "
        "coverage finds, too.",
        json_schema_extra={"unsaid": "`100 %`"},
    )
    duration: MaybeTime = Field(
        None, description="How long a test lasts, always the same.", json_schema_extra={"unsaid": "`0 h`"}
    )
    in_service: Flag = Field(False, description="Whether the unit delivers during a test that lasts.")
    left_out: MaybeShare = Field(
        None,
        description="Chance that the unit stays out of service after the test, unnoticed until the next one.",
        json_schema_extra={"unsaid": "`0`"},
    )
    causes_failure: MaybeShare = Field(
        None,
        description="Chance that the test makes the unit fail, which is known.",
        json_schema_extra={"unsaid": "`0`"},
    )
    bypass: Flag = Field(
        False,
        description="Whether the group needs as many units fewer as are under test while a test that lasts runs.",
    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.duration is not None and self.duration.exact >= self.interval.exact:
            yield Fault(
                ("duration",),
                f"a test of {quote(self.duration.text)} every {quote(self.interval.text)}",
                "a `duration` shorter than the `interval`",
                "correct one of them",
            )
        for position, name in enumerate(self.of):
            if name in self.of[:position]:
                yield Fault(("of", position), f"{quote(name)} stands twice", "each once", "remove one of them")

    @property
    def first(self) -> Quantity:
        """Time of the first test."""
        return self.interval if self.first_at is None else self.first_at

    @property
    def lasts(self) -> bool:
        """Whether the test takes time."""
        return self.duration is not None and not self.duration.is_zero

    @property
    def takes_out(self) -> bool:
        """Whether the tested units do not deliver while the test runs."""
        return self.lasts and not self.in_service
