"""Random-field Heisenberg chain: gap ratio and half-chain entanglement of the same eigenstates in mid-spectrum.

    H = sum_i S_i . S_i+1 + sum_i h_i S^z_i ,   h_i = W u_i ,   u_i uniform in [-1, 1]

on a periodic chain of L spins 1/2 in the sector of zero magnetisation.  The fields u_i of a realisation are drawn once
and rescaled to every W, so the points of one size are correlated, and their covariance is part of the data.  The states
are those closest in energy to the middle of the spectrum, (E_min + E_max) / 2.

    python generate.py                 compute what is missing, then write the curves
    python generate.py --write         only write the curves from realisations.h5
    python generate.py --workers 1     with one process

A realisation is seeded by (seed, size, number) alone, so the result does not depend on the number of workers or on the
order of the work.  The raw values go into realisations.h5 about once a minute; a run that is interrupted goes on from
there.  Needs numpy, scipy and h5py.
"""

import argparse
import os
import sys
import time
from concurrent.futures import ProcessPoolExecutor, as_completed
from functools import cache
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded

# isort: split
import h5py
import numpy as np
import scipy.linalg
import scipy.sparse
import scipy.sparse.linalg

FOLDER = Path(__file__).parent
SEED = 20261205
DISORDERS = (1.0, 1.5, 2.0, 2.5, 3.0, 3.5, 4.0, 4.5, 5.0, 5.5, 6.0, 7.0, 8.0)
# Realisations are computed in this order: the largest size before the others have their full number
STAGES = ((8, 2000), (10, 1000), (12, 300), (14, 100), (12, 500), (14, 200))
PLAN = dict(STAGES)  # the last number of each size
STATES = {8: 20, 10: 30, 12: 50, 14: 50}  # of 70, 252, 924 and 3432
SPARSE_FROM = 924  # dimension from which shift and invert is faster: 0.05 s against 0.18 s there, 1 s at 3432
ENOUGH = 60  # realisations before a size is written: a covariance of 13 disorders needs several times 13
KEPT = 200  # realisations of each size whose single states are stored as well; all would make a file of 15 MB
#: Mean entropy of a random real state of zero magnetisation, sampled, each to 0.0002.  A complex one has more: Page's
#: formula, and its sum over the blocks of magnetisation, hold for complex states and are 0.3 to 3 per cent higher here.
RANDOM_STATE = {8: 2.1331, 10: 2.8424, 12: 3.5493, 14: 4.2512}
INTERVAL = 60.0  # seconds between two writes of realisations.h5
OBSERVABLES = ("gap_ratio", "entanglement")

COMMON = {"disorder_symbol": "W", "disorder_unit": "J", "dimension": 1, "disorder_kind": "quenched"}
LABELS = {
    "gap_ratio": {
        "observable": "gap-ratio", "observable_symbol": "r", **COMMON,
        "ergodic_value": 0.5307, "localised_value": 2 * np.log(2) - 1,
    },
    "entanglement": {
        "observable": "entanglement-ratio", "observable_symbol": "S/S_R", **COMMON, "ergodic_value": 1.0,
    },
}  # fmt: skip


