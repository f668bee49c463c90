"""Settings that every test shares."""

import os
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import settings

from markov import spec
from markov.errors import Problem, SpecError
from markov.model import Model

# No deadline: a busy machine is not a fault of the program. In a continuous build the examples are the same each time.
settings.register_profile("house", deadline=None, print_blob=True, derandomize="CI" in os.environ)
settings.load_profile("house")

# Plots are drawn without a display.
os.environ["MPLBACKEND"] = "Agg"


@pytest.fixture(scope="session")
def checkout() -> Path:
    """The root of the checkout."""
    return Path(__file__).resolve().parent.parent


@pytest.fixture(autouse=True)
def plain_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """Output does not depend on the terminal from which the tests were started."""
    for name in ("NO_COLOR", "FORCE_COLOR", "CLICOLOR", "CLICOLOR_FORCE", "COLUMNS", "LINES", "TTY_COMPATIBLE"):
        monkeypatch.delenv(name, raising=False)


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
