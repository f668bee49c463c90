"""Long missions of large chains: uniformise until the shape has settled, then follow that shape with a proof.

Let y > 0 with ``-theta_hi y <= y Q <= -theta_lo y`` be a verified shape (`markov.chain.shape`), Q the rates among the
states that are not yet absorbed.  Since ``exp(Q s) >= 0``, integrating ``d/ds y exp(Q s) = (y Q) exp(Q s)`` gives

    exp(-theta_hi s) y <= y exp(Q s) <= exp(-theta_lo s) y                        for all s >= 0.

So if the state weights at some time tau lie between ``a y`` and ``b y``, then for every later time

    a exp(-theta_hi s) y <= p(tau + s) <= b exp(-theta_lo s) y,

and integrals of non-negative rewards are enclosed by integrating both sides: the cost no longer grows with the
mission.  a and b come from the ratios ``p(tau)_j / y_j`` with the proven
error of the uniformised weights.  Weight on states that the shape does not cover (left for good, or not yet drained)
is an absolute error.

The number of steps is about 30 times the fastest rate over the slowest repair rate.  Chains whose parts are nearly
uncoupled do not settle in reach; the method then declines.

Integrals over a long time are narrower than that: mass is conserved, so an error of the weights matters only until
the next visit to a likely state (`markov.chain.guard`).

Survival of a duration is the same with column vectors: values per state in place of weights.

Source: derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from decimal import Context, Decimal
from fractions import Fraction

import numpy as np

from markov.chain import uniformisation
from markov.chain.bounds import Floats, above
from markov.chain.doubled import UNIT, Doubled
from markov.chain.generator import Generator
from markov.chain.guard import guard
from markov.chain.parts import likely_states
from markov.chain.shape import Shape, shape_of
from markov.errors import NotReached

_DECIMALS = Context(prec=120)
#: Ends of the weights' relative spread at which the shape counts as settled.
_SETTLED = 1e-13
#: Parts are looked for in chains of up to this many states.
_SMALL = 25_000
#: A result wider than this is not returned.
WIDEST = 1e-6


@dataclass(frozen=True, eq=False)
class Moment:
    """Weights of n states with c integrals at one time; errors relative to the exact values.

    The weights share one relative error and an absolute one of their sum; each integral has its own relative error.
    """

    weights: Floats
    integrals: Floats
    relative: float
    absolute: float
    integrals_relative: Floats
    integrals_absolute: float


def follow(
    chain: Generator,
    loss: Doubled,
    loss_error: float,
    start: Floats,
    rewards: Floats,
    rewards_error: float,
    times: Sequence[Fraction],
    classes: int = 0,
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
    classes : int
        How many of the rewards, the first ones, are the absorption rates into classes; together they are `loss`.

    Raises
    ------
    NotReached
        The shape does not settle within the work that `uniformisation` allows, or the bound stays wide.
    """
    step = uniformisation.jumps(chain, loss)
    # Parts settle among each other after a few changes; if even one is out of reach there is no use in beginning.
    between = math.inf
    if chain.n <= _SMALL:
        between = likely_states(chain, loss.high + loss.low, int(np.argmax(start))).changing
    jumps = min(step.rate / between, step.rate * float(max(times)))
    if jumps * (step.work + 10_000) > uniformisation.MOST_WORK or jumps * step.roundings * UNIT > 0.1 * WIDEST:
        raise NotReached(f"about {jumps:.2g} expected jumps before a part is left: parts are nearly uncoupled")
    order = sorted(range(len(times)), key=lambda number: times[number])
    found: dict[int, Moment] = {}
    now = Fraction(0)
    kinds = rewards.shape[1]
    state = Moment(start, np.zeros(kinds), 0.0, 0.0, np.zeros(kinds), 0.0)
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
            shape = shape_of(chain, loss, loss_error, int(np.argmax(state.weights)), max(times), "row")
        if shape is not None:
            low, high, left = fading_between(shape, state)
            # Settled to the proven error of the weights, or to what no float shows.
            if low > 0.0 and high / low - 1.0 <= 3.0 * state.relative + _SETTLED and left <= _negligible(state):
                guarded = _guarded(shape, rewards, classes) if shape.members.size == chain.n else None
                for number in order:
                    if number not in found:
                        later = times[number] - now
                        plainly = follow_shape(shape, state, rewards, rewards_error, later, low, high, left)
                        found[number] = (
                            plainly
                            if guarded is None
                            else _sharpened(
                                plainly, shape, state, rewards, rewards_error, later, guarded, start, classes
                            )
                        )
                break
            apart = high / low - 1.0 if low > 0.0 else math.inf
            # Twice the time and at best half the distance, three times running: a slow mode, as of nearly uncoupled
            # parts, that fills at a constant rate.  If filling it alone is out of reach there is no use in going on.
            idle = idle + 1 if math.isfinite(apart) and apart > 0.4 * past else 0
            past = apart
            ahead = step.rate * float(now) * max(apart, 1.0)
            if idle >= 3 and (
                ahead * step.roundings * UNIT > 0.1 * WIDEST or ahead * (step.work + 10_000) > uniformisation.MOST_WORK
            ):
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
    gained = np.maximum(state.integrals_relative, state.relative + walked.integrals_relative[number]) + UNIT
    return Moment(
        walked.weights[number],
        state.integrals + walked.integrals[number],
        relative,
        walked.absolute[number],
        gained * (1.0 + 1e-6),
        (state.integrals_absolute + walked.integrals_absolute[number]) * (1.0 + 1e-6),
    )


