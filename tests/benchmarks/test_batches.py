"""Measures many solutions of one chain against loops over general-purpose solvers, in the same run, accuracy beside it.

Two kinds of machines share one crew; every rate is drawn anew in each of 10,000 samples.  A loop has to fill the matrix
of each sample, as ours has to fill its own; the linear algebra of both runs on one thread.
"""

import os
import subprocess
import sys
import textwrap

import pytest

pytestmark = pytest.mark.benchmark

SCRIPT = textwrap.dedent(
    """
    import time
    from fractions import Fraction
    import numpy as np
    import scipy.linalg
    from markov.chain import aggregate, stationary, transient
    from markov.chain.batch import compile_chain
    from markov.chain.batch_transient import Pattern, spread

    SAMPLES, CHECKED = 10_000, 20
    TIME = 8760

    def plant(a, b):
        number = {(i, j): i * (b + 1) + j for i in range(a + 1) for j in range(b + 1)}
        pairs, rates = [], []
        for (i, j), here in number.items():
            if i < a:
                pairs.append((here, number[i + 1, j])); rates.append((a - i) * 1e-4)
            if j < b:
                pairs.append((here, number[i, j + 1])); rates.append((b - j) * 2e-4)
            if i:
                pairs.append((here, number[i - 1, j])); rates.append(1 / 8)
            elif j:
                pairs.append((here, number[i, j - 1])); rates.append(1 / 20)
        down = np.array([i >= 2 or j >= 2 for i, j in number])
        source, target = np.array(pairs).T
        return len(number), source, target, np.array(rates), down

    def best(work, times):
        taken = []
        for _ in range(times):
            began = time.perf_counter()
            found = work()
            taken.append(time.perf_counter() - began)
        return min(taken), found

    def off(found, truth):
        return max(abs(f / t - 1) for f, t in zip(found, truth))

    print("ask", "states", "ours", "loop", "stacked", "ratio", "error", "loop_error")
    for a, b in ((3, 0), (2, 2), (4, 3), (8, 3), (12, 3)):
        n, source, target, base, down = plant(a, b)
        rng = np.random.default_rng(n)
        rates = base[:, None] * rng.lognormal(0.0, 0.4, (len(base), SAMPLES))
        compiled = compile_chain(n, source, target, ground=0)

        def ours():
            return compiled.stationary(rates)[down].sum(axis=0)

        def filled(sample):
            matrix = np.zeros((n, n))
            matrix[source, target] = rates[:, sample]
            matrix[np.arange(n), np.arange(n)] = -matrix.sum(axis=1)
            return matrix

        right = np.zeros(n)
        right[-1] = 1.0

        def loop():
            found = np.empty(SAMPLES)
            for sample in range(SAMPLES):
                matrix = filled(sample).T
                matrix[-1] = 1.0
                found[sample] = np.linalg.solve(matrix, right)[down].sum()
            return found

        def stacked():
            matrices = np.zeros((SAMPLES, n, n))
            matrices[:, target, source] = rates.T
            matrices[:, np.arange(n), np.arange(n)] = -matrices.sum(axis=1)
            matrices[:, -1, :] = 1.0
            return np.linalg.solve(matrices, np.broadcast_to(right[:, None], (SAMPLES, n, 1)))[:, down, 0].sum(axis=1)

        chains = [aggregate(n, source, target, rates[:, sample], rate_error=0.0) for sample in range(CHECKED)]
        truth = [stationary(chain).weighted(down).value for chain in chains]
        mine, found = best(ours, 7)
        theirs, other = best(loop, 2)
        many, _ = best(stacked, 2)
        print("long_run", n, mine, theirs, many, theirs / mine, off(found, truth), off(other, truth))

        up = np.flatnonzero(~down)
        place = np.full(n, len(up)); place[up] = np.arange(len(up))
        kept = np.flatnonzero(~down[source])
        code = place[source[kept]] * (len(up) + 1) + place[target[kept]]
        pairs, owner = np.unique(code, return_inverse=True)
        merged = np.zeros((len(pairs), SAMPLES))
        np.add.at(merged, owner, rates[kept])
        for name, size, tails, heads, inside, end in (
            ("failed_by", len(up) + 1, pairs // (len(up) + 1), pairs % (len(up) + 1), merged, [len(up)]),
            ("state_at", n, source, target, rates, np.flatnonzero(down)),
        ):
            pattern, start = Pattern(size, tails, heads), np.eye(size)[0]

            def ours_then():
                return spread(pattern, inside, start, [TIME]).states[0, end].sum(axis=0)

            def loop_then():
                found = np.empty(SAMPLES)
                for sample in range(SAMPLES):
                    matrix = np.zeros((size, size))
                    matrix[tails, heads] = inside[:, sample] * TIME
                    matrix[np.arange(size), np.arange(size)] = -matrix.sum(axis=1)
                    found[sample] = scipy.linalg.expm(matrix)[0, end].sum()
                return found

            truth = []
            for chain in chains:
                if name == "failed_by":
                    truth.append(transient(chain, 0, [TIME], absorbing=down).absorbed[0].values[0])
                else:
                    truth.append(transient(chain, 0, [TIME]).states[0].weighted(down).value)
            mine, found = best(ours_then, 3)
            theirs, other = best(loop_then, 1)
            print(name, size, mine, theirs, "nan", theirs / mine, off(found, truth), off(other, truth))
    """
)


def test_ten_thousand_samples_outrun_loops_of_solve_and_of_expm() -> None:
    single = dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"), "1")
    done = subprocess.run(
        [sys.executable, "-c", SCRIPT], capture_output=True, text=True, check=True, env={**os.environ, **single}
    )
    _, *rows = (line.split() for line in done.stdout.splitlines())
    head = ("ours, ms", "loop, ms", "stacked", "ratio", "off by", "loop off")
    print(f"\n{'10,000 samples':14} {'states':>6} " + " ".join(f"{word:>9}" for word in head))
    for name, size, ours, loop, stacked, ratio, error, other in rows:
        times = [f"{float(each) * 1e3:9.1f}" if each != "nan" else f"{'–':>9}" for each in (ours, loop, stacked)]
        print(f"{name:14} {size:>6} {' '.join(times)} {float(ratio):9.1f} {float(error):9.1e} {float(other):9.1e}")
    for name, _, _, _, _, ratio, error, _ in rows:
        assert float(error) < 1e-12
        assert float(ratio) > (10 if name == "long_run" else 1)
