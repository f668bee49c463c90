"""Families of small chains with exact rational rates, for comparison with ball arithmetic."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from markov.chain import Generator, aggregate
from markov.rates import split_exact

Rates = dict[tuple[int, int], Fraction]


@dataclass(frozen=True)
class Chain:
    """A chain with exact rates, its down states and times worth asking for."""

    name: str
    n: int
    rates: Rates
    down: tuple[int, ...]
    times: tuple[Fraction, ...]

    def generator(self, factor: dict[tuple[int, int], Fraction] | None = None) -> Generator:
        """The chain as the room takes it; `factor` disturbs single rates."""
        pairs = sorted(self.rates)
        values = [self.rates[pair] * (factor or {}).get(pair, Fraction(1)) for pair in pairs]
        high, low = split_exact(values)
        return aggregate(self.n, [a for a, _ in pairs], [b for _, b in pairs], high, low)

    @property
    def down_flags(self) -> np.ndarray:
        flags = np.zeros(self.n, dtype=bool)
        flags[list(self.down)] = True
        return flags


def decimal(rng: np.random.Generator, low: float, high: float) -> Fraction:
    """A rate with three digits between two powers of ten, which no float holds exactly."""
    power = rng.uniform(low, high)
    return Fraction(int(rng.integers(100, 1000)), 100) * Fraction(10) ** int(np.floor(power))


def stiff(rng: np.random.Generator, name: str, span: float = 12.0) -> Chain:
    n = int(rng.integers(2, 9))
    rates: Rates = {(i, (i + 1) % n): decimal(rng, 2 - span, 2) for i in range(n)}
    for i in range(n):
        for j in range(n):
            if i != j and rng.random() < 0.35:
                rates[i, j] = decimal(rng, 2 - span, 2)
    return Chain(name, n, rates, (n - 1,), tuple(Fraction(10) ** int(k) for k in rng.integers(-5, 9, 2)))


def pairs_with_crew(rng: np.random.Generator, name: str) -> Chain:
    """k out of n with repair: unavailabilities down to 1e-40."""
    n = int(rng.integers(3, 8))
    fail, repair = decimal(rng, -9, -3), decimal(rng, -2, 1)
    rates: Rates = {}
    for i in range(n - 1):
        rates[i, i + 1] = (n - 1 - i) * fail
        rates[i + 1, i] = min(i + 1, 2) * repair
    return Chain(name, n, rates, (n - 2, n - 1), (Fraction(1, 1000), Fraction(87600), Fraction(10) ** 9))


def nearly_uncoupled(rng: np.random.Generator, name: str) -> Chain:
    rates: Rates = {}
    n = 6
    for block in (range(0, 3), range(3, 6)):
        for i in block:
            for j in block:
                if i != j:
                    rates[i, j] = decimal(rng, -1, 1)
    for _ in range(3):
        i, j = int(rng.integers(0, 3)), int(rng.integers(3, 6))
        rates[i, j] = decimal(rng, -10, -8)
        rates[j, i] = decimal(rng, -10, -8)
    return Chain(name, n, rates, (5,), (Fraction(10), Fraction(10) ** 7, Fraction(10) ** 10))


def cyclic(rng: np.random.Generator, name: str) -> Chain:
    n = int(rng.integers(3, 12))
    rates: Rates = {(i, (i + 1) % n): decimal(rng, -1, 0) for i in range(n)}
    return Chain(name, n, rates, (n - 1,), (Fraction(1, 3), Fraction(25), Fraction(10) ** 4))


def acyclic(rng: np.random.Generator, name: str) -> Chain:
    """Wear without repair: probabilities far below 1e-30 at short times."""
    n = int(rng.integers(4, 9))
    rates: Rates = {(i, i + 1): decimal(rng, -6, -2) for i in range(n - 1)}
    rates[0, n - 1] = decimal(rng, -30, -20)
    return Chain(name, n, rates, (n - 1,), (Fraction(1, 100), Fraction(40), Fraction(10) ** 6))


def loaded(rng: np.random.Generator, name: str) -> Chain:
    """A heavily loaded grid: two queues, failures as frequent as repairs."""
    a, b = int(rng.integers(2, 4)), int(rng.integers(2, 5))
    number = {(i, j): i * b + j for i in range(a) for j in range(b)}
    rates: Rates = {}
    for (i, j), here in number.items():
        for other in ((i + 1, j), (i - 1, j), (i, j + 1), (i, j - 1)):
            if other in number:
                rates[here, number[other]] = decimal(rng, -1, 0)
    return Chain(name, a * b, rates, (a * b - 1,), (Fraction(2), Fraction(1000)))


FAMILIES = (stiff, pairs_with_crew, nearly_uncoupled, cyclic, acyclic, loaded)


def some(count: int, seed: int) -> Iterator[Chain]:
    """A fixed sequence of chains, families in turn."""
    for number in range(count):
        family = FAMILIES[number % len(FAMILIES)]
        rng = np.random.default_rng([seed, number])
        yield family(rng, f"{family.__name__}-{seed}-{number}")
