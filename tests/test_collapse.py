"""The collapse on synthetic curves with a known truth: coverage, precision, repeatability."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from scipy.stats import binom

from driftline.collapse import CollapseFit, compare_ansatze, fit_collapse
from driftline.curves import Curve, Curves
from driftline.errors import ConfigurationError
from driftline.scaling.ansatz import applicable, available, parse_ansatz
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.scaling.function import SplineFunction
from driftline.simulate import Gompertz, InverseDriftTruth, LinearDriftTruth, PowerLawTruth, simulate

SIZES, GRID, ERROR = (8, 10, 12, 14, 16, 18), np.linspace(2.0, 8.0, 21), 0.003
PLAIN = PowerLawTruth(W_c=5.0, nu=1.0, scaling=Gompertz(scale=8.0))
#: A correction of 9 % of the height of the curve at L = 8, which moves its crossings by many errors.
CORRECTED = PowerLawTruth(W_c=5.0, nu=1.0, scaling=Gompertz(scale=8.0), correction=(0.1, 0.002))
DATA_SETS = 110


@cache
def study(
    truth: PowerLawTruth, ansatz: str, understated: float = 1.0, count: int = DATA_SETS
) -> tuple[CollapseFit, ...]:
    """Fits of `count` independent data sets; `understated` divides the errors that the fit is told."""
    fits = []
    for seed in range(count):
        curves = simulate(SIZES, GRID, truth, ERROR, np.random.default_rng([seed, 20261201]))
        if understated != 1.0:
            curves = Curves([Curve(c.size, c.disorder, c.mean, c.error / understated) for c in curves.curves])
        fits.append(fit_collapse(curves, ansatz, seed=seed, quick=True))
    return tuple(fits)


def covered(fits: tuple[CollapseFit, ...], name: str, truth: float, level: int) -> int:
    """Number of fits whose interval contains the truth."""
    return sum(fit.parameters[name].contains(truth, level=level) for fit in fits)


def acceptable(hits: int, count: int, level: int) -> bool:
    """Whether the count is within the central 99.8 % of the binomial of the stated rate (false alarm 0.2 % a check)."""
    low, high = binom.ppf([0.001, 0.999], count, level / 100)
    return bool(low <= hits <= high)


@pytest.mark.parametrize("level", [68, 95])
@pytest.mark.parametrize("name", ["W_c", "nu"])
@pytest.mark.parametrize(
    ("truth", "ansatz"), [(PLAIN, "power-law"), (CORRECTED, "power-law:corrected")], ids=["plain", "corrected"]
)
def test_intervals_cover(truth: PowerLawTruth, ansatz: str, name: str, level: int) -> None:
    """Credible intervals contain the truth at the stated rate, with and without a correction to scaling."""
    fits = study(truth, ansatz)
    assert acceptable(covered(fits, name, getattr(truth, name), level), len(fits), level)


def test_plain_form_on_corrected_truth_does_not_cover() -> None:
    """Negative control: without the correction, 95 % intervals of W_c miss a truth that has one."""
    fits = study(CORRECTED, "power-law", count=30)
    assert not acceptable(covered(fits, "W_c", 5.0, 95), len(fits), 95)


def test_understated_errors_are_noticed() -> None:
    """Errors understated by three raise the noise scale and the misfit probability tells it."""
    fits = study(PLAIN, "power-law", understated=3.0, count=10)
    assert all(fit.quality.p_value < 0.01 for fit in fits)
    assert np.median([fit.quality.noise_scale for fit in fits]) > 2


def test_good_fits_have_uniform_looking_p_values() -> None:
    """Posterior-predictive p-values of a right form are neither all small nor all large."""
    p = np.array([fit.quality.p_value for fit in study(PLAIN, "power-law")])
    # posterior-predictive p concentrates around 1/2, so fewer than 5 % lie below 0.05; 110 sets: at most 13 at 1e-3
    assert np.count_nonzero(p < 0.05) <= 13
    assert 0.4 < p.mean() < 0.75


def cramer_rao(truth: PowerLawTruth) -> np.ndarray:
    """Standard deviations of (W_c, ln nu) at best, with the spline coefficients as nuisance parameters.

    Inverse of the Fisher information J^T C^-1 J with J the derivatives of the noiseless curves by W_c, ln nu and the
    coefficients (Cramér 1946, Rao 1945).
    """
    curves = simulate(SIZES, GRID, truth, ERROR, 0)
    size, disorder, _, _ = curves.flat()

    def values(W_c: float, log_nu: float) -> np.ndarray:
        moved = PowerLawTruth(W_c, np.exp(log_nu), truth.scaling)
        return np.array([moved.value(L, np.array([W]))[0] for L, W in zip(size, disorder, strict=True)])

    step, at = 1e-5, (truth.W_c, np.log(truth.nu))
    slopes = [
        (values(at[0] + step, at[1]) - values(at[0] - step, at[1])) / (2 * step),
        (values(at[0], at[1] + step) - values(at[0], at[1] - step)) / (2 * step),
    ]
    x = (disorder - truth.W_c) * size ** (1 / truth.nu)
    first, four = SplineFunction().basis((x - x.min()) / np.ptp(x))
    basis = np.zeros((x.size, SplineFunction().count))
    np.put_along_axis(basis, first[:, None] + np.arange(4), four, axis=1)
    # what the spline can imitate is lost to W_c and nu: project it out
    jacobian = np.column_stack(slopes) / ERROR
    left = jacobian - basis @ np.linalg.lstsq(basis, jacobian, rcond=1e-10)[0]
    return np.sqrt(np.diag(np.linalg.inv(left.T @ left)))


def test_widths_reach_the_cramer_rao_bound() -> None:
    """Posterior widths come within 15 % of the Cramér-Rao bound with the spline coefficients as nuisance."""
    fits = study(PLAIN, "power-law")
    bound = cramer_rao(PLAIN)
    widths = np.array([
        [np.std(fit.draws("W_c")) / fit.quality.noise_scale, np.std(np.log(fit.draws("nu"))) / fit.quality.noise_scale]
        for fit in fits
    ])  # fmt: skip
    ratio = widths.mean(axis=0) / bound
    assert np.all(ratio > 0.85), ratio
    assert np.all(ratio < 1.15), ratio


def test_same_seed_same_numbers() -> None:
    """Two fits with one seed agree in every draw; another seed gives other draws of the same posterior."""
    curves = simulate(SIZES, GRID, PLAIN, ERROR, 1)
    one, two, other = (fit_collapse(curves, "power-law", seed=seed, quick=True) for seed in (4, 4, 5))
    np.testing.assert_array_equal(one.samples, two.samples)
    assert one.log_evidence == two.log_evidence
    assert not np.array_equal(one.samples, other.samples)
    assert abs(one.log_evidence - other.log_evidence) < 5 * np.hypot(one.log_evidence_error, other.log_evidence_error)


def test_quick_agrees_with_chain() -> None:
    """Leaving the chain out changes evidence and intervals by no more than their Monte Carlo errors."""
    curves = simulate(SIZES, GRID, CORRECTED, ERROR, 2)
    quick, full = (fit_collapse(curves, "power-law:corrected", seed=6, quick=quick) for quick in (True, False))
    assert full.sampler.method == "chain"
    assert full.sampler.converged
    assert quick.sampler.converged
    assert abs(quick.log_evidence - full.log_evidence) < 5 * np.hypot(quick.log_evidence_error, full.log_evidence_error)
    for name in ("W_c", "nu"):
        a, b = quick.parameters[name], full.parameters[name]
        # a 2.5 % point of 1000 effective draws of a normal has standard error sd 0.085; two of them, four times
        assert abs(a.low95 - b.low95) < 4 * 0.12 * b.sd
        assert abs(a.high95 - b.high95) < 4 * 0.12 * b.sd


def test_comparison_weighs_hypotheses_equally() -> None:
    """Probabilities sum to one, and two copies' worth of ansätze do not buy a hypothesis more prior weight."""
    curves = simulate(SIZES, GRID, PLAIN, ERROR, 3)
    both = compare_ansatze(curves, ["power-law", "power-law:corrected", "power-law:linear-drift"], quick=True)
    assert sum(both.probabilities) == pytest.approx(1)
    logs = np.array([fit.log_evidence for fit in both.fits])
    by_hand = np.exp(logs - logs.max()) * [0.25, 0.25, 0.5]
    np.testing.assert_allclose(both.probabilities, by_hand / by_hand.sum(), rtol=1e-12)
    assert both.probability("transition") == pytest.approx(sum(both.probabilities[:2]))


