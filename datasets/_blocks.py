"""What the generators here share: seeded blocks of disorder realisations, pooled into curves.csv and curves.h5.

The work is cut into blocks.  A block is seeded by (seed, size, disorder, block number) alone, so any block can be
recomputed by itself and the result does not depend on the number of workers or on the order of the work.  Finished
blocks are appended to blocks.csv; a run that is interrupted goes on from there.

Import this module before numpy: it sets the number of threads, and numpy reads it when it is loaded.
"""

import argparse
import csv
import os
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass, field
from pathlib import Path

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")  # one thread a worker: the workers share the cores among themselves

import numpy as np


@dataclass(frozen=True)
class Study:
    """One data set.

    Parameters
    ----------
    folder : Path
        Where blocks.csv, curves.csv and curves.h5 are kept.
    sample : callable
        ``sample(size, disorder, rng)`` gives the value of one disorder realisation.  It must be a function of a module,
        because worker processes are sent its name.
    seed : int
        First part of the seed of every block.
    plan : dict
        ``{size: (realisations a block, blocks)}``.
    disorders : dict
        ``{size: tuple of disorders}``.
    labels : dict
        Names, symbols and reference values: attributes of curves.h5, comment lines at the top of curves.csv.
    grain : int
        Disorders enter the seed as whole numbers, in units of 1/grain.
    reported : dict
        ``{size: size in the curves}``, where the two differ; blocks are counted, seeded and stored by whole numbers.
    """

    folder: Path
    sample: Callable[[int, float, np.random.Generator], float]
    seed: int
    plan: dict[int, tuple[int, int]]
    disorders: dict[int, tuple[float, ...]]
    labels: dict[str, str | float]
    grain: int = 1_000_000
    reported: dict[int, float] = field(default_factory=dict)

    @property
    def blocks(self):
        """File of the finished blocks."""
        return self.folder / "blocks.csv"

    def block(self, size, disorder, number):
        """One block: realisations, mean, and sum of squared deviations of the values."""
        realisations = self.plan[size][0]
        place = round(self.grain * disorder) % 2**64  # a seed cannot be negative
        rng = np.random.default_rng([self.seed, size, place, number])
        values = np.array([self.sample(size, disorder, rng) for _ in range(realisations)])
        return size, disorder, number, realisations, values.mean(), np.sum((values - values.mean()) ** 2)

    def todo(self):
        """Missing blocks, one of each (size, disorder) after the other, so that a broken run holds even statistics."""
        done = read_blocks(self.blocks)
        return [
            (size, disorder, number)
            for number in range(max(blocks for _, blocks in self.plan.values()))
            for size, (_, blocks) in self.plan.items()
            if number < blocks
            for disorder in self.disorders[size]
            if (size, disorder, number) not in done
        ]


def read_blocks(path):
    """Finished blocks as {(size, disorder, number): (realisations, mean, sum of squared deviations)}."""
    if not path.exists():
        return {}
    with path.open(newline="") as file:
        return {
            (int(r["size"]), float(r["disorder"]), int(r["block"])): (
                int(r["realisations"]), float(r["mean"]), float(r["squares"]),
            )
            for r in csv.DictReader(file)
        }  # fmt: skip


def compute(study, workers):
    """Compute the missing blocks and append each one as it is finished."""
    todo = study.todo()
    if not study.blocks.exists():
        study.blocks.write_text("size,disorder,block,realisations,mean,squares\n")
    with ProcessPoolExecutor(workers) as pool, study.blocks.open("a", newline="\n") as file:
        jobs = [pool.submit(study.block, *job) for job in todo]
        for count, job in enumerate(as_completed(jobs), 1):
            size, disorder, number, realisations, mean, squares = job.result()
            file.write(f"{size},{disorder:g},{number},{realisations},{mean:.15g},{squares:.15g}\n")
            file.flush()
            print(f"{count}/{len(todo)}  size {size}, disorder {disorder:g}, block {number}", flush=True)


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


def write(folder, rows, labels, *, stem="curves", covariances=None):
    """Write <stem>.csv and <stem>.h5 into `folder`, each under a temporary name first.

    `covariances` holds the covariance of the means of a size, {size: array}; only the HDF5 file has a place for it.
    """
    table = folder / f"{stem}.csv.part"
    with table.open("w", encoding="utf-8", newline="\n") as file:
        file.writelines(f"# {name}: {value}\n" for name, value in labels.items())
        file.write("size,disorder,mean,error,samples\n")
        for size, disorder, mean, error, samples in rows:
            file.write(f"{size},{disorder:g},{mean:.8f},{error:.8f},{samples}\n")
    table.replace(folder / f"{stem}.csv")

    import h5py

    store = folder / f"{stem}.h5.part"
    with h5py.File(store, "w") as file:
        file.attrs.update(labels)
        for size in sorted({row[0] for row in rows}):
            columns = np.array([row[1:] for row in rows if row[0] == size]).T
            group = file.create_group(f"curves/{size}")
            for name, values in zip(("disorder", "mean", "error", "samples"), columns, strict=True):
                group[name] = values.astype(int) if name == "samples" else values
            if covariances is not None:
                group["covariance"] = covariances[size]
    store.replace(folder / f"{stem}.h5")


def main(study, description):
    """Command line of a generator."""
    parser = argparse.ArgumentParser(description=description.splitlines()[0])
    parser.add_argument("--workers", type=int, default=os.cpu_count())
    parser.add_argument("--write", action="store_true", help="only write the files from blocks.csv")
    options = parser.parse_args()
    if not options.write:
        compute(study, options.workers)
    rows = combine(read_blocks(study.blocks))
    write(study.folder, [(study.reported.get(row[0], row[0]), *row[1:]) for row in rows], study.labels)
