"""The calibration study: what `driftline.analyse` says of data whose truth is known.

    python tests/calibration/study.py                       everything that is missing, most useful cells first
    python tests/calibration/study.py --stop-after 600      the same for ten minutes
    python tests/calibration/study.py --part 0 --parts 2    half of it, for a second process beside the first
    python tests/calibration/study.py --family kt --grid 8-18 --noise 0.003     some cells only

Each data set leaves one row in ``raw/<family>.csv``: the verdict and the numbers behind it, so that thresholds can be
changed afterwards without a new run (`rejudge.py`).  Rows are appended as they come and never written twice; a run
that is killed goes on where it was.  `tables.py` makes the results from the rows.
"""

from __future__ import annotations

import argparse
import csv
import fcntl
import functools
import hashlib
import os
import sys
import time
from collections.abc import Iterator, Mapping
from pathlib import Path
from unittest import mock

for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(_name, "1")  # one process is one core; set before numpy is loaded

import numpy as np
from families import FAMILIES, GRIDS, LARGE_GRID, MIDDLE_NOISE, NOISES, Cell

import driftline
from driftline import analysis
from driftline.cautions import CROSSES
from driftline.collapse import fit_collapse
from driftline.inference.intervals import Interval
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.settings import Settings

RAW = Path(__file__).parent / "raw"
SETTINGS = Settings(quick=True)
#: (sets, cells): each stage is complete before the next begins; families take turns within it.
MIDDLE_CELLS = [(MIDDLE_NOISE, LARGE_GRID), *((MIDDLE_NOISE, grid) for grid in GRIDS if grid != LARGE_GRID)]
OTHER_CELLS = [(noise, grid) for grid in GRIDS for noise in NOISES if noise != MIDDLE_NOISE]
STAGES = [
    (8, MIDDLE_CELLS[:1]), (4, MIDDLE_CELLS[1:]), (3, OTHER_CELLS), (20, MIDDLE_CELLS), (10, OTHER_CELLS),
    (50, MIDDLE_CELLS), (20, OTHER_CELLS), (100, MIDDLE_CELLS), (40, OTHER_CELLS),
]  # fmt: skip
HYPOTHESES = ("transition", "drift", "none")
ENDS = ("median", "low68", "high68", "low95", "high95")
COLUMNS = (
    "family", "noise", "grid", "seed", "code", "verdict", "warnings", "wc_true", "nu_true",
    *(f"p_{name}" for name in HYPOTHESES), *(f"lz_{name}" for name in DEFAULT_ANSATZE), "p_bounded", "rate",
    "z_below", "z_above", "flat", "flat_at_reference", "crossing", "pairs",
    *(f"wc_{end}" for end in ENDS), "wc_systematic", *(f"nu_{end}" for end in ENDS), "basis",
    *(f"plain_wc_{end}" for end in ENDS[3:]), *(f"plain_nu_{end}" for end in ENDS[3:]),
    "p_value", "noise_scale", "size_z", "window_z", "cpu",
)  # fmt: skip


@functools.cache
def code_version() -> str:
    """Short hash of the package's numerical source, so that rows of different programs can be told apart."""
    root = Path(driftline.__file__).parent
    digest = hashlib.sha256()
    for path in sorted(root.rglob("*.py")):
        if path.relative_to(root).parts[0] not in ("figures", "report", "readers", "cli"):
            digest.update(path.read_bytes())
    return digest.hexdigest()[:8]


def jobs() -> Iterator[tuple[Cell, int]]:
    """All data sets of the study in the order in which they are made."""
    for sets, cells in STAGES:
        for seed in range(sets):
            for noise, grid in cells:
                for family in FAMILIES:
                    yield Cell(family, noise, grid), seed


def analysed(cell: Cell, seed: int) -> driftline.Analysis:
    """The quick analysis of one data set.

    Held-out size, prior sensitivity and cost functions of each fit are left out: nothing recorded here depends on
    them (a test compares), and they cost a third of the time.
    """
    shorter = functools.partial(fit_collapse, extras=False)
    with mock.patch.multiple(analysis, fit_collapse=shorter, collapse_costs=lambda *_args, **_options: ()):
        return driftline.analyse(cell.curves(seed), settings=SETTINGS)


def row(cell: Cell, seed: int) -> dict[str, str]:
    """Analyse one data set and put down what was found."""
    start = time.process_time()
    result = analysed(cell, seed)
    family, verdict = FAMILIES[cell.family], result.verdict
    adjacent = result.crossings.adjacent
    found: dict[str, object] = {
        "family": cell.family, "noise": cell.noise, "grid": cell.grid, "seed": seed, "code": code_version(),
        "verdict": verdict.code, "warnings": " ".join(caution.code for caution in verdict.warnings),
        "wc_true": family.W_c, "nu_true": family.nu,
        **{f"p_{name}": result.comparison.probability(name) for name in HYPOTHESES},
        **{f"lz_{fit.ansatz.name}": fit.log_evidence for fit in result.comparison.fits},
        "p_bounded": result.drift.probability_bounded,
        "rate": result.drift.rate_per_site.median if result.drift.rate_per_site else None,
        "z_below": result.separation.z_below, "z_above": result.separation.z_above,
        "flat": result.separation.flat_side, "flat_at_reference": int(result.separation.flat_at_reference),
        "crossing": sum(pair.probability >= CROSSES for pair in adjacent), "pairs": len(adjacent),
        **_plain(result), **_headline(result), "cpu": time.process_time() - start,
    }  # fmt: skip
    return {name: _text(found.get(name)) for name in COLUMNS}


