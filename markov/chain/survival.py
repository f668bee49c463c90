"""Survival of a duration: from each state the probability of not leaving some states.

The methods are those of `markov.chain.transient`, carried out on values per state in place of weights of states.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike

from markov.chain import ladder, settling, uniformisation
from markov.chain.bounds import Floats, Vector, relative_to_computed
from markov.chain.doubled import UNIT, Doubled, plain
from markov.chain.generator import Generator, Restriction, as_flags
from markov.chain.transient import LADDER_ALWAYS, LADDER_PATIENCE, NAMES, Method, Time, as_times, ladder_seconds
from markov.errors import NotReached, UsageError


def survival(generator: Generator, alive: ArrayLike, duration: Time, *, method: Method | None = None) -> Vector:
    """Return for each state the probability of not leaving the `alive` states within a duration.

    Parameters
    ----------
    generator : Generator
        n states.
    alive : bool[n] or numbers
        States that must not be left; from any other state the probability is 0.
    duration : Fraction, float or int
        Exact, not negative.

    Returns
    -------
    Vector
        n probabilities.  Weight them with a distribution for an interval reliability.

    Raises
    ------
    NotReached
        More than `LADDER_ALWAYS` states over too many expected jumps.
    """
    (time,) = as_times([duration])
    inside = as_flags(alive, generator.n)
    doomed = generator.reversed().reachable(~inside, blocked=None) if not inside.all() else ~inside
    values = inside.astype(np.float64)
    if time == 0 or not (doomed & inside).any():
        return Vector(values, 0.0, 0.0, "by structure", inside)
    # Only states with a path out matter; from the others survival is certain, and they count as leaks of no harm.
    mortal = np.flatnonzero(doomed & inside)
    part = generator.restricted(np.flatnonzero(inside), np.where(inside, -1, 0), 1)
    loss = Doubled(part.absorption.high[:, 0], part.absorption.low[:, 0])
    expected = uniformisation.expected_jumps(part.chain, loss, time)
    reasons = []
    for chosen in [method] if method else _survival_methods(part, loss, time, expected):
        try:
            result, relative, absolute = _surviving(part, loss, time, chosen)
            break
        except NotReached as reason:
            reasons.append(f"{NAMES[chosen]}: {reason}")
    else:
        raise NotReached("; ".join(dict.fromkeys(reasons)))
    values[part.members] = result
    certain = inside.copy()
    certain[mortal] = False
    values[certain] = 1.0
    return Vector(
        np.minimum(values, 1.0),
        relative_to_computed(relative + UNIT),
        absolute * (1.0 + 2.0 * relative) * (1.0 + 1e-9),
        NAMES[chosen],
        inside,
    )


def _survival_methods(part: Restriction, loss: Doubled, time: Fraction, expected: float) -> list[Method]:
    """Methods worth trying for survival, the best first."""
    n = part.chain.n
    if n <= LADDER_ALWAYS:
        return ["ladder"]
    step = uniformisation.jumps(part.chain, loss, backwards=True)
    quick = expected * step.roundings * UNIT < 1e-12 or (expected + 200.0) * (step.work + 10_000) < 1e8
    chosen: list[Method] = ["uniformisation"] if quick and uniformisation.affordable(step, [time]) else []
    if ladder_seconds(n, expected) < 3.0:
        chosen.append("ladder")
    chosen.append("settling")
    if ladder_seconds(n, expected) < LADDER_PATIENCE:
        chosen.append("ladder")
    return [*chosen, "uniformisation"]


def _surviving(part: Restriction, loss: Doubled, time: Fraction, method: Method) -> tuple[Floats, float, float]:
    """Return survival from each state with its errors relative to the exact values, before rounding to floats."""
    n = part.chain.n
    if method == "ladder":
        prepared = ladder.build(part.chain, loss, part.absorption_error, plain(np.zeros((n, 0))), 0.0, [time])
        found, relative, absolute = ladder.look_back(prepared, plain(np.ones(n)), time)
        return found.high + found.low, relative, absolute
    if method == "uniformisation":
        step = uniformisation.jumps(part.chain, loss, backwards=True)
        return uniformisation.look_back(step, np.ones(n), time)
    if method == "settling":
        return settling.look_back(part.chain, loss, part.absorption_error, time)
    raise UsageError(f"method {method}: survival knows ladder, uniformisation and settling")
