"""Draws for arviz: the same numbers, and pointwise densities that are what they say."""

import sys

import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm

from driftline import export
from driftline.collapse import fit_collapse
from driftline.errors import ConfigurationError
from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.likelihood import Posterior
from driftline.simulate import PowerLawTruth, simulate

GRID = np.linspace(2.0, 6.0, 9)


def posterior(correlation, name="power-law:corrected"):
    """The joint density of a small data set with held roughness."""
    curves = simulate([8, 12, 16], GRID, PowerLawTruth(W_c=4.0), 0.003, 1, correlation=correlation)
    return Posterior(curves, parse_ansatz(name, curves), log_tau=-3.0)


@pytest.mark.parametrize("correlation", [0.0, 0.5])
def test_leave_one_out_is_the_ratio_of_two_densities(correlation):
    """ln p(y_i | rest) is ln p(y) - ln p(y without i), both by the definition of the normal density."""
    target = posterior(correlation)
    z = np.array([[4.0, 0.1, 0.2, 0.05], [4.1, -0.1, 0.0, -0.1]])
    design = target.design(z)
    mean = target.curves.flat()[2]
    blocks = [curve.noise for curve in target.curves.curves]
    noise = np.zeros((mean.size, mean.size))
    for i, block in enumerate(blocks):
        noise[i * 9 : (i + 1) * 9, i * 9 : (i + 1) * 9] = block
    for row in range(2):
        phi = target.spread * design[row, :, :-1]
        prior = np.linalg.inv(target._precision(np.array([-3.0]), phi.shape[1])[0])
        total = np.exp(2 * z[row, -1]) * noise + phi @ prior @ phi.T
        centre = np.full(mean.size, target.centre)
        whole = multivariate_normal(centre, total).logpdf(mean)
        # the definition is the marginal likelihood that the fits use; both sum logs of 27 eigenvalues, about 1e-10
        assert whole == pytest.approx(target.log_likelihood(z[[row]])[0], abs=1e-6)
        for i in (0, 13, 26):
            keep = np.arange(mean.size) != i
            rest = multivariate_normal(centre[keep], total[np.ix_(keep, keep)]).logpdf(mean[keep])
            # a difference of two such sums; the condition number 1e6 of the covariance costs 6 of 16 digits
            assert target.leave_one_out(z)[row, i] == pytest.approx(whole - rest, abs=1e-6)


def test_without_arviz_one_sentence_says_what_to_install(monkeypatch):
    """A missing extra is a mistake that can be mended, not a traceback."""
    monkeypatch.setitem(sys.modules, "arviz", None)
    curves = simulate([8, 12], GRID, PowerLawTruth(W_c=4.0), 0.003, 1)
    fit = fit_collapse(curves, "power-law", quick=True, extras=False)
    with pytest.raises(
        ConfigurationError, match=r"^arviz is not installed, and to_arviz needs it; install it with: pip"
    ):
        fit.to_arviz()


def test_data_set_of_arviz():
    """Draws, observed points and densities are those of the fit; a point out of line has the lowest density."""
    curves = simulate([8, 12, 16], GRID, PowerLawTruth(W_c=4.0), 0.003, 1)
    mean = curves.curves[1].mean.copy()
    mean[4] += 6 * 0.003
    odd = type(curves.curves[1])(12.0, GRID, mean, curves.curves[1].error)
    fit = fit_collapse(type(curves)([curves.curves[0], odd, curves.curves[2]]), "power-law", quick=True, extras=False)
    data = fit.to_arviz()
    assert data["posterior"]["W_c"].shape == (1, len(fit.samples))
    np.testing.assert_array_equal(data["posterior"]["W_c"].values[0], fit.draws("W_c"))
    np.testing.assert_array_equal(data["observed_data"]["y"].values, fit.curves.flat()[2])
    density = data["log_likelihood"]["y"].values
    assert density.shape == (1, len(fit.samples), 27)
    assert int(np.argmin(density.mean(axis=(0, 1)))) == 9 + 4
    # no density is larger than at the peak of a normal one with the smallest error of the posterior
    assert density.max() < norm(0, 0.003 * fit.draws("s").min()).logpdf(0)
    assert (data.attrs["inference_library"], data.attrs["ansatz"]) == ("driftline", "power-law")


def test_the_roughness_is_that_of_the_fit():
    """The densities refer to the held roughness: e times the median (module docstring of `collapse`)."""
    curves = simulate([8, 12], GRID, PowerLawTruth(W_c=4.0), 0.003, 1)
    fit = fit_collapse(curves, "power-law", quick=True, extras=False)
    assert np.exp(fit.log_tau) == pytest.approx(np.e * fit.parameters["tau"].median)
    assert export.pointwise(fit).shape == (len(fit.samples), 18)
