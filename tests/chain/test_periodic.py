"""Chains changed at fixed instants against ball arithmetic: contained without exception."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import flint
import numpy as np
import pytest

from markov import chain as room
from markov.chain import returning
from markov.chain.course import Course, Segment
from markov.chain.doubled import plain
from markov.chain.jumps import jump
from markov.chain.periodic import first_failure, follow, periodic_limit
from markov.chain.returning import Image, visits
from markov.errors import IllPosed, NotReached, UsageError
from tests.chain import balls
from tests.chain.schedules import PRECISION, Schedule, random_schedules

#: Segments as matrices in double-double, or one by one by `transient`; and the width that is promised.
WAYS = {"matrices": (160, 2e-15), "one by one": (0, 1e-13)}
DENSE = pytest.mark.parametrize("way", WAYS)


def chosen(way: str, count: int, seed: int) -> list[Schedule]:
    """Fewer schedules where each segment costs a transient solution."""
    return list(random_schedules(count if way == "matrices" else count // 6, seed))


def check(found: room.Enclosure, truth: flint.arb, width: float, name: str) -> None:
    if found.upper == 0.0:
        # Dense truth knows no structure: an exact zero comes as a ball around it.
        assert truth.contains(0), name
        assert float(abs(truth).upper()) < 1e-300, name
        return
    assert balls.sharp(truth), name
    assert balls.holds(found, truth), f"{name}: {found} {truth}"
    if float(truth) > 1e-60:
        assert found.width < width, f"{name}: {found}"


@DENSE
def test_values_at_a_time_are_contained(way: str) -> None:
    largest, width = WAYS[way]
    asked = 0
    for schedule in chosen(way, 12, 31):
        period = schedule.period
        times = [
            Fraction(0),
            schedule.cycle[0].hours / 3,
            period * Fraction(7, 5),
            period * 9 + schedule.cycle[0].hours,
        ]
        free = follow(schedule.course(), 0, times, largest_dense=largest)
        stopped = follow(schedule.course(stopped=True), 0, times, largest_dense=largest)
        for now, then in zip(free, stopped, strict=True):
            name, n = f"{schedule.name} t={now.time}", schedule.n
            truth, first = schedule.at(now.time, stopped=False), schedule.at(now.time, stopped=True)
            for state in range(n):
                check(now.states.entry(state), truth[0, state], width, f"{name} state {state}")
                check(then.states.entry(state), first[0, state], width, f"{name} first failure, state {state}")
            check(now.earned[0], truth[0, n + 1], width, f"{name} time down")
            check(now.earned[1], truth[0, n], width, f"{name} failures")
            check(then.absorbed, first[0, n], width, f"{name} first failure")
            check(then.earned[0], first[0, n + 1], width, f"{name} time alive")
            lasting = balls.total(first[0, state] for state in range(n))
            check(then.alive, lasting, 2 * width, f"{name} alive")
            asked += 1
    assert asked >= 8


@DENSE
def test_the_periodic_limit_is_contained(way: str) -> None:
    largest, _ = WAYS[way]
    width = 1e-15 if way == "matrices" else 1e-10
    for schedule in chosen(way, 12, 32):
        (limit,) = periodic_limit(schedule.course(), 0, largest_dense=largest)
        truth = schedule.kept()
        for state in range(schedule.n):
            check(limit.begins[0].entry(state), truth[state], width, f"{schedule.name} state {state}")
        earned = [flint.arb(0), flint.arb(0)]
        with flint.ctx.workprec(PRECISION):
            cycle = schedule.whole(schedule.cycle, stopped=False)
            for state in range(schedule.n):
                earned[0] += truth[state] * cycle[state, schedule.n + 1]
                earned[1] += truth[state] * cycle[state, schedule.n]
            down, failures = (each / balls.rational(schedule.period) for each in earned)
        segments = limit.segments
        check(limit.mean([each.rewards[:, 0] for each in segments]), down, 10 * width, f"{schedule.name} down")
        found = limit.rate(
            [each.rewards[:, 1] for each in segments],
            max(each.rewards_error for each in segments),
            [each.at_jump[:, 1] for each in segments],
            max(each.at_jump_error for each in segments),
        )
        check(found, failures, 10 * width, f"{schedule.name} failures")


@DENSE
def test_the_first_failure_is_contained(way: str) -> None:
    largest, _ = WAYS[way]
    width = 1e-14 if way == "matrices" else 1e-12
    for schedule in chosen(way, 12, 33):
        found = first_failure(schedule.course(stopped=True), 0, largest_dense=largest)
        mean, square = schedule.first_failure()
        with flint.ctx.workprec(PRECISION):
            spread = (square - mean * mean).sqrt()
        assert found.mean is not None
        assert found.standard_deviation is not None
        check(found.mean, mean, width, f"{schedule.name} mean")
        # One by one only the ends of a segment bound when in it a failure comes.
        check(found.standard_deviation, spread, 1e-13 if way == "matrices" else 1.01, f"{schedule.name} spread")


def test_a_disturbed_chance_is_noticed() -> None:
    noticed = 0
    for schedule in random_schedules(12, 34):
        time = (*schedule.prefix, *schedule.cycle)[0].hours
        truth = schedule.at(time, stopped=False)
        (off,) = follow(schedule.course(factor=1 - Fraction(1, 10**9)), 0, [time])
        noticed += not all(balls.holds(off.states.entry(state), truth[0, state]) for state in range(schedule.n))
    assert noticed >= 10


def test_a_jump_left_out_is_noticed() -> None:
    for schedule in random_schedules(12, 35):
        time = (*schedule.prefix, *schedule.cycle)[0].hours
        truth = schedule.at(time, stopped=False)
        course = schedule.course()
        silent = {id(each): replace(each, jump=None) for each in course.distinct()}
        without = Course(tuple(silent[id(e)] for e in course.prefix), tuple(silent[id(e)] for e in course.cycle))
        (off,) = follow(without, 0, [time])
        assert not all(balls.holds(off.states.entry(state), truth[0, state]) for state in range(schedule.n))


# --- the proof of what a cycle keeps ---------------------------------------------------------------------------------


def _map(matrix: np.ndarray, relative: float) -> returning.Cycle:
    return lambda weights: Image(plain((weights.high + weights.low) @ matrix), relative, 0.0)


MATRIX = np.array([[0.9, 0.1, 0.0], [0.5, 0.3, 0.2], [0.25, 0.25, 0.5]])
EVERY = np.ones(3, dtype=bool)


def test_a_wrong_guess_gets_a_wide_bound_and_not_a_wrong_one() -> None:
    truth = MATRIX[0, 1:] @ np.linalg.inv(np.eye(2) - MATRIX[1:, 1:])
    source = Image(plain(MATRIX[0]), 1e-16, 0.0)
    right = visits(_map(MATRIX, 1e-15), 0, EVERY, source, rounds=200)
    guess = plain(np.array([0.0, *truth]) * [0, 1.5, 0.7])
    wrong = visits(_map(MATRIX, 1e-15), 0, EVERY, source, rounds=200, candidate=guess)
    for found in (right, wrong):
        assert found.relative is not None
        room_for = found.relative * truth + found.absolute + 1e-15 * truth
        assert (np.abs(found.values.high[1:] - truth) <= room_for).all()
    assert right.relative is not None
    assert right.relative < 1e-12
    assert right.absolute == 0.0
    assert wrong.absolute + (wrong.relative or 0.0) > 1e-3


def test_a_map_without_a_bound_gives_an_estimate() -> None:
    source = Image(plain(MATRIX[0]), 1e-16, 0.0)
    found = visits(lambda weights: Image(plain(weights.high @ MATRIX), None, 0.0), 0, EVERY, source, rounds=200)
    assert found.relative is None


def test_weights_that_never_settle_are_refused() -> None:
    trap = np.array([[0.5, 0.5, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    with pytest.raises(NotReached, match="still move"):
        visits(_map(trap, 1e-15), 0, EVERY, Image(plain(trap[0]), 0.0, 0.0), rounds=50)


# --- structure -------------------------------------------------------------------------------------------------------


@pytest.fixture
def unit() -> room.Generator:
    """Good, failed unnoticed, failed and under repair."""
    return room.aggregate(3, [0, 2], [1, 0], [1e-4, 0.1])


def every_thousand_hours(unit: room.Generator, found: float = 1.0) -> Course:
    """A test that finds a share of what is failed unnoticed."""
    leap = jump(3, [1, 1], [2, 1], [found, 1 - found])
    down = np.array([0.0, 1.0, 1.0])[:, None]
    return Course((), (Segment(unit, Fraction(1000), leap, down, 0.0, np.zeros((3, 1)), 0.0),))


def test_what_a_test_finds_at_an_instant_is_seen_just_after_it(unit: room.Generator) -> None:
    course = every_thousand_hours(unit)
    before, after = follow(course, 0, [Fraction(999999, 1000), 1000])
    assert before.states.entry(1).value == pytest.approx(1 - np.exp(-0.1), rel=1e-5)
    assert after.states.entry(1) == room.point(0, after.states.method)
    assert after.states.entry(2).value == pytest.approx(1 - np.exp(-0.1), rel=1e-12)


def test_many_cycles_cost_no_more_than_few(unit: room.Generator) -> None:
    """A million years, bounded to the last digit: the cycle is raised to powers."""
    course = every_thousand_hours(unit)
    (limit,) = periodic_limit(course, 0)
    (moment,) = follow(course, 0, [8_760_000_000])
    assert moment.states.entry(2).meet(limit.begins[0].entry(2)).width < 1e-15
    assert moment.earned[0].over(8_760_000_000).value == pytest.approx(
        limit.mean([np.array([0.0, 1.0, 1.0])]).value, rel=1e-8
    )


def test_larger_chains_are_followed_one_by_one_to_the_same_end() -> None:
    """150 units, each hidden until the test, then repaired by four crews; as matrices and by uniformisation."""
    n = 150
    good = np.arange(n)
    rates = np.concatenate((1e-4 * (n - 1 - good[:-1]), np.full(n - 1, 0.1)))
    chain = room.aggregate(n, np.concatenate((good[:-1], good[1:])), np.concatenate((good[1:], good[:-1])), rates)
    down = (good > 12).astype(float)
    leap = jump(n, good[20:], good[20:] // 2, np.ones(n - 20))
    segment = Segment(chain, Fraction(500), leap, down[:, None])
    found = []
    for largest in (160, 0):
        course = Course((), (segment,))
        (limit,) = periodic_limit(course, 0, largest_dense=largest)
        (moment,) = follow(course, 0, [5250], largest_dense=largest)
        stopped = replace(segment, rewards=np.ones((n, 1)), stopped=down > 0, arriving=down > 0)
        failure = first_failure(Course((), (stopped,)), 0, largest_dense=largest)
        assert failure.mean is not None
        found.append((limit.mean([down]), moment.states.weighted(down), moment.earned[0], failure.mean))
    for exact, wide in zip(*found, strict=True):
        assert exact.meet(wide).width < 1e-14
        assert exact.width < 1e-14
        assert wide.width < 1e-8


def test_faults_that_no_test_finds_end_down_for_good(unit: room.Generator) -> None:
    course = every_thousand_hours(unit, found=0.0)
    (limit,) = periodic_limit(course, 0)
    assert limit.begins[0].entry(1) == room.point(1, limit.begins[0].method)
    assert limit.mean([np.array([0.0, 1.0, 1.0])]).lower == 1.0


def test_a_test_that_finds_a_tenth_has_a_periodic_limit_by_hand(unit: room.Generator) -> None:
    """Of what is failed unnoticed before a test, nine tenths stay: x = (x + (1 - x - y) f) 0.9 and so on."""
    (limit,) = periodic_limit(every_thousand_hours(unit, found=0.1), 0)
    before, after = limit.ends[0], limit.begins[0]
    assert after.entry(1).value == pytest.approx(0.9 * before.entry(1).value, rel=1e-14)
    assert after.entry(2).value == pytest.approx(before.entry(2).value + 0.1 * before.entry(1).value, rel=1e-14)


def test_several_ends_are_told_apart() -> None:
    chain = room.aggregate(4, [0, 0, 2], [1, 2, 3], [1.0, 3.0, 1.0])
    leap = jump(4, [3], [2], [1.0])
    limits = periodic_limit(Course((), (Segment(chain, Fraction(2), leap),)), 0)
    assert len(limits) == 2
    assert limits[0].begins[0].entry(1).lower == 1.0
    assert limits[1].begins[0].entry(2).lower == 1.0


def test_a_failure_that_may_never_come_has_no_mean() -> None:
    chain = room.aggregate(3, [0, 0], [1, 2], [1.0, 1.0])
    down = np.array([False, False, True])
    segment = Segment(chain, Fraction(1), None, np.ones((3, 1)), stopped=down, arriving=down)
    assert first_failure(Course((), (segment,)), 0).mean is None


def test_a_start_that_is_down_fails_at_once(unit: room.Generator) -> None:
    down = np.array([False, True, True])
    segment = Segment(unit, Fraction(1), None, np.ones((3, 1)), stopped=down, arriving=down)
    course = Course((), (segment,))
    found = first_failure(course, 1)
    assert found.mean is not None
    assert found.mean.upper == 0.0
    (moment,) = follow(course, 1, [5])
    assert moment.absorbed.value == pytest.approx(1.0, rel=1e-15)
    assert moment.alive.upper == 0.0


def test_a_stricter_criterion_fails_at_the_boundary() -> None:
    """Nothing moves, the second phase calls a state down: half of the start weight is absorbed at the instant."""
    still = room.aggregate(2, [], [], [])
    strict = np.array([False, True])
    none = np.zeros(2, dtype=bool)
    first = Segment(still, Fraction(3), None, np.ones((2, 1)), stopped=none, arriving=strict)
    last = Segment(still, Fraction(1), None, np.ones((2, 1)), stopped=strict, arriving=strict)
    course = Course((first,), (), last)
    early, late = follow(course, np.array([0.5, 0.5]), [Fraction(29, 10), 3])
    assert early.absorbed.upper == 0.0
    assert (late.absorbed.lower, late.alive.lower) == pytest.approx((0.5, 0.5), rel=1e-15)


def test_phases_of_which_the_last_goes_on(unit: room.Generator) -> None:
    """A hot start: a tenth of the hours at ten times the rate, then exponential for ever."""
    fast = room.aggregate(2, [0], [1], [1e-3])
    slow = room.aggregate(2, [0], [1], [1e-4])
    down = np.array([False, True])
    first = Segment(fast, Fraction(500), None, np.ones((2, 1)), stopped=down, arriving=down)
    last = Segment(slow, Fraction(1), None, np.ones((2, 1)), stopped=down, arriving=down)
    found = first_failure(Course((first,), (), last), 0)
    left = np.exp(-0.5)
    mean = (1 - left) * 1e3 + left * 1e4
    # Second moment: the integral of 2 t R(t).
    square = 2 * (1e6 * (1 - left * 1.5)) + left * (2 * 500 * 1e4 + 2e8)
    assert found.mean is not None
    assert found.standard_deviation is not None
    assert found.mean.value == pytest.approx(mean, rel=1e-14)
    assert found.standard_deviation.value == pytest.approx(np.sqrt(square - mean**2), rel=1e-12)
    with pytest.raises(IllPosed, match="does not repeat"):
        periodic_limit(Course((first,), (), last), 0)


def test_chances_that_do_not_add_up_are_refused() -> None:
    with pytest.raises(UsageError, match="add up to"):
        jump(3, [1, 1], [0, 2], [0.5, 0.4])
    with pytest.raises(UsageError, match="negative"):
        jump(3, [1, 1], [0, 2], [1.5, -0.5])
    with pytest.raises(UsageError, match="outside"):
        jump(3, [3], [0], [1.0])


# --- proof tests -----------------------------------------------------------------------------------------------------


def voted(
    needed: int, size: int, dangerous: float, covered: float, beta: float, hours: int, repair: float = 8.0
) -> tuple[Course, np.ndarray]:
    """Channels with hidden and detected faults, a beta factor each, all tested together: (hidden, under repair)."""
    states = [(hidden, known) for hidden in range(size + 1) for known in range(size + 1 - hidden)]
    number = {state: place for place, state in enumerate(states)}
    arrows: list[tuple[int, int, float]] = []
    for (hidden, known), here in number.items():
        good = size - hidden - known
        single_hidden, single_known = (1 - beta) * (1 - covered) * dangerous, (1 - beta / 2) * covered * dangerous
        if good:
            arrows.append((here, number[hidden + 1, known], good * single_hidden))
            arrows.append((here, number[hidden, known + 1], good * single_known))
            arrows.append((here, number[hidden + good, known], beta * (1 - covered) * dangerous))
            arrows.append((here, number[hidden, known + good], beta / 2 * covered * dangerous))
        if known:
            arrows.append((here, number[hidden, known - 1], known / repair))
    tail, head, rates = (list(column) for column in zip(*arrows, strict=True))
    chain = room.aggregate(len(states), tail, head, rates)
    source = [number[state] for state in states if state[0]]
    target = [number[0, hidden + known] for hidden, known in states if hidden]
    down = np.array([float(size - hidden - known < needed) for hidden, known in states])
    leap = jump(len(states), source, target, np.ones(len(source)))
    return Course((), (Segment(chain, Fraction(hours), leap),)), down


@pytest.mark.parametrize(
    ("needed", "size", "dangerous", "covered", "beta", "hours", "printed", "near"),
    [
        # IEC 61508-6:2010, tables B.2 and B.3 (values from memory): their formulas are approximations, so an exact
        # model agrees with the printed value to a few per cent.  In H10 most failures strike both channels and are
        # known; here the function is back with the first of two repairs, there with both.
        pytest.param(1, 1, 0.5e-7, 0.0, 0.0, 4380, 1.1e-4, 0.01, id="H01"),
        pytest.param(1, 1, 2.5e-7, 0.9, 0.0, 4380, 5.7e-5, 0.01, id="H02"),
        pytest.param(1, 1, 0.5e-6, 0.99, 0.0, 4380, 1.5e-5, 0.01, id="H03"),
        pytest.param(1, 2, 0.5e-7, 0.0, 0.02, 4380, 2.2e-6, 0.01, id="H04"),
        pytest.param(1, 2, 0.5e-6, 0.0, 0.02, 4380, 2.4e-5, 0.03, id="H05"),
        pytest.param(1, 2, 2.5e-7, 0.6, 0.1, 4380, 2.2e-5, 0.01, id="H06"),
        pytest.param(2, 2, 0.5e-6, 0.9, 0.0, 4380, 2.3e-4, 0.02, id="H07"),
        pytest.param(2, 3, 0.5e-6, 0.0, 0.02, 4380, 2.7e-5, 0.03, id="H08"),
        pytest.param(2, 3, 2.5e-7, 0.6, 0.02, 4380, 4.6e-6, 0.01, id="H09"),
        pytest.param(1, 2, 0.5e-7, 0.99, 0.02, 8760, 4.8e-8, 0.05, id="H10"),
        pytest.param(2, 3, 0.5e-6, 0.0, 0.1, 8760, 2.4e-4, 0.04, id="H11"),
        pytest.param(2, 3, 0.5e-6, 0.6, 0.02, 8760, 2.1e-5, 0.03, id="H12"),
        pytest.param(2, 3, 2.5e-6, 0.9, 0.2, 8760, 2.3e-4, 0.03, id="H30"),
    ],
)
def test_proof_tested_channels_agree_with_printed_tables(
    needed: int, size: int, dangerous: float, covered: float, beta: float, hours: int, printed: float, near: float
) -> None:
    course, down = voted(needed, size, dangerous, covered, beta, hours)
    (limit,) = periodic_limit(course, 0)
    found = limit.mean([down])
    assert found.value == pytest.approx(printed, rel=near)
    assert found.width < 1e-13


@pytest.mark.parametrize("repair", [8.0, 1e-9])
def test_a_single_tested_unit_has_its_closed_form(repair: float) -> None:
    """Each cycle begins good up to what is still under repair; with next to no repair time, 1 - (1 - e^-x)/x."""
    course, down = voted(1, 1, 5e-6, 0.0, 0.0, 8760, repair)
    (limit,) = periodic_limit(course, 0)
    x = 5e-6 * 8760
    if repair < 1.0:
        assert limit.mean([down]).value == pytest.approx(1 + np.expm1(-x) / x, rel=1e-9)
    else:
        assert limit.mean([down]).value == pytest.approx(1 + np.expm1(-x) / x + 5e-6 * 8 * (1 - x), rel=1e-2)
    assert limit.ends[0].weighted(down).value == pytest.approx(-np.expm1(-x), rel=1e-3 if repair > 1 else 1e-9)
