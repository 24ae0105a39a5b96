"""Time of the whole job on a data set: wall clock and processor time of the command, run after run in turn.

    python tests/benchmarks/job.py [DATA] [--runs N]

Each kind of run (``--help``, ``--quick``, full; one and two processes) is made N times in turn, so that what else the
machine does hits all alike; medians are printed, with the ratio of two processes to one.  Only on a quiet machine do
the seconds mean something.  Output goes to a temporary folder.
"""

import argparse
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

CHAIN = Path(__file__).parents[2] / "datasets" / "random-field-chain" / "gap-ratio.h5"
KINDS = {
    "--help": ("--help",),
    "--quick, 1 process": ("--quick", "--jobs", "1"),
    "--quick, 2 processes": ("--quick", "--jobs", "2"),
    "full, 1 process": ("--jobs", "1"),
    "full, 2 processes": ("--jobs", "2"),
}


def seconds(data, options, folder):
    """Wall-clock and processor seconds of one run, children included."""
    wall, used = time.perf_counter(), processor()
    command = [sys.executable, "-m", "driftline", "analyse", str(data), "--quiet", "--force", "--out", folder, *options]
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
    return time.perf_counter() - wall, processor() - used


def processor():
    """Processor seconds of all finished children so far."""
    usage = resource.getrusage(resource.RUSAGE_CHILDREN)
    return usage.ru_utime + usage.ru_stime


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("data", type=Path, nargs="?", default=CHAIN)
    parser.add_argument("--runs", type=int, default=3)
    chosen = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        out = str(Path(folder) / "out")
        seconds(chosen.data, KINDS["--quick, 1 process"], out)  # compiles, once for all
        rounds = [
            {name: seconds(chosen.data, options, out) for name, options in KINDS.items()} for _ in range(chosen.runs)
        ]
    print(f"{'run':24}{'wall s':>10}{'processor s':>14}")
    medians = {}
    for name in KINDS:
        wall, used = (statistics.median(each[name][part] for each in rounds) for part in (0, 1))
        medians[name] = wall
        print(f"{name:24}{wall:10.2f}{used:14.2f}")
    print(f"two processes to one, full: {medians['full, 2 processes'] / medians['full, 1 process']:.2f} of the time")


if __name__ == "__main__":
    main()
