"""Simulation-based calibration (Talts et al., arXiv:1804.06788): ranks of the truth among posterior draws.

    python tests/calibration/ranks.py --sets 200        make the missing sets of every ansatz, then the page
    python tests/calibration/ranks.py --sets 0          the page alone

Parameters *and* the coefficients of the scaling function are drawn from the prior, data are simulated from them by the
model itself, and the model is fitted.  If draws come from the right posterior the rank of the true value among 99 of
them is uniform on 0 ... 99.  Drawing from all of the prior would mostly give data without information (a critical
disorder outside the grid, a size dependence of L^5), so the truth is drawn from the prior inside a box (`BOX`), and
only posterior draws inside the same box are ranked: the posterior of a prior cut to a box is the posterior cut to the
box, so ranks stay uniform.

Three answers are ranked:

- ``held``: tau held at its true value, units of y known. The control: exact up to the sampler.
- ``sampled``: tau sampled along with the rest, units of y known. Exact as well.
- ``program``: what `fit_collapse(quick=True)` reports, with tau held at e times its median (undersmoothing) and the
  units of y taken from the data. Intervals are deliberately a little wider than the exact posterior, so that its ranks
  may crowd in the middle.
"""

from __future__ import annotations

import argparse
import csv
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path

import numpy as np
import study  # first: it sets the number of threads
from families import DISORDER, GRIDS, LABELS, LARGE_GRID, MIDDLE_NOISE
from scipy.stats import chisquare

from driftline.collapse import _adapted, fit_collapse
from driftline.curves import Curve, Curves
from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.likelihood import CORRECTION_SD, Posterior

FOLDER = Path(__file__).parent
RANKS = FOLDER / "ranks.csv"
ANSATZE = ("power-law", "power-law:corrected")
ANSWERS = ("held", "sampled", "program")
BOX = {"W_c": (2.75, 6.25), "nu": (0.5, 3.0), "tau": (0.02, 0.3)}
HEIGHT, CENTRE = 0.14, 0.46  # unit and zero of y
DRAWS, BINS = 99, 10
COLUMNS = ("ansatz", "answer", "seed", "parameter", "rank", "code")
Ranks = dict[str, int]


def posterior(curves: Curves, ansatz: str, log_tau: float | None = None) -> Posterior:
    """The model with the units of y held, so that its prior does not depend on the data."""
    target = Posterior(curves, parse_ansatz(ansatz, curves), log_tau)
    target.__dict__.update(spread=HEIGHT, centre=CENTRE, correction_sd=CORRECTION_SD)  # in place of cached properties
    return target


def template() -> Curves:
    """Sizes, disorders and errors of the large grid, without data."""
    error = np.full(DISORDER.size, MIDDLE_NOISE)
    return Curves([Curve(float(L), DISORDER, np.full(DISORDER.size, CENTRE), error) for L in GRIDS[LARGE_GRID]], LABELS)


def drawn(ansatz: str, rng: np.random.Generator) -> tuple[dict[str, float], Curves]:
    """True parameters from the prior inside the box, and data made from them."""
    empty = template()
    target = posterior(empty, ansatz)
    names = [p.name for p in target.parameters]
    while True:
        z = target.from_unit(rng.random((1, len(names))))
        truth = dict(zip(names, (float(v) for v in target.values(z)[0]), strict=True))
        if all(low <= truth[name] <= high for name, (low, high) in BOX.items()):
            break
    design = target.design(z)[0, :, :-1]
    precision = target._precision(z[:, -2], design.shape[1])[0]
    root = np.linalg.cholesky(precision)
    coefficients = np.linalg.solve(root.T, rng.standard_normal(len(root)))
    noise = truth["s"] * MIDDLE_NOISE * rng.standard_normal(len(design))
    means = np.split(CENTRE + HEIGHT * (design @ coefficients) + noise, len(empty.curves))
    curves = [Curve(c.size, c.disorder, y, c.error) for c, y in zip(empty.curves, means, strict=True)]
    return truth, Curves(curves, LABELS)


def ranked(names: Sequence[str], places: np.ndarray, truth: Mapping[str, float], rng: np.random.Generator) -> Ranks:
    """Rank of every true value among `DRAWS` of the equally weighted `places` that lie in the box."""
    inside = np.ones(len(places), dtype=bool)
    for i, name in enumerate(names):
        low, high = BOX.get(name, (-np.inf, np.inf))
        inside &= (places[:, i] >= low) & (places[:, i] <= high)
    chosen = places[rng.choice(np.flatnonzero(inside), DRAWS, replace=inside.sum() < DRAWS)]
    return {name: int(np.sum(chosen[:, i] < truth[name])) for i, name in enumerate(names)}


