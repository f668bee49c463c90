"""Measures how long the program takes to start."""

import statistics
import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path

import pytest

pytestmark = pytest.mark.benchmark


def median_seconds(command: Sequence[str | Path], checkout: Path, times: int) -> float:
    taken = []
    for _ in range(times):
        began = time.perf_counter()
        done = subprocess.run(command, cwd=checkout, check=False, stdout=subprocess.DEVNULL)
        taken.append(time.perf_counter() - began)
        assert done.returncode in (0, 1)  # 1: a target missed, which is a result
    return statistics.median(taken)


def test_help_starts_at_once(checkout: Path) -> None:
    bare = median_seconds([sys.executable, "-c", "pass"], checkout, 11)
    module = median_seconds([sys.executable, "-P", "-m", "markov", "--help"], checkout, 11)
    script = median_seconds(["scripts/markov", "--help"], checkout, 11)
    print(f"\nstart in ms: Python {bare * 1e3:.1f}, with help {module * 1e3:.1f}, by the script {script * 1e3:.1f}")
    assert script < 0.25


def test_three_units_are_solved_within_a_second(checkout: Path) -> None:
    script = median_seconds(["scripts/markov", "solve", "specs/harbour_lock.yaml", "--json"], checkout, 5)
    print(f"\nsolving the harbour lock takes {script:.3f} s")
    assert script < 1.0
