"""Solves one of the growing chains and prints what each step took, one JSON value a line.

Arguments: number of groups, then the questions in order: ``steady``, or hours.
"""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np
from scipy.sparse import csc_array, csr_array

import markov.states
from markov.chain import Enclosure, stationary, transient
from markov.errors import NotReached
from markov.evaluation.answers import Answers
from markov.spec import read_text
from tests.benchmarks import plants
from tests.benchmarks.memory import forget_peak, peak


class Readings:
    """Counts the entries of sparse matrices that products read, from outside, for solvers that do not tell."""

    def __init__(self) -> None:
        self.entries = 0
        for kind in (csr_array, csc_array):
            for name in ("__matmul__", "__rmatmul__", "dot"):
                setattr(kind, name, self._counted(getattr(kind, name)))

    def _counted(self, product: Callable[[Any, Any], Any]) -> Callable[[Any, Any], Any]:
        def counted(matrix: Any, other: Any) -> Any:
            self.entries += matrix.nnz
            return product(matrix, other)

        return counted


def one_reading(matrix: csr_array) -> float:
    """Seconds to read a sparse matrix once: its values, column numbers and row pointers, in a straight line."""
    parts = [part.view(np.uint8) for part in (matrix.data, matrix.indices, matrix.indptr)]
    # As many words as there are whole ones; a reduction by "or" is limited by memory alone.
    words = [part[: part.size // 8 * 8].view(np.uint64) for part in parts]
    taken = []
    while len(taken) < 5 or (sum(taken) < 0.02 and len(taken) < 1000):
        began = time.perf_counter()
        for word in words:
            np.bitwise_or.reduce(word)
        taken.append(time.perf_counter() - began)
    return min(taken)


def tell(**what: Any) -> None:
    print(json.dumps(what), flush=True)


def main() -> None:
    groups, questions = int(sys.argv[1]), sys.argv[2:]
    model = read_text(plants.unlike_groups(groups), "benchmark")
    markov.states.generate(read_text(plants.unlike_groups(4), "first use"))
    began = time.perf_counter()
    space = markov.states.generate(model)
    generated = time.perf_counter() - began
    answers = Answers(space, model.year_hours)
    began = time.perf_counter()
    chain, down = answers.generator, ~answers.up(None)
    added = time.perf_counter() - began
    matrix = chain.matrix()
    size = matrix.data.nbytes + matrix.indices.nbytes + matrix.indptr.nbytes
    reading = one_reading(matrix)
    tell(states=chain.n, transitions=matrix.nnz, bytes=size, reading=reading, generated=generated, added=added)
    del matrix
    counted = Readings()

    def solve(question: str) -> tuple[Enclosure, float | None]:
        fresh = replace(chain)  # nothing is kept from the run before
        if question == "steady":
            shares = stationary(fresh)
            return shares.weighted(down), shares.readings
        return transient(fresh, answers.start, [Fraction(question)], absorbing=down).absorbed[0].entry(0), None

    for question in questions:
        forget_peak()
        counted.entries = 0
        best: dict[str, Any] | None = None
        spent = 0.0
        while best is None or (spent < 0.3 and "trouble" not in best):
            counted.entries = 0
            told_readings: float | None = None
            began = time.perf_counter()
            try:
                found, told_readings = solve(question)
            except NotReached as reason:
                told: dict[str, Any] = {"trouble": str(reason)}
            else:
                told = {"value": found.value, "lower": found.lower, "upper": found.upper, "method": found.method}
            told["seconds"] = time.perf_counter() - began
            told["readings"] = counted.entries / chain.source.size if told_readings is None else told_readings
            spent += told["seconds"]
            if best is None or told["seconds"] < best["seconds"]:
                best = told
        tell(question=question, peak=peak(), **best)


if __name__ == "__main__":
    main()
