"""The marginal likelihood against independent computations of the same model."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.interpolate import BSpline
from scipy.stats import multivariate_normal

from driftline.curves import Curve, Curves
from driftline.scaling.ansatz import available, parse_ansatz
from driftline.scaling.function import LINEAR_SD, SplineFunction
from driftline.scaling.likelihood import CORRECTION_SD, Posterior
from driftline.simulate import PowerLawTruth, simulate

SIZES, GRID = (8, 10, 12, 16), np.linspace(2.0, 6.0, 13)


def coordinates(target: Posterior, count: int, seed: int) -> np.ndarray:
    """Coordinates from the middle of the prior, shape (count, dimension)."""
    unit = np.random.default_rng(seed).uniform(0.2, 0.8, (count, target.dimension))
    return target.from_unit(unit)


def dense_log_density(curves: Curves, ansatz: str, z: np.ndarray) -> float:
    """ln N(y; 0, s^2 C + Phi S Phi^T) of the model, with nothing taken from the program's algebra."""
    form = parse_ansatz(ansatz, curves)
    size, disorder, mean, _ = curves.flat()
    spread = np.ptp(mean)
    tau, s = np.exp(z[-2:])
    x = form.scaled(z[None, :-2], size, disorder, curves.sizes)[0]
    u = (x - x.min()) / (x.max() - x.min())
    count = 24
    knots = np.arange(-3, count + 1) / (count - 3)
    phi = BSpline.design_matrix(np.clip(u, 0, 1), knots, 3).toarray()
    # prior covariance: tau^2 D^+ D^+T for the second differences, sd 2 for constant and for slope (+-1 at the ends)
    pseudo = np.linalg.pinv(np.diff(np.eye(count), 2, axis=0))
    line = np.column_stack([np.ones(count), np.linspace(-1, 1, count)])
    covariance = phi @ (tau**2 * pseudo @ pseudo.T + LINEAR_SD**2 * line @ line.T) @ phi.T
    if form.corrected:
        omega = np.exp(z[[p.name for p in form.parameters].index("omega")])
        w = (size / size.min()) ** -omega
        terms = np.column_stack([w, w * (2 * u - 1)])
        sd = CORRECTION_SD * np.ptp(curves.curves[0].mean) / spread
        covariance += sd**2 * terms @ terms.T
    noise = np.zeros_like(covariance)
    start = 0
    for curve in curves.curves:
        stop = start + curve.mean.size
        noise[start:stop, start:stop] = curve.noise
        start = stop
    amplitude = np.ones(mean.size)
    if form.has_amplitude:
        names = [p.name for p in form.parameters]
        kappa = form.amplitude_exponent if form.amplitude_exponent is not None else z[names.index("kappa_A")]
        amplitude = (size / np.sqrt(size.min() * size.max())) ** kappa
    # the model is scaled, not the data: y = A (F + ...) + noise, with the noise as measured
    total = spread**2 * np.outer(amplitude, amplitude) * covariance + s**2 * noise
    centre = (mean.max() + mean.min()) / 2
    return float(multivariate_normal(amplitude * centre, total).logpdf(mean))


AMPLITUDES = ("power-law:amplitude", "kt:corrected:amplitude=0.3", "size-independent:amplitude=-1")


@pytest.mark.parametrize("ansatz", [*available(), *AMPLITUDES])
@pytest.mark.parametrize("correlation", [0.0, 0.6])
def test_agrees_with_dense_gaussian(ansatz: str, correlation: float) -> None:
    """The spline likelihood is the density of the dense Gaussian of the same model, for every ansatz on offer."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 5, correlation=correlation)
    target = Posterior(curves, parse_ansatz(ansatz, curves))
    for z in coordinates(target, 5, seed=2):
        # Rounding: y^T C^-1 y is about 1e5 here, and eps times that times the condition of the dense matrix
        # (about 1e4) bounds the error of the *reference* by 1e-7 of a quadratic form of order 1e4
        expected = dense_log_density(curves, ansatz, z)
        assert target.log_likelihood(z[None])[0] == pytest.approx(expected, abs=1e-4, rel=1e-8)


@pytest.mark.parametrize("ansatz", ["power-law", "power-law:linear-drift:corrected", "kt:corrected:amplitude=0.3"])
@pytest.mark.parametrize(("correlation", "left_out"), [(0.0, None), (0.6, None), (0.6, SIZES[-1])])
def test_compiled_loops_agree_with_dense_algebra(ansatz: str, correlation: float, left_out: float | None) -> None:
    """Both compiled loops, and a batched Cholesky factor of the dense system, are the same function."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 6, correlation=correlation)
    target = Posterior(curves, parse_ansatz(ansatz, curves), left_out=left_out)
    z = coordinates(target, 50, seed=3)
    quadratic, log_det = target._solved(z)
    diagonal = np.diagonal(np.linalg.cholesky(target.system(z)), axis1=1, axis2=2)
    # cancelling y^T C^-1 y ~ 1e5 down to Q ~ 1e2 or more costs eps * 1e5 / 1e2 = 2e-13, times ~100 roundings
    np.testing.assert_allclose(quadratic, diagonal[:, -1] ** 2, rtol=1e-9)
    np.testing.assert_allclose(log_det, 2 * np.sum(np.log(diagonal[:, :-1]), axis=1), rtol=1e-12)


