"""Settings that every test shares."""

import os
from pathlib import Path

import pytest
from hypothesis import settings

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
