"""Bayesian scaling collapse: one ansatz fitted to all curves, with its evidence, posterior and quality of fit.

Two posteriors are used.  At the roughness tau of highest evidence the spline is slightly too smooth and biases the
exponent by a fraction of its error (the coverage test measures it).  The evidence is that of the
full model with tau sampled; the physical parameters are inferred with tau held at e times its posterior median
(undersmoothing; Hall, Ann. Stat. 20, 675 (1992), gives the argument for confidence bands).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import logsumexp
from scipy.stats import chi2

from driftline import numerals
from driftline.blocks import Table
from driftline.curves import MIN_SIZES, Curves, FloatArray
from driftline.display import Shown, symbol
from driftline.errors import ConfigurationError
from driftline.inference.importance import Mixture, WeightedDraws, adapt, fit_mixture, sample_until
from driftline.inference.intervals import Interval
from driftline.inference.modes import find_modes
from driftline.inference.sampling import WALKERS, run_chain
from driftline.plain import attributes, plain
from driftline.scaling.ansatz import Ansatz, parse_ansatz
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.scaling.forms import Form
from driftline.scaling.likelihood import NUISANCE, TAU_PRIOR, Posterior
from driftline.sensitivity import PRIOR_SETS, PriorShift

if TYPE_CHECKING:
    from driftline.costs import Cost

Progress = Callable[[str, float], None]

#: Factor e on tau for the physical parameters; see the module's docstring.
UNDERSMOOTHING = 1.0
EVIDENCE_DRAWS = 6000
PREDICTION_DRAWS = 400
POSTERIOR_DRAWS = 4000
CHECK_DRAWS = 100
EFFECTIVE_LEAST = 400.0  # ends of 95 % intervals of a normal are then known to 0.13 standard deviations


@dataclass(frozen=True)
class FitQuality:
    """How well the fitted form describes the data.

    Parameters
    ----------
    chi2_per_dof : float
        At the posterior median, over points minus effective degrees of freedom of the spline minus parameters.
    p_value : float
        Posterior-predictive probability of a chi-squared as large as that of the data, with the errors as given
        (Gelman, Meng, Stern, Stat. Sinica 6, 733 (1996)).
    noise_scale : float
        Posterior median of the factor s on the errors.
    max_residual : float
        Largest standardised residual, signed.
    max_residual_at : tuple of float
        Its size and disorder.
    """

    chi2_per_dof: float
    p_value: float
    noise_scale: float
    max_residual: float
    max_residual_at: tuple[float, float]


@dataclass(frozen=True)
class SamplerHealth:
    """Whether the numbers of the sampler can be trusted."""

    method: str
    effective_samples: float
    autocorrelation: float | None
    converged: bool
    note: str = ""


@dataclass(frozen=True, eq=False)
class CollapsedPoints:
    """All points at the posterior median; arrays of shape (points,).

    `y` and its `error` are divided by the amplitude and `y` is freed of the correction term, so that it lies on F;
    `fitted` is in the measured unit and `residual` is (mean - fitted) / measured error.
    """

    size: FloatArray
    disorder: FloatArray
    x: FloatArray
    y: FloatArray
    error: FloatArray
    fitted: FloatArray
    residual: FloatArray


@dataclass(frozen=True, eq=False)
class HeldOut:
    """How well the largest size is predicted from the smaller ones.

    Parameters
    ----------
    size : float
        The largest size.
    log_score, log_score_error : float
        ln p(largest | smaller) = ln Z(all) - ln Z(smaller), in the unit of the observable, and its Monte Carlo error.
    chi2_per_point : float
        (y - prediction)^T (noise + predictive covariance)^-1 (y - prediction) over the number of points.
    disorder, predicted, predicted_sd : array, shape (n,)
        The predicted curve at the disorders of that size, without measurement noise.
    """

    size: float
    log_score: float
    log_score_error: float
    chi2_per_point: float
    disorder: FloatArray
    predicted: FloatArray
    predicted_sd: FloatArray


@dataclass(frozen=True, eq=False)
class CollapseFit(Shown):
    """One ansatz fitted to one data set; built by `fit_collapse`."""

    ansatz: Ansatz
    curves: Curves
    log_evidence: float
    log_evidence_error: float
    parameters: dict[str, Interval]
    samples: FloatArray
    names: tuple[str, ...]
    quality: FitQuality
    sampler: SamplerHealth
    prior_limited: tuple[str, ...]
    points: CollapsedPoints
    function_x: FloatArray
    function_mean: FloatArray
    function_sd: FloatArray
    held_out: HeldOut | None = None
    prior_sensitivity: tuple[PriorShift, ...] = ()

    @property
    def log_tau(self) -> float:
        """Logarithm of the roughness at which the physical parameters were inferred; see the module's docstring."""
        return float(TAU_PRIOR.coordinate(np.array(self.parameters["tau"].median))) + UNDERSMOOTHING

    def to_arviz(self) -> Any:
        """The posterior draws for arviz (extra ``arviz``), see `driftline.export.to_arviz`.

        Raises
        ------
        ConfigurationError
            If arviz is not installed.
        """
        from driftline.export import to_arviz

        return to_arviz(self)

    def draws(self, name: str) -> FloatArray:
        """Posterior draws of one parameter, shape (n,)."""
        return self.samples[:, self.names.index(name)]

    def table(self) -> Table:
        """One row for each parameter, with its prior where it has one of its own."""
        priors = {each.name: each.prior.describe() for each in (*self.ansatz.parameters, *NUISANCE)}
        rows = tuple(
            (
                name + (" (set by the prior)" if name in self.prior_limited else ""),
                numerals.up_down(interval).text,
                numerals.bracket(interval, 68),
                numerals.bracket(interval),
                priors.get(name, numerals.MISSING),
            )
            for name, interval in self.parameters.items()
        )
        return Table(
            f"{self.ansatz.name}: {self.ansatz.formula}", ("parameter", "value", "68 %", "95 %", "prior"), rows
        )

    def shown(self) -> tuple[Table | str, ...]:
        """The parameters and the quality of the fit."""
        size, disorder = self.quality.max_residual_at
        return (
            self.table(),
            f"log evidence {numerals.plus_minus(self.log_evidence, self.log_evidence_error)}, "
            f"chi2/dof {numerals.fixed(self.quality.chi2_per_dof, 2)}, "
            f"p {numerals.probability(self.quality.p_value)}, largest residual "
            f"{self.quality.max_residual:+.1f} errors at size {size:g}, disorder {disorder:g}",
            *([] if self.sampler.converged else [f"Not converged: {self.sampler.note}."]),
        )

    def to_dict(self, *, probability: float | None = None, costs: Sequence[Cost] = ()) -> dict[str, Any]:
        """This fit as an entry of ``collapse`` in `result.json`.

        Parameters
        ----------
        probability : float, optional
            Posterior probability of the ansatz, which only a comparison knows.
        costs : sequence of Cost, optional
            From `collapse_costs`, which a fit alone does not compute.
        """
        return {
            "ansatz": self.ansatz.name,
            "hypothesis": self.ansatz.hypothesis,
            **attributes(self, "log_evidence", "log_evidence_error"),
            "probability": plain(probability),
            "parameters": plain(self.parameters),
            "fit": attributes(self.quality, "chi2_per_dof", "p_value", "noise_scale", "max_residual"),
            "held_out": attributes(self.held_out, "log_score", "chi2_per_point"),
            "sampler": attributes(self.sampler, "effective_samples", "autocorrelation", "converged"),
            "costs": plain(costs),
        }


