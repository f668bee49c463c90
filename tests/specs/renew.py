"""Writes the expected output of every example anew: python tests/specs/renew.py, from the root of the checkout.

Read the difference before committing it: each changed digit needs a reason.
"""

from __future__ import annotations

import re
import sys
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import markov

HERE = Path(__file__).resolve().parent
ROOT = HERE.parent.parent
EXPECTED = HERE / "expected"


def masked(text: str) -> str:
    """Return a solution's text without the widths of bounds and the version, which may differ between machines."""
    return re.sub(r"markov \d\S*", "markov …", re.sub(r"± \S+", "± …", text))


def told(solution: markov.Solution) -> str:
    """Return what is printed of a solution, masked."""
    from markov.output.table import solution_text

    lines = masked(solution_text(solution)).splitlines()
    return "\n".join(line.rstrip() for line in lines) + "\n"


def renew() -> None:
    """Write the expected output of every example."""
    import markov

    paths = sorted((ROOT / "specs").glob("*.yaml"))
    for path in paths:
        (EXPECTED / f"{path.stem}.txt").write_text(told(markov.solve(path)), encoding="utf-8")


if __name__ == "__main__":
    sys.path.insert(0, str(ROOT))
    renew()
