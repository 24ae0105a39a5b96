"""A realisation table of any length: five sizes by twenty disorders, fifty eigenstates a realisation.

    python tests/benchmarks/realisation_table.py /somewhere/table.csv --rows 100000000
    python tests/benchmarks/realisation_table.py /somewhere/table.h5 --rows 100000000

10^8 rows are about 2.8 GB of text; the HDF5 file has a chunked dataset for each column. The values are random numbers,
for measuring speed only. `--order mixed` draws point and realisation of each row anew, as when many jobs write into one
file; `--order single` gives every realisation one row.
"""

import argparse
import shutil
from pathlib import Path

import numpy as np
import polars as pl

SIZES = (8, 10, 12, 14, 16)
DISORDERS = np.round(np.linspace(1, 8, 20), 2)
STATES = 50
NAMES = ("size", "disorder", "realisation", "value")
HDF5_CHUNK = 2**16  # rows; half a megabyte a chunk, the default size of a chunk cache being one
AT_ONCE = 1_000_000
BYTES_A_ROW = 40


def parts(rows, order="states", seed=1):
    """Columns of the table as dictionaries of arrays, at most a million rows at once."""
    rng = np.random.default_rng(seed)
    points = len(SIZES) * DISORDERS.size
    each = -(-rows // points)
    for start in range(0, rows, AT_ONCE):
        row = np.arange(start, min(start + AT_ONCE, rows))
        point, inside = np.divmod(row, each)
        if order == "mixed":
            point, inside = rng.integers(0, points, row.size), rng.integers(0, each, row.size)
        yield {
            "size": np.take(SIZES, point // DISORDERS.size),
            "disorder": DISORDERS[point % DISORDERS.size],
            "realisation": inside if order == "single" else inside // STATES,
            "value": np.round(0.5 + 0.1 * rng.standard_normal(row.size), 13),
        }


def write_csv(path, rows, order="states"):
    """The table as CSV with a header."""
    with path.open("wb") as stream:
        stream.write((",".join(NAMES) + "\n").encode())
        for part in parts(rows, order):
            pl.DataFrame(part).write_csv(stream, include_header=False)


def write_hdf5(path, rows, order="states"):
    """The table as HDF5, a chunked dataset for each column."""
    import h5py

    with h5py.File(path, "w") as file:
        kinds = {"size": np.float64, "disorder": np.float64, "realisation": np.int64, "value": np.float64}
        for name in NAMES:
            file.create_dataset(name, (rows,), kinds[name], chunks=(min(rows, HDF5_CHUNK),))
        start = 0
        for part in parts(rows, order):
            end = start + part["value"].size
            for name in NAMES:
                file[name][start:end] = part[name]
            start = end


def write(path, rows, order="states"):
    """CSV or HDF5, by the name of the file; refused where the disk has no room for it."""
    free = shutil.disk_usage(path.parent).free
    if free < 2 * rows * BYTES_A_ROW:
        raise SystemExit(f"{path.parent}: {free / 1e9:.1f} GB free, too little for {rows} rows")
    (write_hdf5 if path.suffix == ".h5" else write_csv)(path, rows, order)


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("path", type=Path)
    parser.add_argument("--rows", type=int, default=10_000_000)
    parser.add_argument("--order", choices=("states", "mixed", "single"), default="states")
    options = parser.parse_args()
    write(options.path, options.rows, options.order)
    print(f"{options.path}: {options.rows} rows, {options.path.stat().st_size / 1e9:.2f} GB")


if __name__ == "__main__":
    main()
