"""Which states of two chains most likely stand for each other, where not every rate agrees.

Every pair of states is scored by what it has in common: delivery, the start, the neighbourhood as far as it agrees, and
the arrows to and from pairs that are already taken for each other.  The best assignment (D. F. Crouse, On implementing
2D rectangular assignment algorithms, IEEE Transactions on Aerospace and Electronic Systems 52, 2016, as scipy has it)
gives new pairs, and so on until nothing changes.  It is a heuristic: what it finds is told as such, and a pair
without arrows in common is not kept.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov.documents.rate_tables import RateTable
from markov.documents.refinement import depths

#: Pairs of states beyond which no assignment is sought.
MOST_PAIRS = 4_000_000
#: Least share of arrows in common for two states to be taken for each other.
LEAST_AGREEMENT = 0.3

_ROUNDS = 20
_DEPTH = 4
_FIXED = 1e3
_START = 3.0
_DELIVERY = 1.5
_NEIGHBOURS = 4.0

Scores = NDArray[np.float64]


def align(old: RateTable, new: RateTable, fixed: Mapping[int, int] | None = None) -> dict[int, int]:
    """Return pairs of states that most likely stand for each other.

    Parameters
    ----------
    old, new : RateTable
        n and m states.
    fixed : mapping of int to int, optional
        Pairs that are known.

    Returns
    -------
    pairs : dict of int to int
        State of `old` -> state of `new`; those without a likely partner are left out.
    """
    known = dict(fixed or {})
    if old.size * new.size > MOST_PAIRS or not old.size or not new.size:
        return known
    base = _alone(old, new)
    for one, other in known.items():
        base[one, :] -= _FIXED
        base[:, other] -= _FIXED
        base[one, other] += 3 * _FIXED
    pairs = _assigned(base)
    best, best_total = pairs, -1.0
    seen = set()
    for _ in range(_ROUNDS):
        agreement = _agreement(old, new, pairs)
        total = sum(float(agreement[one, other]) for one, other in pairs.items())
        if total > best_total + 1e-9:
            best, best_total = pairs, total
        key = tuple(sorted(pairs.items()))
        if key in seen:
            break
        seen.add(key)
        pairs = _assigned(base + _NEIGHBOURS * agreement)
    agreement = _agreement(old, new, best)
    return {
        one: other
        for one, other in sorted(best.items())
        if known.get(one) == other or agreement[one, other] >= LEAST_AGREEMENT
    }


def agreements(old: RateTable, new: RateTable, pairs: Mapping[int, int]) -> dict[int, float]:
    """Return, for each pair, the share of its arrows that the two chains have in common, 0 to 1."""
    agreement = _agreement(old, new, pairs)
    return {one: float(agreement[one, other]) for one, other in pairs.items()}


def _alone(old: RateTable, new: RateTable) -> Scores:
    """Score every pair without knowing any other, shape (n, m)."""
    mine = np.array([[float(each)] for each in old.start])
    theirs = np.array([[float(each) for each in new.start]])
    scores: Scores = _START * (np.minimum(mine, theirs) - np.abs(mine - theirs))
    scores -= _DELIVERY * _unlike(old.up, new.up)
    for rates, weight in ((True, 1.5), (False, 0.5)):
        for ones, others in depths(old, new, _DEPTH, rates=rates):
            scores += weight / _DEPTH * (1.0 - _unlike(ones, others))
    names: dict[str, int] = {name: number for number, name in enumerate(new.names)}
    for number, name in enumerate(old.names):
        if name in names:
            scores[number, names[name]] += 1.0
    return scores


def _unlike(ones: Sequence[int], others: Sequence[int]) -> Scores:
    """Return 1 where two entries differ, 0 where they agree, shape (n, m)."""
    found: Scores = np.not_equal.outer(np.array(ones), np.array(others)).astype(np.float64)
    return found


def _agreement(old: RateTable, new: RateTable, pairs: Mapping[int, int]) -> Scores:
    """Return the share of arrows that any two states would have in common, given some pairs; shape (n, m)."""
    scores = np.zeros((old.size, new.size))
    for one, other in pairs.items():
        for mine, theirs in ((old.before[one], new.before[other]), (old.after[one], new.after[other])):
            for state, rate in mine.items():
                for partner, its in theirs.items():
                    scores[state, partner] += _likeness(rate, its)
    mine_all = np.array([len(old.before[n]) + len(old.after[n]) for n in range(old.size)], np.float64)
    theirs_all = np.array([len(new.before[n]) + len(new.after[n]) for n in range(new.size)], np.float64)
    total = mine_all[:, None] + theirs_all[None, :]
    shares: Scores = 2 * scores / np.maximum(total, 1.0)
    return shares


def _likeness(one: Fraction, other: Fraction) -> float:
    """Return 1 for equal rates, less for others, little for those of another order of magnitude."""
    if one == other:
        return 1.0
    return 0.8 * min(float(one), float(other)) / max(float(one), float(other))


def _assigned(scores: Scores) -> dict[int, int]:
    from scipy.optimize import linear_sum_assignment

    rows, columns = linear_sum_assignment(scores, maximize=True)
    return dict(zip(rows.tolist(), columns.tolist(), strict=True))
