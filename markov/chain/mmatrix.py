"""Linear systems of chains, solved by any means then certified entry by entry.

A `Flow` is the system ``y_j d_j = b_j + sum_i y_i M_ij`` with ``M, b >= 0`` and exit rates d at least the sums over
the rates that stay inside: an M-matrix ``A = D - M`` with a non-negative inverse.  Whatever solver produced y > 0, let

    |rho_j| = |b_j + sum_i y_i M_ij - y_j d_j| <= r c_j          for the EXACT rates, errors of evaluation included,

with r the largest residual over ``y_j d_j``, so that ``c <= y d``.  If z satisfies ``z_j d_j >= c_j + sum_i z_i M_ij``
for the exact rates, then, since ``A**-1 >= 0``,

    |y - y*| = |rho A**-1| <= r c A**-1 <= r z <= r max(z / y) y.

The residual of chains of moderate size is evaluated in double-double, so that r may be far below u; that of large
ones in floats.  z needs no accuracy at all: it is a loose solution of ``z A = 1.2 c``, and the inequality is verified
in floats with outward margins.  ``max(z / y)`` is at most about the number of jumps of an excursion, hence the system
must be grounded at a likely state (see `hub`).

Source: the idea is common in verified linear algebra, see S. M. Rump, Verification methods, Acta Numerica 19 (2010)
(from memory); the componentwise form with its proof is derived here.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Protocol

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
    run_blocks,
    run_error,
    run_totals,
    zeros,
)
from markov.chain.generator import stretch
from markov.errors import NotReached

#: A relative bound wider than this is treated as a failure.
WIDEST = 1e-7
#: Up to this many transitions the residual is formed in double-double.
_DOUBLED_RESIDUAL = 3_000_000
_TINY = 1e-280
_ALL = slice(None)
_PIECE = 1 << 16  # states that are worked on together
_BLOCK = 1 << 15  # transitions that are worked on together in double-double
#: What the right side of the weights is raised by, with whether a loose solution is tried.
_RAISED = ((1.2, True), (2.0, False))


@dataclass
class Readings:
    """How many rates were read from sparse matrices, all products together."""

    entries: int = 0


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
    incoming : csr_array[m, m + 1]
        Transpose of M, rounded to floats: row j holds the rates into j.  States are counted from column 1; column 0
        is that of the hub, whose weight in this system is 0.
    bring_low : callable
        Returns what the rounding left out, float64[k], in the order of ``incoming.data``.
    rate_error : float
        Relative error of each rate, both parts taken.
    exits : Doubled[m]
        The d.
    exit_error : float
        Relative error of each.
    readings : Readings
        Counts what the products read.
    """

    incoming: csr_array
    bring_low: Callable[[], Floats]
    rate_error: float
    exits: Doubled
    exit_error: float
    readings: Readings = field(default_factory=Readings)

    @property
    def m(self) -> int:
        """Number of states."""
        return int(self.exits.high.size)

    @cached_property
    def low(self) -> Floats:
        """Trailing parts of the rates, float64[k]."""
        return self.bring_low()

    def degree(self, part: slice = _ALL) -> NDArray[np.integer[Any]]:
        """Return the number of transitions into each state of a stretch, from the hub included."""
        first, last, _ = part.indices(self.m)
        return np.diff(self.incoming.indptr[first : last + 1])

    @property
    def doubled(self) -> bool:
        """Whether residuals are formed in double-double."""
        return int(self.incoming.nnz) <= _DOUBLED_RESIDUAL

    def carried(self, y: Floats) -> Floats:
        """Return ``y M`` in floats; relative error at most ``(degree + 2) u``, rounding the rates included."""
        self.readings.entries += int(self.incoming.nnz)
        found: Floats = self.incoming @ np.concatenate(([0.0], y))
        return found

    def carried_doubled(self, y: Doubled) -> Doubled:
        """Return ``y M`` for y >= 0 in double-double; relative error at most `carried_error`."""
        self.readings.entries += int(self.incoming.nnz)
        pointers, tail = self.incoming.indptr, self.incoming.indices
        whole = Doubled(np.concatenate(([0.0], y.high)), np.concatenate(([0.0], y.low)))
        rates, found = Doubled(self.incoming.data, self.low), zeros(self.m)
        for first, last in run_blocks(pointers, _BLOCK):
            here = slice(int(pointers[first]), int(pointers[last]))
            terms = multiply(whole.at(tail[here]), rates.at(here))
            found.high[first:last], found.low[first:last] = run_totals(terms, pointers[first : last + 1] - here.start)
        return found

    @property
    def carried_error(self) -> float:
        """Relative error of `carried_doubled` against the exact rates."""
        return run_error(int(self.degree().max(initial=0))) + MULTIPLY + self.rate_error

    def residual(self, y: Doubled, b: Doubled, b_error: float) -> tuple[Floats, Floats]:
        """Return ``b + y M - y d`` with a bound of its distance from the exact residual, both float64[m]."""
        if self.doubled:
            outflow = multiply(y, self.exits)
            inflow = add(b, self.carried_doubled(y))
            rest = difference(inflow, outflow)
            error = max(b_error, self.carried_error) + 2 * ADD
            margin = inflow.high * error + outflow.high * (MULTIPLY + ADD + self.exit_error)
            value = rest.high + rest.low
            return value, margin * (1.0 + 1e-9) + np.abs(value) * 2 * UNIT + _TINY * 1e-20
        flat = y.high + y.low
        received = self.carried(flat)
        received += b.high
        received += b.low
        value = flat  # the array is used again
        for part in _pieces(self.m):
            coming, going = received[part], flat[part] * self.exits.high[part]
            value[part] = coming - going
            # Roundings of y, of a rate and of a product, one per addition, b in two parts; of the exit rate.
            coming *= (self.degree(part) + 5) * UNIT + max(b_error, self.rate_error)
            coming += going * (4 * UNIT + self.exit_error)
            coming *= 1.0 + 1e-9
            coming += _TINY * 1e-20
        return value, received

    def supersolution(self, z: Floats, c: Floats) -> bool:
        """Whether ``z d >= c + z M`` is certain for the exact rates."""
        if not bool(np.isfinite(z).all()):
            return False
        self.readings.entries += int(self.incoming.nnz)
        whole = np.concatenate(([0.0], z))
        for part in _pieces(self.m):
            needed = stretch(self.incoming, part.start, part.stop) @ whole
            needed += c[part]
            d = self.exits.high[part] * (1.0 - 1e-12 - self.exit_error)
            margin = 1.0 + (self.degree(part) + 8) * 2 * UNIT + self.rate_error + 1e-12
            if not bool((z[part] * d >= needed * margin).all()):
                return False
        return True


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
    y = _not_negative(solver.solve(b.high + b.low))
    if not bool(np.isfinite(y.high).all()):
        raise NotReached(f"{solver.name}: the solution is not finite")
    rest, margin = flow.residual(y, b, b_error)
    best = _relative(flow, y, rest, margin)
    for _ in range(4):
        if all(bool((np.abs(rest[part]) <= 2.0 * margin[part]).all()) for part in _pieces(flow.m)):
            break
        gain, drop = solver.solve(np.maximum(rest, 0.0)), solver.solve(np.maximum(-rest, 0.0))
        change = gain - drop
        shifted = add(y, plain(change))
        usable = (shifted.high > 0.0) | (y.high == 0.0)
        tried = Doubled(np.where(usable, shifted.high, y.high), np.where(usable, shifted.low, y.low))
        after = flow.residual(tried, b, b_error)
        reached = _relative(flow, tried, *after)
        if not reached < 0.5 * best:
            break
        y, best, (rest, margin) = tried, reached, after
        if best < 1e-27:
            break
    values = y.high  # the floats nearest to the sums
    fed = values > 0.0
    if not bool(fed.any()):
        if bool(b.high.any()):
            raise NotReached(f"{solver.name}: no solution found")
        return y, 0.0
    least = float(values.min(initial=np.inf, where=fed))
    if least < _TINY:
        raise NotReached(f"values down to {least:.3g} are too small to be certified")
    if not best < WIDEST:
        raise NotReached(f"{solver.name}: a residual of {best:.2g} is larger than {WIDEST:g}")
    weights = _weights(flow, values, rest, margin, best)
    del rest, margin
    for raised, loosely in _RAISED:
        weights *= raised
        z = _not_negative(solver.solve(weights, loosely=loosely)).high
        weights /= raised
        if flow.supersolution(z, weights):
            break
    else:
        raise NotReached(f"{solver.name}: the weights of the error bound could not be verified")
    if bool(((z > 0.0) & ~fed).any()):
        raise NotReached(f"{solver.name}: a state that is fed has no value")
    growth = max(float((z[part][fed[part]] / values[part][fed[part]]).max(initial=0.0)) for part in _pieces(flow.m))
    growth *= 1.0 + 1e-9
    error = best * growth
    if not error < WIDEST:
        raise NotReached(f"{solver.name}: the bound of {error:.2g} is wider than {WIDEST:g}")
    return y, error