@dataclass(frozen=True, eq=False)
class Comparison(Shown):
    """Several ansätze on the same data; `probabilities` give each hypothesis equal weight, split among its ansätze."""

    fits: tuple[CollapseFit, ...]
    probabilities: tuple[float, ...]

    def __getitem__(self, name: str) -> CollapseFit:
        """The fit of the ansatz of this name; KeyError if there is none."""
        for fit in self.fits:
            if fit.ansatz.name == name:
                return fit
        raise KeyError(name)

    def probability(self, hypothesis: str) -> float | None:
        """Posterior probability of a hypothesis; None unless rivals of it were fitted as well."""
        if len({fit.ansatz.hypothesis for fit in self.fits}) < 2:
            return None
        pairs = zip(self.fits, self.probabilities, strict=True)
        return float(sum(p for fit, p in pairs if fit.ansatz.hypothesis == hypothesis))

    def table(self) -> Table:
        """One row for each ansatz, the one of highest evidence first."""
        best = max(fit.log_evidence for fit in self.fits)
        pairs = zip(self.fits, self.probabilities, strict=True)
        rows = tuple(
            (
                fit.ansatz.name,
                numerals.fixed(fit.log_evidence - best, 1),
                numerals.probability(probability),
                numerals.short(fit.parameters.get("W_c")),
                numerals.short(fit.parameters.get("nu")),
                numerals.fixed(fit.quality.chi2_per_dof, 2),
                numerals.probability(fit.quality.p_value),
            )
            for fit, probability in sorted(pairs, key=lambda pair: -pair[0].log_evidence)
        )
        disorder = symbol(self.fits[0].curves.labels.disorder_symbol)
        columns = ("ansatz", "ln Z", "prob.", f"{disorder}_c", "nu", "chi2/dof", "p")
        return Table("Collapse, ln Z relative to the best", columns, rows)

    def shown(self) -> tuple[Table, ...]:
        """The table of the ansätze."""
        return (self.table(),)

    def to_arviz(self) -> dict[str, Any]:
        """Each fit for arviz by the name of its ansatz, as its `compare` takes them.

        Raises
        ------
        ConfigurationError
            If arviz is not installed.
        """
        return {fit.ansatz.name: fit.to_arviz() for fit in self.fits}

    def to_dict(self, costs: Mapping[str, Sequence[Cost]] = MappingProxyType({})) -> list[dict[str, Any]]:
        """The list ``collapse`` of `result.json`; `costs` are those of each ansatz by name, where computed."""
        pairs = zip(self.fits, self.probabilities, strict=True)
        return [fit.to_dict(probability=p, costs=costs.get(fit.ansatz.name, ())) for fit, p in pairs]