def test_linear_drift_is_recognised() -> None:
    """Curves whose critical disorder drifts are told from those where it stands still, and the shift is unbiased."""
    truth = LinearDriftTruth(W_c=3.0, nu=1.0, scaling=Gompertz(scale=8.0), rate=0.15)
    data = [simulate(SIZES, GRID, truth, ERROR, 100 + seed) for seed in range(12)]
    assert compare_ansatze(data[0], quick=True).probability("drift") > 0.95
    shifts = [fit_collapse(curves, "power-law:linear-drift", quick=True).parameters["D"] for curves in data]
    z = np.array([(shift.median - 0.15 * (18 - 8)) / shift.sd for shift in shifts])
    assert abs(z.mean()) < 3.3 / np.sqrt(12)  # mean of 12 standard normals: 1e-3 false alarm
    assert min(shift.low95 for shift in shifts) > 0  # a drift of zero is excluded in each


def test_probability_needs_rivals() -> None:
    """With one hypothesis fitted nothing was compared, and no probability is given."""
    curves = simulate(SIZES, GRID, PLAIN, ERROR, 5)
    assert compare_ansatze(curves, ["power-law"], quick=True).probability("transition") is None


def scatter_of_critical_disorder(keep_covariance: bool) -> float:
    """Scatter of W_c over its stated error in 25 data sets whose points correlate by 0.7 within a size."""
    z = []
    for seed in range(25):
        curves = simulate(SIZES, GRID, PLAIN, ERROR, 200 + seed, correlation=0.7)
        if not keep_covariance:
            curves = Curves([Curve(c.size, c.disorder, c.mean, c.error) for c in curves.curves])
        found = fit_collapse(curves, "power-law", quick=True).parameters["W_c"]
        z.append((found.median - 5.0) / found.sd)
    return float(np.sqrt(np.mean(np.square(z))))


