"""Restoration of the whole system at once, in place of the repair of its units one by one."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar, Literal

from pydantic import Field

from markov.model.part import Part
from markov.model.readers import TimeAboveZero


class Restoration(Part):
    """How a system that is down is restored as a whole."""

    kind = "restoration"
    example = "{time: 3 d, to: all_good}"
    habits: ClassVar[Mapping[str, str]] = {"mean_time": "write `time`", "duration": "write `time`"}

    time: TimeAboveZero = Field(description="Mean time from the failure of the system until all is good again.")
    to: Literal["all_good"] = Field("all_good", description="What is restored: every unit and every switch.")
