"""Weighted sums over all states in stages, so that few roundings meet."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from markov.chain.bounds import Floats

_FAN = 64


@dataclass(frozen=True, eq=False)
class Tally:
    """Sums over m states for q columns of weights.

    Attributes
    ----------
    columns : tuple of tuple of csr_array
        Per column the stages, applied one after the other.
    roundings : int
        Relative error of each sum against the sum of absolute values, in units of u, products included.
    """

    columns: tuple[tuple[csr_array, ...], ...]
    roundings: int

    def apply(self, values: Floats, column: int) -> Floats:
        """Return one column's sum of float64[m, k]: float64[k]."""
        for stage in self.columns[column]:
            values = stage @ values
        found: Floats = values[0]
        return found

    def complex(self, values: NDArray[np.complex128], column: int) -> NDArray[np.complex128]:
        """Return one column's sum of complex128[m, k]: complex128[k]."""
        return self.apply(values.view(np.float64), column).view(np.complex128)

    def all(self, values: Floats) -> Floats:
        """Return the sums of all columns, float64[q, k]."""
        return np.stack([self.apply(values, column) for column in range(len(self.columns))])


def tally(weights: Floats) -> Tally:
    """Return the sums for weights float64[m, q]."""
    made, most = [], 1
    for column in weights.T:
        at = np.flatnonzero(column)
        data, stages, roundings, width = column[at], [], 1, column.size
        while True:
            pieces = max(1, -(-at.size // _FAN))
            ends = np.minimum(np.arange(pieces + 1) * _FAN, at.size)
            stages.append(csr_array((data, at.astype(np.int32), ends), shape=(pieces, width)))
            roundings += _FAN
            if pieces == 1:
                break
            at, data, width = np.arange(pieces), np.ones(pieces), pieces
        made.append(tuple(stages))
        most = max(most, roundings)
    return Tally(tuple(made), most)