def test_covariance_of_points_is_used() -> None:
    """With their covariance, correlated points give honest errors of W_c; without it, errors far too small."""
    # root mean square of 25 standard normals: chi-squared with 25 degrees of freedom, 99.9 % below sqrt(52.6/25) = 1.45
    assert scatter_of_critical_disorder(keep_covariance=True) < 1.45
    assert scatter_of_critical_disorder(keep_covariance=False) > 1.8  # negative control; about 2.7 was found


def test_every_ansatz_fits_and_reports() -> None:
    """Each name on offer can be fitted, covers its parameters, and says what it is."""
    curves = simulate(SIZES, GRID, PLAIN, ERROR, 7)
    for name in available():
        fit = fit_collapse(curves, name, quick=True)
        assert fit.ansatz.name == name
        derived = {"W_c"} if "inverse-drift" in name else set()
        assert set(fit.parameters) == {p.name for p in parse_ansatz(name, curves).parameters} | {"tau", "s"} | derived
        assert 0 <= fit.quality.p_value <= 1
        if fit.ansatz.hypothesis == "transition" and "kt" not in name:
            assert fit.quality.p_value > 1e-3  # these hold the truth
        assert name in fit.summary()
        np.testing.assert_allclose(
            fit.points.residual * fit.points.error + fit.points.fitted, curves.flat()[2], rtol=1e-12
        )


