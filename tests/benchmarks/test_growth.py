"""Measures how time, memory and proven width grow with the chain, from a hundred states to millions.

Beside every time stands what this machine needs to read the matrix once in a straight line, and how many readings the
sparse products of the solve made, as the result of a long run tells itself; work on dense matrices and on arrays of
rates is not counted in these, but is in the time.  Each chain has a process of its own.  A solve that would not fit
into `BUDGET` is ended and told as longer.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pytest

from tests.benchmarks import limited
from tests.benchmarks.aligned import aligned, duration, megabytes
from tests.benchmarks.memory import available

pytestmark = pytest.mark.benchmark

#: Numbers of groups: 81 to 1,594,323 states.
GROUPS = (4, 5, 7, 9, 11, 13)
FIVE_MILLION = 14
#: Memory that must be free for the largest chain, in bytes.
LARGEST_NEEDS = 7e9
#: Seconds for all chains up to 1.6 million states.
BUDGET = 95.0
#: Seconds for the largest chain.
LARGEST_BUDGET = 85.0
HOURS = ("100000", "1000000000")

STEADY = "steady"
#: What is to be reached by a number of groups: seconds, width, bytes.
GOALS: Mapping[tuple[int, bool], tuple[float, float, float]] = {
    (13, True): (2.0, 1e-12, math.inf),
    (14, True): (10.0, 1e-12, 5e9),
    (7, False): (0.15, 1e-9, math.inf),
    (9, False): (1.5, 1e-9, math.inf),
    (11, False): (10.0, 1e-9, math.inf),
    (13, False): (100.0, 1e-9, 2e9),
}

CHAIN = ("states", "transitions", "matrix MB", "read once", "GB/s", "from spec", "million/s", "rates added")
SOLVED = ("states", "number", "proven width", "time", "in readings", "products", "peak MB", "goal", "how")
HOW = ("goal", "how")


@dataclass(frozen=True)
class Solved:
    """One chain as its process told it."""

    groups: int
    chain: Mapping[str, Any]
    answers: Sequence[Mapping[str, Any]]
    asked: Sequence[str]
    seconds: float


def solve(groups: int, asked: Sequence[str], limit: float) -> Solved:
    told = limited.run("growth", [str(groups), *asked], limit)
    assert not told.trouble, told.trouble
    chain = told.lines[0] if told.lines else {}
    return Solved(groups, chain, told.lines[1:], asked, told.seconds)


@pytest.fixture(scope="module")
def curve() -> list[Solved]:
    left, found = BUDGET, []
    for groups in GROUPS:
        # The longest mission first: it is the one that other methods cannot reach.
        found.append(solve(groups, (STEADY, *reversed(HOURS)), max(left, 5.0)))
        left -= found[-1].seconds
    return found


def chains(found: Sequence[Solved]) -> str:
    rows = []
    for each in found:
        chain = each.chain
        if chain:
            rows.append(
                (
                    f"{chain['states']:,}",
                    f"{chain['transitions']:,}",
                    megabytes(chain["bytes"]),
                    duration(chain["reading"]),
                    f"{chain['bytes'] / chain['reading'] / 1e9:.0f}",
                    duration(chain["generated"]),
                    f"{chain['states'] / chain['generated'] / 1e6:.2f}",
                    duration(chain["added"]),
                )
            )
    return aligned("Chains: unlike groups of two units, one crew", CHAIN, rows)


def row(each: Solved, question: str) -> tuple[str, ...]:
    states = f"{3**each.groups:,}"
    answer = next((answer for answer in each.answers if answer["question"] == question), None)
    goal = GOALS.get((each.groups, question == STEADY))
    aim = f"{duration(goal[0])}: " if goal else ""
    if answer is None:
        return states, "", "", "out of time", "", "", "", aim + "not shown" if goal else "", ""
    measured = (
        duration(answer["seconds"]),
        f"{answer['seconds'] / each.chain['reading']:,.0f}",
        f"{answer['readings']:,.0f}" if answer["readings"] >= 2 else "dense",
        f"{answer['peak'] / 1e6:,.0f}",
    )
    if "trouble" in answer:
        return (
            states,
            "not reached",
            "none",
            *measured,
            aim + "not met" if goal else "",
            answer["trouble"].split(": ", 1)[-1][:90],
        )
    width = relative_width(answer)
    if goal:
        short = [
            word
            for word, is_short in (
                ("time", answer["seconds"] > goal[0]),
                ("width", width > goal[1]),
                ("memory", answer["peak"] > goal[2]),
            )
            if is_short
        ]
        aim += f"{' and '.join(short)} not met" if short else "met"
    return (
        states,
        f"{answer['value']:.6e}",
        f"{width:.1e}" if width < math.inf else "none",
        *measured,
        aim,
        answer["method"],
    )


def answered(each: Solved, question: str) -> list[Mapping[str, Any]]:
    """The answer to one question, if there is one."""
    return [answer for answer in each.answers if answer["question"] == question and "trouble" not in answer]


def relative_width(answer: Mapping[str, Any]) -> float:
    if answer["lower"] is None:
        return math.inf
    return float((answer["upper"] - answer["lower"]) / answer["upper"])


def certain(found: Sequence[Solved]) -> list[Mapping[str, Any]]:
    """All answers with a bound; the others must say that they are estimates."""
    answers = [answer for each in found for answer in each.answers if "trouble" not in answer]
    bounded = [answer for answer in answers if answer["lower"] is not None]
    assert all("estimate" in answer["method"] for answer in answers if answer not in bounded)
    assert all(relative_width(answer) <= 1e-6 for answer in bounded)
    return bounded


def test_growth_of_a_long_run_share(curve: list[Solved]) -> None:
    print("\n" + chains(curve))
    print("\n" + aligned("Long-run unavailability", SOLVED, [row(each, STEADY) for each in curve], HOW))
    steady = [answer for answer in certain(curve) if answer["question"] == STEADY]
    assert len(steady) >= 4  # a busy machine may not reach the last
    assert max(map(relative_width, steady)) <= 1e-12


def test_growth_of_a_probability_at_a_time(curve: list[Solved]) -> None:
    for hours in HOURS:
        heading = f"F({float(hours):g} h), Λt about {100 * float(hours):.0e}"
        print("\n" + aligned(heading, SOLVED, [row(each, hours) for each in curve], HOW))
    found = certain(curve)
    assert sum(answer["question"] in HOURS for answer in found) >= 2
    for each in curve:
        seconds = [answer["seconds"] for hours in HOURS for answer in answered(each, hours)]
        if len(seconds) == 2:
            ratio = seconds[1] / seconds[0]
            print(f"{3**each.groups:,} states: {HOURS[1]} h takes {ratio:.2f} times as long as {HOURS[0]} h")
            # Ten thousand times the mission: a cost that grew with it would show by far.
            assert ratio < 5


def test_five_million_states_in_the_long_run() -> None:
    if available() < LARGEST_NEEDS:
        pytest.skip(f"less than {LARGEST_NEEDS / 1e9:g} GB of memory are free")
    found = solve(FIVE_MILLION, (STEADY,), LARGEST_BUDGET)
    print("\n" + chains([found]))
    print("\n" + aligned("Long-run unavailability", SOLVED, [row(found, STEADY)], HOW))
    assert all(relative_width(answer) <= 1e-12 for answer in certain([found]))
