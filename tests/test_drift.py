"""Drift laws: evidences by independent integrals, recovery of known drifts, and what is left out and said."""

from __future__ import annotations

import json

import numpy as np
import pytest
from scipy.linalg import solve
from scipy.special import logsumexp
from scipy.stats import multivariate_normal, norm

from driftline.crossings import Crossing, Crossings, find_crossings
from driftline.curves import Curve, Curves, Labels
from driftline.drift import (
    LAWS,
    DriftLaw,
    Points,
    Prior,
    Span,
    _posterior,
    _robust_moments,
    best_fit,
    fit_drift,
    fit_laws,
)
from driftline.errors import ConfigurationError
from driftline.inference.intervals import Interval
from driftline.simulate import LinearDriftTruth, Logistic, PowerLawTruth, simulate

SIZES = np.sqrt(np.array([8.0, 10, 12, 14, 16]) * np.array([10.0, 12, 14, 16, 18]))
PRIOR = Prior.of((2.0, 8.0))


def covariance_of(error, correlation=-0.3, count=SIZES.size):
    """Errors with the negative correlation of neighbouring pairs."""
    return error**2 * (np.eye(count) + correlation * (np.eye(count, k=1) + np.eye(count, k=-1)))


def points_of(positions, error=0.1):
    """Points at `SIZES` with that covariance."""
    return Points(SIZES, positions, np.linalg.cholesky(covariance_of(error)), Span.of(SIZES))


def fitted(positions, laws, error=0.1):
    """Drift through `positions` at `SIZES`."""
    chosen = [LAWS[name] for name in laws]
    return fit_laws(SIZES, positions, covariance_of(error), PRIOR, chosen, np.random.default_rng(1), source="points")


def made_crossings(positions, sd=0.05, probability=1.0, seed=1):
    """Crossings of adjacent sizes 8, 10, 12, ... with Gaussian draws about `positions`."""
    rng = np.random.default_rng(seed)
    sizes = 8.0 + 2 * np.arange(len(positions) + 1)
    grid = np.linspace(2.0, 8.0, 12)
    curves = Curves([Curve(size, grid, np.zeros(12), np.ones(12)) for size in sizes])
    pairs = []
    for k, position in enumerate(positions):
        draws = position + sd * rng.standard_normal(4000)
        draws[rng.random(4000) >= probability] = np.nan
        interval = Interval.of_draws(draws[np.isfinite(draws)]) if probability > 0 else None
        pairs.append(Crossing((sizes[k], sizes[k + 1]), probability, 1.0, interval, None, None, draws, True))
    return Crossings(tuple(pairs), (), (2.0, 8.0), Labels(), curves, 1)


def test_evidence_of_a_constant_by_hand():
    """One point: the evidence of `constant` is the normal density of variance error^2 plus that of the prior."""
    points = Points(np.array([10.0]), np.array([4.0]), np.array([[0.2]]), Span(10.0, 10.0, 10.0))
    # Prior of the range 2 to 8: mean 5, variance (1.5 * 6)^2 / 12 = 6.75; with 0.2^2 it is 6.79, so
    # ln N(4; 5, 6.79) = -0.5 ln(2 pi 6.79) - 1/13.58
    exact = -0.5 * np.log(2 * np.pi * 6.79) - 1 / 13.58
    assert _posterior(LAWS["constant"], points, PRIOR).log_evidence == pytest.approx(exact, abs=1e-12)


@pytest.mark.parametrize("name", ["constant", "inverse", "linear", "logarithmic"])
def test_evidence_is_that_of_the_marginal_gaussian(name):
    """Laws of two parameters: the positions are Gaussian with covariance C + X S X^T (scipy's density)."""
    positions = 4 + 0.03 * (SIZES - 12) ** 2
    basis = {"inverse": 1 / SIZES, "linear": SIZES, "logarithmic": np.log(SIZES)}.get(name)
    middle = np.sqrt(SIZES[0] * SIZES[-1])
    marginal = covariance_of(0.1) + 6.75  # m: see above
    if basis is not None:
        at_middle = {"inverse": 1 / middle, "linear": middle, "logarithmic": np.log(middle)}[name]
        shape = (basis - at_middle) / (basis[-1] - basis[0])
        marginal = marginal + 1.5**2 * np.outer(shape, shape)  # D: a quarter of the range 6
    exact = multivariate_normal(np.full(SIZES.size, 5.0), marginal).logpdf(positions)
    found = _posterior(LAWS[name], points_of(positions), PRIOR).log_evidence
    assert found == pytest.approx(exact, abs=1e-9)  # condition 6.75 / 0.01 * 5 points: 1e-12 and a margin


