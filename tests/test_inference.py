"""Modes, importance sampling and the chain, on densities whose integrals are known."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from scipy.stats import multivariate_normal

from driftline.inference.importance import (
    Mixture,
    WeightedDraws,
    adapt,
    fit_mixture,
    importance_sample,
    sample_until,
)
from driftline.inference.intervals import Interval
from driftline.inference.modes import find_modes
from driftline.inference.sampling import run_chain
from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.likelihood import Posterior
from driftline.simulate import PowerLawTruth, simulate

COVARIANCE = np.array([[1.0, 0.8, 0.0], [0.8, 1.0, 0.3], [0.0, 0.3, 2.0]]) * 0.01
TWO = (np.array([-0.5, 0.3, 0.0]), np.array([0.9, -0.6, 0.4]))


def one_peak(z: np.ndarray) -> np.ndarray:
    """Log of 5 times a correlated Gaussian."""
    return np.atleast_1d(multivariate_normal(TWO[0], COVARIANCE).logpdf(z)) + np.log(5)


def two_peaks(z: np.ndarray) -> np.ndarray:
    """Log of a Gaussian of mass 3 and one of mass 1."""
    logs = [
        np.log(m) + np.atleast_1d(multivariate_normal(c, COVARIANCE).logpdf(z))
        for m, c in zip((3, 1), TWO, strict=True)
    ]
    return np.logaddexp(*logs)


def from_unit(u: np.ndarray) -> np.ndarray:
    """A prior of the cube from -3 to 3."""
    return 6 * u - 3


def test_mode_and_curvature_of_a_gaussian() -> None:
    """A Gaussian's mode, its covariance and, by Laplace, its mass are found."""
    (mode,) = find_modes(one_peak, from_unit, 3, np.random.default_rng(1))
    # the climb ends within 1e-3 of the maximum in log density: sqrt(2e-3) = 0.045 standard deviations of 0.1 to 0.14
    np.testing.assert_allclose(mode.place, TWO[0], atol=0.045 * 0.1414)
    np.testing.assert_allclose(mode.covariance, COVARIANCE, rtol=1e-6, atol=1e-8)  # central differences are exact here
    assert mode.log_mass == pytest.approx(np.log(5), abs=2e-3)


def test_two_modes_are_found_heaviest_first() -> None:
    """Both of two separate peaks are found, in the order of their mass."""
    modes = find_modes(two_peaks, from_unit, 3, np.random.default_rng(2))
    assert len(modes) == 2
    for mode, centre in zip(modes, TWO, strict=True):
        np.testing.assert_allclose(mode.place, centre, atol=0.01)


@pytest.mark.parametrize(("density", "mass"), [(one_peak, 5.0), (two_peaks, 4.0)])
def test_evidence_of_known_integrals(density, mass: float) -> None:
    """Importance sampling gives a known integral within four of its own standard errors (false alarm 6e-5)."""
    rng = np.random.default_rng(3)
    modes = find_modes(density, from_unit, 3, rng)
    mixture, _ = adapt(density, Mixture.of_modes(modes), rng)
    draws = importance_sample(density, mixture, 6000, rng)
    assert abs(draws.log_evidence - np.log(mass)) < 4 * draws.log_evidence_error
    assert draws.log_evidence_error < 0.03
    assert draws.effective > 2000


def test_evidence_error_is_honest() -> None:
    """Over 200 repetitions the evidence scatters by its stated error, and is not off by half of it."""
    rng = np.random.default_rng(4)
    mixture = Mixture(np.ones(1), TWO[:1] + np.array([[0.05, 0, 0]]), np.linalg.cholesky(COVARIANCE)[None])
    runs = [importance_sample(one_peak, mixture, 500, rng) for _ in range(200)]
    scaled = np.array([(run.log_evidence - np.log(5)) / run.log_evidence_error for run in runs])
    # 200 standard normals: standard deviation known to 1/sqrt(400) = 5 %, mean to 0.07; four of those
    assert 0.8 < scaled.std() < 1.2
    assert abs(scaled.mean()) < 0.3
    assert not 0.8 < (scaled * 2).std() < 1.2  # negative control: errors understated by two would be seen


