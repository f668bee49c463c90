"""The data of a report: every number of the spec as written and in hours, with its source or the lack of one."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, fields, is_dataclass

from pydantic import BaseModel

from markov.documents.cells import NONE, code, counted, dimension_unit, exact_words, joined, link, row, strong
from markov.documents.spec_lines import Path_
from markov.documents.tree import Block, Column, Paragraph, Row, Section, Span, Table, Text, plain
from markov.documents.written_places import UNSUPPORTED, WrittenPlaces
from markov.model import Model
from markov.model.parameters import Parameter, Uncertainty
from markov.quantities import Quantity

#: What a limit or a time asked for is no datum of the plant.
_NO_DATA = ("parameters", "targets", "year", "mission")


def parameter_anchor(model: Model, name: str) -> str:
    """Return the anchor of a parameter's row."""
    return f"parameter-{list(model.parameters).index(name) + 1}"


def data_section(model: Model, places: WrittenPlaces) -> Section:
    """Return the section on data: parameters, and values that stand in the spec without a name."""
    blocks: list[Block] = [Paragraph(_summary(model, places))]
    if model.parameters:
        blocks.append(_parameters(model, places))
    values = tuple(written_values(model))
    if values:
        blocks.append(_values(model, places, values))
    return Section("Data and their sources", tuple(blocks), "data")


def _summary(model: Model, places: WrittenPlaces) -> Text:
    lacking = sum(parameter.source is None for parameter in model.parameters.values())
    bare = sum(not value.quantity.parameters for value in written_values(model))
    told = [Span("Every number is read exactly as written and reckoned in hours. ")]
    if model.parameters:
        some = f"{lacking} of them" if lacking else "none of them"
        told += [
            Span(
                f"There {'is' if len(model.parameters) == 1 else 'are'} {counted(len(model.parameters), 'parameter')}, "
            )
        ]
        told += [Span(f"{some} "), Span(UNSUPPORTED, "strong"), Span(" (without a source). ")]
    if bare:
        stand = "stands" if bare == 1 else "stand"
        told += [
            Span(f"{counted(bare, 'value')} {stand} in the spec without a name, where no source can be given, and ")
        ]
        told += [Span(f"{'is' if bare == 1 else 'are'} therefore "), Span(UNSUPPORTED, "strong"), Span(", too. ")]
    told.append(Span("What a number without a source is worth, its author has to say."))
    return tuple(told)


def _parameters(model: Model, places: WrittenPlaces) -> Table:
    columns = (
        Column("Parameter", width=1.4),
        Column("As written", width=1.3),
        Column("Value", "decimal", 0.8),
        Column("Unit", width=0.4),
        Column("Source", width=1.6),
        Column("Uncertainty", width=1.3),
        Column("Line", "right", 0.4),
    )
    rows = tuple(
        row(
            code(name),
            code(parameter.value.text),
            exact_words(parameter.value.exact),
            dimension_unit(parameter.value),
            source_text(parameter),
            _uncertainty(parameter.uncertainty),
            line_words(places, ("parameters", name)),
            anchor=f"parameter-{number}",
        )
        for number, (name, parameter) in enumerate(model.parameters.items(), 1)
    )
    return Table("parameters", "Parameters", columns, rows, "parameters")


def source_text(parameter: Parameter) -> Text:
    """Return the source of a parameter, or the word that says there is none."""
    return plain(parameter.source) if parameter.source else strong(UNSUPPORTED)


def line_words(places: WrittenPlaces, path: Path_) -> str:
    """Return the line of the spec that a key stands on; a dash where it is not known."""
    line = places.line(path)
    return NONE if line is None else str(line)


def _uncertainty(known: Uncertainty | None) -> str:
    if known is None:
        return "not stated"
    if known.error_factor is not None:
        return f"log-normal, error factor {known.error_factor.text} (95 % point over median)"
    if known.failures is not None and known.exposure is not None:
        return f"{counted(known.failures, 'failure')} in {known.exposure.text}"
    if known.low is not None and known.high is not None:
        return f"{known.low.text} (5 % point) to {known.high.text} (95 % point)"
    return f"standard deviation {known.standard_deviation}"


# ----------------------------------------------------------------------------------------- values without a name


@dataclass(frozen=True)
class WrittenValue:
    """A value at its place in the spec."""

    path: Path_
    quantity: Quantity


def written_values(model: Model) -> Iterator[WrittenValue]:
    """Yield every value that the plant is made of, at the place where the spec holds it; parameters are left out."""
    for name, field in type(model).model_fields.items():
        key = field.alias or name
        if key not in _NO_DATA:
            yield from _inside(getattr(model, name), (key,))


def _inside(value: object, path: Path_) -> Iterator[WrittenValue]:
    if isinstance(value, Quantity):
        yield WrittenValue(path, value)
    elif isinstance(value, BaseModel):
        for name, field in type(value).model_fields.items():
            yield from _inside(getattr(value, name), (*path, field.alias or name))
    elif isinstance(value, Mapping):
        for key, each in value.items():
            yield from _inside(each, (*path, str(key)))
    elif isinstance(value, tuple | list):
        for number, each in enumerate(value):
            yield from _inside(each, (*path, number))
    elif is_dataclass(value) and not isinstance(value, type):
        for each_field in fields(value):
            yield from _inside(getattr(value, each_field.name), path)


def _values(model: Model, places: WrittenPlaces, values: tuple[WrittenValue, ...]) -> Table:
    columns = (
        Column("Key of the spec", width=2.2),
        Column("As written", width=1.5),
        Column("Value", "decimal", 0.9),
        Column("Unit", width=0.4),
        Column("Rests on", width=1.6),
        Column("Line", "right", 0.4),
    )
    return Table(
        "values",
        "Values where the spec uses them",
        columns,
        tuple(_value_row(model, places, value) for value in values),
        "values",
    )


def _value_row(model: Model, places: WrittenPlaces, value: WrittenValue) -> Row:
    named = places.parameters_in(value.quantity)
    rests = joined(link(parameter_anchor(model, name), name) for name in named) if named else strong(UNSUPPORTED)
    return row(
        code(places.words(value.path)),
        code(value.quantity.text),
        exact_words(value.quantity.exact),
        dimension_unit(value.quantity),
        rests,
        line_words(places, value.path),
    )
