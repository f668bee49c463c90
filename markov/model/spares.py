"""Spares: what is kept in stock, how it is ordered, how a failed unit is exchanged."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from typing import ClassVar, Literal

from pydantic import Field

from markov.model.durations import MaybeShapedTime, ShapedTimeAboveZero, TimeShape, shape_of
from markov.model.faults import Fault
from markov.model.part import Part
from markov.model.readers import Count, Names

#: Most spares of a pool, and of one order: each is a state of its own.
MOST_SPARES = 1000


class SparesPool(Part):
    """A stock of spares for one or several kinds of unit."""

    kind = "spares pool"
    example = "{for: [pump], stock: 1, lead_time: 3 weeks}"
    habits: ClassVar[Mapping[str, str]] = {
        "units": "write `for`",
        "of": "write `for`",
        "repairs": "write `for`",
        "size": "write `stock`",
        "count": "write `stock`",
        "number": "write `stock`",
        "delivery_time": "write `lead_time`",
        "delivery": "write `lead_time`",
        "exchange_time": "write `swap_time`",
        "replacement_time": "write `swap_time`",
        "time": "write `lead_time` or `swap_time`",
        "policy": "write `order`",
        "lot": "write `batch`",
    }

    for_: Names = Field(alias="for", description="Kinds of unit that a spare fits; a kind has one pool at most.")
    stock: Count = Field(description="Spares in stock at the start.")
    lead_time: ShapedTimeAboveZero = Field(description="Mean time from an order to its arrival.")
    swap_time: MaybeShapedTime = Field(
        None,
        description="Mean time of the exchange once a spare is there; holds no crew.",
        json_schema_extra={"unsaid": "`0 h`"},
    )
    order: Literal["when_drawn", "when_failed"] = Field(
        "when_drawn",
        description="`when_drawn`: a spare is ordered when one leaves the stock; `when_failed`: at every fault, also "
        "while the stock is empty.",
    )
    batch: Count = Field(1, description="Size of an order: one for so many draws or faults, which arrives whole.")

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        for key, number in (("stock", self.stock), ("batch", self.batch)):
            if key not in unread and number > MOST_SPARES:
                found = f"{number:,} spares"
                fix = "write less: what never runs out needs no stock, but `repair_time`"
                yield Fault((key,), found, f"at most {MOST_SPARES:,}", fix)

    @property
    def lead_time_shape(self) -> TimeShape | None:
        """Law of `lead_time` where it has a spread."""
        return shape_of(self.lead_time)

    @property
    def swap_time_shape(self) -> TimeShape | None:
        """Law of `swap_time` where it has a spread."""
        return shape_of(self.swap_time)
