"""What a misplaced start costs within a given time: verified weights that need two digits only.

Collect something at rates ``a_i`` until absorption, be it absorption into a class itself (``a`` the rates into it) or
a reward.  Let ``u_i(s)`` be what is collected within s from state i, hubs ``h = 0 .. k - 1``; N the rates, v the total
rate of absorption, d the exit rates with v in them, ``s_ih >= 0`` the shares of the hubs ``h >= 1`` with their leaks
``l_h = - Q s_h``, and ``s_0 = 1 - sum_h s_h >= 0`` (`markov.chain.hubs`).  Choose ``kappa >= 0``, put ``e = exp(kappa
t)``, and let ``y_h, b, r, m_h, x_h >= 0`` off the hubs satisfy

    y_hj (d_j + kappa) >= N_hj + sum_i y_hi N_ij         b_i (d_i + kappa) >= a_i + sum_j N_ij b_j
    r_i (d_i + kappa) >= v_i + sum_j N_ij r_j            m_ih (d_i + kappa) >= s_ih + sum_j N_ij m_jh
    x_ih (d_i + kappa) >= |l_ih| + sum_j N_ij x_jh

(all sums over j, i off the hubs).  Let ``U_h >= u_h(t)``, ``D_h >= |u_h(s) - u_0(s)|`` and ``theta_h >= u_h'(s)`` for
s <= t.  Then for the hubs ``h >= 1`` in the sums with s_ih,

    |u_i(s) - u_0(s) - sum_h s_ih (u_h(s) - u_0(s))| <= g_i = max(e b_i + z_i, min(e sum_h theta_h m_ih + e U_0 r_i +
                                                              z_i, sum_{h >= 0} s_ih U_h)),   z_i = e sum_h D_h x_ih.

*Proof.*  Let w_i be the expression between the bars on the left; it is 0 at the hubs and at time 0.  As ``u' = Q u +
a`` and ``Q 1 = -v``,

    w' = Q w + (a - v u_0) - sum_{h >= 1} l_h (u_h - u_0) - sum_{h >= 0} s_h u_h',

the last sum between 0 and ``sum s_h theta_h``; ``a - v u_0`` is between ``-v U_0`` and a, and where a is v itself, so
that u is a probability, between 0 and a: r is not needed.  Comparison off the hubs from both sides gives the claim but
for the inner minimum, and ``w_i >= - sum_{h >= 0} s_ih u_h`` as ``u_i >= 0``.

Between hubs.  With ``c_hg = -l_hg`` for ``g >= 1`` and ``c_h0 = sum_{g >= 1} l_hg - v_h``, any function f on all
states of the form ``sum s_h f_h`` off the hubs plus some w has at hub h ``(Q f)_h = sum_g c_hg f_g + sum_j N_hj w_j``,
and ``c_hg >= 0`` for ``g != h``.  So a vector with ``(1/t) z_h >= sum_g c_hg z_g + source_h`` bounds by ``exp(1) z``,
for s <= t, what starts at 0 and grows by at most that with this source.  It serves three times, verified in floats:

* ``V_hg``, the probability of visiting hub g by t from hub h: source ``c_hg + sum_j N_hj e sum_f x_jf``, g left out of
  the sums, as there w is at most ``e sum_f x_f`` (a is 0, differences are at most 1);
* ``U_h``: source ``a_h + sum_j N_hj (e b_j + z_j)``, with ``c_h0`` lowered by ``sum_j N_hj q_j`` where the q below are
  at most s_0, because ``u - sum_{h >= 1} s_h (u_h - u_0) - (1 - q) u_0`` is bounded from above as w is;
* ``D_h``, for ``h, g >= 1`` and without 1/t, thus for all times, from ``(u_h - u_0)' = sum_{g >= 1} c_hg (u_g - u_0) +
  a_h - v_h u_0 + sum_j N_hj w_j - u_0'``: source ``max(a_h, theta_0 + v_h U_0) + sum_j N_hj g_j``: parts that are left
  forget which one they began in.  Always ``D_h <= max(U_h, U_0)``.

For theta: from hub h the weight at hub g is at most ``V_hg`` at any time, and comparison off the hubs, excursion by
excursion, gives ``u_h' = p a <= sum_g V_hg (a_g + e y_g a)``.  Or look at the first other hub that is reached, g with a
density of at most ``f_hg = N_hg + e sum_j y_hj N_jg``: what is collected before that comes at most at the rate ``a_h +
e y_h a``, and after it at the rate ``u_g'`` of the time left, of sum at most U_g; hence ``theta_h`` may be ``a_h + e
y_h a + sum_{g != h} min(V_hg theta_g, f_hg U_g)``.  Always ``U_h <= theta_h t``.

A ceiling for all ``u_h(t)``, where absorption ends what is collected.  For kappa 0 let ``q <= 1`` satisfy ``q_i d_i <=
v_i + sum_j N_ij q_j`` off the hubs, and put ``U = max_h (a_h + sum_j N_hj b_j) / (v_h + sum_j N_hj q_j)``.  Then ``z =
b + (1 - q) U`` off the hubs with U at them satisfies ``z d >= a + N z`` everywhere, hence ``u(s) <= z`` at all times.

Within a mission much shorter than an excursion from the hubs a kappa of 1/t or 4/t gives smaller weights than 0.
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
from markov.chain.hubs import Hubs, Shares
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
        The g of each state off the hubs.
    gaps : float64[c, k - 1]
        The D of each hub but the first.
    rates : float64[c]
        The theta of the first hub.
    longest : float
        Largest sum of m: mean time to the next visit to a hub.
    excursion : float64[m, k]
        The y, hub by hub.
    ceilings : float64[c]
        The U of the first hub.
    visited : float64[k, k]
        The V.
    """

    until: float
    costs: Floats
    gaps: Floats
    rates: Floats
    longest: float
    excursion: Floats
    ceilings: Floats
    visited: Floats


