"""Reads the demonstration plants as mappings, for tests that change a key or two."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import yaml

import markov
from markov.model import Model

SPECS = Path(__file__).resolve().parent.parent.parent / "specs"


def mapping(name: str) -> dict[str, Any]:
    """Return the keys of an example, fresh at each call."""
    read: dict[str, Any] = yaml.safe_load((SPECS / f"{name}.yaml").read_text(encoding="utf-8"))
    return read


def solved(keys: dict[str, Any]) -> markov.Solution:
    """Solve an example, changed or not."""
    return markov.solve(Model.from_mapping(keys))


def verdicts(solution: markov.Solution) -> dict[str, str]:
    """Return the verdict on each target."""
    return {target.id: target.verdict for target in solution.targets}