def test_adaptation_recovers_from_a_bad_start() -> None:
    """A proposal three times too narrow and off centre is refitted until its weights are even."""
    rng = np.random.default_rng(5)
    bad = Mixture(np.ones(1), (TWO[0] + 0.15)[None], np.linalg.cholesky(COVARIANCE)[None] / 3)
    before = importance_sample(one_peak, bad, 1500, rng).effective
    _, draws = adapt(one_peak, bad, rng)
    assert before < 150
    assert draws.effective > 600


def test_pooled_rounds_are_honest_about_the_evidence() -> None:
    """Over 200 adaptations from a bad start the evidence scatters by no more than its error and hardly has a bias."""
    rng = np.random.default_rng(13)
    bad = Mixture(np.ones(1), (TWO[0] + 0.15)[None], np.linalg.cholesky(COVARIANCE)[None] / 3)
    runs = [adapt(one_peak, bad, rng)[1] for _ in range(200)]
    off = np.array([run.log_evidence - np.log(5) for run in runs])
    error = np.array([run.log_evidence_error for run in runs])
    # the standard deviation of 200 scaled errors is known to 5 %; shares of components drawn systematically make it
    # smaller than one, nothing makes it larger
    assert (off / error).std() < 1.2
    assert not (off / (error / 2)).std() < 1.2  # negative control: errors understated by two would be seen
    # mixtures fitted to draws that are weighted again favour these: a bias of order 1/n in the evidence, here of about
    # 30 / 3000 draws; an odds of 1.03 would change nothing
    assert abs(off.mean()) < 0.03
    assert error.mean() < 0.05


def test_mixture_density_integrates_to_one() -> None:
    """The t mixture is a normalised density: its own importance weights against a wider one average to one."""
    rng = np.random.default_rng(6)
    mixture = fit_mixture(rng.multivariate_normal(TWO[0], COVARIANCE, 500), np.full(500, 1 / 500), rng)
    wide = Mixture(np.ones(1), np.array(TWO[:1]), 3 * np.linalg.cholesky(COVARIANCE)[None])
    draws = importance_sample(mixture.log_density, wide, 20000, rng)
    assert abs(draws.log_evidence) < 4 * draws.log_evidence_error
    assert draws.log_evidence_error < 0.03


def test_weighted_intervals_agree_with_resampling() -> None:
    """The interval of weighted draws is that of the equally weighted draws resampled from them."""
    rng = np.random.default_rng(7)
    places = rng.normal(0, 2, (4000, 1))
    draws = WeightedDraws(places, -0.5 * places[:, 0] ** 2 * (1 - 1 / 4))
    direct = Interval.of_draws(draws.places[:, 0], draws.weights)
    resampled = Interval.of_draws(draws.resample(4000, rng)[:, 0])
    # target: a standard normal; the 97.5 % point from ~2000 effective draws has standard error 0.06, four of them
    assert direct.high95 == pytest.approx(1.96, abs=0.24)
    assert resampled.high95 == pytest.approx(direct.high95, abs=0.05)  # systematic resampling adds almost nothing


@pytest.mark.parametrize("global_moves", [False, True])
def test_chain_agrees_with_importance_sampling(global_moves: bool) -> None:
    """Chain, with and without global moves, and importance sampling give the same posterior of a collapse."""
    rng = np.random.default_rng(8)
    curves = simulate((8, 10, 12, 16), np.linspace(2, 6, 13), PowerLawTruth(4.0), 0.003, 3)
    target = Posterior(curves, parse_ansatz("power-law", curves))
    mixture, start = adapt(target, Mixture.of_modes(find_modes(target, target.from_unit, 4, rng)), rng)
    draws = importance_sample(target, mixture, 6000, rng)
    mean = draws.weights @ draws.places
    sd = np.sqrt(draws.weights @ (draws.places - mean) ** 2)
    first = start.resample(64, rng) + 1e-3 * sd * rng.standard_normal((64, 4))
    chain = run_chain(target, first, rng, mixture=mixture if global_moves else None)
    assert chain.converged
    error = np.sqrt(1 / chain.effective + 1 / draws.effective)
    np.testing.assert_array_less(np.abs(chain.draws.mean(axis=0) - mean) / sd, 4 * error)
    # relative error of a standard deviation: 1/sqrt(2 n) for a normal; for heavier tails twice that; four of them
    np.testing.assert_allclose(chain.draws.std(axis=0), sd, rtol=4 * 2 * error / np.sqrt(2))


