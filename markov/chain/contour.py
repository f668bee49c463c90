"""Contours of the inverse Laplace transform: float nodes whose scalar error over one window is proven.

A transform ``f(z)`` is turned into a function of time on a window [T, 8 T], T a power of two, by the midpoint rule on
one branch of a hyperbola, ``zeta(x) = a (1 + sin(i x - phi))``, ``x = (j + 1/2) h``, ``omega = h zeta'(x) / (2 pi i)``:

    f~(s) = sum_j 2 Re( omega_j / T exp(zeta_j s / T) f(zeta_j / T) ),     j = 0 .. N - 1.

Two scalar errors matter, both suprema over ``sigma = s / T`` in [1, 8] for the nodes as the floats that they are and
for exact exponentials:

* `step_error`: ``|sum_j 2 Re(omega_j / zeta_j exp(zeta_j sigma)) - 1|``, the inverse of 1/z;
* `impulse_error`: ``|sum_j 2 Re(omega_j exp(zeta_j sigma))|``, the inverse of 1, which is 0 after time 0.

The nodes are formed in integer arithmetic, so they are the same floats on every machine; `tests/chain/test_windows.py`
proves every entry of `ERRORS` again in ball arithmetic for just these floats.

Source: J. A. C. Weideman, L. N. Trefethen, Parabolic and hyperbolic contours for computing the Bromwich integral,
Math. Comp. 76 (2007), for the family of contours (from memory); the parameters were optimised for this window.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from markov.chain.bounds import Floats

#: A window reaches from its power of two to this many times it.
RATIO = 8

#: a, phi, h of each number of nodes.
_SHAPES: dict[int, tuple[float, float, float]] = {
    24: (2.6037533119759004, 0.836117428456451, 0.12838848683518356),
    28: (4.149452811040201, 0.9082872627834473, 0.09906689402361007),
    32: (4.30721697454449, 0.891973985295723, 0.08993683035100573),
    40: (2.233399406110701, 0.7560487976965711, 0.09254202787273197),
    48: (0.7252743868143758, 0.6149018658860892, 0.10392629439358039),
}
#: Proven `step_error` with `impulse_error` of each number of nodes.
ERRORS: dict[int, tuple[float, float]] = {
    24: (1.0e-10, 1.8e-9),
    28: (1.0e-12, 6.3e-11),
    32: (4.4e-14, 1.5e-12),
    40: (3.7e-15, 8.0e-14),
    48: (2.2e-15, 2.8e-14),
}

_BITS = 200
_ONE = 1 << _BITS
_PI = Fraction(31415926535897932384626433832795028841971693993751058209749445923, 10**64)
#: Every coefficient below is off by at most this absolutely, beside its rounding to floats.
COEFFICIENT_ERROR = 1e-40

Fixed = tuple[int, int]  # a complex number in units of 2**-_BITS


def _fixed(x: Fraction | float) -> int:
    x = Fraction(x)
    return (x.numerator << _BITS) // x.denominator


def _times(a: Fixed, b: Fixed) -> Fixed:
    return (a[0] * b[0] - a[1] * b[1]) >> _BITS, (a[0] * b[1] + a[1] * b[0]) >> _BITS


def _over(a: Fixed, b: Fixed) -> Fixed:
    length = (b[0] * b[0] + b[1] * b[1]) >> _BITS
    real, imaginary = _times(a, (b[0], -b[1]))
    return (real << _BITS) // length, (imaginary << _BITS) // length


def exponential(z: Fixed) -> Fixed:
    """Return ``exp(z)`` for ``|z| <= 2**10``; absolute error under ``2**-150 max(1, |exp(z)|)``.

    The series of ``z / 2**k``, at most 1/256 long, is off by some units of 2**-200; each of the k <= 18 squarings
    doubles the relative error and adds a unit.
    """
    halvings = max(0, max(abs(z[0]), abs(z[1])).bit_length() - _BITS + 9)
    small = (z[0] >> halvings, z[1] >> halvings)
    term, result = (_ONE, 0), (_ONE, 0)
    for k in range(1, 60):
        real, imaginary = _times(term, small)
        term = (real // k, imaginary // k)
        if abs(term[0]) <= 1 and abs(term[1]) <= 1:
            break
        result = (result[0] + term[0], result[1] + term[1])
    for _ in range(halvings):
        result = _times(result, result)
    return result


def _floats(values: list[Fixed]) -> NDArray[np.complex128]:
    return np.array([complex(float(Fraction(re, _ONE)), float(Fraction(im, _ONE))) for re, im in values])


@dataclass(frozen=True, eq=False)
class Contour:
    """N nodes with weights, for windows that begin at 1.

    Attributes
    ----------
    nodes, weights : complex128[N]
        zeta and omega.
    step_error, impulse_error : float
        See the file.
    """

    nodes: NDArray[np.complex128]
    weights: NDArray[np.complex128]
    step_error: float
    impulse_error: float

    @property
    def size(self) -> int:
        """Number of nodes."""
        return int(self.nodes.size)

    @cached_property
    def _exact(self) -> tuple[list[Fixed], list[Fixed]]:
        nodes = [(_fixed(z.real), _fixed(z.imag)) for z in self.nodes.tolist()]
        return nodes, [(_fixed(w.real), _fixed(w.imag)) for w in self.weights.tolist()]

    @lru_cache(maxsize=64)  # noqa: B019 (contours live as long as the program)
    def _exponentials(self, sigma: Fraction) -> list[Fixed]:
        nodes, _ = self._exact
        p, q = sigma.numerator, sigma.denominator
        return [exponential((real * p // q, imaginary * p // q)) for real, imaginary in nodes]

    def at(self, sigma: Fraction) -> NDArray[np.complex128]:
        """Return ``omega exp(zeta sigma)``, each part rounded once and off by `COEFFICIENT_ERROR` beside."""
        _, weights = self._exact
        return _floats([_times(w, e) for w, e in zip(weights, self._exponentials(sigma), strict=True)])

    def between(self, sigma: Fraction) -> NDArray[np.complex128]:
        """Return ``omega (exp(zeta sigma) - exp(zeta)) / zeta``, the integral of `at` from 1, with errors as there."""
        nodes, weights = self._exact
        first, last = self._exponentials(Fraction(1)), self._exponentials(sigma)
        return _floats(
            [
                _over(_times(w, (e[0] - f[0], e[1] - f[1])), z)
                for z, w, e, f in zip(nodes, weights, last, first, strict=True)
            ]
        )

    def steps(self, sigma: Fraction) -> NDArray[np.complex128]:
        """Return ``omega exp(zeta sigma) / zeta``, with errors as in `at`."""
        nodes, weights = self._exact
        return _floats(
            [_over(_times(w, e), z) for z, w, e in zip(nodes, weights, self._exponentials(sigma), strict=True)]
        )

    def lengths(self, sigma: Fraction) -> Floats:
        """Return upper bounds of ``2 |omega|`` times the integral of ``|exp(zeta s)|`` over [1, sigma]."""
        x, span = self.nodes.real, float(sigma - 1)
        grown = np.where(np.abs(x * span) < 1e-3, span * np.exp(np.abs(x * span)), 0.0)
        usual = grown == 0.0
        grown[usual] = np.expm1(x[usual] * span) / x[usual]
        found: Floats = 2.0 * np.abs(self.weights) * np.exp(x) * grown * (1.0 + 1e-9)
        return found

    def largest(self, sigma: Fraction) -> Floats:
        """Return upper bounds of ``2 |omega / zeta|`` times the largest ``|exp(zeta s)|`` over [1, sigma]."""
        top = np.exp(np.maximum(self.nodes.real, self.nodes.real * float(sigma)))
        found: Floats = 2.0 * np.abs(self.weights) / np.abs(self.nodes) * top * (1.0 + 1e-9)
        return found


@lru_cache(maxsize=16)
def contour(size: int) -> Contour:
    """Return the contour of one of the sizes in `ERRORS`."""
    a, phi, h = (_fixed(x) for x in _SHAPES[size])
    turned = exponential((0, phi))
    cosine, sine = turned
    nodes, weights = [], []
    for j in range(size):
        x = (2 * j + 1) * h >> 1
        grown, shrunk = exponential((x, 0))[0], exponential((-x, 0))[0]
        cosh, sinh = (grown + shrunk) >> 1, (grown - shrunk) >> 1
        nodes.append((a * (_ONE - (sine * cosh >> _BITS)) >> _BITS, a * (cosine * sinh >> _BITS) >> _BITS))
        step = int(Fraction(a * h, _ONE) / (2 * _PI))
        weights.append((step * (cosine * cosh >> _BITS) >> _BITS, step * (sine * sinh >> _BITS) >> _BITS))
    return Contour(_floats(nodes), _floats(weights), *ERRORS[size])


SIZES = tuple(sorted(ERRORS))
