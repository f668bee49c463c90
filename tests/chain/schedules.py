"""Small chains with fixed instants, exact, with their truth in ball arithmetic."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

import flint
import numpy as np

from markov.chain import flow
from markov.chain.course import Course, Segment
from markov.chain.jumps import Jump, jump
from markov.rates import split_exact
from tests.chain.balls import rational
from tests.chain.families import Chain, decimal, some

Chances = dict[int, dict[int, Fraction]]
PRECISION = 1400


@dataclass(frozen=True)
class Piece:
    """One segment: which rates, how long, which chances at its end, which rates follow."""

    regime: int
    hours: Fraction
    chances: int | None
    after: int


@dataclass(frozen=True)
class Schedule:
    """Regimes of one chain with the same states; the down states of a chain are those of its regime."""

    name: str
    regimes: tuple[Chain, ...]
    chances: tuple[Chances, ...]
    prefix: tuple[Piece, ...]
    cycle: tuple[Piece, ...]

    @property
    def n(self) -> int:
        return self.regimes[0].n

    @property
    def period(self) -> Fraction:
        return sum((each.hours for each in self.cycle), Fraction(0))

    def jump(self, number: int, factor: Fraction = Fraction(1)) -> Jump:
        """The chances as the room takes them; a factor disturbs the first, and the others make up for it."""
        rows = [(s, t, p) for s, row in sorted(self.chances[number].items()) for t, p in sorted(row.items())]
        if factor != 1:
            source, target, chance = rows[0]
            other = next(k for k, row in enumerate(rows) if k and row[0] == source)
            rows[0] = (source, target, chance * factor)
            rows[other] = (source, rows[other][1], rows[other][2] + chance * (1 - factor))
        high, low = split_exact([p for _, _, p in rows])
        return jump(self.n, [s for s, _, _ in rows], [t for _, t, _ in rows], high, low)

    def course(self, *, stopped: bool = False, factor: Fraction = Fraction(1)) -> Course:
        """Rewards: time down, failures, time; or time alone for a chain stopped at its first failure."""
        made: dict[Piece, Segment] = {}
        generators = [each.generator() for each in self.regimes]
        jumps = [self.jump(number, factor) for number in range(len(self.chances))]
        stay = jump(self.n, [], [], [])
        for piece in (*self.prefix, *self.cycle):
            down, later = self.regimes[piece.regime].down_flags, self.regimes[piece.after].down_flags
            there = stay if piece.chances is None else jumps[piece.chances]
            if stopped:
                rewards, at_jump, error = np.ones((self.n, 1)), np.zeros((self.n, 1)), 0.0
            else:
                failing = flow(generators[piece.regime], ~down, down)
                lost, error = there.passages(~down, later)
                rewards = np.stack([down.astype(float), failing.values, np.ones(self.n)], axis=1)
                at_jump = np.stack([np.zeros(self.n), lost, np.zeros(self.n)], axis=1)
                error = max(error, failing.relative_error or 0.0)
            made[piece] = Segment(
                generators[piece.regime],
                piece.hours,
                None if piece.chances is None else there,
                rewards,
                error,
                at_jump,
                error,
                down if stopped else None,
                later if stopped else None,
            )
        return Course(tuple(made[each] for each in self.prefix), tuple(made[each] for each in self.cycle))

    # --- the truth ---------------------------------------------------------------------------------------------------

    def _exponential(self, regime: int, hours: Fraction, stopped: bool) -> flint.arb_mat:
        """Of n states, then: absorbed or failures, time down or alive, and the integral of the time since begun."""
        chain, n = self.regimes[regime], self.n
        matrix = flint.fmpq_mat(n + 3, n + 3)
        down = set(chain.down)
        for (i, j), rate in chain.rates.items():
            if stopped and i in down:
                continue
            matrix[i, i] -= rational(rate * hours)
            fails = i not in down and j in down
            if fails:
                matrix[i, n] += rational(rate * hours)
            if not (stopped and fails):
                matrix[i, j] += rational(rate * hours)
        for i in range(n):
            if (i not in down) if stopped else (i in down):
                matrix[i, n + 1] = rational(hours)
        matrix[n + 1, n + 2] = rational(hours)
        with flint.ctx.workprec(PRECISION):
            return flint.arb_mat(matrix).exp()

    def matrix(self, piece: Piece, *, stopped: bool, hours: Fraction | None = None) -> flint.arb_mat:
        """A segment with its jump; or a part of it without."""
        n = self.n
        with flint.ctx.workprec(PRECISION):
            run = self._exponential(piece.regime, piece.hours if hours is None else hours, stopped)
            if hours is not None:
                return run
            leap = flint.fmpq_mat(n + 3, n + 3)
            before, after = set(self.regimes[piece.regime].down), set(self.regimes[piece.after].down)
            chances: Chances = {} if piece.chances is None else self.chances[piece.chances]
            for i in range(n):
                for j, p in chances.get(i, {i: Fraction(1)}).items():
                    fails = i not in before and j in after
                    if fails:
                        leap[i, n] += rational(p)
                    if not (stopped and fails):
                        leap[i, j] += rational(p)
            for i in range(n, n + 3):
                leap[i, i] = 1
            return run * flint.arb_mat(leap)

    def whole(self, pieces: Sequence[Piece], *, stopped: bool) -> flint.arb_mat:
        with flint.ctx.workprec(PRECISION):
            product = flint.arb_mat(flint.fmpq_mat(self.n + 3, self.n + 3))
            for i in range(self.n + 3):
                product[i, i] = 1
            for piece in pieces:
                product = product * self.matrix(piece, stopped=stopped)
            return product

    def at(self, time: Fraction, *, stopped: bool) -> flint.arb_mat:
        """States, then failures or absorption, time down or alive, from state 0 at a time."""
        with flint.ctx.workprec(PRECISION):
            row = flint.arb_mat(flint.fmpq_mat(1, self.n + 3))
            row[0, 0] = 1
            pieces = list(self.prefix)
            while True:
                if not pieces:
                    pieces = list(self.cycle)
                piece = pieces.pop(0)
                if time < piece.hours:
                    return row * self.matrix(piece, stopped=stopped, hours=time)
                row, time = row * self.matrix(piece, stopped=stopped), time - piece.hours

    def kept(self) -> list[flint.arb]:
        """The distribution at the beginning of a cycle that the cycle keeps."""
        n = self.n
        with flint.ctx.workprec(PRECISION):
            cycle = self.whole(self.cycle, stopped=False)
            system, right = flint.arb_mat(n, n), flint.arb_mat(n, 1)
            for i in range(n):
                for j in range(n):
                    system[j, i] = cycle[i, j] - (1 if i == j else 0)
            for i in range(n):
                system[n - 1, i] = 1
            right[n - 1, 0] = 1
            solved = system.solve(right)
            return [solved[i, 0] for i in range(n)]

    def first_failure(self) -> tuple[flint.arb, flint.arb]:
        """Mean time to absorption from state 0, and the mean of its square."""
        with flint.ctx.workprec(PRECISION):
            before, long = self.moments(self.prefix)
            cycle, period = self.moments(self.cycle)
            alive = [i for i in range(self.n) if i not in self.regimes[self.cycle[0].regime].down]
            size = len(alive)
            system, right = flint.arb_mat(size, size), flint.arb_mat(size, 1)
            for a, i in enumerate(alive):
                for b, j in enumerate(alive):
                    system[a, b] = (1 if a == b else 0) - cycle[0][i, j]
                right[a, 0] = cycle[1][i]
            mean = system.solve(right)
            for a, i in enumerate(alive):
                later = sum((cycle[0][i, j] * mean[b, 0] for b, j in enumerate(alive)), flint.arb(0))
                right[a, 0] = cycle[2][i] + 2 * flint.arb(rational(period)) * later
            second = system.solve(right)
            ahead = sum((before[0][0, j] * mean[b, 0] for b, j in enumerate(alive)), flint.arb(0))
            squared = sum((before[0][0, j] * second[b, 0] for b, j in enumerate(alive)), flint.arb(0))
            return before[1][0] + ahead, before[2][0] + 2 * flint.arb(rational(long)) * ahead + squared

    def moments(
        self, pieces: Sequence[Piece]
    ) -> tuple[tuple[flint.arb_mat, list[flint.arb], list[flint.arb]], Fraction]:
        """Moves, time alive and mean square of the time alive over some pieces from each state, and their length."""
        n, since = self.n, Fraction(0)
        moves = flint.arb_mat(flint.fmpq_mat(n, n))
        for i in range(n):
            moves[i, i] = 1
        alive, squares = [flint.arb(0)] * n, [flint.arb(0)] * n
        for piece in pieces:
            run = self._exponential(piece.regime, piece.hours, True)
            leap = self.matrix(piece, stopped=True)
            hours, start = flint.arb(rational(piece.hours)), flint.arb(rational(since))
            for i in range(n):
                for j in range(n):
                    lived, twice = run[j, n + 1], run[j, n + 2]
                    alive[i] = alive[i] + moves[i, j] * lived
                    squares[i] = squares[i] + 2 * moves[i, j] * ((start + hours) * lived - twice)
            square = flint.arb_mat(flint.fmpq_mat(n, n))
            for i in range(n):
                for j in range(n):
                    square[i, j] = leap[i, j]
            moves, since = moves * square, since + piece.hours
        return (moves, alive, squares), since


def _chances(rng: np.random.Generator, n: int, moved: Sequence[int]) -> Chances:
    found: Chances = {}
    for state in moved:
        targets = [int(t) for t in rng.choice(n, size=min(n, int(rng.integers(2, 4))), replace=False)]
        shares = [Fraction(int(rng.integers(1, 1000)), 1000) for _ in targets[1:]]
        shares = [share / len(targets) for share in shares]
        found[state] = dict(zip(targets, [1 - sum(shares, Fraction(0)), *shares], strict=True))
    return found


def random_schedules(count: int, seed: int) -> Iterator[Schedule]:
    """A fixed sequence of schedules over chains of all families."""
    for number, chain in enumerate(some(count, seed)):
        rng = np.random.default_rng([seed, number, 7])
        n = chain.n
        slower = {pair: rate * decimal(rng, -1, 1) for pair, rate in chain.rates.items()}
        down = tuple(sorted({n - 1, int(rng.integers(max(1, n - 2), n))}))
        regimes = (chain, Chain(f"{chain.name}-second", n, slower, down, chain.times))
        fastest = max(float(each.generator().exits.high.max()) for each in regimes)
        unit = Fraction(10) ** int(np.floor(np.log10(3000.0 / fastest)))
        chances = (_chances(rng, n, range(1, n)), _chances(rng, n, [n - 1]))
        steps = [(0, 0), (1, 1), (0, None), (0, 0)]
        hours = [unit * decimal(rng, -2, 0) for _ in steps]
        # Every other schedule passes its first step once; the others repeat it.
        cut = number % 2
        follows = [1, 2, 3, cut]
        pieces = tuple(Piece(regime, hours[k], leap, steps[follows[k]][0]) for k, (regime, leap) in enumerate(steps))
        yield Schedule(f"schedule of {chain.name}", regimes, chances, pieces[:cut], pieces[cut:])
