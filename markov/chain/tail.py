"""The settled end of a long mission: one decaying shape that stands for the weights, with the cost of its defect.

From a time tau on take ``P~(tau + s) = A nu exp(-theta s)`` with ``nu = 1`` at the hub, any ``theta >= 0`` and ``A =
(M(0) - F~(tau)) / sum nu``, in the notation of `markov.chain.windows`.  Off the hub the defect is ``-A exp(-theta s)
rho`` with ``rho = theta nu + nu Q``, hence it costs at most ``A min(l, 1/theta) |rho| g`` over a length l; joining
costs ``|P~(tau) - A nu| g``; and with ``theta`` close to ``nu v / sum nu`` the mass M moves by at most ``A |nu v -
theta sum nu| min(l, 1/theta)``.  What is collected is ``A (nu a) (1 - exp(-theta l)) / theta``.  The cost does not grow
with the mission.

``nu`` comes from sweeps shifted by ``-theta``, theta from the last ``nu``; neither needs to be accurate for the proof.

Source: derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain.bounds import Floats, above
from markov.chain.doubled import UNIT
from markov.chain.settling import mean_fading
from markov.chain.windows import Prepared, State
from markov.errors import NotReached

_ROUNDS = 8
_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Tail:
    """A settled shape.

    Attributes
    ----------
    shape : float64[m]
        The nu off the hub.
    decay : float
        theta.
    whole : float
        Sum of nu, hub included.
    collected : float64[c + 1]
        ``nu a``, the last being ``nu v``.
    relative : float
        Relative error of the last two.
    cost : float64[w c]
        Bound of ``|rho| g``.
    drift : float
        Bound of ``|nu v - theta sum nu|``.
    """

    shape: Floats
    decay: float
    whole: float
    collected: Floats
    relative: float
    cost: Floats
    drift: float

    def length(self, span: Fraction) -> float:
        """Return ``(1 - exp(-theta l)) / theta``, relative error under ``2 u``."""
        low, high = mean_fading(Fraction(self.decay) * span)
        return float(span * (low + high) / 2)

    def longest(self, span: Fraction) -> float:
        """Return an upper bound of ``min(l, 1/theta)``."""
        most = above(span)
        return most if self.decay * most <= 1.0 else _SLACK / self.decay


def settled(prepared: Prepared) -> Tail:
    """Return the shape that a chain settles to.

    Raises
    ------
    NotReached
        The shape is not found.
    """
    question = prepared.question
    grounded, sums = question.grounded, prepared.sums
    right = grounded.outward[:, None]
    shape, decay = question.weights[0].excursion[:, None], 0.0
    for _ in range(_ROUNDS):
        diagonal = grounded.exits - decay
        if not bool((diagonal > 0.0).all()):
            raise NotReached("states are left more slowly than the chain decays")
        shape = grounded.real("row", diagonal, right, shape, 2e-15, 400)
        total = sums.all(shape)[:, 0]
        collected = total[1:] + question.collected_at_hub
        whole = float(total[0]) + 1.0
        before, decay = decay, float(collected[-1]) / whole
        if abs(decay - before) <= 1e-15 * decay:
            break
    nu = shape[:, 0]
    if not bool(np.isfinite(nu).all()) or float(nu.min(initial=0.0)) < 0.0:
        raise NotReached("no settled shape was found")
    rest = np.abs(grounded.into @ nu + grounded.outward - (grounded.exits - decay) * nu)
    cost = prepared.costs @ rest + (prepared.own @ nu) * decay + prepared.moving @ nu + prepared.hub_cost
    unit = (sums.roundings + 4) * UNIT + question.entry_error
    drift = abs(float(collected[-1]) - decay * whole) + 2.0 * unit * (float(collected[-1]) + decay * whole)
    return Tail(nu, decay, whole, collected, 2.0 * unit, cost * _SLACK, drift)


def joined(prepared: Prepared, state: State, tail: Tail, time: Fraction) -> State:
    """Return the state at a later time when the tail is joined at a state."""
    question = prepared.question
    left = question.mass - float(state.collected[-1])
    factor = max(0.0, left) / tail.whole
    # What the floats of A lose against the balance of mass, joined to F~ at its beginning.
    lost = factor * tail.whole * (tail.relative + 8.0 * UNIT) + 4.0 * UNIT * question.mass + float(state.doubt[-1])
    lost += max(0.0, -left)
    span = time - state.time
    length, longest = tail.length(span), tail.longest(span)
    mass = (lost + factor * tail.drift * longest) * _SLACK
    gains = np.minimum(question.gains() * float(span) * _SLACK, question.tops())
    apart = np.abs(state.weights - factor * tail.shape)
    jump = prepared.costs @ (apart + 2.0 * UNIT * factor * tail.shape) * _SLACK + state.blur
    more = factor * tail.collected * length
    fading = max(0.0, 1.0 - tail.decay * length)
    return State(
        time,
        factor * tail.shape * fading,
        factor * fading,
        state.blur,
        state.collected + more,
        state.doubt + more * (tail.relative + 10.0 * UNIT) + 2.0 * UNIT * (state.collected + more),
        state.cost + (mass * gains + jump + factor * tail.cost * longest) * _SLACK,
    )
