"""Localisation transition of the Aubry-Andre chain, seen by an observable that duality pins at the transition.

    H = sum_j (exp(i theta) c_j+1^+ c_j + h.c.) + V sum_j cos(2 pi beta j + phi) c_j^+ c_j ,   j = 0 ... N-1, periodic

with hopping 1, N = F_n a Fibonacci number, beta = F_n-1 / F_n, and both phases drawn uniformly from [0, 2 pi) for every
realisation.  With the momentum states d_k = N^-1/2 sum_j exp(-2 pi i beta k j) c_j the same Hamiltonian reads

    H = sum_k 2 cos(2 pi beta k + theta) d_k^+ d_k + V/2 sum_k (exp(i phi) d_k+1^+ d_k + h.c.)

up to the sign of a phase, which is V/2 times the chain with potential 4/V in which phi and theta have changed places.
Drawing both phases from one distribution therefore makes the ensemble exactly self-dual at V = 2 for every N.

The observable is I_x / (I_x + I_k), with I_x = sum_j |psi_j|^4 the inverse participation ratio of an eigenstate and I_k
that of its Fourier transform.  It is averaged over all N eigenstates; the realisation is the unit of statistics.
Its mean m obeys m(V) + m(4/V) = 1 exactly, so m(2) = 1/2 and the curves of all sizes cross there.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

Seeded block by block and resumable, see ../_blocks.py.  Needs numpy and scipy; h5py for curves.h5.
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded

# isort: split
import numpy as np
import scipy.linalg

PREVIOUS = {55: 34, 89: 55, 144: 89, 233: 144, 377: 233, 610: 377}  # F_n: F_n-1
# Not symmetric about V = 2, so that no estimator is right merely because it favours the middle of the range
DISORDERS = (
    1.95, 1.965, 1.975, 1.982, 1.988, 1.993, 1.997, 2.0, 2.003, 2.007, 2.012, 2.018, 2.026, 2.036, 2.048, 2.06, 2.075,
)  # fmt: skip
PLAN = {55: (100, 3), 89: (100, 3), 144: (100, 3), 233: (100, 3), 377: (65, 2), 610: (40, 2)}


def hamiltonian(size, potential, phi, theta):
    """Dense Hermitian matrix of the chain, shape (N, N)."""
    site = np.arange(size)
    # beta j modulo 1 in integers, so that the potential is periodic to the last digit
    fraction = (PREVIOUS[size] * site) % size / size
    matrix = np.diag(potential * np.cos(2 * np.pi * fraction + phi)).astype(complex)
    matrix[(site + 1) % size, site] = np.exp(1j * theta)
    matrix[site, (site + 1) % size] = np.exp(-1j * theta)
    return matrix


def position_share(states):
    """I_x / (I_x + I_k) of each column of `states`."""
    in_position = np.sum(np.abs(states) ** 4, axis=0)
    in_momentum = np.sum(np.abs(np.fft.fft(states, axis=0, norm="ortho")) ** 4, axis=0)
    return in_position / (in_position + in_momentum)


def sample(size, disorder, rng):
    """Mean of the observable over all eigenstates of one realisation of the two phases."""
    phi, theta = rng.uniform(0, 2 * np.pi, 2)
    _, states = scipy.linalg.eigh(hamiltonian(size, disorder, phi, theta), check_finite=False, overwrite_a=True)
    return position_share(states).mean()


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261203,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "ipr-share", "observable_symbol": "I_x/(I_x+I_k)", "disorder_symbol": "V", "disorder_unit": "t",
        "ergodic_value": 0.0, "localised_value": 1.0, "dimension": 1, "disorder_kind": "quasiperiodic",
    },
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