def fit_collapse(
    curves: Curves,
    ansatz: str | Ansatz = "power-law:corrected",
    *,
    seed: int | np.random.Generator | None = 0,
    quick: bool = False,
    extras: bool = True,
    forms: Iterable[Form] = (),
    progress: Progress | None = None,
) -> CollapseFit:
    """Fit one ansatz: posterior of its parameters, evidence, quality.

    Parameters
    ----------
    curves : Curves
        Measured data.
    ansatz : str or Ansatz
        For example ``"power-law:corrected"``; see `driftline.scaling.ansatz`.
    seed : int, Generator or None
        Source of every random number.
    quick : bool
        Leave the chain out; evidence and posterior then come from adaptive importance sampling alone.
    extras : bool
        Also predict the largest size from the smaller ones and compare sets of priors.
    forms : iterable of Form
        Forms of your own (`ExpressionForm`) that the name may begin with.
    progress : callable, optional
        Called with (text, fraction done).

    Raises
    ------
    ConfigurationError
        If the name of the ansatz is not understood, or a form of your own is not defined on these curves.

    Examples
    --------
    >>> import numpy as np
    >>> from driftline.curves import Curve, Curves
    >>> rng = np.random.default_rng(1)
    >>> grid = np.linspace(1.0, 5.0, 13)
    >>> curves = Curves([
    ...     Curve(L, grid, np.tanh((3 - grid) * L / 16) + rng.normal(0, 0.01, 13), np.full(13, 0.01))
    ...     for L in (8, 12, 16)
    ... ])
    >>> fit_collapse(curves, "power-law", quick=True).parameters["W_c"].contains(3.0)
    True
    """
    rng = np.random.default_rng(seed)
    form = parse_ansatz(ansatz, curves, forms) if isinstance(ansatz, str) else ansatz
    target = Posterior(curves, form)
    tell = progress or (lambda _text, _fraction: None)
    tell(f"{form.name}: searching", 0.0)
    mixture, draws = _adapted(target, rng)
    tell(f"{form.name}: sampling", 0.1)
    health = SamplerHealth("importance", draws.effective, None, True)
    if not quick:
        part = _range(tell, f"{form.name}: sampling", 0.1, 0.8)
        mixture, health = _chained(target, mixture, draws, rng, part)
        draws = sample_until(target, mixture, EVIDENCE_DRAWS, EFFECTIVE_LEAST, rng)
    tell(f"{form.name}: parameters", 0.85)
    held, physical = _physical(target, draws, rng, quick)
    tell(f"{form.name}: checking", 0.9)
    fit = _result(held, draws, physical, health, rng)
    if not extras:
        return fit
    held_out = _held_out(target, draws, rng)
    return replace(fit, held_out=held_out, prior_sensitivity=_prior_shifts(target, draws, held, physical))


def _range(tell: Progress, text: str, start: float, end: float) -> Callable[[float], None]:
    return lambda fraction: tell(text, start + (end - start) * fraction)


