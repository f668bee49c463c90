"""The common form of everything a spec holds: a frozen mapping of known keys whose faults are told all at once."""

from __future__ import annotations

import re
from collections.abc import Collection, Iterable, Mapping
from itertools import islice
from typing import Any, ClassVar, Literal, get_args, get_origin

from pydantic import BaseModel, ConfigDict, ModelWrapValidatorHandler, ValidationError, ValidationInfo, model_validator
from pydantic.fields import FieldInfo

from markov.model.faults import Fault, Path, choices, gathered, nearest, quote, raise_all, refuse, suggest

_QUOTED = re.compile(r"`(\w+)")
#: Most unknown keys of one mapping for which a known one is guessed.
_MOST_GUESSED = 100


class Part(BaseModel):
    """One mapping of a spec.

    A subclass lists its keys as fields.  What concerns several keys at once goes into `_key_faults` where the mere
    presence of keys decides, and into `_faults` where their values do.
    """

    # By name only from Python code: the reader of specs allows the keys of the language alone.
    model_config = ConfigDict(frozen=True, extra="forbid", validate_by_name=True, validate_by_alias=True)

    #: What the mapping is called in a message.
    kind: ClassVar[str]
    #: The key that is meant where a single value stands in place of the mapping.
    short_form: ClassVar[str | None] = None
    #: How a good one looks, for messages.
    example: ClassVar[str] = ""
    #: Keys of the language that this version refuses by name, each with what it is about.
    unbuilt: ClassVar[Mapping[str, str]] = {}
    #: Values of the language that this version refuses by name.
    unbuilt_values: ClassVar[Mapping[str, Collection[str]]] = {}
    #: Words of the trade that are no keys here, each with the fix.
    habits: ClassVar[Mapping[str, str]] = {}

    @classmethod
    def all_keys(cls) -> dict[str, FieldInfo]:
        """Return the keys as they are written, in the order of the reference."""
        return {each.alias or name: each for name, each in cls.model_fields.items()}

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        """Return what is wrong with this set of keys; a misspelt key counts as the one that is meant."""
        return ()

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        """Return what is wrong between values that are each in order; `unread` names the keys that are not."""
        return ()

    def is_said(self, key: str) -> bool:
        """Whether the spec writes this key itself."""
        return key in self.model_fields_set

    @model_validator(mode="wrap")
    @classmethod
    def _collect(cls, data: Any, handler: ModelWrapValidatorHandler[Any], info: ValidationInfo) -> Any:
        if isinstance(data, cls):
            return data
        if not isinstance(data, Mapping):
            data = cls.expand(data)
        data = dict(data)
        meant: dict[str, str] = {}
        faults: list[Fault] = []
        silent: list[Path] = []
        value = None
        try:
            value = handler(data)
        except ValidationError as error:
            faults, others, silent = gathered(error)
            meant = cls.meant_by(str(path[0]) for kind, path, _ in others if kind == "extra_forbidden" and path)
            faults += cls._worded(others, meant)
        unread = {str(fault.path[0]) for fault in faults if fault.path} | {str(path[0]) for path in silent if path}
        unread |= {*meant.values()}
        # What is wrong only with, or only without, a guessed key is no fault beside that of the unknown key itself.
        written = {*map(str, data)}
        with_guesses = set(cls._key_faults(written | unread))
        faults += [fault for fault in cls._key_faults(written) if fault in with_guesses]
        left = {key for key in written if key in cls.all_keys() and key not in unread} if unread else written
        if unread and cls._faults is not Part._faults:
            value = cls._what_is_left(data, handler, left)
        if value is not None and not any(cls._key_faults(left)):
            faults += value._faults(unread)
        raise_all(faults, silent)
        return value

    @classmethod
    def _what_is_left(cls, data: dict[str, Any], handler: ModelWrapValidatorHandler[Any], left: set[str]) -> Any:
        """Read the keys that are in order, so that faults between them are told, too."""
        try:
            return handler({key: value for key, value in data.items() if key in left})
        except ValidationError:
            return None

    @classmethod
    def expand(cls, data: object) -> Mapping[str, object]:
        """Return the mapping that a single value stands for, or refuse it."""
        if cls.short_form is not None and data != "" and not isinstance(data, list | tuple):
            return {cls.short_form: data}
        example = f", such as `{cls.example}`" if cls.example else ""
        fix = f"write {choices([*cls.all_keys()], 'and', most=5)} under it{example}"
        refuse(describe(data), f"a mapping that says the {cls.kind}", fix)

    @classmethod
    def meant_by(cls, written: Iterable[str]) -> dict[str, str]:
        """Return, for unknown keys, the known ones that they most likely stand for."""
        keys = cls.all_keys()
        unknown = (key for key in written if key not in keys and key not in cls.unbuilt)
        guesses = ((key, cls._habit(key) or nearest(key, keys)) for key in islice(unknown, _MOST_GUESSED))
        return {key: guess for key, guess in guesses if guess is not None}

    @classmethod
    def _habit(cls, key: str) -> str | None:
        """Return the key that a word of the trade stands for."""
        words = _QUOTED.findall(cls.habits.get(key.lower(), ""))
        known = cls.all_keys()
        return next((word for word in words if word in known), None)

    @classmethod
    def _worded(cls, others: Iterable[tuple[str, Path, object]], meant: Mapping[str, str]) -> list[Fault]:
        """Put into words what the validation library found in this mapping."""
        faults = []
        for kind, path, value in others:
            key = str(path[0]) if path else ""
            if kind == "extra_forbidden":
                faults.append(cls._unknown_key(key, meant.get(key)))
            elif kind == "missing":
                if key not in meant.values():
                    faults.append(cls.missing(key))
            elif kind == "literal_error":
                faults.append(cls._wrong_choice(key, path, value))
            else:
                faults.append(cls._wrong_form(key, path, value))
        return faults

    @classmethod
    def missing(cls, key: str, *or_else: str) -> Fault:
        """Return the fault of a key that has to be there."""
        wanted = choices([key, *or_else])
        return Fault((), f"{wanted} is missing", f"each {cls.kind} says it", f"add {quote(key)}", on_key=True)

    @classmethod
    def _unknown_key(cls, key: str, meant: str | None) -> Fault:
        expected = f"the keys of a {cls.kind}: {choices([*cls.all_keys()], 'and', most=40)}"
        if key in cls.unbuilt:
            return Fault(
                (key,),
                f"{quote(key)} is not built yet ({cls.unbuilt[key]})",
                "a spec without it",
                "remove it; a number without its effect would be for another plant",
                on_key=True,
            )
        if key.lower() in cls.habits:
            return Fault((key,), f"{quote(key)} is not a key here", expected, cls.habits[key.lower()], on_key=True)
        fix = f"write {quote(meant)}" if meant else "remove it, or see specs/README.md for what there is"
        return Fault((key,), f"{quote(key)} is not a key here", expected, fix, on_key=True)

    @classmethod
    def _wrong_choice(cls, key: str, path: tuple[str | int, ...], value: object) -> Fault:
        known = cls.all_keys().get(key)
        allowed = allowed_words(known.annotation) if known is not None else ()
        unbuilt = cls.unbuilt_values.get(key, ())
        if value in unbuilt if isinstance(value, str) else unbuilt and isinstance(value, Mapping):
            written = quote(value) if isinstance(value, str) else f"this form of {quote(key)}"
            return Fault(path, f"{written} is not built yet", choices(allowed), "use what is built")
        found = f"{quote(value)} is no choice for {quote(key)}" if isinstance(value, str) and value else describe(value)
        fix = suggest(value, allowed, "write one of these") if isinstance(value, str) else "write one of these"
        return Fault(path, found, choices(allowed), fix)

    @classmethod
    def _wrong_form(cls, key: str, path: tuple[str | int, ...], value: object) -> Fault:
        known = cls.all_keys().get(key)
        annotation = known.annotation if known is not None else None
        if any(get_origin(each) is tuple for each in (annotation, *get_args(annotation))):
            return Fault(path, describe(value), f"a list under {quote(key)}", "write each entry on a line after `-`")
        return Fault(path, describe(value), f"a mapping under {quote(key)}", "write `name: …` lines under it")


