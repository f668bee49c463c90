"""Runs one measurement in a process of its own, with a limit of time."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

_CHECKOUT = Path(__file__).resolve().parent.parent.parent


@dataclass(frozen=True)
class Told:
    """What a process printed, one JSON value a line, and how it ended."""

    lines: tuple[Any, ...]
    seconds: float
    out_of_time: bool
    trouble: str


def run(module: str, arguments: Sequence[str], limit: float) -> Told:
    """Run a module of this directory; after `limit` seconds it is ended, and what it printed before counts."""
    began = time.perf_counter()
    process = subprocess.Popen(
        [sys.executable, "-m", f"tests.benchmarks.{module}", *arguments],
        cwd=_CHECKOUT,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    out_of_time = False
    try:
        printed, complaint = process.communicate(timeout=limit)
    except subprocess.TimeoutExpired:
        out_of_time = True
        process.kill()
        printed, complaint = process.communicate()
    finally:
        if process.poll() is None:  # interrupted from outside: it must not live on alone
            process.kill()
    lines = tuple(json.loads(line) for line in printed.splitlines())
    trouble = ""
    if process.returncode and not out_of_time:
        trouble = (complaint.strip().splitlines() or [f"ended with {process.returncode}"])[-1]
    return Told(lines, time.perf_counter() - began, out_of_time, trouble)
