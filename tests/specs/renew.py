"""Writes the expected output of every example anew: python tests/specs/renew.py, from the root of the checkout.

Read the difference before committing it: each changed digit needs a reason.
"""

import re
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
ROOT = HERE.parent.parent
EXPECTED = HERE / "expected"


def masked(text: str) -> str:
    """Return a solution's text without the widths of bounds and the version, which may differ between machines."""
    return re.sub(r"markov \d\S*", "markov …", re.sub(r"± \S+", "± …", text))


def told(spec: Path) -> str:
    """Return what solving a spec prints, masked."""
    import markov
    from markov.output.table import solution_text

    lines = masked(solution_text(markov.solve(spec))).splitlines()
    return "\n".join(line.rstrip() for line in lines) + "\n"


if __name__ == "__main__":
    sys.path.insert(0, str(ROOT))
    for path in sorted((ROOT / "specs").glob("*.yaml")):
        (EXPECTED / f"{path.stem}.txt").write_text(told(path), encoding="utf-8")
