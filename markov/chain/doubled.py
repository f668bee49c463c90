"""Double-double arithmetic on non-negative arrays, each operation with a derived relative error.

A number is an unevaluated sum ``high + low`` of two floats, normalised so that ``high`` is the float nearest to the
sum; hence ``|low| <= u high`` with ``u = 2**-53``.  Write ``w = u**2 = 2**-106``.  All values are non-negative
(``low`` may be negative), so sums lose nothing and relative errors add up along a computation instead of blowing up.

Each constant below is a count of roundings, given as a multiple of ``w``; terms of order ``u**3`` are covered by
rounding each count up to the next whole number.

``add``       ``(s, e) = TwoSum(xh, yh)``, ``v = fl(e + fl(xl + yl))``.  ``|xl + yl| <= u (xh + yh)`` rounds by at most
              ``w (xh + yh)``; ``|e + ...| <= 2u (xh + yh)`` rounds by at most ``2w``.  Sum 3, stated **4**.
``multiply``  ``(p, e) = TwoProduct(xh, yh)`` exactly, ``|e| <= u p``.  ``xh yl`` and ``xl yh`` round by ``w`` each,
              their sum (``<= 2u``) by ``2w``, adding ``e`` (``<= 3u``) by ``3w``; ``xl yl`` is dropped: ``w``.  Sum
              8, stated **9**.
``divide``    ``q = fl(xh / yh)``; ``xh - q yh`` is a float (Dekker), at most ``u xh``.  ``q yl`` rounds by ``w``,
              ``xl - q yl`` by ``2w``, the remainder (``<= 3u``) by ``3w``, its quotient by ``3w``, and dividing by
              ``yh`` in place of ``y`` costs ``3w``.  Sum 12, stated **13**.
``total``     a tree of height ``h = ceil(log2 k)`` of additions: **4 h**.
``run_totals``  sums over many short runs in a few passes, see `run_error`.
``product``   matrix product over k terms, see `product_error`.

Underflow: with no operand above 1e290 nothing overflows (splitting multiplies by ``2**27 + 1``).  Where a partial
product falls under 1e-290 its low part is no longer exact; each elementary product is then off by at most `UNDERFLOW`
absolutely. Callers either carry that absolute term or refuse such values.

Source: T. J. Dekker, A floating-point technique for extending the available precision, Numer. Math. 18 (1971);
T. Ogita, S. M. Rump, S. Oishi, Accurate sum and dot product, SIAM J. Sci. Comput. 26 (2005).  The counts are derived
here.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: Relative error of rounding to the nearest float.
UNIT = 2.0**-53
#: The unit in which errors of double-double operations are counted.
W = 2.0**-106
ADD = 4 * W
MULTIPLY = 9 * W
DIVIDE = 13 * W
#: Largest absolute error that underflow adds to one elementary product (eight roundings of subnormal numbers).
UNDERFLOW = 8 * 2.0**-1074
#: Beyond these sizes the operations do not hold what they state.
LARGEST = 1e290

_SPLITTER = 134217729.0  # 2**27 + 1
_BLOCK = 24576  # elements of one block of a matrix product: a handful of such arrays stay in the cache
_LONGEST_RUN = 64  # terms; the error of `run_totals` grows with the square of this
_LIST_BLOCK = 1 << 15  # elements of one block of `total`
_RUN_BLOCK = 1 << 15  # elements of one block of `run_totals`


class Doubled(NamedTuple):
    """Non-negative numbers as unevaluated sums of two floats; both arrays have one shape."""

    high: Floats
    low: Floats

    def at(self, key: Any) -> Doubled:
        """Return the entries that `key` selects."""
        return Doubled(self.high[key], self.low[key])

    def fraction(self, *key: int) -> Fraction:
        """Return one entry as an exact fraction."""
        return Fraction(float(self.high[key])) + Fraction(float(self.low[key]))


def plain(values: Floats | float) -> Doubled:
    """Return floats as double-doubles, exact."""
    high = np.array(values, dtype=np.float64)
    return Doubled(high, np.zeros_like(high))


def exact(values: Sequence[Fraction]) -> Doubled:
    """Return fractions as double-doubles; relative error at most ``w`` where nothing underflows."""
    high = [float(value) for value in values]
    low = [float(value - Fraction(part)) for value, part in zip(values, high, strict=True)]
    return Doubled(np.array(high, dtype=np.float64), np.array(low, dtype=np.float64))


def zeros(*shape: int) -> Doubled:
    """Return an array of zeros."""
    return Doubled(np.zeros(shape), np.zeros(shape))


def rounded(x: Doubled) -> Floats:
    """Return the nearest floats: relative error at most ``u``."""
    return x.high + x.low


def two_sum(a: Floats, b: Floats) -> tuple[Floats, Floats]:
    """Return ``fl(a + b)`` with its error, exact for all floats (Knuth)."""
    s = a + b
    t = s - a
    return s, (a - (s - t)) + (b - t)


def _quick_two_sum(a: Floats, b: Floats) -> Doubled:
    """Return ``a + b`` normalised, exact where ``|a| >= |b|`` or a is 0."""
    s = a + b
    return Doubled(s, b - (s - a))


def split(a: Floats) -> tuple[Floats, Floats]:
    """Return a as a sum of two floats of at most 26 bits (Veltkamp)."""
    t = _SPLITTER * a
    head = t - (t - a)
    return head, a - head


def two_product(a: Floats, b: Floats) -> tuple[Floats, Floats]:
    """Return ``fl(a b)`` with its error, exact where nothing under- or overflows (Dekker)."""
    p = a * b
    a1, a2 = split(a)
    b1, b2 = split(b)
    return p, (((a1 * b1 - p) + a1 * b2) + a2 * b1) + a2 * b2


def add(x: Doubled, y: Doubled) -> Doubled:
    """Return ``x + y``; relative error at most ``4 w``."""
    s, e = two_sum(x.high, y.high)
    return _quick_two_sum(s, e + (x.low + y.low))


def multiply(x: Doubled, y: Doubled) -> Doubled:
    """Return ``x y`` entry by entry; relative error at most ``9 w``."""
    p, e = two_product(x.high, y.high)
    return _quick_two_sum(p, e + (x.high * y.low + x.low * y.high))


def divide(x: Doubled, y: Doubled) -> Doubled:
    """Return ``x / y`` entry by entry, y > 0; relative error at most ``13 w``."""
    q = x.high / y.high
    p, e = two_product(q, y.high)
    rest = ((x.high - p) - e) + (x.low - q * y.low)
    return _quick_two_sum(q, rest / y.high)


def difference(x: Doubled, y: Doubled) -> Doubled:
    """Return ``x - y``, which may be negative; ABSOLUTE error at most ``4 w (x + y)``, by the count of `add`."""
    s, e = two_sum(x.high, -y.high)
    s, e = two_sum(s, e + (x.low - y.low))
    return Doubled(s, e)


def scale(x: Doubled, power: int) -> Doubled:
    """Return ``x * 2**power``, exact where nothing under- or overflows."""
    return Doubled(np.ldexp(x.high, power), np.ldexp(x.low, power))


def total(x: Doubled, axis: int = 0) -> Doubled:
    """Return sums along one axis of length k; relative error at most ``4 w ceil(log2 k)``."""
    high, low = np.moveaxis(x.high, axis, 0), np.moveaxis(x.low, axis, 0)
    count = high.shape[0]
    if count > _LIST_BLOCK and high.ndim == 1:
        # A power of two at a time, so the tree is as high as without blocks.
        blocks = [slice(begin, begin + _LIST_BLOCK) for begin in range(0, count, _LIST_BLOCK)]
        sums = [total(Doubled(high[block], low[block])) for block in blocks]
        high, low = np.array([part.high for part in sums]), np.array([part.low for part in sums])
        count = len(sums)
    if count == 0:
        return zeros(*high.shape[1:])
    while count > 1:
        half = count // 2
        part = add(Doubled(high[:half], low[:half]), Doubled(high[half : 2 * half], low[half : 2 * half]))
        if count % 2:
            high = np.concatenate((part.high, high[2 * half :]))
            low = np.concatenate((part.low, low[2 * half :]))
        else:
            high, low = part
        count = half + count % 2
    return Doubled(high[0], low[0])


def total_error(count: int) -> float:
    """Return the relative error bound of `total` and `totals` over at most `count` terms."""
    return ADD * max(0, count - 1).bit_length()


def exact_total(high: Floats, low: Floats) -> tuple[float, float]:
    """Return the sum of one list of double-doubles; relative error at most ``w`` (two correctly rounded sums)."""
    parts = [*high.tolist(), *low.tolist()]
    first = math.fsum(parts)
    parts.append(-first)
    return first, math.fsum(parts)


def totals(x: Doubled, owner: NDArray[np.integer[Any]], count: int) -> Doubled:
    """Return the sum of the entries of each owner.

    Parameters
    ----------
    x : Doubled[m]
        Terms, those of one owner next to each other.
    owner : int[m]
        Ascending numbers in ``0 .. count - 1``.
    count : int
        Number of owners; one without terms gets 0.

    Returns
    -------
    Doubled[count]
        Relative error at most `total_error` of the longest list: neighbours are added in pairs until one is left.
    """
    high, low = x
    owner = np.asarray(owner)
    while owner.size > 1:
        new = np.empty(owner.size, dtype=bool)
        new[0] = True
        np.not_equal(owner[1:], owner[:-1], out=new[1:])
        if new.all():
            break
        firsts = np.flatnonzero(new)
        rank = np.arange(owner.size) - firsts[np.cumsum(new) - 1]
        left = np.flatnonzero(rank % 2 == 0)
        paired = np.zeros(left.size, dtype=bool)
        inside = left + 1 < owner.size
        paired[inside] = owner[left[inside] + 1] == owner[left[inside]]
        pick = left[paired]
        summed = add(Doubled(high[pick], low[pick]), Doubled(high[pick + 1], low[pick + 1]))
        high, low, owner = high[left], low[left], owner[left]
        high[paired], low[paired] = summed
    result = zeros(count)
    result.high[owner], result.low[owner] = high, low
    return result


def run_totals(x: Doubled, pointers: NDArray[np.integer[Any]]) -> Doubled:
    """Return the sums of runs of neighbours, like `totals`, quickly where there are many short runs.

    Parameters
    ----------
    x : Doubled[m]
        Terms, not negative.
    pointers : int[count + 1]
        Run i has the terms ``pointers[i] .. pointers[i + 1] - 1``, an empty one the sum 0.

    Returns
    -------
    Doubled[count]
        Relative error at most `run_error` of the longest run.
    """
    count = pointers.size - 1
    result = zeros(count)
    for first, last in run_blocks(pointers, _RUN_BLOCK):
        here = slice(int(pointers[first]), int(pointers[last]))
        summed = _runs(x.at(here), pointers[first : last + 1] - here.start)
        result.high[first:last], result.low[first:last] = summed
    return result


def run_blocks(pointers: NDArray[np.integer[Any]], most: int) -> Iterator[tuple[int, int]]:
    """Cut runs of neighbours into blocks of about `most` terms; yields the first run of each and the one after."""
    count, first = pointers.size - 1, 0
    while first < count:
        last = int(np.searchsorted(pointers, pointers[first] + most, side="right")) - 1
        last = min(count, max(first + 1, last))
        yield first, last
        first = last


def _runs(x: Doubled, pointers: NDArray[np.integer[Any]]) -> Doubled:
    result = zeros(pointers.size - 1)
    lengths = np.diff(pointers)
    filled = np.flatnonzero(lengths)
    if not filled.size:
        return result
    lengths = lengths[filled]
    if int(lengths.max()) > _LONGEST_RUN:
        owner = np.repeat(np.arange(result.high.size), np.diff(pointers))
        return totals(x, owner, result.high.size)
    starts = pointers[filled]
    _, exponent = np.frexp(np.add.reduceat(x.high, starts))
    bias = np.repeat(np.ldexp(1.0, exponent + 1), lengths)
    lead = bias + x.high
    lead -= bias
    rest = np.subtract(x.high, lead, out=bias)
    rest += x.low
    result.high[filled], result.low[filled] = _quick_two_sum(
        np.add.reduceat(lead, starts), np.add.reduceat(rest, starts)
    )
    return result


def run_error(longest: int) -> float:
    """Return the relative error bound of `run_totals` over at most `longest` terms.

    Let a run have k terms ``h_j + l_j`` with the sum S of the ``h_j``, s its float sum, and ``b = 2**(e + 1)`` for
    ``2**(e - 1) <= s < 2**e``; so ``b <= 4 s``.  The part ``q_j = fl(fl(b + h_j) - b)`` is a multiple of ``u b``, at
    most ``u b`` from ``h_j``, and ``r_j = h_j - q_j`` is a float.  All partial sums of the ``q_j`` are multiples of
    ``u b`` up to ``S + k u b < b``, so they are exact.  The rests ``r_j + l_j`` are together at most ``k u b + u S``;
    forming them rounds by u, their sum by ``(k - 1) u``, together ``k w (k b + S) <= k w (4 k + 1) S`` up to terms of
    order ``k u`` times that.  Stated with ``4 k + 2``.  Runs of more than 64 terms are left to `totals`.
    """
    short = min(longest, _LONGEST_RUN)
    return max(total_error(longest), short * (4 * short + 2) * W)


def product(x: Doubled, y: Doubled) -> Doubled:
    """Return the matrix product ``x y`` of non-negative matrices.

    Parameters
    ----------
    x : Doubled[r, k]
    y : Doubled[k, c]

    Returns
    -------
    Doubled[r, c]
        Entrywise relative error at most `product_error(k)`, plus at most ``k UNDERFLOW`` absolutely.
    """
    rows, inner = x.high.shape
    columns = y.high.shape[1]
    result = zeros(rows, columns)
    if inner == 0 or rows == 0 or columns == 0:
        return result
    # No library product for the cross terms: its threads cost more than they save beside other work, and it sums in
    # an order with a larger bound.
    x0, x1, x2, x3 = (np.ascontiguousarray(part.T)[:, :, None] for part in (x.high, *split(x.high), x.low))
    y1, y2 = (part[:, None, :] for part in split(y.high))
    y0, y3 = y.high[:, None, :], y.low[:, None, :]
    step = max(1, _BLOCK // (inner * columns))
    shape = (inner, min(step, rows), columns)
    main, rest, work = np.empty(shape), np.empty(shape), np.empty(shape)
    for begin in range(0, rows, step):
        end = min(rows, begin + step)
        p, e, q = main[:, : end - begin], rest[:, : end - begin], work[:, : end - begin]
        a1, a2 = x1[:, begin:end], x2[:, begin:end]
        np.multiply(x0[:, begin:end], y0, out=p)
        np.multiply(a1, y1, out=e)
        np.subtract(e, p, out=e)
        for left, right in ((a1, y2), (a2, y1), (a2, y2), (x0[:, begin:end], y3), (x3[:, begin:end], y0)):
            np.multiply(left, right, out=q)
            np.add(e, q, out=e)
        count = inner
        while count > 1:
            half = count // 2
            other = slice(count - half, count)  # the middle one of an odd count waits for the next round
            s, t = q[:half], q[half : 2 * half]
            np.add(p[:half], p[other], out=s)
            np.subtract(s, p[:half], out=t)
            np.subtract(p[other], t, out=p[other])
            np.subtract(s, t, out=t)
            np.subtract(p[:half], t, out=p[:half])
            np.add(e[:half], e[other], out=e[:half])
            np.add(p[:half], p[other], out=p[:half])
            np.add(e[:half], p[:half], out=e[:half])
            p[:half] = s
            count -= half
        result.high[begin:end], result.low[begin:end] = _quick_two_sum(p[0], e[0])
    return result


def product_error(inner: int) -> float:
    """Return the entrywise relative error bound of `product` over `inner` terms.

    Let ``c = sum xh yh``, ``h`` the height of the tree over k terms.  The low parts of one term, the product's error
    and two cross products, are each at most ``u`` times it; rounding the cross products costs ``2 w``, adding the
    three ``5 w``. The leading products are summed by TwoSum, whose errors are at most ``u c`` per level, so the low
    terms are at most ``(3 + h) u c`` in all.  At each level they pass two additions: ``2 h (3 + h) w``.  Dropping
    ``xl yl`` costs ``w``. In sum ``2 h**2 + 6 h + 8``, stated with 10 in place of 8.
    """
    height = max(0, inner - 1).bit_length()
    return (2 * height * height + 6 * height + 10) * W
