"""An invented example: synchrony of pendulum clocks on a wall.  Nothing here was measured or simulated.

Imagine L x L pendulum clocks hung on a wall, each feeling its neighbours through the boards.  Their pendulums differ in
length by a random amount, of standard deviation s (in mm).  The synchrony R of one wall, between 0 and 1, is said to be
1 when all clocks swing together.  The numbers come from this made-up law, with the truth known by construction:

    mean of R = F(x) + c / L ,    x = (s - s_c) L^(1/nu) ,    F(x) = low + (high - low) / (1 + exp(x / width))

    s_c = 3.62,  nu = 1.25,  c = -0.08,  low = 0.08,  high = 0.94,  width = 4

The synchrony of one wall is drawn from a beta distribution with that mean and the variance mean (1 - mean) / 25; the
mean and its standard error over 600 walls are written down.

    python generate.py                 compute what is missing, then write curves.csv and curves.h5
    python generate.py --write         only write the two files from blocks.csv

Seeded block by block and resumable, see ../_blocks.py.  Needs numpy; h5py for curves.h5.
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
import _blocks  # before numpy, which reads the number of threads when it is loaded

# isort: split
import numpy as np

CRITICAL, NU, CORRECTION, LOW, HIGH, WIDTH, CONCENTRATION = 3.62, 1.25, -0.08, 0.08, 0.94, 4.0, 24.0
DISORDERS = (2.2, 2.5, 2.75, 3.0, 3.2, 3.4, 3.6, 3.8, 4.0, 4.25, 4.5, 4.8, 5.2)
PLAN = {8: (300, 2), 12: (300, 2), 16: (300, 2), 24: (300, 2), 32: (300, 2)}


def law(size, disorder):
    """Mean synchrony of a wall of `size` by `size` clocks."""
    x = (disorder - CRITICAL) * size ** (1 / NU)
    return LOW + (HIGH - LOW) / (1 + np.exp(x / WIDTH)) + CORRECTION / size


def sample(size, disorder, rng):
    """Synchrony of one wall."""
    mean = law(size, disorder)
    return rng.beta(CONCENTRATION * mean, CONCENTRATION * (1 - mean))


STUDY = _blocks.Study(
    folder=Path(__file__).parent,
    sample=sample,
    seed=20261204,
    plan=PLAN,
    disorders=dict.fromkeys(PLAN, DISORDERS),
    labels={
        "observable": "synchrony", "observable_symbol": "R", "disorder_symbol": "s", "disorder_unit": "mm",
        "dimension": 2, "disorder_kind": "quenched",
    },
)  # fmt: skip


if __name__ == "__main__":
    _blocks.main(STUDY, __doc__)
