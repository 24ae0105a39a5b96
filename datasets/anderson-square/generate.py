"""Adjacent-gap ratio of the two-dimensional Anderson model near the band centre.

    H = sum_<ij> (c_i^+ c_j + h.c.) + sum_i eps_i c_i^+ c_i ,   eps_i uniform in [-W/2, W/2]

on an L x L square with periodic boundaries and hopping 1.  Every realisation is diagonalised in full (LAPACK, one
thread); the fifth of its levels closest to E = 0 gives one mean gap ratio, and the realisation is the unit of
statistics.  Seeded block by block and resumable, see ../_blocks.py.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

Needs numpy and scipy; h5py for curves.h5.
"""

import sys
from functools import cache
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded
from _levels import mean_gap_ratio

# isort: split
import numpy as np
import scipy.linalg

FRACTION = 0.2  # of the levels, those closest to E = 0
DISORDERS = (2.0, 3.0, 4.0, 4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5, 8.0, 9.0, 10.5, 12.0)
PLAN = {8: (1200, 4), 12: (560, 4), 16: (300, 4), 20: (200, 4), 24: (130, 5)}


@cache
def hopping(size):
    """Dense adjacency matrix of the periodic square, shape (L^2, L^2)."""
    ring = np.roll(np.eye(size), 1, axis=0)
    ring += ring.T
    return np.kron(ring, np.eye(size)) + np.kron(np.eye(size), ring)


def sample(size, disorder, rng):
    """Gap ratio of one realisation."""
    hamiltonian = hopping(size) + np.diag(rng.uniform(-disorder / 2, disorder / 2, size**2))
    levels = scipy.linalg.eigvalsh(hamiltonian, check_finite=False, overwrite_a=True)
    return mean_gap_ratio(levels, round(FRACTION * size**2))


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261202,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "gap-ratio", "observable_symbol": "r", "disorder_symbol": "W", "disorder_unit": "t",
        "ergodic_value": 0.5307, "localised_value": 2 * np.log(2) - 1, "dimension": 2, "disorder_kind": "quenched",
    },
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
