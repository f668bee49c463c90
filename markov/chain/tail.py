"""The settled end of a long mission: decaying shapes that stand for the weights, with the cost of their defect.

From a time tau on take ``P~(tau + s) = sum_h c_h(s) f_h``, one shape ``f_h`` of sum 1 for each hub, with ``c' = c B``
and B the rates of a chain of k states that is absorbed at the rates ``loss_h``: what is left of a chain whose parts are
nearly uncoupled once each part has settled.  In the notation of `markov.chain.windows`, with ``C_h`` the integral of
``c_h`` over a length l, the defect ``D = c (B f - f Q)`` costs off the hubs at most ``sum_h C_h |rho_h| g``, ``rho_h =
(B f)_h - f_h Q``, and for the shares ``sum_h C_h |rho_h s_j| D_j``, where

    rho_h s_j = sum_i B_hi (f_i s_j) + f_h l_j

needs no residual at the hubs.  Mass moves by at most ``sum_h C_h |f_h v - loss_h|``; joining costs ``|P~(tau) - c f| g
+ |P~(tau) s_j - c f s_j| D_j``.  What is collected is ``sum_h C_h (f_h a)``.

For one hub c and C are exponentials; for several they come from `markov.chain.ladder`, entry by entry with a proven
relative error, for just the floats of B, of the losses and of c(0).  Beyond the time in which parts change the cost
grows only as fast as the numbers ``|rho_h s_j|``, which are roundings of the rates between parts.

The shapes come from sweeps, ``f_h (D - N + B_hh) = f_h(hub) q_h - sum B_hi f_i``, where entries may be negative; B from
the balances of shares, the losses from ``f_h v``.  None of this needs to be accurate for the proof.

Source: derived here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain import ladder
from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT, plain
from markov.chain.generator import Generator, aggregate
from markov.chain.settling import mean_fading
from markov.chain.windows import Prepared, State
from markov.errors import NotReached

_ROUNDS = 8
_SLACK = 1.0 + 1e-9
#: Rates between parts below this are left out; they count as defect.
_FLOOR = 1e-120


@dataclass(frozen=True, eq=False)
class Tail:
    """Settled shapes of k hubs.

    Attributes
    ----------
    shapes : float64[k, m]
        The f off the hubs.
    at_hubs : float64[k]
        Their entries at their own hubs.
    between : float64[k, k]
        The B, 0 on the diagonal.
    losses : float64[k]
    collected : float64[k, c + 1], collected_doubt : float64[k, c + 1]
        ``f a`` with its error, the last being ``f v``.
    shares : float64[k, k - 1], shares_doubt : float64[k, k - 1]
        ``f s`` with its error.
    whole_doubt : float
        Error of the sum of a shape, which is 1.
    cost : float64[k, w c]
        Bounds of ``|rho| g`` plus ``|rho s| D``, per C.
    drift : float64[k]
        Bounds of ``|f v - loss|``.
    """

    shapes: Floats
    at_hubs: Floats
    between: Floats
    losses: Floats
    collected: Floats
    collected_doubt: Floats
    shares: Floats
    shares_doubt: Floats
    whole_doubt: float
    cost: Floats
    drift: Floats

    def followed(self, begin: Floats, span: Fraction) -> tuple[Floats, Floats, Floats]:
        """Return c after a length and C over it from ``c(0) = begin``, with the error of each C."""
        if begin.size == 1:
            low, high = mean_fading(Fraction(float(self.losses[0])) * span)
            length = float(span * (low + high) / 2)
            gone = begin * length
            return begin * max(0.0, 1.0 - float(self.losses[0]) * length), gone, gone * 4.0 * UNIT
        k = begin.size
        chain, loss = self._chain()
        made = ladder.build(chain, plain(loss), 0.0, plain(np.eye(k)), 0.0, [span])
        climbed = ladder.climb(made, plain(begin), [span])
        gone = climbed.integrals.high[0] + climbed.integrals.low[0]
        off = gone * (climbed.integrals_relative[0] * 1.01 + 2.0 * UNIT) + climbed.integrals_absolute[0]
        return climbed.weights.high[0] + climbed.weights.low[0], gone, off

    def _chain(self) -> tuple[Generator, Floats]:
        source, target = np.nonzero(self.between)
        return aggregate(self.losses.size, source, target, self.between[source, target], rate_error=0.0), self.losses


def settled(prepared: Prepared) -> Tail:
    """Return the shapes that a chain settles to.

    Raises
    ------
    NotReached
        The shapes are not found.
    """
    question, sums = prepared.question, prepared.sums
    hubs, shares, grounded = question.hubs, question.shares, question.hubs.grounded
    k, kinds, others = hubs.k, question.kinds, hubs.k - 1
    at_hubs = np.eye(k)
    shapes = np.ascontiguousarray(question.weights[0].excursion.T)
    change = np.zeros((k, k))  # B with its diagonal, for shapes that are 1 at their hubs
    before = np.full((k, k), np.inf)
    for _ in range(_ROUNDS):
        following = np.empty_like(shapes)
        for h in range(k):
            decay = -float(change[h, h])
            diagonal = grounded.exits - decay
            if not bool((diagonal > 0.0).all()):
                raise NotReached("states are left more slowly than the chain decays")
            fed = -np.delete(change[h], h) @ np.delete(shapes, h, axis=0)
            right = np.stack((hubs.outward[:, h] + np.maximum(fed, 0.0), np.maximum(-fed, 0.0)), axis=1)
            first = np.stack((np.maximum(shapes[h], 0.0), np.maximum(-shapes[h], 0.0)), axis=1)
            if k == 1:
                right, first = right[:, :1], first[:, :1]
            solved = grounded.real("row", diagonal, right, first, 2e-15, 400)
            following[h] = solved[:, 0] if k == 1 else solved[:, 0] - solved[:, 1]
        shapes = following
        if not bool(np.isfinite(shapes).all()):
            raise NotReached("no settled shape was found")
        change = _changes(prepared, shapes)
        if bool((np.abs(change - before) <= 1e-15 * np.abs(np.diag(change))[:, None]).all()):
            break
        before = change
    wholes = np.array([math.fsum([1.0, *shape.tolist()]) for shape in shapes])
    if not bool((wholes > 0.5).all()):
        raise NotReached("no settled shape was found")
    shapes, tops = shapes / wholes[:, None], 1.0 / wholes
    at_hubs = np.diag(tops)
    sizes = np.abs(shapes)
    columns = np.ascontiguousarray(shapes.T)
    total = sums.all(columns).T
    absolute = sums.all(np.ascontiguousarray(sizes.T)).T
    unit = 2.0 * prepared.unit
    collected = total[:, 1 : kinds + 2] + at_hubs @ question.collected_at_hubs
    gross = absolute[:, 1 : kinds + 2] + at_hubs @ question.collected_at_hubs
    between = change * wholes[None, :] / wholes[:, None]
    np.fill_diagonal(between, 0.0)
    between[between < _FLOOR] = 0.0
    losses = np.maximum(collected[:, -1], 0.0)
    losses[losses < _FLOOR] = 0.0
    decays = between.sum(axis=1) + losses
    flow = between @ shapes - decays[:, None] * shapes
    rest = np.abs(flow + (grounded.exits * shapes - (grounded.into @ columns).T) - at_hubs @ hubs.outward.T)
    turned = between @ sizes + decays[:, None] * sizes
    own = prepared.own.T
    cost = rest @ prepared.costs.T + (turned @ own) * (k + 2.0) + sizes @ prepared.moving.T
    cost += at_hubs @ prepared.hub_cost.T
    wholes = np.array([math.fsum([top, *shape.tolist()]) for top, shape in zip(tops, shapes, strict=True)])
    drift = np.abs(collected[:, -1] - losses) + unit * (gross[:, -1] + losses)
    held = np.zeros((k, others))
    doubt = np.zeros((k, others))
    if others:
        share, kept, leaked = (slice(kinds + 2 + part * others, kinds + 2 + (part + 1) * others) for part in range(3))
        held = total[:, share] + at_hubs[:, 1:]
        held_size = absolute[:, share] + at_hubs[:, 1:]
        doubt = unit * held_size
        leaking = (total[:, leaked] - total[:, kept]) + at_hubs @ shares.leaks_at_hubs
        leaking_size = absolute[:, leaked] + absolute[:, kept] + at_hubs @ np.abs(shares.leaks_at_hubs)
        left = between @ held - decays[:, None] * held + leaking
        blur = 2.0 * unit * (between @ held_size + decays[:, None] * held_size + leaking_size)
        blur += sizes @ shares.errors + at_hubs @ shares.errors_at_hubs
        cost += (np.abs(left) + blur) @ prepared.gaps.T
    return Tail(
        shapes,
        tops,
        between,
        losses,
        collected,
        unit * gross,
        held,
        doubt,
        float(np.abs(wholes - 1.0).max()) + 2.0 * UNIT,
        cost * _SLACK,
        drift * _SLACK,
    )


def _changes(prepared: Prepared, shapes: Floats) -> Floats:
    """Return the rates at which the shapes, 1 at their hubs, turn into each other, their decay on the diagonal."""
    question, sums = prepared.question, prepared.sums
    k, kinds, others = question.hubs.k, question.kinds, question.hubs.k - 1
    total = sums.all(np.ascontiguousarray(shapes.T)).T
    held, flow = np.empty((k, k)), np.empty((k, k))
    held[:, 0] = total[:, 0] + 1.0
    flow[:, 0] = -(total[:, kinds + 1] + question.collected_at_hubs[:, -1])
    if others:
        share, kept, leaked = (slice(kinds + 2 + part * others, kinds + 2 + (part + 1) * others) for part in range(3))
        held[:, 1:] = total[:, share] + np.eye(k)[:, 1:]
        flow[:, 1:] = -(total[:, leaked] - total[:, kept] + question.shares.leaks_at_hubs)
    # B held = flow
    try:
        return np.asarray(np.linalg.solve(held.T, flow.T).T, dtype=np.float64)
    except np.linalg.LinAlgError as reason:
        raise NotReached("no settled shape was found") from reason


def joined(prepared: Prepared, state: State, tail: Tail, time: Fraction) -> State:
    """Return the state at a later time when the tail is joined at a state."""
    question = prepared.question
    left = question.mass - float(state.collected[-1])
    k = tail.losses.size
    begin: Floats = np.array([max(0.0, left)])
    if k > 1:
        conditions = np.concatenate((np.ones((k, 1)), tail.shares), axis=1)
        try:
            mixture = np.linalg.solve(conditions.T, np.concatenate(([left], state.shares)))
        except np.linalg.LinAlgError as reason:
            raise NotReached("the settled shapes of the hubs are alike") from reason
        begin = np.maximum(np.asarray(mixture, dtype=np.float64), 0.0)
        begin[0] = max(0.0, left - math.fsum(begin[1:].tolist()))
    # What the floats of c lose against the balance of mass, joined to F~ at its beginning; the sums of the shapes count
    # then as at the end.
    begun = math.fsum(begin.tolist())
    lost = abs(begun - left) + 2.0 * begun * tail.whole_doubt + 4.0 * UNIT * question.mass + float(state.doubt[-1])
    span = time - state.time
    after, gone, off = tail.followed(begin, span)
    most = (gone + off) * _SLACK
    mass = (lost + float(most @ tail.drift)) * _SLACK
    gains = np.minimum(question.gains() * float(span) * _SLACK, question.tops())
    mixed = begin @ tail.shapes
    apart = np.abs(state.weights - mixed) + (k + 2.0) * UNIT * (begin @ np.abs(tail.shapes))
    jump = prepared.costs @ apart * _SLACK + state.blur
    if k > 1:
        held = begin @ tail.shares
        off_shares = np.abs(held - state.shares) + state.shares_doubt + begin @ tail.shares_doubt
        jump += prepared.gaps @ (off_shares + (k + 2.0) * UNIT * (begin @ np.abs(tail.shares))) * _SLACK
    more = gone @ tail.collected
    doubt = off @ np.abs(tail.collected) + gone @ (tail.collected_doubt + (k + 4.0) * UNIT * np.abs(tail.collected))
    return State(
        time,
        after @ tail.shapes,
        after * tail.at_hubs,
        after @ tail.shares,
        after @ tail.shares_doubt,
        state.blur,
        state.collected + more,
        state.doubt + (doubt + 2.0 * UNIT * (state.collected + np.abs(more))) * _SLACK,
        state.cost + (mass * gains + jump + most @ tail.cost) * _SLACK,
    )
