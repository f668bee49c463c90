"""Layout engines: the first whole answer in time wins, and what failed is said."""

from __future__ import annotations

import os
import sys
import sysconfig
import time
from itertools import pairwise
from pathlib import Path

import pytest

from markov.errors import DrawingError, UsageError
from markov.output.engines import Engine, find_command, place_boxes
from markov.output.placement import place_by_layers
from markov.output.skeleton import build_skeleton
from tests.output.test_diagram import interlocking, lock_gate, plant
from tests.output.test_diagram_layout import overlaps

# A stand-in for Graphviz: it stacks the boxes of each column, in the order of the request, and answers in plain format.
STACKING = """
import re, sys
assert sys.argv[1:] == ["-Tplain"], sys.argv
request = sys.stdin.read()
heights = dict(re.findall(r"^(b\\d+) \\[width=[\\d.]+, height=([\\d.]+)\\];", request, re.M))
lines = ["graph 1 9 9"]
for column in re.findall(r"rank=same; c\\d+ \\[[^]]*\\]; (.*) }", request):
    y = 100.0
    for name in column.split("; "):
        lines.append(f"node {name} 1 {y - float(heights[name]) / 2:.5f} 1 {heights[name]} \\"\\" solid box black none")
        y -= float(heights[name]) + 0.3
lines.append("stop")
answer = "\\n".join(lines) + "\\n"
"""

WHOLE = STACKING + "sys.stdout.write(answer)"
HALF = STACKING + "sys.stdout.write(answer[: len(answer) // 2])"
ONE_MISSING = (
    STACKING + "sys.stdout.write('\\n'.join(line for line in lines if not line.startswith('node b0 ')) + '\\n')"
)
NOT_A_NUMBER = STACKING + "sys.stdout.write(answer.replace('node b0 1 ', 'node b0 1 high'))"
INFINITE = STACKING + "import re; sys.stdout.write(re.sub('node b0 1 [0-9.]+', 'node b0 1 inf', answer))"
WHOLE_BUT_FAILED = WHOLE + "\nsys.exit('out of paper')"
SILENT = ""
HANGING = "import subprocess, time; subprocess.Popen(['sleep', '60']); time.sleep(60)"


