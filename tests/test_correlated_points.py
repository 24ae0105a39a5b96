"""Points that share their realisations: shrinkage against truth, where it is used, and what it does to intervals."""

from __future__ import annotations

import h5py
import numpy as np
import pytest
from scipy.special import ndtri

from driftline.collapse import fit_collapse
from driftline.covariance import ENOUGH, correlations, doubt, shared_covariance, shrunk
from driftline.crossings import find_crossings
from driftline.curves import Curve, Curves
from driftline.readers.averages import Median
from driftline.readers.samples import Block, SampleOptions, sampled
from driftline.separation import fit_trends
from driftline.simulate import PowerLawTruth, simulate
from driftline.smoothing import smooth_curves

CHAIN = "datasets/random-field-chain/realisations.h5"
POINTS = 13
#: Correlations of entanglement entropies of the same fields fall like this with the distance of two disorders
SMOOTH = np.exp(-np.abs(np.subtract.outer(np.arange(POINTS), np.arange(POINTS))) / 6)
TRUTHS = {"smooth": SMOOTH, "even": 0.5 + 0.5 * np.eye(POINTS), "none": np.eye(POINTS)}
Z95 = float(ndtri(0.975))


def without_covariance(curves: Curves) -> Curves:
    """The same points as if they were independent."""
    return Curves([Curve(c.size, c.disorder, c.mean, c.error, samples=c.samples) for c in curves.curves])


# ---------------------------------------------------------------- shrinkage


def cubic_coverage(truth, n, estimator, *, sets=400, seed=1):
    """Share of 95 % intervals of the four coefficients of a cubic that hold the truth, and root mean squared error.

    Generalised least squares with the covariance that `estimator` makes of a sample correlation matrix.
    """
    rng = np.random.default_rng(seed)
    design = np.vander(np.linspace(-1, 1, POINTS), 4)
    root = np.linalg.cholesky(truth)
    held, squares = [], []
    for _ in range(sets):
        table = rng.standard_normal((n, POINTS)) @ root.T
        offset = table - table.mean(axis=0)
        error = table.std(axis=0, ddof=1) / np.sqrt(n)
        inverse = np.linalg.inv(estimator(correlations(offset), n) * np.outer(error, error))
        spread = np.linalg.inv(design.T @ inverse @ design)
        found = spread @ design.T @ inverse @ table.mean(axis=0)
        held.append(np.abs(found) < Z95 * np.sqrt(np.diag(spread)))
        squares.append(found**2)
    return float(np.mean(held)), float(np.sqrt(np.mean(squares)))


def trusted(correlation, n):
    """What curves use."""
    return shrunk(correlation, n) * doubt(len(correlation), n)


@pytest.mark.parametrize("name", TRUTHS)
def test_intervals_from_few_realisations(name):
    """With 40 realisations of 13 points, intervals hold the truth as often as stated; plain sample covariances fail."""
    # Binomial error of 400 sets, taken as one coefficient each: sqrt(0.95 0.05/400) = 0.011; three of these below.
    # Above 0.95 the factor is on the safe side on purpose: to 0.98 where nothing correlates.
    coverage, scatter = cubic_coverage(TRUTHS[name], 40, trusted)
    assert coverage > 0.95 - 3 * 0.011
    plain, wide = cubic_coverage(TRUTHS[name], 40, lambda correlation, n: correlation)
    assert plain < 0.95 - 6 * 0.011  # negative control: 0.85 was found
    # Noise in the weights of the plain estimate costs precision, by sqrt(1 + (k - p)/n) = 1.1 to leading order
    assert scatter < wide


