"""The plants whose chains the benchmarks measure."""

from __future__ import annotations

from fractions import Fraction

from tests.chain.families import Chain

#: Hours that a repair takes, group by group: from a restart within 36 seconds to days, so the chains are stiff.
REPAIR_HOURS = ("0.01", "0.1", "1", "3", "6", "10", "15", "21", "28", "36", "45", "55", "66", "78")

#: Largest rate of every plant below, per hour, roughly: what Λt is told with.
FASTEST = 100.0


def unlike_groups(groups: int) -> str:
    """A spec of unlike groups of two alike units each, all repaired by one crew: 3**groups states.

    The system is up as long as at most two groups are down.
    """
    names = [f"u{number}" for number in range(groups)]
    units = "\n".join(
        f"  {name}: {{failure_rate: {at + 1}e-5 /h, repair_time: {REPAIR_HOURS[at]} h}}"
        for at, name in enumerate(names)
    )
    members = "\n".join(f"  g{name}: {{members: [{{unit: {name}, count: 2}}], redundancy: active}}" for name in names)
    system = ", ".join(f"g{name}" for name in names)
    return (
        f"units:\n{units}\ngroups:\n{members}\ncrews: {{crew: {{size: 1, repairs: [{', '.join(names)}]}}}}\n"
        f"system: {{at_least: {groups - 2}, of: [{system}]}}\n"
    )


def stiff_pair() -> Chain:
    """Two units, of which the second takes over within five seconds: both good, taking over, one good, none good."""
    failing, taking_over, repair, renewal = Fraction("3e-6"), Fraction(720), Fraction("0.04"), Fraction("0.01")
    rates = {
        (0, 1): failing,
        (0, 2): failing,
        (1, 2): taking_over,
        (1, 3): failing,
        (2, 0): repair,
        (2, 3): failing,
        (3, 0): renewal,
    }
    return Chain("stiff pair", 4, rates, (3,), (Fraction(100_000), Fraction(10) ** 9))


def erlang_beside_pair(stages: int = 100) -> Chain:
    """A part that wears in stages until it is renewed, beside the stiff pair; down at its last stage or with the pair.

    Its spectrum is nearly complex, which is hard on transforms.
    """
    pair, wear = stiff_pair(), Fraction("0.05")
    rates = {}
    for stage in range(stages):
        for (i, j), rate in pair.rates.items():
            rates[stage * 4 + i, stage * 4 + j] = rate
        for i in range(4):
            rates[stage * 4 + i, (stage + 1) % stages * 4 + i] = wear
    down = tuple(state for state in range(4 * stages) if state % 4 == 3 or state // 4 == stages - 1)
    return Chain("stages of wear", 4 * stages, rates, down, (Fraction(300), Fraction(2000), Fraction(100_000)))
