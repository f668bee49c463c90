"""Parts of a chain that are left slowly, found from the rates alone.

Keep only transitions at least as fast as some rate r.  A closed class of what is left is a part that the chain leaves
more slowly than that; the others drain into such parts.  As r falls the number of parts never grows, because a part of
more transitions contains a part of fewer.  Where absorption is a usual way out it counts as a return to the first hub.
With one hub in each part every other state reaches a hub at rates of about r.  A further hub is worth its cost where
the chain jumps about in a part many times before it leaves it.  Of several such sets of parts the one that stays the
same over the widest range of r is taken: hubs between which the chain often changes cost more digits than they save.

What is found here decides about speed only, never about a bound.

Source: derived here; strong components of the fast transitions after P. J. Courtois, Decomposability (1977) (from
memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array

from markov.chain.bounds import Floats
from markov.chain.generator import Generator

#: Up to this many parts are told apart.
MOST_PARTS = 8
#: Jumps in a part before it is left beyond which it gets a hub of its own.
_MANY = 10.0
#: Fraction of the jumps out of a state that makes absorption a usual way.
_OFTEN = 0.01
_STEP = math.log(10.0) / 2.0


@dataclass(frozen=True)
class Parts:
    """Where a chain stays long.

    Attributes
    ----------
    states : list of int
        A likely state of each part, the first given; one state where several gain nothing.
    changing : float
        About the rate at which the slowest of several parts changes into another, at most; inf for one part.
    """

    states: list[int]
    changing: float = math.inf


def likely_states(chain: Generator, loss: Floats, first: int) -> Parts:
    """Return the parts of a chain.

    Parameters
    ----------
    chain : Generator
        n states.
    loss : float64[n]
        Rates of absorption.
    first : int
        A likely state at the beginning of the mission.
    """
    rates = np.concatenate((chain.high, loss[loss > 0.0]))
    if rates.size == 0:
        return Parts([first])
    exits = chain.exits.high + loss
    low, high = math.log(float(rates.min())), math.log(float(rates.max()))
    grid = [math.exp(low + _STEP * step) * (1.0 - 1e-9) for step in range(int((high - low) / _STEP) + 1)]
    known: dict[int, list[NDArray[np.int64]]] = {}

    def parts(place: int) -> list[NDArray[np.int64]]:
        if place not in known:
            known[place] = _parts(chain, loss, first, grid[place])
        return known[place]

    def last(most: int, begin: int) -> int:
        """Return the last place of the grid from `begin` on with at most so many parts."""
        inside, outside = begin, len(grid)
        while outside - inside > 1:
            middle = (inside + outside) // 2
            if len(parts(middle)) <= most:
                inside = middle
            else:
                outside = middle
        return inside

    if len(parts(0)) > MOST_PARTS:
        return Parts([first])
    place = last(len(parts(0)), 0)
    coarser = chosen = _hubs(parts(place), exits, first)
    longest, changing = 0, math.inf
    while place + 1 < len(grid) and len(parts(place + 1)) <= MOST_PARTS:
        further = last(len(parts(place + 1)), place + 1)
        finer = _hubs(parts(further), exits, first)
        busy = max((float(exits[hub]) for hub in finer if hub not in coarser), default=0.0) > _MANY * grid[place]
        if busy and further - place >= longest:
            chosen, longest, changing = finer, further - place, grid[place + 1]
        place, coarser = further, finer
    return Parts(chosen, changing)


def _parts(chain: Generator, loss: Floats, first: int, rate: float) -> list[NDArray[np.int64]]:
    """Return the closed classes of the transitions of at least a rate."""
    from scipy.sparse.csgraph import connected_components  # late: it takes long to import

    keep = chain.high >= rate
    often = loss >= _OFTEN * (chain.exits.high + loss)
    lost = np.flatnonzero((loss >= rate) & often & (np.arange(chain.n) != first))
    source = np.concatenate((chain.source[keep], lost.astype(np.int32)))
    target = np.concatenate((chain.target[keep], np.full(lost.size, first, dtype=np.int32)))
    pattern = coo_array((np.ones(source.size, dtype=np.int8), (source, target)), shape=(chain.n, chain.n)).tocsr()
    count, label = connected_components(pattern, directed=True, connection="strong")
    closed = np.ones(count, dtype=bool)
    closed[label[source[label[source] != label[target]]]] = False
    wanted = np.flatnonzero(closed)
    if wanted.size > MOST_PARTS:
        return [np.zeros(0, dtype=np.int64)] * int(wanted.size)
    return [np.flatnonzero(label == each) for each in wanted]


def _hubs(parts: list[NDArray[np.int64]], exits: Floats, first: int) -> list[int]:
    """Return the state of each part that is left most slowly, with `first` for its own part, in front."""
    hubs = [first]
    for members in parts:
        if first not in members:
            hubs.append(int(members[int(np.argmin(exits[members]))]))
    return hubs
