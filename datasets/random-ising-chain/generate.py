"""Surface order of the random transverse-field Ising chain against that of the dual sample.

    H = - sum_l J_l s^x_l s^x_l+1 - sum_l h_l s^z_l ,   l = 1 ... L-1 ,   s^x_L = 1 fixed

with J_l uniform in (0, 1] and h_l uniform in (0, h_0], all independent, and the control parameter delta = ln h_0, so
that [ln h] - [ln J] = delta.  After the Jordan-Wigner transformation the chain is free fermions, whose (L-1) x L
matrix with h_l in column l and J_l in column l+1 of row l has an exact zero mode.  Its weight on site 1 is the square
of the surface magnetisation (Igloi, Rieger, PRB 57, 11404 (1998), from memory):

    m^2 = [1 + sum_l prod_(j<=l) (h_j / J_j)^2]^-1 .

The observable is m^2 / (m^2 + mu^2), with mu the same for the dual sample, in which each h_j and J_j have changed
places.  At delta = 0 the two have one distribution, so the mean is 1/2 for every L and the curves of all sizes cross.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv
    python generate.py --workers 1     with one process

Seeded block by block and resumable, see ../_blocks.py.  Needs numpy; h5py for curves.h5.
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded

# isort: split
import numpy as np

# Not symmetric about 0, so that no estimator is right merely because it favours the middle of the range
DISORDERS = (
    -0.27, -0.21, -0.16, -0.12, -0.085, -0.055, -0.03, -0.01, 0.01, 0.03, 0.06, 0.09, 0.13, 0.18, 0.24, 0.3,
)  # fmt: skip
PLAN = {16: (10000, 4), 32: (10000, 4), 64: (10000, 4), 128: (10000, 4), 256: (10000, 4)}


def log_ratios(size, disorder, rng):
    """ln(h_l / J_l) of one sample, shape (L-1,)."""
    uniform = 1 - rng.random((2, size - 1))  # in (0, 1], so that the logarithm is finite
    return disorder + np.log(uniform[0]) - np.log(uniform[1])


def log_surface(ratios):
    """ln m^2 from ln(h_l / J_l); by logarithms, because the products leave the range of doubles."""
    return -np.logaddexp.reduce(2 * np.cumsum(ratios), initial=0.0)


def order_share(ratios):
    """m^2 / (m^2 + mu^2); exchanging h and J changes the sign of every logarithm."""
    # 1 / (1 + exp(d)) without overflow
    return (1 - np.tanh((log_surface(-ratios) - log_surface(ratios)) / 2)) / 2


def sample(size, disorder, rng):
    """The observable of one sample."""
    return order_share(log_ratios(size, disorder, rng))


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261207,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "surface-order-share", "observable_symbol": r"m^2/(m^2+\mu^2)", "disorder_symbol": "δ",
        "disorder_unit": "", "dimension": 1, "disorder_kind": "quenched",
    },
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
