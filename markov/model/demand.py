"""Demands on a plant that has to act when it is called."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

from pydantic import Field

from markov.model.part import Part
from markov.model.readers import HourlyRate


class Demand(Part):
    """How often the plant is called to act."""

    kind = "demand"
    example = "{rate: 2 /y}"
    habits: ClassVar[Mapping[str, str]] = {"frequency": "write `rate`", "interval": "write `rate: 1 / …`"}

    rate: HourlyRate = Field(
        description="Rate of demands; one that meets a down system is a hazardous event, and each reveals the hidden "
        "faults of units with `revealed_by: [demand]`."
    )
