"""Crews: who repairs what, in which order."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from typing import ClassVar, Literal

from pydantic import Field

from markov.model.faults import Fault, choices, quote
from markov.model.part import Part
from markov.model.readers import Count, Flag, KeyName


class Crew(Part):
    """A pool of repair crews shared by several units."""

    kind = "crew pool"
    example = "{size: 1, repairs: [pump, valve]}"
    habits: ClassVar[Mapping[str, str]] = {
        "count": "write `size`",
        "number": "write `size`",
        "members": "write `repairs`",
        "units": "write `repairs`",
        "for": "write `repairs`",
        "order": "write `priority`",
        "preemption": "write `preemptive`",
    }

    size: Count = Field(description="How many units can be under repair at the same time.")
    repairs: tuple[KeyName, ...] = Field(description="The units it repairs; a unit is in one pool at most.")
    priority: tuple[KeyName, ...] | None = Field(
        None,
        description="The units of `repairs`, each once, the most urgent first.",
        json_schema_extra={"unsaid": "the order of `repairs`"},
    )
    preemptive: Flag = Field(
        True, description="Whether a more urgent unit interrupts a repair, to be resumed in its stage."
    )
    queue: Literal["priority", "first_come"] = Field(
        "priority",
        description="Who is next: `priority`, the most urgent unit; `first_come`, the one that waits longest.",
    )

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        if not self.repairs:
            yield Fault(("repairs",), "an empty list", "at least one unit", "write `repairs: [NAME]`")
        yield from self._repeated("repairs", self.repairs)
        if self.priority is None:
            return
        yield from self._repeated("priority", self.priority)
        for position, name in enumerate(self.priority):
            if name not in self.repairs:
                found = f"{quote(name)} is not among `repairs`"
                yield Fault(("priority", position), found, "the units of `repairs`", "remove it, or add it there")
        left_out = [name for name in dict.fromkeys(self.repairs) if name not in self.priority]
        if left_out:
            found = f"{choices(left_out, 'and')} left out"
            yield Fault(("priority",), found, "each unit of `repairs` exactly once", "add what is left out")

    @staticmethod
    def _repeated(key: str, listed: tuple[str, ...]) -> Iterable[Fault]:
        seen: set[str] = set()
        for position, name in enumerate(listed):
            if name in seen:
                yield Fault((key, position), f"{quote(name)} stands twice", "each unit once", "remove one of them")
            seen.add(name)

    @property
    def order(self) -> tuple[str, ...]:
        """The units from the most urgent on."""
        return self.repairs if self.priority is None else self.priority
