"""Batches over samples give, sample by sample, what exact arithmetic and the bounded methods give one at a time."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import flint
import numpy as np
import pytest

from markov.chain import aggregate, batch, batch_transient, first_passage, stationary, survival, transient
from markov.chain.batch import compile_chain
from markov.chain.batch_transient import FEW_JUMPS, Pattern, foresee, spread
from markov.errors import IllPosed, NotReached, TooLarge, UsageError
from tests.chain import balls
from tests.chain.families import Chain, some

CHAINS = list(some(24, 71))
SAMPLES = 4


def samples_of(chain: Chain, seed: int) -> tuple[list[tuple[int, int]], list[Chain], np.ndarray]:
    """The same chain with its rates moved by up to ten per cent, in floats that are then exact."""
    rng = np.random.default_rng(seed)
    pairs = sorted(chain.rates)
    base = np.array([float(chain.rates[pair]) for pair in pairs])
    rates = base[:, None] * rng.uniform(0.9, 1.1, (len(pairs), SAMPLES))
    moved = [
        replace(chain, rates={pair: Fraction(rate) for pair, rate in zip(pairs, column, strict=True)})
        for column in rates.T.tolist()
    ]
    return pairs, moved, rates


def ends(pairs: list[tuple[int, int]]) -> tuple[np.ndarray, np.ndarray]:
    return np.array([a for a, _ in pairs]), np.array([b for _, b in pairs])


def off_by(found: float, truth: Fraction) -> float:
    return float(abs(Fraction(float(found)) - truth) / truth) if truth else abs(found)


def off_ball(found: float, truth: flint.arb) -> float:
    with flint.ctx.workprec(1200):
        if not truth > 1e-200:
            return abs(found)
        return float(abs(flint.arb(balls.rational(Fraction(float(found)))) / truth - 1).mid())


def irreducible(chain: Chain) -> bool:
    closed = chain.generator().closed_classes()
    return len(closed) == 1 and len(closed[0]) == chain.n


@pytest.mark.parametrize("chain", [chain for chain in CHAINS if irreducible(chain)], ids=lambda chain: chain.name)
@pytest.mark.parametrize("ground", [0, -1])
def test_long_run_of_every_sample(chain: Chain, ground: int) -> None:
    pairs, moved, rates = samples_of(chain, 1)
    compiled = compile_chain(chain.n, *ends(pairs), ground=ground % chain.n)
    found = compiled.stationary(rates)
    for sample, each in enumerate(moved):
        worst = max(map(off_by, found[:, sample], balls.stationary(each)))
        assert worst < 1e-14
        assert worst <= compiled.error + 2e-16
    assert compiled.error < 2e-13


@pytest.mark.parametrize("chain", CHAINS, ids=lambda chain: chain.name)
def test_times_until_the_down_states_of_every_sample(chain: Chain) -> None:
    pairs, moved, rates = samples_of(chain, 2)
    up = [state for state in range(chain.n) if state not in chain.down]
    place = {state: number for number, state in enumerate(up)}
    inside = [number for number, (a, b) in enumerate(pairs) if a in place and (b in place or b == chain.down[0])]
    # Only transitions into the first down state are kept out of the others: one rate a pair.
    source = [place[pairs[number][0]] for number in inside]
    target = [place.get(pairs[number][1], len(up)) for number in inside]
    moved = [replace(each, rates={pairs[number]: each.rates[pairs[number]] for number in inside}) for each in moved]
    if not moved[0].generator().reversed().reachable(chain.down[0])[up].all():
        pytest.skip("not every state leads down")
    start = np.eye(len(up))[0]
    compiled = compile_chain(len(up), source, target)
    found = compiled.passages(rates[inside], start)
    half = compiled.passages(rates[inside], start, found.rewards)
    for sample, each in enumerate(moved):
        ones = dict.fromkeys(up, Fraction(1))
        times = balls.before_absorption(each, chain.down, ones)
        later = balls.before_absorption(each, chain.down, times)
        assert max(off_by(found.rewards[place[state], sample], times[state]) for state in up) < 1e-14
        assert max(off_by(half.rewards[place[state], sample], later[state]) for state in up) < 1e-13
        assert off_by(found.spent[:, sample].sum(), times[up[0]]) < 1e-14
        for state in up:
            spent = balls.before_absorption(each, chain.down, {state: Fraction(1)})[up[0]]
            exits = sum((rate for (a, _), rate in each.rates.items() if a == state), Fraction(0))
            assert off_by(found.spent[place[state], sample], spent) < 1e-14
            assert off_by(found.visits[place[state], sample], spent * exits) < 1e-14


def truth_at(chain: Chain, time: Fraction, stopped: tuple[int, ...]) -> flint.arb_mat:
    return balls.exponential(chain, time, stopped, chain.down)


@pytest.mark.parametrize("chain", CHAINS, ids=lambda chain: chain.name)
def test_states_and_integrals_at_given_times_of_every_sample(chain: Chain) -> None:
    pairs, moved, rates = samples_of(chain, 3)
    pattern = Pattern(chain.n, *ends(pairs))
    start, reward = np.eye(chain.n)[0], chain.down_flags.astype(float)
    found = spread(pattern, rates, start, chain.times, [reward])
    for number, time in enumerate(chain.times):
        seen = foresee(pattern, rates, reward, time)
        for sample, each in list(enumerate(moved))[:2]:
            truth = truth_at(each, time, ())
            for state in range(chain.n):
                assert off_ball(found.states[number, state, sample], truth[0, state]) < 1e-12
                down = balls.total(truth[state, other] for other in chain.down)
                assert off_ball(seen[state, sample], down) < 1e-12
            assert off_ball(found.integrals[number, 0, sample], truth[0, chain.n] * balls.rational(Fraction(1))) < 1e-12


@pytest.mark.parametrize("chain", CHAINS[:18], ids=lambda chain: chain.name)
def test_first_failures_of_every_sample_keep_their_digits(chain: Chain) -> None:
    pairs, moved, rates = samples_of(chain, 4)
    kept = [number for number, (a, _) in enumerate(pairs) if a not in chain.down]
    pattern = Pattern(chain.n, *ends([pairs[number] for number in kept]))
    found = spread(pattern, rates[kept], np.eye(chain.n)[0], chain.times)
    for number, time in enumerate(chain.times):
        truth = truth_at(moved[0], time, chain.down)
        for state in chain.down:
            assert off_ball(found.states[number, state, 0], truth[0, state]) < 1e-12


def test_a_far_state_is_reached_within_the_shortest_time() -> None:
    n = 40
    rates = np.full((n - 1, 1), 1e-3)
    found = spread(Pattern(n, np.arange(n - 1), np.arange(1, n)), rates, np.eye(n)[0], [1, 2000])
    truth = balls.exponential(Chain("", n, {(i, i + 1): Fraction(1e-3) for i in range(n - 1)}, (), ()), Fraction(1))
    assert found.states[0, -1, 0] > 0.0
    assert off_ball(found.states[0, -1, 0], truth[0, n - 1]) < 1e-13
    assert found.states[1].sum() == pytest.approx(1.0, rel=1e-14)


def plant(n: int, samples: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Levels of faults, each repaired, some faults taking two levels at once."""
    rng = np.random.default_rng(n)
    pairs = [(i, i + 1) for i in range(n - 1)] + [(i, i + 2) for i in range(n - 2)] + [(i + 1, i) for i in range(n - 1)]
    size = np.array([1e-3 * (n - a) if b > a else 0.1 for a, b in pairs])
    size[n - 1 : 2 * n - 3] *= 1e-2
    return *ends(pairs), size[:, None] * rng.uniform(0.5, 2.0, (len(pairs), samples))