def test_shrinkage_by_hand():
    """No correlation stays none, strong ones stay with many realisations, and a correlation matrix comes out."""
    assert shrunk(np.eye(5), 1000) == pytest.approx(np.eye(5), abs=1e-12)
    many = shrunk(SMOOTH, 10**6)
    assert many == pytest.approx(SMOOTH, abs=0.01)  # the kernels are n^(-1/3) = 0.01 of an eigenvalue wide
    for n in (2, 5, 20, 200):
        table = np.random.default_rng(n).standard_normal((n, POINTS)) @ np.linalg.cholesky(SMOOTH).T
        found = shrunk(correlations(table - table.mean(axis=0)), n)
        assert np.diag(found).tolist() == [1.0] * POINTS
        assert np.linalg.eigvalsh(found)[0] > 5e-5  # half the floor, for the rescaling
    assert (20 - 1) < ENOUGH * POINTS < 200  # so both formulas were met


def test_one_value_everywhere():
    """A disorder where all realisations agree correlates with nothing and spoils nothing."""
    influence = np.random.default_rng(5).normal(size=(50, 3))
    influence -= influence.mean(axis=0)
    influence[:, 1] = 0.0
    found = shared_covariance(influence, np.array([1.0, 2.0, 3.0]), 50)
    assert found[1] == pytest.approx([0.0, 4.0, 0.0], abs=0.2)


def test_medians_correlate_as_resampled():
    """The covariance of medians is that of medians resampled together."""
    rng = np.random.default_rng(6)
    table = rng.normal(size=(400, 1)) + 0.5 * rng.standard_cauchy((400, 4))
    blocks = [Block(8.0, w, column, np.arange(400), "r") for w, column in enumerate(table.T)]
    found = sampled(blocks, SampleOptions(average=Median.name)).curves[0]
    medians = np.stack([np.median(table[rng.integers(0, 400, 400)], axis=0) for _ in range(1500)])
    own = found.covariance / np.outer(found.error, found.error)
    # 400 realisations know a correlation to 0.05, and 1500 resamplings add 0.03
    assert own == pytest.approx(np.corrcoef(medians, rowvar=False), abs=0.2)
    assert 0.2 < own[0, 1] < 0.8


# ---------------------------------------------------------------- where it is used


def test_few_realisations_widen_the_noise():
    """Estimators see 1 + k/n times the covariance, k being the points in use; the errors shown are the plain ones."""
    tables = np.random.default_rng(7).normal(size=(10, 50))
    curve = sampled(Block(8.0, w, table, np.arange(50), "r") for w, table in enumerate(tables)).curves[0]
    np.testing.assert_allclose(np.diag(curve.noise), 1.2 * curve.error**2, rtol=1e-12)
    half = curve.keep(np.arange(10) < 5)
    np.testing.assert_allclose(half.noise, curve.covariance[:5, :5] * 1.1, rtol=1e-12)
    exact = Curve(8.0, curve.disorder, curve.mean, curve.error, curve.covariance)
    np.testing.assert_array_equal(exact.noise, curve.covariance)


def test_every_estimator_sees_the_covariance():
    """Smoothing, crossings, trends and collapse change with it."""
    grid = np.linspace(2, 6, 11)
    curves = simulate([8, 12, 16], grid, PowerLawTruth(W_c=4.0), 0.004, 1, correlation=0.9)
    plain = without_covariance(curves)
    own, other = (smooth_curves(each, draws=500, rng=1)[0] for each in (curves, plain))
    # The common noise of a curve, sqrt(0.9) of each error, cannot be averaged away; independent errors can
    assert np.median(own.sd) > 1.2 * np.median(other.sd)
    assert np.median(own.sd) > 0.9 * np.sqrt(0.9) * 0.004
    trends = [
        fit_trends(grid, np.log([8, 12, 16]), np.zeros((3, 11)), np.array([c.noise for c in each.curves]))
        for each in (curves, plain)
    ]
    assert trends[0].covariance[0, 10] == pytest.approx(0.9 * trends[1].covariance[0, 0], rel=1e-9)
    widths = []
    for each in (curves, plain):
        pair = find_crossings(each, draws=500).adjacent[0].disorder
        assert pair is not None
        widths.append((pair.sd, fit_collapse(each, "power-law", quick=True, extras=False).parameters["W_c"].sd))
    # Steep curves move along W when they move along y, by the common noise. In a collapse it makes curves miss each
    # other, which independent errors can only take for a bad fit, so that knowing it helps.
    assert widths[0][0] > 1.2 * widths[1][0]
    assert widths[0][1] < widths[1][1] / 1.2


