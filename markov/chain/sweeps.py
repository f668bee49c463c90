"""Level by level Gauss-Seidel sweeps: an approximate solver for sparse chains of up to millions of states.

States are put in order of their level, the distance in jumps from the grounded state.  One sweep visits the levels
outward then inward; a level is updated at once from the newest values of all others by one sparse product,
``y_j = (b_j + sum_i y_i M_ij) / d_j``, all terms non-negative.  Chains of repairable systems fall back towards the
ground much faster than they climb away from it, so a few sweeps do.  Where they do not (heavily loaded grids), a
sparse factorisation takes over for chains of moderate size; else the solver declines, and never returns its last
iterate.

Source: R. S. Varga, Matrix Iterative Analysis (1962), chapter 3; the order by levels is an observation of this project.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.mmatrix import Flow
from markov.errors import NotReached

#: A factorisation is tried up to this many states.
LARGEST_FACTORED = 60_000
_MOST_SWEEPS = 600
_MOST_WORK = 4e10


@dataclass(frozen=True, eq=False)
class Sweeps:
    """Sweeps over a flow whose states are grouped by level."""

    levels: tuple[tuple[slice, csr_array], ...]
    order: NDArray[np.int64]
    exits: Floats
    flow: Flow
    entries: int
    name: str = "Gauss-Seidel sweeps in level order"
    _factor: list[Any] = field(default_factory=list, repr=False)

    def solve(self, b: Floats, *, loosely: bool = False) -> Floats:
        """Return the solution for one right side.

        Raises
        ------
        NotReached
            Sweeps converge too slowly and the chain is too large to be factored.
        """
        right = b[self.order]
        if not right.any():
            return np.zeros_like(b)
        if self._factor:
            return self._by_factor(b)
        tolerance = 0.05 if loosely else 4e-16
        y = right / self.exits
        most = int(min(_MOST_SWEEPS, max(20.0, _MOST_WORK / (4.0 * self.entries + 1.0))))
        past = np.inf
        for sweep in range(most):
            change = self._sweep(y, right)
            if change <= tolerance or (sweep > 6 and change < 1e-12 and change > 0.5 * past):
                break
            # Four hundred sweeps more would not gain a digit: stop early.
            if sweep in (40, 120) and change > 0.2 and past - change < 1e-3 * past:
                return self._give_up(b, sweep)
            past = change
        else:
            if change > 1e-13:
                return self._give_up(b, most)
        found: Floats = np.empty_like(y)
        found[self.order] = y
        return found

    def _sweep(self, y: Floats, right: Floats) -> float:
        change = 0.0
        count = len(self.levels)
        for number in (*range(count), *range(count - 2, -1, -1)):
            part, incoming = self.levels[number]
            new = (incoming @ y + right[part]) / self.exits[part]
            old = y[part]
            with np.errstate(divide="ignore", invalid="ignore"):
                ratio = np.abs(new - old) / new
            ratio[new == old] = 0.0
            change = max(change, float(ratio.max(initial=0.0)))
            y[part] = new
        return change

    def _give_up(self, b: Floats, sweeps: int) -> Floats:
        if self.flow.m > LARGEST_FACTORED:
            raise NotReached(
                f"Gauss-Seidel did not converge in {sweeps} sweeps over {self.flow.m} states; the chain is heavily "
                "loaded or nearly uncoupled: lump it, or solve its parts apart"
            )
        return self._by_factor(b)

    def _by_factor(self, b: Floats) -> Floats:
        from scipy.sparse import csc_array, diags_array
        from scipy.sparse.linalg import splu

        if not self._factor:
            system = csc_array(diags_array(self.flow.exits.high) - self.flow.incoming)
            try:
                self._factor.append(splu(system, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0))
            except RuntimeError as reason:
                raise NotReached(f"sparse factorisation of {self.flow.m} states: {reason}") from reason
        y = np.maximum(self._factor[0].solve(b), 0.0)[self.order]
        right = b[self.order]
        for _ in range(8):
            self._sweep(y, right)
        found: Floats = np.empty_like(y)
        found[self.order] = y
        return found


def sweeps(flow: Flow, level: NDArray[np.integer[Any]]) -> Sweeps:
    """Return the solver of a flow for given levels, int[m]."""
    order = np.argsort(level, kind="stable")
    ranked = np.asarray(level)[order]
    position = np.empty(flow.m, dtype=np.int64)
    position[order] = np.arange(flow.m)
    incoming = flow.incoming[order]
    incoming = csr_array(
        (incoming.data, position[incoming.indices].astype(np.int32), incoming.indptr), shape=(flow.m, flow.m)
    )
    ends = np.flatnonzero(np.concatenate((ranked[1:] != ranked[:-1], [True]))) + 1
    parts, begin = [], 0
    for end in ends.tolist():
        first, last = int(incoming.indptr[begin]), int(incoming.indptr[end])
        rows = csr_array(
            (incoming.data[first:last], incoming.indices[first:last], incoming.indptr[begin : end + 1] - first),
            shape=(end - begin, flow.m),
        )
        parts.append((slice(begin, end), rows))
        begin = end
    exits = (flow.exits.high + flow.exits.low)[order]
    return Sweeps(tuple(parts), order, exits, flow, flow.rates.high.size + flow.m)
