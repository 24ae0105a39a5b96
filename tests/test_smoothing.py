"""The Gaussian-process smoother against dense formulas written down independently, and its symmetries."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import multivariate_normal

import driftline.smoothing as smoothing
from driftline.curves import Curve, Curves
from driftline.simulate import Logistic, PowerLawTruth, simulate
from driftline.smoothing import KERNELS, Matern52, SquaredExponential, smooth_curves

GRID = np.linspace(2.0, 6.0, 12)


@pytest.fixture
def curves():
    """Two sizes with correlated noise, so that the full noise covariance matters."""
    return simulate([8, 16], GRID, PowerLawTruth(), 0.004, 3, correlation=0.4)


def dense_covariance(kernel, length, amplitude, first, second, curves):
    """Prior covariance of f between two sets of disorders, in units of the data, from the model's definition."""
    spread = np.std(np.concatenate([c.mean for c in curves.curves]))
    low, high = curves.disorder_range
    u, v = ((2 * w - low - high) / (high - low) for w in (first, second))
    r = np.abs(u[:, None] - v[None, :]) / length
    root5 = np.sqrt(5) * r
    shape = np.exp(-(r**2) / 2) if kernel == "squared" else (1 + root5 + root5**2 / 3) * np.exp(-root5)
    broad = 100.0 * (1 + np.outer(u, v))
    return spread**2 * (amplitude**2 * shape + broad)


@pytest.mark.parametrize("kernel", KERNELS, ids=lambda kernel: type(kernel).__name__)
def test_kernel_derivatives(kernel):
    """The derivatives of each kernel agree with central differences."""
    r, h = np.linspace(-3, 3, 41), 1e-4
    value, first, second = kernel.terms(r)
    up, down = kernel.terms(r + h)[0], kernel.terms(r - h)[0]
    # Truncation h^2/6 times a third derivative below 20, h^2/12 times a fourth below 100 (none at r = 0 for the
    # Matern kernel: there the second difference errs by h |k'''| = 1.9e-3 * 10 h); rounding 1e-16/h^2 = 1e-8.
    np.testing.assert_allclose(first, (up - down) / (2 * h), rtol=0, atol=20 * h**2 / 6)
    np.testing.assert_allclose(second, (up - 2 * value + down) / h**2, rtol=0, atol=20 * h)


def test_marginal_likelihood_is_that_of_a_dense_gaussian(curves):
    """Every cell's log likelihood differs from scipy's multivariate normal by one constant only."""
    smoother = smoothing._Smoother.of(curves, 81)
    found = smoother.log_likelihood(curves.curves[1])
    curve = curves.curves[1]
    centre = np.mean(np.concatenate([c.mean for c in curves.curves]))
    differences = []
    for k, kernel in enumerate(("matern", "squared")):  # the first 20 processes are those in W
        for i, length in enumerate(smoothing.LENGTHS):
            for j, amplitude in enumerate(smoothing.AMPLITUDES):
                prior = dense_covariance(kernel, length, amplitude, GRID, GRID, curves)
                dense = multivariate_normal(np.full(GRID.size, centre), prior + curve.noise).logpdf(curve.mean)
                differences.append(found[k * smoothing.LENGTHS.size + i, j] - dense)
    # Condition: broad prior over noise, (10 * 0.05 / 0.003)^2 = 3e4 times the amplitude 30; times 1e-16 * 12 points
    assert np.ptp(differences) < 1e-6


@pytest.mark.parametrize(("kernel", "name"), [(Matern52(), "matern"), (SquaredExponential(), "squared")])
def test_draws_have_the_dense_posterior(curves, monkeypatch, kernel, name):
    """At one length and amplitude the draws of function and slope have mean and covariance of the textbook formula."""
    monkeypatch.setattr(smoothing, "KERNELS", (kernel,))
    monkeypatch.setattr(smoothing, "LENGTHS", np.array([0.6]))
    monkeypatch.setattr(smoothing, "AMPLITUDES", np.array([1.3]))
    monkeypatch.setattr(smoothing, "WIDE_RANGE", np.inf)
    smoothing._processes.cache_clear()
    draws = 20_000
    smooth = smooth_curves(curves, draws=draws, rng=1, points=21)[0]
    smoothing._processes.cache_clear()
    curve, h = curves.curves[0], 1e-4
    at = np.concatenate([smooth.grid, smooth.grid + h, smooth.grid - h])
    k = dense_covariance(name, 0.6, 1.3, at, curve.disorder, curves)
    k_data = dense_covariance(name, 0.6, 1.3, curve.disorder, curve.disorder, curves) + curve.noise
    centre = np.mean(np.concatenate([c.mean for c in curves.curves]))
    mean = centre + k @ np.linalg.solve(k_data, curve.mean - centre)
    variance = np.diag(dense_covariance(name, 0.6, 1.3, at, at, curves) - k @ np.linalg.solve(k_data, k.T))
    n = smooth.grid.size
    slope = (mean[n : 2 * n] - mean[2 * n :]) / (2 * h)
    # 42 comparisons at 4.5 standard errors: false alarm below 3e-4. Standard error of a mean sd/sqrt(n), of a standard
    # deviation 1/sqrt(2 n) of itself.
    error = np.sqrt(variance[:n] / draws)
    assert np.all(np.abs(smooth.mean - mean[:n]) < 4.5 * error)
    np.testing.assert_allclose(smooth.sd, np.sqrt(variance[:n]), rtol=4.5 / np.sqrt(2 * draws))
    slope_error = smooth.slope_draws.std(axis=0) / np.sqrt(draws)
    assert np.all(np.abs(smooth.slope_draws.mean(axis=0) - slope) < 4.5 * slope_error)