def _held_out(target: Posterior, full: WeightedDraws, rng: np.random.Generator) -> HeldOut | None:
    """Leave the means of the largest size out; None if a single size would be left."""
    largest = target.curves.curves[-1]
    if target.curves.sizes.size <= MIN_SIZES:
        return None
    smaller = replace(target, left_out=largest.size)
    _, draws = _adapted(smaller, rng)
    at = ~smaller.fitted
    predicted = smaller.predictions(draws.resample(PREDICTION_DRAWS, rng), rng)[:, at]
    mean, covariance = predicted.mean(axis=0), np.cov(predicted, rowvar=False)
    offset = largest.mean - mean
    return HeldOut(
        size=largest.size,
        log_score=full.log_evidence - draws.log_evidence,
        log_score_error=float(np.hypot(full.log_evidence_error, draws.log_evidence_error)),
        chi2_per_point=float(offset @ np.linalg.solve(largest.noise + covariance, offset)) / offset.size,
        disorder=largest.disorder,
        predicted=mean,
        predicted_sd=np.sqrt(np.diag(covariance)),
    )


def _prior_shifts(
    target: Posterior, draws: WeightedDraws, held: Posterior, physical: WeightedDraws
) -> tuple[PriorShift, ...]:  # fmt: skip
    """Evidence and W_c under the other declared sets of priors, by reweighting the draws."""
    critical = [i for i, p in enumerate(held.parameters) if p.name == "W_c"]
    found = []
    for name, change in PRIOR_SETS.items():
        evidence = draws.reweighted(change(target.parameters, draws.places))
        moved = physical.reweighted(change(held.parameters, physical.places))
        disorder = Interval.of_draws(moved.places[:, critical[0]], moved.weights) if critical else None
        shift = evidence.log_evidence - draws.log_evidence
        found.append(PriorShift(name, shift, disorder, min(evidence.effective, moved.effective)))
    return tuple(found)


def _adapted(target: Posterior, rng: np.random.Generator) -> tuple[Mixture, WeightedDraws]:
    modes = find_modes(target, target.from_unit, target.dimension, rng)
    if not modes:
        raise ConfigurationError(
            f"ansatz {target.ansatz.name!r} is impossible for these data at every point of its priors that was tried; "
            "leave it out or change its priors"
        )
    return adapt(target, Mixture.of_modes(modes), rng)


def _physical(
    target: Posterior, draws: WeightedDraws, rng: np.random.Generator, quick: bool
) -> tuple[Posterior, WeightedDraws]:
    """The posterior with tau held at its undersmoothing value, and draws of it.

    It differs from that with tau sampled by little, so its sampling starts from a mixture fitted to those `draws`.
    """
    log_tau = Interval.of_draws(draws.places[:, -2], draws.weights)
    held = replace(target, log_tau=log_tau.median + UNDERSMOOTHING)
    start = fit_mixture(np.delete(draws.places, -2, axis=1), draws.weights, rng)
    mixture, physical = adapt(held, start, rng)
    return held, physical if quick else sample_until(held, mixture, EVIDENCE_DRAWS, EFFECTIVE_LEAST, rng)


