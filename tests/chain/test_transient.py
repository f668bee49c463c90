"""Values at given times against matrix exponentials in ball arithmetic: contained without exception."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from markov import chain as room
from markov.chain import uniformisation
from markov.errors import NotReached
from tests.chain import balls, families

METHODS = ("ladder", "uniformisation", "settling", "squaring")
WIDTH = {"ladder": 3e-15, "uniformisation": 2e-9, "settling": 2e-9}


def suited(chain: families.Chain, method: str) -> list[Fraction]:
    """The times of a chain that a method takes; the tests keep uniformisation short."""
    generator = chain.generator()
    return [
        time
        for time in chain.times
        if method != "uniformisation" or uniformisation.expected_jumps(generator, None, time) < 3e3
    ]


def check(found: room.Enclosure, truth, method: str, name: str) -> None:
    assert balls.sharp(truth), name
    if method == "squaring":
        assert not found.certified
        if float(truth) > 1e-30:
            assert found.value == pytest.approx(float(truth), rel=1e-10), name
        return
    assert balls.holds(found, truth), name
    if float(truth) > 1e-60:
        assert found.width < WIDTH[method], name


@pytest.mark.parametrize("method", METHODS)
def test_states_and_integrals_are_contained(method):
    asked = 0
    for chain in families.some(54, seed=21):
        times = suited(chain, method)
        if not times:
            continue
        try:
            found = room.transient(chain.generator(), 0, times, [chain.down_flags], method=method)
        except NotReached:
            assert method == "settling"
            continue
        for time, states, spent in zip(times, found.states, found.integrals, strict=True):
            truth = balls.exponential(chain, time, reward=chain.down)
            for state in range(chain.n):
                check(states.entry(state), truth[0, state], method, f"{chain.name} t={time} state {state}")
                asked += 1
            check(spent.entry(0), truth[0, chain.n], method, f"{chain.name} t={time} down time")
    assert asked > 150


@pytest.mark.parametrize("method", METHODS)
def test_absorption_is_contained(method):
    asked = 0
    for chain in families.some(54, seed=22):
        times = suited(chain, method)
        if not times:
            continue
        try:
            found = room.transient(
                chain.generator(), 0, times, [~chain.down_flags], absorbing=chain.down_flags, method=method
            )
        except NotReached:
            assert method == "settling"
            continue
        alive = [state for state in range(chain.n) if state not in chain.down]
        for number, time in enumerate(times):
            truth = balls.exponential(chain, time, stopped=chain.down, reward=alive)
            name = f"{chain.name} t={time}"
            failed = balls.total(truth[0, state] for state in chain.down)
            check(found.absorbed[number].entry(0), failed, method, name)
            lasting = balls.total(truth[0, state] for state in alive)
            if method != "squaring":
                assert balls.holds(found.alive[number], lasting), name
                assert float(lasting) < 1e-60 or found.alive[number].width <= 2.01 * max(WIDTH[method], 1e-15), name
            for state in alive:
                check(found.states[number].entry(state), truth[0, state], method, f"{name} state {state}")
            check(found.integrals[number].entry(0), truth[0, chain.n], method, f"{name} time alive")
            asked += 1
    assert asked > 30


@pytest.mark.parametrize("method", ["ladder", "uniformisation", "settling"])
def test_survival_of_a_duration_is_contained_from_every_state(method):
    asked = 0
    for chain in families.some(36, seed=23):
        for time in suited(chain, method)[-1 if method == "settling" else 0 :][:1]:
            try:
                found = room.survival(chain.generator(), ~chain.down_flags, time, method=method)
            except NotReached:
                assert method == "settling"
                continue
            truth = balls.exponential(chain, time, stopped=chain.down)
            alive = [state for state in range(chain.n) if state not in chain.down]
            for state in alive:
                lasting = balls.total(truth[state, other] for other in alive)
                check(found.entry(state), lasting, method, f"{chain.name} t={time} from {state}")
                asked += 1
            for state in chain.down:
                assert found.entry(state) == room.point(0, found.method)
    assert asked > 40


def test_jumps_in_the_hundred_thousand_millions_are_contained():
    for number in range(4):
        rng = np.random.default_rng([24, number])
        chain = families.stiff(rng, f"stiff-{number}", span=12.0)
        largest = max(float(chain.generator().exits.high[i]) for i in range(chain.n))
        time = Fraction(int(1e11 / largest))
        (states,) = room.transient(chain.generator(), 0, [time]).states
        truth = balls.exponential(chain, time)
        for state in range(chain.n):
            check(states.entry(state), truth[0, state], "ladder", f"{chain.name} state {state}")


@pytest.mark.parametrize("method", ["ladder", "uniformisation", "squaring"])
def test_erlang_hundred_at_the_foot_of_its_rise(method):
    stages = 100
    rates = {(i, i + 1): Fraction(1, 3) for i in range(stages)}
    chain = families.Chain("erlang", stages + 1, rates, (stages,), ())
    times = [Fraction(60), Fraction(300)]
    found = room.transient(chain.generator(), 0, times, absorbing=chain.down_flags, method=method)
    for number, time in enumerate(times):
        truth = balls.exponential(chain, time, stopped=chain.down)[0, stages]
        check(found.absorbed[number].entry(0), truth, method, f"Erlang at {time}")


def test_many_times_at_once_equal_single_ones():
    chain = next(families.some(1, seed=25))
    times = [Fraction(0), Fraction(1, 7), Fraction(10) ** 5, Fraction(3), Fraction(10) ** 5]
    together = room.transient(chain.generator(), 0, times, [np.ones(chain.n)])
    for number, time in enumerate(times):
        alone = room.transient(chain.generator(), 0, [time], [np.ones(chain.n)])
        assert np.allclose(together.states[number].values, alone.states[0].values, rtol=1e-14, atol=0)
        # The whole time passes: an integral of ones is the time itself.
        assert balls.holds(together.integrals[number].entry(0), time)


def test_a_distribution_carried_over_a_boundary_gives_the_same_as_one_run():
    for chain in families.some(12, seed=26):
        first, second = chain.times[0], chain.times[-1]
        generator = chain.generator()
        half = room.transient(generator, 0, [first]).states[0]
        whole = room.transient(generator, half, [second], absorbing=chain.down_flags)
        before = balls.exponential(chain, first)
        after = balls.exponential(chain, second, stopped=chain.down)
        everywhere = range(chain.n)
        failed = [balls.total(after[state, end] for end in chain.down) for state in everywhere]
        truth = balls.mixed([before[0, state] for state in everywhere], failed)
        found = whole.absorbed[0].entry(0)
        assert balls.holds(found, truth), chain.name
        assert found.width < 1e-14, chain.name


def test_classes_of_absorption_share_the_whole():
    for chain in families.some(12, seed=27):
        if chain.n < 4:
            continue
        label = np.full(chain.n, -1)
        label[chain.n - 1], label[chain.n - 2] = 0, 1
        (found,) = room.transient(chain.generator(), 0, [chain.times[-1]], absorbing=label).absorbed
        truth = balls.exponential(chain, chain.times[-1], stopped=(chain.n - 1, chain.n - 2))
        assert balls.holds(found.entry(0), truth[0, chain.n - 1]), chain.name
        assert balls.holds(found.entry(1), truth[0, chain.n - 2]), chain.name


@pytest.mark.parametrize("method", ["ladder", "uniformisation"])
def test_a_wrong_rate_is_noticed(method):
    """A rate off by 1e-9 (1e-6 for the wider method) must fall out of the interval."""
    noticed = asked = 0
    for chain in families.some(24, seed=28):
        times = suited(chain, method)
        if not times or chain.n < 3:
            continue
        time = times[-1]
        touched = max(pair for pair in chain.rates if pair[0] == 0)
        off = Fraction(1, 10**9) if method == "ladder" else Fraction(1, 10**6)
        wrong = chain.generator({touched: 1 + off})
        (found,) = room.transient(wrong, 0, [time], method=method).states
        truth = balls.exponential(chain, time)
        # At a settled time some rates no longer matter; ask only where the truth itself moves.
        moved = balls.exponential(replace(chain, rates=chain.rates | {touched: chain.rates[touched] * (1 + off)}), time)
        least = float(off) / 100
        if not any(balls.differ(moved[0, state], truth[0, state], least) for state in range(chain.n)):
            continue
        asked += 1
        noticed += not all(balls.holds(found.entry(state), truth[0, state]) for state in range(chain.n))
    assert asked >= 10
    assert noticed == asked


def test_a_time_off_by_one_part_in_a_million_million_is_noticed():
    chain = list(families.some(2, seed=29))[1]
    time = Fraction(87600)
    (found,) = room.transient(
        chain.generator(), 0, [time * (1 + Fraction(1, 10**12))], absorbing=chain.down_flags
    ).absorbed
    truth = balls.exponential(chain, time, stopped=chain.down)
    failed = balls.total(truth[0, state] for state in chain.down)
    assert not balls.holds(found.entry(0), failed)