VARIABLES = "power-law, power-law-asymmetric, kt, size-ratio, finite-length, finite-length-quadratic, size-independent"
PARTS = "fixed, inverse-drift, log-drift, linear-drift, corrected, amplitude"
SENTENCES = {
    "powr-law": f"must begin with a scaled variable ({VARIABLES}); did you mean 'power-law'?",
    "power-law:corected": f"has a part 'corected' that power-law does not take; it takes {PARTS}; "
    "did you mean 'corrected'?",
    "size-ratio:log-drift": "has a part 'log-drift' that size-ratio does not take; it takes corrected, amplitude",
    "power-law:amplitude=x": f"has a part 'amplitude=x' that power-law does not take; it takes {PARTS}; "
    "did you mean 'amplitude'?",
    "power-law:log-drift:linear-drift": "names a part twice; one of each kind is enough",
}


@pytest.mark.parametrize("name", SENTENCES)
def test_unknown_ansatz_is_a_sentence(name: str) -> None:
    """A mistyped ansatz is answered with what there is and the nearest name."""
    curves = simulate(SIZES, GRID, PLAIN, ERROR, 8)
    with pytest.raises(ConfigurationError) as caught:
        fit_collapse(curves, name)
    assert str(caught.value) == f"ansatz {name!r} {SENTENCES[name]}"


def test_length_forms_need_positive_disorder() -> None:
    """Forms in ln W or W/L^kappa refuse disorders at or below zero with a sentence."""
    shifted = Curves(
        [Curve(c.size, c.disorder - 5, c.mean, c.error) for c in simulate(SIZES, GRID, PLAIN, ERROR, 8).curves]
    )
    for name in ("size-ratio", "finite-length", "finite-length-quadratic"):
        with pytest.raises(
            ConfigurationError, match=r"needs positive disorders, and the smallest is -3; leave this ansatz"
        ):
            parse_ansatz(name, shifted)
    assert "size-ratio" not in applicable(DEFAULT_ANSATZE, shifted)
    assert "power-law" in applicable(DEFAULT_ANSATZE, shifted)


def test_limit_of_a_converging_trajectory() -> None:
    """With W_c(L) = a + b/L the reported critical disorder is the limit a, not the value at the middle size."""
    # not nu = 1, where a shift of 8/L is the same as a shift of the scaling function: (W - 5 + 8/L) L = (W - 5) L + 8
    truth = InverseDriftTruth(W_c=5.0, nu=0.6, scaling=Gompertz(scale=60.0), shift=-8.0)
    data = [simulate(SIZES, GRID, truth, ERROR, 300 + seed) for seed in range(10)]
    fits = [fit_collapse(curves, "power-law:inverse-drift", quick=True, extras=False) for curves in data]
    z = np.array([(fit.parameters["W_c"].median - 5.0) / fit.parameters["W_c"].sd for fit in fits])
    middle = [fit.parameters["W_mid"] for fit in fits]
    z_middle = np.array([(each.median - (5 - 8 / 13)) / each.sd for each in middle])
    for scores in (z, z_middle):
        assert abs(scores.mean()) < 3.3 / np.sqrt(10)  # mean of 10 standard normals: 1e-3 false alarm
    # negative control: the value at the middle size is not the limit
    assert np.mean([(each.median - 5.0) / each.sd for each in middle]) < -1.5
    # by hand: W_c = W_mid + D (0 - 1/13) / (1/18 - 1/8)
    fit = fits[0]
    np.testing.assert_allclose(
        fit.draws("W_c"), fit.draws("W_mid") + fit.draws("D") * (-1 / 13) / (1 / 18 - 1 / 8), rtol=1e-12
    )


def test_constant_observable_is_no_accident() -> None:
    """Exactly equal means at every point are fitted without failing, and no form can be told from another."""
    flat = Curves([Curve(L, GRID, np.full(GRID.size, 0.5), np.full(GRID.size, ERROR)) for L in (8, 12, 16)])
    fit = fit_collapse(flat, "power-law", quick=True)
    assert np.isfinite(fit.log_evidence)
    assert fit.quality.p_value > 0.99  # no scatter at all
    assert "W_c" in fit.prior_limited