@pytest.fixture
def bare(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> Path:
    """A machine without any engine; commands put into the folder are found."""
    folder = tmp_path / "bin"
    folder.mkdir()
    monkeypatch.setenv("PATH", str(folder))
    monkeypatch.setattr(sysconfig, "get_path", lambda name: str(folder))
    monkeypatch.setattr(sys, "executable", str(folder / "python"))
    return folder


PYTHON = sys.executable


def put(folder: Path, name: str, program: str) -> None:
    """Put a command made of a Python program into the folder."""
    script = folder / name
    script.write_text(f"#!{PYTHON} -S\nimport os\nos.environ['PATH'] = '/bin:/usr/bin'\n{program}\n", encoding="utf-8")
    script.chmod(0o755)


pytestmark = pytest.mark.skipif(os.name != "posix", reason="the stand-ins for engines are POSIX scripts")


def test_without_any_engine_the_own_method_places_the_boxes_and_says_why(bare: Path) -> None:
    skeleton = build_skeleton(lock_gate())
    placed = place_boxes(skeleton)
    assert placed.engine == "own"
    assert placed.heights == place_by_layers(skeleton)
    assert placed.notes == ("dot: not found", "graphviz-pure: not found")


def test_dot_comes_first(bare: Path) -> None:
    put(bare, "dot", WHOLE)
    put(bare, "graphviz-pure", WHOLE)
    skeleton = build_skeleton(plant(3, 2))
    placed = place_boxes(skeleton)
    assert (placed.engine, placed.notes) == ("dot", ())
    assert overlaps(skeleton, placed.heights) == []


def test_the_heights_of_the_engine_are_used(bare: Path) -> None:
    put(bare, "dot", WHOLE)
    skeleton = build_skeleton(plant(3, 2))
    heights = place_boxes(skeleton).heights
    states = [number for number in skeleton.columns[3] if skeleton.boxes[number].node is not None]
    # The stand-in stacks a column in the order of the numbers, 0.3 inches apart.
    gaps = [
        heights[lower] - heights[upper] - (skeleton.boxes[lower].height + skeleton.boxes[upper].height) / 2
        for upper, lower in pairwise(states)
    ]
    assert gaps == pytest.approx([0.3 * 72] * len(gaps), abs=0.1)


def test_graphviz_pure_is_second(bare: Path) -> None:
    put(bare, "graphviz-pure", WHOLE)
    placed = place_boxes(build_skeleton(lock_gate()))
    assert (placed.engine, placed.notes) == ("graphviz-pure", ("dot: not found",))


@pytest.mark.parametrize(
    ("program", "said"),
    [
        (HALF, "dot: incomplete answer, its end is missing"),
        (ONE_MISSING, "boxes have no place"),
        (NOT_A_NUMBER, "unreadable answer"),
        (INFINITE, "boxes have no place"),
        (WHOLE_BUT_FAILED, "failed with exit status 1 (out of paper)"),
        (SILENT, "incomplete answer"),
    ],
    ids=["half", "one missing", "not a number", "infinite", "failed", "silent"],
)
def test_a_bad_answer_leads_to_the_next_engine(bare: Path, program: str, said: str) -> None:
    put(bare, "dot", program)
    put(bare, "graphviz-pure", WHOLE)
    placed = place_boxes(build_skeleton(lock_gate()))
    assert placed.engine == "graphviz-pure"
    (note,) = placed.notes
    assert said in note


def test_an_engine_that_hangs_is_ended_with_all_that_it_started(bare: Path) -> None:
    put(bare, "dot", HANGING)
    started = time.monotonic()
    placed = place_boxes(build_skeleton(lock_gate()), time_limit=1.0)
    # The grandchild holds the pipe for 60 s: coming back long before that means that it has been ended too.
    assert time.monotonic() - started < 30
    assert placed.engine == "own"
    assert placed.notes == ("dot: no answer within 1 s", "graphviz-pure: not found")


def test_a_file_that_is_no_program_leads_to_the_next_engine(bare: Path) -> None:
    (bare / "dot").write_bytes(b"\x00\x01 not a program")
    (bare / "dot").chmod(0o755)
    placed = place_boxes(build_skeleton(lock_gate()))
    assert placed.engine == "own"
    assert placed.notes[0].startswith("dot: could not be started")


def test_a_named_engine_that_fails_is_not_replaced(bare: Path) -> None:
    put(bare, "dot", HALF)
    with pytest.raises(DrawingError, match="dot: incomplete answer"):
        place_boxes(build_skeleton(lock_gate()), engine="dot")
    with pytest.raises(DrawingError, match="graphviz-pure: not found"):
        place_boxes(build_skeleton(lock_gate()), engine="graphviz-pure")


def test_an_unknown_engine_is_refused_with_the_known_ones() -> None:
    with pytest.raises(UsageError, match="dot, graphviz-pure, own"):
        place_boxes(build_skeleton(lock_gate()), engine="neato")  # type: ignore[arg-type]


@pytest.mark.parametrize("limit", [0.0, -1.0, float("nan")])
def test_a_time_limit_must_be_above_zero(limit: float) -> None:
    with pytest.raises(UsageError, match="time limit"):
        place_boxes(build_skeleton(lock_gate()), time_limit=limit)


@pytest.mark.parametrize("engine", ["dot", "graphviz-pure"])
@pytest.mark.parametrize("diagram", [lock_gate(), interlocking(), plant(4, 2, 1)], ids=lambda diagram: diagram.title)
def test_the_real_engine_places_every_box(engine: Engine, diagram: object) -> None:
    if find_command(engine) is None:
        pytest.skip(f"LAYOUT ENGINE {engine} IS NOT INSTALLED: only its stand-in has been tested")
    skeleton = build_skeleton(diagram)  # type: ignore[arg-type]
    placed = place_boxes(skeleton, engine=engine)
    assert placed.engine == engine
    assert overlaps(skeleton, placed.heights) == []
    assert placed == place_boxes(skeleton, engine=engine)
