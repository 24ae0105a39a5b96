"""Adjacent-gap ratio of the three-dimensional Anderson model near the band centre.

    H = sum_<ij> (c_i^+ c_j + h.c.) + sum_i eps_i c_i^+ c_i ,   eps_i uniform in [-W/2, W/2]

on an L x L x L cube with periodic boundaries and hopping 1.  Every realisation is diagonalised in full
(LAPACK, one thread); the tenth of its levels closest to E = 0 gives one mean gap ratio, and the realisation
is the unit of statistics.  The work is cut into blocks.  A block is seeded by (SEED, L, W, block number) alone,
so any block can be recomputed by itself and the result does not depend on the number of workers or on the
order of the work.  Finished blocks are appended to blocks.csv; a run that is interrupted goes on from there.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

Needs numpy and scipy; h5py for curves.h5.
"""

import argparse
import csv
import os
from concurrent.futures import ProcessPoolExecutor, as_completed
from pathlib import Path

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")  # one thread a worker: the workers share the cores among themselves

import numpy as np
import scipy.linalg

HERE = Path(__file__).parent
BLOCKS = HERE / "blocks.csv"
SEED = 20261201
FRACTION = 0.1  # of the levels, those closest to E = 0: |E| < 0.9, where the mobility edge is flat
DISORDERS = (13.0, 14.0, 14.5, 15.0, 15.5, 16.0, 16.5, 17.0, 17.5, 18.0, 18.5, 19.0, 20.0)
# size: (realisations a block, blocks); a pass through all sizes and disorders computes one block of each
PLAN = {6: (1400, 5), 8: (580, 5), 10: (300, 5), 12: (60, 5), 14: (20, 5)}


def hopping(size):
    """Dense adjacency matrix of the periodic cube, shape (L^3, L^3)."""
    ring = np.zeros((size, size))
    site = np.arange(size)
    ring[site, (site + 1) % size] = ring[(site + 1) % size, site] = 1.0
    one = np.eye(size)
    return (
        np.kron(np.kron(ring, one), one)
        + np.kron(np.kron(one, ring), one)
        + np.kron(np.kron(one, one), ring)
    )


def mean_gap_ratio(levels, count):
    """Mean of min(d_n, d_n+1) / max(d_n, d_n+1) over the `count` levels closest to zero (Oganesyan, Huse 2007)."""
    levels = np.sort(levels)
    first = np.searchsorted(levels, 0.0) - count // 2
    first = min(max(first, 0), levels.size - count)
    gaps = np.diff(levels[first : first + count])
    return np.mean(np.minimum(gaps[1:], gaps[:-1]) / np.maximum(gaps[1:], gaps[:-1]))


def block(size, disorder, number):
    """One block: realisations, mean, and sum of squared deviations of the gap ratio per realisation."""
    realisations = PLAN[size][0]
    rng = np.random.default_rng([SEED, size, round(1000 * disorder), number])
    kinetic = hopping(size)
    diagonal = np.arange(size**3)
    values = np.empty(realisations)
    for i in range(realisations):
        hamiltonian = kinetic.copy()
        hamiltonian[diagonal, diagonal] = rng.uniform(-disorder / 2, disorder / 2, size**3)
        levels = scipy.linalg.eigvalsh(hamiltonian, check_finite=False, overwrite_a=True)
        values[i] = mean_gap_ratio(levels, round(FRACTION * size**3))
    return size, disorder, number, realisations, values.mean(), np.sum((values - values.mean()) ** 2)


def read_blocks():
    """Finished blocks as {(size, disorder, number): (realisations, mean, sum of squared deviations)}."""
    if not BLOCKS.exists():
        return {}
    with BLOCKS.open(newline="") as file:
        return {
            (int(r["size"]), float(r["disorder"]), int(r["block"])): (
                int(r["realisations"]), float(r["mean"]), float(r["squares"]),
            )
            for r in csv.DictReader(file)
        }  # fmt: skip


def compute(workers):
    """Compute the missing blocks, pass by pass, so that an interrupted run holds even statistics."""
    done = read_blocks()
    todo = [
        (size, disorder, number)
        for number in range(max(blocks for _, blocks in PLAN.values()))
        for size, (_, blocks) in PLAN.items()
        if number < blocks
        for disorder in DISORDERS
        if (size, disorder, number) not in done
    ]
    if not BLOCKS.exists():
        BLOCKS.write_text("size,disorder,block,realisations,mean,squares\n")
    with ProcessPoolExecutor(workers) as pool, BLOCKS.open("a") as file:
        jobs = [pool.submit(block, *job) for job in todo]
        for count, job in enumerate(as_completed(jobs), 1):
            size, disorder, number, realisations, mean, squares = job.result()
            file.write(f"{size},{disorder:g},{number},{realisations},{mean:.12g},{squares:.12g}\n")
            file.flush()
            print(f"{count}/{len(todo)}  L={size} W={disorder:g} block {number}", flush=True)


def combine(blocks):
    """Rows (size, disorder, mean, standard error, realisations) from the blocks, pooled exactly."""
    rows = []
    for size, disorder in sorted({key[:2] for key in blocks}):
        n, mean, squares = np.array([v for k, v in sorted(blocks.items()) if k[:2] == (size, disorder)]).T
        total = n.sum()
        centre = np.sum(n * mean) / total
        spread = np.sum(squares) + np.sum(n * (mean - centre) ** 2)
        rows.append((size, disorder, centre, np.sqrt(spread / (total - 1) / total), int(total)))
    return rows


def write(rows):
    """Write curves.csv and curves.h5 under temporary names first."""
    table = HERE / "curves.csv.part"
    with table.open("w", newline="\n") as file:
        file.write("size,disorder,mean,error,samples\n")
        for size, disorder, mean, error, samples in rows:
            file.write(f"{size},{disorder:g},{mean:.8f},{error:.8f},{samples}\n")
    table.replace(HERE / "curves.csv")

    import h5py

    store = HERE / "curves.h5.part"
    with h5py.File(store, "w") as file:
        file.attrs.update(
            observable="gap-ratio", observable_symbol="r", disorder_symbol="W", disorder_unit="t",
            ergodic_value=0.5307, localised_value=2 * np.log(2) - 1, dimension=3, disorder_kind="quenched",
        )  # fmt: skip
        for size in sorted({row[0] for row in rows}):
            columns = np.array([row[1:] for row in rows if row[0] == size]).T
            group = file.create_group(f"curves/{size}")
            for name, values in zip(("disorder", "mean", "error", "samples"), columns, strict=True):
                group[name] = values.astype(int) if name == "samples" else values
    store.replace(HERE / "curves.h5")


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--workers", type=int, default=os.cpu_count())
    parser.add_argument("--write", action="store_true", help="only write the files from blocks.csv")
    options = parser.parse_args()
    if not options.write:
        compute(options.workers)
    write(combine(read_blocks()))


if __name__ == "__main__":
    main()
