"""Prediction of the largest size from the smaller ones, and other sets of priors, against independent computations."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from scipy.interpolate import BSpline
from scipy.special import logsumexp
from scipy.stats import multivariate_normal

from driftline.collapse import HeldOut, _adapted, _held_out, _prior_shifts, fit_collapse
from driftline.curves import Curves
from driftline.inference.importance import WeightedDraws, sample_until
from driftline.inference.intervals import Interval
from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.function import LINEAR_SD
from driftline.scaling.likelihood import CORRECTION_SD, Posterior
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogNormal, LogUniform, Normal, Uniform
from driftline.sensitivity import PRIOR_SETS, flat_in_value, wide
from driftline.simulate import Gompertz, PowerLawTruth, SizeIndependentTruth, Truth, simulate

SIZES, GRID, ERROR = (8, 11, 14, 18), np.linspace(2.0, 8.0, 15), 0.003
TRUTH = PowerLawTruth(W_c=5.0, nu=1.0, scaling=Gompertz(scale=8.0))


def dense_model(target: Posterior, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Prior mean and covariance of all noiseless curves, and covariance of the noise, as dense matrices."""
    curves, form = target.curves, target.ansatz
    size, disorder, mean, _ = curves.flat()
    x = form.scaled(z[None], size, disorder, curves.sizes)[0]
    u = (x - x.min()) / np.ptp(x)
    count = 24
    phi = BSpline.design_matrix(np.clip(u, 0, 1), np.arange(-3, count + 1) / (count - 3), 3).toarray()
    pseudo = np.linalg.pinv(np.diff(np.eye(count), 2, axis=0))
    line = np.column_stack([np.ones(count), np.linspace(-1, 1, count)])
    tau, s = np.exp(target.log_tau), np.exp(z[-1])
    curve = phi @ (tau**2 * pseudo @ pseudo.T + LINEAR_SD**2 * line @ line.T) @ phi.T * np.ptp(mean) ** 2
    if form.corrected:
        w = (size / size.min()) ** -np.exp(z[[p.name for p in form.parameters].index("omega")])
        terms = np.column_stack([w, w * (2 * u - 1)]) * CORRECTION_SD * np.ptp(curves.curves[0].mean)
        curve += terms @ terms.T
    noise = np.zeros_like(curve)
    for each in curves.curves:
        at = size == each.size
        noise[np.ix_(at, at)] = s**2 * each.noise
    return np.full(size.size, (mean.max() + mean.min()) / 2), curve, noise


