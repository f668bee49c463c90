"""Values at given times of many small chains of one pattern: scaling then squaring over all samples at once.

Per sample ``P = I + Q/L``, one L for a block of samples: a power of two above 1.25 times the largest exit rate in it.
With an expected number ``L t`` of jumps up to `FEW_JUMPS` the start weights are carried through the series

    p(t) = sum_k Pr(k jumps) p P**k,      integral of p r over [0, t] = (1/L) sum_k Pr(more than k jumps) p P**k r.

Beyond it the longest time is halved until at most half a jump is expected; the moves over this first rung are formed
by the series to degree 16, matrix powers shared between blocks of the polynomial, and squared rung by rung.  A
shorter time is climbed by the binary digits of the rungs that it holds, each applied to the row of weights, so that
all times of a question share the squarings.

All terms are non-negative.  Squarings in floats let the mass of a row drift, which spoils small probabilities; so
after the series and after every third squaring, where the off-diagonal sum of a row is under one half the diagonal is
taken as one minus it, then the row is divided by its sum.  Truncating the series at degree 16 is a relative change of
the rates below 1e-17, as the first rung is contained in the longest time at least ``2 FEW_JUMPS`` times.

Accuracy: observed within 1e-13 relatively, entry by entry, against ball arithmetic and against the bounded methods of
`markov.chain.transient`, for probabilities down to 1e-40 and up to 1e9 expected jumps; no bound is proven for floats,
so what is reported as a result of a model comes from there.

Sources: after J. Xue, Q. Ye, Computing exponentials of essentially non-negative matrices entrywise to high relative
accuracy, Math. Comp. 82 (2013); blocks of powers: M. S. Paterson, L. J. Stockmeyer, SIAM J. Comput. 2 (1973).
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.chain.batch import per_sample
from markov.chain.bounds import Floats
from markov.chain.transient import Time, as_times
from markov.errors import NotReached, TooLarge, UsageError

#: Up to this many expected jumps the series is taken in one go.
FEW_JUMPS = 64
#: Matrices beyond this size are better solved one by one.
LARGEST_BATCH = 600

_Poisson = tuple[list[float], list[float]]  # chances of exactly k jumps, of more than k

_SHARED = 4  # powers shared by the blocks of the polynomial, as many blocks
_DEGREE = _SHARED * _SHARED
_SPARED = 1  # uppermost rungs that are replaced by repeated application
_UNHELD = 3  # squarings between two corrections of the rows
_BLOCK = 1 << 17  # floats of one stack of matrices: what the cache of a core holds


@dataclass(frozen=True, eq=False)
class Pattern:
    """Transitions between n states that all samples share.

    Attributes
    ----------
    n : int
    source, target : int[k]
        Without duplicates; a state without transitions keeps what enters it.
    """

    n: int
    source: NDArray[np.int64]
    target: NDArray[np.int64]

    def __post_init__(self) -> None:
        if self.n > LARGEST_BATCH:
            raise TooLarge(f"batches over time are made for {LARGEST_BATCH} states, not {self.n}")
        if self.source.size != self.target.size:
            raise UsageError("transitions given by arrays of unequal length")


@dataclass(frozen=True, eq=False)
class Spread:
    """Values at m times in s samples.

    Attributes
    ----------
    states : float64[m, n, s]
        Probability of each state.
    integrals : float64[m, r, s]
        Integral of each reward from 0 to that time.
    """

    states: Floats
    integrals: Floats


def spread(
    pattern: Pattern, rates: ArrayLike, start: ArrayLike, times: Sequence[Time], rewards: Sequence[ArrayLike] = ()
) -> Spread:
    """Return state probabilities with integrals of rewards at several times, in every sample.

    Parameters
    ----------
    pattern : Pattern
        n states, k transitions.
    rates : float64[k, s]
        Rate of each transition in each of s samples, not negative.
    start : float64[n] or float64[n, s]
        Distribution at time 0.
    times : sequence of m Fraction, float or int
        Not negative.
    rewards : sequence of float64[n] or float64[n, s]
        Rates of reward per state, not negative.

    Raises
    ------
    UsageError
        Arguments that do not fit together.
    """
    given, exact = _rates(pattern, rates), as_times(times)
    n, count = pattern.n, given.shape[1]
    first = per_sample(start, n, count)
    earned = [per_sample(reward, n, count) for reward in rewards]
    states, integrals = np.empty((len(exact), n, count)), np.empty((len(exact), len(earned), count))
    for part, room in _parts(n, count):
        run = _Run(pattern, given[:, part], exact, room)
        row = np.ascontiguousarray(first[:, part].T)[:, None, :]
        columns = np.empty((part.stop - part.start, n, len(earned)))
        for number, reward in enumerate(earned):
            columns[:, :, number] = reward[:, part].T
        for number, (weights, gained) in enumerate(run.forward(row, columns)):
            states[number, :, part], integrals[number, :, part] = weights[:, 0].T, gained[:, 0].T
    return Spread(states, integrals)


def foresee(pattern: Pattern, rates: ArrayLike, final: ArrayLike, time: Time) -> Floats:
    """Return, from each state, the mean of a value that the state at a later time has: ``exp(Q t) final``.

    Parameters
    ----------
    pattern, rates
        As for `spread`.
    final : float64[n] or float64[n, s]
        Value of each state, not negative.
    time : Fraction, float or int

    Returns
    -------
    float64[n, s]
    """
    given, exact = _rates(pattern, rates), as_times([time])
    values = per_sample(final, pattern.n, given.shape[1])
    result = np.empty((pattern.n, given.shape[1]))
    for part, room in _parts(pattern.n, given.shape[1]):
        run = _Run(pattern, given[:, part], exact, room)
        result[:, part] = run.backward(np.ascontiguousarray(values[:, part].T)[:, :, None])[:, :, 0].T
    return result


def _rates(pattern: Pattern, rates: ArrayLike) -> Floats:
    given = np.asarray(rates, dtype=np.float64)
    if given.ndim != 2 or given.shape[0] != pattern.source.size:
        raise UsageError(f"rates of shape {given.shape}; expected {pattern.source.size} rates by the number of samples")
    if given.size and not (given.min() >= 0.0 and given.max() < np.inf):
        raise UsageError("a rate is negative or not finite")
    return given


def _parts(n: int, count: int) -> Iterator[tuple[slice, Floats]]:
    """Yield blocks of samples, each with the room to work in: fresh memory costs more than the work on it."""
    width = max(1, min(count, 4096, max(4, _BLOCK // (n * n))))
    room = np.empty((2 * _SHARED + 1, width * n * n))
    for begin in range(0, count, width):
        yield slice(begin, min(begin + width, count)), room


class _Run:
    """One block of c samples: their jump matrices, with what the times need.

    A rung of number k covers ``longest * 2**(k - doublings)``, so that the longest time needs no series at all.
    """

    def __init__(self, pattern: Pattern, rates: Floats, times: Sequence[Fraction], room: Floats) -> None:
        n, count = pattern.n, rates.shape[1]
        self.room = room[:, : count * n * n].reshape(-1, count, n, n)
        self.jumps = self.room[0]
        self.jumps[:] = 0.0
        self.jumps[:, pattern.source, pattern.target] = rates.T
        exits = _row_sums(self.jumps)
        largest = float(exits.max(initial=0.0))
        self.exponent = math.ceil(math.log2(1.25 * largest)) if largest > 0.0 else 0
        self.scale = math.ldexp(1.0, -self.exponent)
        if not 0.0 < self.scale < math.inf:
            raise NotReached(f"rates up to {largest:.3g} are out of range; change the unit of time")
        self.jumps *= self.scale
        exits *= self.scale
        np.einsum("cii->ci", self.jumps)[:] = 1.0 - exits
        self.expected = [time * Fraction(2) ** self.exponent for time in times]
        self.rung = max(self.expected, default=Fraction(0))
        self.count = 0
        if self.rung > FEW_JUMPS:
            doublings = math.ceil(math.log2(2 * self.rung))
            self.rung /= 2**doublings
            self.count = doublings + 1 - _SPARED

    def _rungs(self) -> Iterator[Floats]:
        """Yield the moves of one rung after the other; each is overwritten by the next but one."""
        if not self.count:
            return
        moves, other = _first(self.room, self.rung)
        yield _held(moves)
        for number in range(1, self.count):
            np.matmul(moves, moves, out=other)
            moves, other = other, moves
            yield _held(moves) if number % _UNHELD == 0 or number == self.count - 1 else moves

    def _cut(self, expected: Fraction) -> tuple[_Poisson, list[int]]:
        """Return the chances of the series, and how often each rung is applied.

        Without rungs the series takes as many more terms as there are states: some take many rare jumps to reach.
        """
        if expected <= FEW_JUMPS:
            return _poisson(expected, _DEGREE + self.jumps.shape[1]), [0] * self.count
        whole = math.floor(expected / self.rung)
        times = [whole >> number & 1 for number in range(self.count - 1)]
        return _poisson(expected - whole * self.rung, _DEGREE), [*times, whole >> self.count - 1]

    def forward(self, row: Floats, columns: Floats) -> list[tuple[Floats, Floats]]:
        """Return at each time the weights (c, 1, n) with the integrals (c, 1, r)."""
        cuts = [self._cut(expected) for expected in self.expected]
        earns = columns.shape[2] > 0
        found = [self._series(chances, row, columns) for chances, _ in cuts]
        gains = self._first_gains(columns) if earns and self.count else columns
        for number, moves in enumerate(self._rungs()):
            for at, (_, applied) in enumerate(cuts):
                for _ in range(applied[number]):
                    weights, gained = found[at]
                    found[at] = weights @ moves, gained + weights @ gains if earns else gained
            if earns and number < self.count - 1:
                gains = gains + moves @ gains
        return [(weights, gained * self.scale) for weights, gained in found]

    def _series(self, chances: _Poisson, row: Floats, columns: Floats) -> tuple[Floats, Floats]:
        exactly, beyond = chances
        step, weights, gained = row, exactly[0] * row, beyond[0] * (row @ columns)
        for chance, more in zip(exactly[1:], beyond[1:], strict=True):
            step = step @ self.jumps
            weights += chance * step
            if columns.shape[2]:
                gained += more * (step @ columns)
        return weights, gained

    def _first_gains(self, columns: Floats) -> Floats:
        """Return the rewards of the first rung by state, over the time of one expected jump."""
        _, beyond = _poisson(self.rung, _DEGREE)
        seen, gains = columns, beyond[0] * columns
        for more in beyond[1:]:
            seen = self.jumps @ seen
            gains += more * seen
        return gains

    def backward(self, values: Floats) -> Floats:
        """Return the values (c, n, 1) as they are foreseen before the one time of this run."""
        (exactly, _), applied = self._cut(self.expected[0])
        step, found = values, exactly[0] * values
        for chance in exactly[1:]:
            step = self.jumps @ step
            found += chance * step
        for number, moves in enumerate(self._rungs()):
            for _ in range(applied[number]):
                found = moves @ found
        return found


def _row_sums(moves: Floats) -> Floats:
    """Return the sums of the rows of a stack; one product with a vector of ones is the fastest way."""
    count, n, _ = moves.shape
    return np.asarray(moves.reshape(count * n, n) @ np.ones(n)).reshape(count, n)


def _first(room: Floats, expected: Fraction) -> tuple[Floats, Floats]:
    """Return the moves over at most half an expected jump, with room for others.

    A polynomial in P, the first matrix of the room, in blocks that share powers of P.
    """
    weights = [math.exp(-expected) * float(expected**k) / math.factorial(k) for k in range(_DEGREE + 1)]
    powers, mixed, spare = room[:_SHARED], room[_SHARED : 2 * _SHARED], room[2 * _SHARED]
    for number in range(1, _SHARED):
        np.matmul(powers[number - 1], powers[0], out=powers[number])
    table = np.array([[weights[_SHARED * b + k + 1] for k in range(_SHARED - 1)] for b in range(_SHARED)])
    if powers.flags.c_contiguous:
        np.matmul(table, powers[:-1].reshape(_SHARED - 1, -1), out=mixed.reshape(_SHARED, -1))
    else:
        np.einsum("bk,kcij->bcij", table, powers[:-1], out=mixed)
    for number in range(_SHARED):
        np.einsum("cii->ci", mixed[number])[:] += weights[_SHARED * number]
    found = mixed[-1]
    np.multiply(powers[-1], weights[-1], out=spare)
    found += spare
    for number in range(_SHARED - 2, -1, -1):
        np.matmul(found, powers[-1], out=spare)
        found, spare = spare, found
        found += mixed[number]
    return found, spare


def _held(moves: Floats) -> Floats:
    """Bring the rows of a stack of matrices back to sum 1, in place."""
    diagonal = np.einsum("cii->ci", moves)
    kept = diagonal.copy()
    diagonal[:] = 0.0
    off = _row_sums(moves)
    diagonal[:] = np.where(off < 0.5, 1.0 - off, kept)
    off += diagonal
    moves /= off[:, :, None]
    return moves


def _poisson(expected: Fraction, far: int) -> _Poisson:
    """Return the chances of exactly k and of more than k jumps, k = 0, 1, ...; each rounded once or twice.

    As many terms are taken as are likely, and `far` more.
    """
    if expected == 0:
        return [1.0], [0.0]
    mean = float(expected)
    terms = (5 if expected <= 1 else math.ceil(mean + 12.0 * math.sqrt(mean))) + far
    none = math.exp(-mean) * (1.0 - float(expected - Fraction(mean)))
    ratios, ratio = [Fraction(1)], Fraction(1)
    for k in range(1, 2 * terms):
        ratio = ratio * expected / k
        ratios.append(ratio)
    chances = [none * float(each) for each in ratios]
    beyond, tail = [0.0] * len(chances), 0.0
    for k in range(len(chances) - 1, 0, -1):
        tail += chances[k]
        beyond[k - 1] = tail
    return chances[:terms], beyond[:terms]
