"""Nearly uncoupled chains: hubs that are found, bounds that hold in ball arithmetic and that notice what is spoiled."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction

import flint
import numpy as np
import pytest

from markov import chain as room
from markov.chain import missions, tail, windows
from markov.chain.hubs import Hubs, Shares, hubs_of, shares_of
from markov.chain.parts import likely_states
from markov.chain.weights import verified
from markov.errors import NotReached
from tests.chain import balls, families
from tests.chain.families import decimal


@pytest.fixture(autouse=True)
def windows_from_the_first(monkeypatch: pytest.MonkeyPatch) -> None:
    """Uniformise no further than the first window begins."""
    monkeypatch.setattr(missions, "_FEW_JUMPS", 140.0)


# --- chains -----------------------------------------------------------------------------------------------------------


def blocks(rng: np.random.Generator, name: str) -> families.Chain:
    """Two to four parts of any shape with a few slow ways between them, one down state that is repaired somewhere."""
    rates: families.Rates = {}
    parts: list[range] = []
    for _ in range(int(rng.integers(2, 5))):
        begin = parts[-1].stop if parts else 0
        parts.append(range(begin, begin + int(rng.integers(1, 5))))
    low = float(rng.uniform(-4, 0))
    for part in parts:
        for i in part:
            for j in part:
                if i != j and (rng.random() < 0.6 or part[0] in (i, j)):
                    rates[i, j] = decimal(rng, low, 1)
    slow = float(rng.uniform(-12, -6))
    for a, part in enumerate(parts):
        for b, other in enumerate(parts):
            if a != b and (rng.random() < 0.5 or b == (a + 1) % len(parts)):
                rates[int(rng.choice(part)), int(rng.choice(other))] = decimal(rng, slow, slow + 2)
    down = parts[-1].stop
    rates[int(rng.integers(0, down)), down] = decimal(rng, -9, -1)
    rates[down, int(rng.integers(0, down))] = decimal(rng, -2, 1)
    if rng.random() < 0.5:
        rates[int(rng.integers(0, down)), down] = decimal(rng, -12, -3)
    times = tuple(Fraction(10) ** int(power) for power in rng.integers(2, 15, 2))
    return families.Chain(name, down + 1, rates, (down,), times)


def seasons(rng: np.random.Generator, name: str) -> families.Chain:
    """A pair of unlike items whose faults depend on a season; two to four seasons follow each other."""
    count = int(rng.integers(2, 5))
    rates: families.Rates = {}
    repair = [decimal(rng, -3, 0), decimal(rng, -1, 2)]
    slow = float(rng.uniform(-13, -7))
    for season in range(count):
        fault = [decimal(rng, -6, -3), decimal(rng, -6, -3)]
        for state in range(4):
            for item in range(2):
                down = bool(state >> item & 1)
                rates[4 * season + state, 4 * season + (state ^ 1 << item)] = repair[item] if down else fault[item]
    for season in range(count):
        after, change = (season + 1) % count, decimal(rng, slow, slow + 2)
        for state in range(4):
            if rng.random() < 0.9:
                rates[4 * season + state, 4 * after + state] = change
            if rng.random() < 0.3:
                rates[4 * after + state, 4 * season + state] = 3 * change
    down_states = tuple(4 * season + 3 for season in range(count))
    times = tuple(Fraction(10) ** int(power) for power in rng.integers(2, 15, 2))
    return families.Chain(name, 4 * count, rates, down_states, times)


def refuge(rng: np.random.Generator, name: str) -> families.Chain:
    """Parts with one more that is entered seldom and left seldom or never."""
    chain = blocks(rng, name)
    rates, n = dict(chain.rates), chain.n
    for _ in range(3):
        rates[int(rng.integers(0, n - 1)), n] = decimal(rng, -12, -5)
    if rng.random() < 0.7:
        rates[n, 0] = decimal(rng, -12, -3)
    rates[n, n + 1], rates[n + 1, n] = decimal(rng, -4, 0), decimal(rng, -2, 1)
    return families.Chain(name, n + 2, rates, chain.down, chain.times)


def some(numbers: range, seed: int) -> Iterator[families.Chain]:
    for number in numbers:
        maker = (blocks, seasons, refuge)[number % 3]
        yield maker(np.random.default_rng([seed, number]), f"{maker.__name__}-{seed}-{number}")


def two_seasons(change: Fraction = Fraction(1, 10**9)) -> families.Chain:
    """Two pairs with repair in two seasons; in the second every fault is three times as frequent."""
    rates: families.Rates = {}
    for season in range(2):
        for state in range(4):
            for item, (fault, repair) in enumerate(((Fraction(1, 700000), Fraction(1, 9)), (Fraction(1, 90000), 5))):
                down = bool(state >> item & 1)
                rate = Fraction(repair) if down else (1 + 2 * season) * fault
                rates[4 * season + state, 4 * season + (state ^ 1 << item)] = rate
            rates[4 * season + state, 4 * (1 - season) + state] = change
    return families.Chain("two-seasons", 8, rates, (3, 7), ())


# --- which hubs -------------------------------------------------------------------------------------------------------


def test_every_season_has_a_hub_and_a_repaired_plant_has_one():
    chain = two_seasons()
    assert likely_states(chain.generator(), np.zeros(8), 0).states == [0, 4]
    alone = families.Chain("pair", 4, {pair: rate for pair, rate in chain.rates.items() if max(pair) < 4}, (3,), ())
    assert likely_states(alone.generator(), np.zeros(4), 0).states == [0]


def test_seasons_that_change_as_fast_as_repair_have_one_hub():
    assert likely_states(two_seasons(Fraction(1, 10)).generator(), np.zeros(8), 0).states == [0]


def test_a_chain_without_a_transition_has_its_first_state():
    assert likely_states(room.aggregate(3, [], [], []), np.zeros(3), 2).states == [2]


# --- shares and their leaks -------------------------------------------------------------------------------------------


def grounded_at_all(chain: families.Chain) -> tuple[Hubs, Shares]:
    generator = chain.generator()
    part = generator.restricted(np.flatnonzero(~chain.down_flags), np.where(chain.down_flags, 0, -1), 1)
    loss = part.absorption.high[:, 0]
    hubs = hubs_of(part.chain, loss, likely_states(part.chain, loss, 0).states, 1.0)
    return hubs, shares_of(hubs, 2.0**-51)


def test_leaks_are_those_of_the_exact_rates():
    several = 0
    for chain in some(range(30), seed=61):
        hubs, shares = grounded_at_all(chain)
        several += hubs.k > 1
        alive = np.flatnonzero(~chain.down_flags)
        numbers = [*alive[hubs.grounded.order].tolist(), *alive[hubs.states].tolist()]
        for h in range(hubs.k - 1):
            at_hubs = (np.arange(hubs.k) == h + 1).astype(float)
            share = dict(zip(numbers, map(Fraction, [*shares.values[:, h].tolist(), *at_hubs.tolist()]), strict=True))
            exact = dict.fromkeys(numbers, Fraction(0))
            for (i, j), rate in chain.rates.items():
                if i in exact:
                    exact[i] += rate * (share[i] - share.get(j, Fraction(0)))
            found = [*shares.leaks[:, h].tolist(), *shares.leaks_at_hubs[:, h].tolist()]
            errors = [*shares.errors[:, h].tolist(), *shares.errors_at_hubs[:, h].tolist()]
            for state, leak, error in zip(numbers, found, errors, strict=True):
                assert abs(Fraction(leak) - exact[state]) <= Fraction(error), f"{chain.name} hub {h} state {state}"
        assert (shares.values >= 0.0).all()
        for row in shares.values.tolist():
            assert sum(map(Fraction, row)) <= 1
    assert several >= 20


def test_leaks_of_a_season_have_all_digits_of_the_slow_rate():
    chain = two_seasons(Fraction(1, 10**15)).generator()
    hubs = hubs_of(chain, np.zeros(8), likely_states(chain, np.zeros(8), 0).states, 1.0)
    shares = shares_of(hubs, 2.0**-51)
    assert hubs.k == 2
    assert shares.leaks_at_hubs[1, 0] == pytest.approx(1e-15, rel=1e-2)
    assert shares.errors_at_hubs.max() < 1e-29


# --- weights ----------------------------------------------------------------------------------------------------------


def values_at(chain: families.Chain, time: Fraction) -> list[flint.arb]:
    """The probability of having failed by a time, from each state."""
    truth = balls.exponential(chain, time, stopped=chain.down)
    return [balls.total(truth[i, j] for j in chain.down) for i in range(chain.n)]


@pytest.mark.parametrize("kappa", [0.0, 1.0])
def test_weights_bound_what_a_misplaced_start_costs(kappa):
    several = 0
    for chain in some(range(24), seed=62):
        hubs, shares = grounded_at_all(chain)
        several += hubs.k > 1
        time = chain.times[0]
        at_hubs, off = hubs.loss_at_hubs[:, None], hubs.loss[:, None]
        try:
            found = verified(
                hubs,
                shares,
                off,
                at_hubs,
                kappa=kappa / float(time),
                time=float(time),
                whole=0,
                ceilings=np.ones(1),
                entry_error=2.0**-51,
            )
        except NotReached:
            continue
        alive = np.flatnonzero(~chain.down_flags)
        for part in (Fraction(1), Fraction(1, 3), Fraction(1, 100)):
            u = values_at(chain, time * part)
            with flint.ctx.workprec(1200):
                first = [u[state] for state in alive[hubs.states]]
                assert first[0] <= flint.arb(float(found.ceilings[0])) + 1e-300, chain.name
                for h in range(1, hubs.k):
                    assert abs(first[h] - first[0]) <= flint.arb(float(found.gaps[0, h - 1])) + 1e-300, chain.name
                for place, state in enumerate(alive[hubs.grounded.order].tolist()):
                    mixture = first[0]
                    for h in range(1, hubs.k):
                        mixture += flint.arb(float(shares.values[place, h - 1])) * (first[h] - first[0])
                    assert abs(u[state] - mixture) <= flint.arb(float(found.costs[0, place])) + 1e-300, (
                        f"{chain.name} {state}"
                    )
    assert several >= 15


def test_gaps_forget_how_long_the_mission_is():
    hubs, shares = grounded_at_all(two_seasons())
    gaps = []
    for time in (1e9, 1e12, 1e15):
        reward = np.ones((hubs.grounded.m, 1))
        found = verified(
            replace(hubs, loss=np.zeros(hubs.grounded.m), loss_at_hubs=np.zeros(2)),
            shares,
            reward * 0.25,
            np.array([[0.5], [1.0]]),
            kappa=0.0,
            time=time,
            whole=None,
            ceilings=np.array([time]),
            entry_error=2.0**-51,
        )
        gaps.append(float(found.gaps[0, 0]))
    assert gaps[2] < 1e10
    assert gaps[2] < 4.0 * gaps[0]


# --- containment ------------------------------------------------------------------------------------------------------


def compare(chains: Iterator[families.Chain]) -> tuple[int, list[float], int]:
    """Compare everything with ball arithmetic; return how many numbers, their widths and how many runs declined."""
    compared, declined = 0, 0
    widths = []
    for number, chain in enumerate(chains):
        generator = chain.generator()
        alive = [state for state in range(chain.n) if state not in chain.down]
        start = alive[number % len(alive)] if number % 4 == 3 else 0
        time = chain.times[number % 2]
        for stopped in (True, False):
            name = f"{chain.name} t={float(time):g} stopped={stopped} start={start}"
            rewards = [~chain.down_flags] if stopped else [chain.down_flags]
            absorbing = chain.down_flags if stopped else None
            try:
                found = room.transient(generator, start, [time], rewards, absorbing=absorbing, method="windows")
            except NotReached:
                declined += 1
                continue
            truth = balls.exponential(
                chain, time, stopped=chain.down if stopped else (), reward=alive if stopped else chain.down
            )
            pairs = [(found.integrals[0].entry(0), truth[start, chain.n])]
            if stopped:
                pairs.append((found.absorbed[0].entry(0), balls.total(truth[start, each] for each in chain.down)))
            for enclosure, exact in pairs:
                assert enclosure.certified, name
                assert balls.holds(enclosure, exact), name
                compared += 1
                if float(exact) > 1e-70:
                    widths.append(enclosure.width)
            for state in alive if stopped else range(chain.n):
                entry = found.states[0].entry(state)
                if entry.certified:
                    assert balls.holds(entry, truth[start, state]), f"{name} state {state}"
                    compared += 1
    return compared, widths, declined


def test_absorption_and_integrals_of_nearly_uncoupled_chains_are_contained():
    compared, widths, declined = compare(some(range(36), seed=63))
    assert compared > 100
    assert declined <= 1
    assert np.quantile(widths, 0.5) < 1e-11
    assert np.quantile(widths, 0.9) < 1e-8
    assert max(widths) < 1e-4


@pytest.mark.long
@pytest.mark.parametrize("seed", range(70, 78))
def test_a_thousand_nearly_uncoupled_chains_are_contained(seed):
    compared, widths, declined = compare(some(range(150), seed=seed))
    assert compared > 400
    assert declined <= 3
    assert np.quantile(widths, 0.9) < 1e-8


@pytest.mark.parametrize("power", [3, 6, 9, 12, 15])
def test_two_seasons_are_narrow_at_any_time(power):
    chain, time = two_seasons(), Fraction(10) ** power
    truth = balls.exponential(chain, time, stopped=chain.down)
    found = room.transient(chain.generator(), 0, [time], absorbing=chain.down_flags, method="windows").absorbed[0]
    assert balls.holds(found.entry(0), balls.total(truth[0, state] for state in chain.down))
    assert found.entry(0).width < 1e-11
    truth = balls.exponential(chain, time, reward=chain.down)
    kept = room.transient(chain.generator(), 0, [time], [chain.down_flags], method="windows").integrals[0]
    assert balls.holds(kept.entry(0), truth[0, 8])
    assert kept.entry(0).width < 1e-11


def in_seasons(groups: int, count: int) -> tuple[room.Generator, np.ndarray]:
    """Pairs whose repair takes from days to seconds, in seasons that last about 1e9 hours."""
    from tests.chain.test_windows import stiff_plant

    plant, faults = stiff_plant(groups)
    n, states = plant.n, np.arange(plant.n)
    worse = faults[plant.target] > faults[plant.source]
    source, target, rates = [], [], []
    for season in range(count):
        source += [plant.source + season * n, states + season * n]
        target += [plant.target + season * n, states + (season + 1) % count * n]
        rates += [np.where(worse, (1 + 2 * season) * plant.high, plant.high), np.full(n, (1 + season) * 1e-9)]
    joined = room.aggregate(
        count * n, np.concatenate(source), np.concatenate(target), np.concatenate(rates), rate_error=0.0
    )
    return joined, np.tile(faults >= 3, count)


def test_three_seasons_of_27_states_meet_the_ladder():
    generator, down = in_seasons(3, 3)
    for time in (Fraction(10) ** 5, Fraction(10) ** 10):
        truth = room.transient(generator, 0, [time], absorbing=down, method="ladder").absorbed[0].entry(0)
        found = room.transient(generator, 0, [time], absorbing=down, method="windows").absorbed[0].entry(0)
        assert found.meet(truth).width < 1e-14
        assert found.width < 1e-10


@pytest.mark.parametrize("count", [2, 4])
def test_hundreds_of_states_in_seasons_are_narrow(count):
    generator, down = in_seasons(5, count)
    times = [Fraction(10) ** 5, Fraction(10) ** 9]
    stopped = room.transient(generator, 0, times, absorbing=down, method="windows")
    kept = room.transient(generator, 0, times, [down], method="windows")
    for place in range(2):
        assert stopped.absorbed[place].entry(0).width < 1e-10
        assert kept.integrals[place].entry(0).width < 1e-10


# --- regressions ------------------------------------------------------------------------------------------------------


def test_a_later_beginning_leaves_earlier_times_alone():
    """Many stages in a ring make the windows begin again, after the first of the times has passed."""
    stages = 24
    rates = {(i, i + 1): Fraction(1, 3) for i in range(stages)} | {(stages, 0): Fraction(2)}
    chain = families.Chain("ring", stages + 1, rates, (stages,), ())
    times = [Fraction(100), Fraction(1000), Fraction(2 * 10**6)]
    found = room.transient(chain.generator(), 0, times, [chain.down_flags], method="windows")
    for place, time in enumerate(times):
        truth = balls.exponential(chain, time, reward=chain.down)
        assert balls.holds(found.integrals[place].entry(0), truth[0, stages + 1])


def test_states_of_a_stopped_chain_are_proven_long_after_they_have_settled():
    chain = two_seasons()
    pair = families.Chain("pair", 4, {each: rate for each, rate in chain.rates.items() if max(each) < 4}, (3,), ())
    time = Fraction(10) ** 8
    found = room.transient(pair.generator(), 0, [time], absorbing=pair.down_flags, method="windows")
    truth = balls.exponential(pair, time, stopped=pair.down)
    for state in range(3):
        assert found.states[0].entry(state).width < 1e-6
        assert balls.holds(found.states[0].entry(state), truth[0, state])


# --- proofs that are spoiled on purpose -------------------------------------------------------------------------------

LONG = Fraction(10) ** 9


def bound() -> room.Enclosure:
    chain = two_seasons()
    found = room.transient(chain.generator(), 0, [LONG], absorbing=chain.down_flags, method="windows").absorbed[0]
    return found.entry(0)


def truth_of_the_bound() -> flint.arb:
    chain = two_seasons()
    truth = balls.exponential(chain, LONG, stopped=chain.down)
    return balls.total(truth[0, state] for state in chain.down)


@pytest.fixture
def without_tail(monkeypatch: pytest.MonkeyPatch) -> None:
    def none(prepared: object) -> None:
        raise NotReached("no tail")

    monkeypatch.setattr(missions, "settled", none)


def test_windows_alone_are_narrow(without_tail):
    assert bound().width < 1e-10
    assert balls.holds(bound(), truth_of_the_bound())


@pytest.mark.parametrize("hub", [0, 1])
def test_a_disturbed_hub_widens_the_bound_in_proportion(without_tail, monkeypatch, hub):
    honest, inner = bound().width, windows._solved
    widths = []
    for off in (1e-8, 1e-6):

        def disturbed(below, above, off=off):
            found = inner(below, above)
            found[hub] *= 1.0 + off
            return found

        monkeypatch.setattr(windows, "_solved", disturbed)
        widths.append(bound().width)
        assert balls.holds(bound(), truth_of_the_bound())
    assert widths[0] > 10.0 * honest
    assert 30.0 < widths[1] / widths[0] < 300.0


def test_disturbed_shares_are_as_good_as_they_are(monkeypatch):
    """Shares are floats taken as exact: others cost width, never the proof."""
    inner = missions.shares_of

    def others(hubs, entry_error):
        grounded = hubs.grounded
        solve = grounded.real

        class Disturbed(type(grounded)):
            def real(self, *given):
                return solve(*given) * (1.0 - 1e-4)

        names = ("hub", "order", "ends", "out", "into", "exits", "outward", "inward")
        spoiled = replace(hubs, grounded=Disturbed(*(getattr(grounded, name) for name in names)))
        return inner(spoiled, entry_error)

    honest = bound().width
    monkeypatch.setattr(missions, "shares_of", others)
    assert balls.holds(bound(), truth_of_the_bound())
    assert bound().width > honest


@pytest.mark.parametrize("ending", [True, False])
def test_wrong_leaks_fall_out_of_the_interval(monkeypatch, ending, request):
    if not ending:
        request.getfixturevalue("without_tail")
    inner = missions.shares_of

    def wrong(hubs, entry_error):
        shares = inner(hubs, entry_error)
        return replace(shares, leaks_at_hubs=shares.leaks_at_hubs * (1.0 + 1e-7))

    monkeypatch.setattr(missions, "shares_of", wrong)
    assert not balls.holds(bound(), truth_of_the_bound())


def test_a_disturbed_tail_costs_in_proportion(monkeypatch):
    """Rates between parts that are off by a little are a defect of the tail, and counted as one."""
    inner, changes = missions.settled, tail._changes
    costs: list[float] = []

    def watched(prepared):
        found = inner(prepared)
        costs.append(float(found.cost.max()))
        return found

    monkeypatch.setattr(missions, "settled", watched)
    for off in (0.0, 1e-7, 1e-5):
        monkeypatch.setattr(tail, "_changes", lambda prepared, shapes, off=off: changes(prepared, shapes) * (1.0 + off))
        assert balls.holds(bound(), truth_of_the_bound())
    honest, little, more = costs
    assert little > 1e3 * honest
    assert 30.0 < more / little < 300.0


@pytest.mark.parametrize("side", ["row", "column"])
def test_a_halved_weight_is_refused(side):
    hubs, shares = grounded_at_all(two_seasons())
    grounded = hubs.grounded
    solve = grounded.real

    class Halved(type(grounded)):
        def real(self, which, *given):
            y = solve(which, *given)
            if which == side:
                y[y.shape[0] // 2] *= 0.5
            return y

    names = ("hub", "order", "ends", "out", "into", "exits", "outward", "inward")
    spoiled = replace(hubs, grounded=Halved(*(getattr(grounded, name) for name in names)))
    with pytest.raises(NotReached, match="could not be verified"):
        verified(
            spoiled,
            shares,
            hubs.loss[:, None],
            hubs.loss_at_hubs[:, None],
            kappa=0.0,
            time=1e9,
            whole=0,
            ceilings=np.ones(1),
            entry_error=2.0**-51,
        )


def test_a_wrong_rate_between_seasons_falls_out_of_the_interval():
    chain = two_seasons()
    wrong = chain.generator({(state, 4 + state): 1 + Fraction(1, 10**9) for state in range(4)})
    found = room.transient(wrong, 0, [LONG], absorbing=chain.down_flags, method="windows").absorbed[0].entry(0)
    assert not balls.holds(found, truth_of_the_bound())
