"""The success criterion: which groups and units have to be up for the system to be up."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from pydantic_core import PydanticCustomError

from markov.model.faults import Fault, Path, quote, raise_all, suggest
from markov.model.part import describe
from markov.model.readers import Context, Reader, ReadsCount, ReadsName

#: Deepest nesting of a criterion.
DEEPEST = 50


@dataclass(frozen=True)
class Named:
    """A group or a unit has to be up."""

    name: str


@dataclass(frozen=True)
class AllOf:
    """Every one has to be up."""

    of: tuple[Success, ...]


@dataclass(frozen=True)
class AnyOf:
    """One has to be up."""

    of: tuple[Success, ...]


@dataclass(frozen=True)
class AtLeast:
    """A number of them has to be up."""

    count: int
    of: tuple[Success, ...]


Success = Named | AllOf | AnyOf | AtLeast

#: Keys of a criterion, with their meaning; for the reference and for editors.
KEYS: Mapping[str, str] = {
    "all_of": "List of criteria that all have to hold.",
    "any_of": "List of criteria of which one has to hold.",
    "at_least": "How many of the criteria in `of` have to hold.",
    "of": "List of criteria, beside `at_least`.",
}
_FORMS = "a name, `{all_of: […]}`, `{any_of: […]}` or `{at_least: k, of: […]}`"
_HABITS = {"and": "write `all_of`", "series": "write `all_of`", "or": "write `any_of`", "parallel": "write `any_of`"}


def names(success: Success) -> tuple[str, ...]:
    """Return the groups and units that a criterion names, each once, in the order of the text."""
    return tuple(dict.fromkeys(name for _, name in places(success)))


def places(success: Success) -> Iterator[tuple[Path, str]]:
    """Yield each name with its path below the criterion."""
    match success:
        case Named():
            yield (), success.name
        case AllOf() | AnyOf() | AtLeast():
            key = {AllOf: "all_of", AnyOf: "any_of", AtLeast: "of"}[type(success)]
            for position, each in enumerate(success.of):
                for path, name in places(each):
                    yield (key, position, *path), name


def read_success(value: object, context: Context) -> Success:
    """Read a criterion, all its faults at once."""
    if isinstance(value, Named | AllOf | AnyOf | AtLeast):
        return value
    faults: list[Fault] = []
    success = _read(value, context, (), faults)
    raise_all(faults)
    assert success is not None  # without faults there is a criterion
    return success


def _read(value: object, context: Context, path: Path, faults: list[Fault]) -> Success | None:
    if len(path) > 2 * DEEPEST:
        faults.append(Fault(path, "criteria are nested too deep", f"at most {DEEPEST} levels", "name parts as groups"))
        return None
    if not isinstance(value, Mapping):
        if isinstance(value, list | tuple) or value in ("", None):
            faults.append(Fault(path, describe(value), _FORMS, "write `{all_of: […]}` if all are needed"))
            return None
        try:
            return Named(ReadsName().read(value, context, ""))
        except PydanticCustomError as error:
            faults.append(_told(error, path))
            return None
    keys = {str(key): each for key, each in value.items()}
    form = next((key for key in ("all_of", "any_of", "at_least") if key in keys), None)
    allowed = {"at_least", "of"} if form == "at_least" else {form} if form else set()
    for key in keys:
        if key not in allowed:
            fix = _HABITS.get(key.lower()) or suggest(key, [*KEYS], "write one form alone")
            fix = "write one form alone" if key in KEYS else fix
            faults.append(Fault((*path, key), f"{quote(key)} does not belong here", _FORMS, fix, on_key=True))
    if form is None:
        if not keys:
            faults.append(Fault(path, "an empty mapping stands here", _FORMS, "write a name"))
        return None
    listed = "of" if form == "at_least" else form
    inner = _read_list(keys.get(listed), context, (*path, listed), faults)
    if form != "at_least":
        return None if inner is None else AllOf(inner) if form == "all_of" else AnyOf(inner)
    return _at_least(keys, inner, context, path, faults)


def _read_list(value: object, context: Context, path: Path, faults: list[Fault]) -> tuple[Success, ...] | None:
    if not isinstance(value, list | tuple) or not value:
        key = str(path[-1])
        found = f"{quote(key)} is missing" if value is None else describe(value) if value else "an empty list"
        where = path[:-1] if value is None else path
        faults.append(Fault(where, found, "a list of names or criteria", f"write `{key}: [NAME, NAME]`"))
        return None
    read = [_read(each, context, (*path, position), faults) for position, each in enumerate(value)]
    good = tuple(each for each in read if each is not None)
    return good if len(good) == len(read) else None


def _at_least(
    keys: Mapping[str, object],
    inner: tuple[Success, ...] | None,
    context: Context,
    path: Path,
    faults: list[Fault],
) -> Success | None:
    try:
        count: int = ReadsCount().read(keys["at_least"], context, "at_least")
    except PydanticCustomError as error:
        faults.append(_told(error, (*path, "at_least")))
        return None
    if inner is None:
        return None
    if count > len(inner):
        found = f"at least {count} of {len(inner)}"
        faults.append(Fault((*path, "at_least"), found, f"a number from 1 to {len(inner)}", "lower it"))
    return AtLeast(count, inner)


def _told(error: PydanticCustomError, path: Path) -> Fault:
    told = error.context or {}
    return Fault(path, told.get("found", ""), told.get("expected", ""), told.get("fix", ""))


#: Stands in a schema where a criterion is meant; `markov.model.schema` puts the reference in its place.
SCHEMA_MARK = {"x-markov": "success"}


@dataclass(frozen=True)
class ReadsSuccess(Reader):
    """Reads a success criterion."""

    label: ClassVar[str] = "name or criterion"

    def json_schema(self) -> dict[str, Any]:
        """See `Reader`."""
        return dict(SCHEMA_MARK)

    def read(self, value: object, context: Context, key: str) -> Success:
        """See `Reader`."""
        return read_success(value, context)


MaybeSuccess = Annotated[Success | None, ReadsSuccess()]


def schema_of_success() -> dict[str, Any]:
    """Return the JSON Schema of a criterion, as ``#/$defs/Success``."""
    several = {"type": "array", "items": {"$ref": "#/$defs/Success"}, "minItems": 1}

    def form(*keys: str) -> dict[str, Any]:
        properties = {
            key: {**({"type": "integer", "minimum": 1} if key == "at_least" else several), "description": KEYS[key]}
            for key in keys
        }
        return {"type": "object", "properties": properties, "required": list(keys), "additionalProperties": False}

    return {
        "title": "Success criterion",
        "description": f"What has to be up: {_FORMS}.",
        "anyOf": [
            {"type": ["string", "number", "integer", "boolean"]},
            form("all_of"),
            form("any_of"),
            form("at_least", "of"),
        ],
    }
