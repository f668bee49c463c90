"""Shares of a failure rate by which common causes strike sets of items.

Beta factor, multiple Greek letters and alpha factors as in A. Mosleh et al., Guidelines on Modeling Common-Cause
Failures in Probabilistic Risk Assessment, NUREG/CR-5485, 1998, section 5 and appendix A (formulas from memory, held by
published values in the tests).
"""

from __future__ import annotations

from fractions import Fraction
from math import comb

from markov.model import CommonCause
from markov.quantities import Quantity
from markov.rates import Factor


def shares_of(cause: CommonCause, name: str, items: int) -> tuple[tuple[int, Factor], ...]:
    """Return, for each size from 2 on, the share of the failure rate that strikes each set of that size.

    Parameters
    ----------
    cause : CommonCause
    name : str
    items : int
        Number of items that the cause may strike, m.
    """
    if cause.beta is not None:
        return ((items, _named(cause.beta, f"β({name})", f"beta factor of {name}", name)),)
    if cause.greek_letters:
        return _greek(cause.greek_letters, name, items)
    return _alpha(cause.alpha_factors or (), cause.testing == "staggered", name, items)


def detected_shares_of(cause: CommonCause, name: str, items: int) -> tuple[tuple[int, Factor], ...] | None:
    """Return the shares for detected faults, where they have a beta factor of their own."""
    if cause.beta_detected is None:
        return None
    return ((items, _named(cause.beta_detected, f"βd({name})", f"beta factor of {name}, detected faults", name)),)


def struck_share(shares: tuple[tuple[int, Factor], ...], items: int) -> Fraction:
    """Return the share of an item's failure rate that strikes it together with others."""
    return sum((comb(items - 1, size - 1) * share.exact for size, share in shares), Fraction(0))


def _named(share: Quantity, symbol: str, meaning: str, name: str) -> Factor:
    return Factor(share.name or symbol, share.exact, meaning, f"common_causes.{name}", is_share=True, quantity=share)


def _greek(letters: tuple[Quantity, ...], name: str, items: int) -> tuple[tuple[int, Factor], ...]:
    words = ["β", "γ", "δ", "ε", "ζ"]
    symbols = [each.name or (words[at] if at < len(words) else f"ρ{at + 2}") for at, each in enumerate(letters)]
    found = []
    for size in range(2, min(len(letters) + 1, items) + 1):
        value, parts = Fraction(1), []
        for at in range(size - 1):
            value *= letters[at].exact
            parts.append(symbols[at])
        if size - 1 < len(letters) and size < items:
            value *= 1 - letters[size - 1].exact
            parts.append(f"(1−{symbols[size - 1]})")
        sets = comb(items - 1, size - 1)
        symbol = "·".join(parts) + (f"/{sets}" if sets > 1 else "")
        meaning = f"share of the failure rate that strikes each set of {size}, cause {name}"
        found.append((size, Factor(symbol, value / sets, meaning, f"common_causes.{name}", is_share=True)))
    return tuple(found)


def _alpha(factors: tuple[Quantity, ...], staggered: bool, name: str, items: int) -> tuple[tuple[int, Factor], ...]:
    mean = sum((size * each.exact for size, each in enumerate(factors, 1)), Fraction(0))
    found = []
    for size in range(2, min(len(factors), items) + 1):
        each = factors[size - 1]
        sets = comb(items - 1, size - 1)
        symbol = each.name or f"α{size}"
        value = each.exact / sets
        if not staggered:
            value *= size / mean
            symbol = f"{size}·{symbol}/αt"
        symbol += f"/{sets}" if sets > 1 else ""
        meaning = f"share of the failure rate that strikes each set of {size}, cause {name}"
        found.append((size, Factor(symbol, value, meaning, f"common_causes.{name}", is_share=True)))
    return tuple(found)