def _headline(result: driftline.Analysis) -> dict[str, object]:
    basis = analysis.headline_basis(result.comparison)
    if result.crossover is None:
        return {}
    best = max(basis, key=lambda fit: fit.log_evidence)
    return {
        **_interval("wc", result.crossover.disorder), **_interval("nu", result.crossover.nu),
        "wc_systematic": result.crossover.systematic, "basis": " ".join(result.crossover.basis),
        "p_value": best.quality.p_value, "noise_scale": best.quality.noise_scale,
        "size_z": _worst(result, sizes=True), "window_z": _worst(result, sizes=False),
    }  # fmt: skip


def _plain(result: driftline.Analysis) -> dict[str, object]:
    """The plain power law, which most papers fit, for comparison with the headline."""
    parameters = result.comparison["power-law"].parameters
    return {**_interval("plain_wc", parameters["W_c"]), **_interval("plain_nu", parameters["nu"])}


def _interval(name: str, interval: Interval | None) -> dict[str, object]:
    return {} if interval is None else {f"{name}_{end}": value for end, value in interval.to_dict().items()}


def _worst(result: driftline.Analysis, *, sizes: bool) -> float | None:
    """Largest significance of a shift of W_c among the refits without the smallest size, or in a narrower window."""
    smallest = result.curves.sizes[0]
    rows = [each for each in result.stability if (each.smallest_size > smallest) == sizes]
    significances = [each.significance(result.comparison[each.ansatz].parameters["W_c"]) for each in rows]
    return max(significances, key=abs, default=None)


def _text(value: object) -> str:
    """Five figures are more than any table needs."""
    if value is None:
        return ""
    return f"{value:.5g}" if isinstance(value, float | np.floating) else str(value)


def identity(entry: dict[str, str]) -> tuple[Cell, int]:
    """Cell and seed of a row."""
    return Cell(entry["family"], float(entry["noise"]), entry["grid"]), int(entry["seed"])


def read_rows(folder: Path = RAW) -> list[dict[str, str]]:
    """All raw rows, family by family; a last line cut short by a kill is left out."""
    rows = []
    for path in sorted(folder.glob("*.csv")):
        with path.open(newline="", encoding="utf-8") as file:
            rows += [entry for entry in csv.DictReader(file) if entry["cpu"]]
    return rows


def append(entry: dict[str, str], folder: Path = RAW) -> None:
    """Add one row to its family's file; processes may share it."""
    folder.mkdir(exist_ok=True)
    with (folder / f"{entry['family']}.csv").open("a", newline="", encoding="utf-8") as file:
        fcntl.flock(file, fcntl.LOCK_EX)
        writer = csv.DictWriter(file, COLUMNS, lineterminator="\n")
        if file.tell() == 0:
            writer.writeheader()
        writer.writerow(entry)


def run(
    part: int = 0,
    parts: int = 1,
    seconds: float = float("inf"),
    folder: Path = RAW,
    only: Mapping[str, object] | None = None,
) -> int:
    """Make the missing rows of one part of the study; returns how many were made.

    `only` maps names of fields of `Cell` to the value that they must have.
    """
    done = {identity(entry) for entry in read_rows(folder)}
    stop, made = time.monotonic() + seconds, 0
    chosen = [job for job in dict.fromkeys(jobs()) if all(getattr(job[0], k) == v for k, v in (only or {}).items())]
    for number, (cell, seed) in enumerate(chosen):
        if time.monotonic() > stop:
            break
        if number % parts == part and (cell, seed) not in done:
            append(row(cell, seed), folder)
            made += 1
    return made


def main() -> None:
    """Command line."""
    parser = argparse.ArgumentParser(description="Run the calibration study, or a part of it.")
    parser.add_argument("--part", type=int, default=0)
    parser.add_argument("--parts", type=int, default=1)
    parser.add_argument("--stop-after", type=float, default=float("inf"), metavar="SECONDS")
    parser.add_argument("--family", choices=FAMILIES)
    parser.add_argument("--noise", type=float, choices=NOISES)
    parser.add_argument("--grid", choices=GRIDS)
    chosen = parser.parse_args()
    only = {name: getattr(chosen, name) for name in ("family", "noise", "grid") if getattr(chosen, name) is not None}
    print(run(chosen.part, chosen.parts, chosen.stop_after, only=only), "data sets", file=sys.stderr)


if __name__ == "__main__":
    main()
