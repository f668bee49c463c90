"""Uniformisation: transient values of sparse chains of any size as sums of non-negative terms, fully proven.

With a rate Lambda a little above every exit rate and ``P = I + Q/Lambda``,

    p(t) = sum_k Pr(N = k) p(0) P**k,
    integral over [0, t] of p(s) r ds = (1/Lambda) sum_k Pr(N > k) p(0) P**k r,     N Poisson with mean Lambda t.

Bound.  Every entry of P is a float within ``3 u`` of the exact one: the given sum of two floats is rounded once and
divided once; the diagonal ``1 - exit/Lambda`` is formed in double-double.  A step sums at most g terms per entry, all
non-negative, so k steps cost ``k (g + 3) u`` relatively, whatever the order of summation.  Where one state is entered
from very many states the sum is formed in stages of at most 16 terms, so that g stays small.  The weights come from
`long_poisson` with their own error; what the truncated weights leave out is an absolute error.

Sources: A. Jensen, Markoff chains as an aid in the study of Markoff processes, Skand. Aktuarietidskr. 36 (1953); B.
L. Fox, P. W. Glynn, Computing Poisson probabilities, Comm. ACM 31 (1988), for truncation from both sides.  The count of
roundings is derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.sparse import csr_array

from markov.chain.bounds import Floats
from markov.chain.doubled import UNIT, Doubled, add, difference, plain
from markov.chain.generator import Generator
from markov.chain.poisson import LongPoisson, long_poisson
from markov.errors import NotReached

#: A relative bound up to this, and elementary multiplications up to this (about ten seconds), are spent gladly.
NARROW = 1e-9
MOST_WORK = 6e9
#: Beyond these the method declines: nothing better being at hand, a wide bound or a minute of work is still a proof.
WIDEST = 1e-7
LAST_WORK = 3e10
#: What truncating the Poisson weights may cost absolutely, about.
_TRUNCATION = 1e-80
_FAN = 16


@dataclass(frozen=True, eq=False)
class Jumps:
    """One uniformised step, forwards or backwards, as one sparse product or several stages of sums.

    Attributes
    ----------
    rate : float
        Lambda.
    stages : tuple of csr_array
        Applied one after the other to a column vector.
    roundings : int
        Relative error of one step in units of u, entries of P included.
    """

    rate: float
    stages: tuple[csr_array, ...]
    roundings: int
    work: int

    def __call__(self, x: Floats) -> Floats:
        """Carry out one step."""
        for stage in self.stages:
            x = stage @ x
        return x


@dataclass(frozen=True, eq=False)
class Walk:
    """State weights with integrals at m times, as floats.

    Attributes
    ----------
    weights : float64[m, n]
        Relative error `relative` per time, and `absolute` for each entry.
    integrals : float64[m, c]
        With their errors per time.
    """

    weights: Floats
    relative: tuple[float, ...]
    absolute: tuple[float, ...]
    integrals: Floats
    integrals_relative: tuple[float, ...]
    integrals_absolute: tuple[float, ...]


def jumps(chain: Generator, loss: Doubled | None, *, backwards: bool = False) -> Jumps:
    """Return the step of a chain with absorption `loss`; forwards carries weights of states, backwards values."""
    exits = chain.exits if loss is None else add(chain.exits, loss)
    largest = float(exits.high.max()) if chain.n else 0.0
    rate = 1.02 * largest if largest > 0.0 else 1.0
    stay = difference(plain(np.full(chain.n, rate)), exits)
    values = np.concatenate(((chain.high + chain.low) / rate, (stay.high + stay.low) / rate))
    index = np.arange(chain.n, dtype=np.int32)
    source, target = np.concatenate((chain.source, index)), np.concatenate((chain.target, index))
    if not backwards:
        source, target = target, source
    matrix = csr_array((values, (source, target)), shape=(chain.n, chain.n))
    matrix.sort_indices()
    stages, terms = _staged(matrix)
    return Jumps(rate, stages, terms + 3, sum(stage.nnz for stage in stages) + 4 * chain.n)


def _staged(matrix: csr_array) -> tuple[tuple[csr_array, ...], int]:
    """Split long rows so that no sum has more than `_FAN` terms; return the stages and the roundings of one pass."""
    lengths = np.diff(matrix.indptr)
    longest = int(lengths.max()) if lengths.size else 0
    if longest <= 2 * _FAN:
        return (matrix,), longest
    stages, roundings = [], 0
    current = matrix
    while True:
        lengths = np.diff(current.indptr).astype(np.int64)
        pieces = np.maximum(1, -(-lengths // _FAN))
        if int(pieces.max()) == 1:
            stages.append(current)
            return tuple(stages), roundings + _FAN
        first = np.concatenate(([0], np.cumsum(pieces)))
        rank = np.arange(int(first[-1])) - np.repeat(first[:-1], pieces)
        begin = np.repeat(np.asarray(current.indptr[:-1], dtype=np.int64), pieces) + rank * _FAN
        pointers = np.concatenate((begin, [current.indptr[-1]]))
        stages.append(csr_array((current.data, current.indices, pointers), shape=(begin.size, current.shape[1])))
        roundings += _FAN
        ones = np.ones(begin.size)
        current = csr_array((ones, np.arange(begin.size), first), shape=(lengths.size, begin.size))


def expected_jumps(chain: Generator, loss: Doubled | None, time: Fraction) -> float:
    """Return about how many steps uniformisation needs."""
    exits = chain.exits.high if loss is None else chain.exits.high + loss.high
    return 1.02 * (float(exits.max()) if chain.n else 0.0) * float(time)


def affordable(step: Jumps, times: Sequence[Fraction], *, patient: bool = False) -> bool:
    """Whether the bound is narrow enough and the work within limits at all of the times; patient: the last limits."""
    widest, most = (WIDEST, LAST_WORK) if patient else (NARROW, MOST_WORK)
    x = step.rate * float(max(times))
    count = x + 20.0 * math.sqrt(x + 100.0) + 200.0
    return count * step.roundings * UNIT < widest and count * (step.work + 10_000) < most


def _weights(step: Jumps, time: Fraction) -> LongPoisson:
    return long_poisson(Fraction(step.rate) * time, _TRUNCATION)


def walk(
    step: Jumps,
    start: Floats,
    rewards: Floats,
    rewards_error: float,
    times: Sequence[Fraction],
    start_absolute: float = 0.0,
) -> Walk:
    """Return state weights with integrals of rewards at each time.

    Parameters
    ----------
    step : Jumps
        Forwards.
    start : float64[n]
        Weights at time 0; the caller adds their relative error.
    rewards : float64[n, c]
        Relative error `rewards_error`.
    times : Fraction[m]
        Exact, positive.
    start_absolute : float
        Absolute error of the sum of the start weights.

    Raises
    ------
    NotReached
        Not `affordable`.
    """
    if not affordable(step, times, patient=True):
        raise NotReached(
            f"uniformisation of {step.rate * float(max(times)):.3g} expected jumps is too dear or too wide"
        )
    n, kinds = start.size, rewards.shape[1]
    poissons = [_weights(step, time) for time in times]
    last = max(poisson.last for poisson in poissons)
    earned = np.zeros((last + 1, kinds))
    weights = np.zeros((len(times), n))
    x = start
    for k in range(last + 1):
        if kinds:
            # Not by `@`: a threaded product of this size costs more than it saves on a busy machine.
            earned[k] = np.einsum("i,ij->j", x, rewards)
        for number, poisson in enumerate(poissons):
            if poisson.first <= k <= poisson.last:
                weights[number] += poisson.exactly[k - poisson.first] * x
        if k < last:
            x = step(x)
    integrals = np.zeros((len(times), kinds))
    mass = float(start.sum()) * (1.0 + 1e-9)
    most = float(rewards.max()) * (1.0 + 1e-9) if rewards.size else 0.0
    relative, absolute, gained, off = [], [], [], []
    for number, poisson in enumerate(poissons):
        for kind in range(kinds):
            parts = poisson.beyond * earned[: poisson.last + 1, kind]
            integrals[number, kind] = math.fsum(parts.tolist()) / step.rate
        moving = poisson.last * step.roundings * UNIT
        relative.append((moving + poisson.error + (poisson.exactly.size + 1) * UNIT) * (1.0 + 1e-7))
        under = (poisson.last + 1.0) * (step.roundings + 2.0) * n * 2.0**-1074
        absolute.append((start_absolute + poisson.missing * mass + under) * (1.0 + 1e-7))
        gained.append((moving + poisson.error + rewards_error + (n + 5) * UNIT) * (1.0 + 1e-7))
        spent = (poisson.last + 1.0) / step.rate
        lost = poisson.missing_beyond * mass * most / step.rate + spent * most * (start_absolute + under)
        off.append((lost + spent * n * 2.0**-1074) * (1.0 + 1e-7) + 2.0**-1070)
    return Walk(weights, tuple(relative), tuple(absolute), integrals, tuple(gained), tuple(off))


def look_back(step: Jumps, final: Floats, time: Fraction) -> tuple[Floats, float, float]:
    """Return ``exp(Q t) final`` for exact final values between 0 and 1, with relative and absolute error.

    `step` goes backwards.  Raises NotReached where not `affordable`.
    """
    if not affordable(step, [time], patient=True):
        raise NotReached(f"uniformisation of {step.rate * float(time):.3g} expected jumps is too dear or too wide")
    poisson = _weights(step, time)
    value = np.zeros_like(final)
    x = final
    for k in range(poisson.last + 1):
        if k >= poisson.first:
            value += poisson.exactly[k - poisson.first] * x
        if k < poisson.last:
            x = step(x)
    relative = poisson.last * step.roundings * UNIT + poisson.error + (poisson.exactly.size + 1) * UNIT
    under = (poisson.last + 1.0) * (step.roundings + 2.0) * 2.0**-1074
    return value, relative * (1.0 + 1e-7), (poisson.missing + under) * (1.0 + 1e-7)
