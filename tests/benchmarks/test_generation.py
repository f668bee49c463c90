"""Measures how fast chains are generated, against a plain search state by state, and how much memory it takes."""

import subprocess
import sys
import textwrap
import time
from collections import deque

import pytest

import markov.states
from markov.spec import read_text

pytestmark = pytest.mark.benchmark


def shared_crew(groups: int) -> str:
    """Unlike groups of two alike units each, all repaired by one crew: 3**groups states."""
    names = [f"u{number}" for number in range(groups)]
    units = "\n".join(
        f"  {name}: {{failure_rate: {at + 1}e-4 /h, repair_time: {10 + at} h}}" for at, name in enumerate(names)
    )
    members = "\n".join(f"  g{name}: {{members: [{{unit: {name}, count: 2}}], redundancy: active}}" for name in names)
    system = ", ".join(f"g{name}" for name in names)
    return (
        f"units:\n{units}\ngroups:\n{members}\ncrews: {{crew: {{size: 1, repairs: [{', '.join(names)}]}}}}\n"
        f"system: {{all_of: [{system}]}}\n"
    )


def plain_search(groups: int) -> tuple[int, int]:
    """Generate the same chain state by state over tuples; return its states and transitions."""
    start = (0,) * groups
    number = {start: 0}
    arrows = []
    queue = deque([start])
    while queue:
        state = queue.popleft()
        repaired = False
        for at, failed in enumerate(state):
            if failed < 2:
                arrows.append((state, (*state[:at], failed + 1, *state[at + 1 :]), (2 - failed) * (at + 1) * 1e-4))
            if failed and not repaired:
                repaired = True
                arrows.append((state, (*state[:at], failed - 1, *state[at + 1 :]), 1 / (10 + at)))
        for _, after, _ in arrows[-2 * groups :]:
            if after not in number:
                number[after] = len(number)
                queue.append(after)
    return len(number), len(arrows)


def test_rules_on_frontiers_outrun_a_search_state_by_state() -> None:
    model = read_text(shared_crew(9), "benchmark")
    began = time.perf_counter()
    space = markov.states.generate(model)
    ours = time.perf_counter() - began
    began = time.perf_counter()
    found = plain_search(9)
    plain = time.perf_counter() - began
    print(f"\n{space.size:,} states: ours {ours:.3f} s, state by state {plain:.3f} s, ratio {plain / ours:.0f}")
    assert found == (space.size, len(space.arrows))
    assert plain > 3 * ours


def test_thirteen_groups_are_generated_at_a_million_states_a_second_within_three_times_the_chain() -> None:
    script = textwrap.dedent(
        """
        import resource, sys, time
        import markov.states
        from markov.spec import read_text
        model = read_text(sys.stdin.read(), "benchmark")
        markov.states.generate(read_text("units: {a: {failure_rate: 1 /h}}\\nsystem: a\\n", "warm"))
        before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
        began = time.perf_counter()
        space = markov.states.generate(model)
        taken = time.perf_counter() - began
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024 - before
        arrows = space.arrows
        chain = sum(part.nbytes for part in (arrows.source, arrows.target, arrows.kind, arrows.multiple, space.keys))
        print(space.size, len(arrows), taken, peak, chain)
        """
    )
    done = subprocess.run(
        [sys.executable, "-c", script], input=shared_crew(13), capture_output=True, text=True, check=True
    )
    states, arrows, taken, peak, chain = (float(word) for word in done.stdout.split())
    print(
        f"\n{states:,.0f} states, {arrows:,.0f} transitions in {taken:.2f} s: "
        f"{states / taken / 1e6:.2f} million a second; "
        f"peak {peak / 1e6:.0f} MB over the start, chain {chain / 1e6:.0f} MB, ratio {peak / chain:.2f}"
    )
    assert states == 3**13
    assert states / taken > 1e6
    assert peak < 3 * chain