# ---------------------------------------------------------------- the chain's crossing


def chain_tables(lowest, highest):
    """Disorders, and for L = 8 and 10 the entanglement, relative to that of a random state, of single states."""
    with h5py.File(CHAIN) as file:
        grid = file["disorder"][()]
        kept = (grid >= lowest) & (grid <= highest)
        tables = {}
        for size in (8, 10):
            group = file[f"sizes/{size}"]
            states = group["state_entanglement"][()].astype(float)[:, kept]
            tables[size] = states / group.attrs["random_state_entropy"]
    return grid[kept], tables


def resampled_crossing(grid, tables, rng, *, together):
    """Half-width of the 68 % range of the crossing nearest to W = 1.6 of quartics through resampled means.

    Rows of the tables are resampled, all disorders together or each by itself.
    """
    fine = np.linspace(grid[0], grid[-1], 1001)
    centre, scale = grid.mean(), np.ptp(grid) / 2
    design, reach = (np.vander((w - centre) / scale, 5) for w in (grid, fine))
    curves = []
    for table in tables.values():
        n = len(table)
        sigma = table.std(axis=0)
        draws = [rng.multinomial(n, np.full(n, 1 / n), 150) / n for _ in range(1 if together else grid.size)]
        means = np.stack([draws[k % len(draws)] @ table[:, k] for k in range(grid.size)])
        curves.append(reach @ np.linalg.lstsq(design / sigma[:, None], means / sigma[:, None], rcond=None)[0])
    difference = curves[0] - curves[1]
    flips = difference[1:] * difference[:-1] < 0
    at = np.where(flips, np.abs(fine[1:, None] - 1.6), np.inf).argmin(axis=0)
    found = fine[1:][at][flips.any(axis=0)]
    low, high = np.percentile(found, [16, 84])
    return float(high - low) / 2


def test_interval_of_the_chain_crossing():
    """Reading realisations instead of states widens the interval of the crossing as resampling realisations does."""
    grid, tables = chain_tables(1.0, 4.0)
    rows = {
        "states": {size: table.transpose(0, 2, 1).reshape(-1, grid.size) for size, table in tables.items()},
        "realisations": {size: table.mean(axis=2) for size, table in tables.items()},
    }
    own, boot = {}, {}
    rng = np.random.default_rng(8)
    for name, chosen in rows.items():
        together = name == "realisations"
        blocks = [
            Block(float(size), w, table[:, k], np.arange(len(table)) if together else None, CHAIN)
            for size, table in chosen.items() for k, w in enumerate(grid)
        ]  # fmt: skip
        found = find_crossings(Curves(sampled(blocks).curves)).adjacent[0].disorder
        own[name] = (found.high68 - found.low68) / 2
        boot[name] = resampled_crossing(grid, chosen, rng, together=together)
    # A half-width from 150 resamplings scatters by about 7 %, and quartics are not the smoother: 40 %. The change to be
    # seen is a factor of 2.4 to 3.
    for name in rows:
        assert own[name] == pytest.approx(boot[name], rel=0.4)
    assert own["realisations"] > 2 * own["states"]
    assert boot["realisations"] > 2 * boot["states"]


# ---------------------------------------------------------------- coverage of W_c


