"""Peak memory of the process that asks."""

from __future__ import annotations

import contextlib
import resource
import sys
from pathlib import Path


def _status(word: str) -> int | None:
    try:
        lines = Path("/proc/self/status").read_text().splitlines()
    except OSError:
        return None
    found = [int(line.split()[1]) * 1024 for line in lines if line.startswith(word + ":")]
    return found[0] if found else None


def forget_peak() -> None:
    """Start anew, where the system can; elsewhere the peak is that of the whole life of the process."""
    with contextlib.suppress(OSError):
        Path("/proc/self/clear_refs").write_text("5")


def peak() -> int:
    """Most bytes held at once since `forget_peak`."""
    # Not from getrusage where it can be helped: it counts what the parent held when it started this process.
    found = _status("VmHWM")
    if found is None:
        found = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * (1 if sys.platform == "darwin" else 1024)
    return found


def held() -> int:
    """Bytes held now, or the peak where the system does not tell."""
    return _status("VmRSS") or peak()


def available() -> int:
    """Bytes that a new process may take without swapping; 0 where the system does not tell."""
    try:
        lines = Path("/proc/meminfo").read_text().splitlines()
    except OSError:
        return 0
    return next((int(line.split()[1]) * 1024 for line in lines if line.startswith("MemAvailable:")), 0)
