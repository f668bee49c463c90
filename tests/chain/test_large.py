"""Chains beyond elimination: independent units give the truth, methods must meet, and spoiled proofs must fail."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from functools import reduce

import flint
import numpy as np
import pytest
from scipy.sparse import csr_array

from markov import chain as room
from markov.chain import dense, elimination, mmatrix, shape, solve, uniformisation
from markov.chain import sweeps as sweeps_module
from markov.chain.doubled import plain
from markov.chain.hub import Hub
from markov.errors import NotReached
from markov.rates import split_exact
from tests.chain import balls, families


@dataclass(frozen=True)
class Plant:
    """Independent groups of two identical units with one crew each: 3**groups states, digit = number failed."""

    failing: tuple[Fraction, ...]
    repair: tuple[Fraction, ...]

    @property
    def n(self) -> int:
        return int(3 ** len(self.failing))

    def digit(self, group: int) -> np.ndarray:
        return (np.arange(self.n) // 3**group) % 3

    @property
    def faults(self) -> np.ndarray:
        return sum(self.digit(group) for group in range(len(self.failing)))

    def generator(self) -> room.Generator:
        source, target, rates = [], [], []
        for group, (a, b) in enumerate(zip(self.failing, self.repair, strict=True)):
            digit = self.digit(group)
            for level, move, rate in ((0, 1, 2 * a), (1, 1, a), (1, -1, b), (2, -1, b)):
                here = np.flatnonzero(digit == level)
                source.append(here)
                target.append(here + move * 3**group)
                rates += [rate] * here.size
        return room.aggregate(self.n, np.concatenate(source), np.concatenate(target), *split_exact(rates))

    def part(self, group: int) -> families.Chain:
        a, b = self.failing[group], self.repair[group]
        return families.Chain("part", 3, {(0, 1): 2 * a, (1, 2): a, (1, 0): b, (2, 1): b}, (2,), ())


def plant(groups: int, seed: int) -> Plant:
    rng = np.random.default_rng([31, seed])
    return Plant(
        tuple(families.decimal(rng, -6, -4) for _ in range(groups)),
        tuple(families.decimal(rng, -2, 0) for _ in range(groups)),
    )


#: Widths of single probabilities by way of solving: residuals in floats cost digits, but stay within what is wanted.
WAYS = {"dense": 1e-15, "sweeps": 1e-15, "floats": 1e-12}


def force(way: str, monkeypatch: pytest.MonkeyPatch) -> None:
    if way != "dense":
        monkeypatch.setattr(dense, "LARGEST_DENSE", 0)
    if way == "floats":
        monkeypatch.setattr(mmatrix, "_DOUBLED_RESIDUAL", 0)
        for module in (mmatrix, sweeps_module, solve):
            monkeypatch.setattr(module, "_MOST_ROWS" if module is sweeps_module else "_PIECE", 50)


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("given", [True, False])
def test_stationary_values_of_729_states_are_products(way, given, monkeypatch):
    force(way, monkeypatch)
    case = plant(6, seed=1)
    found = room.stationary(case.generator(), level=case.faults if given else None)
    assert "certified" in found.method
    parts = [balls.stationary(case.part(group)) for group in range(6)]
    for state in (0, 1, 100, 364, 728):
        truth = reduce(lambda x, y: x * y, (parts[g][(state // 3**g) % 3] for g in range(6)))
        assert balls.holds(found.entry(state), truth)
        assert found.entry(state).width < WAYS[way]
    for group in range(6):
        down = case.digit(group) == 2
        share = found.weighted(down)
        assert balls.holds(share, parts[group][2])
        assert share.upper - share.lower < WAYS[way] * share.value
        back = found.weighted(room.flow(case.generator(), down, ~down))
        assert balls.holds(back, parts[group][2] * case.repair[group])


@pytest.mark.parametrize("seed", range(4))
def test_residuals_in_floats_stay_within_their_margin(seed, monkeypatch):
    monkeypatch.setattr(dense, "LARGEST_DENSE", 0)
    case = plant(5, seed=seed)
    hub = Hub(case.generator(), plain(np.zeros(case.n)), 0.0, 0)
    rng = np.random.default_rng(seed)
    for side in ("row", "column"):
        flow = (hub.row if side == "row" else hub.column)[0]
        b, error = (hub.outward, hub.chain.rate_error) if side == "row" else (hub.inward, hub.inward_error)
        solved = hub.solve(side, b, error)[0].high
        y = plain(solved * (1.0 + 1e-14 * rng.standard_normal(case.n - 1)))
        exact, own = flow.residual(y, b, error)
        assert (own < 1e-20 * y.high * flow.exits.high + 1e-290).all()
        monkeypatch.setattr(mmatrix, "_DOUBLED_RESIDUAL", 0)
        found, margin = flow.residual(y, b, error)
        assert (np.abs(found - exact) <= margin).all()
        assert (margin <= 1e-14 * (y.high * flow.exits.high + np.abs(found))).all()
        monkeypatch.undo()
        monkeypatch.setattr(dense, "LARGEST_DENSE", 0)


@pytest.mark.parametrize("way", WAYS)
def test_numbers_of_states_do_not_matter(way, monkeypatch):
    force(way, monkeypatch)
    case = plant(5, seed=8)
    straight = case.generator()
    moved = np.random.default_rng(8).permutation(case.n)
    mixed = room.aggregate(case.n, moved[straight.source], moved[straight.target], straight.high, straight.low)
    one, two = room.stationary(straight), room.stationary(mixed)
    for state in range(0, case.n, 11):
        assert one.entry(state).meet(two.entry(int(moved[state]))).width < WAYS[way]


@pytest.mark.parametrize("way", ["sweeps", "floats"])
def test_a_result_tells_how_often_the_rates_were_read(way, monkeypatch):
    force(way, monkeypatch)
    generator = plant(6, seed=9).generator()
    read = [0]
    product = csr_array.__matmul__

    def counted(matrix, other):
        read[0] += matrix.nnz
        return product(matrix, other)

    def doubled(flow, y, original=mmatrix.Flow.carried_doubled):
        read[0] += flow.incoming.nnz  # not a product of scipy
        return original(flow, y)

    monkeypatch.setattr(csr_array, "__matmul__", counted)
    monkeypatch.setattr(mmatrix.Flow, "carried_doubled", doubled)
    found = room.stationary(generator)
    assert found.readings == pytest.approx(read[0] / generator.source.size)
    assert 10 < found.readings < 80
    monkeypatch.undo()
    assert room.stationary(generator).readings < found.readings  # solved as a dense matrix


@pytest.mark.parametrize("time", [Fraction(5), Fraction(700), Fraction(10) ** 6])
def test_probabilities_at_a_time_of_729_states_are_products(time):
    case = plant(6, seed=2)
    found = room.transient(case.generator(), 0, [time], [case.digit(3) == 2])
    truths = [balls.exponential(case.part(group), time, reward=(2,)) for group in range(6)]
    for state in (0, 2, 50, 365, 728):
        with flint.ctx.workprec(1200):
            truth = reduce(lambda x, y: x * y, (truths[g][0, (state // 3**g) % 3] for g in range(6)))
        assert balls.holds(found.states[0].entry(state), truth), found.method
        assert found.states[0].entry(state).width < 1e-10, found.method
    assert balls.holds(found.integrals[0].entry(0), truths[3][0, 3])
    assert balls.holds(found.states[0].weighted(case.digit(3) == 2), truths[3][0, 2])


def test_first_passage_meets_between_solvers(monkeypatch):
    case = plant(5, seed=3)
    generator, down = case.generator(), case.faults >= 4
    exact = room.first_passage(generator, 0, down)
    monkeypatch.setattr(elimination, "LARGEST_ELIMINATION", 0)
    for _ in ("dense", "sweeps"):
        other = room.first_passage(generator, 0, down)
        assert other.mean.method != exact.mean.method
        assert other.mean.meet(exact.mean).width < 1e-15
        assert other.standard_deviation.meet(exact.standard_deviation).width < 1e-15
        monkeypatch.setattr(dense, "LARGEST_DENSE", 0)


@pytest.mark.parametrize("time", [Fraction(10) ** 4, Fraction(10) ** 8])
def test_absorption_after_settling_meets_the_ladder(time):
    case = plant(5, seed=4)
    generator, down = case.generator(), case.faults >= 3
    reward = [np.where(down, 0.0, case.faults)]
    one = room.transient(generator, 0, [time], reward, absorbing=down, method="settling")
    two = room.transient(generator, 0, [time], reward, absorbing=down, method="ladder")
    assert one.absorbed[0].entry(0).meet(two.absorbed[0].entry(0)).width < 1e-14
    assert one.integrals[0].entry(0).meet(two.integrals[0].entry(0)).width < 1e-14
    assert one.absorbed[0].entry(0).width < 1e-10
    for state in np.flatnonzero(~down)[::7]:
        one.states[0].entry(state).meet(two.states[0].entry(state))


def test_survival_after_settling_meets_the_ladder():
    case = plant(5, seed=5)
    generator, alive = case.generator(), case.faults < 3
    one = room.survival(generator, alive, 10**7, method="settling")
    two = room.survival(generator, alive, 10**7, method="ladder")
    for state in np.flatnonzero(alive):
        both = one.entry(state).meet(two.entry(state))
        assert both.width < 1e-14
        assert one.entry(state).width < 1e-9


def test_the_settled_shape_is_taken_and_carries_on_for_any_time():
    chain = list(families.some(2, seed=32))[1]
    generator = chain.generator()
    times = [Fraction(10) ** 8, Fraction(10) ** 10, Fraction(10) ** 12]
    found = room.transient(generator, 0, times, absorbing=chain.down_flags, method="settling")
    for number, time in enumerate(times):
        truth = balls.exponential(chain, time, stopped=chain.down)
        failed = balls.total(truth[0, state] for state in chain.down)
        assert uniformisation.expected_jumps(generator, None, time) > 1e7
        assert balls.holds(found.absorbed[number].entry(0), failed)
        for state in range(chain.n):
            if state not in chain.down:
                assert balls.holds(found.states[number].entry(state), truth[0, state])


def test_a_chain_that_does_not_settle_is_declined():
    rng = np.random.default_rng(33)
    chain = families.nearly_uncoupled(rng, "apart")
    with pytest.raises(NotReached, match=r"uncoupled|settled"):
        room.transient(chain.generator(), 0, [10**9], method="settling")
    drained = room.aggregate(3, [0, 1, 1, 2], [1, 0, 2, 1], [1.0, 1.0, 1e-3, 0.0])
    with pytest.raises(NotReached, match=r"drains|settle"):
        room.transient(drained, 0, [10**9], method="settling")


# --- proofs that are spoiled on purpose -------------------------------------------------------------------------------


@dataclass(frozen=True)
class Spoiled:
    """A solver whose first answer is disturbed and whose corrections are none."""

    inner: mmatrix.Solver
    factor: float
    weight: float = 1.0
    calls: list[int] = None  # type: ignore[assignment]
    name: str = "spoiled"

    def solve(self, b, *, loosely=False):
        self.calls.append(1)
        if len(self.calls) == 1:
            y = self.inner.solve(b)
            y[3] *= self.factor
            return y
        if loosely or not b.any():
            return self.inner.solve(b) * self.weight
        return np.zeros_like(b)


def grounded() -> Hub:
    case = plant(4, seed=6)
    generator = case.generator()
    return Hub(generator, plain(np.zeros(case.n)), 0.0, 0)


def test_a_disturbed_entry_widens_the_certificate():
    hub = grounded()
    flow, solver = hub.row
    _, honest = mmatrix.solve_certified(flow, hub.outward, 2.0**-100, solver)
    assert honest < 1e-25
    _, bound = mmatrix.solve_certified(flow, hub.outward, 2.0**-100, Spoiled(solver, 1 + 1e-9, calls=[]))
    assert 1e-9 <= bound < 1e-6


def test_a_disturbed_entry_stays_within_a_certificate_in_floats(monkeypatch):
    hub = grounded()
    flow, solver = hub.row
    truth, narrow = mmatrix.solve_certified(flow, hub.outward, 2.0**-100, solver)
    monkeypatch.setattr(mmatrix, "_DOUBLED_RESIDUAL", 0)
    for factor in (1.0, 1 + 1e-13, 1 - 1e-9):
        y, bound = mmatrix.solve_certified(flow, hub.outward, 2.0**-100, Spoiled(solver, factor, calls=[]))
        off = max(abs(float(y.fraction(i) / truth.fraction(i) - 1)) for i in range(y.high.size))
        assert abs(factor - 1) * 0.99 <= off <= bound + narrow
        assert bound < 100 * abs(factor - 1) + 1e-13


def test_flows_next_to_underflow_are_refused():
    chain = room.aggregate(3, [0, 1, 2, 1], [1, 0, 0, 2], [1e-140, 1.0, 1e-130, 1e-140])
    hub = Hub(chain, plain(np.zeros(3)), 0.0, 0)
    flow, solver = hub.row
    y, _ = mmatrix.solve_certified(flow, hub.outward, 2.0**-100, solver)
    with pytest.raises(NotReached, match="too small"):
        mmatrix.solve_certified(flow, plain(hub.outward.high * 1e-130), 2.0**-100, solver)
    assert y.high.min() > 0.0


def test_weights_too_small_are_refused():
    hub = grounded()
    flow, solver = hub.row
    with pytest.raises(NotReached, match="could not be verified"):
        mmatrix.solve_certified(flow, hub.outward, 2.0**-100, Spoiled(solver, 1 + 1e-12, weight=0.4, calls=[]))


def test_a_dropped_rate_widens_the_certificate():
    hub = grounded()
    flow, solver = hub.row
    data = flow.incoming.data.copy()
    data[np.flatnonzero(flow.incoming.indices > 0)[5]] = 0.0  # not one from the hub, which this system leaves out
    incoming = csr_array((data, flow.incoming.indices, flow.incoming.indptr), shape=flow.incoming.shape)
    wrong = replace(flow, incoming=incoming, bring_low=lambda: np.where(data > 0.0, flow.low, 0.0))
    y, _ = mmatrix.solve_certified(wrong, hub.outward, 2.0**-100, solver)
    rest, margin = flow.residual(y, hub.outward, 2.0**-100)
    assert (np.abs(rest) > margin).any()


def test_verified_decay_rates_enclose_the_smallest_root():
    a, b = Fraction(1, 1000), Fraction(1, 10)
    chain = families.Chain("pair", 3, {(0, 1): 2 * a, (1, 0): b, (1, 2): a, (2, 1): b}, (2,), ())
    generator = chain.generator()
    part = generator.restricted(np.array([0, 1]), np.array([-1, -1, 0]), 1)
    loss = type(part.absorption)(part.absorption.high[:, 0], part.absorption.low[:, 0])
    with flint.ctx.workprec(400):
        ball = flint.arb(balls.rational(a * a + 6 * a * b + b * b)).sqrt()
        root = (flint.arb(balls.rational(3 * a + b)) - ball) / 2
        for side in ("row", "column"):
            made = shape.shape_of(part.chain, loss, part.absorption_error, 0, Fraction(10) ** 9, side)
            assert flint.arb(balls.rational(made.slowest)) <= root <= flint.arb(balls.rational(made.fastest))
            assert float((made.fastest - made.slowest) / made.slowest) < 1e-14


def test_a_disturbed_shape_gives_wide_decay_rates():
    hub = grounded()
    off, _ = hub.excursion
    low, high = shape._collatz(hub, off, "row")
    assert low <= 0 <= high
    assert float(high - low) < 1e-25
    bent = off.high.copy()
    bent[7] *= 1 + 1e-9
    low, high = shape._collatz(hub, plain(bent), "row")
    assert low <= 0 <= high
    assert float(high - low) > 1e-12
