"""The model: a spec that is in order in itself."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from functools import cached_property
from typing import Any

from pydantic import PrivateAttr

from markov.errors import Problem, SpecError
from markov.model.cautions import cautions
from markov.model.content import Content
from markov.model.faults import Fault, Path, place
from markov.model.reading import read_content

#: Most problems that are listed; the last one says how many more there are.
MOST_PROBLEMS = 300

#: From a path, and whether its key is meant, to line and column, both from 1.
Locate = Callable[[Path, bool], tuple[int, int]]


class Model(Content):
    """A plant, or a chain written by hand, with what is asked of it.

    Made by `Model.from_mapping` or by ``markov.spec.read``; frozen.
    """

    _sha256: str = PrivateAttr("")
    _source_name: str = PrivateAttr("")

    @classmethod
    def from_mapping(
        cls,
        data: object,
        *,
        file: str = "spec",
        sha256: str | None = None,
        locate: Locate | None = None,
        problems: tuple[Problem, ...] = (),
    ) -> Model:
        """Read a model from nested mappings and lists with the keys of a spec.

        Parameters
        ----------
        data : mapping
            Values are text as in a spec, or Python numbers.
        file : str
            What problems name as the source.
        sha256 : str, optional
            Of the bytes the data came from; of the data themselves where left out.
        locate : callable, optional
            Finds line and column of a value or a key.
        problems : tuple of Problem
            What is already known to be wrong with the text.

        Raises
        ------
        SpecError
            With every problem found.
        """
        reading = read_content(data, cls)
        found = [*problems, *(_problem(fault, file, locate) for fault in reading.faults)]
        if found or not isinstance(reading.content, cls):
            raise SpecError(_cut(found))
        model = reading.content
        model._sha256 = sha256 if sha256 is not None else _fingerprint(data)
        model._source_name = file
        return model

    @property
    def sha256(self) -> str:
        """SHA-256 of the bytes of the spec."""
        return self._sha256

    @property
    def source_name(self) -> str:
        """File the spec was read from."""
        return self._source_name

    @cached_property
    def warnings(self) -> tuple[str, ...]:
        """What is legal, yet likely not meant; what is noted."""
        return cautions(self)


def _problem(fault: Fault, file: str, locate: Locate | None) -> Problem:
    line, column = locate(fault.path, fault.on_key) if locate is not None else (0, 0)
    where = place(fault.path)
    found = f"{where}: {fault.found}" if where else fault.found
    return Problem(file, line, column, found, fault.expected, fault.fix)


def _cut(problems: list[Problem]) -> list[Problem]:
    if len(problems) <= MOST_PROBLEMS:
        return problems
    kept = sorted(problems)[: MOST_PROBLEMS - 1]
    last = kept[-1]
    found = f"{len(problems) - len(kept)} more problems"
    return [*kept, Problem(last.file, last.line, last.column + 1, found, "a spec without", "correct those above first")]


def _fingerprint(data: Any) -> str:
    text = json.dumps(data, ensure_ascii=False, default=str, separators=(",", ":"))
    return hashlib.sha256(text.encode("utf-8")).hexdigest()
