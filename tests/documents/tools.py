"""Programs and packages that a test of the documents needs, told loudly where they are missing."""

from __future__ import annotations

import importlib.util
import shutil
import subprocess
from pathlib import Path

import pytest

MISSING: dict[str, set[str]] = {}
"""What was not checked for want of a tool: the tool, and the tests that needed it."""
_TIME_LIMIT = 400


def program(request: pytest.FixtureRequest, *names: str, package: str) -> str:
    """Return the path of the first of these programs that is there; else skip and remember what is missing."""
    for name in names:
        path = shutil.which(name)
        if path:
            return path
    _skip(request, f"{' or '.join(names)} (apt-get install {package})")


def module(request: pytest.FixtureRequest, name: str, *, package: str) -> None:
    """Skip and remember what is missing unless the Python module `name` is there."""
    if importlib.util.find_spec(name) is None:
        _skip(request, f"the Python package {package} (pip install {package})")


def _skip(request: pytest.FixtureRequest, what: str) -> None:
    MISSING.setdefault(what, set()).add(request.node.nodeid)
    pytest.skip(f"NOT CHECKED, missing: {what}")


def run(command: list[str], folder: Path) -> subprocess.CompletedProcess[str]:
    """Run a program in `folder` and return what it printed."""
    return subprocess.run(
        command,
        cwd=folder,
        env={"HOME": str(folder), "PATH": "/usr/local/bin:/usr/bin:/bin", "LC_ALL": "C.UTF-8"},
        capture_output=True,
        text=True,
        errors="replace",
        timeout=_TIME_LIMIT,
        check=False,
    )
