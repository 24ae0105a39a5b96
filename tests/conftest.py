"""Set before numpy is loaded: one BLAS thread, since the tests run side by side and their matrices are small."""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")
