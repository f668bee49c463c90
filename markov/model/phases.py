"""Phases of a mission: stretches of time with a load, a criterion and a way of repair of their own."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

from pydantic import Field

from markov.model.part import Part
from markov.model.readers import Count, Flag, KeyName, MaybeTimeAboveZero, Number
from markov.model.success import MaybeSuccess


class Phase(Part):
    """A stretch of time with rules of its own."""

    kind = "phase"
    example = "{name: winter, duration: 8 months, repair: false}"
    habits: ClassVar[Mapping[str, str]] = {
        "time": "write `duration`",
        "length": "write `duration`",
        "factors": "write `rate_factors`",
        "failure_rates": "write `rate_factors`",
        "success": "write `system`",
        "structure": "write `system`",
        "cycle": "write `repeat`",
        "id": "write `name`",
    }

    name: KeyName = Field(description="What the phase is called, each once.")
    duration: MaybeTimeAboveZero = Field(
        None,
        description="How long it lasts; needed unless it is the last and does not repeat.",
        json_schema_extra={"unsaid": "the last phase goes on"},
    )
    rate_factors: dict[KeyName, Number] = Field(
        default_factory=dict,
        description="Factors on the failure rates of units in this phase: `{UNIT: factor}`.",
        json_schema_extra={"unsaid": "1 for each unit"},
    )
    system: MaybeSuccess = Field(
        None,
        description="What has to be up in this phase.",
        json_schema_extra={"unsaid": "`system` at the top"},
    )
    required: dict[KeyName, Count] = Field(
        default_factory=dict,
        description="How many units the function needs in this phase: `{GROUP: k}`.",
        json_schema_extra={"unsaid": "`required` of each group"},
    )
    repair: Flag = Field(True, description="Whether crews and restoration work in this phase.")
    repeat: Flag = Field(
        False, description="On the last phase: whether the first follows again; otherwise the last phase goes on."
    )