def curve_of(name, m, D, shape, sizes):
    """W*(L) of the laws with a third parameter, from m and D, written out independently."""
    low, high = SIZES[0], SIZES[-1]
    middle = np.sqrt(low * high)
    g = (lambda L: -(L**-shape)) if name == "inverse-power" else (lambda L: -1 / np.log(L / shape) ** 2)
    return m + D * (g(sizes) - g(middle)) / (g(high) - g(low))


@pytest.mark.parametrize("name", ["inverse-power", "kt"])
def test_evidence_with_a_third_parameter_by_quadrature(name):
    """The evidence agrees with a sum over a cube of (m, D, third parameter)."""
    positions, error = 4 + 1.0 * (1 - (8 / SIZES) ** 2), 0.3
    shapes = np.geomspace(0.2, 5, 81) if name == "inverse-power" else np.geomspace(1e-3, 0.8, 81) * SIZES[0]
    m, D = np.linspace(2.5, 7.0, 81), np.linspace(0.0 if name == "kt" else -6.0, 6.0, 121)
    log_density = np.empty((shapes.size, m.size, D.size))
    precision = np.linalg.inv(covariance_of(error))
    half = np.log(2.0) if name == "kt" else 0.0  # only positive D: twice the density
    for i, shape in enumerate(shapes):
        model = curve_of(name, m[:, None, None], D[None, :, None], shape, SIZES)
        misfit = positions - model
        log_density[i] = -0.5 * np.einsum("abi,ij,abj->ab", misfit, precision, misfit)
    log_density += norm(5.0, np.sqrt(6.75)).logpdf(m)[:, None] + norm(0.0, 1.5).logpdf(D) + half
    trapezium = [np.ones(n.size) for n in (shapes, m, D)]
    for weight in trapezium:
        weight[[0, -1]] = 0.5
    log_density += sum(np.log(w.reshape([-1 if k == j else 1 for k in range(3)])) for j, w in enumerate(trapezium))
    cell = (m[1] - m[0]) * (D[1] - D[0]) / (shapes.size - 1)
    normal = -0.5 * np.linalg.slogdet(2 * np.pi * covariance_of(error))[1]
    exact = logsumexp(log_density) + np.log(cell) + normal
    found = _posterior(LAWS[name], points_of(positions, error), PRIOR).log_evidence
    # Trapezia of a Gaussian with 2.5 or more steps to a standard deviation err by less than 1e-3; at the edge D = 0 of
    # kt by h^2 f'/12, 1e-3; the third parameter is smooth on its grid of 80 steps
    assert found == pytest.approx(exact, abs=0.005)


def test_evidence_of_a_pure_power_by_quadrature():
    """`power` is parametrised by m and D like the others: the same integral over (m, D > 0), p from sinh."""
    positions, error = 4 * (SIZES / 12) ** 0.5, 0.3
    m, D = np.linspace(2.0, 7.0, 401), np.linspace(1e-3, 6.0, 801)
    reach = np.log(SIZES[-1] / SIZES[0]) / 2
    p = np.arcsinh(D[None, :] / (2 * m[:, None])) / reach
    model = m[:, None, None] * np.exp(p[..., None] * np.log(SIZES / np.sqrt(SIZES[0] * SIZES[-1])))
    misfit = positions - model
    log_density = -0.5 * np.einsum("abi,ij,abj->ab", misfit, np.linalg.inv(covariance_of(error)), misfit)
    log_density += norm(5.0, np.sqrt(6.75)).logpdf(m)[:, None] + norm(0.0, 1.5).logpdf(D) + np.log(2.0)
    normal = -0.5 * np.linalg.slogdet(2 * np.pi * covariance_of(error))[1]
    exact = logsumexp(log_density) + np.log((m[1] - m[0]) * (D[1] - D[0])) + normal
    found = _posterior(LAWS["power"], points_of(positions, error), PRIOR).log_evidence
    # Both grids resolve a standard deviation by ten steps or more; p below 0.01 (D below 0.03) is cut off: less than
    # 1 % of the posterior
    assert found == pytest.approx(exact, abs=0.01)


