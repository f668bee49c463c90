"""A chain seen off several likely states at once: the hubs, one for each part that is left slowly.

Grounded at one hub only, a chain whose parts are nearly uncoupled is slow to solve, since whoever is in another part
returns to the hub after ages.  Off one hub in each part every excursion is short.  For the solver all hubs are one
state (`markov.chain.grounded`); what leads from and to each of them is kept beside.

The share ``s_ih`` of a state i in hub h is about the probability that h is the first hub reached from i; 1 at h itself,
0 at the others, and ``sum_h s_ih <= 1`` without the first hub, which has what is left to 1.  Shares are floats taken as
exact, whatever they were meant to be: with Q the rates among the states that are not absorbed the leak ``l_h = -Q s_h``
is evaluated in the form

    l_ih = sum_j N_ij (s_ih - s_jh) + v_i s_ih,

where the difference of two floats is off by one rounding, so that the error is relative to how much the shares differ
from each other.  Within a part they hardly do: leaks are as small as the coupling, with all their digits.

Source: derived here; hubs in the place of states that are left out in the aggregation of nearly uncoupled chains, P. J.
Courtois, Decomposability (1977) (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT
from markov.chain.generator import Generator, aggregate
from markov.chain.grounded import Grounded, ground

_SLACK = 1.0 + 1e-9


class Swept(Grounded):
    """A chain off its hubs that is solved by sweeps alone, however slow."""

    @property
    def factorable(self) -> bool:
        """Never: a factorisation for each shift of each hub costs more than many sweeps."""
        return False


@dataclass(frozen=True, eq=False)
class Hubs:
    """The rates of a chain around k hubs, the m other states in order of level, all in the unit of `grounded`.

    Attributes
    ----------
    grounded : Grounded
        The chain off its hubs, which are one state there.
    states : int64[k]
        Numbers of the hubs.
    outward, inward : float64[m, k]
        Rates from and to each hub.
    between : float64[k, k]
        Rates from hub to hub.
    loss : float64[m], loss_at_hubs : float64[k]
        Rates of absorption.
    """

    grounded: Grounded
    states: NDArray[np.int64]
    outward: Floats
    inward: Floats
    between: Floats
    loss: Floats
    loss_at_hubs: Floats

    @property
    def k(self) -> int:
        """Number of hubs."""
        return int(self.states.size)

    @cached_property
    def terms(self) -> Floats:
        """Largest number of transitions into each state, float64[m]."""
        return self.grounded.terms + (self.k - 1.0)

    @cached_property
    def exits(self) -> Floats:
        """Rates out of each hub, absorption included, float64[k]."""
        return np.array(
            [
                math.fsum([*self.outward[:, h].tolist(), *self.between[h].tolist(), float(self.loss_at_hubs[h])])
                for h in range(self.k)
            ]
        )

    @cached_property
    def swept(self) -> Swept:
        """The chain off its hubs, for sweeps alone."""
        given = self.grounded
        return Swept(
            given.hub, given.order, given.ends, given.out, given.into, given.exits, given.outward, given.inward
        )


@dataclass(frozen=True, eq=False)
class Shares:
    """Shares of the hubs but the first, with their leaks.

    Attributes
    ----------
    values : float64[m, k - 1]
    leaks : float64[m, k - 1], leaks_at_hubs : float64[k, k - 1]
    errors, errors_at_hubs : float64
        Absolute errors of the leaks against the exact chain.
    """

    values: Floats
    leaks: Floats
    errors: Floats
    leaks_at_hubs: Floats
    errors_at_hubs: Floats

    def of(self, weights: Floats, at_hubs: Floats) -> Floats:
        """Return the sums of weights times shares, float64[k - 1]; relative error ``3 u`` for positive weights."""
        return np.array(
            [math.fsum([*(weights * column).tolist(), float(at_hubs[h + 1])]) for h, column in enumerate(self.values.T)]
        )


def hubs_of(chain: Generator, loss: Floats, states: Sequence[int], scale: float) -> Hubs:
    """Return a chain grounded at some states, all rates multiplied by `scale`, a power of two.

    Parameters
    ----------
    chain : Generator
        n states.
    loss : float64[n]
        Rates of absorption.
    states : sequence of int
        The k hubs, the first of them where the chain mostly begins.
    """
    chosen = np.asarray(states, dtype=np.int64)
    rest = np.delete(np.arange(chain.n), chosen)
    if chosen.size == 1:
        grounded = ground(chain, loss, int(chosen[0]), scale)
    else:
        # All hubs as one state, the first; what is lost of parallel rates into it is not used.
        number = np.zeros(chain.n, dtype=np.int64)
        number[rest] = np.arange(1, rest.size + 1)
        merged = aggregate(
            rest.size + 1,
            number[chain.source],
            number[chain.target],
            chain.high,
            chain.low,
            rate_error=chain.rate_error,
        )
        inside = ground(merged, np.concatenate(([0.0], loss[rest])), 0, scale)
        grounded = replace(inside, hub=int(chosen[0]), order=rest[inside.order - 1])
    place = np.full(chain.n, -1, dtype=np.int64)
    place[chosen] = np.arange(chosen.size)
    position = np.full(chain.n, -1, dtype=np.int64)
    position[grounded.order] = np.arange(grounded.m)
    values = (chain.high + chain.low) * scale
    source, target = chain.source, chain.target
    outward, inward = np.zeros((grounded.m, chosen.size)), np.zeros((grounded.m, chosen.size))
    between = np.zeros((chosen.size, chosen.size))
    here, there = place[source] >= 0, place[target] >= 0
    away, back, across = here & ~there, there & ~here, here & there
    outward[position[target[away]], place[source[away]]] = values[away]
    inward[position[source[back]], place[target[back]]] = values[back]
    between[place[source[across]], place[target[across]]] = values[across]
    lost = loss * scale
    return Hubs(grounded, chosen, outward, inward, between, lost[grounded.order], lost[chosen])


def shares_of(hubs: Hubs, entry_error: float) -> Shares:
    """Return the shares of all hubs but the first, every rate being known with a relative error.

    Raises
    ------
    NotReached
        Sweeps for the probabilities do not converge.
    """
    grounded, others = hubs.grounded, hubs.k - 1
    values = np.zeros((grounded.m, others))
    if others:
        right = np.ascontiguousarray(hubs.inward[:, 1:])
        values = grounded.real("column", grounded.exits, right, right / grounded.exits[:, None], 1e-15, 400)
        values = np.clip(np.nan_to_num(values), 0.0, 1.0)
        values[values < 1e-200] = 0.0
        whole = values.sum(axis=1)
        over = whole > 1.0 - 4.0 * others * UNIT
        if others > 1:
            values[over] /= (whole[over] * (1.0 + 8.0 * others * UNIT))[:, None]
    leaks, sizes = np.zeros_like(values), np.zeros_like(values)
    leaks_at, sizes_at = np.zeros((hubs.k, others)), np.zeros((hubs.k, others))
    out = grounded.out
    owner = np.repeat(np.arange(grounded.m), np.diff(out.indptr))
    for h in range(others):
        s = values[:, h]
        parts = out.data * (s[owner] - s[out.indices])
        at_hubs = (np.arange(hubs.k) == h + 1).astype(np.float64)
        others_back = hubs.inward * (s[:, None] - at_hubs)
        lost = hubs.loss * s
        for found, terms, back in ((leaks, parts, others_back), (sizes, np.abs(parts), np.abs(others_back))):
            found[:, h] = np.bincount(owner, terms, grounded.m) + back.sum(axis=1) + lost
        for g in range(hubs.k):
            gone = [
                *(hubs.outward[:, g] * (at_hubs[g] - s)).tolist(),
                *(hubs.between[g] * (at_hubs[g] - at_hubs)).tolist(),
                float(hubs.loss_at_hubs[g] * at_hubs[g]),
            ]
            leaks_at[g, h], sizes_at[g, h] = math.fsum(gone), math.fsum(abs(each) for each in gone)
    degree = np.diff(out.indptr).astype(np.float64)[:, None] + hubs.k
    return Shares(
        values,
        leaks,
        sizes * ((degree + 8.0) * UNIT + entry_error) * _SLACK,
        leaks_at,
        sizes_at * (8.0 * UNIT + entry_error) * _SLACK,
    )
