"""Exact Markov models of redundant plants: read a spec, solve it with proven bounds, draw it.

The public door: names only.  Everything else is private and may change.

>>> import markov
>>> solution = markov.solve("specs/harbour_lock.yaml")
>>> solution.result("steady_state_availability").value
0.9998744850268986
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from markov._version import __version__
from markov.errors import (
    DrawingError,
    IllPosed,
    MarkovError,
    NotReached,
    Problem,
    SpecError,
    TooLarge,
    UsageError,
)

if TYPE_CHECKING:
    from markov.measures import MEASURES, Measure
    from markov.model import Model
    from markov.results import Check, Result, TargetResult
    from markov.verbs import Solution, changes, check, draft, draw, explain, plot, read, report, solve

__all__ = [
    "MEASURES",
    "Check",
    "DrawingError",
    "IllPosed",
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

#: Where the names that are loaded on first use stand; numpy and the others take a while.
_LATE = {
    "MEASURES": "markov.measures",
    "Measure": "markov.measures",
    "Model": "markov.model",
    "Result": "markov.results",
    "TargetResult": "markov.results",
    "Check": "markov.results",
    **dict.fromkeys(
        ("Solution", "changes", "check", "draft", "draw", "explain", "plot", "read", "report", "solve"), "markov.verbs"
    ),
}


def __getattr__(name: str) -> Any:
    if name in _LATE:
        return getattr(import_module(_LATE[name]), name)
    raise AttributeError(f"module 'markov' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
