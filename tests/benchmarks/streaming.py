"""Speed and memory of reading a long realisation table, beside polars and plain h5py on the same file.

    python tests/benchmarks/streaming.py --rows 100000000 --folder /somewhere/with/10/GB

Writes the tables (see `realisation_table.py`), reads each in turn by both ways, each time in a fresh process so that
the peak memory is its own, and deletes them. What is compared:

- CSV: `stream` to means, standard errors and counts of every point; polars' streaming engine, lazily grouping by
  realisation and then by point, which is the same job. Both also check what they read: here every number.
- HDF5: the same job from four datasets; a plain loop that reads them chunk by chunk and does nothing.

The ratio is time of the other over time of `stream`, median over rounds: above 1 means faster. To reach: 0.7. The
libraries are loaded before the clock starts. `stream` works with two threads, so on a machine that others use as well
the wall time says as much about them.
"""

import argparse
import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(name, "1")

from realisation_table import NAMES, write

PLAIN_ROWS = 2**16 * 8


def by_stream(path):
    import h5py
    import numpy as np

    from driftline.readers.streaming import LongDatasets, LongText, Positions, stream

    def summary(source):
        return [
            (b.size, b.disorder, b.values.mean(), b.values.std(ddof=1) / np.sqrt(b.values.size), b.values.size)
            for b in stream(source)
        ]

    if path.suffix == ".csv":
        return summary(LongText(path, str(path), Positions(width=4, size=0, disorder=1, realisation=2, value=3)))
    with h5py.File(path, "r") as file:
        return summary(LongDatasets(str(path), {name: file[name] for name in NAMES}))


def by_polars(path):
    import polars as pl

    value = pl.col("value")
    single = pl.scan_csv(path).group_by("size", "disorder", "realisation").agg(value.mean())
    error = (value.std() / pl.len().sqrt()).alias("error")
    points = single.group_by("size", "disorder").agg(value.mean().alias("mean"), error, pl.len().alias("count"))
    return points.sort("size", "disorder").collect(engine="streaming").rows()


def by_plain_hdf5(path):
    import h5py

    with h5py.File(path, "r") as file:
        length = file[NAMES[0]].shape[0]
        for start in range(0, length, PLAIN_ROWS):
            for name in NAMES:
                file[name][start : start + PLAIN_ROWS]


WAYS = {"stream": by_stream, "polars": by_polars, "h5py": by_plain_hdf5}


def one_run(way, path):
    """Run in this process: wall time, processor time, peak memory in GiB, and the result."""
    import resource

    import h5py  # noqa: F401 - loading of libraries is not what is compared
    import polars  # noqa: F401

    import driftline.readers.streaming  # noqa: F401

    begin, worked = time.perf_counter(), time.process_time()
    result = WAYS[way](Path(path))
    times = time.perf_counter() - begin, time.process_time() - worked
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20  # kilobytes on Linux
    print(json.dumps([*times, peak, result]))


def measured(way, path):
    command = [sys.executable, __file__, "--way", way, "--path", str(path)]
    return json.loads(subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True).stdout)


def compare(path, other, rounds):
    """Alternating runs; the first of the two changes from round to round."""
    runs = {"stream": [], other: []}
    for index in range(rounds):
        for way in ("stream", other) if index % 2 == 0 else (other, "stream"):
            runs[way].append(measured(way, path))
    for way, found in runs.items():
        wall, work, peak = (statistics.median(column) for column in list(zip(*found, strict=True))[:3])
        print(f"  {way:8}{wall:8.1f} s wall {work:8.1f} s processor {max(peak, 0):7.2f} GiB peak")
    for index, what in enumerate(("wall", "processor")):
        ratios = [b[index] / a[index] for a, b in zip(runs["stream"], runs[other], strict=True)]
        shown = ", ".join(f"{ratio:.2f}" for ratio in ratios)
        print(f"  {other} time / stream time ({what}): {statistics.median(ratios):.2f}   rounds: {shown}")
    if other == "polars":
        agree(runs["stream"][0][3], runs[other][0][3])


def agree(ours, theirs):
    """Means, errors and counts of both, to rounding of sums over 10^6 values."""
    assert len(ours) == len(theirs)
    for a, b in zip(ours, theirs, strict=True):
        assert all(abs(x - y) <= 1e-9 * abs(y) for x, y in zip(a, b, strict=True)), (a, b)
    print(f"  means, errors and counts of all {len(ours)} points agree to 1e-9")


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--rows", type=int, default=10_000_000)
    parser.add_argument("--rounds", type=int, default=3)
    parser.add_argument("--order", choices=("states", "mixed", "single"), default="states")
    parser.add_argument("--only", choices=("csv", "h5"))
    parser.add_argument("--folder", type=Path, default=Path(tempfile.gettempdir()))
    parser.add_argument("--way", choices=tuple(WAYS), help=argparse.SUPPRESS)
    parser.add_argument("--path", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.way:
        one_run(options.way, options.path)
        return
    for suffix, other in (("csv", "polars"), ("h5", "h5py")):
        if options.only in (None, suffix):
            with tempfile.TemporaryDirectory(dir=options.folder) as folder:
                path = Path(folder) / f"table.{suffix}"
                write(path, options.rows, options.order)
                print(f"{suffix}: {options.rows} rows, {path.stat().st_size / 1e9:.2f} GB, order {options.order}")
                compare(path, other, options.rounds)


if __name__ == "__main__":
    main()
