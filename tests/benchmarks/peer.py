"""Answers one question about one chain by one means, and prints value, seconds and memory.

Arguments: a file with the chain, the question, the means, the limit in seconds.
"""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from tests.benchmarks.memory import forget_peak, held, peak

Arrays = Mapping[str, Any]
Answer = dict[str, Any]


def matrix(chain: Arrays) -> Any:
    """The generator matrix that a user would write, sparse, with its diagonal."""
    from scipy.sparse import coo_array

    n = int(chain["n"])
    source, target, rate = chain["source"], chain["target"], chain["high"] + chain["low"]
    rows, columns = np.concatenate((source, np.arange(n))), np.concatenate((target, np.arange(n)))
    exits = np.bincount(source, weights=rate, minlength=n)
    return coo_array((np.concatenate((rate, -exits)), (rows, columns)), shape=(n, n)).tocsr()


def stopped(chain: Arrays) -> tuple[Any, int]:
    """The matrix with all down states made one, the last, that is never left; and the number of the start."""
    from scipy.sparse import csr_array, hstack, vstack

    down = chain["down"]
    alive = np.flatnonzero(~down)
    whole = matrix(chain)[alive]
    failing = csr_array(whole[:, np.flatnonzero(down)].sum(axis=1).reshape(-1, 1))
    last = csr_array((1, alive.size + 1))
    return vstack([hstack([whole[:, alive], failing]), last]).tocsr(), int(np.searchsorted(alive, int(chain["start"])))


def by_expm(chain: Arrays) -> Callable[[], Answer]:
    from scipy.linalg import expm

    q, start = stopped(chain)
    dense, t = q.toarray(), float(chain["time"])
    return lambda: {"value": float(expm(dense * t)[start, -1])}


def by_expm_multiply(chain: Arrays) -> Callable[[], Answer]:
    from scipy.sparse.linalg import expm_multiply

    q, start = stopped(chain)
    turned = (q.T * float(chain["time"])).tocsr()
    first = np.zeros(q.shape[0])
    first[start] = 1.0
    trace = float(turned.diagonal().sum())
    return lambda: {"value": float(expm_multiply(turned, first, traceA=trace)[-1])}


def by_steps(method: str, tight: bool) -> Callable[[Arrays], Callable[[], Answer]]:
    """An integrator of differential equations, with the Jacobian handed to it."""

    def prepare(chain: Arrays) -> Callable[[], Answer]:
        from scipy.integrate import solve_ivp

        q, start = stopped(chain)
        turned, t = q.T.tocsr(), float(chain["time"])
        first = np.zeros(q.shape[0])
        first[start] = 1.0
        jacobian = turned.toarray() if q.shape[0] < 100 else turned.tocsc()
        # Tight: whatever is added by the absolute tolerance is a relative 1e-12 of the answer, which no user knows.
        tolerances = {"rtol": 1e-12, "atol": 1e-12 * float(chain["expected"])} if tight else {}

        def solve() -> Answer:
            found = solve_ivp(
                lambda _, p: turned @ p, (0.0, t), first, method=method, jac=jacobian, t_eval=[t], **tolerances
            )
            if not found.success:
                raise ArithmeticError(found.message)
            return {"value": float(found.y[-1, -1])}

        return solve

    return prepare


def with_ones(chain: Arrays) -> tuple[Any, Any]:
    """The balance equations, the last one replaced by the sum of all probabilities."""
    from scipy.sparse import csr_array, vstack

    balance = matrix(chain).T.tocsr()
    n = balance.shape[0]
    right = np.zeros(n)
    right[-1] = 1.0
    return vstack([balance[:-1], csr_array(np.ones((1, n)))]).tocsc(), right


def by_solve(chain: Arrays) -> Callable[[], Answer]:
    system, right = with_ones(chain)
    dense, down = system.toarray(), chain["down"]
    return lambda: {"value": float(np.linalg.solve(dense, right)[down].sum())}


def by_spsolve(chain: Arrays) -> Callable[[], Answer]:
    from scipy.sparse.linalg import spsolve

    system, right = with_ones(chain)
    down = chain["down"]
    return lambda: {"value": float(spsolve(system, right)[down].sum())}


def mean_by_solve(chain: Arrays) -> Callable[[], Answer]:
    q, start = stopped(chain)
    inside = -q.toarray()[:-1, :-1]
    ones = np.ones(inside.shape[0])
    return lambda: {"value": float(np.linalg.solve(inside, ones)[start])}


def mean_by_spsolve(chain: Arrays) -> Callable[[], Answer]:
    from scipy.sparse.linalg import spsolve

    q, start = stopped(chain)
    inside = -q.tocsc()[:-1, :-1]
    ones = np.ones(inside.shape[0])
    return lambda: {"value": float(spsolve(inside, ones)[start])}


def by_ours(question: str) -> Callable[[Arrays], Callable[[], Answer]]:
    """This project, which gets its chain as arrays just as the others get their matrix."""

    def prepare(chain: Arrays) -> Callable[[], Answer]:
        from dataclasses import replace
        from fractions import Fraction

        from markov.chain import aggregate, first_passage, stationary, transient

        down, start = chain["down"], int(chain["start"])
        time_asked = Fraction(str(chain["time"]))

        given = aggregate(int(chain["n"]), chain["source"], chain["target"], chain["high"], chain["low"])

        def solve() -> Answer:
            fresh = replace(given)  # nothing is kept from the run before
            if question == "F":
                found = transient(fresh, start, [time_asked], absorbing=down).absorbed[0].entry(0)
            elif question == "U":
                found = stationary(fresh).weighted(down)
            else:
                mean = first_passage(fresh, start, down, deviation=False).mean
                assert mean is not None
                found = mean
            return {"value": found.value, "lower": found.lower, "upper": found.upper, "method": found.method}

        return solve

    return prepare


OURS = "markov"
MEANS: dict[str, dict[str, Callable[[Arrays], Callable[[], Answer]]]] = {
    "F": {
        OURS: by_ours("F"),
        "linalg.expm": by_expm,
        "expm_multiply": by_expm_multiply,
        "BDF, default": by_steps("BDF", tight=False),
        "BDF, tight": by_steps("BDF", tight=True),
        "Radau, default": by_steps("Radau", tight=False),
        "Radau, tight": by_steps("Radau", tight=True),
    },
    "U": {OURS: by_ours("U"), "linalg.solve": by_solve, "spsolve": by_spsolve},
    "M": {OURS: by_ours("M"), "linalg.solve": mean_by_solve, "spsolve": mean_by_spsolve},
}


def main() -> None:
    file, question, means, limit = sys.argv[1:]
    with np.load(file) as stored:
        chain = dict(stored)
    solve = MEANS[question][means](chain)
    print(json.dumps("ready"), flush=True)
    forget_peak()
    before = held()
    taken: list[float] = []
    while not taken or (len(taken) < 7 and sum(taken) < min(0.5, float(limit))):
        began = time.perf_counter()
        answer = solve()
        taken.append(time.perf_counter() - began)
    print(json.dumps(answer | {"seconds": min(taken), "memory": max(0, peak() - before)}))


if __name__ == "__main__":
    main()
