"""Derivatives by every rate, against differences of exact rational or ball arithmetic over a step of 1e-40 and less."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from fractions import Fraction

import flint
import numpy as np
import pytest

from markov.chain import Generator, aggregate, derivatives, elimination, pairing
from markov.chain.derivatives import Sloped, absorption_slopes, integral_slopes, long_run_slopes, slopes_at
from markov.errors import IllPosed, NotReached, TooLarge
from tests.chain import balls
from tests.chain.families import Chain, some

CHAINS = list(some(18, 35))
STEP = Fraction(1, 10**60)
Truth = Callable[[Chain], flint.arb]


def certain(chain: Chain) -> bool:
    """Whether a down state is reached from everywhere, so that exact arithmetic can ask for the time."""
    return bool(chain.generator().reversed().reachable(list(chain.down)).all())


def irreducible(chain: Chain) -> bool:
    closed = chain.generator().closed_classes()
    return len(closed) == 1 and len(closed[0]) == chain.n


def moved(chain: Chain, every: int = 1) -> Iterator[tuple[int, Fraction, Chain]]:
    """Each rate of the chain with its number in the generator, its step, and the chain with that rate moved."""
    generator = chain.generator()
    pairs = zip(generator.source.tolist(), generator.target.tolist(), strict=True)
    for number, pair in list(enumerate(pairs))[::every]:
        step = chain.rates[pair] * STEP
        yield number, step, replace(chain, rates={**chain.rates, pair: chain.rates[pair] + step})


def check(chain: Chain, found: Sloped, truth: Truth, every: int = 1) -> None:
    """Compare the derivative by each rate with a difference, which is off by about the step.

    While the value is not certain, no derivative may be lost in what cancels.
    """
    before = truth(chain)
    for number, step, other in moved(chain, every):
        slope = found.more.fraction(number) - found.less.fraction(number)
        size = found.more.fraction(number) + found.less.fraction(number)
        with flint.ctx.workprec(1200):
            exact = (truth(other) - before) / balls.rational(step)
            doubt = flint.arb(balls.rational(size)) * found.error
            apart = abs(flint.arb(balls.rational(slope)) - exact)
            if size == 0:  # a rate without influence: the difference of two balls is zero but for their widths
                assert abs(exact) < 1e-150
            else:
                assert apart < flint.arb(1e-30) * abs(exact) + doubt
                assert not (before < 0.9 or before > 1.1) or doubt < 1e-9 * abs(exact)


def ball(x: Fraction) -> flint.arb:
    with flint.ctx.workprec(1200):
        return flint.arb(balls.rational(x))


@pytest.mark.parametrize("chain", [chain for chain in CHAINS if irreducible(chain)], ids=lambda chain: chain.name)
def test_long_run(chain: Chain) -> None:
    generator = chain.generator()

    def truth(each: Chain) -> flint.arb:
        return ball(sum((balls.stationary(each)[state] for state in each.down), Fraction(0)))

    found = long_run_slopes(generator, np.arange(chain.n, dtype=np.int32), chain.down_flags.astype(float))
    assert abs(found.value / sum(balls.stationary(chain)[state] for state in chain.down) - 1) < 1e-22
    check(chain, found, truth)


@pytest.mark.parametrize("chain", [chain for chain in CHAINS if certain(chain)], ids=lambda chain: chain.name)
def test_time_to_absorption_and_its_second_moment(chain: Chain) -> None:
    up = [state for state in range(chain.n) if state not in chain.down]

    def mean(each: Chain) -> flint.arb:
        return ball(balls.before_absorption(each, each.down, dict.fromkeys(up, Fraction(1)))[0])

    def half(each: Chain) -> flint.arb:
        times = balls.before_absorption(each, each.down, dict.fromkeys(up, Fraction(1)))
        return ball(balls.before_absorption(each, each.down, times)[0])

    first, second = absorption_slopes(chain.generator(), np.eye(chain.n)[0], chain.down_flags)
    check(chain, first, mean)
    check(chain, second, half)


@pytest.mark.parametrize("chain", CHAINS, ids=lambda chain: chain.name)
def test_failure_within_a_time(chain: Chain) -> None:
    for time in chain.times:

        def truth(each: Chain, time: Fraction = time) -> flint.arb:
            moves = balls.exponential(each, time, each.down)
            return balls.total(moves[0, state] for state in each.down)

        nowhere = np.zeros(chain.n)
        found, seen = slopes_at(
            chain.generator(), np.eye(chain.n)[0], time, nowhere, stopped=chain.down_flags, absorbed=1.0
        )
        assert seen.fraction(0) == found.value or abs(seen.fraction(0) / found.value - 1) < 1e-20
        check(chain, found, truth, 3)


@pytest.mark.parametrize("chain", CHAINS, ids=lambda chain: chain.name)
def test_state_at_a_time_and_time_spent_until_then(chain: Chain) -> None:
    down = chain.down_flags.astype(float)
    for time in chain.times[:2]:

        def at(each: Chain, time: Fraction = time) -> flint.arb:
            moves = balls.exponential(each, time)
            return balls.total(moves[0, state] for state in each.down)

        def spent(each: Chain, time: Fraction = time) -> flint.arb:
            return balls.exponential(each, time, (), each.down)[0, each.n]

        found, _ = slopes_at(chain.generator(), np.eye(chain.n)[0], time, down)
        check(chain, found, at, 4)
        check(chain, integral_slopes(chain.generator(), np.eye(chain.n)[0], time, down), spent, 4)


def test_derivatives_by_rewards_are_the_weights_of_the_states() -> None:
    chain = CHAINS[1]
    generator, start = chain.generator(), np.eye(chain.n)[0]
    reward = np.arange(chain.n) + 1.0
    weights = long_run_slopes(generator, np.arange(chain.n, dtype=np.int32), reward).rewards
    for state, share in enumerate(balls.stationary(chain)):
        assert abs(weights.fraction(state) / share - 1) < 1e-22
    moves = balls.exponential(chain, chain.times[0])
    at = slopes_at(generator, start, chain.times[0], reward)[0].rewards
    spent = integral_slopes(generator, start, chain.times[0], reward).rewards
    for state in range(chain.n):
        with flint.ctx.workprec(1200):
            assert abs(ball(at.fraction(state)) / moves[0, state] - 1) < 1e-20
            there = balls.exponential(chain, chain.times[0], (), (state,))[0, chain.n]
            assert abs(ball(spent.fraction(state)) / there - 1) < 1e-20


def two_states() -> Generator:
    return aggregate(2, [0, 1], [1, 0], [1e-3, 0.1], rate_error=0.0)


def test_unavailability_of_one_unit_rises_with_failures_and_falls_with_repairs() -> None:
    found = long_run_slopes(two_states(), np.array([0, 1], np.int32), np.array([0.0, 1.0]))
    fail, repair = Fraction(1e-3), Fraction(0.1)
    slopes = [found.more.fraction(number) - found.less.fraction(number) for number in range(2)]
    assert float(slopes[0]) == pytest.approx(float(repair / (fail + repair) ** 2), rel=1e-15)
    assert float(slopes[1]) == pytest.approx(float(-fail / (fail + repair) ** 2), rel=1e-15)


def test_nothing_moves_a_start_that_is_absorbed_or_a_period_of_no_length() -> None:
    first, second = absorption_slopes(two_states(), np.array([0.0, 1.0]), np.array([False, True]))
    assert first.value == second.value == 0
    assert not first.more.high.any()
    found, _ = slopes_at(two_states(), np.array([1.0, 0.0]), Fraction(0), np.array([0.25, 1.0]))
    assert found.value == Fraction(1, 4)
    assert not found.more.high.any()
    assert not found.less.high.any()


def test_a_place_without_a_way_down_is_refused() -> None:
    stuck = aggregate(3, [0, 0], [1, 2], [1.0, 1.0])
    with pytest.raises(IllPosed, match="no down state"):
        absorption_slopes(stuck, np.array([1.0, 0.0, 0.0]), np.array([False, True, False]))


def test_chains_too_large_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(elimination, "LARGEST_ELIMINATION", 0)
    monkeypatch.setattr(pairing, "LARGEST_PAIRING", 2)
    with pytest.raises(TooLarge):
        long_run_slopes(two_states(), np.array([0, 1], np.int32), np.array([0.0, 1.0]))
    with pytest.raises(TooLarge):
        slopes_at(two_states(), np.array([1.0, 0.0]), Fraction(1), np.array([0.0, 1.0]))


def test_more_doublings_than_digits_allow_are_refused() -> None:
    with pytest.raises(NotReached, match="doublings"):
        slopes_at(two_states(), np.array([1.0, 0.0]), Fraction(10) ** 40, np.array([0.0, 1.0]))


def test_a_slope_left_of_far_larger_terms_keeps_its_digits() -> None:
    """Survival hardly depends on how fast the last of many failures is told from the one before."""
    chain = next(chain for chain in CHAINS if chain.name.startswith("nearly_uncoupled"))
    found = long_run_slopes(chain.generator(), np.arange(chain.n, dtype=np.int32), chain.down_flags.astype(float))
    shares = []
    for number in range(chain.generator().source.size):
        more, less = found.more.fraction(number), found.less.fraction(number)
        shares.append(abs(more - less) / (more + less))
    assert min(shares) < 1e-3
    assert found.error < 1e-22


def test_holding_only_floats_would_lose_the_digits_of_a_slope(monkeypatch: pytest.MonkeyPatch) -> None:
    """The check has teeth: with the low parts cut off the same comparison fails."""
    chain = next(chain for chain in CHAINS if chain.name.startswith("nearly_uncoupled"))
    exact = derivatives.multiply

    def cut(x: derivatives.Doubled, y: derivatives.Doubled) -> derivatives.Doubled:
        found = exact(x, y)
        return derivatives.Doubled(found.high, np.zeros_like(found.low))

    monkeypatch.setattr(derivatives, "multiply", cut)
    found = long_run_slopes(chain.generator(), np.arange(chain.n, dtype=np.int32), chain.down_flags.astype(float))

    def truth(each: Chain) -> flint.arb:
        return ball(sum((balls.stationary(each)[state] for state in each.down), Fraction(0)))

    with pytest.raises(AssertionError):
        check(chain, found, truth)
