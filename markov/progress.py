"""A line on standard error that says what takes so long, from two seconds on."""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

#: Seconds before anything is said.
PATIENCE = 2.0


@contextmanager
def progress_line() -> Iterator[Callable[[str], None]]:
    """Give a function that is told what is being done; it speaks only if the work lasts.

    On a terminal one line is rewritten every second and removed at the end; elsewhere each lasting step is told once.
    """
    state = {"doing": "working"}
    done = threading.Event()
    began = time.monotonic()
    speaker = threading.Thread(target=_speak, args=(state, done, began), daemon=True)
    speaker.start()

    def tell(doing: str) -> None:
        state["doing"] = doing

    try:
        yield tell
    finally:
        done.set()
        speaker.join(timeout=1.0)


def _speak(state: dict[str, str], done: threading.Event, began: float) -> None:
    if done.wait(PATIENCE):
        return
    on_terminal = sys.stderr.isatty()
    told = ""
    while True:
        line = state["doing"]
        if on_terminal:
            sys.stderr.write(f"\r\033[Kmarkov: {line} … {time.monotonic() - began:.0f} s")
        elif line != told:
            sys.stderr.write(f"markov: {line} …\n")
            told = line
        sys.stderr.flush()
        if done.wait(1.0):
            break
    if on_terminal:
        sys.stderr.write("\r\033[K")
        sys.stderr.flush()