@pytest.mark.parametrize("n", [12, 60])
def test_agreement_with_the_bounded_methods(n: int) -> None:
    source, target, rates = plant(n, 3)
    down = np.arange(n) >= 4
    found = compile_chain(n, source, target, ground=0).stationary(rates)
    start, times = np.eye(n)[0], [Fraction(5), Fraction(8760), Fraction(10) ** 7]
    states = spread(Pattern(n, source, target), rates, start, times, [down.astype(float)])
    alive = source < 4
    into = np.minimum(target[alive], 4)
    pairs, owner = np.unique(source[alive] * 5 + into, return_inverse=True)
    merged = np.zeros((len(pairs), 3))
    np.add.at(merged, owner, rates[alive])
    failing = spread(Pattern(5, pairs // 5, pairs % 5), merged, np.eye(5)[0], times)
    until = compile_chain(4, pairs // 5, pairs % 5).passages(merged, np.eye(4)[0])
    lasting = foresee(Pattern(5, pairs // 5, pairs % 5), merged, np.array([1, 1, 1, 1, 0.0]), 100)
    for sample in range(3):
        chain = aggregate(n, source, target, rates[:, sample], rate_error=0.0)
        np.testing.assert_allclose(found[:, sample], stationary(chain).values, rtol=1e-13)
        free = transient(chain, 0, times, [down.astype(float)])
        stopped = transient(chain, 0, times, absorbing=down)
        for number in range(3):
            np.testing.assert_allclose(states.states[number, :, sample], free.states[number].values, rtol=1e-12)
            np.testing.assert_allclose(states.integrals[number, :, sample], free.integrals[number].values, rtol=1e-12)
            np.testing.assert_allclose(
                failing.states[number, 4, sample], stopped.absorbed[number].values[0], rtol=1e-12
            )
        mean = first_passage(chain, 0, down).mean
        assert mean is not None
        assert until.rewards[0, sample] == pytest.approx(mean.value, rel=1e-14)
        np.testing.assert_allclose(lasting[:4, sample], survival(chain, ~down, 100).values[:4], rtol=1e-13)


def test_without_holding_the_rows_small_probabilities_are_lost(monkeypatch: pytest.MonkeyPatch) -> None:
    source, target, rates = plant(12, 2)
    pattern, start = Pattern(12, source, target), np.eye(12)[0]
    held = spread(pattern, rates, start, [10**9]).states
    monkeypatch.setattr(batch_transient, "_held", lambda moves: moves)
    drifted = spread(pattern, rates, start, [10**9]).states
    assert np.abs(drifted / held - 1.0).max() > 1e-9


def test_a_chain_of_levels_needs_no_further_transitions() -> None:
    levels = [(i, i + 1) for i in range(9)] + [(i + 1, i) for i in range(9)]
    assert compile_chain(10, *ends(levels), ground=0).size == len(levels)


def test_samples_do_not_depend_on_the_blocks_they_stand_in(monkeypatch: pytest.MonkeyPatch) -> None:
    source, target, rates = plant(12, 1100)
    together = compile_chain(12, source, target, ground=0).stationary(rates)
    states = spread(Pattern(12, source, target), rates, np.eye(12)[0], [30, 8760]).states
    monkeypatch.setattr(batch, "_BLOCK", 1)
    monkeypatch.setattr(batch_transient, "_BLOCK", 144 * 100)
    np.testing.assert_array_equal(compile_chain(12, source, target, ground=0).stationary(rates), together)
    apart = spread(Pattern(12, source, target), rates, np.eye(12)[0], [30, 8760]).states
    np.testing.assert_allclose(apart, states, rtol=1e-13)


def test_times_may_stand_in_any_order_on_both_sides_of_the_change_of_method() -> None:
    source, target, rates = plant(12, 2)
    pattern, start, reward = Pattern(12, source, target), np.eye(12)[0], np.arange(12.0)
    times = [Fraction(FEW_JUMPS, 3), 0, 10**4, Fraction(1, 7), 300]
    together = spread(pattern, rates, start, times, [reward])
    for number, time in enumerate(times):
        alone = spread(pattern, rates, start, [time], [reward])
        np.testing.assert_allclose(together.states[number], alone.states[0], rtol=1e-13)
        np.testing.assert_allclose(together.integrals[number], alone.integrals[0], rtol=1e-13)
    np.testing.assert_array_equal(together.states[1], np.repeat(start[:, None], 2, axis=1))
    assert not together.integrals[1].any()


def test_weights_and_rewards_may_differ_from_sample_to_sample() -> None:
    source, target, rates = plant(6, 2)
    start = np.array([[1, 0], [0, 1], [0, 0], [0, 0], [0, 0], [0, 0]], float)
    reward = np.array([[1.0, 2.0]] * 6)
    found = spread(Pattern(6, source, target), rates, start, [100], [reward])
    np.testing.assert_allclose(found.integrals[0, 0], [100.0, 200.0], rtol=1e-13)
    for sample in range(2):
        alone = spread(Pattern(6, source, target), rates[:, [sample]], start[:, sample], [100])
        np.testing.assert_allclose(found.states[0, :, sample], alone.states[0, :, 0], rtol=1e-13)


# ---------------------------------------------------------------------------------------------------- zero rates


def test_a_rate_of_zero_is_fine_while_every_state_keeps_a_way_out() -> None:
    source, target = np.array([0, 1, 0, 2, 1]), np.array([1, 0, 2, 0, 2])
    rates = np.array([[1.0, 1.0], [3.0, 3.0], [0.0, 0.5], [4.0, 4.0], [0.0, 0.0]])
    found = compile_chain(3, source, target, ground=0).stationary(rates)
    np.testing.assert_allclose(found[:, 0], [0.75, 0.25, 0.0], rtol=1e-15)
    assert found[2, 1] > 0.0


def test_a_rate_of_zero_that_cuts_the_chain_is_told_with_its_sample() -> None:
    rates = np.array([[1.0, 1.0, 1.0], [3.0, 3.0, 0.0]])
    with pytest.raises(IllPosed, match=r"sample 2 .* state 1"):
        compile_chain(2, [0, 1], [1, 0], ground=0).stationary(rates)
    with pytest.raises(IllPosed, match="sample 2"):
        compile_chain(2, [0, 1], [1, 2]).passages(rates, [1.0, 0.0])


def test_values_at_a_time_take_any_zero_rate() -> None:
    found = spread(Pattern(2, np.array([0, 1]), np.array([1, 0])), np.array([[0.1, 0.0], [0.0, 0.0]]), [1.0, 0.0], [10])
    np.testing.assert_allclose(found.states[0], [[np.exp(-1.0), 1.0], [-np.expm1(-1.0), 0.0]], rtol=1e-15)


# ------------------------------------------------------------------------------------------------------ refusals


def test_rates_too_far_apart_are_refused_and_not_lost_by_underflow() -> None:
    n = 12
    levels = [(i, i + 1) for i in range(n - 1)] + [(i + 1, i) for i in range(n - 1)]
    rates = np.array([[1e-60]] * (n - 1) + [[1.0]] * (n - 1))
    with pytest.raises(NotReached, match="underflow"):
        compile_chain(n, *ends(levels), ground=0).stationary(rates)


@pytest.mark.parametrize(
    ("n", "source", "target", "ground"),
    [
        (2, [0], [2], 0),
        (2, [0, 0], [1, 1], None),
        (2, [0], [0], None),
        (2, [0, 1], [1], None),
        (2, [0], [3], None),
        (2, [-1], [0], None),
        (2, [0, 1], [1, 0], 2),
    ],
)
def test_what_is_no_pattern_is_refused(n: int, source: list[int], target: list[int], ground: int | None) -> None:
    with pytest.raises(UsageError):
        compile_chain(n, source, target, ground=ground)


@pytest.mark.parametrize("rates", [[[1.0], [-1.0]], [[1.0], [np.nan]], [[1.0], [np.inf]], [[1.0]], [1.0, 2.0]])
def test_what_are_no_rates_is_refused(rates: list[list[float]]) -> None:
    with pytest.raises(UsageError):
        compile_chain(2, [0, 1], [1, 0], ground=0).stationary(rates)
    with pytest.raises(UsageError):
        spread(Pattern(2, np.array([0, 1]), np.array([1, 0])), rates, [1.0, 0.0], [1])


def test_patterns_are_for_what_they_were_compiled_for() -> None:
    rates = np.ones((2, 1))
    with pytest.raises(UsageError, match="ground"):
        compile_chain(2, [0, 1], [1, 2]).stationary(rates)
    with pytest.raises(UsageError, match="ground"):
        compile_chain(2, [0, 1], [1, 0], ground=0).passages(rates, [1.0, 0.0])
    with pytest.raises(UsageError, match="2 states"):
        compile_chain(2, [0, 1], [1, 2]).passages(rates, [1.0, 0.0, 0.0])


def test_large_chains_are_left_to_one_at_a_time() -> None:
    with pytest.raises(TooLarge):
        compile_chain(batch.LARGEST_BATCH + 1, [0], [1])
    with pytest.raises(TooLarge):
        Pattern(batch_transient.LARGEST_BATCH + 1, np.array([0]), np.array([1]))
    n = 300
    code = np.arange(n * n)
    source, target = code // n, code % n
    with pytest.raises(TooLarge, match="products"):
        compile_chain(n, source[source != target], target[source != target], ground=0)
