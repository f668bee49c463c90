"""Faults that are there at the start, and the places that hold units."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from pydantic import ConfigDict, Field

from markov.model.faults import Fault, refuse
from markov.model.part import Part, describe
from markov.model.readers import CountFromZero

_SOME: dict[str, Any] = {"anyOf": [{"required": ["failed"]}, {"required": ["hidden"]}]}


class InitialFaults(Part):
    """How many units of a kind are failed at the start."""

    model_config = ConfigDict(json_schema_extra=_SOME)

    kind = "number of units failed at the start"
    example = "{failed: 1}"
    habits: ClassVar[Mapping[str, str]] = {"count": "write `failed`", "latent": "write `hidden`"}

    failed: CountFromZero = Field(0, description="How many are known to be failed, from the lowest rank up.")
    hidden: CountFromZero = Field(0, description="How many more have a hidden fault.")

    @classmethod
    def expand(cls, data: object) -> Mapping[str, object]:
        """Read the words ``failed`` and ``hidden`` as one unit."""
        if isinstance(data, str) and data in ("failed", "hidden"):
            return {data: 1}
        refuse(describe(data), "`failed`, `hidden`, or `{failed: n, hidden: m}`", "write one of these")

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        if not {"failed", "hidden"} & set(keys):
            yield cls.missing("failed", "hidden")


@dataclass(frozen=True)
class Placement:
    """Items of one kind in one place: in a group, or alone where `group` is None."""

    group: str | None
    unit: str
    count: int

    @property
    def key(self) -> str:
        """How a spec may call it without doubt."""
        return self.unit if self.group is None else f"{self.group}.{self.unit}"

    @property
    def name(self) -> str:
        """Group it stands in, or the unit itself where it stands alone."""
        return self.unit if self.group is None else self.group
