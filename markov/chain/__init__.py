"""The mathematician's room: chains as arrays in, results with proven bounds out.

Conventions, stated once.  n states are numbered from 0; a rate leaves `source` and enters `target`; times and rates
share one unit, which this room does not care about.  Rates and times are exact inputs: a rate is the sum of two
floats that is within a stated relative error of the exact one, a time is a fraction (a float counts as the fraction
that it is).

Every number comes as an `Enclosure` with ``lower <= exact <= upper``, or with None for both where only an estimate
exists.  Every row of numbers comes as a `Vector` with one bound for all entries; `Vector.weighted` turns it into a
number.  Results that the structure fixes to 0 or 1 are exactly that.

Errors: `UsageError` for arguments that do not fit together, `IllPosed` for a question without an answer, `NotReached`
where no method meets its bound; a last iterate is never returned.
"""

from markov.chain.bounds import Enclosure, Vector, distribution, point
from markov.chain.flow import flow
from markov.chain.generator import Generator, aggregate
from markov.chain.solve import (
    FirstPassage,
    absorption,
    first_passage,
    long_run,
    rewards_before_absorption,
    stationary,
    time_spent,
)
from markov.chain.survival import survival
from markov.chain.transient import Method, Transient, transient

__all__ = [
    "Enclosure",
    "FirstPassage",
    "Generator",
    "Method",
    "Transient",
    "Vector",
    "absorption",
    "aggregate",
    "distribution",
    "first_passage",
    "flow",
    "long_run",
    "point",
    "rewards_before_absorption",
    "stationary",
    "survival",
    "time_spent",
    "transient",
]
