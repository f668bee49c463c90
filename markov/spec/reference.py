"""The tables of the language reference, made from the model itself."""

from __future__ import annotations

from collections.abc import Iterator
from types import UnionType
from typing import Literal, Union, get_args, get_origin

from pydantic.fields import FieldInfo

from markov.measures import MEASURES
from markov.model.common_causes import CommonCause
from markov.model.content import Content
from markov.model.crews import Crew
from markov.model.demand import Demand
from markov.model.durations import SpreadTime
from markov.model.failure_modes import FailureMode
from markov.model.groups import Group, Member
from markov.model.handwritten import State, Transition
from markov.model.parameters import Parameter, Uncertainty
from markov.model.part import Part
from markov.model.phases import Phase
from markov.model.proof_tests import ProofTest
from markov.model.readers import Reader
from markov.model.restoration import Restoration
from markov.model.spares import SparesPool
from markov.model.starts import InitialFaults
from markov.model.success import KEYS
from markov.model.switchovers import Switch, Switchover, Uncovered
from markov.model.targets import Mission, Target
from markov.model.units import Unit

#: Every mapping of the language with its heading, in the order of the reference.
PARTS: tuple[tuple[str, type[Part]], ...] = (
    ("Top level", Content),
    ("Parameter: `parameters.NAME`", Parameter),
    ("Uncertainty: `parameters.NAME.uncertainty`", Uncertainty),
    ("Unit: `units.NAME`", Unit),
    ("Failure mode: `units.NAME.failure_modes.NAME`", FailureMode),
    ("Time with a spread: in place of a mean time", SpreadTime),
    ("Group: `groups.NAME`", Group),
    ("Member: an entry of `members`", Member),
    ("Switchover: `groups.NAME.switchover`", Switchover),
    ("Uncovered fault: `groups.NAME.switchover.uncovered`", Uncovered),
    ("Switch: `groups.NAME.switchover.switch`", Switch),
    ("Crew pool: `crews.NAME`", Crew),
    ("Spares pool: `spares.NAME`", SparesPool),
    ("Test: `tests.NAME`", ProofTest),
    ("Common cause: `common_causes.NAME`", CommonCause),
    ("Demand: `demand`", Demand),
    ("Phase: an entry of `phases`", Phase),
    ("Restoration: `restoration`", Restoration),
    ("Units failed at the start: `initial.UNIT`", InitialFaults),
    ("Mission: `mission`", Mission),
    ("Target: an entry of `targets`", Target),
    ("State of a hand-written chain: `states.NAME`", State),
    ("Transition of a hand-written chain: an entry of `transitions`", Transition),
)

_TIMING = {
    "point": "`at`, else `mission.time`",
    "steady": "long run",
    "either": "long run, or `at`",
    "none": "from the start",
}
_LIMITS = {"share": "share", "time": "time", "rate": "rate", "number": "plain number"}


def key_tables() -> str:
    """Return a table of keys, in Markdown, for every mapping of the language."""
    return "\n".join(line for heading, part in PARTS for line in _key_table(heading, part))


def measure_table() -> str:
    """Return the table of measures in Markdown."""
    lines = ["| measure | meaning | time | value in | limit | also `of` a |", "|---|---|---|---|---|---|"]
    for measure in MEASURES.values():
        meaning = measure.meaning + (f" (**not built yet**: needs `{measure.needs}`)" if measure.needs else "")
        subjects = ", ".join("crew pool" if each == "crew" else each for each in measure.subjects) or "—"
        cells = (
            f"`{measure.name}`",
            meaning,
            _TIMING[measure.timing],
            measure.unit,
            _LIMITS[measure.limit],
            subjects,
        )
        lines.append(_row(*cells))
    return "\n".join([*lines, ""])


def _key_table(heading: str, part: type[Part]) -> Iterator[str]:
    yield from (f"### {heading}", "", "| key | value | left out | meaning |", "|---|---|---|---|")
    for key, field in part.all_keys().items():
        yield _row(f"`{key}`", _value(field), _left_out(field), field.description or "")
    if part is Content:
        for key, meaning in KEYS.items():
            yield _row(f"`{key}` inside `system`", "whole number" if key == "at_least" else "list", "", meaning)
    if part.unbuilt:
        yield from ("", "Not built yet, refused by name: " + ", ".join(f"`{key}`" for key in part.unbuilt) + ".")
    yield ""


def _row(*cells: str) -> str:
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"


def _value(field: FieldInfo) -> str:
    """Return in words what stands behind a key."""
    for hint in field.metadata:
        if isinstance(hint, Reader):
            return hint.label
    return _words(field.annotation)


def _words(annotation: object) -> str:
    origin, arguments = get_origin(annotation), get_args(annotation)
    if origin is Literal:
        return ", ".join(f"`{word}`" for word in arguments)
    if origin in (Union, UnionType):
        return " or ".join(_words(each) for each in arguments if each is not type(None))
    if origin is dict:
        return f"mapping of names to {_plural(arguments[1])}"
    if origin is tuple:
        listed = arguments[0]
        return f"list of {_words(listed) if get_origin(listed) is Literal else _plural(listed)}"
    if isinstance(annotation, type) and issubclass(annotation, Part):
        return f"mapping: {annotation.kind}"
    for hint in getattr(annotation, "__metadata__", ()):
        if isinstance(hint, Reader):
            return hint.label
    return "text"


def _plural(annotation: object) -> str:
    if isinstance(annotation, type) and issubclass(annotation, Part):
        first, *rest = annotation.kind.split(" ")
        return " ".join([f"{first}s", *rest]) if rest[:1] == ["of"] else f"{annotation.kind}s"
    words = _words(annotation)
    return words if words == "text" else f"{words}s"


def _left_out(field: FieldInfo) -> str:
    extra = field.json_schema_extra
    if isinstance(extra, dict) and "unsaid" in extra:
        return str(extra["unsaid"])
    if field.is_required():
        return "**required**"
    if field.default_factory is not None or field.default in (None, ()):
        return "—"
    if isinstance(field.default, bool):
        return "`true`" if field.default else "`false`"
    return f"`{field.default}`"


def filled(page: str) -> str:
    """Return the reference page with its tables as they should be between the marks of the page."""
    for name, table in (("keys", key_tables()), ("measures", measure_table())):
        start = page.index(f"<!-- {name}:")
        begin = page.index("-->", start) + len("-->\n")
        end = page.index(f"<!-- end of {name} -->")
        page = f"{page[:begin]}\n{table}\n{page[end:]}"
    return page
