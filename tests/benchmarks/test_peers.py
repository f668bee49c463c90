"""Sets each solver beside what general libraries offer, on the same chain in one run.

Every call runs in a process of its own that is ended after `LIMIT` seconds; such a call is told as longer than that,
and is not made again for longer times.  Times are the least of up to seven calls where they are short.  The error is
that of the small number itself.  Truth is ball or rational arithmetic for the stiff pair; for larger chains it is the
proven interval of this project where that is narrower than `TRUTH`, and no error is told where it is not.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import markov.states
from markov.chain import Generator
from markov.evaluation.answers import Answers
from markov.spec import read_text
from tests.benchmarks import limited, peer, plants
from tests.benchmarks.aligned import aligned, duration, megabytes
from tests.chain import balls

pytestmark = pytest.mark.benchmark

LIMIT = 20.0
#: Seconds that a process gets on top, to start.
STARTING = 3.0
TRUTH = 1e-11

COLUMNS = ("number and means", "time", "× ours", "relative error", "proven width", "MB on top")
QUESTIONS = {"F": "F({time:g} h)", "U": "U, long run", "M": "mean time to failure"}


@dataclass(frozen=True)
class Call:
    """What one means gave for one number."""

    means: str
    seconds: float
    finished: bool
    answer: Mapping[str, Any]
    trouble: str

    @property
    def out_of_time(self) -> bool:
        return not self.finished and not self.trouble

    @property
    def bound(self) -> tuple[float, float]:
        """The proven interval; all that is possible where nothing is proven."""
        if self.answer.get("lower") is None:
            return 0.0, np.inf
        return self.answer["lower"], self.answer["upper"]


@dataclass(frozen=True)
class Subject:
    """A chain with its down states, ready for any means, with the truths that are known beforehand."""

    title: str
    generator: Generator
    down: np.ndarray
    truths: Mapping[tuple[str, float], Fraction]

    def stored(self, directory: Path, time: float, expected: float) -> Path:
        path = directory / "chain.npz"
        np.savez(
            path,
            n=self.generator.n,
            source=self.generator.source,
            target=self.generator.target,
            high=self.generator.high,
            low=self.generator.low,
            down=self.down,
            start=0,
            time=time,
            expected=expected,
        )
        return path


def call(file: Path, question: str, means: str) -> Call:
    told = limited.run("peer", [str(file), question, means, str(LIMIT)], LIMIT + STARTING)
    if len(told.lines) == 2:
        answer = told.lines[1]
        return Call(means, answer["seconds"], True, answer, "")
    return Call(means, LIMIT, False, {}, "" if told.out_of_time else told.trouble)


def compare(
    subject: Subject, question: str, time: float, directory: Path, peers: Sequence[str], slow: frozenset[str]
) -> tuple[list[Call], list[list[str]]]:
    """Ask for one number by all means but the `slow` ones; return the calls, ours first, and the rows of the table."""
    ours = call(subject.stored(directory, time, 0.0), question, peer.OURS)
    value, (lower, upper) = ours.answer.get("value", 0.0), ours.bound
    width = (upper - lower) / upper if upper < np.inf else np.inf
    known = subject.truths.get((question, time))
    truth = (Fraction(lower) + Fraction(upper)) / 2 if known is None and width < TRUTH else known
    file = subject.stored(directory, time, value or 1e-20)
    late = Call("", LIMIT, False, {}, "")
    calls = [ours, *(replace(late, means=each) if each in slow else call(file, question, each) for each in peers)]
    told = f"{value:.6e}" + (" h" if question == "M" else "") if ours.finished else "no answer"
    rows = [[f"{QUESTIONS[question].format(time=time)} = {told}", "", "", "", "", ""]]
    for each in calls:
        seconds = duration(each.seconds) if each.finished else f"> {LIMIT:g} s" if each.out_of_time else "fails"
        ratio = "" if each is ours else faster(ours, each)
        error = each.trouble[-50:]
        if each is ours and known is None and truth is not None:
            error = "is the truth"
        elif each.finished and truth is not None:
            error = _error(each.answer["value"], truth, 0.0 if known is not None else width)
        proven = f"{width:.1e}" if each is ours and width < np.inf else "none"
        memory = megabytes(each.answer["memory"]) if each.finished else ""
        rows.append([f"  {each.means}", seconds, ratio, error, proven, memory])
    return calls, rows


def faster(ours: Call, other: Call) -> str:
    """How many times as long as ours another call took."""
    if not ours.finished or other.trouble:
        return ""
    return f"{'' if other.finished else '> '}{other.seconds / ours.seconds:,.3g}"


def _error(value: float, truth: Fraction, blur: float) -> str:
    if not np.isfinite(value):
        return str(value)
    error = float(abs(Fraction(value) - truth) / truth)
    return f"< {blur:.0e}" if error < blur else f"{error:.1e}"


def show(
    subject: Subject,
    directory: Path,
    asked: Sequence[tuple[str, float]],
    left_out: Sequence[tuple[str, float, str]] = (),
) -> dict[tuple[str, float], dict[str, Call]]:
    """Print the table of one chain and return its calls by question and time; some means may be left out."""
    found, rows = {}, []
    slow: dict[str, frozenset[str]] = {}
    for question, time in sorted(asked):
        peers = [each for each in peer.MEANS[question] if each != peer.OURS and (question, time, each) not in left_out]
        calls, more = compare(subject, question, time, directory, peers, slow.get(question, frozenset()))
        slow[question] = frozenset(each.means for each in calls[1:] if each.out_of_time)
        found[question, time] = {each.means: each for each in calls}
        rows += more
    fastest = float(subject.generator.exits.high.max())
    size = f"{subject.generator.n:,} states, {subject.generator.source.size:,} transitions, Λ = {fastest:.3g} /h"
    print("\n" + aligned(f"{subject.title}: {size}", COLUMNS, rows))
    return found


def generated(groups: int) -> Subject:
    space = markov.states.generate(read_text(plants.unlike_groups(groups), "benchmark"))
    answers = Answers(space, Fraction(8766))
    assert answers.start == 0
    title = f"{groups} unlike groups of two units, one crew, down when three groups are"
    return Subject(title, answers.generator, ~answers.up(None), {})


def widest(found: Mapping[tuple[str, float], Mapping[str, Call]]) -> float:
    """The widest proven interval of ours, relatively, among the calls that ended in time."""
    bounds = [calls[peer.OURS].bound for calls in found.values() if not calls[peer.OURS].out_of_time]
    return max((upper - lower) / upper if upper < np.inf else np.inf for lower, upper in bounds)


def test_a_stiff_pair_keeps_all_digits(tmp_path: Path) -> None:
    chain = plants.stiff_pair()
    truths: dict[tuple[str, float], Fraction] = {
        ("U", 0.0): balls.stationary(chain)[3],
        ("M", 0.0): balls.before_absorption(chain, chain.down, dict.fromkeys(range(3), Fraction(1)))[0],
    }
    for time in chain.times:
        ball = balls.exponential(chain, time, chain.down)[0, 3]
        assert balls.sharp(ball)
        mantissa, exponent = ball.mid().man_exp()
        truths["F", float(time)] = Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
    subject = Subject("Stiff pair", chain.generator(), chain.down_flags, truths)
    found = show(subject, tmp_path, list(truths))
    for asked, calls in found.items():
        lower, upper = calls[peer.OURS].bound
        assert Fraction(lower) <= truths[asked] <= Fraction(upper)
    assert widest(found) <= 1e-14
    early = found["F", float(chain.times[0])]
    assert early["expm_multiply"].seconds >= 100 * early[peer.OURS].seconds


def test_729_states_beside_the_peers(tmp_path: Path) -> None:
    found = show(generated(6), tmp_path, [("F", 10.0), ("F", 1e5), ("U", 0.0), ("M", 0.0)])
    assert widest(found) <= 1e-9


def test_2187_states_beside_the_peers(tmp_path: Path) -> None:
    subject = generated(7)
    early = [("F", 100.0, means) for means in ("linalg.expm", "Radau, default", "Radau, tight")]
    found = show(subject, tmp_path, [("F", 100.0), ("F", 1e5), ("U", 0.0), ("M", 0.0)], early)
    for means, goal in (("expm_multiply", 100), ("BDF, tight", 500)):
        for (_, time), calls in found.items():
            if means in calls:
                ours, other = calls[peer.OURS], calls[means]
                met = "met" if other.seconds >= goal * ours.seconds else "not met"
                met = "not shown within the limit" if met == "not met" and other.out_of_time else met
                measured = faster(ours, other) or "no answer"
                print(f"goal at {time:g} h: {goal} times faster than {means}; measured {measured}: {met}")
    assert widest(found) <= 1e-9