@cache
def basis(size):
    """States of zero magnetisation as whole numbers (bit i is spin i), and S^z_i of each, shape (states, L)."""
    states = np.array([s for s in range(2**size) if s.bit_count() == size // 2])
    return states, ((states[:, None] >> np.arange(size)) & 1) - 0.5


@cache
def exchange(size):
    """sum_i S_i . S_i+1 on the periodic chain, sparse."""
    states, spins = basis(size)
    rows, columns = [], []
    for i in range(size):
        j = (i + 1) % size
        flips = np.flatnonzero(spins[:, i] != spins[:, j])
        rows.append(flips)
        columns.append(np.searchsorted(states, states[flips] ^ (1 << i | 1 << j)))
    places = np.concatenate(rows), np.concatenate(columns)
    flip = scipy.sparse.csc_array((np.full(places[0].size, 0.5), places), shape=(states.size, states.size))
    return flip + scipy.sparse.diags_array(np.sum(spins * np.roll(spins, -1, axis=1), axis=1), format="csc")


def hamiltonian(size, fields):
    """Sparse matrix with the fields h_i, shape (L,)."""
    return exchange(size) + scipy.sparse.diags_array(basis(size)[1] @ fields, format="csc")


def inverse(matrix, energy):
    """Operator (matrix - energy)^-1; an ordering for symmetric patterns fills in a third less than the usual one."""
    shifted = (matrix - energy * scipy.sparse.eye_array(matrix.shape[0])).tocsc()
    factors = scipy.sparse.linalg.splu(
        shifted, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.1, options={"SymmetricMode": True}
    )
    return scipy.sparse.linalg.LinearOperator(matrix.shape, matvec=factors.solve, dtype=float)


def middle_states(matrix, count, *, sparse=None):
    """The `count` levels closest to (E_min + E_max) / 2, ascending, and their states as columns."""
    if sparse is None:
        sparse = matrix.shape[0] >= SPARSE_FROM
    if not sparse:
        levels, states = scipy.linalg.eigh(matrix.toarray(), check_finite=False)
        nearest = np.sort(np.argsort(np.abs(levels - (levels[0] + levels[-1]) / 2))[:count])
        return levels[nearest], states[:, nearest]
    start = np.random.default_rng(SEED).standard_normal(matrix.shape[0])  # so that a realisation can be repeated
    ends = [
        scipy.sparse.linalg.eigsh(matrix, 1, which=which, v0=start, return_eigenvectors=False)[0]
        for which in ("SA", "LA")
    ]
    levels, states = scipy.sparse.linalg.eigsh(
        matrix, count, sigma=sum(ends) / 2, OPinv=inverse(matrix, sum(ends) / 2), v0=start
    )
    order = np.argsort(levels)
    return levels[order], states[:, order]


def gap_ratios(levels):
    """min(d_n, d_n+1) / max(d_n, d_n+1) of neighbouring spacings (Oganesyan, Huse 2007), two fewer than levels."""
    gaps = np.diff(levels)
    return np.minimum(gaps[1:], gaps[:-1]) / np.maximum(gaps[1:], gaps[:-1])


@cache
def halves(size):
    """For each magnetisation of spins 0 ... L/2-1, the places in the basis as a matrix (this half, other half)."""
    states, _ = basis(size)
    half = [np.flatnonzero([s.bit_count() == k for s in range(2 ** (size // 2))]) for k in range(size // 2 + 1)]
    return [
        np.searchsorted(states, own[:, None] | other[None, :] << size // 2)
        for own, other in zip(half, reversed(half), strict=True)
    ]


def entropies(size, states):
    """Entanglement entropy (natural logarithm) of spins 0 ... L/2-1 in each column of `states`."""
    total = 0.0
    for places in halves(size):
        weights = np.linalg.svd(np.moveaxis(states[places], -1, 0), compute_uv=False) ** 2
        total = total - np.sum(weights * np.log(np.maximum(weights, 1e-300)), axis=1)  # 0 ln 0 = 0
    return total


def realisation(size, number):
    """Gap ratios, shape (disorders, states - 2), and entropies, shape (disorders, states), of one realisation."""
    fields = np.random.default_rng([SEED, size, number]).uniform(-1, 1, size)
    ratios, entropy = [], []
    for disorder in DISORDERS:
        levels, states = middle_states(hamiltonian(size, disorder * fields), STATES[size])
        ratios.append(gap_ratios(levels))
        entropy.append(entropies(size, states))
    return size, number, np.array(ratios), np.array(entropy)


def load(path):
    """What is stored: {size: {number: {name: values}}}."""
    found = {size: {} for size in PLAN}
    if not path.exists():
        return found
    with h5py.File(path) as file:
        for name, group in file["sizes"].items():
            columns = {key: item[()] for key, item in group.items()}
            for row, number in enumerate(columns["number"]):
                values = {key: item[row] for key, item in columns.items() if key != "number" and row < len(item)}
                found[int(name)][int(number)] = values
    return found


def summarised(number, ratios, entropy):
    """What is stored of one realisation: means over its states, and the states themselves of the first ones."""
    values = {"gap_ratio": ratios.mean(axis=1), "entanglement": entropy.mean(axis=1)}
    if number < KEPT:
        values |= {"state_gap_ratio": np.float32(ratios), "state_entanglement": np.float32(entropy)}
    return values


def save(path, found):
    """Write realisations.h5, under a temporary name first; realisations are in the order of their numbers."""
    part = path.with_suffix(".part")
    with h5py.File(part, "w") as file:
        file.attrs.update({"seed": SEED, "kept": KEPT})
        file["disorder"] = np.array(DISORDERS)
        for size, rows in found.items():
            if not rows:
                continue
            group = file.create_group(f"sizes/{size}")
            group.attrs.update({"states": STATES[size], "random_state_entropy": RANDOM_STATE[size]})
            group["number"] = np.array(sorted(rows))
            for name in rows[min(rows)]:
                values = np.array([rows[number][name] for number in sorted(rows) if name in rows[number]])
                group.create_dataset(name, data=values, track_times=False)
    part.replace(path)


def compute(path, workers):
    """Compute the missing realisations in the order of the stages, and store them as they come."""
    found = load(path)
    planned = dict.fromkeys((size, number) for size, count in STAGES for number in range(count))  # each once
    todo = [(size, number) for size, number in planned if number not in found[size]]
    saved = time.monotonic()
    with ProcessPoolExecutor(workers) as pool:
        jobs = [pool.submit(realisation, *job) for job in todo]
        for count, job in enumerate(as_completed(jobs), 1):
            size, number, ratios, entropy = job.result()
            found[size][number] = summarised(number, ratios, entropy)
            if time.monotonic() - saved > INTERVAL:
                save(path, found)
                saved = time.monotonic()
                print(f"{count}/{len(todo)}  size {size}, realisation {number}", flush=True)
    save(path, found)


def curves(found, observable):
    """Rows as `_blocks.write` takes them, and the covariance of the means of each size with enough realisations."""
    rows, covariances = [], {}
    for size, stored in found.items():
        if len(stored) < ENOUGH:
            continue
        values = np.array([stored[number][observable] for number in sorted(stored)])
        if observable == "entanglement":
            values = values / RANDOM_STATE[size]
        count = len(values)
        covariances[size] = np.cov(values, rowvar=False) / count
        errors = np.sqrt(np.diag(covariances[size]))
        rows += [(size, *point, count) for point in zip(DISORDERS, values.mean(axis=0), errors, strict=True)]
    return rows, covariances


def write(folder):
    """Write the curves of both observables from realisations.h5."""
    found = load(folder / "realisations.h5")
    for observable in OBSERVABLES:
        rows, covariances = curves(found, observable)
        stem = observable.replace("_", "-")
        _blocks.write(folder, rows, LABELS[observable], stem=stem, covariances=covariances)


def main():
    """Command line of the generator."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--workers", type=int, default=os.cpu_count())
    parser.add_argument("--write", action="store_true", help="only write the curves from realisations.h5")
    options = parser.parse_args()
    if not options.write:
        compute(FOLDER / "realisations.h5", options.workers)
    write(FOLDER)


if __name__ == "__main__":
    main()