def _chained(
    target: Posterior,
    mixture: Mixture,
    draws: WeightedDraws,
    rng: np.random.Generator,
    progress: Callable[[float], None],
) -> tuple[Mixture, SamplerHealth]:
    """A mixture fitted to a chain that starts from `draws`, and the health of that chain."""
    chain = run_chain(target, draws.resample(WALKERS, rng) + _jitter(draws, rng), rng, progress, mixture=mixture)
    thin = chain.draws[:: max(1, len(chain.draws) // 5000)]
    fitted = fit_mixture(thin, np.full(len(thin), 1 / len(thin)), rng)
    return fitted, SamplerHealth("chain", chain.effective, chain.autocorrelation, chain.converged)


def _jitter(draws: WeightedDraws, rng: np.random.Generator) -> FloatArray:
    """A little noise, so that draws taken twice do not leave two walkers at one place."""
    mean = draws.weights @ draws.places
    sd = np.sqrt(draws.weights @ (draws.places - mean) ** 2)
    return 1e-3 * sd * rng.standard_normal((WALKERS, mean.size))


def _result(
    held: Posterior, draws: WeightedDraws, physical: WeightedDraws, health: SamplerHealth, rng: np.random.Generator
) -> CollapseFit:
    form = held.ansatz
    names, samples = _reported(held, physical.resample(POSTERIOR_DRAWS, rng))
    _, values = _reported(held, physical.places)
    parameters = {name: Interval.of_draws(values[:, i], physical.weights) for i, name in enumerate(names)}
    parameters["tau"] = Interval.of_draws(TAU_PRIOR.value(draws.places[:, -2]), draws.weights)
    centre = _centre(held, physical)
    points, function = _collapsed(held, centre)
    return CollapseFit(
        ansatz=form,
        curves=held.curves,
        log_evidence=draws.log_evidence,
        log_evidence_error=draws.log_evidence_error,
        parameters=parameters,
        samples=samples,
        names=names,
        quality=_quality(held, centre, points, physical, rng),
        sampler=_judged(health, draws, physical),
        prior_limited=_prior_limited(held, physical),
        points=points,
        function_x=function[0],
        function_mean=function[1],
        function_sd=function[2],
    )


def _centre(held: Posterior, physical: WeightedDraws) -> FloatArray:
    """Coordinates of the posterior median, shape (dimension,)."""
    columns = physical.places.T
    median = np.array([Interval.of_draws(column, physical.weights).median for column in columns])
    if np.isfinite(held(median[None])[0]):
        return median
    # a form of the user's own may be undefined between two parts of the posterior: then the likeliest draw
    return np.asarray(physical.places[np.argmax(held(physical.places))])


def _reported(held: Posterior, z: FloatArray) -> tuple[tuple[str, ...], FloatArray]:
    """Names and values, shape (n, names), of the sampled parameters and of what the form derives from them."""
    derived = held.ansatz.form.derived(held.curves.sizes, held.ansatz.values(z))
    names = (*(p.name for p in held.parameters), *derived)
    return names, np.column_stack([held.values(z), *derived.values()])


def _judged(health: SamplerHealth, draws: WeightedDraws, physical: WeightedDraws) -> SamplerHealth:
    """Add the effective sizes of both importance samples to the health of the chain."""
    notes = []
    if not health.converged:
        notes.append(f"the chain is too short for its autocorrelation time of {health.autocorrelation:.0f} steps")
    for what, sample in (("evidence", draws), ("parameters", physical)):
        if sample.effective < EFFECTIVE_LEAST:
            notes.append(f"importance sampling of the {what} has only {sample.effective:.0f} effective draws")
    effective = health.effective_samples if health.method == "chain" else physical.effective
    return replace(health, effective_samples=effective, converged=not notes, note="; ".join(notes))


def _prior_limited(held: Posterior, physical: WeightedDraws) -> tuple[str, ...]:
    """Physical parameters whose 68 % posterior width exceeds half the prior's, both in the sampled coordinate."""
    found = []
    for i, parameter in enumerate(held.ansatz.parameters):
        interval = Interval.of_draws(physical.places[:, i], physical.weights)
        if interval.high68 - interval.low68 > 0.5 * parameter.prior.width68:
            found.append(parameter.name)
    return tuple(found)


def _collapsed(held: Posterior, z: FloatArray) -> tuple[CollapsedPoints, tuple[FloatArray, FloatArray, FloatArray]]:
    """Collapsed points and the scaling function (x, mean, sd) at one coordinate vector."""
    curves, form, count = held.curves, held.ansatz, held.function.count
    size, disorder, mean, error = curves.flat()
    coefficients, covariance = held.coefficients(z)
    design = held.design(z[None])[0, :, :-1]
    scale = form.amplitude(z[None], size, curves.sizes)
    amplitude = np.ones(mean.size) if scale is None else scale[0]
    values = {name: float(v[0, 0]) for name, v in form.values(z[None]).items()}
    x = form.scaled(z[None], size, disorder, curves.sizes)[0] * form.form.unit(curves.sizes, values)
    fitted = amplitude * held.centre + held.spread * (design @ coefficients)
    correction = held.spread * (design[:, count:] @ coefficients[count:])
    collapsed = (mean - correction) / amplitude
    points = CollapsedPoints(size, disorder, x, collapsed, error / amplitude, fitted, (mean - fitted) / error)
    grid = np.linspace(0, 1, 201)
    first, four = held.function.basis(grid)
    basis = np.zeros((grid.size, count))
    np.put_along_axis(basis, first[:, None] + np.arange(4), four, axis=1)
    line = held.centre + held.spread * (basis @ coefficients[:count])
    sd = held.spread * np.sqrt(np.einsum("ij,jk,ik->i", basis, covariance[:count, :count], basis))
    return points, (x.min() + grid * np.ptp(x), line, sd)


def _quality(
    held: Posterior, z: FloatArray, points: CollapsedPoints, physical: WeightedDraws, rng: np.random.Generator
) -> FitQuality:
    factor = _effective_dof(held, z) + len(held.ansatz.parameters)
    dof = max(held.curves.points - factor, 1.0)
    worst = int(np.argmax(np.abs(points.residual)))
    return FitQuality(
        chi2_per_dof=_chi2(held, points.fitted) / dof,
        p_value=_predictive_p(held, physical.resample(CHECK_DRAWS, rng), rng),
        noise_scale=float(Interval.of_draws(np.exp(physical.places[:, -1]), physical.weights).median),
        max_residual=float(points.residual[worst]),
        max_residual_at=(float(points.size[worst]), float(points.disorder[worst])),
    )


def _chi2(held: Posterior, fitted: FloatArray) -> float:
    """Chi-squared of fitted values, shape (points,), with the measured covariance as given (s = 1)."""
    total, start = 0.0, 0
    for curve in held.curves.curves:
        part = slice(start, start + curve.mean.size)
        offset = curve.mean - fitted[part]
        total += float(offset @ np.linalg.solve(curve.noise, offset))
        start = part.stop
    return total


def _effective_dof(held: Posterior, z: FloatArray) -> float:
    """Trace of the smoother matrix: degrees of freedom that spline and correction use (Eilers, Marx 1996, eq. 28)."""
    _, covariance = held.coefficients(z)
    columns = len(covariance)
    s2 = float(np.exp(2 * z[-1]))
    matrix = held.system(z[None])[0][:columns, :columns]
    log_tau = np.array([held.log_tau if held.log_tau is not None else z[-2]])
    information = matrix - s2 * held._precision(log_tau, columns)[0]
    return float(np.trace(covariance @ information)) / s2


def _predictive_p(held: Posterior, places: FloatArray, rng: np.random.Generator) -> float:
    """Mean over posterior draws of P(chi2_n > chi2 of the data at that draw)."""
    return float(np.mean(chi2.sf(held.chi2_of_draws(places, rng), held.curves.points)))


def compare_ansatze(
    curves: Curves,
    ansatze: Sequence[str] | None = None,
    *,
    seed: int | np.random.Generator | None = 0,
    quick: bool = False,
    forms: Iterable[Form] = (),
    progress: Progress | None = None,
) -> Comparison:
    """Fit several ansätze and weigh them by their evidence.

    Parameters
    ----------
    curves, seed, quick, forms, progress
        As for `fit_collapse`.
    ansatze : sequence of str, optional
        Names; the default set pairs a fixed with a linearly drifting critical disorder, each plain and corrected.

    Raises
    ------
    ConfigurationError
        If a name is not understood.
    """
    names = tuple(ansatze or DEFAULT_ANSATZE)
    own = tuple(forms)
    parsed = [parse_ansatz(name, curves, own) for name in names]  # all names are checked before any work
    streams = np.random.default_rng(seed).spawn(len(parsed))  # one stream each: a fit does not depend on its neighbours
    fits = []
    for i, (form, stream) in enumerate(zip(parsed, streams, strict=True)):
        step = None if progress is None else _part(progress, i, len(parsed))
        fits.append(fit_collapse(curves, form, seed=stream, quick=quick, progress=step))
    return Comparison(tuple(fits), weigh(fits))


def _part(progress: Progress, index: int, count: int) -> Progress:
    return lambda text, fraction: progress(text, (index + fraction) / count)


def weigh(fits: Sequence[CollapseFit]) -> tuple[float, ...]:
    """Posterior probabilities: equal prior weight for each hypothesis, split equally among its ansätze."""
    hypotheses = [fit.ansatz.hypothesis for fit in fits]
    prior = np.array([-np.log(hypotheses.count(h)) for h in hypotheses])
    logs = prior + np.array([fit.log_evidence for fit in fits])
    return tuple(float(p) for p in np.exp(logs - logsumexp(logs)))


def averaged(fits: Sequence[CollapseFit], name: str) -> Interval:
    """Interval of one parameter over all fits, each weighted by its evidence."""
    counts = [len(fit.samples) for fit in fits]
    weights = np.repeat(np.array(weigh(fits)) / counts, counts)
    return Interval.of_draws(np.concatenate([fit.draws(name) for fit in fits]), weights)
