"""Files that appear whole or not at all, and never in place of one that is there unless asked."""

from __future__ import annotations

import os
from pathlib import Path

from markov.errors import DrawingError, UsageError


def taken(target: Path) -> str:
    """Return what is said of a file that exists already."""
    return f"{target} exists already; expected a new name, or leave to replace it (--overwrite)"


def store(content: bytes, target: Path, *, overwrite: bool = False) -> None:
    """Write `content` beside `target`, then give it its name in one step.

    Raises
    ------
    UsageError
        The file exists while `overwrite` is false.
    DrawingError
        The file cannot be written.
    """
    part = target.with_name(f".{target.name[:100]}.{os.getpid()}.part")
    try:
        handle = os.open(part, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o666)
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(content)
                file.flush()
                os.fsync(file.fileno())
            if overwrite:
                os.replace(part, target)
            else:
                _name_new(part, target)
        finally:
            part.unlink(missing_ok=True)
    except OSError as error:
        raise DrawingError(f"{target} could not be written: {error.strerror or error}") from error


def _name_new(part: Path, target: Path) -> None:
    """Give `part` its name unless that is taken, even by someone who took it a moment ago."""
    try:
        os.link(part, target)
    except FileExistsError:
        raise UsageError(taken(target)) from None
    except OSError:  # a file system without links
        if os.path.lexists(target):
            raise UsageError(taken(target)) from None
        os.rename(part, target)