def fading_between(shape: Shape, state: Moment) -> tuple[float, float, float]:
    """Return a and b with ``a y <= p <= b y`` on the shape, and a bound of the weight elsewhere."""
    here = state.weights[shape.members]
    slack = state.relative * (1.0 + 1e-6) / (1.0 - state.relative) + 8 * UNIT
    low = (here * (1.0 - slack) - state.absolute) / shape.weights
    high = (here * (1.0 + slack) + state.absolute) / shape.weights
    outside = np.delete(state.weights, shape.members)
    elsewhere = (math.fsum(outside.tolist()) * (1.0 + slack) + state.absolute) if outside.size else 0.0
    return float(low.min()), float(high.max()), elsewhere


def follow_shape(
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
    shortest, longest = later * mean_fading(shape.fastest * later)[0], later * mean_fading(shape.slowest * later)[1]
    weights = np.zeros_like(state.weights)
    middle = float((least + most) / 2)
    weights[shape.members] = shape.weights * middle
    # Half the width over the lower end; the floats y and their products add a few roundings.
    relative = above((most - least) / (2 * least)) + 6 * UNIT if least > 0 else math.inf
    per = _summed(shape.weights, rewards[shape.members])
    span_low, span_high = Fraction(low) * shortest, Fraction(high) * longest
    more = per * float((span_low + span_high) / 2)
    widened = above((span_high - span_low) / (2 * span_low)) + 8 * UNIT + rewards_error
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
        np.maximum(state.integrals_relative, widened) + 2 * UNIT,
        (state.integrals_absolute + left * largest * float(later)) * (1.0 + 1e-6) + 2.0**-1060,
    )


def _summed(weights: Floats, columns: Floats) -> Floats:
    """Return ``weights @ columns``, each product and the sum rounded once: relative error ``2 u``."""
    return np.array([math.fsum((weights * columns[:, kind]).tolist()) for kind in range(columns.shape[1])])


def _guarded(shape: Shape, rewards: Floats, classes: int) -> Floats | None:
    """Return the guard of each integral that has one, float64[n, c]: classes, or rewards where nothing absorbs."""
    here = rewards[shape.members]
    try:
        return guard(shape.hub, here[:, :classes] if classes else here, absorbing=classes > 0)
    except NotReached:
        return None


