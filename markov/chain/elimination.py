"""Subtraction-free elimination in double-double for chains of up to a few hundred states, with an a-priori bound.

Method (Grassmann, Taksar, Heyman).  States are eliminated from the last to the first.  Eliminating k from the chain on
``0 .. k`` leaves the censored chain on ``0 .. k - 1``: with ``d_k = sum_{j<k} N_kj + loss_k``,

    N_ij += N_ik N_kj / d_k,     loss_i += N_ik loss_k / d_k,     reward_i += N_ik reward_k / d_k,

all terms non-negative.  The exit rate is formed from the rates that leave k, never as a difference, and a self loop
that arises is dropped.  Back substitution is ``z_k = (reward_k + sum_{j<k} N_kj z_j) / d_k`` for values per state and
``y_k = start_k / d_k + sum_{i<k} y_i N_ik / d_k`` for times spent in the states.

Bound.  Let each step be computed with entrywise relative error at most phi; here ``phi <= 28 w``: d_k ``w`` (exact
summation), the quotient ``13 w``, the product ``9 w``, the sum ``4 w``, rounded up.  Then the computed chain on
``0 .. k - 1`` is, entry by entry, within phi of the exactly censored computed chain on ``0 .. k``.  By the matrix-tree
theorem every quantity asked for is a quotient of two sums of products of rates, losses, rewards or start weights, all
terms positive: for a chain with k transient states the denominator is homogeneous of degree k and the numerator of
degree k in all (k - 1 rates, one reward or start weight); for stationary ratios both have degree k - 1.  A relative
change of each datum by at most phi therefore changes the quantity by at most ``2 k phi`` to first order.  (O'Cinneide
proves this entrywise statement for stationary vectors.)  Let E_k be the error of the values computed on ``0 .. k``
against the exact values of the computed chain on these states.  The values on ``0 .. k - 1`` were computed with error
``E_{k-1}`` for a chain that differs from the exactly censored one by phi, and the new one is formed from them with a
local error chi, so

    E_k <= E_{k-1} + 2 k phi + chi,        hence        E_n <= n (n + 1) phi + n chi.

``chi <= (36 + 4 ceil(log2 n)) w``: one product, one tree sum, one addition, one quotient or stored quotient.  To this
comes the effect of the given errors of the rates themselves, ``2 n`` times their relative error.  Terms of second
order are covered by the factor in `elimination_error`, since all this is below 1e-20.

Sources: W. K. Grassmann, M. I. Taksar, D. P. Heyman, Regenerative analysis and steady state distributions for Markov
chains, Oper. Res. 33 (1985); C. A. O'Cinneide, Entrywise perturbation theory and error analysis for Markov chains,
Numer. Math. 65 (1993).  The counts are derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from markov.chain.bounds import Floats
from markov.chain.doubled import Doubled, W, add, divide, exact_total, multiply, total
from markov.errors import NotReached, TooLarge

#: Up to this many states the whole work takes about two seconds; it grows with the third power.
LARGEST_ELIMINATION = 600

#: Products of positive numbers below this would lose digits to underflow; they are refused.
_FLOOR = 1e-250


def elimination_error(n: int, rate_error: float) -> float:
    """Return the relative error of values from an elimination of n states, rewards and start weights being exact.

    A relative error of the rewards or start weights comes on top, once.
    """
    height = max(0, n - 1).bit_length()
    own = n * (n + 1) * 28 * W + n * (36 + 4 * height) * W
    return (own + 2 * n * rate_error) * (1.0 + 1e-9)


def _smallest(x: Floats) -> float:
    positive = x[x > 0.0]
    return float(positive.min()) if positive.size else 1.0


@dataclass(frozen=True, eq=False)
class Elimination:
    """An eliminated chain of n transient states (or of one closed class, grounded at its first state).

    Attributes
    ----------
    parts : Doubled[n, n]
        Below the diagonal the rates ``N_kj``, j < k, at the moment k was eliminated; above it the quotients
        ``N_ik / d_k``, i < k.
    exits : Doubled[n]
        The ``d_k``; 0 for the first state of a closed class.
    error : float
        Relative error of what `columns`, `row` and `stationary` return, see `elimination_error`.
    """

    parts: Doubled
    exits: Doubled
    error: float

    @property
    def n(self) -> int:
        """Number of states."""
        return int(self.exits.high.size)

    def columns(self, rewards: Doubled) -> Doubled:
        """Return the expected reward until absorption from each state.

        Parameters
        ----------
        rewards : Doubled[n, c]
            Reward per unit of time in each state, c kinds.  The rates into c classes of absorbing states give the
            probabilities of ending in each.

        Returns
        -------
        Doubled[n, c]
            Relative error at most ``error`` plus that of the rewards.
        """
        high, low = rewards.high.copy(), rewards.low.copy()
        for k in range(self.n - 1, 0, -1):
            if high[k].any():
                step = multiply(self.parts.at((slice(0, k), k, None)), Doubled(high[k], low[k]))
                high[:k], low[:k] = add(Doubled(high[:k], low[:k]), step)
        for k in range(self.n):
            gathered = Doubled(high[k], low[k])
            if k:
                within = multiply(self.parts.at((k, slice(0, k), None)), Doubled(high[:k], low[:k]))
                gathered = add(gathered, total(within))
            high[k], low[k] = divide(gathered, self.exits.at(k))
        return Doubled(high, low)

    def row(self, start: Doubled) -> Doubled:
        """Return the expected time spent in each state until absorption, Doubled[n], for start weights Doubled[n].

        Relative error at most ``error`` plus that of the start weights.
        """
        high, low = start.high.copy(), start.low.copy()
        for k in range(self.n - 1, 0, -1):
            if high[k]:
                share = divide(Doubled(high[k], low[k]), self.exits.at(k))
                step = multiply(self.parts.at((k, slice(0, k))), share)
                high[:k], low[:k] = add(Doubled(high[:k], low[:k]), step)
        for k in range(self.n):
            spent = divide(Doubled(high[k], low[k]), self.exits.at(k))
            if k:
                within = multiply(self.parts.at((slice(0, k), k)), Doubled(high[:k], low[:k]))
                spent = add(spent, total(within))
            high[k], low[k] = spent
        return Doubled(high, low)

    def stationary(self) -> Doubled:
        """Return the stationary weights of a closed class, Doubled[n], the first being 1.

        Relative error at most ``error``.
        """
        high, low = np.zeros(self.n), np.zeros(self.n)
        high[0] = 1.0
        for k in range(1, self.n):
            within = multiply(self.parts.at((slice(0, k), k)), Doubled(high[:k], low[:k]))
            high[k], low[k] = total(within)
        return Doubled(high, low)

    @cached_property
    def times(self) -> Doubled:
        """Mean time to absorption from each state, Doubled[n]."""
        spent = self.columns(Doubled(np.ones((self.n, 1)), np.zeros((self.n, 1))))
        return Doubled(spent.high[:, 0], spent.low[:, 0])


def eliminate(rates: Doubled, loss: Doubled | None, rate_error: float) -> Elimination:
    """Eliminate every state of a chain.

    Parameters
    ----------
    rates : Doubled[n, n]
        Rates among the states, the diagonal is ignored.  Taken over and overwritten.
    loss : Doubled[n] or None
        Rate of absorption from each state, from every state there must be a path to absorption.  None for one closed
        class, which is then grounded at state 0.
    rate_error : float
        Relative error of all of these.

    Raises
    ------
    TooLarge
        More than `LARGEST_ELIMINATION` states.
    NotReached
        Products of rates fall below 1e-250, or a state has no way out.
    """
    high, low = rates
    n = high.shape[0]
    if n > LARGEST_ELIMINATION:
        raise TooLarge(f"elimination in double-double is made for {LARGEST_ELIMINATION} states, not {n}")
    out_high, out_low = (np.zeros(n), np.zeros(n)) if loss is None else (loss.high.copy(), loss.low.copy())
    exits_high, exits_low = np.zeros(n), np.zeros(n)
    for k in range(n - 1, -1, -1):
        if k == 0 and loss is None:
            break
        exits_high[k], exits_low[k] = exact_total(
            np.append(high[k, :k], out_high[k]), np.append(low[k, :k], out_low[k])
        )
        if exits_high[k] < _FLOOR:
            raise NotReached(f"the chain cannot leave state {k}, or at a rate below {_FLOOR:g}")
        if k == 0:
            break
        column = Doubled(high[:k, k], low[:k, k])
        hit = np.flatnonzero(column.high)
        if hit.size == 0:
            continue
        quotient = divide(column.at(hit), Doubled(exits_high[k : k + 1], exits_low[k : k + 1]))
        aim = np.flatnonzero(high[k, :k])
        floor = _smallest(quotient.high) * min(_smallest(high[k, aim]), _smallest(out_high[k : k + 1]))
        if floor < _FLOOR:
            raise NotReached(f"products of rates reach {floor:.3g}, below {_FLOOR:g}, where digits are lost")
        if aim.size:
            # Few states are hit or aimed at before fill-in: a block of the matrix is enough.
            where = np.ix_(hit, aim) if hit.size * aim.size < k * k // 4 else (slice(0, k), slice(0, k))
            if isinstance(where[0], slice):
                factor = Doubled(np.zeros(k), np.zeros(k))
                factor.high[hit], factor.low[hit] = quotient
                row = Doubled(high[k, :k], low[k, :k])
            else:
                factor, row = quotient, Doubled(high[k, aim], low[k, aim])
            step = multiply(factor.at((slice(None), None)), row.at((None, slice(None))))
            high[where], low[where] = add(Doubled(high[where], low[where]), step)
        high[hit, k], low[hit, k] = quotient
        if out_high[k] > 0.0:
            step = multiply(quotient, Doubled(out_high[k : k + 1], out_low[k : k + 1]))
            out_high[hit], out_low[hit] = add(Doubled(out_high[hit], out_low[hit]), step)
    return Elimination(Doubled(high, low), Doubled(exits_high, exits_low), elimination_error(n, rate_error))
