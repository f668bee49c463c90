"""Holds what `import markov` offers, and what it costs."""

import subprocess
import sys
from pathlib import Path

import pytest

# Each takes longer to import than the program may take to print its help.
HEAVY = {"matplotlib", "networkx", "numpy", "pydantic", "pydantic_core", "rich", "scipy", "yaml"}

AT_THE_END = """\
import atexit, sys
atexit.register(lambda: print("loaded", *{name.split(".")[0] for name in sys.modules}, file=sys.stderr))
"""


def loaded_by(statement: str, checkout: Path) -> set[str]:
    """The packages that a fresh interpreter holds when it ends after one statement."""
    command = [sys.executable, "-c", AT_THE_END + statement]
    done = subprocess.run(command, cwd=checkout, capture_output=True, text=True, timeout=60)
    assert done.returncode == 0, done.stderr
    last = done.stderr.splitlines()[-1].split()
    assert last[0] == "loaded", done.stderr
    return set(last[1:])


def as_typed(*arguments: str) -> str:
    """A call of the command `python -m markov` as a statement."""
    return f"import runpy, sys\nsys.argv = {['markov', *arguments]!r}\nrunpy.run_module('markov', run_name='__main__')"


def test_importing_the_package_loads_nothing_heavy(checkout: Path) -> None:
    loaded = loaded_by("import markov", checkout)
    assert "markov" in loaded
    assert not loaded & HEAVY


@pytest.mark.parametrize(
    "arguments",
    [
        ["--help"],
        ["--version"],
        ["solve", "--help"],
        ["draw", "--help"],
        ["plot", "--help"],
        ["report", "--help"],
        ["explain", "--help"],
        ["changes", "--help"],
    ],
)
def test_help_loads_nothing_heavy(checkout: Path, arguments: list[str]) -> None:
    loaded = loaded_by(as_typed(*arguments), checkout)
    assert "markov" in loaded
    assert not loaded & HEAVY


def test_a_heavy_import_would_be_seen(checkout: Path) -> None:
    assert loaded_by("import yaml, rich.table", checkout) & HEAVY == {"yaml", "rich"}


def test_the_public_names_are_these() -> None:
    import markov

    assert sorted(markov.__all__) == [
        "Check",
        "DrawingError",
        "IllPosed",
        "MEASURES",
        "MarkovError",
        "Measure",
        "Model",
        "NotReached",
        "Problem",
        "Result",
        "Solution",
        "SpecError",
        "TargetResult",
        "TooLarge",
        "UsageError",
        "__version__",
        "changes",
        "check",
        "draft",
        "draw",
        "explain",
        "plot",
        "read",
        "report",
        "solve",
    ]
    for name in markov.__all__:
        assert getattr(markov, name) is not None


def test_an_unknown_name_is_refused() -> None:
    import markov

    with pytest.raises(AttributeError, match="no attribute 'solver'"):
        markov.solver  # noqa: B018