def test_wrong_model_does_not_agree() -> None:
    """Negative control: a tau off by one part in a thousand is seen by the comparison with the dense Gaussian."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 5)
    target = Posterior(curves, parse_ansatz("power-law", curves))
    z = coordinates(target, 1, seed=2)[0]
    shifted = z + np.array([0, 0, 1e-3, 0])
    assert abs(target.log_likelihood(shifted[None])[0] - dense_log_density(curves, "power-law", z)) > 1e-3


def test_held_tau_is_the_same_function() -> None:
    """Holding tau leaves the likelihood as it is at that tau and takes its prior away."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 7)
    target = Posterior(curves, parse_ansatz("power-law:corrected", curves))
    z = coordinates(target, 4, seed=8)
    for row in z:
        held = replace(target, log_tau=float(row[-2]))
        rest = np.delete(row, -2)[None]
        assert held.log_likelihood(rest)[0] == pytest.approx(target.log_likelihood(row[None])[0], rel=1e-13)
        prior = target.parameters[-2].prior.log_density(row[-2:-1])[0]
        assert held(rest)[0] == pytest.approx(target(row[None])[0] - prior, rel=1e-13)


def test_batch_is_row_by_row() -> None:
    """A batch gives the same numbers as its rows one by one, bit by bit."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 9)
    target = Posterior(curves, parse_ansatz("power-law:corrected", curves))
    z = coordinates(target, 30, seed=1)
    np.testing.assert_array_equal(target(z), [target(row[None])[0] for row in z])


def test_outside_the_prior_is_impossible() -> None:
    """Coordinates outside the support have log density -inf and do not disturb their neighbours."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 9)
    target = Posterior(curves, parse_ansatz("power-law", curves))
    z = coordinates(target, 2, seed=1)
    alone = target(z[:1])[0]
    z[1, 0] = 1e6
    assert target(z)[1] == -np.inf
    assert target(z)[0] == alone


def test_units_of_the_observable_shift_the_density_only() -> None:
    """y in other units, y' = a y + b, changes the log density by -n ln a and nothing else."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 9)
    scaled = Curves([Curve(c.size, c.disorder, 40 * c.mean - 7, 40 * c.error) for c in curves.curves])
    one = Posterior(curves, parse_ansatz("power-law:corrected", curves))
    other = Posterior(scaled, parse_ansatz("power-law:corrected", scaled))
    z = coordinates(one, 10, seed=4)
    # subtraction of b costs about eps * |7 / 0.14 / 40| relative in each standardised value of weight up to 50: 1e-10
    np.testing.assert_allclose(other(z), one(z) - curves.points * np.log(40), rtol=1e-9)


def test_units_of_disorder_do_not_matter() -> None:
    """W in other units with W_c moved along leaves the density as it was, up to the constant prior density of W_c."""
    curves = simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 9)
    scaled = Curves([Curve(c.size, 10 * c.disorder, c.mean, c.error) for c in curves.curves])
    one = Posterior(curves, parse_ansatz("power-law", curves))
    other = Posterior(scaled, parse_ansatz("power-law", scaled))
    z = coordinates(one, 10, seed=4)
    np.testing.assert_allclose(
        other(z * [10, 1, 1, 1]), one(z) - np.log(10), rtol=1e-11
    )  # rounding of u: ~1e-13 times 1e2


def test_basis_is_the_b_spline_of_scipy() -> None:
    """The four non-zero basis values are those of scipy's B-splines and sum to one."""
    function = SplineFunction()
    u = np.concatenate([np.random.default_rng(3).uniform(0, 1, 200), [0.0, 1.0]])
    first, values = function.basis(u)
    knots = np.arange(-3, 25) / 21
    expected = BSpline.design_matrix(u, knots, 3).toarray()
    found = np.zeros_like(expected)
    np.put_along_axis(found, first[:, None] + np.arange(4), values, axis=1)
    np.testing.assert_allclose(found, expected, atol=1e-14)  # cubics of numbers below one: a few eps
    np.testing.assert_allclose(values.sum(axis=1), 1.0, atol=1e-15 * 8)


def test_log_det_of_the_prior() -> None:
    """The analytic log determinant of the prior precision is that of the matrix."""
    function = SplineFunction()
    for log_tau in (-6.0, -2.0, 1.0):
        precision = function.roughness * np.exp(-2 * log_tau) + function.linear_precision
        expected = np.linalg.slogdet(precision)[1]
        # the condition of the matrix is at most 1e9, the determinant's relative error 24 eps times that
        assert function.log_det_precision(np.array([log_tau]))[0] == pytest.approx(expected, abs=1e-5)
