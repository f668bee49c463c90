"""Which layout engine places the boxes of a diagram: the first of three that answers in time with a whole answer.

Order: `dot` of Graphviz found on PATH; the command of the package graphviz-pure; the project's own method, which always
answers. An engine gets rectangles in fixed columns and gives back their heights. It sees no names, so nothing in a spec
can upset it, and every picture looks the same whichever engine placed its boxes.
"""

from __future__ import annotations

import math
import os
import shutil
import signal
import subprocess
import sys
import sysconfig
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, get_args

from markov.errors import DrawingError, UsageError
from markov.output.placement import place_by_layers, straightened, untangled
from markov.output.skeleton import Skeleton

Engine = Literal["dot", "graphviz-pure", "own"]
ENGINES: tuple[Engine, ...] = get_args(Engine)
TIME_LIMIT = 20.0
"""Seconds granted to each engine."""
_POINTS_PER_INCH = 72.0


@dataclass(frozen=True)
class Placed:
    """Heights of the centres of all boxes in points downwards, the engine that gave them, and what others said."""

    heights: tuple[float, ...]
    engine: Engine
    notes: tuple[str, ...]


def place_boxes(skeleton: Skeleton, *, engine: Engine | None = None, time_limit: float = TIME_LIMIT) -> Placed:
    """Place the boxes of `skeleton` with the first engine that works, or with the one named.

    Parameters
    ----------
    skeleton
        Boxes, columns and lines.
    engine
        "dot", "graphviz-pure" or "own"; None tries them in this order.
    time_limit
        Seconds granted to each engine that runs as a process.

    Raises
    ------
    UsageError
        An unknown engine, a time limit that is not above zero.
    DrawingError
        The named engine is missing, failed, ran out of time or gave an incomplete answer.
    """
    if engine is not None and engine not in ENGINES:
        raise UsageError(f"layout engine {engine!r}; expected one of {', '.join(ENGINES)}")
    if not time_limit > 0:
        raise UsageError(f"time limit of {time_limit:g} s for a layout engine; expected more than 0 s")
    notes: list[str] = []
    for candidate in ENGINES if engine is None else (engine,):
        if candidate == "own":
            return Placed(place_by_layers(skeleton), "own", tuple(notes))
        try:
            return Placed(_placed_by(candidate, skeleton, time_limit), candidate, tuple(notes))
        except DrawingError as error:
            if engine is not None:
                raise
            notes.append(str(error))
    raise AssertionError("the own method always answers")  # pragma: no cover


def find_command(engine: Engine) -> str | None:
    """Return the path of the engine's command, or None: on PATH, and for graphviz-pure beside this Python too."""
    found = shutil.which(engine)
    if found is None and engine == "graphviz-pure":
        beside = (str(Path(sys.executable).parent), sysconfig.get_path("scripts"))
        found = shutil.which(engine, path=os.pathsep.join(beside))
    return found


def _placed_by(engine: Engine, skeleton: Skeleton, time_limit: float) -> tuple[float, ...]:
    command = find_command(engine)
    if command is None:
        raise DrawingError(f"{engine}: not found")
    answer = _run(engine, [command, "-Tplain"], _request(skeleton), time_limit)
    heights = _heights(engine, answer, len(skeleton.boxes))
    return straightened(skeleton, untangled(skeleton, heights), keep_states=True)


def _request(skeleton: Skeleton) -> str:
    """Return the boxes and lines in Graphviz's language; an invisible chain of anchors holds the columns apart."""
    columns = [(number, held) for number, held in enumerate(skeleton.columns) if held]
    lines = [
        "digraph boxes {",
        "graph [rankdir=LR, nodesep=0.1, ranksep=0.4, splines=none];",
        'node [shape=box, fixedsize=true, label=""];',
        " -> ".join(f"c{number}" for number, _ in columns) + " [style=invis];" if len(columns) > 1 else "",
    ]
    for number, held in columns:
        members = "; ".join(f"b{box}" for box in held)
        lines.append(f"{{ rank=same; c{number} [width=0.01, height=0.01, style=invis]; {members} }}")
    for number, box in enumerate(skeleton.boxes):
        width = max(box.width, 1.0) / _POINTS_PER_INCH
        lines.append(f"b{number} [width={width:.4f}, height={box.height / _POINTS_PER_INCH:.4f}];")
    lines.extend(f"b{link.left} -> b{link.right};" for link in skeleton.links)
    lines.append("}")
    return "\n".join(lines) + "\n"


def _run(engine: Engine, command: Sequence[str], request: str, time_limit: float) -> str:
    own_group = os.name == "posix"  # so that what the engine itself has started ends with it
    try:
        process = subprocess.Popen(
            command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            start_new_session=own_group,
        )
    except OSError as error:
        raise DrawingError(f"{engine}: could not be started ({error.strerror})") from error
    with process:
        try:
            out, err = process.communicate(request.encode("ascii"), timeout=time_limit)
        except BaseException as error:
            if own_group:
                os.killpg(process.pid, signal.SIGKILL)
            else:
                process.kill()
            if isinstance(error, subprocess.TimeoutExpired):
                raise DrawingError(f"{engine}: no answer within {time_limit:g} s") from error
            raise
    if process.returncode != 0:
        said = err.decode("utf-8", "replace").strip().splitlines()
        raise DrawingError(
            f"{engine}: failed with exit status {process.returncode}" + (f" ({said[-1]})" if said else "")
        )
    return out.decode("utf-8", "replace")


def _heights(engine: Engine, answer: str, boxes: int) -> tuple[float, ...]:
    """Read Graphviz's plain format: `graph`, a line `node NAME X Y …` for each node, the last line `stop`."""
    lines = answer.split("\n")
    if "stop" not in (line.strip() for line in lines[-2:]):
        raise DrawingError(f"{engine}: incomplete answer, its end is missing")
    found: dict[str, float] = {}
    for line in lines:
        words = line.split()
        if len(words) >= 4 and words[0] == "node":
            try:
                found[words[1]] = -float(words[3]) * _POINTS_PER_INCH
            except ValueError:
                raise DrawingError(f"{engine}: unreadable answer, {words[3]!r} in place of a height") from None
    missing = sum(not math.isfinite(found.get(f"b{number}", math.nan)) for number in range(boxes))
    if missing:
        raise DrawingError(f"{engine}: incomplete answer, {missing} of {boxes} boxes have no place")
    return tuple(found[f"b{number}"] for number in range(boxes))
