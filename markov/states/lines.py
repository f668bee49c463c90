"""Who waits in which order: a row of places, the longest-waiting first."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from markov.states.layout import Digits


def bring_up_to_date(line: tuple[int, ...], waiting: dict[int, NDArray[np.int32]], x: Digits) -> None:
    """Let the line hold as many of each lane as wait; in place.

    New ones stand at the end, several of one instant in the order of their lanes; where fewer wait than stand, the last
    ones of the lane leave.

    Parameters
    ----------
    line : tuple of int
        Rows of the places; 1 + number of a lane, 0 where nobody stands.
    waiting : dict
        Number of the lane -> how many wait, shape (m,).
    """
    for lane, count in waiting.items():
        mark = lane + 1
        surplus = _standing(line, mark, x) - count
        for row in reversed(line):
            leaves = (x[row] == mark) & (surplus > 0)
            x[row][leaves] = 0
            surplus = surplus - leaves
    _close_up(line, x)
    length = np.sum([x[row] > 0 for row in line], axis=0)
    for lane, count in waiting.items():
        mark = lane + 1
        missing = count - _standing(line, mark, x)
        for place, row in enumerate(line):
            joins = (length == place) & (missing > 0)
            x[row][joins] = mark
            length = length + joins
            missing = missing - joins


def first_of(line: tuple[int, ...], x: Digits) -> NDArray[np.int32]:
    """Return the number of the lane that stands first, -1 where nobody does, shape (m,)."""
    first: NDArray[np.int32] = x[line[0]] - 1
    return first


def take_first(line: tuple[int, ...], x: Digits) -> None:
    """Let the first one leave the line; in place."""
    x[line[0]] = 0
    _close_up(line, x)


def _standing(line: tuple[int, ...], mark: int, x: Digits) -> NDArray[np.int32]:
    count: NDArray[np.int32] = np.sum([x[row] == mark for row in line], axis=0, dtype=np.int32)
    return count


def _close_up(line: tuple[int, ...], x: Digits) -> None:
    rows = list(line)
    block = x[rows]
    order = np.argsort(block == 0, axis=0, kind="stable")
    x[rows] = np.take_along_axis(block, order, axis=0)