@pytest.mark.parametrize("name", ["constant", "inverse", "linear"])
def test_best_fit_agrees_with_generalised_least_squares(name):
    """lmfit's minimum, weighted with the Cholesky factor, is the solution of the normal equations."""
    positions = 4 + np.array([0.1, -0.2, 0.3, 0.0, 0.2])
    columns = {"constant": [], "inverse": [1 / SIZES], "linear": [SIZES]}[name]
    design = np.column_stack([np.ones(5), *columns])
    precision = np.linalg.inv(covariance_of(0.1))
    exact = solve(design.T @ precision @ design, design.T @ precision @ positions)
    misfit = positions - design @ exact
    found = best_fit(LAWS[name], points_of(positions), np.array([4.0, 0.0][: design.shape[1]]))
    # Levenberg-Marquardt stops at 1e-7 relative changes of parameters, 1e-7 of chi^2
    np.testing.assert_allclose(found.coefficients, exact, rtol=1e-5, atol=1e-6)
    assert found.chi2_per_dof == pytest.approx(misfit @ precision @ misfit / (5 - design.shape[1]), rel=1e-5)


def test_linear_drift_is_recovered():
    """Positions on 2 + 0.2 L: the rate is 0.2 per site and the bounded family loses."""
    drift = fitted(2 + 0.2 * SIZES, ("constant", "inverse", "linear"), error=0.02)
    # The prior of D (sd 1.5 against an error of about 0.03) pulls by less than 1e-3 of the shift 1.6
    assert drift.rate_per_site.median == pytest.approx(0.2, abs=4 * drift.rate_per_site.sd)
    assert drift.rate_per_site.sd < 0.01
    assert drift.probability_bounded < 0.05
    assert next(law for law in drift.laws if law.name == "linear").limit is None


def test_inverse_drift_is_recovered():
    """Positions on 6 - 20/L: the limit is 6 and the bounded family wins."""
    drift = fitted(6 - 20 / SIZES, ("constant", "inverse", "linear"), error=0.02)
    inverse = next(law for law in drift.laws if law.name == "inverse")
    assert inverse.limit.median == pytest.approx(6.0, abs=4 * inverse.limit.sd)
    assert inverse.limit.sd < 0.15
    assert drift.probability_bounded > 0.95


@pytest.mark.parametrize("name", LAWS)
def test_every_law_predicts_what_it_was_given(name):
    """Each law passes through points that follow it, and its band is as narrow as the errors."""
    shape = {"inverse-power": 1.5, "kt": 2.0, "power": 0.4}.get(name, 1.0)
    law: DriftLaw = LAWS[name]
    given = {"power": [1.5, shape], "kt": [8.0, 3.0, shape], "inverse-power": [6.0, -20.0, shape]}
    coefficients = np.array([given.get(name, [5.0, {"inverse": -10.0}.get(name, 0.05)])[: len(law.symbols)]])
    truth = law.evaluate(coefficients, SIZES)[0]
    fit = fitted(truth, (name,), error=0.01).laws[0]
    median, low, high = fit.predict(SIZES)
    # No noise was added: the residue is the pull of the priors, far below an error, and the curvature of the third
    # parameter's posterior, below two
    assert np.all(np.abs(median - truth) < 0.02)
    assert np.all((low < high) & (high - low < 0.06))
    assert (fit.limit is None) is not law.bounded


def test_truncated_shift_keeps_its_sign():
    """`kt` only rises: on falling positions its coefficient stays positive and the evidence suffers."""
    falling = fitted(4 + 20 / SIZES, ("kt", "inverse"), error=0.05)
    assert np.all(np.isfinite(falling.laws[0].coefficient_draws))
    assert np.all(falling.laws[0].coefficient_draws[:, 1] >= 0)
    assert falling.laws[0].log_evidence < falling.laws[1].log_evidence - 5


