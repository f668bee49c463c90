"""Bounds the probability of failure of a chain that is hard on transient methods, and prints what it took.

Arguments: the name of the chain, hours.
"""

from __future__ import annotations

import json
import sys
import time
from fractions import Fraction

import numpy as np

import markov.states
from markov.chain import Generator, aggregate, transient
from markov.errors import NotReached
from markov.evaluation.answers import Answers
from markov.spec import read_text
from tests.benchmarks import plants


def in_two_seasons() -> tuple[Generator, np.ndarray]:
    """Six unlike groups in two seasons that last about a hundred thousand years: two nearly uncoupled halves.

    In the second season every fault is three times as frequent.
    """
    answers = Answers(markov.states.generate(read_text(plants.unlike_groups(6), "benchmark")), Fraction(8766))
    chain, down = answers.generator, ~answers.up(None)
    n, rate = chain.n, chain.high
    states = np.arange(n)
    faults = rate < 1e-3  # every repair takes less than a thousand hours
    source = np.concatenate((chain.source, chain.source + n, states, states + n))
    target = np.concatenate((chain.target, chain.target + n, states + n, states))
    rates = np.concatenate((rate, np.where(faults, 3.0 * rate, rate), np.full(2 * n, 1e-9)))
    return aggregate(2 * n, source, target, rates, np.zeros_like(rates)), np.concatenate((down, down))


def wearing() -> tuple[Generator, np.ndarray]:
    chain = plants.erlang_beside_pair()
    return chain.generator(), chain.down_flags


CHAINS = {"a hundred stages of wear": wearing, "two seasons, nearly uncoupled": in_two_seasons}


def main() -> None:
    name, hours = sys.argv[1:]
    chain, down = CHAINS[name]()
    print(json.dumps(chain.n), flush=True)
    began = time.perf_counter()
    try:
        found = transient(chain, 0, [Fraction(hours)], absorbing=down).absorbed[0].entry(0)
    except NotReached as reason:
        told = {"trouble": str(reason)}
    else:
        told = {"value": found.value, "width": found.width if found.certified else None, "method": found.method}
    print(json.dumps(told | {"seconds": time.perf_counter() - began}))


if __name__ == "__main__":
    main()