def test_slope_draws_are_derivatives_of_the_draws(curves):
    """Each draw's slope is the derivative of the very same draw, not only of another with the same distribution."""
    smooth = smooth_curves(curves, draws=200, rng=1, points=161)[0]
    numeric = np.gradient(smooth.draws, smooth.grid, axis=1)[:, 1:-1]
    difference = np.abs(numeric - smooth.slope_draws[:, 1:-1])
    largest = np.max(np.abs(smooth.slope_draws))
    # Step h = 0.025; draws vary over lengths l of at least 0.24. Central differences err by h^2/6 times a third
    # derivative, about (h/l)^2/6 * 5 = 1 % of a slope, and by h/(2l) = 5 % where a Matern draw's second derivative
    # jumps. Slopes of other draws would differ by about as much as the slopes themselves.
    assert np.max(difference) < 0.05 * largest
    assert np.median(difference) < 0.01 * largest


def test_unit_of_the_observable_is_arbitrary(curves):
    """Scaling and shifting y does the same to the draws."""
    changed = Curves(
        [Curve(c.size, c.disorder, 1000 * c.mean - 7, 1000 * c.error, 1e6 * c.noise) for c in curves.curves]
    )
    first, second = (smooth_curves(each, draws=100, rng=2)[1] for each in (curves, changed))
    # The same random numbers pass through the same algebra: rounding times the condition 1e6 of the broad prior
    np.testing.assert_allclose(second.draws, 1000 * first.draws - 7, rtol=0, atol=1e-4)
    np.testing.assert_allclose(second.slope_draws, 1000 * first.slope_draws, rtol=0, atol=1e-2)


def test_short_curves_share_their_hyper_parameters():
    """Below eight points the weights are those of all sizes together; at eight each size has its own."""
    for points, shared in ((7, True), (8, False)):
        data = simulate([8, 16], np.linspace(2, 6, points), PowerLawTruth(scaling=Logistic(scale=3)), 0.002, 1)
        first, second = smoothing._Smoother.of(data, 41).posteriors()
        assert np.array_equal(first, second) is shared
        assert first.sum() == pytest.approx(1.0, abs=1e-12)


def test_grids_that_differ_share_the_points_of_the_common_range():
    """Every size keeps inside its own range and all have the same points where ranges overlap."""
    grids = np.array([np.linspace(2, 6, 9), np.linspace(2.5, 7, 9)])
    data = simulate([8, 16], grids, PowerLawTruth(), 0.003, 1)
    small, large = smooth_curves(data, draws=20, rng=1)
    assert (small.grid[0], small.grid[-1], large.grid[0], large.grid[-1]) == (2.0, 6.0, 2.5, 7.0)
    common = [each.grid[(each.grid >= 2.5) & (each.grid <= 6.0)] for each in (small, large)]
    np.testing.assert_array_equal(*common)


def test_same_seed_same_draws(curves):
    """One seed gives the same draws, another seed others, and the sizes are drawn independently."""
    first, again, other = (smooth_curves(curves, draws=400, rng=seed) for seed in (1, 1, 2))
    np.testing.assert_array_equal(first[0].draws, again[0].draws)
    assert not np.array_equal(first[0].draws, other[0].draws)
    between = np.corrcoef(first[0].draws[:, 40], first[1].draws[:, 40])[0, 1]
    assert abs(between) < 4 / np.sqrt(400)  # four standard errors of a zero correlation: 6e-5


def test_constant_observable_is_no_obstacle():
    """Means that do not vary at all give a smoother, not a division by zero."""
    data = Curves([Curve(size, GRID, np.full(12, 0.5), np.full(12, 0.01)) for size in (8, 16)])
    smooth = smooth_curves(data, draws=100, rng=1)
    assert np.all(np.abs(smooth[0].mean - 0.5) < 0.01)  # one measurement's error
