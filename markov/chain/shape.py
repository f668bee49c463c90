"""Shapes that a chain keeps: quasi-stationary vectors with verified rates of decay.

For Q the rates among states that are not absorbed, a row vector y > 0 and numbers theta with

    -theta_hi y <= y Q <= -theta_lo y        entry by entry

decay at rates between the two (Collatz and Wielandt); the same for column vectors, ``-theta_hi x <= Q x <= -theta_lo
x``. The vector is solved around a likely state, 1 there, and refined in double-double with the solver of the
unshifted system: each round gains a factor of about the recovery rate over the decay rate, until ``theta_hi -
theta_lo`` is far below
``1/t``.  The inequality itself is evaluated in double-double with all errors counted, so it holds for the exact rates.

Source: L. Collatz, Math. Z. 48 (1942), H. Wielandt, Math. Z. 52 (1950), for the bounds of eigenvalues (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from markov.chain.bounds import Floats
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
)
from markov.chain.generator import Generator
from markov.chain.hub import Hub, with_likely_hub
from markov.errors import NotReached

Side = Literal["row", "column"]
_ROUNDS = 60


@dataclass(frozen=True, eq=False)
class Shape:
    """A vector that the chain keeps, up to a factor.

    Attributes
    ----------
    members : int[k]
        The states that it covers: one communicating class, every other weight being 0.
    weights : float64[k]
        The vector, positive, as the floats nearest to the verified double-doubles.
    slowest, fastest : Fraction
        theta_lo and theta_hi: the vector decays at rates between these.
    hub : Hub
        The class grounded at a likely state.
    """

    members: NDArray[np.int64]
    weights: Floats
    slowest: Fraction
    fastest: Fraction
    hub: Hub


def shape_of(chain: Generator, loss: Doubled, loss_error: float, likely: int, longest: Fraction, side: Side) -> Shape:
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
    side : {"row", "column"}
        Whether the vector holds weights of states or values per state.

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
    decay = _decay(hub, off)
    if side == "column":
        # The decay rate is best known from the weights: from values it would be a small difference.
        for _ in range(_ROUNDS):
            off = _improved(hub, off, decay, "row")
            before, decay = decay, _decay(hub, off)
            if abs(decay.fraction() - before.fraction()) <= decay.fraction() * Fraction(1, 10**28):
                break
        off, _ = hub.solve("column", hub.inward, hub.inward_error)
    target = 1e-15 / max(float(longest), 1e-300)
    best: tuple[Fraction, Fraction] | None = None
    kept = off
    for _ in range(_ROUNDS):
        ends = _collatz(hub, off, side)
        if best is None or ends[1] - ends[0] < best[1] - best[0]:
            stalled = best is not None and ends[1] - ends[0] > (best[1] - best[0]) / 2
            best, kept = ends, off
        else:
            stalled = True
        if stalled or float(best[1] - best[0]) <= target:
            break
        if side == "row":
            decay = _decay(hub, off)
        off = _improved(hub, off, decay, side)
    assert best is not None
    if float(best[1] - best[0]) * float(longest) > 1e-7:
        raise NotReached("the quasi-stationary shape could not be refined far enough")
    weights = np.empty(members.size)
    weights[hub.others] = kept.high + kept.low
    weights[hub.number] = 1.0
    if weights.min() < 1e-250:
        raise NotReached("the quasi-stationary shape underflows")
    return Shape(members, weights, *best, hub)


def _decay(hub: Hub, off: Doubled) -> Doubled:
    """Estimate theta: absorption per unit of time spent anywhere."""
    leave = add(hub.loss.at(hub.number), total(multiply(off, hub.loss.at(hub.others))))
    return divide(leave, add(plain(1.0), total(off)))


def _improved(hub: Hub, off: Doubled, decay: Doubled, side: Side) -> Doubled:
    """Return one step of refinement of ``off (D - theta - N) = q`` with the solver for theta = 0."""
    flow, solver = hub.row if side == "row" else hub.column
    exits = difference(flow.exits, decay)
    rest, _ = replace(flow, exits=exits).residual(off, hub.outward if side == "row" else hub.inward, 0.0)
    change = solver.solve(np.maximum(rest, 0.0)) - solver.solve(np.maximum(-rest, 0.0))
    changed = add(off, plain(change))
    good = changed.high > 0.0
    return Doubled(np.where(good, changed.high, off.high), np.where(good, changed.low, off.low))


def _collatz(hub: Hub, off: Doubled, side: Side) -> tuple[Fraction, Fraction]:
    """Return proven bounds of ``-(y Q)_j / y_j``, or ``-(Q y)_j / y_j``, over all states j; y is 1 at the hub."""
    flow, _ = hub.row if side == "row" else hub.column
    fed, closing = (hub.outward, hub.inward) if side == "row" else (hub.inward, hub.outward)
    error = max(flow.carried_error, hub.inward_error) + 3 * ADD + DIVIDE
    inflow = add(fed, flow.carried_doubled(off))
    per = divide(inflow, off)
    rates = difference(flow.exits, per)
    margin = per.high * (error + 2 * ADD) + flow.exits.high * (flow.exit_error + 2 * ADD)
    values = rates.high + rates.low
    margin = margin * (1.0 + 1e-9) + np.abs(values) * 4 * UNIT
    low, high = values - margin, values + margin
    back = total(multiply(off, closing))
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
