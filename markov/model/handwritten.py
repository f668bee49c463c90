"""Chains written by hand: states with the transitions between them."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from fractions import Fraction
from typing import Any, ClassVar

from pydantic import ConfigDict, Field

from markov.model.faults import Fault, quote
from markov.model.part import Part, exactly_one
from markov.model.readers import Flag, KeyName, MaybeRate, MaybeShare, MaybeText, MaybeTimeAboveZero
from markov.quantities import Quantity

_ONE_OF_RATE: dict[str, Any] = {"oneOf": [{"required": ["rate"]}, {"required": ["mean_time"]}]}


class State(Part):
    """A state of a hand-written chain."""

    kind = "state"
    example = "{up: true}"
    habits: ClassVar[Mapping[str, str]] = {
        "down": "write `up: false`",
        "failed": "write `up: false`",
        "start": "write `initial: true`",
        "absorbing": "leave out every transition from it",
        "reward": "write `capacity`",
    }

    up: Flag = Field(description="Whether the system is up in this state.")
    initial: Flag = Field(False, description="Whether the chain starts here; exactly one state says `true`.")
    capacity: MaybeShare = Field(
        None, description="Share delivered in this state.", json_schema_extra={"unsaid": "1 if up, 0 if not"}
    )


class Transition(Part):
    """A transition of a hand-written chain."""

    model_config = ConfigDict(json_schema_extra=_ONE_OF_RATE)

    kind = "transition"
    example = "{from: good, to: failed, rate: 5e-6 /h}"
    habits: ClassVar[Mapping[str, str]] = {
        "source": "write `from`",
        "target": "write `to`",
        "time": "write `mean_time`",
        "failure_rate": "write `rate`",
        "repair_time": "write `mean_time`",
        "probability": "multiply the rate by it: `rate: failures * coverage`",
        "name": "write `cause`",
        "label": "write `cause`",
    }

    source: KeyName = Field(alias="from", description="State it leaves.")
    target: KeyName = Field(alias="to", description="State it enters.")
    rate: MaybeRate = Field(None, description="Transition rate; zero means never.")
    mean_time: MaybeTimeAboveZero = Field(None, description="One divided by the rate, in place of `rate`.")
    cause: MaybeText = Field(None, description="What happens, in words.")

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        return exactly_one(cls, keys, "rate", "mean_time")

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if self.source == self.target:
            found = f"from {quote(self.source)} to itself"
            yield Fault(("to",), found, "two different states", "remove it: it changes nothing")

    @property
    def given(self) -> Quantity:
        """The rate or the mean time, whichever is written."""
        given = self.rate if self.rate is not None else self.mean_time
        assert given is not None  # exactly one of the two is checked while reading
        return given

    @property
    def hourly(self) -> Fraction:
        """Rate per hour, exact."""
        given = self.given
        return given.exact if given.dimension == "rate" else 1 / given.exact