def critical_disorders(sets, *, n=120, keep, seed=0):
    """Root mean square z of W_c and number of 95 % intervals that hold it, in fits to realisations that share noise."""
    grid, truth = np.linspace(2, 6, POINTS), PowerLawTruth(W_c=4.0)
    distance = np.subtract.outer(np.arange(POINTS), np.arange(POINTS))
    root = np.linalg.cholesky(0.9 * np.exp(-((3 * distance / POINTS) ** 2)) + 0.1 * np.eye(POINTS))
    z, held = [], []
    for k in range(sets):
        rng = np.random.default_rng([seed, k])
        tables = {
            size: truth.value(size, grid) + 0.004 * np.sqrt(n) * rng.standard_normal((n, POINTS)) @ root.T
            for size in (8, 12, 16)
        }
        curves = Curves.from_realisations(tables, grid, paired=keep)
        found = fit_collapse(curves, "power-law", seed=k, quick=True, extras=False).parameters["W_c"]
        z.append((found.median - 4.0) / found.sd)
        held.append(found.low95 < 4.0 < found.high95)
    return float(np.sqrt(np.mean(np.square(z)))), int(sum(held))


def test_coverage_of_the_critical_disorder():
    """Intervals of W_c from paired realisations are honest with their covariance and far too narrow without it."""
    # Ten squares of z: chi-squared with 10 degrees of freedom, below 29.6 with 99.9 %, so root mean square below 1.72.
    # Six or fewer of ten intervals at 95 % hold the truth with a chance of 1e-3.
    scatter, held = critical_disorders(10, keep=True)
    assert scatter < 1.72
    assert held >= 7
    scatter, held = critical_disorders(10, keep=False)  # negative control: 2.5 and half of the intervals were found
    assert scatter > 1.72
    assert held < 7


@pytest.mark.long
@pytest.mark.parametrize("n", [40, 120])
def test_coverage_in_many_sets(n):
    """In 150 sets the coverage of W_c is 95 % within its binomial error with the covariance, and not without it."""
    error = np.sqrt(0.95 * 0.05 / 150)
    _, held = critical_disorders(150, n=n, keep=True, seed=1)
    # The noise scale of the collapse undoes a part of the factor 1 + k/n. With s at its median (0.87 at 40 and 0.92 at
    # 120 realisations), errors come out smaller by that, and 95 % intervals hold 91 and 93 %.
    assert held / 150 > (0.91 if n == 40 else 0.93) - 3 * error
    _, fewer = critical_disorders(150, n=n, keep=False, seed=1)
    assert fewer / 150 < 0.95 - 6 * error


@pytest.mark.long
def test_crossing_of_resampled_realisations():
    """The interval of the chain's crossing is nearer to the scatter of resampled ones with than without covariance."""
    grid, tables = chain_tables(1.0, 4.0)
    with h5py.File(CHAIN) as file:
        for size in tables:
            group = file[f"sizes/{size}"]
            tables[size] = group["entanglement"][()][:, : grid.size] / group.attrs["random_state_entropy"]
    rng = np.random.default_rng(9)
    stated, medians = {}, {True: [], False: []}

    def crossing(chosen, paired, draws):
        blocks = [
            Block(float(size), w, table[:, k], np.arange(len(table)), CHAIN)
            for size, table in chosen.items() for k, w in enumerate(grid)
        ]  # fmt: skip
        curves = Curves(sampled(blocks, SampleOptions(paired=paired)).curves)
        return find_crossings(curves, draws=draws).adjacent[0].disorder

    for paired in medians:
        stated[paired] = crossing(tables, paired, 4000).sd
    for _ in range(300):
        # a realisation drawn twice is meant to count twice, so it must not look like a repetition
        chosen = {
            size: table[rng.integers(0, len(table), len(table))] + 1e-9 * rng.normal(size=(len(table), 1))
            for size, table in tables.items()
        }
        for paired, found in medians.items():
            found.append(crossing(chosen, paired, 300).median)
    ratio = {paired: stated[paired] / np.std(found) for paired, found in medians.items()}
    # A standard deviation from 300 draws scatters by 4 %; medians of 300 draws add (1.25^2)/300 of the variance, < 1 %
    assert ratio[True] > 0.8
    assert ratio[False] < ratio[True] - 0.04
