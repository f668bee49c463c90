"""The order of a chain's states around one of them, level by level, with its rates as sparse matrices in that order.

Position 0 is the hub; the others follow in order of their level, the distance in jumps from the hub.  Chains that are
generated outward from the hub are numbered so already, or nearly: then no rate is moved.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.generator import Generator, stretch

Side = Literal["row", "column"]

#: Levels by which a state may come late on average.
_LATE = 0.5


@dataclass(frozen=True, eq=False)
class Arrangement:
    """A chain of n states in order of level.

    Attributes
    ----------
    chain : Generator
    order : int[n] or None
        Numbers of the states, the hub first; None where the states are numbered in this order.
    ends : int64[l]
        Where each level ends, the hub left out of the count.
    """

    chain: Generator
    order: NDArray[np.integer[Any]] | None
    ends: NDArray[np.int64]

    @cached_property
    def others(self) -> NDArray[np.integer[Any]]:
        """Numbers of all states but the hub, in order."""
        return np.arange(1, self.chain.n, dtype=np.int32) if self.order is None else self.order[1:]

    def rates(self, side: Side, values: Floats) -> csr_array:
        """Return rates in this order, off the hub, as a sparse matrix, float64[n - 1, n].

        Parameters
        ----------
        side : {"row", "column"}
            Whether a row of the result holds what enters a state (from the column's state), as a system of row
            vectors has it, or what leaves it.
        values : float64[k]
            One value per transition; the place of each in the result is the same whatever the values.
        """
        chain = self.chain
        given = csr_array((values, chain.target, chain.pointers), shape=(chain.n, chain.n))
        if self.order is not None:
            position = np.empty(chain.n, dtype=np.int32)
            position[self.order] = np.arange(chain.n, dtype=np.int32)
            given = given[self.order]
            given = csr_array((given.data, position[given.indices], given.indptr), shape=given.shape)
        if side == "row":
            turned = given.tocsc()
            given = csr_array((turned.data, turned.indices, turned.indptr), shape=given.shape)
        return stretch(given, 1, chain.n)


def arrange(chain: Generator, hub: int, level: NDArray[np.integer[Any]] | None = None) -> Arrangement:
    """Return the order of a chain around a hub.

    Parameters
    ----------
    chain : Generator
    level : int[n], optional
        What to order by; left out: the distance from the hub, those that it never enters last.
    """
    if level is None:
        level = chain.distances(hub)
        if bool((level < 0).any()):
            level = np.where(level < 0, np.int32(level.max()) + 1, level)
    if hub == 0:
        ranked = np.maximum.accumulate(level[1:])
        # A state that comes late costs a few sweeps, to move all rates would cost more.
        if float(np.sum(ranked - level[1:])) <= _LATE * chain.n:
            return Arrangement(chain, None, _ends(ranked))
    order = np.argsort(level, kind="stable")
    order = np.concatenate(([hub], order[order != hub])).astype(np.int32)
    return Arrangement(chain, order, _ends(level[order[1:]]))


def _ends(ranked: NDArray[np.integer[Any]]) -> NDArray[np.int64]:
    if not ranked.size:
        return np.zeros(0, dtype=np.int64)
    return np.append(np.flatnonzero(ranked[1:] != ranked[:-1]) + 1, ranked.size).astype(np.int64)
