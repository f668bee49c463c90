"""Fixtures that read a spec as text and hand out the model or its problems."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from markov import spec
from markov.errors import Problem, SpecError
from markov.model import Model

Problems = Callable[[str], tuple[Problem, ...]]


@pytest.fixture
def read() -> Callable[[str], Model]:
    """Read a spec that is in order."""
    return spec.read_text


@pytest.fixture
def problems() -> Problems:
    """Read a spec that is not in order, and return its problems."""

    def of(text: str) -> tuple[Problem, ...]:
        with pytest.raises(SpecError) as caught:
            spec.read_text(text)
        return caught.value.problems

    return of


@pytest.fixture
def told(problems: Problems) -> Callable[[str], Problem]:
    """Read a spec with a single problem, and return it."""

    def of(text: str) -> Problem:
        (problem,) = problems(text)
        return problem

    return of
