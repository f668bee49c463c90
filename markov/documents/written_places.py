"""Where in the spec the values behind the factors of a rate stand."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property

from pydantic import BaseModel

from markov.documents.spec_lines import Path_, SpecLines
from markov.model import Model
from markov.model.faults import place
from markov.model.loads import LoadSharing
from markov.model.part import Part
from markov.quantities import Quantity
from markov.rates import Factor

#: What a document says of a value without a source.
UNSUPPORTED = "unsupported"


@dataclass(frozen=True)
class WrittenPlaces:
    """The keys of a spec, found by the values that stand under them.

    A quantity of a model is one object from the reading of the spec to the factors of its rates; the key that holds it
    is therefore known without any guess from its name.
    """

    model: Model
    lines: SpecLines

    @cached_property
    def _by_quantity(self) -> dict[int, Path_]:
        found: dict[int, Path_] = {}
        for path, value in _walk(self.model, ()):
            if isinstance(value, Quantity):
                found.setdefault(id(value), path)
        return found

    @cached_property
    def _by_words(self) -> dict[str, tuple[Path_, ...]]:
        """Places by the words in which a factor without a quantity of its own names its origin."""
        found: dict[str, tuple[Path_, ...]] = {_dotted(path): (path,) for path, _ in _walk(self.model, ())}
        for unit in self.model.units:
            places = self.model.placements_meant(unit)
            causes = dict.fromkeys(name for place in places for name in self.model.causes_of(place))
            found[f"common_causes ({unit})"] = tuple(("common_causes", name) for name in causes)
            tests = dict.fromkeys(name for place in places for name in self.model.tests_of(place))
            found[f"tests ({unit})"] = tuple(
                ("tests", name, "coverage")
                for name in tests
                if self.model.tests[name].coverage is not None  # one that finds everything gives no share
            )
        for number in range(len(self.model.phases)):
            found[f"phases[{number}]"] = (("phases", number, "rate_factors"),)
        return found

    def of(self, factor: Factor) -> tuple[Path_, ...]:
        """Return the keys that a factor comes from; a complement comes from what it is the complement of."""
        base = factor.base or factor
        path = None if base.quantity is None else self._by_quantity.get(id(base.quantity))
        return (path,) if path is not None else self._by_words.get(base.origin, ())

    def parameters_of(self, factor: Factor) -> tuple[str, ...]:
        """Name the parameters that a factor rests on, directly or through other parameters, in the order of use."""
        base = factor.base or factor
        if base.quantity is not None:
            return self.parameters_in(base.quantity)
        values = [value for path in self.of(base) for _, value in _walk(self._at(path), path)]
        return tuple(
            dict.fromkeys(name for each in values if isinstance(each, Quantity) for name in self.parameters_in(each))
        )

    def parameters_in(self, quantity: Quantity) -> tuple[str, ...]:
        """Name the parameters of a quantity, and those that these are made of."""
        found: dict[str, None] = {}
        pending = list(reversed(quantity.parameters))
        while pending:
            name = pending.pop()
            if name not in found:
                found[name] = None
                pending += reversed(self.model.parameters[name].value.parameters)
        return tuple(found)

    def text_of(self, factor: Factor) -> str:
        """Return the value behind a factor as written; empty where it is made of several, or of none."""
        base = factor.base or factor
        return "" if base.quantity is None else base.quantity.text

    def source_of(self, parameter: str) -> str:
        """Return the source of a parameter, or the word for none."""
        return self.model.parameters[parameter].source or UNSUPPORTED

    def line(self, path: Path_) -> int | None:
        """Return the line of a key; None where it is not written, or the lines are not known."""
        return self.lines.line(path)

    def is_said(self, path: Path_) -> bool:
        """Tell whether the spec writes a key itself."""
        around = self._at(path[:-1])
        if isinstance(around, Part):
            names = {field.alias or name: name for name, field in type(around).model_fields.items()}
            return around.is_said(names.get(str(path[-1]), ""))
        return self._at(path) is not None

    def words(self, path: Path_) -> str:
        """Return a key as documents print it: ``units.pump.repair_time``; the only entry of a list as the list."""
        if path and path[-1] == 0:
            around = self._at(path[:-1])
            if isinstance(around, tuple | list) and len(around) == 1:
                path = path[:-1]
        return place(path)

    def _at(self, path: Path_) -> object:
        value: object = self.model
        for step in path:
            if isinstance(step, int) and isinstance(value, tuple | list):
                value = value[step]
            elif isinstance(value, Mapping):
                value = value.get(str(step))
            elif isinstance(value, BaseModel):
                value = next((each for key, each in _keys(value) if key == step), None)
        return value


def _dotted(path: Path_) -> str:
    """Return a path in the words in which factors name their origin: ``transitions[0]``."""
    text = ""
    for step in path:
        if isinstance(step, int):
            text += f"[{step}]"
        else:
            text += f".{step}" if text else step
    return text


def _keys(part: BaseModel) -> Iterator[tuple[str, object]]:
    for name, field in type(part).model_fields.items():
        yield field.alias or name, getattr(part, name)


def _walk(value: object, path: Path_) -> Iterator[tuple[Path_, object]]:
    yield path, value
    if isinstance(value, BaseModel):
        for key, each in _keys(value):
            yield from _walk(each, (*path, key))
    elif isinstance(value, LoadSharing):
        yield from _walk(value.table, path)
        if value.exponent is not None:
            yield (*path, "exponent"), value.exponent
    elif isinstance(value, Mapping):
        for key, each in value.items():
            yield from _walk(each, (*path, str(key)))
    elif isinstance(value, tuple | list):
        for number, each in enumerate(value):
            yield from _walk(each, (*path, number))
