"""What a misplaced start costs: how far an answer can depend on the state that a chain is in.

Let u_i(s) be the probability of absorption into some class (or the reward earned) within s from state i, hub 0 a
state that the chain keeps returning to.  With T the first visit to the hub or absorption, m_i >= E T, b_i >= the
probability of absorption before the hub (or the reward earned before it), and a rate theta with ``u_0' <= theta`` at
all times,

    |u_i(s) - u_0(s)| <= g_i = b_i + theta m_i,     g_0 = 0.

*Proof.*  Above: absorption by s happens before the hub, at most b_i, or after it in the time left, at most u_0(s).
Below: from the hub at T there is ``u_0(s - T) >= u_0(s) - theta T``; absorption elsewhere before the hub costs at
most b_i, since u <= 1; no hub by s costs at most ``u_0(s) <= theta s <= theta T``.  (For rewards of a chain without
absorption the last two read the same without the second.)  The rate: from the hub ``p_0 <= 1`` and, by comparison off
the hub, ``p_j(s) <= e_j``, the time spent in j per unit of time at the hub; hence ``u_0' = p v <= v_0 + e v = theta``.

Consequence.  If weights p are replaced by weights p' of the same sum, every answer moves by at most ``sum |p_i -
p'_i| g_i``, because the part of u along 1 meets a difference without mass.  So a proven error eps of all weights
moves the answer over a long time only by what eps is worth until the next visit to the hub.
"""

from __future__ import annotations

import numpy as np

from markov.chain.bounds import Floats
from markov.chain.doubled import Doubled, plain
from markov.chain.hub import Hub

_SLACK = 1.0 + 1e-6


def guard(hub: Hub, rates: Floats, *, absorbing: bool) -> Floats:
    """Return the weights g of each state for several answers, float64[n, c].

    Parameters
    ----------
    hub : Hub
        The chain of n states, grounded.
    rates : float64[n, c]
        Absorption rates into c classes, or rewards of a chain that does not absorb, within 1e-9 of the exact ones.
    absorbing : bool
        Which of the two.

    Raises
    ------
    NotReached
        A system off the hub could not be certified.
    """
    kinds = rates.shape[1]
    result = np.zeros((hub.chain.n, kinds))
    ones = plain(np.ones(hub.others.size))
    until, _ = hub.solve("column", ones, 0.0)
    excursion, _ = hub.excursion
    before: Doubled | None = None
    if absorbing:
        before, _ = hub.solve("column", hub.loss.at(hub.others), hub.loss_error)
    for kind in range(kinds):
        away = rates[hub.others, kind]
        theta = (float(rates[hub.number, kind]) + float(np.sum(excursion.high * away))) * _SLACK
        reached = before if before is not None else hub.solve("column", plain(away), 1e-9)[0]
        result[hub.others, kind] = (reached.high + theta * until.high) * _SLACK
    return result
