"""Entrywise bounds of state weights, measured against a vector that the chain hardly enlarges.

Let Q be the rates among states that are not absorbed, ``x > 0`` with ``x Q <= epsilon x`` entry by entry; time spent
between visits to the hub, 1 at the hub, is such a vector with epsilon next to 0.  Since ``exp(Q s) >= 0`` is bounded by
``x exp(Q s) <= exp(epsilon s) x``, weights P~ with jumps ``J_k`` and defect D, in the notation of
`markov.chain.windows`, are off by at most

    |P~(t) - p(t)| <= exp(epsilon t) ( sum_k max |J_k| / x + integral max |D| / x ds ) x,

by variation of constants.  Unlike the bound of integrals this one counts the rounding of every row times the time that
passes, so it serves until the chain has settled; `markov.chain.settling` carries on from there.

The residual of a row is off by rounding by at most ``(terms + 12) sqrt(2) u (|z| + 2 d) c x`` where ``|y| <= c x``.

Source: derived here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT
from markov.chain.grounded import Complexes, Grounded
from markov.chain.tally import Tally, tally
from markov.errors import NotReached

_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Steady:
    """A vector that the chain hardly enlarges.

    Attributes
    ----------
    vector : float64[m]
        The x off the hub; 1 at the hub.
    growth : float
        epsilon.
    slowly, quickly : float
        What rounding costs per ``c``: ``slowly |z| + quickly``.
    start_at_hub, start : float
        Weight of the start at the hub, and the largest over x.
    """

    vector: Floats
    growth: float
    slowly: float
    quickly: float
    inward: Tally
    exit_at_hub: float
    start_at_hub: float
    start: float

    def most(self, off: Floats, at_hub: Floats | float = 0.0) -> Floats:
        """Return the largest entry of ``|.| / x`` per column of absolute values, float64[m, k] or float64[m]."""
        scaled = off / (self.vector if off.ndim == 1 else self.vector[:, None])
        found: Floats = np.maximum(scaled.max(axis=0, initial=0.0), at_hub) * _SLACK
        return found

    def least(self, weights: Floats, at_hub: float) -> float:
        """Return the least entry of positive weights over x."""
        return min(float((weights / self.vector).min(initial=math.inf)), at_hub) * (1.0 - 1e-9)

    def residuals(self, off: Floats, size: Floats, y: Complexes, hub: Complexes, z: Complexes) -> tuple[Floats, Floats]:
        """Return bounds of the residuals over x per shift, with the c of each.

        Parameters
        ----------
        off, size : float64[m, k]
            Absolute values of residuals as computed and of y.
        y : complex128[m, k]
        hub, z : complex128[k]
        """
        at_hub = np.abs((z + self.exit_at_hub) * hub - self.inward.complex(y, 0) - self.start_at_hub)
        scale = self.most(size, np.abs(hub))
        rounding = (self.slowly * np.abs(z) + self.quickly) * scale + self.slowly * self.start
        return self.most(off, at_hub) + rounding * _SLACK, scale

    def grown(self, time: float) -> float:
        """Return an upper bound of ``exp(epsilon t)``."""
        return math.exp(min(600.0, self.growth * time)) * _SLACK


def steady(
    grounded: Grounded, first: Floats, exit_at_hub: float, start: Floats, start_at_hub: float, entry_error: float
) -> Steady:
    """Return the vector of a chain.

    Parameters
    ----------
    grounded : Grounded
    first : float64[m]
        Where to begin.
    start : float64[m]
        Weights of the start off the hub.

    Raises
    ------
    NotReached
        States that are never entered from the hub, or no convergence.
    """
    x = grounded.real("row", grounded.exits, grounded.outward[:, None], first[:, None], 2e-15, 400)[:, 0]
    if not bool(np.isfinite(x).all()) or not bool((x > 1e-250).all()):
        raise NotReached("states that the likely state does not feed")
    unit = (grounded.terms + 12.0) * (UNIT + entry_error)
    received = (grounded.into @ x + grounded.outward) * (1.0 + unit)
    over = received - x * grounded.exits * (1.0 - 4.0 * UNIT - entry_error)
    inward = tally(grounded.inward[:, None])
    hub_unit = (inward.roundings + 12.0) * (UNIT + entry_error)
    back = float(inward.apply(x[:, None], 0)[0])
    growth = max(float((over / x).max(initial=0.0)), back * (1.0 + hub_unit) - exit_at_hub * (1.0 - entry_error), 0.0)
    growth *= _SLACK
    root = math.sqrt(2.0) * _SLACK
    return Steady(
        x,
        growth,
        root * max(float(unit.max(initial=0.0)), hub_unit),
        root
        * max(
            float((unit * (2.0 * grounded.exits + growth)).max(initial=0.0)), hub_unit * (2.0 * exit_at_hub + growth)
        ),
        inward,
        exit_at_hub,
        start_at_hub,
        max(start_at_hub, float((start / x).max(initial=0.0))),
    )
