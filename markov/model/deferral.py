"""When repair begins: at once, or once something calls for it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar, Literal

from pydantic_core import PydanticCustomError

from markov.model.faults import Fault, choices, quote, raise_all, refuse, suggest
from markov.model.part import describe
from markov.model.readers import Context, Reader, Reads, ReadsCount
from markov.quantities import Quantity

#: Repair begins at the fault.
AT_ONCE: Literal["at_once"] = "at_once"

_WORDS = ("at_once", "system_down")
_FORMS = "`at_once`, `system_down`, `{failed: k}` or `{visits_every: time}`"
_HABITS = {
    "every": "visits_every",
    "visits": "visits_every",
    "interval": "visits_every",
    "count": "failed",
    "at_least": "failed",
}


@dataclass(frozen=True)
class RepairAtFailed:
    """Repair begins once so many units of the group are known to be failed."""

    failed: int


@dataclass(frozen=True)
class RepairAtVisits:
    """Repair begins at fixed instants, the first after one interval."""

    every: Quantity


@dataclass(frozen=True)
class ReadsRepairWhen(Reader):
    """Reads when repair begins."""

    label: ClassVar[str] = _FORMS

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""

        def form(key: str, value: dict[str, Any], meaning: str) -> dict[str, Any]:
            value = {**value, "description": meaning}
            return {"type": "object", "properties": {key: value}, "required": [key], "additionalProperties": False}

        return {
            "anyOf": [
                {"enum": list(_WORDS)},
                form("failed", ReadsCount().json_schema(), "Repair begins once so many units are known to be failed."),
                form("visits_every", Reads("time").json_schema(), "Repair begins at visits, so long apart."),
            ]
        }

    def read(self, value: object, context: Context, key: str) -> str | RepairAtFailed | RepairAtVisits:
        """See `Reader`."""
        if isinstance(value, RepairAtFailed | RepairAtVisits):
            return value
        if isinstance(value, str) and value:
            word = value.strip()
            if word not in _WORDS:
                fix = suggest(word, _WORDS, "write one of these")
                refuse(f"{quote(word)} is no choice for `repair_when`", _FORMS, fix)
            return word
        if not isinstance(value, Mapping):
            refuse(describe(value), _FORMS, "write one of these")
        if not value:
            refuse("an empty mapping stands here", _FORMS, "write one of these")
        return _read_form({str(name): each for name, each in value.items()}, context)


def _read_form(written: Mapping[str, object], context: Context) -> RepairAtFailed | RepairAtVisits:
    forms = ("failed", "visits_every")
    faults = []
    for name in written:
        if name not in forms:
            meant = _HABITS.get(name.lower())
            fix = f"write {quote(meant)}" if meant else suggest(name, forms, f"write {choices(forms)}")
            faults.append(Fault((name,), f"{quote(name)} is not a key here", _FORMS, fix, on_key=True))
    if not faults and len(written) > 1:
        fault = "`failed` and `visits_every` both stand here"
        faults.append(Fault(("visits_every",), fault, "one of them", "remove one", on_key=True))
    raise_all(faults)
    ((name, each),) = written.items()
    try:
        if name == "failed":
            return RepairAtFailed(ReadsCount().read(each, context, name))
        return RepairAtVisits(Reads("time", above_zero=True).read(each, context, name))
    except PydanticCustomError as error:
        told = error.context
        if told is None:
            raise_all((), [(name,)])
        else:
            raise_all([Fault((name,), told["found"], told["expected"], told["fix"])])
        raise  # never reached: one of the two raises


RepairWhen = Annotated[Literal["at_once", "system_down"] | RepairAtFailed | RepairAtVisits, ReadsRepairWhen()]