def _not_negative(found: Floats) -> Doubled:
    """Return what a solver made, without copies where it can be helped; what is not a number stays so."""
    if bool((found < 0.0).any()):
        found = np.maximum(found, 0.0)
    return Doubled(found, np.zeros_like(found))


def _relative(flow: Flow, y: Doubled, rest: Floats, margin: Floats) -> float:
    """Return the largest residual, its margin included, over the flow through the state."""
    worst = 0.0
    for part in _pieces(flow.m):
        scale = (y.high[part] + y.low[part]) * flow.exits.high[part] * (1.0 - 1e-12 - flow.exit_error)
        off = np.abs(rest[part])
        fed = scale > 0.0
        # A state that nothing feeds has zero on both sides; the constant against underflow does not count there.
        if bool((off[~fed] > 0.0).any()):
            return float("inf")
        off += margin[part]
        worst = max(worst, float((off[fed] / scale[fed]).max(initial=0.0)))
    return worst * (1.0 + 1e-9)


def _weights(flow: Flow, values: Floats, rest: Floats, margin: Floats, best: float) -> Floats:
    """Return the c of the certificate, at least residual over `best`.

    A thousandth of the flow is kept everywhere, so that nothing underflows; a state that nothing feeds has 0.
    """
    weights = rest  # the array is used again
    for part in _pieces(flow.m):
        through = values[part] * flow.exits.high[part]
        if bool((through[values[part] > 0.0] < _TINY * 1e-10).any()):
            raise NotReached("flows are too small to be certified")
        # The margin also covers what rounds here and where the weights are raised and lowered again.
        least = np.maximum((np.abs(rest[part]) + margin[part]) / best, 1e-3 * through) * (1.0 + 1e-9)
        weights[part] = np.where(through == 0.0, 0.0, least)
    return weights


def _pieces(size: int) -> Iterator[slice]:
    """Cut an array into pieces, so that what is worked out in between stays small."""
    return (slice(begin, min(begin + _PIECE, size)) for begin in range(0, size, _PIECE))
