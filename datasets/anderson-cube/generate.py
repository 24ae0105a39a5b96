"""Adjacent-gap ratio of the three-dimensional Anderson model near the band centre.

    H = sum_<ij> (c_i^+ c_j + h.c.) + sum_i eps_i c_i^+ c_i ,   eps_i uniform in [-W/2, W/2]

on an L x L x L cube with periodic boundaries and hopping 1.  Every realisation is diagonalised in full (LAPACK, one
thread); the tenth of its levels closest to E = 0 gives one mean gap ratio, and the realisation is the unit of
statistics.  Seeded block by block and resumable, see ../_blocks.py.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

More than an hour on two cores.  Needs numpy and scipy; h5py for curves.h5.
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

FRACTION = 0.1  # of the levels, those closest to E = 0: |E| < 0.9, where the mobility edge is flat
DISORDERS = (13.0, 14.0, 14.5, 15.0, 15.5, 16.0, 16.5, 17.0, 17.5, 18.0, 18.5, 19.0, 20.0)
# size: (realisations a block, blocks); a pass through all sizes and disorders computes one block of each
PLAN = {6: (1400, 4), 8: (580, 4), 10: (300, 4), 12: (60, 3), 14: (20, 7)}


@cache
def hopping(size):
    """Dense adjacency matrix of the periodic cube, shape (L^3, L^3)."""
    ring = np.roll(np.eye(size), 1, axis=0)
    ring += ring.T
    one = np.eye(size)
    return (
        np.kron(np.kron(ring, one), one) + np.kron(np.kron(one, ring), one) + np.kron(np.kron(one, one), ring)
    )  # fmt: skip


def sample(size, disorder, rng):
    """Gap ratio of one realisation."""
    hamiltonian = hopping(size) + np.diag(rng.uniform(-disorder / 2, disorder / 2, size**3))
    levels = scipy.linalg.eigvalsh(hamiltonian, check_finite=False, overwrite_a=True)
    return mean_gap_ratio(levels, round(FRACTION * size**3))


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261201,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "gap-ratio", "observable_symbol": "r", "disorder_symbol": "W", "disorder_unit": "t",
        "ergodic_value": 0.5307, "localised_value": 2 * np.log(2) - 1, "dimension": 3, "disorder_kind": "quenched",
    },
    grain=1000,
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
