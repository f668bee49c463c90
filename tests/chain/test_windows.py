"""Contour windows: scalar errors proven again, containment in ball arithmetic, spoiled proofs that widen or fail."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction

import flint
import numpy as np
import pytest
from scipy.sparse import csr_array

from markov import chain as room
from markov.chain import missions, uniformisation, weights
from markov.chain.contour import RATIO, SIZES, contour
from markov.chain.grounded import Grounded
from markov.errors import NotReached
from tests.chain import balls, families
from tests.chain.test_large import plant

FEW_JUMPS = 140.0


@pytest.fixture(autouse=True)
def windows_from_the_first(monkeypatch: pytest.MonkeyPatch) -> None:
    """Uniformise no further than the first window begins."""
    monkeypatch.setattr(missions, "_FEW_JUMPS", FEW_JUMPS)


# --- scalar errors ----------------------------------------------------------------------------------------------------


def scalar_errors(nodes: list[complex], factors: list[complex]) -> tuple[flint.arb, flint.arb]:
    """Enclose the largest errors of the inverses of 1/z and of 1 over a window, by Taylor series on 2,000 pieces."""
    order, pieces = 8, 2000
    z = [flint.acb(node.real, node.imag) for node in nodes]
    radius = flint.arb(RATIO - 1) / (2 * pieces)
    step, impulse = flint.arb(0), flint.arb(0)
    for piece in range(pieces):
        middle = 1 + radius * (2 * piece + 1)
        terms = [flint.acb(w.real, w.imag) * (each * middle).exp() for w, each in zip(factors, z, strict=True)]
        value = sum(((2 * term / each).real for term, each in zip(terms, z, strict=True)), flint.arb(-1))
        here = abs(value)
        further = flint.arb(0)
        rest = sum(
            (
                2 * abs(term) * (abs(each.real) * radius).exp() * abs(each) ** order
                for term, each in zip(terms, z, strict=True)
            ),
            flint.arb(0),
        )
        for k in range(order):
            slope = abs(sum((2 * term.real for term in terms), flint.arb(0)))
            further += slope * radius**k / math.factorial(k)
            here += slope * radius ** (k + 1) / math.factorial(k + 1)
            terms = [term * each for term, each in zip(terms, z, strict=True)]
        here += rest * radius ** (order + 1) / math.factorial(order + 1)
        further += rest * radius**order / math.factorial(order)
        step, impulse = max(step, here.upper()), max(impulse, further.upper())
    return step, impulse


@pytest.mark.parametrize("size", SIZES)
def test_scalar_errors_of_the_float_nodes_are_what_the_table_says(size):
    nodes = contour(size)
    with flint.ctx.workprec(200):
        step, impulse = scalar_errors(nodes.nodes.tolist(), nodes.weights.tolist())
        assert step <= flint.arb(nodes.step_error)
        assert impulse <= flint.arb(nodes.impulse_error)
        assert step > flint.arb(nodes.step_error) / 4


@pytest.mark.parametrize("sigma", [Fraction(1), Fraction(10, 3), Fraction(8)])
def test_coefficients_are_right_to_the_last_digit(sigma):
    nodes = contour(48)
    with flint.ctx.workprec(300):
        s = flint.arb(balls.rational(sigma))
        for found, between, z, w in zip(
            nodes.at(sigma), nodes.between(sigma), nodes.nodes.tolist(), nodes.weights.tolist(), strict=True
        ):
            node, factor = flint.acb(z.real, z.imag), flint.acb(w.real, w.imag)
            truth = factor * (node * s).exp()
            whole = factor * ((node * s).exp() - node.exp()) / node
            for value, exact in ((found, truth), (between, whole)):
                assert abs(flint.arb(value.real) - exact.real) <= abs(exact.real) * 2.0**-52 + 1e-40
                assert abs(flint.arb(value.imag) - exact.imag) <= abs(exact.imag) * 2.0**-52 + 1e-40


def test_lengths_bound_the_integrals_of_exponentials():
    nodes = contour(28)
    for sigma in (Fraction(11, 10), Fraction(5), Fraction(8)):
        with flint.ctx.workprec(200):
            for bound, z, w in zip(nodes.lengths(sigma), nodes.nodes.tolist(), nodes.weights.tolist(), strict=True):
                x = flint.arb(z.real)
                exact = 2 * abs(flint.acb(w.real, w.imag)) * ((x * balls.rational(sigma)).exp() - x.exp()) / x
                assert exact <= flint.arb(float(bound))
                assert exact * 1.0001 >= flint.arb(float(bound))


# --- containment ------------------------------------------------------------------------------------------------------


def warm(rng: np.random.Generator, name: str) -> families.Chain:
    """A warm standby pair with imperfect switchover, rates of seconds beside rates of years."""
    fail, idle, repair = (families.decimal(rng, low, low + 2) for low in (-6, -7, -2))
    start, other = families.decimal(rng, 1, 3), families.decimal(rng, -4, -2)
    rates = {
        (0, 1): fail,
        (1, 2): start,
        (1, 3): start * other,
        (0, 2): idle,
        (2, 0): repair,
        (2, 3): fail,
        (3, 2): repair,
    }
    return families.Chain(name, 4, rates, (3,), (Fraction(10), Fraction(10) ** 5, Fraction(10) ** 9))


def product(rng: np.random.Generator, name: str) -> families.Chain:
    """Two unlike pairs side by side, one far faster than the other."""
    rates: families.Rates = {}
    steps = [(families.decimal(rng, -7, -3), families.decimal(rng, low, low + 1)) for low in (-2, 2)]
    for i in range(3):
        for j in range(3):
            for which, (fail, repair) in enumerate(steps):
                level = (i, j)[which]
                move = (3, 1)[which]
                if level < 2:
                    rates[3 * i + j, 3 * i + j + move] = (2 - level) * fail
                if level > 0:
                    rates[3 * i + j, 3 * i + j - move] = repair
    return families.Chain(name, 9, rates, (8,), (Fraction(10), Fraction(10) ** 5, Fraction(10) ** 9))


def some(count: int, seed: int) -> Iterator[families.Chain]:
    makers = (*families.FAMILIES, warm, product)
    for number in range(count):
        maker = makers[number % len(makers)]
        yield maker(np.random.default_rng([seed, number]), f"{maker.__name__}-{seed}-{number}")


#: Half as wide again as what these families reach.
WIDTH = {
    "stiff": 1e-4,
    "pairs_with_crew": 1e-11,
    "nearly_uncoupled": 1e-2,
    "cyclic": 1e-10,
    "acyclic": 1e-9,
    "loaded": 1e-10,
    "warm": 1e-9,
    "product": 1e-10,
}


def compare(chains: Iterator[families.Chain]) -> tuple[int, int]:
    """Compare everything with ball arithmetic; return how many numbers were compared and how many runs declined."""
    compared = declined = 0
    for chain in chains:
        generator = chain.generator()
        alive = [state for state in range(chain.n) if state not in chain.down]
        for time in chain.times:
            for stopped in (True, False):
                name = f"{chain.name} t={float(time)} stopped={stopped}"
                rewards = [~chain.down_flags] if stopped else [chain.down_flags]
                absorbing = chain.down_flags if stopped else None
                try:
                    found = room.transient(generator, 0, [time], rewards, absorbing=absorbing, method="windows")
                except NotReached:
                    declined += 1
                    continue
                truth = balls.exponential(
                    chain, time, stopped=chain.down if stopped else (), reward=alive if stopped else chain.down
                )
                pairs = [(found.integrals[0].entry(0), truth[0, chain.n])]
                if stopped:
                    failed = balls.total(truth[0, state] for state in chain.down)
                    pairs.append((found.absorbed[0].entry(0), failed))
                for enclosure, exact in pairs:
                    assert enclosure.certified, name
                    assert balls.holds(enclosure, exact), name
                    if float(exact) > 1e-70:
                        assert enclosure.width < WIDTH[chain.name.split("-")[0]], name
                    compared += 1
                for state in alive if stopped else range(chain.n):
                    entry = found.states[0].entry(state)
                    if entry.certified:
                        assert balls.holds(entry, truth[0, state]), f"{name} state {state}"
                        compared += 1
    return compared, declined


def test_absorption_integrals_and_states_are_contained():
    compared, declined = compare(some(40, seed=41))
    assert compared > 600
    assert declined <= 4


@pytest.mark.long
@pytest.mark.parametrize("seed", range(50, 60))
def test_a_thousand_chains_are_contained(seed):
    compared, declined = compare(some(160, seed=seed))
    assert compared > 2500
    assert declined <= 20


def test_starts_off_the_likely_state_several_classes_and_many_times():
    compared = 0
    for number in range(10):
        rng = np.random.default_rng([42, number])
        chain = (warm, families.stiff, product)[number % 3](rng, f"many-{number}")
        if chain.n < 4:
            continue
        label = np.full(chain.n, -1)
        label[chain.n - 1], label[chain.n - 2] = 0, 1
        start = np.zeros(chain.n)
        start[0], start[1] = 0.25, 0.75
        times = [Fraction(5), Fraction(10) ** 3, Fraction(10) ** 4, Fraction(10) ** 6]
        earning = [np.where(label < 0, np.arange(chain.n) % 2 + 0.5, 0.0)]
        found = room.transient(chain.generator(), start, times, earning, absorbing=label, method="windows")
        for place, time in enumerate(times):
            truth = balls.exponential(chain, time, stopped=(chain.n - 1, chain.n - 2))
            for kind, end in enumerate((chain.n - 1, chain.n - 2)):
                exact = balls.mixed([flint.arb(0.25), flint.arb(0.75)], [truth[0, end], truth[1, end]])
                entry = found.absorbed[place].entry(kind)
                assert balls.holds(entry, exact), f"{chain.name} t={time} class {kind}"
                assert entry.width < 1e-6, f"{chain.name} t={time} class {kind}"
                compared += 1
    assert compared > 40


@pytest.mark.parametrize("stages", [24, pytest.param(100, marks=pytest.mark.long)])
def test_many_stages_in_a_ring_need_a_later_beginning(stages):
    """Eigenvalues nearly on a circle: the first windows join badly, later ones do not."""
    rates = {(i, i + 1): Fraction(1, 3) for i in range(stages)} | {(stages, 0): Fraction(2)}
    chain = families.Chain("ring", stages + 1, rates, (stages,), ())
    time = Fraction(2 * 10**6)
    found = room.transient(chain.generator(), 0, [time], [chain.down_flags], method="windows")
    truth = balls.exponential(chain, time, reward=chain.down)
    assert balls.holds(found.integrals[0].entry(0), truth[0, stages + 1])
    assert found.integrals[0].entry(0).width < 1e-9


# --- large chains -----------------------------------------------------------------------------------------------------


def stiff_plant(groups: int) -> tuple[room.Generator, np.ndarray]:
    """Pairs whose repair takes from days to seconds."""
    case = plant(groups, seed=7)
    case = replace(case, repair=tuple(Fraction(10) ** (2 * (g % 3) - 2) * (3 + g) / 7 for g in range(groups)))
    return case.generator(), case.faults


def test_the_method_is_chosen_where_jumps_are_many_and_meets_the_ladder():
    generator, faults = stiff_plant(5)
    down, time = faults >= 4, Fraction(10) ** 7
    reward = [np.where(down, 0.0, faults).astype(float)]
    assert uniformisation.expected_jumps(generator, None, time) > 5e8
    found = room.transient(generator, 0, [time], reward, absorbing=down, method="windows")
    truth = room.transient(generator, 0, [time], reward, absorbing=down, method="ladder")
    assert found.absorbed[0].entry(0).meet(truth.absorbed[0].entry(0)).width < 1e-14
    assert found.integrals[0].entry(0).meet(truth.integrals[0].entry(0)).width < 1e-14
    assert found.absorbed[0].entry(0).width < 1e-11
    large, faults = stiff_plant(7)
    chosen = room.transient(large, 0, [time], absorbing=faults >= 5)
    assert "contour windows" in chosen.method
    assert chosen.absorbed[0].entry(0).width < 1e-11


def test_down_time_of_2187_states_is_a_sum_over_independent_pairs():
    case = plant(7, seed=8)
    case = replace(case, repair=tuple(Fraction(10) ** (2 * (g % 3) - 2) * (3 + g) / 7 for g in range(7)))
    time = Fraction(10) ** 6
    found = room.transient(case.generator(), 0, [time], [case.digit(3) == 2], method="windows")
    truth = balls.exponential(case.part(3), time, reward=(2,))
    assert balls.holds(found.integrals[0].entry(0), truth[0, 3])
    assert found.integrals[0].entry(0).width < 1e-11
    assert found.states[0].relative_error < 1e-6
    assert balls.holds(found.states[0].weighted(case.digit(3) == 2), truth[0, 2])


# --- proofs that are spoiled on purpose -------------------------------------------------------------------------------


def bound_of_a_pair_of_pairs() -> room.Enclosure:
    chain = product(np.random.default_rng(43), "spoiled")
    found = room.transient(
        chain.generator(), 0, [Fraction(10) ** 5], absorbing=chain.down_flags, method="windows"
    ).absorbed[0]
    truth = balls.exponential(chain, Fraction(10) ** 5, stopped=chain.down)
    assert balls.holds(found.entry(0), truth[0, 8])
    return found.entry(0)


@pytest.fixture
def without_tail(monkeypatch: pytest.MonkeyPatch) -> None:
    """Windows to the end, so that what is spoiled in a window shows."""

    def none(prepared: object) -> None:
        raise NotReached("no tail")

    monkeypatch.setattr(missions, "settled", none)


def test_windows_alone_are_narrow(without_tail):
    assert bound_of_a_pair_of_pairs().width < 1e-10


@pytest.mark.parametrize("entry", [0, 3, 6])
def test_a_disturbed_entry_widens_the_bound(without_tail, monkeypatch, entry):
    honest = bound_of_a_pair_of_pairs().width
    inner = Grounded.shifted

    def disturbed(self, *given):
        y = inner(self, *given)
        y[entry] *= 1 + 1e-7
        return y

    monkeypatch.setattr(Grounded, "shifted", disturbed)
    assert bound_of_a_pair_of_pairs().width > 3 * honest


def test_an_entry_off_by_one_in_a_thousand_million_widens_the_bound_in_proportion(without_tail, monkeypatch):
    inner = Grounded.shifted
    widths = []
    for off in (1e-9, 1e-7, 1e-5):

        def disturbed(self, *given, off=off):
            y = inner(self, *given)
            y *= 1 + off * np.cos(np.arange(y.shape[0]))[:, None]
            return y

        monkeypatch.setattr(Grounded, "shifted", disturbed)
        widths.append(bound_of_a_pair_of_pairs().width)
    assert widths[0] > 1e-11
    assert 30 < widths[1] / widths[0] < 300
    assert 30 < widths[2] / widths[1] < 300


def test_a_dropped_rate_widens_the_bound(without_tail, monkeypatch):
    inner = Grounded.shifted
    honest = bound_of_a_pair_of_pairs().width

    for which in (4, 6, 8, 9, 12, 13, 14):

        def dropped(self, *given, which=which):
            into = self.into.copy()
            into.data[which] = 0.0
            return inner(replace(self, into=csr_array(into)), *given)

        monkeypatch.setattr(Grounded, "shifted", dropped)
        assert bound_of_a_pair_of_pairs().width > 1e3 * honest


@pytest.mark.parametrize("side", ["row", "column"])
def test_a_halved_weight_is_refused(monkeypatch, side):
    inner = Grounded.real

    def halved(self, which, *given):
        y = inner(self, which, *given)
        if which == side:
            y[y.shape[0] // 2] *= 0.5
        return y

    monkeypatch.setattr(Grounded, "real", halved)
    with pytest.raises(NotReached, match="could not be verified"):
        bound_of_a_pair_of_pairs()


def test_a_ceiling_from_too_sure_an_absorption_is_refused(monkeypatch):
    chain = product(np.random.default_rng(43), "ceiling")
    inner = weights._ceilings

    def honest(*given):
        found = inner(*given)
        assert np.isfinite(found).all()
        return found

    monkeypatch.setattr(weights, "_ceilings", honest)
    room.transient(chain.generator(), 0, [10**5], absorbing=chain.down_flags, method="windows")
    solve = Grounded.real

    def surer(self, side, diagonal, right, first, tolerance, most):
        y = solve(self, side, diagonal, right, first, tolerance, most)
        return y * 1.5 if right.shape[1] == 1 and side == "column" else y

    monkeypatch.setattr(Grounded, "real", surer)
    monkeypatch.setattr(weights, "_ceilings", inner)
    grounded_ceilings: list[np.ndarray] = []

    def watched(*given):
        grounded_ceilings.append(inner(*given))
        return grounded_ceilings[-1]

    monkeypatch.setattr(weights, "_ceilings", watched)
    room.transient(chain.generator(), 0, [10**5], absorbing=chain.down_flags, method="windows")
    assert all(np.isinf(found).all() for found in grounded_ceilings)
    assert grounded_ceilings


def test_a_wrong_rate_falls_out_of_the_interval():
    noticed = asked = 0
    for number in range(12):
        chain = product(np.random.default_rng([44, number]), f"wrong-{number}")
        off = Fraction(1, 10**9)
        touched = max(pair for pair in chain.rates if pair[0] == 0)
        wrong = chain.generator({touched: 1 + off})
        found = room.transient(wrong, 0, [Fraction(10) ** 5], absorbing=chain.down_flags, method="windows")
        truth = balls.exponential(chain, Fraction(10) ** 5, stopped=chain.down)
        asked += 1
        noticed += not balls.holds(found.absorbed[0].entry(0), truth[0, 8])
    assert noticed == asked == 12


def test_rates_over_a_hundred_powers_of_ten_are_declined():
    generator = room.aggregate(3, [0, 1, 1], [1, 0, 2], [1e-120, 1.0, 1e-3])
    with pytest.raises(NotReached, match="hundred powers"):
        room.transient(generator, 0, [10**9], absorbing=np.array([False, False, True]), method="windows")