def test_global_moves_find_both_peaks() -> None:
    """Walkers that start on one of two distant peaks reach the other, in the right numbers; local moves do not."""
    rng = np.random.default_rng(14)
    whole = Mixture(np.ones(2), np.array(TWO), np.tile(np.linalg.cholesky(COVARIANCE), (2, 1, 1))).guarded()
    start = rng.multivariate_normal(TWO[0], COVARIANCE, 64)
    shares = []
    for mixture in (whole, None):
        draws = run_chain(two_peaks, start, rng, mixture=mixture).draws
        near = np.linalg.norm(draws - TWO[0], axis=1) < np.linalg.norm(draws - TWO[1], axis=1)
        shares.append(float(near.mean()))
    # masses 3 and 1; a thousand effective draws know a share to 0.014, four of those
    assert abs(shares[0] - 0.75) < 0.056
    assert shares[1] > 0.9  # negative control: without them hardly a walker gets across


def test_chain_that_is_too_short_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    """A chain stopped at its limit is reported as not converged."""
    monkeypatch.setattr("driftline.inference.sampling.MOST_STEPS", 250)
    rng = np.random.default_rng(9)
    chain = run_chain(one_peak, rng.multivariate_normal(TWO[0], COVARIANCE, 64), rng)
    assert not chain.converged
    assert chain.steps == 250


def test_evidence_agrees_with_nested_sampling() -> None:
    """The evidence of a collapse agrees with dynesty's nested sampling within their errors."""
    import dynesty

    curves = simulate((8, 10, 12, 16), np.linspace(2, 6, 13), PowerLawTruth(4.0), 0.006, 3)
    target = Posterior(curves, parse_ansatz("power-law", curves))
    rng = np.random.default_rng(10)
    mixture, _ = adapt(target, Mixture.of_modes(find_modes(target, target.from_unit, 4, rng)), rng)
    ours = importance_sample(target, mixture, 6000, rng)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # dynesty warns about its own bounds; nothing of ours runs in here but `target`
        sampler = dynesty.NestedSampler(
            lambda z: float(target.log_likelihood(z[None])[0]),
            lambda u: target.from_unit(np.clip(u, 1e-12, 1 - 1e-12)[None])[0],
            ndim=4, nlive=100, sample="rwalk", rstate=np.random.default_rng(11),
        )  # fmt: skip
        sampler.run_nested(print_progress=False, dlogz=0.1)
    theirs, error = sampler.results.logz[-1], sampler.results.logzerr[-1]
    combined = np.hypot(error, ours.log_evidence_error)
    assert abs(ours.log_evidence - theirs) < 3 * combined + 0.1  # 0.1: the remainder that dlogz leaves out
    assert combined < 0.6  # the comparison has teeth: a factor of two in the evidence is 0.7


def test_missed_mode_is_found_again() -> None:
    """A mixture that covers one of two peaks has few effective draws; refitting finds the other peak."""
    rng = np.random.default_rng(12)
    near = (np.zeros(3), np.array([0.4, 0.4, 0.0]))  # 4.2 standard deviations apart

    def density(z: np.ndarray) -> np.ndarray:
        logs = [np.log(2) + np.atleast_1d(multivariate_normal(c, COVARIANCE).logpdf(z)) for c in near]
        return np.logaddexp(*logs)

    half = Mixture(np.ones(1), near[0][None], np.linalg.cholesky(COVARIANCE)[None])
    assert importance_sample(density, half, 2000, rng).effective < 400
    draws = sample_until(density, half, 2000, 400, rng)
    assert draws.effective >= 400
    assert abs(draws.log_evidence - np.log(4)) < 4 * draws.log_evidence_error