def conditional(target: Posterior, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Mean and covariance of the largest size's noiseless curve given the other sizes' means, and its noise."""
    mean, curve, noise = dense_model(target, z)
    size, _, data, _ = target.curves.flat()
    a, b = size < size.max(), size == size.max()
    gain = np.linalg.solve((curve + noise)[np.ix_(a, a)], curve[np.ix_(a, b)]).T
    return (
        mean[b] + gain @ (data - mean)[a],
        curve[np.ix_(b, b)] - gain @ curve[np.ix_(a, b)],
        noise[np.ix_(b, b)],
    )


@pytest.mark.parametrize("correlation", [0.0, 0.6])
@pytest.mark.parametrize("name", ["power-law:corrected", "finite-length", "size-independent"])
def test_difference_of_evidences_is_the_conditional_density(name: str, correlation: float) -> None:
    """With all parameters held, ln Z(all) - ln Z(smaller) is the dense Gaussian density of the largest size's means."""
    curves = simulate(SIZES, GRID, TRUTH, ERROR, 1, correlation=correlation)
    full = Posterior(curves, parse_ansatz(name, curves), log_tau=-3.0)
    smaller = replace(full, left_out=18.0)
    unit = np.random.default_rng(2).uniform(0.3, 0.7, (5, full.dimension))
    for z in full.from_unit(unit):
        mean, curve, noise = conditional(full, z)
        expected = multivariate_normal(mean, curve + noise).logpdf(curves.curves[-1].mean)
        # two quadratic forms of up to 1e5, each exact to eps times a condition of about 1e6: 1e-5
        found = full.log_likelihood(z[None])[0] - smaller.log_likelihood(z[None])[0]
        assert found == pytest.approx(expected, abs=1e-4)


def held_out(truth: Truth, name: str, seed: int, **options: float) -> tuple[Curves, Posterior, HeldOut]:
    """The largest size of one simulated set predicted by one form."""
    rng = np.random.default_rng([seed, 20261203])
    curves = simulate(SIZES, GRID, truth, ERROR, rng)
    target = Posterior(curves, parse_ansatz(name, curves), **options)
    found = _held_out(target, sample_until(target, *sampler(target, rng)), rng)
    assert found is not None
    return curves, target, found


def sampler(target: Posterior, rng: np.random.Generator) -> tuple:
    """What `sample_until` takes after the target."""
    return _adapted(target, rng)[0], 2000, 400.0, rng


def test_prediction_agrees_with_quadrature() -> None:
    """With the noise scale as the only parameter, score, prediction and chi-squared agree with sums over its grid."""
    curves, target, found = held_out(SizeIndependentTruth(), "size-independent", 1, log_tau=-3.0)
    log_s = np.linspace(-1.0, 1.0, 201)[:, None]  # a prior of sd 0.3 on 45 points: nothing is left beyond
    logs = target(log_s)
    smaller = replace(target, left_out=18.0)(log_s)
    # Monte Carlo error as stated, four times; the sums are exact to far better
    assert abs(found.log_score - (logsumexp(logs) - logsumexp(smaller))) < 4 * found.log_score_error
    weights = np.exp(smaller - logsumexp(smaller))
    parts = [conditional(target, z) for z in log_s]
    mean = np.einsum("s,sp->p", weights, [part[0] for part in parts])
    within = np.einsum("s,spq->pq", weights, [part[1] for part in parts])
    away = np.array([part[0] for part in parts]) - mean
    covariance = within + np.einsum("s,sp,sq->pq", weights, away, away)
    sd = np.sqrt(np.diag(covariance))
    assert np.all(np.abs(found.predicted - mean) < 4.5 * sd / np.sqrt(400))  # 400 draws, 15 points
    np.testing.assert_allclose(found.predicted_sd, sd, rtol=4.5 / np.sqrt(2 * 400))
    offset = curves.curves[-1].mean - mean
    exact = offset @ np.linalg.solve(curves.curves[-1].noise + covariance, offset) / offset.size
    # 400 draws give the covariance to 7 % and the mean to a twentieth of its sd, in every direction
    assert found.chi2_per_point == pytest.approx(exact, rel=0.25)
    assert (found.size, found.disorder.tolist()) == (18.0, GRID.tolist())


def test_right_form_predicts_the_largest_size() -> None:
    """Chi-squared per held-out point is one on average, and the bands hold the points at their rate."""
    sets = [held_out(TRUTH, "power-law", seed) for seed in range(8)]
    # 8 sets of 15 points: standard error sqrt(2 / 120) = 0.13, four times
    assert abs(np.mean([found.chi2_per_point for _, _, found in sets]) - 1) < 0.52
    z = np.array([
        (curves.curves[-1].mean - found.predicted) / np.hypot(found.predicted_sd, ERROR) for curves, _, found in sets
    ])  # fmt: skip
    # 95 % of 120 points; they correlate through the shared prediction, so let a quarter of them count: 4 * 0.04
    assert np.mean(np.abs(z) < 1.96) > 0.95 - 0.16


def test_wrong_form_does_not_predict_it() -> None:
    """Negative control: where size matters, a form without size misses the largest size and scores far lower."""
    scores = {name: held_out(TRUTH, name, 1)[2] for name in ("power-law", "size-independent")}
    # 15 points of a right form exceed 3 each with probability 8e-5 (chi-squared of 45 with 15 degrees of freedom)
    assert scores["size-independent"].chi2_per_point > 3
    # odds of e^3 are strong (Kass, Raftery, J. Am. Stat. Assoc. 90, 773 (1995)); Monte Carlo errors are 0.03
    assert scores["size-independent"].log_score < scores["power-law"].log_score - 3


def test_two_sizes_hold_none_out() -> None:
    """With two sizes a single one would be left, which has no size dependence to learn from."""
    curves = simulate(SIZES[:2], GRID, TRUTH, ERROR, 1)
    target = Posterior(curves, parse_ansatz("power-law", curves))
    nothing = WeightedDraws(np.zeros((1, 4)), np.zeros(1))
    assert _held_out(target, nothing, np.random.default_rng(1)) is None


@dataclass(frozen=True, eq=False)
class WidePosterior(Posterior):
    """The same with twice the standard deviation in every Gaussian prior."""

    @property
    def parameters(self) -> tuple[Parameter, ...]:  # type: ignore[override]
        return tuple(
            replace(p, prior=type(p.prior)(p.prior.mean, 2 * p.prior.sd)) if isinstance(p.prior, Normal) else p
            for p in super().parameters
        )


def test_reweighting_agrees_with_a_fit_under_the_other_priors() -> None:
    """Evidence and W_c under priors twice as wide: by reweighting, and by sampling with those priors."""
    rng = np.random.default_rng(5)
    curves = simulate(SIZES, GRID, TRUTH, 0.006, rng)
    target = Posterior(curves, parse_ansatz("power-law:amplitude", curves))
    held = replace(target, log_tau=-2.5)
    draws, physical = (sample_until(each, *sampler(each, rng)) for each in (target, held))
    shifts = {shift.name: shift for shift in _prior_shifts(target, draws, held, physical)}
    direct, direct_held = (
        sample_until(each, *sampler(each, rng))
        for each in (WidePosterior(curves, target.ansatz), WidePosterior(curves, target.ansatz, log_tau=-2.5))
    )
    found = shifts["wide"]
    assert found.effective > 200
    errors = (draws.log_evidence_error, direct.log_evidence_error, found.effective**-0.5)
    exact = direct.log_evidence - draws.log_evidence
    assert abs(found.log_evidence_shift - exact) < 4 * np.linalg.norm(errors)
    interval = Interval.of_draws(direct_held.places[:, 0], direct_held.weights)
    assert found.disorder is not None
    # standard error of the 2.5 % point of n normal draws: sqrt(0.025 0.975) / 0.0584 = 2.67 sd / sqrt n
    room = 4 * 2.67 * interval.sd * np.hypot(found.effective**-0.5, direct_held.effective**-0.5)
    for end in ("median", "low95", "high95"):
        assert abs(getattr(found.disorder, end) - getattr(interval, end)) < room
    # the check has power: the shift of the evidence exceeds its room
    assert abs(exact) > 4 * np.linalg.norm(errors)


def test_declared_priors_shift_nothing() -> None:
    """The set in use changes neither evidence nor W_c; a form without W_c has no interval of it in any set."""
    curves = simulate(SIZES, GRID, TRUTH, ERROR, 3)
    fit = fit_collapse(curves, "power-law", quick=True)
    declared = fit.prior_sensitivity[0]
    assert [shift.name for shift in fit.prior_sensitivity] == list(PRIOR_SETS) == ["declared", "flat-in-value", "wide"]
    assert (declared.log_evidence_shift, declared.disorder) == (0.0, fit.parameters["W_c"])
    assert fit.held_out is not None
    none = fit_collapse(curves, "size-independent", quick=True)
    assert [shift.disorder for shift in none.prior_sensitivity] == [None] * 3


PARAMETERS = tuple(
    Parameter(name, name, prior, "")
    for name, prior in {
        "flat": Uniform(1.0, 3.0), "scale": LogUniform.between(0.2, 10.0), "place": Normal(1.0, 0.5),
        "factor": LogNormal.around(1.0, 0.3),
    }.items()
)  # fmt: skip


@pytest.mark.parametrize("index", range(4))
@pytest.mark.parametrize("change", [flat_in_value, wide])
def test_other_priors_are_normalised(change, index: int) -> None:
    """Each declared density times the change of it integrates to one, for each kind of prior."""
    prior = PARAMETERS[index].prior
    low, high = (prior.low, prior.high) if isinstance(prior, Uniform) else (prior.mean - 6, prior.mean + 6)
    z = np.linspace(low, high, 20001)
    density = np.exp(prior.log_density(z) + change((PARAMETERS[index],), z[:, None]))
    assert np.trapezoid(density, z) == pytest.approx(1, abs=1e-6)  # trapezia of 2e4 points, six or more sd kept


def test_other_priors_by_hand() -> None:
    """ln 2 of evidence is lost at the centre of each Gaussian; flat in value favours the upper end by its ratio."""
    centre = np.array([[2.0, 0.0, 1.0, 0.0]])
    assert wide(PARAMETERS, centre)[0] == pytest.approx(-2 * np.log(2), rel=1e-12)
    ends = np.array([[2.0, np.log(0.2), 1.0, 0.0], [2.0, np.log(10.0), 1.0, 0.0]])
    assert np.diff(flat_in_value(PARAMETERS, ends))[0] == pytest.approx(np.log(50), rel=1e-12)