def verified(
    hubs: Hubs,
    shares: Shares,
    collected: Floats,
    collected_at_hubs: Floats,
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
    hubs : Hubs
    shares : Shares
    collected : float64[m, c]
        The a of each quantity, exact or rounded by `entry_error`.
    collected_at_hubs : float64[k, c]
    kappa : float
        0 for any time, else about 1/t.
    time : float
        The t; for kappa 0 only gaps and ceilings depend on it.
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
    grounded, loss = hubs.grounded, hubs.loss
    kinds, k = collected.shape[1], hubs.k
    leaking = (np.abs(shares.leaks) + shares.errors) * _SLACK
    parts = np.concatenate((np.maximum(1.0 - shares.values.sum(axis=1, keepdims=True), 0.0), shares.values), axis=1)
    parts[:, 0] += k * UNIT if k > 1 else 0.0
    systems = np.concatenate((collected, loss[:, None], parts, leaking), axis=1)
    diagonal = grounded.exits + kappa
    trouble = NotReached("the weights of the error bound could not be verified")
    if not bool((diagonal > 0.0).all()):
        raise NotReached("a state off the hub is never left")
    for reduction in _REDUCTIONS:
        reduced = diagonal * (1.0 - reduction)
        try:
            values = grounded.real("column", reduced, systems, systems / reduced[:, None], 0.1 * reduction, 120)
            row = hubs.outward
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
    tops = np.repeat(ceilings[None, :], k, axis=0)
    losing = bool(hubs.loss_at_hubs.any()) or bool(loss.any())
    gone = _absorbed(hubs, entry_error) if losing else np.zeros(grounded.m)
    if not kappa and losing:
        tops = np.minimum(tops, _ceilings(hubs, values[:, :kinds], collected_at_hubs, gone))
    lost, until, leaked = values[:, kinds], values[:, kinds + 1 : kinds + 1 + k], values[:, kinds + 1 + k :]
    # Where the first hub's share is too small for it, absorption on the way is left out.
    fits = bool((gone * (1.0 + 1e-9) <= parts[:, 0] - 4.0 * k * UNIT).all())
    small = _Small.of(hubs, shares, hubs.outward.T @ gone if fits else np.zeros(k), time, entry_error)
    visited = small.visits(growth * (hubs.outward.T @ leaked.sum(axis=1)) * _SLACK)
    passing = (hubs.between + growth * (spent.T @ hubs.inward)) * _SLACK
    costs, gaps, rates = np.empty((kinds, grounded.m)), np.empty((kinds, k - 1)), np.empty(kinds)
    for kind in range(kinds):
        at_hubs = collected_at_hubs[:, kind]
        alone = (at_hubs + growth * (collected[:, kind] @ spent)) * _SLACK
        theta = visited @ alone * _SLACK
        top = np.minimum(tops[:, kind], theta * time * _SLACK)
        gap = np.maximum(top[1:], top[0])
        for _ in range(3):
            later = np.minimum(visited * theta, passing * top)
            np.fill_diagonal(later, 0.0)
            theta = np.minimum(theta, (alone + later.sum(axis=1)) * _SLACK)
            top = np.minimum(top, theta * time * _SLACK)
            z = growth * (leaked @ gap)
            below = growth * (until @ theta) + z
            if kind != whole and losing:
                below += growth * top[0] * lost
            below = np.minimum(below, parts @ top)
            before = growth * values[:, kind] + z
            costs[kind] = np.minimum(np.maximum(before, below) * _SLACK, ceilings[kind])
            entering = hubs.outward.T @ costs[kind]
            top = np.minimum(top, small.grown((at_hubs + hubs.outward.T @ before) * _SLACK))
            sinking = 0.0 if kind == whole else top[0] * hubs.loss_at_hubs[1:]
            sources = np.maximum(at_hubs[1:], theta[0] + sinking) + entering[1:]
            gap = np.minimum(np.minimum(gap, np.maximum(top[1:], top[0])), small.forgotten(sources * _SLACK))
        gaps[kind], rates[kind], tops[:, kind] = gap, theta[0], top
    longest = float(until.sum(axis=1).max(initial=0.0))
    return Weights(time if kappa else math.inf, costs, gaps, rates, longest, spent, tops[0], visited)


@dataclass(frozen=True, eq=False)
class _Small:
    """What passes between the hubs: bounds of the c.

    Attributes
    ----------
    leave : float64[k]
        Lower bounds of ``-c_hh``.
    across : float64[k, k]
        Upper bounds of the others, 0 on the diagonal.
    gone : float64[k]
        What is absorbed on the way, at least.
    kappa : float
        At least 1/t.
    """

    leave: Floats
    across: Floats
    gone: Floats
    kappa: float

    @classmethod
    def of(cls, hubs: Hubs, shares: Shares, gone: Floats, time: float, entry_error: float) -> _Small:
        """Form them."""
        leaks, errors, k = shares.leaks_at_hubs, shares.errors_at_hubs, hubs.k
        across = np.zeros((k, k))
        across[:, 1:] = np.maximum(errors - leaks, 0.0)
        rounding = ((k + 4.0) * UNIT * np.abs(leaks) + errors).sum(axis=1)
        rounding += (4.0 * UNIT + entry_error) * hubs.loss_at_hubs
        across[:, 0] = np.maximum(leaks.sum(axis=1) - hubs.loss_at_hubs + rounding, 0.0)
        leave = np.empty(k)
        leave[1:] = np.diag(leaks[1:]) - np.diag(errors[1:])
        leave[0] = hubs.loss_at_hubs[0] - leaks[0].sum() - rounding[0]
        np.fill_diagonal(across, 0.0)
        return cls(np.maximum(leave, 0.0), across, gone * (1.0 - 1e-9), 1.0 / time * _SLACK)

    def visits(self, stray: Floats) -> Floats:
        """Return the V, float64[k, k]."""
        k = self.leave.size
        found = np.ones((k, k))
        for g in range(k if k > 1 else 0):
            rest = np.flatnonzero(np.arange(k) != g)
            most = _above_all(
                self.leave[rest] + self.kappa, self.across[np.ix_(rest, rest)], self.across[rest, g] + stray[rest]
            )
            found[rest, g] = np.minimum(1.0, math.e * _SLACK * most)
        return found

    def grown(self, source: Floats) -> Floats:
        """Return bounds of what grows by a source at the hubs until t."""
        leave, across = self.leave + self.kappa, self.across.copy()
        leave[0] += self.gone[0]
        across[1:, 0] = np.maximum(across[1:, 0] - self.gone[1:], 0.0)
        return math.e * _SLACK * _above_all(leave, across, source)

    def forgotten(self, source: Floats) -> Floats:
        """Return bounds at all times, without the first hub."""
        return _above_all(self.leave[1:], self.across[1:, 1:], source)


def _above_all(leave: Floats, across: Floats, source: Floats) -> Floats:
    """Return z with ``leave z >= across z + source``, inf where none is found."""
    none = np.full(source.size, math.inf)
    if not bool((leave > 0.0).all()):
        return none
    try:
        found = np.linalg.solve(np.diag(leave) - across, source * (1.0 + 1e-6) + 1e-300)
    except np.linalg.LinAlgError:
        return none
    if not bool(np.isfinite(found).all()) or not bool((found > 0.0).all()):
        return none
    verified = leave * found >= (across @ found + source) * (1.0 + (source.size + 8.0) * UNIT)
    return np.asarray(found, dtype=np.float64) if bool(verified.all()) else none


def _above(matrix: csr_array, diagonal: Floats, z: Floats, right: Floats, entry_error: float) -> bool:
    """Whether ``z d >= right + matrix z`` is certain for the exact rates, entry by entry."""
    if not bool(np.isfinite(z).all()):
        return False
    terms = np.diff(matrix.indptr).astype(np.float64)[:, None]
    margin = 1.0 + (terms + 8.0) * UNIT + 2.0 * entry_error
    lowered = diagonal[:, None] * (1.0 - 8.0 * UNIT - entry_error)
    return bool((z * lowered >= (matrix @ z + right) * margin).all())


def _absorbed(hubs: Hubs, entry_error: float) -> Floats:
    """Return lower bounds q of the probability of absorption before the next visit to a hub, 0 where none is found."""
    grounded, loss = hubs.grounded, hubs.loss
    none = np.zeros(grounded.m)
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
    return np.asarray(found[:, 0], dtype=np.float64)


def _ceilings(hubs: Hubs, before: Floats, collected_at_hubs: Floats, gone: Floats) -> Floats:
    """Return bounds of what is collected until absorption from any hub, inf where none is found."""
    leaving = (hubs.loss_at_hubs + hubs.outward.T @ gone) * (1.0 - 1e-9)
    if not bool((leaving > 0.0).all()):
        return np.full(before.shape[1], math.inf)
    most: Floats = ((collected_at_hubs + hubs.outward.T @ before) / leaving[:, None]).max(axis=0) * _SLACK
    return most
