"""The title block of a report: what it is called, which revision of which spec it stands for."""

from __future__ import annotations

from pathlib import PurePath

from markov.documents.cells import exact_words
from markov.model import Model
from markov.results import Solution

#: What keys of `reference` are called in the title block; any other key stands as it is written.
_LABELS = {"document": "Reference", "reference": "Reference", "revision": "Revision"}
_WITHOUT = ("Reference", "Revision")


def title_of(model: Model) -> str:
    """Return the title of the report."""
    return model.title or PurePath(model.source_name).name


def facts_of(model: Model, solution: Solution) -> tuple[tuple[str, str], ...]:
    """Return the lines of the title block as label and text; what a spec does not say is told to be missing."""
    given: dict[str, str] = {}
    for key, text in model.reference.items():
        label = _LABELS.get(key.strip().casefold(), key[:1].upper() + key[1:])
        given[label if label not in given else key] = text
    for label in _WITHOUT:
        given.setdefault(label, "not stated in the spec")
    head = [(label, given.pop(label)) for label in _WITHOUT]
    return (
        *head,
        *given.items(),
        ("Spec", PurePath(model.source_name).name),
        ("SHA-256 of the spec", model.sha256),
        ("Made by", f"markov {solution.version}"),
        ("A year is", f"{exact_words(solution.year_hours)} h"),
    )
