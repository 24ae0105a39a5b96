"""Reads the files named on the command line under a limit of memory and time each; run by ``test_hostile.py``.

Every line of output is one file: seconds, growth of the peak memory in MB, and what came of it.
"""

from __future__ import annotations

import resource
import signal
import sys
import time
from pathlib import Path

from driftline.errors import DriftlineError
from driftline.readers import read
from driftline.settings import Settings

MEMORY = 1 << 30  # bytes beyond what the imports took: no file below needs a tenth of it
SECONDS = 60  # of the processor, for all files together


def mapped() -> int:
    """Bytes of address space in use."""
    return int(Path("/proc/self/statm").read_text().split()[0]) * resource.getpagesize()


def outcome(path: str) -> str:
    """What reading `path` comes to."""
    try:
        if path.endswith(".toml"):
            Settings.resolve(path)
            return "read"
        return f"{read(path).points} points"
    except DriftlineError as fault:
        return str(fault)


def main() -> None:
    """Read every file in turn."""
    limit = mapped() + MEMORY
    resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    resource.setrlimit(resource.RLIMIT_CPU, (SECONDS, SECONDS))
    signal.alarm(10 * SECONDS)  # what waits uses no processor
    for path in sys.argv[1:]:
        start, before = time.process_time(), resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        text = outcome(path)
        grown = (resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before) / 1024
        print(f"{time.process_time() - start:.2f}\t{grown:.0f}\t{Path(path).name}\t{text}", flush=True)


if __name__ == "__main__":
    main()
