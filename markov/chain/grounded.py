"""A chain seen off one likely state, in order of level, with sweeps over many right sides at once.

The states but the hub are put in order of their distance from it and cut into blocks of neighbours in that order.  A
sweep visits the blocks outward then inward and updates one at a time by one sparse product with the newest values of
all others (block Gauss-Seidel); every column of the unknown is another system with its own shift z:

    row     y_j (d_j + z) = b_j + sum_i y_i N_ij            times spent, transforms
    column  y_i (d_i + z) = b_i + sum_j N_ij y_j            values per state

Complex columns are multiplied by the real rates as pairs of floats, so that the product stays one of real numbers.
Nothing is proven here; what comes out is verified by those who use it.

Source: R. S. Varga, Matrix Iterative Analysis (1962), chapter 3; the order by levels is an observation of this project.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.generator import Generator, entered_first, stretch
from markov.errors import NotReached

Side = Literal["row", "column"]
Numbers64 = NDArray[np.int64]
Complexes = NDArray[np.complex128]

#: Elements of one block of the unknown: it stays in the cache next to the block's rates.
_BLOCK = 1 << 16
_LEAST_ROWS = 128
#: Direct factorisation is tried up to this many states, and up to this many where each has few transitions.
_LARGEST_FACTORED = 1_000
_LARGEST_DENSE = 100
_LARGEST_THIN = 30_000
_THIN = 5.0
#: Times `enough` beyond which sweeps count as stuck.
_FAR = 1e6


@dataclass(frozen=True, eq=False)
class Grounded:
    """The rates of a chain off its hub, m = n - 1 states in order of level, as floats.

    Attributes
    ----------
    hub : int
    order : int64[m]
        Numbers of the other states, in order of level.
    ends : int64[l]
        Where each level ends in that order.
    out, into : csr_array[m, m]
        Rates by source and by target.
    exits : float64[m]
        Rates out of each state, absorption included.
    outward, inward : float64[m]
        Rates from and to the hub.
    """

    hub: int
    order: Numbers64
    ends: Numbers64
    out: csr_array
    into: csr_array
    exits: Floats
    outward: Floats
    inward: Floats

    @property
    def m(self) -> int:
        """Number of states but the hub."""
        return int(self.order.size)

    @cached_property
    def terms(self) -> Floats:
        """Number of transitions into each state, the hub's included: float64[m]."""
        return np.diff(self.into.indptr).astype(np.float64) + 1.0

    def _blocks(self, side: Side, columns: int) -> list[tuple[slice, csr_array]]:
        matrix = self.into if side == "row" else self.out
        most = max(_LEAST_ROWS, _BLOCK // max(1, columns))
        found, begin = [], 0
        for end in self.ends.tolist():
            pieces = -(-(end - begin) // most)
            cuts = [begin + (end - begin) * piece // pieces for piece in range(pieces + 1)]
            for first, last in pairwise(cuts):
                found.append((slice(first, last), stretch(matrix, first, last)))
            begin = end
        return found

    def real(self, side: Side, diagonal: Floats, right: Floats, first: Floats, tolerance: float, most: int) -> Floats:
        """Return the solution of several real systems, all unknowns non-negative.

        Parameters
        ----------
        diagonal : float64[m]
        right, first : float64[m, k]
            Right sides and where to begin.
        tolerance : float
            Largest relative change of an entry in the last sweep.
        most : int
            Sweeps.

        Raises
        ------
        NotReached
            No convergence, and too large to be factored.
        """
        y = np.array(first, order="C")
        blocks = self._blocks(side, y.shape[1])
        past = np.inf
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            for sweep in range(most):
                change = 0.0
                for number in _there_and_back(len(blocks)):
                    part, rates = blocks[number]
                    new = rates @ y
                    new += right[part]
                    new /= diagonal[part, None]
                    ratio = np.abs(new - y[part])
                    ratio /= new
                    change = max(change, float(np.nanmax(ratio, initial=0.0)))
                    y[part] = new
                if change <= tolerance or (change < 1e-12 and change > 0.5 * past):
                    return y
                if not np.isfinite(change) or (sweep > 10 and change > 0.97 * past) or y.max() > 1e200:
                    break
                past = change
        return self._factored(side, diagonal, right)

    def _factored(self, side: Side, diagonal: Floats, right: Floats) -> Floats:
        found = self.factor(side, diagonal)(right)
        if not bool(np.isfinite(found).all()) or bool((found < 0.0).any()):
            raise NotReached("the sparse factorisation lost the small values")
        return found

    def factor(self, side: Side, diagonal: NDArray[Any]) -> Callable[[NDArray[Any]], NDArray[Any]]:
        """Return a direct solver for one diagonal, real or complex.

        Raises
        ------
        NotReached
            Too large to be factored, or singular.
        """
        if not self.factorable:
            raise NotReached(f"Gauss-Seidel sweeps over {self.m} states converge too slowly")
        from scipy.sparse import csc_array, diags_array
        from scipy.sparse.linalg import splu

        matrix = self.into if side == "row" else self.out
        system = csc_array(diags_array(diagonal) - matrix)
        try:
            made = splu(system, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0)
        except RuntimeError as reason:
            raise NotReached(f"sparse factorisation of {self.m} states: {reason}") from reason
        return lambda right: np.asarray(made.solve(right))

    @property
    def factorable(self) -> bool:
        """Whether a direct factorisation is cheap enough."""
        thin = self.into.nnz <= _THIN * self.m and self.m <= _LARGEST_THIN
        return self.m <= _LARGEST_FACTORED or thin

    def shifted(
        self,
        shifts: Complexes,
        right: Floats,
        first: Complexes,
        watch: Floats,
        enough: Floats,
        most: int,
    ) -> Complexes:
        """Return the solution of one row system for many complex shifts.

        Parameters
        ----------
        shifts : complex128[k]
        right : float64[m]
            Right side, the same for all.
        first : complex128[m, k]
            Where to begin; overwritten.
        watch : float64[c, m]
            A change of entry i moves residuals that cost up to ``watch[c, i]`` each.
        enough : float64[c, k]
            Sweeping ends when the weighted change of the last half sweep is below this for each c and shift, or no
            longer falls.
        most : int
            Sweeps.
        """
        blocks = self._blocks("row", 2 * shifts.size)
        y = np.ascontiguousarray(first)
        flat = y.view(np.float64)
        inverse = 1.0 / (self.exits[:, None] + shifts)
        watched = csr_array(watch)
        parts = [
            (part, rates, watched[:, part], right[part, None] if right[part].any() else None) for part, rates in blocks
        ]
        past, slow = np.inf, 0
        for sweep in range(most):
            moved = np.zeros((watch.shape[0], 2 * shifts.size))
            for place, number in enumerate(_there_and_back(len(blocks))):
                part, rates, costs, fed = parts[number]
                new = np.asarray(rates @ flat).view(np.complex128)
                if fed is not None:
                    new += fed
                new *= inverse[part]
                if place >= len(blocks) - 1:
                    change = y[part]
                    np.subtract(new, change, out=change)
                    size = change.view(np.float64)
                    np.abs(size, out=size)
                    moved += np.asarray(costs @ size)
                y[part] = new
            left = (moved[:, 0::2] + moved[:, 1::2]) / enough
            worst = float(left.max())
            if worst <= 1.0:
                break
            slow = slow + 1 if worst > 0.8 * past else 0
            if not np.isfinite(worst) or slow >= 3 or (sweep == 12 and worst > _FAR and self.factorable):
                break
            past = worst
        # What is left within this is mostly rounding, which a factorisation would not mend.
        if not worst < _FAR and self.factorable:
            self._directly(shifts, right, y)
        return y

    def _directly(self, shifts: Complexes, right: Floats, y: Complexes) -> None:
        if self.m <= _LARGEST_DENSE:
            systems = np.zeros((shifts.size, self.m, self.m), dtype=np.complex128)
            systems -= self.into.toarray()
            systems[:, np.arange(self.m), np.arange(self.m)] += shifts[:, None] + self.exits
            y[:] = np.linalg.solve(systems, right[None, :, None])[:, :, 0].T
            return
        for number in range(shifts.size):
            y[:, number] = self.factor("row", self.exits + shifts[number])(right.astype(np.complex128))


def _there_and_back(count: int) -> list[int]:
    return [*range(count), *range(count - 2, -1, -1)]


def ground(chain: Generator, loss: Floats, hub: int, scale: float) -> Grounded:
    """Return a chain grounded at a state, all rates multiplied by `scale`, a power of two.

    Parameters
    ----------
    chain : Generator
    loss : float64[n]
        Rates of absorption.
    """
    pattern = chain.matrix()
    level = np.full(chain.n, -1, dtype=np.int64)
    level[hub] = 0
    frontier: NDArray[np.integer[Any]] = np.array([hub])
    depth = 0
    while frontier.size:
        depth += 1
        frontier = entered_first(pattern, frontier, level >= 0)
        level[frontier] = depth
    level[level < 0] = depth
    order = np.argsort(level, kind="stable")
    order = order[order != hub]
    ranked = level[order]
    ends = np.flatnonzero(np.concatenate((ranked[1:] != ranked[:-1], [True]))) + 1 if order.size else np.zeros(0)
    position = np.full(chain.n, -1, dtype=np.int64)
    position[order] = np.arange(order.size)
    values = (chain.high + chain.low) * scale
    outward, inward = np.zeros(chain.n), np.zeros(chain.n)
    from_hub, to_hub = chain.source == hub, chain.target == hub
    outward[chain.target[from_hub]] = values[from_hub]
    inward[chain.source[to_hub]] = values[to_hub]
    inside = ~(from_hub | to_hub)
    tail, head = position[chain.source[inside]].astype(np.int32), position[chain.target[inside]].astype(np.int32)
    shape = (order.size, order.size)
    out = csr_array((values[inside], (tail, head)), shape=shape)
    exits = (chain.exits.high + chain.exits.low) * scale + loss * scale
    return Grounded(
        hub,
        order,
        ends.astype(np.int64),
        out,
        out.T.tocsr(),
        exits[order],
        outward[order],
        inward[order],
    )
