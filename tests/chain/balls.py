"""Outside truth: exact rational linear algebra, and matrix exponentials in ball arithmetic."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

import flint

from markov.chain import Enclosure
from tests.chain.families import Chain


def rational(x: Fraction) -> flint.fmpq:
    return flint.fmpq(x.numerator, x.denominator)


def fraction(x: flint.fmpq) -> Fraction:
    return Fraction(int(x.p), int(x.q))


def q_matrix(chain: Chain, members: Sequence[int] | None = None) -> flint.fmpq_mat:
    """The generator matrix on some states; rates out of them stay in the diagonal."""
    chosen = list(range(chain.n)) if members is None else list(members)
    place = {state: number for number, state in enumerate(chosen)}
    matrix = flint.fmpq_mat(len(chosen), len(chosen))
    for (i, j), rate in chain.rates.items():
        if i in place:
            matrix[place[i], place[i]] -= rational(rate)
            if j in place:
                matrix[place[i], place[j]] += rational(rate)
    return matrix


def stationary(chain: Chain) -> list[Fraction]:
    matrix = q_matrix(chain).transpose()
    for j in range(chain.n):
        matrix[0, j] = 1
    right = flint.fmpq_mat(chain.n, 1)
    right[0, 0] = 1
    solved = matrix.solve(right)
    return [fraction(solved[i, 0]) for i in range(chain.n)]


def before_absorption(chain: Chain, stopped: Sequence[int], right: dict[int, Fraction]) -> dict[int, Fraction]:
    """Solve ``-T z = right`` on the states that are not stopped."""
    members = [state for state in range(chain.n) if state not in set(stopped)]
    column = flint.fmpq_mat(len(members), 1)
    for number, state in enumerate(members):
        column[number, 0] = rational(right.get(state, Fraction(0)))
    solved = (-q_matrix(chain, members)).solve(column)
    return {state: fraction(solved[number, 0]) for number, state in enumerate(members)}


def exponential(chain: Chain, time: Fraction, stopped: Sequence[int] = (), reward: Sequence[int] = ()) -> flint.arb_mat:
    """``exp(Q t)`` with the `stopped` states absorbing and one more column: time spent in the `reward` states."""
    n = chain.n
    matrix = flint.fmpq_mat(n + 1, n + 1)
    for (i, j), rate in chain.rates.items():
        if i not in set(stopped):
            matrix[i, i] -= rational(rate * time)
            matrix[i, j] += rational(rate * time)
    for i in reward:
        matrix[i, n] = rational(time)
    largest = max(float(-fraction(matrix[i, i])) for i in range(n))
    # An exponential of norm x loses about as many bits as squarings it takes; tiny entries need their own.
    with flint.ctx.workprec(900 + 4 * int(largest).bit_length()):
        return flint.arb_mat(matrix).exp()


def total(terms: Iterable[flint.arb]) -> flint.arb:
    """A sum at full precision; sums at the usual 53 bits would blur the truth."""
    with flint.ctx.workprec(1200):
        return sum(terms, flint.arb(0))


def mixed(before: Sequence[flint.arb], after: Sequence[flint.arb]) -> flint.arb:
    """A sum of products at full precision."""
    with flint.ctx.workprec(1200):
        return sum((a * b for a, b in zip(before, after, strict=True)), flint.arb(0))


def differ(one: flint.arb, other: flint.arb, least: float) -> bool:
    """Whether two truths are apart by at least a relative distance, and not too small to matter."""
    with flint.ctx.workprec(1200):
        return bool(other > 1e-60) and bool(abs(one - other) > least * other)


def holds(found: Enclosure, truth: flint.arb | Fraction) -> bool:
    """Whether the interval certainly contains the truth."""
    assert found.lower is not None
    assert found.upper is not None
    lower, upper = Fraction(found.lower), Fraction(found.upper)
    if isinstance(truth, Fraction):
        return lower <= truth <= upper
    with flint.ctx.workprec(1200):
        return bool(flint.arb(rational(lower)) <= truth) and bool(truth <= flint.arb(rational(upper)))


def sharp(truth: flint.arb) -> bool:
    """Whether the ball is narrow enough to be called a truth (30 digits of the number itself)."""
    return bool(truth.rel_accuracy_bits() >= 100) or bool(truth == 0)
