"""The test for opposite size dependence on both sides: its false rate, and what it does not fall for."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.stats import norm

from driftline.crossings import find_crossings
from driftline.curves import Curve, Curves, Labels
from driftline.readers import read
from driftline.separation import LookElsewhere, Trends, fit_trends, separation_test
from driftline.simulate import FiniteLengthTruth, PowerLawTruth, SizeIndependentTruth, simulate

SIZES = (8, 10, 12, 14, 16)
GRID = np.linspace(2.0, 6.0, 15)
LABELS = Labels(ergodic_value=0.53, localised_value=0.39)


def null_significances(sets, rng, correlation=0.0):
    """Largest |z| of any run in `sets` data sets without size dependence, and the correction for their covariance."""
    error = 0.003
    mixing = error**2 * (correlation + (1 - correlation) * np.eye(GRID.size))
    noise = np.broadcast_to(mixing, (len(SIZES), GRID.size, GRID.size))
    root = np.linalg.cholesky(mixing)
    largest = np.empty(sets)
    for k in range(sets):
        means = 0.46 + rng.standard_normal((len(SIZES), GRID.size)) @ root.T
        trends = fit_trends(GRID, np.log(SIZES), means, noise)
        largest[k] = np.nanmax(np.abs(trends.runs()))
    return largest, LookElsewhere.of(trends, np.random.default_rng(77))


@pytest.mark.parametrize("correlation", [0.0, 0.5])
def test_false_rate_is_the_nominal_one(correlation):
    """Without size dependence the corrected significance exceeds its quantiles at the nominal rates."""
    sets = 2000
    largest, correction = null_significances(sets, np.random.default_rng(3), correlation)
    corrected = np.array([correction.corrected(z) for z in largest])
    for rate in (0.3, 0.05, 0.01):
        found = np.mean(corrected > norm.isf(rate / 2))
        # Binomial error of the 2000 sets and of the 20,000 simulated ones, three of them: false alarm 0.3 % each
        assert abs(found - rate) < 3 * np.sqrt(rate * (1 - rate) * (1 / sets + 1 / 20_000))


def test_without_the_correction_the_false_rate_is_far_too_high():
    """Negative control: the largest of all runs taken at face value is "significant" several times too often."""
    sets = 2000
    largest, _ = null_significances(sets, np.random.default_rng(3))
    found = np.mean(largest > norm.isf(0.025))
    assert found - 3 * np.sqrt(found * (1 - found) / sets) > 5 * 0.05


def test_size_independent_curves_are_never_separated():
    """None of 30 whole data sets without size dependence is called separated, and one side is always called flat."""
    for seed in range(30):
        found = separation_test(simulate(SIZES, GRID, SizeIndependentTruth(), 0.003, seed))
        # At most 0.0027 a set for either side, so 30 * 0.0027^2 for both
        assert not found.separated
        assert found.flat_side is not None


def test_transition_is_separated():
    """A power law of nu = 1 at these errors is resolved on both sides, falling observable: + below, - above."""
    found = separation_test(simulate(SIZES, GRID, PowerLawTruth(), 0.003, 1))
    assert found.separated
    assert found.sign_change
    assert found.z_below > 3 > -3 > found.z_above
    assert found.disorder_below < 4.0 < found.disorder_above
    assert (found.flat_side, found.flat_at_reference) == (None, False)


def test_crossover_is_flat_below_on_the_reference():
    """A finite localisation length is resolved above only; the flat side is known to sit on the ergodic value."""
    curves = simulate(SIZES, np.linspace(1.5, 8, 15), FiniteLengthTruth(), 0.002, 4, labels=LABELS)
    found = separation_test(curves)
    assert not found.separated
    assert abs(found.z_below) < 3 < abs(found.z_above)
    assert (found.flat_side, found.flat_at_reference) == ("below", True)
    unnamed = separation_test(curves.relabel(ergodic_value=None, localised_value=None))
    assert (unnamed.flat_side, unnamed.flat_at_reference) == ("below", False)


def test_one_odd_size_does_not_decide():
    """The largest size alone off by eight errors, on both sides and with opposite signs, is not a separation."""
    curves = simulate(SIZES, GRID, SizeIndependentTruth(), 0.003, 5)
    odd = curves.curves[-1]
    kick = 8 * 0.003 * np.sign(4.0 - GRID)
    bent = Curves([*curves.curves[:-1], Curve(odd.size, GRID, odd.mean + kick, odd.error)])
    found = separation_test(bent)
    assert not found.separated
    table = np.array([c.mean for c in bent.curves])
    noise = np.broadcast_to(np.diag(np.full(GRID.size, 9e-6)), (5, GRID.size, GRID.size))
    full = fit_trends(GRID, np.log(SIZES), table, noise).runs()
    assert np.nanmax(full) > 6 > -6 > np.nanmin(full)  # all sizes together would have been deceived


def test_trend_is_weighted_least_squares_by_hand():
    """Slope and covariance of y against ln L agree with the normal equations written out for one disorder."""
    rng = np.random.default_rng(1)
    x, error = np.log(SIZES), np.array([0.001, 0.002, 0.003, 0.002, 0.004])
    y = rng.normal(0.5, 0.01, 5)
    trends = fit_trends(np.array([3.0]), x, y[:, None], (error**2)[:, None, None])
    design = np.column_stack([np.ones(5), x]) / error[:, None]
    exact = np.linalg.lstsq(design, y / error, rcond=None)[0][1]
    assert trends.slope[0] == pytest.approx(exact, rel=1e-10)  # condition of the design below 1e3
    assert trends.covariance[0, 0] == pytest.approx(np.linalg.inv(design.T @ design)[1, 1], rel=1e-10)


def test_runs_by_hand():
    """Mean trends of runs: (1 + 2) / sqrt 2 for two equal ones, correlations counted."""
    trends = Trends(np.arange(2.0), np.array([1.0, 2.0]), np.eye(2))
    np.testing.assert_allclose(trends.runs()[0], [np.nan, 1.0, 3 / np.sqrt(2)], rtol=1e-12)
    correlated = Trends(np.arange(2.0), np.array([1.0, 2.0]), np.array([[1.0, 0.5], [0.5, 1.0]]))
    assert correlated.runs()[0, 2] == pytest.approx(3 / np.sqrt(3), rel=1e-12)


def test_correction_of_a_single_test_is_none():
    """With one disorder there is nothing to look elsewhere for: z stays z, also in the continued tail."""
    correction = LookElsewhere.of(Trends(np.zeros(1), np.zeros(1), np.eye(1)), np.random.default_rng(2), 200_000)
    for z, room in ((-1.0, 0.02), (2.0, 0.03), (5.0, 0.3)):
        # 200,000 sets: error of the probability p sqrt(1/(p n)) over the density gives 0.003 and 0.01 at 1 and 2;
        # beyond the anchor the factor (z/2.8)^2 of the continuation, wrong for a single test, costs ln(3.2) / 5 = 0.23
        assert abs(correction.corrected(z) - z) < room


def test_grids_that_differ_are_compared_through_the_smooth_curves():
    """With no disorder in common the same transition is found from smoothed values, and from crossings as well."""
    grids = np.array([np.linspace(2 + 0.01 * k, 6 + 0.013 * k, 15) for k in range(5)])
    curves = simulate(SIZES, grids, PowerLawTruth(), 0.003, 1)
    assert separation_test(curves).separated
    assert separation_test(find_crossings(curves, draws=500)).separated
    flat = simulate(SIZES, grids, SizeIndependentTruth(), 0.003, 1)
    assert not separation_test(flat).separated


def test_units_do_not_matter():
    """Scaling disorder and observable leaves the significances as they are."""
    curves = simulate(SIZES, GRID, PowerLawTruth(), 0.003, 1)
    scaled = Curves([Curve(c.size, 10 * c.disorder, 100 * c.mean, 100 * c.error) for c in curves.curves])
    first, second = separation_test(curves), separation_test(scaled)
    assert second.z_below == pytest.approx(first.z_below, rel=1e-6)  # rounding only
    assert second.disorder_above == pytest.approx(10 * first.disorder_above, rel=1e-12)


def test_two_sizes_are_judged_without_leaving_one_out():
    """With two sizes nothing can be left out; a strong transition is still seen, and said to be."""
    found = separation_test(simulate([8, 16], GRID, PowerLawTruth(), 0.002, 1))
    assert found.separated
    assert "opposite signs" in found.summary()


def test_real_crossover_without_a_transition():
    """2D Anderson model (no transition: Abrahams et al., PRL 42, 673 (1979)): flat below, on the ergodic value.

    Gap ratio of the orthogonal class 0.5307 (Atas et al., PRL 110, 084101 (2013); the large-size number from memory).
    """
    path = Path(__file__).parents[1] / "datasets" / "anderson-square" / "curves.csv"
    found = separation_test(read(path).relabel(ergodic_value=0.5307))
    assert not found.separated
    assert found.z_above < -10
    assert (found.flat_side, found.flat_at_reference) == ("below", True)