def test_probabilities_by_hand():
    """With equal evidences each family has 1/2, split equally: 1/4, 1/4 and 1/2."""
    drift = fitted(np.array([4.0, 4.1, 4.0, 4.2, 4.1]), ("constant", "inverse", "linear"))
    evidence = np.array([law.log_evidence for law in drift.laws])
    weight = np.exp(evidence - evidence.max()) * [0.25, 0.25, 0.5]
    found = [law.probability for law in drift.laws]
    np.testing.assert_allclose(found, weight / weight.sum(), rtol=1e-12)
    assert drift.probability_bounded == pytest.approx(found[0] + found[1], rel=1e-12)
    assert fitted(np.full(5, 4.0), ("constant", "inverse")).probability_bounded is None


def test_deciding_size():
    """At the size given the two best laws differ by three errors, and just below they do not."""
    drift = fitted(4 + 0.05 * SIZES, ("constant", "linear"), error=0.1)
    first, second = drift.laws
    at = np.array([drift.deciding_size, drift.deciding_size * 0.96])  # grid of 400 steps over 1e5: 2.9 % each
    gap = np.abs(first.predict(at)[0] - second.predict(at)[0])
    assert gap[0] >= 0.3 > gap[1]
    assert fitted(np.full(5, 4.0), ("constant",)).deciding_size is None


def test_unit_of_the_disorder_is_arbitrary():
    """Scaling the disorder by ten leaves all probabilities as they are and scales the rate."""
    positions = 4 + 0.05 * SIZES + np.array([0.1, -0.1, 0.0, 0.1, -0.1])
    rng = np.random.default_rng
    laws = list(LAWS.values())
    first = fit_laws(SIZES, positions, covariance_of(0.1), PRIOR, laws, rng(1), source="points")
    second = fit_laws(SIZES, 10 * positions, covariance_of(1.0), Prior.of((20.0, 80.0)), laws, rng(1), source="points")
    for a, b in zip(first.laws, second.laws, strict=True):
        assert b.probability == pytest.approx(a.probability, abs=1e-9)  # rounding of closed forms
    assert second.rate_per_site.median == pytest.approx(10 * first.rate_per_site.median, rel=1e-9)
    assert second.deciding_size == pytest.approx(first.deciding_size, rel=1e-9)


def test_order_of_points_is_arbitrary():
    """Permuted points give the same evidences."""
    positions = 4 + 0.05 * SIZES + np.array([0.1, -0.1, 0.0, 0.1, -0.1])
    order = np.array([3, 1, 4, 0, 2])
    laws = list(LAWS.values())
    covariance = covariance_of(0.1)
    args = (PRIOR, laws, np.random.default_rng(1))
    first = fit_laws(SIZES, positions, covariance, *args, source="points")
    second = fit_laws(SIZES[order], positions[order], covariance[np.ix_(order, order)], *args, source="points")
    for a, b in zip(first.laws, second.laws, strict=True):
        assert b.log_evidence == pytest.approx(a.log_evidence, abs=1e-9)


def test_robust_moments_of_gaussian_draws():
    """For Gaussian draws with gaps medians and covariance come out, within their sampling error."""
    rng = np.random.default_rng(4)
    exact = np.array([[0.04, -0.01], [-0.01, 0.01]])
    draws = rng.multivariate_normal([4.0, 5.0], exact, 40_000)
    draws[:400, 0] = np.nan
    median, covariance = _robust_moments(list(draws.T))
    np.testing.assert_allclose(median, [4.0, 5.0], atol=5 * 1.25 * 0.2 / 200)
    # A standard deviation from the 95 % interval has a relative error of 0.5 %, a correlation 1/sqrt(n) = 0.5 %
    np.testing.assert_allclose(covariance, exact, rtol=0.05)


def test_long_tails_widen_the_error():
    """A tenth of the draws far away makes the error larger than the 68 % interval alone would."""
    rng = np.random.default_rng(4)
    draws = rng.normal(4.0, 0.1, 4000)
    draws[:400] += 3.0
    assert np.sqrt(_robust_moments([draws])[1][0, 0]) > 0.5


