"""Absorption and integrals of rewards over long times of large stiff chains: contour windows that carry a proof.

Let p be the weights of n states that are not absorbed, ``p' = p Q``, v the rates of absorption (all classes together),
a what is collected (rates into one class, or a reward), ``G(t)`` the integral of ``p a`` over [0, t].  Take any
piecewise smooth P~ with ``P~(0) = p(0)``, jumps ``J_k`` at ``t_k`` and defect ``D = P~' - P~ Q``, and put ``G~`` and
``F~`` the integrals of ``P~ a`` and ``P~ v``, ``M = sum P~ + F~``.  With theta, g, D_h of `markov.chain.weights`, the
shares ``s_h`` of the hubs but the first (`markov.chain.hubs`; one hub has none), and M(0) the mass at the start,

    |G~(t) - G(t)| <= integral |M - M(0)| u_0'(t - s) ds + sum_k |J_k| g + integral |D| g ds
                      + sum_h D_h (sum_k |J_k s_h| + integral |D s_h| ds).

*Proof.*  With ``u' = Q u + a``, ``u(0) = 0``, differentiating ``P~(s) u(t - s)`` gives ``G~(t) - G(t) = sum J_k u(t -
t_k) + integral D u(t - s) ds``.  Write ``u = u_0 1 + sum_h s_h (u_h - u_0) + w``; the last part, 0 at the hubs, costs
``|.| g``, the one before ``|. s_h| D_h``.  As ``-Q 1 = v``, the first is the integral of ``u_0(t - s) dM(s)``, jumps
included, and integration by parts with ``M = M(0)`` at 0 and ``u_0(0) = 0`` leaves the first term.  Over a piece of
length l it is at most ``sup |M - M(0)| min(theta l, U)``.

So errors at the hubs, where nearly all the mass is, enter only through M and through one number for each further hub,
and these can be made right: nothing grows with the number of jumps, and fast rates do not matter; only how often the
chain changes between its parts does.  What is taken for P~:

* up to ``t_0``, a power of two, the exact p, which uniformisation encloses (`markov.chain.uniformisation`);
* on windows [t_k, 8 t_k] the contour sum of `markov.chain.contour`, ``y(z)`` found by sweeps over many z at once
  (`markov.chain.grounded`) as ``sum_h y_h(z) x_h(z) + w(z)``, the excursions from each hub, with the hub entries from
  the balances of mass and of each share, k equations:
  ``z sum y + y v = M(0)``, ``z y s_h + y l_h = p(0) s_h``.  Off the hubs D is the contour sum of the row residuals
  ``rho(z) = z y - y Q - p(0)`` and of ``p(0)`` times the impulse error; ``D s_h`` that of the rounding of its balance;
  ``M - M(0)`` is ``M(0)`` times the step error, the contour sum of the rounding of the balance, and a constant from
  joining F~ at ``t_k``;
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
from markov.chain.grounded import Complexes
from markov.chain.hubs import Hubs, Shares
from markov.chain.steady import Steady, steady
from markov.chain.tally import Tally, tally
from markov.chain.weights import Weights
from markov.errors import NotReached

#: Elements of the unknown of one batch of nodes.
_BATCH = 4_000_000
_SWEEPS = 60
#: Times what is aimed at beyond which sweeps around several hubs count as stuck.
_STUCK = 1e8
_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Question:
    """A chain with what is collected, in a unit of time in which the fastest rate is about 1.

    Attributes
    ----------
    hubs : Hubs
    shares : Shares
    weights : tuple of Weights
        Alternatives; each holds up to its own time.
    start : float64[m]
        Off the hubs.
    start_at_hubs : float64[k]
    mass : float
        Of the start.
    collected : float64[m, c + 1], collected_at_hubs : float64[k, c + 1]
        The last column is the loss v.
    ceilings : float64[c]
        Largest possible amounts from any state.
    entry_error : float
        Relative error of every rate as a float.
    """

    hubs: Hubs
    shares: Shares
    weights: tuple[Weights, ...]
    start: Floats
    start_at_hubs: Floats
    mass: float
    collected: Floats
    collected_at_hubs: Floats
    ceilings: Floats
    entry_error: float

    @property
    def kinds(self) -> int:
        """How many quantities are asked for."""
        return int(self.collected.shape[1]) - 1

    def stack(self) -> Floats:
        """Return all costs below each other: float64[w c, m]."""
        return np.concatenate([each.costs for each in self.weights])

    def gaps(self) -> Floats:
        """Return all differences of hubs, float64[w c, k - 1]."""
        return np.concatenate([each.gaps for each in self.weights])

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
    hub_cost: Floats  # the hubs' rates into costly states, [w c, k]
    gaps: Floats  # [w c, k - 1]
    start_shares: Floats  # what the start has of each share, [k - 1]
    start_cost: Floats
    start_own: Floats
    sums: Tally  # see `_columns`
    unit: float  # relative error of a sum
    likely: Floats  # about how much of the mass comes to each hub
    steady: Steady | None

    @classmethod
    def of(cls, question: Question) -> Prepared:
        """Form them."""
        hubs, shares, costs = question.hubs, question.shares, question.stack()
        grounded, gaps = hubs.grounded, question.gaps()
        begun = shares.of(question.start, question.start_at_hubs)
        sums = tally(_columns(question))
        own = costs * ((hubs.terms + 12.0) * math.sqrt(2.0) * (UNIT + question.entry_error))
        return cls(
            question,
            csr_array(costs),
            csr_array(own),
            csr_array(own * grounded.exits + (grounded.out @ own.T).T),
            np.ascontiguousarray((grounded.out @ costs.T).T),
            own @ hubs.outward,
            gaps,
            begun,
            costs @ question.start + gaps @ begun * _SLACK,
            own @ question.start,
            sums,
            (min(sums.roundings, grounded.m + 1) + hubs.k + 4) * UNIT + question.entry_error,
            np.minimum(math.fsum(question.start.tolist()) + question.start_at_hubs @ question.weights[0].visited, 1.0),
            _steady(question),
        )


@dataclass(frozen=True, eq=False)
class State:
    """Where P~ has come to.

    Attributes
    ----------
    time : Fraction
    weights : float64[m]
        P~ off the hubs.
    shares : float64[k - 1], shares_doubt : float64[k - 1]
        P~ times each share, with the error of these floats.
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
    at_hubs: Floats
    shares: Floats
    shares_doubt: Floats
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
        hubs, grounded = question.hubs, question.hubs.grounded
        kinds, size = question.kinds + 1, nodes.size
        self.shifts = nodes.nodes / float(state.time)
        self.ends = ends
        coefficients = [nodes.at(Fraction(1)), *(nodes.at(end) for end in ends)]
        self.weights = np.zeros((len(coefficients), grounded.m))
        self.at_hubs = np.zeros((len(coefficients), hubs.k))
        rows = prepared.watch.shape[0]
        self.blur = np.zeros((len(coefficients), rows))
        self.residuals = np.zeros((rows, size))
        self.sums = np.zeros((kinds + hubs.k - 1, size), dtype=np.complex128)
        self.sums_error = np.zeros((kinds + hubs.k - 1, size))
        self.balance = np.zeros(size)
        self.rows, self.scales = np.zeros(size), np.zeros(size)
        batch = max(4, min(size, _BATCH // (2 * hubs.k * max(1, grounded.m))))
        lengths = nodes.lengths(ends[-1]) / np.abs(self.shifts)
        for begin in range(0, size, batch):
            here = slice(begin, min(size, begin + batch))
            self._solve(here, aim[:, None] / (lengths[here] * size), coefficients)

    def _solve(self, here: slice, enough: Floats, coefficients: list[Complexes]) -> None:
        prepared, question = self.prepared, self.prepared.question
        hubs, z = question.hubs, self.shifts[here]
        grounded = hubs.grounded
        found = []
        for h in range(hubs.k):
            guess = question.weights[0].excursion[:, h] if prepared.steady is None else prepared.steady.vector
            first = np.empty((grounded.m, z.size), dtype=np.complex128)
            first[:] = guess[:, None]
            outward = np.ascontiguousarray(hubs.outward[:, h])
            # An excursion counts as much as its hub is visited.
            some = enough / max(float(prepared.likely[h]), 1e-30)
            found.append(self._excursions(z, outward, first, some))
        below = np.stack([self._balances(y, z) for y in found])
        below[:, 0] += z + question.collected_at_hubs[:, -1:]
        for h in range(1, hubs.k):
            below[h, h] += z
            below[:, h] += question.shares.leaks_at_hubs[:, h - 1, None]
        above = np.empty((hubs.k, z.size), dtype=np.complex128)
        above[0], above[1:] = question.mass, prepared.start_shares[:, None]
        started = bool(question.start.any())
        if started:
            first = np.zeros((grounded.m, z.size), dtype=np.complex128)
            w = grounded.shifted(z, question.start, first, prepared.watch, enough / np.abs(z), _SWEEPS)
            above -= self._balances(w, z)
        hub = above / below[0] if hubs.k == 1 else _solved(below, above)
        y = found[0]
        y *= hub[0]
        for more, weight in zip(found[1:], hub[1:], strict=True):
            more *= weight
            y += more
        if started:
            y += w
        self._measure(here, z, np.ascontiguousarray(hub), y, coefficients)

    def _excursions(self, z: Complexes, outward: Floats, first: Complexes, enough: Floats) -> Complexes:
        """Return the transforms of the excursions from one hub."""
        hubs, watch = self.prepared.question.hubs, self.prepared.watch
        grounded = hubs.grounded
        if hubs.k == 1:
            return grounded.shifted(z, outward, first, watch, enough, _SWEEPS)
        y = hubs.swept.shifted(z, outward, first, watch, enough, _SWEEPS)
        rest = np.asarray(grounded.into @ y.view(np.float64)).view(np.complex128) + outward[:, None]
        rest -= (grounded.exits[:, None] + z) * y
        left = watch @ (_size(rest) / grounded.exits[:, None])
        if not bool((left <= _STUCK * enough).all()):
            y = grounded.shifted(z, outward, y, watch, enough, _SWEEPS)
        return y

    def _balances(self, y: Complexes, z: Complexes) -> Complexes:
        """Return what states off the hubs add to the balances of mass and of each share, complex128[k, b]."""
        sums = self.prepared.sums
        kinds, others = self.prepared.question.kinds, self.prepared.question.hubs.k - 1
        found = np.empty((others + 1, z.size), dtype=np.complex128)
        found[0] = sums.complex(y, 0) * z + sums.complex(y, kinds + 1)
        for h in range(others):
            share, kept, leaked = (kinds + 2 + part * others + h for part in range(3))
            found[h + 1] = sums.complex(y, share) * z + (sums.complex(y, leaked) - sums.complex(y, kept))
        return found

    def _measure(self, here: slice, z: Complexes, hub: Complexes, y: Complexes, coefficients: list[Complexes]) -> None:
        prepared, question = self.prepared, self.prepared.question
        hubs, shares, grounded = question.hubs, question.shares, question.hubs.grounded
        kinds, others = question.kinds + 1, question.hubs.k - 1
        rest = np.asarray(grounded.into @ y.view(np.float64)).view(np.complex128)
        fed = np.flatnonzero(hubs.outward.any(axis=1) | (question.start > 0.0))
        rest[fed] += question.start[fed, None] + _mixed(hubs.outward[fed], hub)
        lengths = grounded.exits[:, None] + z
        lengths *= y
        rest -= lengths
        size, off, hub_size = _size(y), _size(rest), np.abs(hub)
        rounding = (prepared.own @ size) * np.abs(z) + prepared.moving @ size
        rounding += prepared.hub_cost @ hub_size + prepared.start_own[:, None]
        self.residuals[:, here] = (prepared.costs @ off + rounding) * _SLACK
        total = np.stack([prepared.sums.complex(y, column) for column in range(kinds + 1 + 3 * others)])
        absolute = prepared.sums.all(size)
        unit = prepared.unit
        at_hub = _mixed(question.collected_at_hubs.T, hub)
        collected = total[1 : kinds + 1] + at_hub
        gross = absolute[1 : kinds + 1] + question.collected_at_hubs.T @ hub_size
        self.sums[:kinds, here] = collected
        self.sums_error[:kinds, here] = 2.0 * unit * gross * _SLACK
        whole = hub.sum(axis=0)
        left = whole * z + total[0] * z + collected[-1] - question.mass
        most = (hub_size.sum(axis=0) + absolute[0]) * np.abs(z) + gross[-1] + question.mass
        self.balance[here] = np.abs(left) + 2.0 * unit * most
        if others:
            share, kept, leaked = (
                slice(kinds + 1 + part * others, kinds + 1 + (part + 1) * others) for part in range(3)
            )
            held, held_size = total[share] + hub[1:], absolute[share] + hub_size[1:]
            self.sums[kinds:, here] = held
            self.sums_error[kinds:, here] = 2.0 * unit * held_size * _SLACK
            left = held * z + (total[leaked] - total[kept]) + _mixed(shares.leaks_at_hubs.T, hub)
            left -= prepared.start_shares[:, None]
            most = held_size * np.abs(z) + absolute[leaked] + absolute[kept]
            most += np.abs(shares.leaks_at_hubs.T) @ hub_size + prepared.start_shares[:, None]
            doubt = shares.errors.T @ size + shares.errors_at_hubs.T @ hub_size
            self.residuals[:, here] += prepared.gaps @ (np.abs(left) + 2.0 * unit * most + doubt) * _SLACK
        if prepared.steady is not None:
            self.rows[here], self.scales[here] = prepared.steady.residuals(off, size, y, hub[0], z)
        spread = prepared.costs @ size
        flat = y.view(np.float64)
        for number, coefficient in enumerate(coefficients):
            c = coefficient[here] * (2.0 / float(self.state.time))
            self.weights[number] += flat @ np.conj(c).view(np.float64)
            self.at_hubs[number] += (hub * c).real.sum(axis=1)
            self.blur[number] += (2 * self.nodes.size + 8) * UNIT * (spread @ np.abs(c))

    @property
    def jump(self) -> Floats:
        """What joining at the window's beginning costs, float64[w c]."""
        apart = np.abs(self.weights[0] - self.state.weights)
        found: Floats = (self.prepared.costs @ apart) * _SLACK + self.blur[0] + self.state.blur
        if self.state.shares.size:
            held, doubt = self._held(0)
            apart = np.abs(held - self.state.shares) + doubt + self.state.shares_doubt
            found += self.prepared.gaps @ apart * _SLACK
        return found

    def _held(self, place: int) -> tuple[Floats, Floats]:
        """Return P~ times each share at the beginning or, from 1 on, at an end, with its error."""
        sigma = self.ends[place - 1] if place else Fraction(1)
        value, error = self._sum(self.nodes.at(sigma))
        length = float(self.state.time)
        begin = self.prepared.question.kinds + 1
        return value[begin:] / length, error[begin:] / length

    def _sum(self, c: Complexes) -> tuple[Floats, Floats]:
        parts = 2.0 * (self.sums.real * c.real - self.sums.imag * c.imag)
        value = np.array([math.fsum(row) for row in parts.tolist()])
        size = 2.0 * np.abs(c)
        error = self.sums_error @ size + np.abs(self.sums) @ (size * 6.0 * UNIT + 4.0 * COEFFICIENT_ERROR)
        return value, error * _SLACK

    def until(self, place: int) -> tuple[State, str]:
        """Return the state at one of the ends, with the name of what makes its bound wide."""
        question, state, sigma = self.prepared.question, self.state, self.ends[place]
        last = question.kinds
        more, doubt = self._sum(self.nodes.between(sigma))
        mass = question.mass * self.nodes.step_error + float(self.nodes.largest(sigma) @ self.balance)
        more, doubt = more[: question.kinds + 1], doubt[: question.kinds + 1]
        if question.collected[:, -1].any() or question.collected_at_hubs[:, -1].any():
            begun, begun_doubt = self._sum(self.nodes.steps(Fraction(1)))
            mass += abs(float(state.collected[-1] - begun[last])) + float(begun_doubt[last]) + float(state.doubt[-1])
        defect = self.residuals @ self.nodes.lengths(sigma)
        defect += self.nodes.impulse_error * float(sigma - 1) * self.prepared.start_cost
        span = float((sigma - 1) * state.time) * _SLACK
        drift = mass * np.minimum(question.gains() * span, question.tops())
        parts = {"mass": drift, "joining windows": self.jump, "residuals of the sweeps": defect}
        reason = max(parts, key=lambda name: float(parts[name].max()))
        later = State(
            state.time * sigma,
            self.weights[place + 1],
            self.at_hubs[place + 1],
            *self._held(place + 1),
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

        jump = float(
            steady.most(np.abs(self.weights[0] - state.weights), abs(float(self.at_hubs[0, 0] - state.at_hubs[0])))
        )
        defect = float(nodes.lengths(sigma) @ self.rows) + nodes.impulse_error * float(sigma - 1) * steady.start
        before = state.apart + blur(Fraction(1)) + jump + defect
        return before * steady.grown(float((sigma - 1) * state.time)) * _SLACK + blur(sigma)


def _steady(question: Question) -> Steady | None:
    hubs = question.hubs
    if hubs.k > 1:
        return None
    try:
        return steady(
            hubs.grounded,
            question.weights[0].excursion[:, 0],
            float(hubs.exits[0]),
            question.start,
            float(question.start_at_hubs[0]),
            question.entry_error,
        )
    except NotReached:
        return None


def _size(values: Complexes) -> Floats:
    """Return a bound of absolute values, at most 1.42 times too large and safe from underflow."""
    parts = np.abs(values.view(np.float64))
    found: Floats = parts[:, 0::2] + parts[:, 1::2]
    return found


def _solved(below: Complexes, above: Complexes) -> Complexes:
    """Return x with ``sum_g x_gb below_ghb = above_hb``; refined, as the rows differ by powers of ten."""
    systems = below.transpose(2, 1, 0)
    found = np.zeros_like(above)
    for _ in range(3):
        rest: Complexes = above - np.einsum("ghb,gb->hb", below, found)
        try:
            found += np.linalg.solve(systems, rest.T[:, :, None])[:, :, 0].T
        except np.linalg.LinAlgError as reason:
            raise NotReached("the balances of the hubs are singular") from reason
    return np.ascontiguousarray(found)


def _columns(question: Question) -> Floats:
    """Return what is summed over the states off the hubs: ones, collected, shares, negative then positive leaks."""
    leaks = question.shares.leaks
    parts = (
        np.ones((question.hubs.grounded.m, 1)),
        question.collected,
        question.shares.values,
        np.maximum(-leaks, 0.0),
        np.maximum(leaks, 0.0),
    )
    return np.concatenate(parts, axis=1)


def _mixed(rows: Floats, hub: Complexes) -> Complexes:
    """Return ``rows @ hub`` for real rows float64[r, k] and complex128[k, b]."""
    found: Complexes = np.ascontiguousarray(rows @ hub.view(np.float64)).view(np.complex128)
    return found
