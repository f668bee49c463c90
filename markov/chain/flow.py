"""Flow across a border: the rate from each of some states into any of some others."""

from __future__ import annotations

from numpy.typing import ArrayLike

from markov.chain.bounds import Vector, relative_to_computed
from markov.chain.doubled import UNIT
from markov.chain.generator import Generator, as_flags
from markov.errors import UsageError


def flow(generator: Generator, leaving: ArrayLike, entering: ArrayLike) -> Vector:
    """Return the total rate from each of some states into any of some others.

    Parameters
    ----------
    generator : Generator
        n states.
    leaving, entering : bool[n] or numbers
        A state outside `leaving` gets 0; transitions into `entering` are added up.

    Returns
    -------
    Vector
        n rates per unit of time, usable as weights of a distribution (a frequency) and as a reward (a number of
        passages).
    """
    here, there = as_flags(leaving, generator.n), as_flags(entering, generator.n)
    if (here & there).any():
        raise UsageError("states to leave and states to enter overlap")
    rates, error = generator.crossing(here, there)
    values = rates.high + rates.low
    return Vector(values, relative_to_computed(error + UNIT), 0.0, "sum of rates", values > 0.0)