def _sharpened(
    plainly: Moment,
    shape: Shape,
    state: Moment,
    rewards: Floats,
    rewards_error: float,
    later: Fraction,
    guarded: Floats,
    start: Floats,
    classes: int,
) -> Moment:
    """Return the moment with integrals from the conserved mass, where their bound is narrower.

    Mass is conserved, so the weights at the time of settling are ``A y`` plus a difference of mass 0, with
    ``A = (mass - absorbed) / sum y``; the difference costs what the guard says (`markov.chain.guard`).
    """
    mass = Fraction(math.fsum(start.tolist()))
    absorbed = Fraction(math.fsum(state.integrals[:classes].tolist()))
    doubt = Fraction(float(state.integrals_relative[:classes].max(initial=0.0))) + Fraction(4 * UNIT)
    off = absorbed * doubt * 2 + Fraction(state.integrals_absolute) * classes + mass * Fraction(2 * UNIT)
    if not absorbed + off < mass:
        return plainly
    whole = Fraction(math.fsum(shape.weights.tolist()))
    low = (mass - absorbed - off) / whole * (1 - Fraction(4 * UNIT))
    high = (mass - absorbed + off) / whole * (1 + Fraction(4 * UNIT))
    settled = shape.weights * float((low + high) / 2)
    here = state.weights[shape.members]
    apart = np.abs(here - settled) + here * (state.relative * 1.001 + 4 * UNIT) + state.absolute
    apart += shape.weights * (float(high - low) + 4 * UNIT * float(high))
    shortest, longest = later * mean_fading(shape.fastest * later)[0], later * mean_fading(shape.slowest * later)[1]
    per = _summed(shape.weights, rewards[shape.members])
    integrals, relatives = plainly.integrals.copy(), plainly.integrals_relative.copy()
    slack = Fraction(rewards_error + 8 * UNIT)
    for kind in range(guarded.shape[1]):
        moved = Fraction(math.fsum((apart * guarded[:, kind]).tolist()) * (1.0 + 1e-9))
        moved += Fraction(state.integrals_absolute)
        base, own = Fraction(float(state.integrals[kind])), Fraction(float(state.integrals_relative[kind]) * 1.001)
        rate = Fraction(float(per[kind]))
        least = base * (1 - own) + low * rate * (1 - slack) * shortest - moved
        most = base * (1 + own) + high * rate * (1 + slack) * longest + moved
        if least > 0:
            width = above((most - least) / (2 * least)) + 2 * UNIT
            if width < relatives[kind]:
                integrals[kind], relatives[kind] = float((least + most) / 2), width
    return replace(plainly, integrals=integrals, integrals_relative=relatives)


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


def mean_fading(x: Fraction) -> tuple[Fraction, Fraction]:
    """Return bounds of ``(1 - exp(-x)) / x``, the mean of ``exp(-u)`` over ``0 <= u <= x``."""
    if abs(x) < Fraction(1, 10**15):
        # 1 - x/2 + x**2/6 - ...: the next term bounds the rest.
        middle = 1 - x / 2
        return middle - x * x, middle + x * x
    low, high = _fading(x)
    ends = ((1 - high) / x, (1 - low) / x)
    return min(ends), max(ends)


def look_back(chain: Generator, loss: Doubled, loss_error: float, time: Fraction) -> tuple[Floats, float, float]:
    """Return from each state the probability of not being absorbed within a time, with relative and absolute error.

    Parameters
    ----------
    chain : Generator
        n states, one communicating class.
    loss : Doubled[n]
        Rates of absorption, relative error `loss_error`.
    time : Fraction
        Exact, positive.

    Raises
    ------
    NotReached
        As `follow`; or the states are several classes.
    """
    step = uniformisation.jumps(chain, loss, backwards=True)
    values, relative, absolute = np.ones(chain.n), 0.0, 0.0
    now, span = Fraction(0), Fraction(64) / Fraction(step.rate)
    shape: Shape | None = None
    work = 0.0
    while now < time:
        span = min(span, time - now)
        work += (step.rate * float(span) + 200.0) * (step.work + 10_000)
        if work > uniformisation.MOST_WORK or step.rate * float(now + span) * step.roundings * UNIT > 0.1 * WIDEST:
            raise NotReached(
                f"survival has not settled after {step.rate * float(now):.3g} expected jumps of {chain.n} states"
            )
        values, more, off = uniformisation.look_back(step, values, span)
        relative, absolute = (relative + more) * (1.0 + 1e-6), (absolute + off) * (1.0 + 1e-6)
        now += span
        span = now
        if now < time and shape is None:
            shape = shape_of(chain, loss, loss_error, int(np.argmax(values)), time, "column")
            if shape.members.size < chain.n:
                raise NotReached("the states that must not be left are several classes: survival does not settle")
        if now < time and shape is not None:
            low, high, _ = fading_between(shape, Moment(values, np.zeros(0), relative, absolute, np.zeros(0), 0.0))
            if low > 0.0 and high / low - 1.0 <= 3.0 * relative + _SETTLED:
                found = follow_shape(
                    shape,
                    Moment(values, np.zeros(0), relative, absolute, np.zeros(0), 0.0),
                    np.zeros((chain.n, 0)),
                    0.0,
                    time - now,
                    low,
                    high,
                    0.0,
                )
                return found.weights, found.relative, found.absolute
    return values, relative, absolute
