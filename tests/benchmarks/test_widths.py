"""Measures how wide the proven bound of a probability is on chains that are hard on transient methods."""

from __future__ import annotations

import pytest

from tests.benchmarks import limited
from tests.benchmarks.aligned import aligned, duration

pytestmark = pytest.mark.benchmark

LIMIT = 25.0
COLUMNS = ("chain", "states", "hours", "F", "proven width", "goal", "", "time", "how")
#: Chain, hours, width to be reached.
CASES = (
    *(("a hundred stages of wear", hours, 1e-9) for hours in ("300", "2000", "100000")),
    *(("two seasons, nearly uncoupled", hours, 1e-7) for hours in ("100", "100000", "1000000000")),
)


def test_widths_where_chains_are_awkward() -> None:
    rows, found = [], []
    for name, hours, goal in CASES:
        told = limited.run("awkward", [name, hours], LIMIT)
        assert not told.trouble, told.trouble
        start = (name, f"{told.lines[0]:,}" if told.lines else "", f"{float(hours):g}")
        if len(told.lines) < 2:
            rows.append((*start, "", "", f"{goal:.0e}", "not shown", f"> {LIMIT:g} s", ""))
            continue
        answer = told.lines[1]
        seconds = duration(answer["seconds"])
        if "trouble" in answer:
            rows.append((*start, "not reached", "", f"{goal:.0e}", "not met", seconds, answer["trouble"][:100]))
            continue
        found.append(answer)
        width = answer["width"]
        met = "met" if width is not None and width <= goal else "not met"
        shown = "none" if width is None else f"{width:.1e}"
        rows.append((*start, f"{answer['value']:.6e}", shown, f"{goal:.0e}", met, seconds, answer["method"]))
    print("\n" + aligned("Width of the bound of F", COLUMNS, rows, ("how",)))
    assert found
    # Without a proof a number says that it is an estimate.
    assert all("estimate" in each["method"] for each in found if each["width"] is None)
    assert all(each["width"] <= 1e-6 for each in found if each["width"] is not None)
