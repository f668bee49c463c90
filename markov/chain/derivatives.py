"""Exact derivatives of long-run values, times to absorption and values at a time with respect to every rate.

Nothing is differenced.  A change of the rate from i to j moves a value by what the chain does in i times what lies
between j and i afterwards:

==========================  ===========================================================================================
long-run mean ``pi r``      ``pi_i (h_j - h_i)``, h the deviations: ``Q h = pi r - r``
mean time to absorption m   ``v_i (m_j - m_i)``, v the expected times in the states, m the mean times from them
half its second moment      ``v_i (z_j - z_i) + w_i (m_j - m_i)``, z rewards at the rate m from the states, w times
                            in the states from the weights v
value ``p(t) r``            ``K_ij - K_ii`` of `markov.chain.pairing`
==========================  ===========================================================================================

Each is kept as two sums of non-negative terms, what speaks for more and what speaks for less, in double-double; the
deviations are ``h_i = A_i - pi r B_i`` with reward A and time B until a ground state is met, and likewise mean times
are set against that of the state most dwelt in, the hub: ``m_i = B_i + (1 - f_i) m_hub`` with f the chance to be
absorbed before the hub is met.  The caller adds up over all rates that a parameter enters before the two sides are
set against each other, so only what truly cancels does.

Sources: P. J. Schweitzer, Perturbation theory and finite Markov chains, J. Appl. Probab. 5 (1968), for the long run;
the others by differentiating ``-T m = 1`` and by variation of constants.  Elimination: `markov.chain.elimination`.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov.chain import elimination
from markov.chain.bounds import Flags, Floats
from markov.chain.doubled import (
    DIVIDE,
    MULTIPLY,
    UNIT,
    Doubled,
    add,
    divide,
    multiply,
    plain,
    total,
    total_error,
    zeros,
)
from markov.chain.generator import Generator
from markov.chain.pairing import Pairing, pair
from markov.chain.solve import stationary
from markov.errors import IllPosed

_SLACK = 1.0 + 1e-9


@dataclass(frozen=True, eq=False)
class Sloped:
    """A value of a chain of n states with its derivatives by all k rates, each ``more - less``.

    Attributes
    ----------
    value : Fraction
    more, less : Doubled[k]
        In the order of the rates of the generator.
    rewards : Doubled[n]
        Derivatives by the reward, or the final value, of each state.
    error : float
        Relative error of the value, of every `more`, of every `less`, of every entry of `rewards`.
    """

    value: Fraction
    more: Doubled
    less: Doubled
    rewards: Doubled
    error: float


def long_run_slopes(generator: Generator, members: NDArray[np.int32], reward: Floats | Doubled) -> Sloped:
    """Return the long-run mean of a reward in one closed class with its derivatives.

    Parameters
    ----------
    generator : Generator
        n states.
    members : int[m]
        A closed communicating class.
    reward : float64[n] or Doubled[n]
        Reward per unit of time in each state, not negative, exact.

    Raises
    ------
    TooLarge
        More states than elimination takes.
    """
    n = generator.n
    likely = stationary(generator, members)
    ground = int(np.argmax(likely.values))
    others = np.asarray(members)[np.asarray(members) != ground]
    label = np.full(n, -1)
    label[ground] = 0
    part = generator.restricted(others, label, 1)
    ahead, time, share = zeros(n), zeros(n), zeros(n)
    share.high[ground] = 1.0
    error = 0.0
    if others.size:
        loss = Doubled(part.absorption.high[:, 0], part.absorption.low[:, 0])
        made = elimination.eliminate(part.chain.dense(), loss, max(part.chain.rate_error, part.absorption_error))
        earned = _doubled(reward).at(others)
        ones, nothing = np.ones(others.size), np.zeros(others.size)
        both = made.columns(Doubled(np.stack([earned.high, ones], axis=1), np.stack([earned.low, nothing], axis=1)))
        ahead.high[others], ahead.low[others] = both.high[:, 0], both.low[:, 0]
        time.high[others], time.low[others] = both.high[:, 1], both.low[:, 1]
        out = generator.source == ground
        first = zeros(n)
        first.high[generator.target[out]], first.low[generator.target[out]] = generator.rates.at(out)
        share.high[others], share.low[others] = made.row(first.at(others))
        error = made.error + generator.rate_error
    share = divide(share, total(share))
    mean = total(multiply(share, _doubled(reward)))
    error = (2 * error + total_error(n) + DIVIDE + MULTIPLY + total_error(n)) * _SLACK
    tail, head = generator.source, generator.target
    more = multiply(share.at(tail), add(ahead.at(head), multiply(_as_many(mean, tail), time.at(tail))))
    less = multiply(share.at(tail), add(ahead.at(tail), multiply(_as_many(mean, tail), time.at(head))))
    return Sloped(_fraction(mean), more, less, share, (3 * error + 4 * MULTIPLY) * _SLACK)


def absorption_slopes(generator: Generator, start: Floats | Doubled, down: Flags) -> tuple[Sloped, Sloped]:
    """Return the mean of the time until some states are entered, and half its second moment, with their derivatives.

    Parameters
    ----------
    generator : Generator
        n states; the `down` ones are entered for certain.
    start : float64[n] or Doubled[n]
        Start distribution.
    down : bool[n]

    Raises
    ------
    IllPosed
        There is a place from which no down state can be reached.
    TooLarge
        More states than elimination takes.
    """
    n, first = generator.n, _doubled(start)
    members = np.flatnonzero(generator.reachable(first.high > 0.0, blocked=down) & ~down)
    part = generator.restricted(members, np.where(down, 0, -1), 1)
    k = generator.source.size
    if members.size == 0:
        nothing = Sloped(Fraction(0), zeros(k), zeros(k), zeros(n), 0.0)
        return nothing, nothing
    saved = generator.without_exits(down).reversed().reachable(down)
    if not bool(saved[members].all()):
        raise IllPosed("there is a place from which no down state can be reached")
    loss = Doubled(part.absorption.high[:, 0], part.absorption.low[:, 0])
    made = elimination.eliminate(part.chain.dense(), loss, max(part.chain.rate_error, part.absorption_error))

    own = plain(np.zeros(n))
    own.high[members], own.low[members] = made.times
    spent, again = zeros(n), zeros(n)
    spent.high[members], spent.low[members] = made.row(first.at(members))
    again.high[members], again.low[members] = made.row(spent.at(members))
    later = made.columns(Doubled(own.high[members, None], own.low[members, None]))
    hub = int(members[np.argmax(spent.high[members])])
    at_hub = later.at((members == hub, 0))
    down_before, until = _until_hub(generator, members, down, hub, own)
    error = (8 * made.error + 8 * MULTIPLY + total_error(n)) * _SLACK

    def moved(weights: Doubled, number: int, from_hub: Doubled) -> tuple[Doubled, Doubled]:
        """Weigh the difference between head and tail of each transition of what is still expected."""
        tail, head = generator.source, generator.target
        lost = _as_many(from_hub, tail)
        part = until.at((slice(None), number))
        more = add(part.at(head), multiply(down_before.at(tail), lost))
        less = add(part.at(tail), multiply(down_before.at(head), lost))
        return multiply(weights.at(tail), more), multiply(weights.at(tail), less)

    mean = Sloped(_fraction(total(spent)), *moved(spent, 0, own.at(hub)), spent, error)
    straight, around = moved(spent, 1, Doubled(at_hub.high[0], at_hub.low[0])), moved(again, 0, own.at(hub))
    half = _fraction(total(multiply(spent, own)))
    return mean, Sloped(half, add(straight[0], around[0]), add(straight[1], around[1]), again, error)


def _until_hub(
    generator: Generator, members: NDArray[np.intp], down: Flags, hub: int, reward: Doubled
) -> tuple[Doubled, Doubled]:
    """Return from each state the chance to go down before the hub, with time and reward until either, Doubled[n, 2]."""
    n = generator.n
    chance, until = plain(down.astype(np.float64)), zeros(n, 2)
    others = members[members != hub]
    if others.size:
        label = np.where(down, 0, -1)
        label[hub] = 1
        part = generator.restricted(others, label, 2)
        loss = total(part.absorption, axis=1)
        loss_error = part.absorption_error + total_error(2)
        made = elimination.eliminate(part.chain.dense(), loss, max(part.chain.rate_error, loss_error))
        columns = [part.absorption.at((slice(None), 0)), plain(np.ones(others.size)), reward.at(others)]
        found = made.columns(
            Doubled(np.stack([x.high for x in columns], axis=1), np.stack([x.low for x in columns], axis=1))
        )
        chance.high[others], chance.low[others] = found.at((slice(None), 0))
        until.high[others], until.low[others] = found.at((slice(None), slice(1, None)))
    return chance, until


def slopes_at(
    generator: Generator,
    start: Floats | Doubled,
    time: Fraction,
    final: Floats | Doubled,
    *,
    stopped: Flags | None = None,
    absorbed: float = 0.0,
) -> tuple[Sloped, Doubled]:
    """Return the mean of a value that the state has at a time, with its derivatives, and as seen from each state.

    Parameters
    ----------
    generator : Generator
        n states.
    start : float64[n] or Doubled[n]
        Weights at time 0, relatively exact.
    time : Fraction
    final : float64[n] or Doubled[n]
        Value of each state, not negative.
    stopped : bool[n], optional
        States in which the chain is stopped.
    absorbed : float
        Value of having been stopped, in place of `final` there.

    Returns
    -------
    Sloped
        ``rewards`` holds the probabilities of the states at the time.
    Doubled[n]
        ``exp(Q t) final``.
    """
    n = generator.n
    halted = np.zeros(n, np.bool_) if stopped is None else stopped
    found, place, error = _between(generator, _doubled(start), time, _doubled(final), halted, absorbed, None)
    return _sloped(generator, found, place, halted, _doubled(final), absorbed, error)


def integral_slopes(generator: Generator, start: Floats | Doubled, time: Fraction, reward: Floats | Doubled) -> Sloped:
    """Return the integral of a reward from 0 to a time, with its derivatives.

    Parameters
    ----------
    generator : Generator
        n states.
    start : float64[n] or Doubled[n]
    time : Fraction
    reward : float64[n] or Doubled[n]
        Per unit of time, not negative, exact.  ``rewards`` of the result holds the mean times spent in the states.
    """
    n = generator.n
    nothing = np.zeros(n, np.bool_)
    found, place, error = _between(generator, _doubled(start), time, zeros(n), nothing, 1.0, _doubled(reward))
    tail, head = generator.source, generator.target
    more, less = found.pairs.at((place[tail], place[head])), found.pairs.at((place[tail], place[tail]))
    spent = found.pairs.at((place, found.weights.high.size - 1))
    value = _fraction(found.weights.at(found.weights.high.size - 1))
    return Sloped(value, more, less, spent, error)


def _between(
    generator: Generator,
    start: Doubled,
    time: Fraction,
    final: Doubled,
    stopped: Flags,
    absorbed: float,
    reward: Doubled | None,
) -> tuple[Pairing, NDArray[np.int64], float]:
    """Pair a chain whose stopped states are one, or one state of which collects rewards; return where each state is."""
    n = generator.n
    place = np.full(n, -1, np.int64)
    running = np.flatnonzero(~stopped)
    place[running] = np.arange(running.size)
    last = running.size
    place[stopped] = last
    size = last + 1
    part = generator.restricted(running, np.where(stopped, 0, -1), 1)
    rates, exits = zeros(size, size), zeros(size)
    inside = part.chain.dense()
    rates.high[:last, :last], rates.low[:last, :last] = inside
    if reward is None:
        rates.high[:last, last], rates.low[:last, last] = part.absorption.high[:, 0], part.absorption.low[:, 0]
    else:
        rates.high[:last, last], rates.low[:last, last] = reward.at(running)
    leaving = generator.exits.at(running)
    exits.high[:last], exits.low[:last] = leaving
    error = max(generator.exit_error, part.absorption_error, part.chain.rate_error)
    first, ends = zeros(size), zeros(size)
    first.high[:last], first.low[:last] = start.at(running)
    ends.high[:last], ends.low[:last] = final.at(running)
    ends.high[last] = absorbed
    if stopped.any():
        halted = total(start.at(stopped))
        first.high[last], first.low[last] = float(halted.high), float(halted.low)
    found = pair(rates, exits, error, first, ends, time)
    return found, place, found.error * _SLACK + 4 * UNIT**2


def _sloped(
    generator: Generator,
    found: Pairing,
    place: NDArray[np.int64],
    stopped: Flags,
    final: Doubled,
    absorbed: float,
    error: float,
) -> tuple[Sloped, Doubled]:
    ends = zeros(found.weights.high.size)
    running = ~stopped
    ends.high[place[running]], ends.low[place[running]] = final.at(running)
    ends.high[-1] = absorbed
    value = _fraction(total(multiply(found.weights, ends)))
    tail, head = generator.source, generator.target
    alive = (~stopped[tail]).astype(np.float64)
    more, less = found.pairs.at((place[tail], place[head])), found.pairs.at((place[tail], place[tail]))
    weights = found.weights.at(place)
    weights.high[stopped], weights.low[stopped] = 0.0, 0.0
    n = generator.n
    sloped = Sloped(
        value,
        Doubled(more.high * alive, more.low * alive),
        Doubled(less.high * alive, less.low * alive),
        weights,
        (error + MULTIPLY + total_error(n)) * _SLACK,
    )
    return sloped, found.values.at(place)


def _doubled(x: Floats | Doubled) -> Doubled:
    return x if isinstance(x, Doubled) else plain(x)


def _as_many(x: Doubled, like: NDArray[np.int32]) -> Doubled:
    return Doubled(np.full(like.size, float(x.high)), np.full(like.size, float(x.low)))


def _fraction(x: Doubled) -> Fraction:
    return Fraction(float(x.high)) + Fraction(float(x.low))
