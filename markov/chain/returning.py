"""Weights that a cycle keeps: solved around a likely state, with a bound of every entry.

Let C be the map of one cycle on weights at its beginning, h a likely state, and C' the map with h left out.  Visits to
the other states between visits to h are the least non-negative solution of

    w = c + w C',            c the row of h in C.

Whatever w was found, let ``|c + w C' - w| <= rho`` entry by entry for the exact map, its errors of evaluation included.
If ``z >= rho + z C'`` for the exact map, then, since ``(I - C')**-1 = sum_k C'**k >= 0``,

    |w - w*| = |residual (I - C')**-1| <= rho (I - C')**-1 <= z.

The map needs no matrix, only a way to carry weights through a cycle with a bound; so the same proof serves any size.
z is found by adding up a few rounds of ``2 rho``, and is then verified.  Relative errors of z over w do not grow with
the time to a rare failure, because only the way back to h counts.

Source: the argument of `markov.chain.mmatrix`, for maps; entrywise perturbation of such systems is due to C. A.
O'Cinneide, Entrywise perturbation theory and error analysis for Markov chains, Numer. Math. 65 (1993).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from markov.chain.bounds import Flags, Floats
from markov.chain.carried import SLACK, computed
from markov.chain.doubled import ADD, UNIT, Doubled, add, difference, plain
from markov.errors import NotReached

#: Entries whose proven error is below this share of them count with a relative error, all others with an absolute one.
_RELATIVE = 1e-7
#: Entries above this share of the largest make the relative error.
_LIKELY = 1e-40
_CONVERGED = 1e-26


@dataclass(frozen=True, eq=False)
class Image:
    """Weights after one cycle, Doubled[n], with errors relative to the exact ones; `absolute` is one of the sum."""

    values: Doubled
    relative: float | None
    absolute: float


#: Carries weights of any sum through one cycle.
Cycle = Callable[[Doubled], Image]


@dataclass(frozen=True, eq=False)
class Kept:
    """A solution, Doubled[n], with errors relative to the exact one; `relative` None: an estimate."""

    values: Doubled
    relative: float | None
    absolute: float


def _kept(values: Doubled, inside: Flags) -> Doubled:
    return Doubled(values.high * inside, values.low * inside)


def visits(
    cycle: Cycle, hub: int, members: Flags, source: Image, *, rounds: int, candidate: Doubled | None = None
) -> Kept:
    """Return the weights that gather before the next visit to the hub, the hub left out.

    Parameters
    ----------
    cycle : callable
        C.
    hub : int
        A state that is entered again soon.
    members : bool[n]
        The states that can be occupied at the beginning of a cycle; all weights elsewhere are exactly 0.
    source : Image
        c, with its errors; what it says of the hub is ignored.
    rounds : int
        Cycles to go through at most, for the solution and for its bound.
    candidate : Doubled[n], optional
        A solution found by other means.

    Raises
    ------
    NotReached
        Not settled after so many cycles, or the bound could not be verified.
    """
    inside = members.copy()
    inside[hub] = False
    given = _kept(source.values, inside)
    if not given.high.any() and source.absolute == 0.0:
        return Kept(given, source.relative, 0.0)
    w = given if candidate is None else _kept(candidate, inside)
    best, image = math.inf, Image(w, None, 0.0)
    for _ in range(rounds if candidate is None else 3):
        image = cycle(w)
        fresh = add(given, _kept(image.values, inside))
        change = np.abs(difference(fresh, w).high)
        fed = fresh.high > 0.0
        moved = float((change[fed] / fresh.high[fed]).max(initial=0.0))
        w = fresh
        # What is left is counted in the bound, so it need not be far below the error of the map; and rounding ends the
        # progress: at 1e-30 where digits are double-double, at 1e-16 where they are floats.
        enough = _CONVERGED if image.relative is None else max(_CONVERGED, 0.01 * image.relative)
        if moved < enough or (moved < 1e-13 and moved > 0.5 * best):
            break
        best = min(best, moved)
    else:
        if candidate is None and not moved < 1e-9:
            raise NotReached(f"the weights at the beginning of a cycle still move by {moved:.2g} after {rounds} cycles")
    image = cycle(w)
    sending, giving = computed(image.relative), computed(source.relative)
    if sending is None or giving is None:
        return Kept(w, None, 0.0)
    sent = _kept(image.values, inside)
    rest = difference(add(given, sent), w)
    total = given.high + sent.high + w.high
    margin = given.high * giving + sent.high * sending + total * 4 * ADD
    rho = (np.abs(rest.high) + margin) * SLACK + np.abs(rest.high) * 4 * UNIT + (image.absolute + source.absolute)
    rho = np.maximum(rho, total * 2.0**-104) * inside
    z = _above(cycle, inside, rho, rounds)
    values = w.high
    close = (z <= _RELATIVE * values) & (values > 0.0)
    # Entries next to nothing, where the absolute error of the map shows, shall not spoil the relative one of the rest.
    likely = close & (values >= _LIKELY * values.max(initial=0.0))
    relative = float((z[likely] / values[likely]).max(initial=0.0)) * SLACK
    close &= z <= relative * values
    return Kept(w, relative / (1.0 - relative) * SLACK, float(z[~close].sum()) * SLACK)


def _above(cycle: Cycle, inside: Flags, rho: Floats, rounds: int) -> Floats:
    """Return z with ``z >= rho + z C'``, verified."""
    largest = float(rho.max())
    if largest == 0.0:
        return rho
    power = -math.frexp(largest)[1]
    unit = np.ldexp(rho, power)
    z = 2.0 * unit
    for _ in range(rounds):
        image = cycle(plain(z))
        assert image.relative is not None
        after = _kept(image.values, inside).high
        beyond = (after * (1.0 + 2.0 * image.relative) * SLACK + image.absolute) * inside
        if bool((z >= (unit + beyond) * (1.0 + 1e-12)).all()):
            return np.ldexp(z, -power)
        z = 2.0 * unit + beyond
    raise NotReached("the bound of the weights at the beginning of a cycle could not be verified")
