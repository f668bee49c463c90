"""Chains of more than a few hundred states, seen from a likely state: the hub.

Everything is expressed by what happens between two visits to the hub, so that rare absorption is a small term of a
sum and never a small difference:

* ``e`` time spent in each other state per unit of time at the hub, ``e (D - N) = q`` with q the rates out of the hub;
* stationary weights ``(1, e)``; time at the hub before absorption ``T = 1 / (v_h + e v)``, in the others ``T e``;
* from any other start ``y' (D - N) = a``, then the hub with probability ``a_h + sum_i y'_i N_ih``;
* mean times ``m_i = g_i + k_i m_h`` with ``(D - N) (g, k, c) = (1, N_.h, v)`` and ``m_h = (1 + q g) / (v_h + q c)``.

Every system is certified by `markov.chain.mmatrix`.  The hub must be a likely state: when the solution shows a state
where more time is spent, that one is taken and the work repeated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property, partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from markov.chain import dense
from markov.chain.arrangement import Arrangement, Side, arrange
from markov.chain.bounds import Floats
from markov.chain.doubled import ADD, DIVIDE, MULTIPLY, Doubled, add, divide, multiply, plain, total, total_error, zeros
from markov.chain.generator import Generator
from markov.chain.mmatrix import Flow, Readings, Solver, solve_certified
from markov.chain.sweeps import sweeps
from markov.errors import NotReached

_ATTEMPTS = 5
_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Hub:
    """A chain of n states, with absorption, grounded at one of them.

    Attributes
    ----------
    chain : Generator
        n states.
    loss : Doubled[n]
        Rates of absorption; all 0 for a closed class.
    loss_error : float
    number : int
        The hub.
    level : int[n] or None
        Distance of each state from the usual state, for the order of sweeps; None takes distances from the hub.
    """

    chain: Generator
    loss: Doubled
    loss_error: float
    number: int
    level: NDArray[np.integer[Any]] | None = None

    @cached_property
    def _arranged(self) -> Arrangement:
        return arrange(self.chain, self.number, self.level)

    @property
    def others(self) -> NDArray[np.integer[Any]]:
        """Numbers of all states but the hub, in order of level."""
        return self._arranged.others

    @property
    def _off(self) -> slice | NDArray[np.integer[Any]]:
        return slice(1, None) if self._arranged.order is None else self.others

    @cached_property
    def readings(self) -> Readings:
        """How many rates the solver has read so far."""
        return Readings()

    @property
    def method(self) -> str:
        """How, for people."""
        return f"{self.row[1].name}, certified entry by entry"

    @cached_property
    def _inward(self) -> tuple[Doubled, float]:
        there = np.zeros(self.chain.n, dtype=bool)
        there[self.number] = True
        rates, error = self.chain.crossing(~there, there)
        return rates.at(self._off), error

    @property
    def inward(self) -> Doubled:
        """Rates into the hub, Doubled[n - 1], relative error `inward_error`."""
        return self._inward[0]

    @property
    def inward_error(self) -> float:
        """Relative error of `inward`."""
        return self._inward[1]

    @cached_property
    def outward(self) -> Doubled:
        """Rates out of the hub into the others, Doubled[n - 1]."""
        here = slice(int(self.chain.pointers[self.number]), int(self.chain.pointers[self.number + 1]))
        found = zeros(self.chain.n)
        target = self.chain.target[here]
        found.high[target], found.low[target] = self.chain.rates.at(here)
        return found.at(self._off)

    @cached_property
    def _exits(self) -> tuple[Doubled, float]:
        if not self.loss.high.any():
            return self.chain.exits.at(self._off), self.chain.exit_error
        exits = add(self.chain.exits, self.loss).at(self._off)
        return exits, max(self.chain.exit_error, self.loss_error) + ADD

    def _flow(self, side: Side) -> Flow:
        exits, exit_error = self._exits
        incoming = self._arranged.rates(side, self.chain.high)
        bring_low = partial(_low, self._arranged, side)  # not a method: large arrays would wait in a circle for release
        return Flow(incoming, bring_low, self.chain.rate_error, exits, exit_error, self.readings)

    @cached_property
    def row(self) -> tuple[Flow, Solver]:
        """The system of times spent off the hub, with its solver."""
        flow = self._flow("row")
        return flow, self._dense or sweeps(flow, self._arranged.ends)

    @cached_property
    def column(self) -> tuple[Flow, Solver]:
        """The system of values per state, with its solver."""
        flow = self._flow("column")
        return flow, self._dense.turned("column") if self._dense else sweeps(flow, self._arranged.ends)

    @cached_property
    def _dense(self) -> dense.DenseElimination | None:
        if self.chain.n - 1 > dense.LARGEST_DENSE:
            return None
        rates = self._arranged.rates("column", self.chain.high)[:, 1:].toarray()
        away = self.loss.at(self._off)
        return dense.eliminate(rates, self.inward.high + self.inward.low + away.high + away.low)

    def solve(self, side: Side, b: Doubled, b_error: float) -> tuple[Doubled, float]:
        """Solve one system off the hub, certified."""
        flow, solver = self.row if side == "row" else self.column
        return solve_certified(flow, b, b_error, solver)

    @cached_property
    def excursion(self) -> tuple[Doubled, float]:
        """Time in each other state per unit of time at the hub, Doubled[n - 1], with its relative error."""
        return self.solve("row", self.outward, self.chain.rate_error)

    def _joined(self, at_hub: Doubled, off: Doubled) -> Doubled:
        found = zeros(self.chain.n)
        found.high[self._off], found.low[self._off] = off
        found.high[self.number], found.low[self.number] = at_hub.high.reshape(-1)[0], at_hub.low.reshape(-1)[0]
        return found

    def stationary(self) -> tuple[Doubled, float]:
        """Return stationary weights of a closed class, 1 at the hub, with their relative error."""
        off, error = self.excursion
        return self._joined(plain(1.0), off), error

    @cached_property
    def _leave(self) -> tuple[Doubled, float]:
        """Rate of absorption per unit of time at the hub, excursions included."""
        off, error = self.excursion
        escaping = total(multiply(off, self.loss.at(self._off)))
        error = (error + self.loss_error + MULTIPLY + total_error(self.chain.n) + ADD) * _SLACK
        found = add(self.loss.at(self.number), escaping)
        if not float(found.high) > 0.0:
            raise NotReached("absorption is too rare to be represented")
        return found, error

    def spent(self, start: Doubled, start_error: float) -> tuple[Doubled, float]:
        """Return the time spent in each state before absorption, Doubled[n], with its relative error."""
        leave, leave_error = self._leave
        excursion, excursion_error = self.excursion
        away = start.at(self._off)
        first, first_error = zeros(self.chain.n - 1), 0.0
        arrival = start.at(self.number)
        if away.high.any():
            first, first_error = self.solve("row", away, start_error)
            arrival = add(arrival, total(multiply(first, self.inward)))
        step = MULTIPLY + total_error(self.chain.n) + ADD + self.inward_error
        at_hub = divide(arrival, leave)
        error = first_error + start_error + step + leave_error + DIVIDE
        off = add(first, multiply(excursion, at_hub))
        return self._joined(at_hub, off), (error + excursion_error + MULTIPLY + ADD) * _SLACK

    def times(self) -> tuple[Doubled, float]:
        """Return the mean time to absorption from each state, Doubled[n], with its relative error."""
        ones = plain(np.ones(self.chain.n - 1))
        before, before_error = self.solve("column", ones, 0.0)
        back, back_error = self.solve("column", self.inward, self.inward_error)
        gone, gone_error = self.solve("column", self.loss.at(self._off), self.loss_error)
        step = MULTIPLY + total_error(self.chain.n) + ADD + self.chain.rate_error
        length = add(plain(1.0), total(multiply(self.outward, before)))
        leave = add(self.loss.at(self.number), total(multiply(self.outward, gone)))
        at_hub = divide(length, leave)
        error = before_error + gone_error + self.loss_error + 2 * step + DIVIDE
        off = add(before, multiply(back, at_hub))
        return self._joined(at_hub, off), (error + back_error + MULTIPLY + ADD) * _SLACK


def _low(arranged: Arrangement, side: Side) -> Floats:
    found: Floats = arranged.rates(side, arranged.chain.low).data
    return found


def with_likely_hub(
    chain: Generator,
    loss: Doubled,
    loss_error: float,
    guess: int,
    level: NDArray[np.integer[Any]] | None = None,
    work: Callable[[Hub], tuple[Doubled, float]] = lambda hub: hub.excursion,
) -> Hub:
    """Return the chain grounded at a likely state, found by trying.

    Parameters
    ----------
    guess : int
        Where to begin, such as the start state.
    level : int[n], optional
        See `Hub`.

    Raises
    ------
    NotReached
        No hub makes the systems certifiable.
    """
    number, tried = guess, set[int]()
    trouble: NotReached | None = None
    while number not in tried and len(tried) < _ATTEMPTS:
        tried.add(number)
        hub = Hub(chain, loss, loss_error, number, level)
        try:
            off, _ = work(hub)
            values = off.high
        except NotReached as reason:
            trouble = reason
            values = _rough(hub)
        else:
            if values.size == 0 or values.max() <= 4.0:
                return hub
            found = hub
            trouble = None
        number = int(hub.others[int(np.argmax(values))])
    if trouble is None:
        return found
    raise trouble


def _rough(hub: Hub) -> Floats:
    """Return where the chain may be found, from a few hundred steps of its jumps: enough to pick a better hub."""
    matrix = hub.chain.matrix()
    exits = hub.chain.exits.high
    rate = 1.02 * float(exits.max())
    x = np.full(hub.chain.n, 1.0 / hub.chain.n)
    into = matrix.T.tocsr()
    # Time per visit counts, not the number of visits: steps of the jump chain, weighted by mean stay.
    stay = np.where(exits > 0.0, 1.0 / np.maximum(exits, 1e-300), 1.0 / rate)
    for _ in range(200):
        x = 0.5 * x + 0.5 * (into @ (x * stay))
        x /= x.sum()
    found: Floats = (x * stay)[hub.others]
    return found