def allowed_words(annotation: object) -> tuple[str, ...]:
    """Return the words that a choice allows."""
    if get_origin(annotation) is Literal:
        return tuple(str(word) for word in get_args(annotation))
    return tuple(word for part in get_args(annotation) for word in allowed_words(part))


def describe(value: object) -> str:
    """Return what stands in a place, in words."""
    match value:
        case Mapping():
            return "a mapping stands here"
        case list() | tuple():
            return "a list stands here"
        case "" | None:
            return "nothing is written here"
        case str():
            return f"{quote(value)} stands here"
    return f"{quote(str(value))} stands here"


def exactly_one(cls: type[Part], keys: Collection[str], *candidates: str) -> Iterable[Fault]:
    """Return a fault unless exactly one of the candidates is among the keys."""
    present = [key for key in candidates if key in keys]
    if not present:
        yield cls.missing(*candidates)
    yield from at_most_one(cls, keys, *candidates)


def at_most_one(cls: type[Part], keys: Collection[str], *candidates: str) -> Iterable[Fault]:
    """Return a fault if more than one of the candidates is among the keys."""
    present = [key for key in candidates if key in keys]
    for key in present[1:]:
        yield Fault(
            (key,),
            f"{quote(key)} and {quote(present[0])} both stand here",
            f"one of {choices(candidates, 'and')}",
            f"remove {quote(key)} or {quote(present[0])}",
            on_key=True,
        )
