"""Poisson weights against ball arithmetic."""

from __future__ import annotations

from fractions import Fraction

import flint
import numpy as np
import pytest

from markov.chain import poisson
from markov.errors import NotReached
from tests.chain.balls import rational


def exactly(x: Fraction, k: int) -> flint.arb:
    a = flint.arb(rational(x))
    return (-a).exp() * a**k / flint.arb(k).gamma() / max(k, 1) if k else (-a).exp()


@pytest.mark.parametrize("x", [Fraction(0), Fraction(1, 10**9), Fraction(1, 3), Fraction(1)])
def test_short_weights_keep_thirty_digits(x):
    with flint.ctx.workprec(1500):
        short = poisson.short_poisson(x, 40)
        for k in range(41):
            truth = exactly(x, k)
            found = flint.arb(rational(short.exactly.fraction(k)))
            assert abs(found - truth) <= truth * short.error + flint.arb(2) ** -1060
        beyond = 1 - sum((exactly(x, k) for k in range(11)), flint.arb(0))
        found = flint.arb(rational(short.beyond.fraction(10)))
        assert abs(found - beyond) <= beyond * short.error + flint.arb(2) ** -1060
        missing = 1 - sum((exactly(x, k) for k in range(41)), flint.arb(0))
        assert missing <= short.missing


def test_needed_terms_leave_out_no_more_than_asked():
    for x in (Fraction(1, 1000), Fraction(1, 2), Fraction(1)):
        count = poisson.needed_terms(x, 1e-80)
        short = poisson.short_poisson(x, count)
        assert short.missing <= 1e-80
        assert poisson.needed_terms(x, 1e-20) < count
    assert poisson.needed_terms(Fraction(0), 1e-80) == 0


@pytest.mark.parametrize("x", [Fraction(1, 100), Fraction(7, 2), Fraction(400), Fraction(10**6, 7)])
def test_long_weights_stay_within_their_error(x):
    long = poisson.long_poisson(x, 1e-60)
    with flint.ctx.workprec(600):
        total = flint.arb(0)
        chosen = set(np.linspace(long.first, long.last, 40).astype(int).tolist())
        for k in range(long.first, min(long.last, long.first + 300_000) + 1):
            if k in chosen:
                truth = exactly(x, k)
                assert abs(flint.arb(long.exactly[k - long.first]) - truth) <= truth * long.error
        if long.last - long.first < 3000:
            total = sum((exactly(x, k) for k in range(long.first, long.last + 1)), flint.arb(0))
            assert 1 - total <= long.missing
            surplus = [1 - sum((exactly(x, j) for j in range(k + 1)), flint.arb(0)) for k in (0, int(x), long.last - 1)]
            for k, truth in zip((0, int(x), long.last - 1), surplus, strict=True):
                assert abs(flint.arb(long.beyond[k]) - truth) <= truth * long.error + long.missing
    assert long.error < 1e-10


def test_too_many_jumps_are_declined():
    with pytest.raises(NotReached, match="out of reach"):
        poisson.long_poisson(Fraction(10**10), 1e-60)
