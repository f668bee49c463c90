"""Level by level Gauss-Seidel sweeps: an approximate solver for sparse chains of up to millions of states.

States are in order of their level, the distance in jumps from the grounded state.  A sweep visits the levels outward;
a level is updated at once from the newest values of all others by one sparse product, ``y_j = (b_j + sum_i y_i M_ij) /
d_j``, all terms non-negative.  Chains of repairable systems fall back towards the ground much faster than they climb
away from it, so that what enters a state comes mostly from the level before, and a few sweeps do.  Where sweeps gain
little, each is followed by one inward.  Where that does not converge either (heavily loaded grids), a sparse
factorisation takes over for chains of moderate size; else the solver declines, and never returns its last iterate.

Source: R. S. Varga, Matrix Iterative Analysis (1962), chapter 3; the order by levels is an observation of this project.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.generator import stretch
from markov.chain.mmatrix import Flow
from markov.errors import NotReached

#: A factorisation is tried up to this many states.
LARGEST_FACTORED = 60_000
_MOST_SWEEPS = 600
_MOST_WORK = 4e10
#: Rows of one block: their new values stay in the cache.
_MOST_ROWS = 1 << 16


@dataclass(frozen=True, eq=False)
class Sweeps:
    """Sweeps over a flow whose states are in order of level, in blocks of neighbours."""

    blocks: tuple[tuple[slice, csr_array], ...]
    exits: Floats
    flow: Flow
    name: str = "Gauss-Seidel sweeps in level order"
    _factor: list[Any] = field(default_factory=list, repr=False)

    def solve(self, b: Floats, *, loosely: bool = False) -> Floats:
        """Return the solution for one right side.

        Raises
        ------
        NotReached
            Sweeps converge too slowly and the chain is too large to be factored.
        """
        if not b.any():
            return np.zeros_like(b)
        if self._factor:
            return self._by_factor(b)
        # What is left to gain, not what the last sweep changed; rounding alone changes more than the second figure.
        tolerance = 0.001 if loosely else 5e-16
        y = np.zeros(b.size + 1)
        np.divide(b, self.exits, out=y[1:])
        entries = int(self.flow.incoming.nnz) + self.flow.m
        most = int(min(_MOST_SWEEPS, max(20.0, _MOST_WORK / (4.0 * entries + 1.0))))
        past, slow = np.inf, False
        for sweep in range(most):
            change = self._sweep(y, b, inward=slow)
            gained = change / past
            if change == 0.0 or (change < 1e-12 and gained > 0.5 and sweep > 2):
                break
            if sweep > 1 and gained < 0.5 and change * gained <= tolerance * (1.0 - gained):
                break
            # Four hundred sweeps more would not gain a digit: stop early.
            if sweep in (40, 120) and change > 0.2 and past - change < 1e-3 * past:
                return self._give_up(b, sweep)
            slow = sweep > 2 and gained > 0.5
            past = change
        else:
            if change > 1e-13:
                return self._give_up(b, most)
        return y[1:]

    def _sweep(self, y: Floats, b: Floats, *, inward: bool) -> float:
        """Sweep outward, before that inward if asked; return the largest relative change outward."""
        if inward:
            for part, incoming in reversed(self.blocks):
                y[1:][part] = self._updated(incoming, y, b, part)
        change = 0.0
        with np.errstate(divide="ignore", invalid="ignore"):
            for part, incoming in self.blocks:
                new = self._updated(incoming, y, b, part)
                ratio = y[1:][part]
                np.subtract(new, ratio, out=ratio)
                np.abs(ratio, out=ratio)
                ratio /= new
                # Zero over zero is no change.
                change = max(change, float(np.fmax.reduce(ratio, initial=0.0)))
                ratio[:] = new
        return change

    def _updated(self, incoming: csr_array, y: Floats, b: Floats, part: slice) -> Floats:
        self.flow.readings.entries += int(incoming.nnz)
        new: Floats = incoming @ y
        new += b[part]
        new /= self.exits[part]
        return new

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
            system = csc_array(diags_array(self.flow.exits.high) - self.flow.incoming[:, 1:])
            try:
                self._factor.append(splu(system, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0))
            except RuntimeError as reason:
                raise NotReached(f"sparse factorisation of {self.flow.m} states: {reason}") from reason
        y = np.concatenate(([0.0], np.maximum(self._factor[0].solve(b), 0.0)))
        for _ in range(8):
            self._sweep(y, b, inward=True)
        return y[1:]


def sweeps(flow: Flow, ends: NDArray[np.int64]) -> Sweeps:
    """Return the solver of a flow whose levels end at `ends`, int64[l]."""
    blocks: list[tuple[slice, csr_array]] = []
    begin = 0
    for end in ends.tolist():
        pieces = -(-(end - begin) // _MOST_ROWS)
        cuts = [begin + (end - begin) * piece // pieces for piece in range(pieces + 1)]
        blocks += [(slice(first, last), stretch(flow.incoming, first, last)) for first, last in pairwise(cuts)]
        begin = end
    return Sweeps(tuple(blocks), flow.exits.high, flow)
