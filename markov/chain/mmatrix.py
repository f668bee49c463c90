"""Linear systems of chains, solved by any means then certified entry by entry.

A `Flow` is the system ``y_j d_j = b_j + sum_i y_i M_ij`` with ``M, b >= 0`` and exit rates d at least the sums over
the rates that stay inside: an M-matrix ``A = D - M`` with a non-negative inverse.  Whatever solver produced y > 0, let

    |b_j + sum_i y_i M_ij - y_j d_j| <= r y_j d_j                for the EXACT rates, errors of evaluation included.

If z satisfies ``z_j d_j >= y_j d_j + sum_i z_i M_ij`` for the exact rates, then, since ``A**-1 >= 0``,

    |y - y*| = |rho A**-1| <= r (y d) A**-1 <= r z <= r max(z / y) y.

The residual is evaluated in double-double, so that r may be far below u; z needs no accuracy at all: it is a loose
solution of ``z A = 2 y d``, and the inequality is verified in floats with outward margins.  ``max(z / y)`` is about
the number of jumps of an excursion, hence the system must be grounded at a likely state (see `hub`).

Source: the idea is common in verified linear algebra, see S. M. Rump, Verification methods, Acta Numerica 19 (2010)
(from memory); the componentwise form with its proof is derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.doubled import (
    ADD,
    MULTIPLY,
    UNIT,
    Doubled,
    add,
    difference,
    multiply,
    plain,
    total_error,
    totals,
)
from markov.errors import NotReached

#: A relative bound wider than this is treated as a failure.
WIDEST = 1e-7
#: Up to this many transitions the residual is formed in double-double.
_DOUBLED_RESIDUAL = 3_000_000
_TINY = 1e-280


class Solver(Protocol):
    """Anything that solves a flow approximately."""

    @property
    def name(self) -> str:
        """How it works, for people."""
        ...

    def solve(self, b: Floats, *, loosely: bool = False) -> Floats:
        """Return an approximate solution for one right side; loosely: one digit will do."""
        ...


@dataclass(frozen=True, eq=False)
class Flow:
    """The system ``y_j d_j = b_j + sum_i y_i M_ij`` on m states.

    Attributes
    ----------
    tail, head : int[k]
        Entry (i, j) of M, sorted by head.
    rates : Doubled[k]
    rate_error : float
        Relative error of each.
    exits : Doubled[m]
        The d.
    exit_error : float
        Relative error of each.
    """

    tail: NDArray[np.int32]
    head: NDArray[np.int32]
    rates: Doubled
    rate_error: float
    exits: Doubled
    exit_error: float

    @property
    def m(self) -> int:
        """Number of states."""
        return int(self.exits.high.size)

    @cached_property
    def incoming(self) -> csr_array:
        """Transpose of M in floats: row j holds the rates into j."""
        pointers = np.concatenate(([0], np.cumsum(np.bincount(self.head, minlength=self.m))))
        return csr_array((self.rates.high + self.rates.low, self.tail, pointers), shape=(self.m, self.m))

    @cached_property
    def degree(self) -> NDArray[np.int64]:
        """Number of transitions into each state."""
        return np.bincount(self.head, minlength=self.m).astype(np.int64)

    def residual(self, y: Doubled, b: Doubled, b_error: float) -> tuple[Floats, Floats]:
        """Return ``b + y M - y d`` with a bound of its distance from the exact residual, both float64[m]."""
        outflow = multiply(y, self.exits)
        if self.rates.high.size <= _DOUBLED_RESIDUAL:
            carried = totals(multiply(y.at(self.tail), self.rates), self.head, self.m)
            inflow = add(b, carried)
            rest = difference(inflow, outflow)
            error = max(b_error, total_error(int(self.degree.max(initial=0))) + MULTIPLY + self.rate_error) + 2 * ADD
            margin = inflow.high * error + outflow.high * (MULTIPLY + ADD + self.exit_error)
            value = rest.high + rest.low
            return value, margin * (1.0 + 1e-9) + np.abs(value) * 2 * UNIT + _TINY * 1e-20
        flat, sent = y.high + y.low, outflow.high + outflow.low
        received = self.incoming @ flat + (b.high + b.low)
        value = received - sent
        margin = received * ((self.degree + 5) * UNIT + max(b_error, self.rate_error))
        margin += sent * (4 * UNIT + self.exit_error)
        return value, margin * (1.0 + 1e-9) + _TINY * 1e-20

    def supersolution(self, z: Floats, c: Floats) -> bool:
        """Whether ``z d >= c + z M`` is certain for the exact rates."""
        d = (self.exits.high + self.exits.low) * (1.0 - 1e-12 - self.exit_error)
        margin = 1.0 + (self.degree + 8) * 2 * UNIT + self.rate_error + 1e-12
        return bool((z * d >= (self.incoming @ z + c) * margin).all() and np.isfinite(z).all())


def solve_certified(flow: Flow, b: Doubled, b_error: float, solver: Solver) -> tuple[Doubled, float]:
    """Return the solution of a flow with a proven relative error of every entry.

    Parameters
    ----------
    flow : Flow
    b : Doubled[m]
        Right side, not negative, relative error `b_error`.
    solver : Solver
        Any; it is asked again for corrections while they help.

    Returns
    -------
    y : Doubled[m]
        Entries that no path feeds are exactly 0.
    error : float
        Relative error of every entry.

    Raises
    ------
    NotReached
        The bound stays above `WIDEST`, or entries underflow.
    """
    right = b.high + b.low
    y = plain(np.maximum(solver.solve(right), 0.0))
    if not bool(np.isfinite(y.high).all()):
        raise NotReached(f"{solver.name}: the solution is not finite")
    best = _relative_residual(flow, y, b, b_error)
    for _ in range(4):
        rest, margin = flow.residual(y, b, b_error)
        if bool((np.abs(rest) <= 2.0 * margin).all()):
            break
        gain, drop = solver.solve(np.maximum(rest, 0.0)), solver.solve(np.maximum(-rest, 0.0))
        change = gain - drop
        shifted = add(y, Doubled(change, np.zeros_like(change)))
        usable = (shifted.high > 0.0) | (y.high == 0.0)
        tried = Doubled(np.where(usable, shifted.high, y.high), np.where(usable, shifted.low, y.low))
        reached = _relative_residual(flow, tried, b, b_error)
        if not reached < 0.5 * best:
            break
        y, best = tried, reached
        if best < 1e-27:
            break
    values = y.high + y.low
    fed = values > 0.0
    if not bool(fed.any()):
        if bool(right.any()):
            raise NotReached(f"{solver.name}: no solution found")
        return y, 0.0
    if float(values[fed].min()) < _TINY:
        raise NotReached(f"values down to {values[fed].min():.3g} are too small to be certified")
    weights = values * (flow.exits.high + flow.exits.low) * (1.0 + 1e-12)
    for loosely in (True, False):
        z = np.maximum(solver.solve(2.0 * weights, loosely=loosely), 0.0)
        if flow.supersolution(z, weights):
            break
    else:
        raise NotReached(f"{solver.name}: the weights of the error bound could not be verified")
    if bool((z[~fed] > 0.0).any()):
        raise NotReached(f"{solver.name}: a state that is fed has no value")
    growth = float((z[fed] / values[fed]).max()) * (1.0 + 1e-9)
    error = best * growth
    if not error < WIDEST:
        raise NotReached(f"{solver.name}: the bound of {error:.2g} is wider than {WIDEST:g}")
    return y, error


def _relative_residual(flow: Flow, y: Doubled, b: Doubled, b_error: float) -> float:
    rest, margin = flow.residual(y, b, b_error)
    scale = (y.high + y.low) * (flow.exits.high + flow.exits.low) * (1.0 - 1e-12 - flow.exit_error)
    off = np.abs(rest) + margin
    fed = scale > 0.0
    # A state that nothing feeds has zero on both sides; the constant against underflow does not count there.
    if bool((np.abs(rest)[~fed] > 0.0).any()):
        return float("inf")
    return float((off[fed] / scale[fed]).max(initial=0.0)) * (1.0 + 1e-9)
