"""What a misplaced start costs within a given time: verified weights that need two digits only.

Collect something at rates ``a_i`` until absorption, be it absorption into a class itself (``a`` the rates into it) or
a reward.  Let ``u_i(s)`` be what is collected within s from state i, hub 0; N the rates, v the total rate of
absorption, d the exit rates with v in them.  Choose ``kappa >= 0``, put ``e = exp(kappa t)``, and let y, b, r, m >= 0
off the hub satisfy

    y_j (d_j + kappa) >= N_0j + sum_i y_i N_ij           b_i (d_i + kappa) >= a_i + sum_j N_ij b_j
    r_i (d_i + kappa) >= v_i + sum_j N_ij r_j            m_i (d_i + kappa) >= 1 + sum_j N_ij m_j

(all sums off the hub).  With ``theta = a_0 + e y a`` and ``U`` a bound of ``u_0(t)``, for all s <= t

    u_0'(s) <= theta,      |u_i(s) - u_0(s)| <= g_i = e max(b_i, theta m_i + U r_i),      g_0 = 0.

*Proof.*  ``p_0 <= 1`` and comparison off the hub give ``p_j(s) <= exp(kappa s) y_j``, hence ``u_0' = p a <= theta``.
Above: what is collected by s is collected before the first visit to the hub, at most ``e b_i`` (``exp(-kappa s) >=
1/e``), or after it in the time left, at most ``u_0(s)``.  Below: let the hub be reached at T <= s, then
``u_0(s - T) >= u_0(s) - theta T``; let neither hub nor absorption come by s, then ``0 >= u_0(s) - theta s``; in both
cases at most ``theta min(T, s)`` is lost, in the mean at most ``theta e m_i`` because ``min(T, t) <= e`` times the
integral of ``exp(-kappa s)`` up to T.  Let absorption come first, of probability at most ``e r_i``: then ``0 >=
u_0(s) - U``.  Where a is v itself absorption yields 1 >= u_0(s), and r is not needed.

The ceiling ``U >= u_0(t)``, where absorption ends what is collected.  For kappa 0 let ``q <= 1`` satisfy ``q_i d_i <=
v_i + sum_j N_ij q_j`` off the hub, and put ``U = (a_0 + sum_j N_0j b_j) / (v_0 + sum_j N_0j q_j)``.  Then ``h = b + (1
- q) U`` off the hub with ``h_0 = U`` satisfies ``h d >= a + N h`` everywhere, hence ``u(s) <= h`` at all times.

Within a mission much shorter than an excursion from the hub a kappa of 1/t or 4/t gives smaller weights than 0.
The systems are solved roughly with d a little reduced, and each inequality is then verified in floats with outward
margins: what is used is proven, however it was found.

Source: derived here; comparison of non-negative systems after A. Berman, R. J. Plemmons, Nonnegative Matrices in the
Mathematical Sciences (1979), chapter 6 (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT
from markov.chain.grounded import Grounded
from markov.errors import NotReached

_SLACK = 1.0 + 1e-9
#: How much d is reduced: the weights grow by about this times the jumps of an excursion.
_REDUCTIONS = (1e-3, 1e-5, 1e-7, 1e-10, 1e-13)
_FLOOR = 1e-180


@dataclass(frozen=True, eq=False)
class Weights:
    """Verified weights for c collected quantities within a time.

    Attributes
    ----------
    until : float
        The largest t they hold for; inf for kappa 0.
    costs : float64[c, m]
        The g of each state off the hub.
    rates : float64[c]
        The theta.
    longest : float
        Largest m: mean time to the next visit to the hub.
    excursion : float64[m]
        The y.
    ceilings : float64[c]
        Bounds of what is collected from the hub.
    """

    until: float
    costs: Floats
    rates: Floats
    longest: float
    excursion: Floats
    ceilings: Floats


def verified(
    grounded: Grounded,
    collected: Floats,
    collected_at_hub: Floats,
    loss: Floats,
    loss_at_hub: float,
    *,
    kappa: float,
    time: float,
    whole: int | None,
    ceilings: Floats,
    entry_error: float,
) -> Weights:
    """Return verified weights.

    Parameters
    ----------
    grounded : Grounded
    collected : float64[m, c]
        The a of each quantity, exact or rounded by `entry_error`.
    collected_at_hub : float64[c]
    loss : float64[m]
        The v.
    loss_at_hub : float
    kappa : float
        0 for any time, else about 1/t.
    time : float
        The t, used only where kappa > 0 or a ceiling grows with time.
    whole : int or None
        Which quantity is absorption into all classes together.
    ceilings : float64[c]
        Largest possible amount within t: 1 for absorption, the largest reward times t else.
    entry_error : float
        Relative error of every rate.

    Raises
    ------
    NotReached
        The weights could not be verified.
    """
    kinds = collected.shape[1]
    systems = np.concatenate((collected, loss[:, None], np.ones((grounded.m, 1))), axis=1)
    diagonal = grounded.exits + kappa
    trouble = NotReached("the weights of the error bound could not be verified")
    if not bool((diagonal > 0.0).all()):
        raise NotReached("a state off the hub is never left")
    for reduction in _REDUCTIONS:
        reduced = diagonal * (1.0 - reduction)
        try:
            values = grounded.real("column", reduced, systems, systems / reduced[:, None], 0.1 * reduction, 120)
            row = grounded.outward[:, None]
            spent = grounded.real("row", reduced, row, row / reduced[:, None], 0.1 * reduction, 120)
        except NotReached as reason:
            trouble = reason
            continue
        values[(values > 0.0) & (values < _FLOOR)] = _FLOOR
        spent[(spent > 0.0) & (spent < _FLOOR)] = _FLOOR
        if _above(grounded.out, diagonal, values, systems, entry_error) and _above(
            grounded.into, diagonal, spent, row, entry_error
        ):
            break
    else:
        raise trouble
    growth = math.exp(kappa * time) * _SLACK if kappa else 1.0
    excursion = spent[:, 0]
    rates = np.array(
        [collected_at_hub[kind] + growth * float(np.sum(excursion * collected[:, kind])) for kind in range(kinds)]
    )
    rates *= _SLACK
    tops = ceilings.copy()
    if not kappa and (loss_at_hub > 0.0 or bool(loss.any())):
        before = values[:, :kinds]
        from_hub = _ceilings(grounded, before, collected_at_hub, loss, loss_at_hub, entry_error)
        tops = np.minimum(tops, from_hub)
        ceilings = np.minimum(ceilings, (from_hub + before.max(axis=0, initial=0.0)) * _SLACK)
    costs = np.empty((kinds, grounded.m))
    lost, until = values[:, kinds], values[:, kinds + 1]
    for kind in range(kinds):
        most = min(float(tops[kind]), float(rates[kind]) * time * _SLACK)
        below = rates[kind] * until
        if kind != whole and bool(lost.any()):
            below = below + most * lost
        costs[kind] = np.minimum(growth * np.maximum(values[:, kind], below) * _SLACK, ceilings[kind])
    return Weights(time if kappa else math.inf, costs, rates, float(until.max(initial=0.0)), excursion, tops)


def _above(matrix: csr_array, diagonal: Floats, z: Floats, right: Floats, entry_error: float) -> bool:
    """Whether ``z d >= right + matrix z`` is certain for the exact rates, entry by entry."""
    if not bool(np.isfinite(z).all()):
        return False
    terms = np.diff(matrix.indptr).astype(np.float64)[:, None]
    margin = 1.0 + (terms + 8.0) * UNIT + 2.0 * entry_error
    lowered = diagonal[:, None] * (1.0 - 8.0 * UNIT - entry_error)
    return bool((z * lowered >= (matrix @ z + right) * margin).all())


def _ceilings(
    grounded: Grounded,
    before: Floats,
    collected_at_hub: Floats,
    loss: Floats,
    loss_at_hub: float,
    entry_error: float,
) -> Floats:
    """Return bounds of what is collected until absorption from the hub, inf where none is found."""
    none = np.full(before.shape[1], math.inf)
    raised = grounded.exits * (1.0 + 1e-3)
    try:
        found = grounded.real("column", raised, loss[:, None], loss[:, None] / raised[:, None], 1e-4, 120)
    except NotReached:
        return none
    found = np.where(found < _FLOOR, 0.0, np.minimum(found, 1.0))
    terms = np.diff(grounded.out.indptr).astype(np.float64)[:, None]
    margin = 1.0 - (terms + 8.0) * UNIT - 2.0 * entry_error
    least = (grounded.out @ found + loss[:, None]) * margin
    if not bool((found * grounded.exits[:, None] * (1.0 + 8.0 * UNIT + entry_error) <= least).all()):
        return none
    leaving = (loss_at_hub + float(grounded.outward @ found[:, 0])) * (1.0 - 1e-9)
    if not leaving > 0.0:
        return none
    most: Floats = (collected_at_hub + grounded.outward @ before) / leaving * _SLACK
    return most
