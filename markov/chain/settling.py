"""Long missions of large chains: uniformise until the shape has settled, then follow that shape with a proof.

Let Q be the rates among the states that are not yet absorbed, y > 0 a row vector and theta numbers with

    -theta_hi y <= y Q <= -theta_lo y        entry by entry                       (Collatz and Wielandt).

Since ``exp(Q s) >= 0``, integrating ``d/ds y exp(Q s) = (y Q) exp(Q s)`` gives

    exp(-theta_hi s) y <= y exp(Q s) <= exp(-theta_lo s) y                        for all s >= 0.

So if the state weights at some time tau lie between ``a y`` and ``b y``, then for every later time

    a exp(-theta_hi s) y <= p(tau + s) <= b exp(-theta_lo s) y,

and integrals of non-negative rewards are enclosed by integrating both sides: the cost no longer grows with the
mission.  The vector y is the quasi-stationary shape (the stationary vector where nothing absorbs), solved around a
likely state and refined in double-double until ``theta_hi - theta_lo`` is far below ``1/t``; the inequality itself is
evaluated in double-double with all errors counted.  a and b come from the ratios ``p(tau)_j / y_j`` with the proven
error of the uniformised weights.  Weight on states that the shape does not cover (left for good, or not yet drained)
is an absolute error.

The number of steps is about 30 times the fastest rate over the slowest repair rate.  Chains whose parts are nearly
uncoupled do not settle in reach; the method then declines.

Source: L. Collatz, Math. Z. 48 (1942), H. Wielandt, Math. Z. 52 (1950) for the bounds of eigenvalues (from memory); the
enclosure of transient values is derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from decimal import Context, Decimal
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov.chain import uniformisation
from markov.chain.bounds import Floats, above
from markov.chain.doubled import (
    ADD,
    DIVIDE,
    MULTIPLY,
    UNIT,
    Doubled,
    add,
    difference,
    divide,
    multiply,
    plain,
    total,
    total_error,
    totals,
)
from markov.chain.generator import Generator
from markov.chain.hub import Hub, with_likely_hub
from markov.errors import NotReached

_DECIMALS = Context(prec=120)
_ROUNDS = 60
#: Ends of the weights' relative spread at which the shape counts as settled.
_SETTLED = 1e-13
#: A result wider than this is not returned.
WIDEST = 1e-6


@dataclass(frozen=True, eq=False)
class Shape:
    """A vector that the chain keeps, up to a factor.

    Attributes
    ----------
    members : int[k]
        The states that it covers: one communicating class, every other weight being 0.
    weights : float64[k]
        The vector y, positive, as the floats nearest to the verified double-doubles.
    slowest, fastest : Fraction
        theta_lo and theta_hi: the vector decays at rates between these.
    """

    members: NDArray[np.int64]
    weights: Floats
    slowest: Fraction
    fastest: Fraction


def shape_of(chain: Generator, loss: Doubled, loss_error: float, likely: int, longest: Fraction) -> Shape:
    """Return the quasi-stationary shape of the class of a likely state, verified.

    Parameters
    ----------
    chain : Generator
        n states.
    loss : Doubled[n]
        Rate of absorption, relative error `loss_error`.
    likely : int
        A state of the class, preferably the one where the chain mostly is.
    longest : Fraction
        For how long the shape will be followed; it is refined until the decay is known to ``1e-15 / longest``.

    Raises
    ------
    NotReached
        The refinement stalls, or the class can be left for other states that do not absorb.
    """
    _, label = chain.classes()
    members = np.flatnonzero(label == label[likely])
    if members.size < 2:
        raise NotReached("the chain never returns to where it is: there is no shape to settle into")
    outside = np.where(label == label[likely], -1, 0)
    part = chain.restricted(members, outside, 1)
    if part.absorption.high.any():
        raise NotReached("the chain drains from its usual states into others that it keeps: no shape settles")
    guess = int(np.flatnonzero(members == likely)[0])
    hub = with_likely_hub(part.chain, loss.at(members), loss_error, guess)
    off, _ = hub.excursion
    target = 1e-15 / max(float(longest), 1e-300)
    best: tuple[Fraction, Fraction] | None = None
    kept = off
    for _ in range(_ROUNDS):
        ends = _collatz(hub, off)
        if best is None or ends[1] - ends[0] < best[1] - best[0]:
            stalled = best is not None and ends[1] - ends[0] > (best[1] - best[0]) / 2
            best, kept = ends, off
        else:
            stalled = True
        if stalled or float(best[1] - best[0]) <= target:
            break
        off = _improved(hub, off)
    assert best is not None
    if float(best[1] - best[0]) * float(longest) > 1e-7:
        raise NotReached("the quasi-stationary shape could not be refined far enough")
    weights = np.empty(members.size)
    weights[hub.others] = kept.high + kept.low
    weights[hub.number] = 1.0
    if weights.min() < 1e-250:
        raise NotReached("the quasi-stationary shape underflows")
    return Shape(members, weights, *best)


def _decay(hub: Hub, off: Doubled) -> Doubled:
    """Estimate theta: absorption per unit of time spent anywhere."""
    leave = add(hub.loss.at(hub.number), total(multiply(off, hub.loss.at(hub.others))))
    return divide(leave, add(plain(1.0), total(off)))


def _improved(hub: Hub, off: Doubled) -> Doubled:
    """Return one step of refinement of ``off (D - theta - N) = q`` with the solver for theta = 0."""
    flow, solver = hub.row
    exits = difference(flow.exits, _decay(hub, off))
    rest, _ = replace(flow, exits=exits).residual(off, hub.outward, 0.0)
    change = solver.solve(np.maximum(rest, 0.0)) - solver.solve(np.maximum(-rest, 0.0))
    changed = add(off, plain(change))
    good = changed.high > 0.0
    return Doubled(np.where(good, changed.high, off.high), np.where(good, changed.low, off.low))


def _collatz(hub: Hub, off: Doubled) -> tuple[Fraction, Fraction]:
    """Return proven bounds of ``-(y Q)_j / y_j`` over all states j, for y = (1 at the hub, off)."""
    flow, _ = hub.row
    error = flow.rate_error + MULTIPLY + total_error(int(flow.degree.max(initial=0)) + 1) + 2 * ADD + DIVIDE
    inflow = add(hub.outward, totals(multiply(off.at(flow.tail), flow.rates), flow.head, flow.m))
    per = divide(inflow, off)
    rates = difference(flow.exits, per)
    margin = per.high * (error + 2 * ADD) + flow.exits.high * (flow.exit_error + 2 * ADD)
    values = rates.high + rates.low
    margin = margin * (1.0 + 1e-9) + np.abs(values) * 4 * UNIT
    low, high = values - margin, values + margin
    back = total(multiply(off, hub.inward))
    exits = add(hub.chain.exits.at(hub.number), hub.loss.at(hub.number))
    here = exits.fraction() - back.fraction()
    own = max(hub.chain.exit_error, hub.loss_error) + ADD
    wide = exits.fraction() * Fraction(own) + back.fraction() * Fraction(
        2 * (MULTIPLY + total_error(flow.m) + hub.inward_error)
    )
    wide *= 1 + Fraction(1, 10**9)
    lowest, highest = float(low.min(initial=math.inf)), float(high.max(initial=-math.inf))
    down = Fraction(math.nextafter(lowest, -math.inf)) if flow.m else here - wide
    up = Fraction(math.nextafter(highest, math.inf)) if flow.m else here + wide
    return min(here - wide, down), max(here + wide, up)


@dataclass(frozen=True, eq=False)
class Moment:
    """Weights, absorption and integrals at one time; errors relative to the exact values."""

    weights: Floats
    integrals: Floats
    relative: float
    absolute: float
    integrals_relative: float
    integrals_absolute: float


def follow(
    chain: Generator,
    loss: Doubled,
    loss_error: float,
    start: Floats,
    rewards: Floats,
    rewards_error: float,
    times: Sequence[Fraction],
) -> list[Moment]:
    """Return weights of n states with integrals of c rewards at each time.

    Parameters
    ----------
    chain : Generator
    loss : Doubled[n]
        Rates of absorption, 0 where nothing absorbs; relative error `loss_error`.
    start : float64[n]
    rewards : float64[n, c]
        Relative error `rewards_error`.
    times : Fraction[m]
        Exact, positive.

    Raises
    ------
    NotReached
        The shape does not settle within the work that `uniformisation` allows, or the bound stays wide.
    """
    step = uniformisation.jumps(chain, loss)
    order = sorted(range(len(times)), key=lambda number: times[number])
    found: dict[int, Moment] = {}
    now = Fraction(0)
    state = Moment(start, np.zeros(rewards.shape[1]), 0.0, 0.0, 0.0, 0.0)
    span = Fraction(32) / Fraction(step.rate)
    shape: Shape | None = None
    spent_work, past, idle = 0.0, math.inf, 0
    while len(found) < len(times):
        until = now + span
        asked = [number for number in order if now < times[number] <= until and number not in found]
        stops = [times[number] - now for number in asked] + [span]
        expected = step.rate * float(until)
        spent_work += (step.rate * float(span) + 200.0) * (step.work + 10_000)
        if spent_work > uniformisation.MOST_WORK or expected * step.roundings * UNIT > 0.1 * WIDEST:
            raise NotReached(
                f"the chain has not settled after {step.rate * float(now):.3g} expected jumps of {chain.n} states"
            )
        walked = uniformisation.walk(step, state.weights, rewards, rewards_error, stops, state.absolute)
        moments = [_later(state, walked, number) for number in range(len(stops))]
        found.update(zip(asked, moments, strict=False))
        state, now = moments[-1], until
        if len(found) == len(times):
            break
        if shape is None and step.rate * float(now) >= 60.0:
            shape = shape_of(chain, loss, loss_error, int(np.argmax(state.weights)), max(times))
        if shape is not None:
            low, high, left = _ends(shape, state)
            # Settled to the proven error of the weights, or to what no float shows.
            if low > 0.0 and high / low - 1.0 <= 3.0 * state.relative + _SETTLED and left <= _negligible(state):
                for number in order:
                    if number not in found:
                        found[number] = _followed(
                            shape, state, rewards, rewards_error, times[number] - now, low, high, left
                        )
                break
            apart = high / low - 1.0 if low > 0.0 else math.inf
            # Twice the time without coming closer: a slow mode, as of nearly uncoupled parts, that would take forever.
            idle = idle + 1 if math.isfinite(apart) and apart > 0.9 * past else 0
            past = apart
            if idle >= 2 and left <= _negligible(state):
                raise NotReached(f"weights stay {apart:.2g} away from the settled shape: parts are nearly uncoupled")
        span = now
    return [found[number] for number in range(len(times))]


def _negligible(state: Moment) -> float:
    """Return how much weight outside the shape does not matter: far below anything that was earned or is left."""
    earned = state.integrals[state.integrals > 0.0]
    return 1e-14 * min(1e-3, float(earned.min()) if earned.size else 1.0)


def _later(state: Moment, walked: uniformisation.Walk, number: int) -> Moment:
    """Put a further stretch behind what was reached; relative errors of the weights carry over."""
    relative = (state.relative + walked.relative[number]) * (1.0 + 1e-6)
    gained = max(state.integrals_relative, state.relative + walked.integrals_relative[number]) + UNIT
    return Moment(
        walked.weights[number],
        state.integrals + walked.integrals[number],
        relative,
        walked.absolute[number],
        gained * (1.0 + 1e-6),
        (state.integrals_absolute + walked.integrals_absolute[number]) * (1.0 + 1e-6),
    )


def _ends(shape: Shape, state: Moment) -> tuple[float, float, float]:
    """Return a and b with ``a y <= p <= b y`` on the shape, and a bound of the weight elsewhere."""
    here = state.weights[shape.members]
    slack = state.relative * (1.0 + 1e-6) / (1.0 - state.relative) + 8 * UNIT
    low = (here * (1.0 - slack) - state.absolute) / shape.weights
    high = (here * (1.0 + slack) + state.absolute) / shape.weights
    outside = np.delete(state.weights, shape.members)
    elsewhere = (math.fsum(outside.tolist()) * (1.0 + slack) + state.absolute) if outside.size else 0.0
    return float(low.min()), float(high.max()), elsewhere


def _followed(
    shape: Shape,
    state: Moment,
    rewards: Floats,
    rewards_error: float,
    later: Fraction,
    low: float,
    high: float,
    left: float,
) -> Moment:
    """Return weights with integrals at a time after the shape has settled."""
    least, most = Fraction(low) * _fading(shape.fastest * later)[0], Fraction(high) * _fading(shape.slowest * later)[1]
    shortest, longest = later * _mean_fading(shape.fastest * later)[0], later * _mean_fading(shape.slowest * later)[1]
    weights = np.zeros_like(state.weights)
    middle = float((least + most) / 2)
    weights[shape.members] = shape.weights * middle
    # Half the width over the lower end; the floats y and their products add a few roundings.
    relative = above((most - least) / (2 * least)) + 6 * UNIT if least > 0 else math.inf
    per = np.einsum("i,ij->j", shape.weights, rewards[shape.members])
    span_low, span_high = Fraction(low) * shortest, Fraction(high) * longest
    more = per * float((span_low + span_high) / 2)
    widened = above((span_high - span_low) / (2 * span_low)) + (shape.weights.size + 8) * UNIT + rewards_error
    largest = float(rewards.max()) if rewards.size else 0.0
    if not max(relative, widened) < WIDEST and middle > 1e-290:
        raise NotReached(f"the settled shape bounds the answer to {max(relative, widened):.2g} only")
    if middle <= 1e-290:
        relative, tiny = 0.1, above(most) * float(shape.weights.max()) * 2.0
    else:
        tiny = 0.0
    return Moment(
        weights,
        state.integrals + more,
        relative,
        left + tiny + 2.0**-1060,
        max(state.integrals_relative, widened) + 2 * UNIT,
        (state.integrals_absolute + left * largest * float(later)) * (1.0 + 1e-6) + 2.0**-1060,
    )


def _decimal(x: Fraction) -> Decimal:
    return _DECIMALS.divide(Decimal(x.numerator), Decimal(x.denominator))


def _around(x: Decimal) -> tuple[Fraction, Fraction]:
    """Return two fractions around a number that is known to a hundred digits."""
    exact = Fraction(x) if x.adjusted() > -4000 else Fraction(0)
    margin = abs(exact) / 10**100 + Fraction(1, 10**400)
    return max(Fraction(0), exact - margin), exact + margin


def _fading(x: Fraction) -> tuple[Fraction, Fraction]:
    """Return bounds of ``exp(-x)``; the exponential of the decimal module is correctly rounded."""
    if x > 5000:
        return Fraction(0), Fraction(1, 10**2000)
    return _around(_DECIMALS.exp(-_decimal(x)))


def _mean_fading(x: Fraction) -> tuple[Fraction, Fraction]:
    """Return bounds of ``(1 - exp(-x)) / x``, the mean of ``exp(-u)`` over ``0 <= u <= x``."""
    if abs(x) < Fraction(1, 10**15):
        # 1 - x/2 + x**2/6 - ...: the next term bounds the rest.
        middle = 1 - x / 2
        return middle - x * x, middle + x * x
    low, high = _fading(x)
    ends = ((1 - high) / x, (1 - low) / x)
    return min(ends), max(ends)
