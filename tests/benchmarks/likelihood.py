"""Time of the marginal likelihood per parameter vector: the compiled loops beside batched dense algebra.

    python tests/benchmarks/likelihood.py

All run in turn in one process on one core, on the grid of the design (six sizes by 21 disorders, 24 spline functions,
batches of 64), with independent points and with points of one size correlated by 0.5; the ratio means something on any
machine, the times only on a quiet one.
"""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import statistics
import time

import numpy as np

from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.likelihood import Posterior
from driftline.simulate import Logistic, PowerLawTruth, simulate

BATCH, REPEATS, ROUNDS = 64, 20, 15
ANSATZE = ("power-law", "power-law:corrected", "kt:corrected")


def microseconds(function, z):
    """Processor time per parameter vector of one round."""
    start = time.process_time()
    for _ in range(REPEATS):
        function(z)
    return (time.process_time() - start) / (REPEATS * len(z)) * 1e6


def dense(target):
    """The same system by a batched factor: what numpy alone would do."""
    return lambda z: np.linalg.cholesky(target.system(z))


def main():
    truth = PowerLawTruth(W_c=5.0, nu=1.0, scaling=Logistic(scale=6.0))
    print(
        f"{'ansatz':22}{'correlation':>12}{'whole':>10}{'compiled':>10}{'dense':>10}{'ratio':>8}   us a vector, medians"
    )
    for correlation in (0.0, 0.5):
        curves = simulate((8, 10, 12, 14, 16, 18), np.linspace(2, 8, 21), truth, 0.003, 1, correlation=correlation)
        for ansatz in ANSATZE:
            target = Posterior(curves, parse_ansatz(ansatz, curves))
            z = target.from_unit(np.random.default_rng(2).uniform(0.2, 0.8, (BATCH, target.dimension)))
            functions = (target, target._solved, dense(target))
            for function in functions:
                function(z)  # compiles, and fills the caches
            rounds = [[microseconds(function, z) for function in functions] for _ in range(ROUNDS)]
            whole, compiled, other = (statistics.median(column) for column in zip(*rounds, strict=True))
            print(f"{ansatz:22}{correlation:12.1f}{whole:10.1f}{compiled:10.1f}{other:10.1f}{other / compiled:8.1f}")


if __name__ == "__main__":
    main()