def test_from_curves_to_a_rate():
    """Simulated curves of which neighbouring sizes cross at 1 + 0.1 (L1 + L2), that is 0.2 per site of a pair's L."""
    truth = LinearDriftTruth(W_c=1.0, rate=0.1, scaling=Logistic(scale=8.0))
    curves = simulate([8, 12, 16, 20, 24], np.linspace(1.0, 8.0, 25), truth, 0.0007, 3)
    drift = fit_drift(find_crossings(curves, draws=1000))
    # (L1 + L2)/2 is not sqrt(L1 L2): the difference, 0.2 at (8, 12) and 0.09 at (20, 24), lowers the rate by
    # 0.2 * 0.11 / 12 = 1 %
    assert abs(drift.rate_per_site.median - 0.2) < 4 * drift.rate_per_site.sd
    assert drift.rate_per_site.low95 > 0.1
    assert drift.probability_bounded < 0.5


def test_transition_does_not_drift():
    """Curves with one common crossing at 4: `constant` is the likeliest law and its limit holds 4."""
    curves = simulate([8, 12, 16, 20], np.linspace(2.0, 6.0, 15), PowerLawTruth(), 0.002, 3)
    drift = fit_drift(find_crossings(curves, draws=1000))
    best = max(drift.laws, key=lambda law: law.probability)
    assert best.name == "constant"
    assert abs(best.limit.median - 4.0) < 4 * best.limit.sd
    assert drift.probability_bounded > 0.5


def test_pairs_that_hardly_cross_are_left_out_by_name():
    """A pair below probability 1/2 is named with its probability; the others are fitted."""
    crossings = made_crossings([4.0, 4.1, 4.2])
    weak = made_crossings([4.0], probability=0.0).pairs[0]
    weak = Crossing((14.0, 16.0), 0.2, 0.1, weak.disorder, None, None, weak.draws, True)
    drift = fit_drift(Crossings((*crossings.pairs, weak), (), (2.0, 8.0), Labels(), crossings.curves, 1))
    assert drift.sizes.size == 3
    assert drift.excluded == (
        "Sizes 14 and 16 are left out of the drift: they cross in the common window with probability 0.20 only.",
    )


def test_position_cut_by_the_window_is_left_out():
    """A crossing that leans on the end of the window is no measurement of a position."""
    drift = fit_drift(made_crossings([4.0, 4.1, 7.99]))
    assert drift.sizes.size == 2
    assert drift.excluded == (
        "Sizes 12 and 14 are left out of the drift: the interval of their crossing is cut by an end of the common "
        "window.",
    )


def test_two_sizes_only():
    """One pair has no drift; the note says so, and the record is complete without NaN."""
    drift = fit_drift(made_crossings([4.0]))
    assert drift.laws == ()
    assert drift.note == ("Only 1 pair of neighbouring sizes can be used, and at least two are needed to see a drift.")
    assert json.loads(json.dumps(drift.to_dict(), allow_nan=False)) == {
        "source": "crossings",
        "laws": [],
        "probability_bounded": None,
        "rate_per_site": None,
        "deciding_size": None,
    }


def test_record_and_summary():
    """All laws appear in the record with their parameters; the table keeps to 80 columns; one seed, one result."""
    crossings = made_crossings([4.0, 4.1, 4.2, 4.3])
    drift = fit_drift(crossings, laws=list(LAWS))
    record = json.loads(json.dumps(drift.to_dict(), allow_nan=False))
    assert [law["name"] for law in record["laws"]] == list(LAWS)
    assert [tuple(law["parameters"]) for law in record["laws"]] == [law.symbols for law in LAWS.values()]
    assert max(map(len, drift.summary().splitlines())) <= 80
    assert fit_drift(crossings, laws=list(LAWS)).to_dict() == drift.to_dict()


@pytest.mark.parametrize(
    ("laws", "text"),
    [
        (("cubic",), f"unknown drift law 'cubic'; known are: {', '.join(LAWS)}"),
        (("linear", "linear"), "drift law 'linear' is named twice; name it once"),
    ],
)
def test_wrong_laws_are_refused(laws, text):
    """An unknown or repeated law gets one sentence."""
    with pytest.raises(ConfigurationError) as caught:
        fit_drift(made_crossings([4.0, 4.1]), laws=laws)
    assert str(caught.value) == text
