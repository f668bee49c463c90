"""Absorption and integrals of rewards over long times of large stiff chains: contour windows that carry a proof.

Let p be the weights of n states that are not absorbed, ``p' = p Q``, v the rates of absorption (all classes together),
a what is collected (rates into one class, or a reward), ``G(t)`` the integral of ``p a`` over [0, t].  Take any
piecewise smooth P~ with ``P~(0) = p(0)``, jumps ``J_k`` at ``t_k`` and defect ``D = P~' - P~ Q``, and put ``G~`` and
``F~`` the integrals of ``P~ a`` and ``P~ v``, ``M = sum P~ + F~``.  With theta, g of `markov.chain.weights` and M(0)
the mass at the start,

    |G~(t) - G(t)| <= integral |M - M(0)| u_0'(t - s) ds + sum_k |J_k| g + integral |D| g ds.

*Proof.*  With ``u' = Q u + a``, ``u(0) = 0``, differentiating ``P~(s) u(t - s)`` gives ``G~(t) - G(t) = sum J_k u(t -
t_k) + integral D u(t - s) ds``.  Write ``u = u_0 1 + (u - u_0 1)``; the second part costs ``|.| g``.  As ``-Q 1 = v``,
the first is the integral of ``u_0(t - s) dM(s)``, jumps included, and integration by parts with ``M = M(0)`` at 0 and
``u_0(0) = 0`` leaves the first term.  Over a piece of length l it is at most ``sup |M - M(0)| min(theta l, U)``.

So an error at the hub, where nearly all the mass is, enters only through M, and M can be made right: nothing grows
with the number of jumps, and fast rates do not matter.  What is taken for P~:

* up to ``t_0``, a power of two, the exact p, which uniformisation encloses (`markov.chain.uniformisation`);
* on windows [t_k, 8 t_k] the contour sum of `markov.chain.contour`, ``y(z)`` found by sweeps over many z at once
  (`markov.chain.grounded`) as ``y_0(z) x(z) + w(z)`` with the hub entry from the balance of mass, ``y_0 (z + v_0 + sum
  x (z + v)) = M(0) - sum w (z + v)``.  Off the hub D is the contour sum of the row residuals ``rho(z) = z y - y Q -
  p(0)`` and of ``p(0)`` times the impulse error; ``M - M(0)`` is ``M(0)`` times the step error, the contour sum of the
  rounding of the balance, and a constant from joining F~ at ``t_k``;
* once the chain has settled, the tail of `markov.chain.tail`.

Residuals are evaluated in floats; their rounding is counted row by row, ``(terms + 12) sqrt(2) u`` times the absolute
values.  Sums over all states are formed in stages of at most 64 terms.

Source: derived here; for the contour see there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.contour import COEFFICIENT_ERROR, Contour
from markov.chain.doubled import UNIT
from markov.chain.grounded import Complexes, Grounded
from markov.chain.steady import Steady, steady
from markov.chain.tally import Tally, tally
from markov.chain.weights import Weights
from markov.errors import NotReached

#: Elements of the unknown of one batch of nodes.
_BATCH = 4_000_000
_SWEEPS = 60
_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Question:
    """A chain with what is collected, in a unit of time in which the fastest rate is about 1.

    Attributes
    ----------
    grounded : Grounded
    weights : tuple of Weights
        Alternatives; each holds up to its own time.
    start : float64[m]
        Off the hub.
    start_at_hub : float
    mass : float
        Of the start.
    collected : float64[m, c + 1], collected_at_hub : float64[c + 1]
        The last column is the loss v.
    exit_at_hub : float
    ceilings : float64[c]
        Largest possible amounts from any state.
    entry_error : float
        Relative error of every rate as a float.
    """

    grounded: Grounded
    weights: tuple[Weights, ...]
    start: Floats
    start_at_hub: float
    mass: float
    collected: Floats
    collected_at_hub: Floats
    exit_at_hub: float
    ceilings: Floats
    entry_error: float

    @property
    def kinds(self) -> int:
        """How many quantities are asked for."""
        return int(self.collected.shape[1]) - 1

    def stack(self) -> Floats:
        """Return all costs below each other: float64[w c, m]."""
        return np.concatenate([each.costs for each in self.weights])

    def gains(self) -> Floats:
        """Return all theta, float64[w c]."""
        return np.concatenate([each.rates for each in self.weights])

    def tops(self) -> Floats:
        """Return all bounds of what is collected from the hub, float64[w c]."""
        return np.concatenate([each.ceilings for each in self.weights])


@dataclass(frozen=True, eq=False)
class Prepared:
    """Products of a question that every window needs."""

    question: Question
    costs: csr_array  # [w c, m]
    own: csr_array  # costs times roundings
    moving: csr_array  # what an entry's rounding costs: own d + own N
    watch: Floats  # what a change of an entry costs: N costs
    hub_cost: Floats  # the hub's rates into costly states
    start_cost: Floats
    start_own: Floats
    sums: Tally  # ones, then collected
    steady: Steady | None

    @classmethod
    def of(cls, question: Question) -> Prepared:
        """Form them."""
        grounded, costs = question.grounded, question.stack()
        own = costs * ((grounded.terms + 12.0) * math.sqrt(2.0) * (UNIT + question.entry_error))
        return cls(
            question,
            csr_array(costs),
            csr_array(own),
            csr_array(own * grounded.exits + (grounded.out @ own.T).T),
            np.ascontiguousarray((grounded.out @ costs.T).T),
            own @ grounded.outward,
            costs @ question.start,
            own @ question.start,
            tally(np.concatenate((np.ones((grounded.m, 1)), question.collected), axis=1)),
            _steady(question),
        )


@dataclass(frozen=True, eq=False)
class State:
    """Where P~ has come to.

    Attributes
    ----------
    time : Fraction
    weights : float64[m]
        P~ off the hub.
    blur : float64[w c]
        What the error of these floats costs.
    collected : float64[c + 1]
        G~, the last being F~.
    doubt : float64[c + 1]
        Error of these floats.
    cost : float64[w c]
        Jumps, defects and mass so far.
    apart : float
        P~ is within this times `Steady.vector` of the exact weights, the floats' error included; inf: unknown.
    """

    time: Fraction
    weights: Floats
    at_hub: float
    blur: Floats
    collected: Floats
    doubt: Floats
    cost: Floats
    apart: float = math.inf


class Window:
    """The contour sum over one window, from the sums over all nodes that any time in it needs."""

    def __init__(self, prepared: Prepared, state: State, nodes: Contour, aim: Floats, ends: list[Fraction]) -> None:
        """Solve for all nodes.

        Parameters
        ----------
        aim : float64[w c]
            Costs of residuals worth going for.
        ends : list of Fraction
            Times over ``state.time`` at which the weights themselves are wanted, ascending.
        """
        self.prepared, self.state, self.nodes = prepared, state, nodes
        question = prepared.question
        grounded = question.grounded
        kinds, size = question.kinds + 1, nodes.size
        self.shifts = nodes.nodes / float(state.time)
        self.ends = ends
        coefficients = [nodes.at(Fraction(1)), *(nodes.at(end) for end in ends)]
        self.weights = np.zeros((len(coefficients), grounded.m))
        self.at_hub = np.zeros(len(coefficients))
        rows = prepared.watch.shape[0]
        self.blur = np.zeros((len(coefficients), rows))
        self.residuals = np.zeros((rows, size))
        self.sums = np.zeros((kinds, size), dtype=np.complex128)
        self.sums_error = np.zeros((kinds, size))
        self.balance = np.zeros(size)
        self.rows, self.scales = np.zeros(size), np.zeros(size)
        batch = max(4, min(size, _BATCH // (2 * max(1, grounded.m))))
        lengths = nodes.lengths(ends[-1]) / np.abs(self.shifts)
        for begin in range(0, size, batch):
            here = slice(begin, min(size, begin + batch))
            self._solve(here, aim[:, None] / (lengths[here] * size), coefficients)

    def _solve(self, here: slice, enough: Floats, coefficients: list[Complexes]) -> None:
        prepared, question = self.prepared, self.prepared.question
        grounded, z = question.grounded, self.shifts[here]
        guess = question.weights[0].excursion if prepared.steady is None else prepared.steady.vector
        first = np.empty((grounded.m, z.size), dtype=np.complex128)
        first[:] = guess[:, None]
        y = grounded.shifted(z, grounded.outward, first, prepared.watch, enough, _SWEEPS)
        ones, lost = prepared.sums.complex(y, 0), prepared.sums.complex(y, -1)
        below = z + float(question.collected_at_hub[-1]) + ones * z + lost
        above = np.full(z.size, question.mass, dtype=np.complex128)
        started = bool(question.start.any())
        if started:
            first = np.zeros((grounded.m, z.size), dtype=np.complex128)
            w = grounded.shifted(z, question.start, first, prepared.watch, enough / np.abs(z), _SWEEPS)
            above -= prepared.sums.complex(w, 0) * z + prepared.sums.complex(w, -1)
        hub = above / below
        y *= hub
        if started:
            y += w
        self._measure(here, z, hub, y, coefficients)

    def _measure(self, here: slice, z: Complexes, hub: Complexes, y: Complexes, coefficients: list[Complexes]) -> None:
        prepared, question = self.prepared, self.prepared.question
        grounded = question.grounded
        rest = np.asarray(grounded.into @ y.view(np.float64)).view(np.complex128)
        fed = np.flatnonzero((grounded.outward > 0.0) | (question.start > 0.0))
        rest[fed] += question.start[fed, None] + grounded.outward[fed, None] * hub
        lengths = grounded.exits[:, None] + z
        lengths *= y
        rest -= lengths
        size, off = _size(y), _size(rest)
        rounding = (prepared.own @ size) * np.abs(z) + prepared.moving @ size
        rounding += prepared.hub_cost[:, None] * np.abs(hub) + prepared.start_own[:, None]
        self.residuals[:, here] = (prepared.costs @ off + rounding) * _SLACK
        total = np.stack([prepared.sums.complex(y, column) for column in range(question.kinds + 2)])
        absolute = prepared.sums.all(size)
        unit = (prepared.sums.roundings + 4) * UNIT + question.entry_error
        at_hub = question.collected_at_hub[:, None] * hub
        collected = total[1:] + at_hub
        self.sums[:, here] = collected
        self.sums_error[:, here] = 2.0 * unit * (absolute[1:] + np.abs(at_hub)) * _SLACK
        left = hub * z + total[0] * z + collected[-1] - question.mass
        gross = (np.abs(hub) + absolute[0]) * np.abs(z) + absolute[-1] + np.abs(at_hub[-1]) + question.mass
        self.balance[here] = np.abs(left) + 2.0 * unit * gross
        if prepared.steady is not None:
            self.rows[here], self.scales[here] = prepared.steady.residuals(off, size, y, hub, z)
        spread = prepared.costs @ size
        flat = y.view(np.float64)
        for number, coefficient in enumerate(coefficients):
            c = coefficient[here] * (2.0 / float(self.state.time))
            self.weights[number] += flat @ np.conj(c).view(np.float64)
            self.at_hub[number] += float(np.sum((hub * c).real))
            self.blur[number] += (2 * self.nodes.size + 8) * UNIT * (spread @ np.abs(c))

    @property
    def jump(self) -> Floats:
        """What joining at the window's beginning costs, float64[w c]."""
        apart = np.abs(self.weights[0] - self.state.weights)
        found: Floats = (self.prepared.costs @ apart) * _SLACK + self.blur[0] + self.state.blur
        return found

    def _sum(self, c: Complexes) -> tuple[Floats, Floats]:
        parts = 2.0 * (self.sums.real * c.real - self.sums.imag * c.imag)
        value = np.array([math.fsum(row) for row in parts.tolist()])
        size = 2.0 * np.abs(c)
        error = self.sums_error @ size + np.abs(self.sums) @ (size * 6.0 * UNIT + 4.0 * COEFFICIENT_ERROR)
        return value, error * _SLACK

    def until(self, place: int) -> tuple[State, str]:
        """Return the state at one of the ends, with the name of what makes its bound wide."""
        question, state, sigma = self.prepared.question, self.state, self.ends[place]
        more, doubt = self._sum(self.nodes.between(sigma))
        mass = question.mass * self.nodes.step_error + float(self.nodes.largest(sigma) @ self.balance)
        if question.collected[:, -1].any() or question.collected_at_hub[-1] > 0.0:
            begun, begun_doubt = self._sum(self.nodes.steps(Fraction(1)))
            mass += abs(float(state.collected[-1] - begun[-1])) + float(begun_doubt[-1]) + float(state.doubt[-1])
        defect = self.residuals @ self.nodes.lengths(sigma)
        defect += self.nodes.impulse_error * float(sigma - 1) * self.prepared.start_cost
        span = float((sigma - 1) * state.time) * _SLACK
        drift = mass * np.minimum(question.gains() * span, question.tops())
        parts = {"mass": drift, "joining windows": self.jump, "residuals of the sweeps": defect}
        reason = max(parts, key=lambda name: float(parts[name].max()))
        later = State(
            state.time * sigma,
            self.weights[place + 1],
            float(self.at_hub[place + 1]),
            self.blur[place + 1],
            state.collected + more,
            state.doubt + doubt + 2.0 * UNIT * (state.collected + np.abs(more)),
            state.cost + (drift + defect + self.jump) * _SLACK,
            self._apart(sigma),
        )
        return later, reason

    def _apart(self, sigma: Fraction) -> float:
        """Return how far the weights at an end may be from the exact ones, over the steady vector."""
        steady, state, nodes = self.prepared.steady, self.state, self.nodes
        if steady is None or not math.isfinite(state.apart):
            return math.inf

        def blur(at: Fraction) -> float:
            size = np.abs(nodes.at(at)) * (2.0 / float(state.time))
            return (2 * nodes.size + 8) * UNIT * float(size @ self.scales)

        jump = float(steady.most(np.abs(self.weights[0] - state.weights), abs(self.at_hub[0] - state.at_hub)))
        defect = float(nodes.lengths(sigma) @ self.rows) + nodes.impulse_error * float(sigma - 1) * steady.start
        before = state.apart + blur(Fraction(1)) + jump + defect
        return before * steady.grown(float((sigma - 1) * state.time)) * _SLACK + blur(sigma)


def _steady(question: Question) -> Steady | None:
    try:
        return steady(
            question.grounded,
            question.weights[0].excursion,
            question.exit_at_hub,
            question.start,
            question.start_at_hub,
            question.entry_error,
        )
    except NotReached:
        return None


def _size(values: Complexes) -> Floats:
    """Return a bound of absolute values, at most 1.42 times too large and safe from underflow."""
    parts = np.abs(values.view(np.float64))
    found: Floats = parts[:, 0::2] + parts[:, 1::2]
    return found
