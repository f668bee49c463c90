"""Blocked subtraction-free elimination in floats: a robust approximate solver for up to a few thousand states.

The elimination of `markov.chain.elimination`, a block of states at a time: within a block one by one, outside it by
matrix products with the block's non-negative inverse.  Nothing is subtracted, so the result is good to about 1e-15
entry by entry even where general solvers lose every digit; the proof is left to `markov.chain.mmatrix`.

Source: W. K. Grassmann, M. I. Taksar, D. P. Heyman, Oper. Res. 33 (1985); the blocking is derived here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from markov.chain.bounds import Floats

LARGEST_DENSE = 3000
_BLOCK = 48


@dataclass(frozen=True, eq=False)
class _Block:
    begin: int
    end: int
    inverse: Floats  # of the block's own system
    into: Floats  # rates from the states before into the block
    back: Floats  # rates from the block into the states before


@dataclass(frozen=True, eq=False)
class DenseElimination:
    """An eliminated system; solves ``y (D - N) = b`` ("row") or ``(D - N) y = b`` ("column")."""

    blocks: tuple[_Block, ...]
    side: Literal["row", "column"]
    name: str = "blocked subtraction-free elimination"

    def solve(self, b: Floats, *, loosely: bool = False) -> Floats:
        """Return the solution for one right side, not negative."""
        x = b.copy()
        row = self.side == "row"
        for block in self.blocks:
            if block.begin:
                part = x[block.begin : block.end]
                x[: block.begin] += (part @ block.inverse) @ block.back if row else block.into @ (block.inverse @ part)
        for block in reversed(self.blocks):
            part = x[block.begin : block.end]
            if block.begin:
                before = x[: block.begin]
                part = part + (before @ block.into if row else block.back @ before)
            x[block.begin : block.end] = part @ block.inverse if row else block.inverse @ part
        return x

    def turned(self, side: Literal["row", "column"]) -> DenseElimination:
        """Return the same elimination for the other kind of system."""
        return DenseElimination(self.blocks, side, self.name)


def eliminate(rates: Floats, loss: Floats, side: Literal["row", "column"] = "row") -> DenseElimination:
    """Eliminate a transient chain.

    Parameters
    ----------
    rates : float64[n, n]
        Rates among the states; overwritten.  The diagonal is ignored.
    loss : float64[n]
        Rate out of the system from each state.
    """
    n = rates.shape[0]
    np.fill_diagonal(rates, 0.0)
    out = loss.copy()
    blocks = []
    end = n
    while end > 0:
        begin = max(0, end - _BLOCK)
        inside = slice(begin, end)
        into, back = rates[:begin, inside].copy(), rates[inside, :begin].copy()
        inverse = _inverse(rates[inside, inside].copy(), out[inside] + back.sum(axis=1))
        blocks.append(_Block(begin, end, inverse, into, back))
        if begin:
            share = into @ inverse
            rates[:begin, :begin] += share @ back
            out[:begin] += share @ out[inside]
        end = begin
    return DenseElimination(tuple(blocks), side)


def _inverse(rates: Floats, loss: Floats) -> Floats:
    """Return the inverse of ``D - N`` for one block, all entries by sums of non-negative terms."""
    n = loss.size
    out, exits = loss.copy(), np.zeros(n)
    reward = np.eye(n)
    for k in range(n - 1, -1, -1):
        exits[k] = rates[k, :k].sum() + out[k]
        if not exits[k] > 0.0:
            exits[k] = np.nan
        quotient = rates[:k, k] / exits[k]
        rates[:k, :k] += quotient[:, None] * rates[k, :k]
        out[:k] += quotient * out[k]
        reward[:k] += quotient[:, None] * reward[k]
    for k in range(n):
        if k:
            reward[k] += rates[k, :k] @ reward[:k]
        reward[k] /= exits[k]
    return reward
