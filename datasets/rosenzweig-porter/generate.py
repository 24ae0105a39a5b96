"""Adjacent-gap ratio of Rosenzweig-Porter matrices in the middle of the spectrum.

    H_nn ~ N(0, 1) ,   H_nm = H_mn ~ lambda N^(-gamma/2) N(0, 1) for n < m ,   lambda = 0.4

Real symmetric N x N matrices: diagonal entries of variance 1, off-diagonal entries of standard deviation lambda
N^(-gamma/2), all independent.  The strength lambda does not move gamma_c = 2; 0.4 puts the crossing in the middle
between the two limits of the gap ratio, where sizes separate on both sides of it.  Every matrix is diagonalised in full
(LAPACK, one thread); the half of its levels closest to E = 0 gives one mean gap ratio, and the matrix is the unit of
statistics.  The size in the curves is ln N.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

Seeded block by block and resumable, see ../_blocks.py.  Needs numpy and scipy; h5py for curves.h5.
"""

import sys
from math import log
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded
from _levels import mean_gap_ratio

# isort: split
import numpy as np
import scipy.linalg

STRENGTH = 0.4  # lambda
FRACTION = 0.5  # of the levels, those closest to E = 0
# Not symmetric about gamma = 2, so that no estimator is right merely because it favours the middle of the range
DISORDERS = (1.4, 1.55, 1.66, 1.76, 1.84, 1.91, 1.98, 2.04, 2.1, 2.17, 2.25, 2.34, 2.44, 2.55, 2.7)
PLAN = {64: (450, 2), 128: (230, 2), 256: (115, 2), 512: (58, 2)}  # by N


def matrix(size, gamma, rng):
    """One N x N matrix; only its lower triangle is filled."""
    entries = np.tril(rng.standard_normal((size, size)))
    diagonal = np.diag(entries).copy()
    entries *= STRENGTH * size ** (-gamma / 2)
    np.fill_diagonal(entries, diagonal)
    return entries


def sample(size, disorder, rng):
    """Gap ratio of one matrix."""
    # the lower triangle of the array is the upper one of its transpose, which LAPACK can use without a copy
    levels = scipy.linalg.eigvalsh(matrix(size, disorder, rng).T, lower=False, check_finite=False, overwrite_a=True)
    return mean_gap_ratio(levels, round(FRACTION * size))


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261206,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "gap-ratio", "observable_symbol": "r", "disorder_symbol": "γ", "disorder_unit": "",
        "ergodic_value": 0.5307, "localised_value": 2 * np.log(2) - 1, "dimension": "none", "disorder_kind": "none",
    },
    reported={size: log(size) for size in PLAN},
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