def answers(ansatz: str, seed: int) -> dict[str, Ranks]:
    """Ranks of one simulated set under the three answers."""
    rng = np.random.default_rng([ANSATZE.index(ansatz), seed])
    truth, curves = drawn(ansatz, rng)
    found = {}
    for answer, log_tau in (("held", float(np.log(truth["tau"]))), ("sampled", None)):
        target = posterior(curves, ansatz, log_tau)
        _, draws = _adapted(target, rng)
        places = target.values(draws.resample(4000, rng))
        found[answer] = ranked([p.name for p in target.parameters], places, truth, rng)
    fit = fit_collapse(curves, ansatz, seed=rng, quick=True, extras=False)
    found["program"] = ranked(fit.names, fit.samples, truth, rng)
    return found


def run(sets: int, path: Path = RANKS) -> None:
    """Append the missing sets."""
    done = {(row["ansatz"], int(row["seed"])) for row in read(path)}
    for seed in range(sets):
        for ansatz in ANSATZE:
            if (ansatz, seed) not in done:
                _append(path, ansatz, seed, answers(ansatz, seed))


def _append(path: Path, ansatz: str, seed: int, found: Mapping[str, Ranks]) -> None:
    with path.open("a", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        if file.tell() == 0:
            writer.writerow(COLUMNS)
        code = study.code_version()
        writer.writerows(
            (ansatz, answer, seed, name, rank, code) for answer, own in found.items() for name, rank in own.items()
        )


def read(path: Path = RANKS) -> list[dict[str, str]]:
    """All ranks so far."""
    if not path.exists():
        return []
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def uniformity(ranks: Iterable[int]) -> tuple[np.ndarray, float]:
    """Histogram in ten bins and the p value of chi-squared against a uniform one."""
    counts = np.histogram(list(ranks), bins=BINS, range=(0, DRAWS + 1))[0]
    return counts, float(chisquare(counts).pvalue)


HEAD = f"""# Ranks of the truth among posterior draws

Made by `python tests/calibration/ranks.py --sets {{sets}}` (seeds 0 to {{last}} of each ansatz; sizes 8 to 18, 21
disorders from 1 to 8, errors {MIDDLE_NOISE:g} of a unit of {HEIGHT:g}). Truth from the prior inside the box
{", ".join(f"{name} {low:g}-{high:g}" for name, (low, high) in BOX.items())}; omega and s from all of their priors;
coefficients of F and G from theirs. Ranks among {DRAWS} draws in {BINS} bins; p is that of chi-squared against a
uniform histogram; mean and spread of a uniform rank are 0.500 and 0.289.

The answers `held` (tau at its true value: the control) and `sampled` must be uniform; `program` holds tau at e times
its median on purpose, and takes the units of y from the data, so it need not be. `tau` is ranked where it is sampled.

| ansatz | answer | parameter | sets | mean rank / 100 | spread | inside 68 % | inside 95 % | p | histogram |
|---|---|---|---|---|---|---|---|---|---|
"""


def page(rows: list[dict[str, str]]) -> str:
    """The table of histograms."""
    groups: dict[tuple[str, str, str], list[int]] = {}
    for row in rows:
        groups.setdefault((row["ansatz"], row["answer"], row["parameter"]), []).append(int(row["rank"]))
    lines = []
    order = sorted(groups, key=lambda key: (ANSATZE.index(key[0]), ANSWERS.index(key[1])))
    for key in order:
        share = (np.array(groups[key]) + 0.5) / (DRAWS + 1)
        counts, p = uniformity(groups[key])
        inside = [float(np.mean(np.abs(share - 0.5) < level / 2)) for level in (0.68, 0.95)]
        lines.append(
            f"| {' | '.join(key)} | {len(share)} | {share.mean():.3f} | {share.std():.3f} | "
            f"{inside[0]:.2f} | {inside[1]:.2f} | {p:.2g} | {' '.join(map(str, counts))} |"
        )
    sets = max((int(row["seed"]) + 1 for row in rows), default=0)
    return HEAD.format(sets=sets, last=max(sets - 1, 0)) + "\n".join(lines) + "\n"


def main() -> None:
    """Command line."""
    parser = argparse.ArgumentParser(description="Simulation-based calibration of two ansätze.")
    parser.add_argument("--sets", type=int, default=200)
    run(parser.parse_args().sets)
    (FOLDER / "ranks.md").write_text(page(read()), encoding="utf-8")


if __name__ == "__main__":
    main()
