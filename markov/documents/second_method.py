"""A second way to the same numbers, that shares nothing with the first but the transition table.

The rates of the chain are put into a full matrix and handed to LAPACK: the long run is the solution of the balance
equations, one of them replaced by the sum of all shares; the mean time to the first failure that of the equations of
first passage; the unreliability at a time an entry of the exponential of the matrix, by scaling, squaring and a Padé
approximant (A. H. Al-Mohy and N. J. Higham, A New Scaling and Squaring Algorithm for the Matrix Exponential, SIAM
Journal on Matrix Analysis and Applications 31, 2009, from memory; as scipy has it).  All of this is plain
floating-point arithmetic, with subtraction and without a bound: it is there to agree, not to prove.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov.documents.chains import ReportedChain
from markov.results import Result, Solution
from markov.states import StateSpace

#: States of a chain up to which the second way is gone: for the long run, and for values at a time.
SOLVED_UP_TO = 1_500
AT_A_TIME_UP_TO = 600

#: Digits that two floats can agree in.
_ALL_DIGITS = 15

_Matrix = NDArray[np.float64]


@dataclass(frozen=True)
class Comparison:
    """One result beside the answer of the second method.

    Attributes
    ----------
    result : Result
    other : float
        The answer of the second method.
    """

    result: Result
    other: float

    @property
    def difference(self) -> float:
        """Difference of the two, relative to the first."""
        value = self.result.value or 0.0
        if value == self.other:
            return 0.0
        return abs(self.other - value) / abs(value) if value else math.inf

    @property
    def agreed_digits(self) -> int:
        """How many significant digits the two agree in, 15 at most."""
        if self.difference == 0.0:
            return _ALL_DIGITS
        return min(_ALL_DIGITS, max(0, math.floor(-math.log10(self.difference))))


def comparisons(solution: Solution, chain: ReportedChain) -> tuple[Comparison, ...]:
    """Return results of the system beside the answers of the second method; none where it is not gone.

    Parameters
    ----------
    solution : Solution
    chain : ReportedChain
        The chain of the whole plant.
    """
    space = chain.space
    if chain.number or chain.is_scheduled or space.size > SOLVED_UP_TO:
        return ()
    matrix = _rates(space)
    found = []
    for result in solution.results:
        if result.of is None and result.state is None and result.value is not None:
            other = _other(result, solution, space, matrix)
            if other is not None and math.isfinite(other):
                found.append(Comparison(result, other))
    return tuple(found)


def why_none(solution: Solution, chain: ReportedChain) -> str:
    """Say why no second method was used, where none was."""
    if chain.number:
        return "the plant was solved in independent parts"
    if chain.is_scheduled:
        return "the chain jumps at fixed instants"
    if chain.space.size > SOLVED_UP_TO:
        return f"the chain has more than {SOLVED_UP_TO:,} states"
    return "no result is of a kind that it gives"


def _other(result: Result, solution: Solution, space: StateSpace, matrix: _Matrix) -> float | None:
    if result.measure == "unreliability" and result.at_hours is not None and space.size <= AT_A_TIME_UP_TO:
        return _unreliability(space, matrix, result.at_hours)
    if result.measure == "mean_time_to_first_failure":
        return _first_failure(space, matrix)
    if result.measure in ("steady_state_unavailability", "failures_per_year") and result.at_hours is None:
        shares = _long_run(matrix, space)
        if shares is None:
            return None
        down = ~space.up
        if result.measure == "steady_state_unavailability":
            return float(shares[down].sum())
        return float(shares[~down] @ matrix[~down][:, down].sum(axis=1)) * float(solution.year_hours)
    return None


def _rates(space: StateSpace) -> _Matrix:
    """Return the generator matrix, shape (n, n)."""
    rates = space.kinds.rates.rates
    value = np.array([float(rates[kind.rate].exact) for kind in space.kinds.kinds], np.float64)
    arrows = space.arrows
    moving = arrows.moving
    matrix = np.zeros((space.size, space.size))
    amounts = value[arrows.kind[moving]] * arrows.multiple[moving]
    np.add.at(matrix, (arrows.source[moving], arrows.target[moving]), amounts)
    np.fill_diagonal(matrix, -matrix.sum(axis=1))
    return matrix


def _start(space: StateSpace) -> _Matrix:
    start = np.zeros(space.size)
    for state, chance in space.start:
        start[state] = float(chance)
    return start


def _reachable(matrix: _Matrix, space: StateSpace) -> NDArray[np.bool_]:
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import breadth_first_order

    found = np.zeros(space.size, np.bool_)
    graph = csr_array((matrix > 0).astype(np.int32))
    for state, _ in space.start:
        found[breadth_first_order(graph, state, return_predecessors=False)] = True
    return found


def _long_run(matrix: _Matrix, space: StateSpace) -> _Matrix | None:
    """Return the long-run shares, shape (n,); None where the chain does not end in one class of states."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    inside = _reachable(matrix, space)
    count, label = connected_components(csr_array((matrix > 0).astype(np.int32)), directed=True, connection="strong")
    ends = []
    for each in range(count):
        members = (label == each) & inside
        if members.any() and not (matrix[members][:, ~members] > 0).any():
            ends.append(members)
    if len(ends) != 1:
        return None
    members = ends[0]
    balance = matrix[np.ix_(members, members)].T.copy()
    balance[-1] = 1.0
    right = np.zeros(len(balance))
    right[-1] = 1.0
    shares = np.zeros(space.size)
    found = _solved(balance, right)
    if found is None:
        return None
    shares[members] = found
    return shares


def _first_failure(space: StateSpace, matrix: _Matrix) -> float | None:
    alive = space.up & _reachable(matrix, space)
    if not alive.any() or _start(space)[~alive].any():
        return None
    times = _solved(-matrix[np.ix_(alive, alive)], np.ones(int(alive.sum())))
    return None if times is None else float(_start(space)[alive] @ times)


def _unreliability(space: StateSpace, matrix: _Matrix, time: Fraction) -> float | None:
    from scipy.linalg import expm

    up = space.up
    size = int(up.sum())
    stopped = np.zeros((size + 1, size + 1))
    stopped[:size, :size] = matrix[np.ix_(up, up)]
    stopped[:size, size] = matrix[np.ix_(up, ~up)].sum(axis=1)
    start = np.append(_start(space)[up], _start(space)[~up].sum())
    with np.errstate(all="ignore"):
        return float(start @ expm(stopped * float(time))[:, size])


def _solved(matrix: _Matrix, right: _Matrix) -> _Matrix | None:
    try:
        return np.asarray(np.linalg.solve(matrix, right), np.float64)
    except np.linalg.LinAlgError:
        return None
