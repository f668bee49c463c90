"""Interchangeable groups inside one island: of all orders of their conditions one stands for the rest.

A state is replaced by that with the blocks of rows of such groups in ascending order.  As exchanging them maps the
chain onto itself, this is an exact lumping (J. G. Kemeny, J. L. Snell, Finite Markov Chains, 1960, section 6.3; cited
from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from math import factorial

import numpy as np
from numpy.typing import NDArray

from markov.states.layout import Digits, Layout, Node, Train


class Blocks:
    """The rows of the groups of every class.

    Parameters
    ----------
    layout : Layout
    alike : tuple of tuples of int
        Numbers of the nodes of each class.
    """

    def __init__(self, layout: Layout, alike: tuple[tuple[int, ...], ...]) -> None:
        self._classes: list[tuple[NDArray[np.int64], NDArray[np.int64]]] = []
        for numbers in alike:
            rows = np.array([range(*block_of(layout, number)) for number in numbers], np.int64)
            sizes = np.array([layout.tops[row] + 1 for row in rows[0]], np.int64)
            strides = np.concatenate(([1], np.cumprod(sizes)[:-1])).astype(np.int64)
            self._classes.append((rows, strides))

    def sorted(self, x: Digits) -> Digits:
        """Return the representative of every column, shape (rows, m)."""
        result = x.copy()
        for rows, strides in self._classes:
            order = np.argsort(self._keys(rows, strides, x), axis=0, kind="stable")
            result[rows] = np.take_along_axis(x[rows], order[:, None, :], axis=0)
        return result

    def orbits(self, x: Digits) -> NDArray[np.float64]:
        """Return how many states every representative stands for, shape (m,)."""
        count = np.ones(x.shape[1])
        for rows, strides in self._classes:
            keys = np.sort(self._keys(rows, strides, x), axis=0)
            count *= float(factorial(len(rows)))
            run = np.ones(x.shape[1])
            for number in range(1, len(rows)):
                run = np.where(keys[number] == keys[number - 1], run + 1, 1)
                count /= run
        return count

    @staticmethod
    def _keys(rows: NDArray[np.int64], strides: NDArray[np.int64], x: Digits) -> NDArray[np.int64]:
        """Return one whole number for the condition of every group, shape (groups, m)."""
        keys: NDArray[np.int64] = np.einsum("grm,r->gm", x[rows].astype(np.int64), strides)
        return keys


def block_of(layout: Layout, number: int) -> tuple[int, int]:
    """Return the first row of a node and the row after its last."""
    rows = sorted(_rows_of(layout.nodes[number]))
    return rows[0], rows[-1] + 1


def _rows_of(node: Node) -> Iterator[int]:
    switch = node.switch
    single = [node.outage, *node.switching]
    if switch is not None:
        single += [switch.hidden, *switch.down]
    for entry in node.entries:
        single += [entry.duty, *entry.start]
        if isinstance(entry, Train):
            yield from _rows_of(entry.node)
        else:
            single += [entry.tested, *entry.out_rows]
    yield from (row for row in single if row >= 0)
