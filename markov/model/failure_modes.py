"""Failure modes: the ways in which a unit can fail, each with its share of the failure rate."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Literal

from pydantic import Field

from markov.model.durations import MaybeShapedTime, TimeShape, shape_of
from markov.model.part import Part
from markov.model.readers import MaybeShare, Share
from markov.quantities import Quantity

Effect = Literal["fails_to_act", "acts_needlessly"]


class FailureMode(Part):
    """One way in which a unit can fail."""

    kind = "failure mode"
    example = "{share: 40 %, detected: 90 %}"
    habits: ClassVar[Mapping[str, str]] = {
        "fraction": "write `share`",
        "probability": "write `share`",
        "rate": "write the `share` of the unit's failure rate",
        "failure_rate": "write the `share` of the unit's failure rate",
        "coverage": "write `detected`",
        "diagnostic_coverage": "write `detected`",
        "safe": "write `effect: acts_needlessly`",
        "dangerous": "write `effect: fails_to_act`",
    }

    share: Share = Field(description="Share of the unit's failure rate; those of one unit sum to 1.")
    detected: MaybeShare = Field(
        None,
        description="Share of the faults of this mode that is known at once.",
        json_schema_extra={"unsaid": "`detected` of the unit"},
    )
    effect: Effect = Field(
        "fails_to_act",
        description="`fails_to_act`: the unit does not deliver; `acts_needlessly`: it acts without being asked.",
    )
    repair_time: MaybeShapedTime = Field(
        None,
        description="Mean repair time after a fault of this mode; `0 h` means renewed at once.",
        json_schema_extra={"unsaid": "the repair of the unit"},
    )

    @property
    def repair_time_shape(self) -> TimeShape | None:
        """Law of `repair_time` where it has a spread."""
        return shape_of(self.repair_time)


@dataclass(frozen=True)
class Mode:
    """One way in which a unit can fail, with what it takes over from the unit.

    Attributes
    ----------
    name : str
        Empty where the unit has one mode only.
    share : Quantity or None
        Share of the failure rate; None: all of it.
    detected : Quantity or None
        Share of its faults that is known at once; None: all of them.
    needless : bool
        Whether the unit acts needlessly.
    repair : Quantity or None
        A mean time or a rate, whichever is written; None: never repaired.
    repair_shape : TimeShape or None
    """

    name: str
    share: Quantity | None
    detected: Quantity | None
    needless: bool
    repair: Quantity | None
    repair_shape: TimeShape | None

    @property
    def repairable(self) -> bool:
        """Whether a repair is written that ever ends."""
        return self.repair is not None and not (self.repair.dimension == "rate" and self.repair.is_zero)

    @property
    def repaired_at_once(self) -> bool:
        """Whether a known fault of this mode is repaired in the moment it is known."""
        return self.repair is not None and self.repair.dimension == "time" and self.repair.is_zero

    @property
    def occurs(self) -> bool:
        """Whether the mode has a share above zero."""
        return self.share is None or not self.share.is_zero

    @property
    def may_hide(self) -> bool:
        """Whether some of its faults are not known at once."""
        return self.occurs and self.detected is not None and self.detected.complement != 0
