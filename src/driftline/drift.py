"""How crossings move with size: laws W*(L), their evidences, and what they say about infinite size.

A law is W*(L) = a + b g(L), with at most one further parameter inside g. Each is a small class with one method to
write, `basis`; adding a law means adding a class and its place in `LAWS`. For a true transition
W*(L) = W_c + a L^-(1/nu + omega) (Binder, Z. Phys. B 43, 119 (1981); Luck, PRB 31, 3069 (1985)): `inverse` and
`inverse-power` stand for it.

Priors, the same for all laws so that evidences compare fairly: the value m at the middle size (geometric mean of the
smallest and largest size of the points) is Gaussian with mean and standard deviation of a uniform density over the
measured disorder range widened by a quarter on each side; the total shift D between the smallest and the largest size
is Gaussian about 0 with a standard deviation of a quarter of the measured range. A third parameter is log-uniform. The
families of bounded and of unbounded laws have prior probability 1/2 each, split equally among their laws.

Evidence: given the third parameter all is linear and Gaussian, so the integral is a closed form; the third parameter
is integrated on a grid that is refined where the posterior is.
"""

from __future__ import annotations

import textwrap
from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import combinations
from typing import Any, ClassVar, Literal

import numpy as np
import numpy.typing as npt
from scipy.linalg import cho_solve, cholesky, solve_triangular
from scipy.special import log_ndtr, logsumexp, ndtr, ndtri
from scipy.stats import rankdata

from driftline import numerals
from driftline.blocks import Table
from driftline.crossings import Crossing, Crossings
from driftline.curves import FloatArray
from driftline.display import Shown
from driftline.errors import ConfigurationError, suggestion
from driftline.inference.intervals import Interval
from driftline.plain import attributes

#: Laws fitted by default: four that stay bounded, three that do not.
DEFAULT_LAWS = ("constant", "inverse", "inverse-power", "kt", "logarithmic", "linear", "power")
#: Pairs that cross with less probability than this are left out.
MIN_PROBABILITY = 0.5
#: Pairs whose position leans on an end of the window, so that the interval is cut there, are left out: the share of
#: the window at each end that counts as leaning, measured at the 16 % and 84 % quantiles.
EDGE = 0.01
#: The size at which laws part company is sought up to here.
LARGEST_SIZE = 1e6
#: Standard deviations at which two laws count as told apart.
TOLD_APART = 3.0
#: Ratio of the two 95 % tails of a limit from which only its near side is quoted.
LOPSIDED = 3.0
POSTERIOR_DRAWS = 2000
SHAPE_POINTS = 65


@dataclass(frozen=True)
class Span:
    """Smallest, middle (geometric mean) and largest size of the fitted points."""

    low: float
    middle: float
    high: float

    @classmethod
    def of(cls, sizes: FloatArray) -> Span:
        """Span of `sizes`, shape (n,)."""
        low, high = float(np.min(sizes)), float(np.max(sizes))
        return cls(low, float(np.sqrt(low * high)), high)


class DriftLaw(ABC):
    """A law W*(L) = a + b g(L; shape).

    Attributes
    ----------
    name, formula, tex : str
        Name on the command line, and formula in one line, as plain text and in LaTeX.
    bounded : bool
        Whether W* stays finite as L grows.
    symbols : tuple of str
        Names of the reported parameters, in the order of the columns of `LawFit.coefficient_draws`.
    has_shift : bool
        Whether there is a part that depends on L.
    rising_only : bool
        Whether D must be positive; its prior is then the positive half of the Gaussian, with twice the density.
    """

    name: ClassVar[str]
    formula: ClassVar[str]
    tex: ClassVar[str]
    bounded: ClassVar[bool]
    symbols: ClassVar[tuple[str, ...]] = ("a", "b")
    has_shift: ClassVar[bool] = True
    rising_only: ClassVar[bool] = False

    @abstractmethod
    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        """g(L; shape), rising with L or not, at sizes and shapes that broadcast against each other."""

    def shapes(self, span: Span) -> tuple[float, float] | None:
        """Ends of the log-uniform prior of the third parameter; None for a law of two parameters."""
        return None

    def given_shape(self, points: Points, prior: Prior, shape: float) -> Conditional:
        """Posterior of (m, D) and log evidence at one value of the third parameter."""
        span = points.span
        ends = self.basis(np.array([span.low, span.middle, span.high]), np.array(shape))
        columns = [np.ones_like(points.sizes)]
        if self.has_shift:
            columns.append((self.basis(points.sizes, np.array(shape)) - ends[1]) / (ends[2] - ends[0]))
        mean = np.array([prior.centre, 0.0])[: len(columns)]
        sd = np.array([prior.middle_sd, prior.shift_sd])[: len(columns)]
        found = _linear_gaussian(points, np.column_stack(columns), mean, sd)
        if not self.rising_only:
            return found
        inside = np.log(2.0) + log_ndtr(found.mean[1] / np.sqrt(found.covariance[1, 1]))
        return Conditional(found.log_evidence + float(inside), found.mean, found.covariance)

    def coefficients(self, middle: FloatArray, shift: FloatArray, shape: FloatArray, span: Span) -> FloatArray:
        """Reported parameters, shape (n, k), from m, D and the third parameter, each (n,)."""
        low, centre, high = (self.basis(np.array(size), shape) for size in (span.low, span.middle, span.high))
        b = shift / (high - low)
        return np.column_stack([middle - b * centre, b, shape][: len(self.symbols)])

    def evaluate(self, coefficients: FloatArray, sizes: FloatArray) -> FloatArray:
        """W*(L) for reported parameters (n, k) at sizes (m,); shape (n, m)."""
        a, b, shape = coefficients[:, :1], coefficients[:, 1:2], coefficients[:, -1:]
        return np.asarray(a + b * self.basis(sizes[None, :], shape))


class Constant(DriftLaw):
    """No drift at all."""

    name, formula, bounded = "constant", "a", True
    tex = "a"
    symbols = ("a",)
    has_shift = False

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return np.zeros_like(sizes)

    def coefficients(self, middle: FloatArray, shift: FloatArray, shape: FloatArray, span: Span) -> FloatArray:
        return middle[:, None]

    def evaluate(self, coefficients: FloatArray, sizes: FloatArray) -> FloatArray:
        return np.repeat(coefficients, sizes.size, axis=1)


class Inverse(DriftLaw):
    """Convergence as 1/L."""

    name, formula, bounded = "inverse", "a + b/L", True
    tex = "a + b/L"

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return 1 / sizes


class InversePower(DriftLaw):
    """Convergence with a free power, p between 0.2 and 5."""

    name, formula, bounded = "inverse-power", "a + b L^-p", True
    tex = "a + b L^{-p}"
    symbols = ("a", "b", "p")

    def shapes(self, span: Span) -> tuple[float, float] | None:
        return 0.2, 5.0

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return np.asarray(sizes**-shape)


class KosterlitzThouless(DriftLaw):
    """Logarithmically slow convergence from below; L0 lies between 1/1000 and 8/10 of the smallest size."""

    name, formula, bounded = "kt", "a - (b/ln(L/L0))^2", True
    tex = r"a - [b/\ln(L/L_0)]^2"
    symbols = ("a", "b", "L0")
    rising_only = True

    def shapes(self, span: Span) -> tuple[float, float] | None:
        return 1e-3 * span.low, 0.8 * span.low

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return np.asarray(-(np.log(sizes / shape) ** -2.0))

    def coefficients(self, middle: FloatArray, shift: FloatArray, shape: FloatArray, span: Span) -> FloatArray:
        a, b, shape = super().coefficients(middle, shift, shape, span).T
        return np.column_stack([a, np.sqrt(b), shape])

    def evaluate(self, coefficients: FloatArray, sizes: FloatArray) -> FloatArray:
        a, b, shape = coefficients.T
        return super().evaluate(np.column_stack([a, b**2, shape]), sizes)


class Logarithmic(DriftLaw):
    """Unbounded, slow."""

    name, formula, bounded = "logarithmic", "a + b ln L", False
    tex = r"a + b\ln L"

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return np.log(sizes)


class Linear(DriftLaw):
    """Unbounded, in proportion to size."""

    name, formula, bounded = "linear", "a + b L", False
    tex = "a + b L"

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return sizes


class Power(DriftLaw):
    """Unbounded, a pure power with p between 0.01 and 5, which the priors of m and D decide."""

    name, formula, bounded = "power", "b L^p", False
    tex = "b L^p"
    symbols = ("b", "p")
    rising_only = True

    def shapes(self, span: Span) -> tuple[float, float] | None:
        return 0.01, 5.0

    def basis(self, sizes: FloatArray, shape: FloatArray) -> FloatArray:
        return np.asarray(sizes**shape)

    def given_shape(self, points: Points, prior: Prior, shape: float) -> Conditional:
        """Posterior of m alone: with k(p) = 2 sinh(p ln(high / middle)) the shift is D = m k(p).

        The prior density of (m, p) is then  N(m) 2 N(m k) |m| k'(p)  for a positive shift, so N(m k) acts as one more
        datum on m, and |m| is averaged over the resulting Gaussian. Divided by the log-uniform density in which
        `_posterior` integrates.
        """
        span = points.span
        reach = np.log(span.high / span.middle)
        shift, slope = 2 * np.sinh(shape * reach), 2 * reach * np.cosh(shape * reach)
        basis = self.basis(points.sizes / span.middle, np.array(shape))
        size = points.positions.size
        root = np.zeros((size + 1, size + 1))
        root[:size, :size], root[size, size] = points.root, prior.shift_sd
        more = Points(points.sizes, np.append(points.positions, 0.0), root, span)
        found = _linear_gaussian(more, np.append(basis, shift)[:, None], [prior.centre], [prior.middle_sd])
        mean, sd = found.mean[0], np.sqrt(found.covariance[0, 0])
        folded = sd * np.sqrt(2 / np.pi) * np.exp(-0.5 * (mean / sd) ** 2) + mean * (1 - 2 * ndtr(-mean / sd))
        low, high = self.shapes(span) or (1.0, 1.0)
        density = 2 * folded * slope * shape * np.log(high / low)
        return Conditional(found.log_evidence + float(np.log(density)), found.mean, found.covariance)

    def coefficients(self, middle: FloatArray, shift: FloatArray, shape: FloatArray, span: Span) -> FloatArray:
        return np.column_stack([middle * span.middle**-shape, shape])

    def evaluate(self, coefficients: FloatArray, sizes: FloatArray) -> FloatArray:
        return np.asarray(coefficients[:, :1] * self.basis(sizes[None, :], coefficients[:, 1:]))


#: Every law by its name, in the order of reports.
LAWS: dict[str, DriftLaw] = {
    law.name: law
    for law in (Constant(), Inverse(), InversePower(), KosterlitzThouless(), Logarithmic(), Linear(), Power())
}


@dataclass(frozen=True)
class Prior:
    """Gaussian prior of m and D, in the unit of the disorder."""

    centre: float
    middle_sd: float
    shift_sd: float

    @classmethod
    def of(cls, disorder_range: tuple[float, float]) -> Prior:
        """The prior that belongs to a measured disorder range."""
        low, high = disorder_range
        width = high - low
        return cls((low + high) / 2, 1.5 * width / np.sqrt(12.0), width / 4)

    def describe(self) -> str:
        """The prior in one line."""
        return f"m ~ N({self.centre:.4g}, {self.middle_sd:.4g}^2), D ~ N(0, {self.shift_sd:.4g}^2)"


@dataclass(frozen=True, eq=False)
class Points:
    """Points to fit: sizes and positions, shape (n,), and the lower Cholesky factor of the covariance."""

    sizes: FloatArray
    positions: FloatArray
    root: FloatArray
    span: Span


@dataclass(frozen=True, eq=False)
class Conditional:
    """Gaussian posterior of (m, D), or of m alone, given the third parameter, with the log evidence."""

    log_evidence: float
    mean: FloatArray
    covariance: FloatArray


@dataclass(frozen=True, eq=False)
class _Posterior:
    """Mixture over the third parameter: log evidence, the grid, its weights, and the conditional posteriors."""

    log_evidence: float
    shapes: FloatArray
    weights: FloatArray
    means: FloatArray
    covariances: FloatArray


@dataclass(frozen=True, eq=False)
class LawFit:
    """One law fitted to the points.

    Attributes
    ----------
    name, bounded, formula
        Of the law.
    log_evidence : float
        Natural logarithm of the marginal likelihood of the positions.
    probability : float
        Posterior probability among all laws fitted, with 1/2 for each family beforehand.
    parameters : dict of Interval
        Parameters of the formula, in the units of disorder and size.
    limit : Interval or None
        W* at infinite size for a bounded law.
    chi2_per_dof : float or None
        Of the best fit, by lmfit; None where there are no more points than parameters.
    coefficient_draws : array, shape (n, k)
        Posterior draws of the parameters.
    law : DriftLaw
        The law itself.
    """

    name: str
    bounded: bool
    formula: str
    log_evidence: float
    probability: float
    parameters: dict[str, Interval]
    limit: Interval | None
    chi2_per_dof: float | None
    coefficient_draws: FloatArray
    law: DriftLaw

    @property
    def one_sided(self) -> Literal["above", "below"] | None:
        """The side on which alone the limit is constrained: the other tail reaches `LOPSIDED` times as far."""
        if self.limit is None:
            return None
        up, down = self.limit.high95 - self.limit.median, self.limit.median - self.limit.low95
        if up > LOPSIDED * down:
            return "above"
        return "below" if down > LOPSIDED * up else None

    def predict(self, sizes: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Median and ends of the 68 % band of W* at `sizes`, each of shape (m,)."""
        drawn = self.law.evaluate(self.coefficient_draws, np.asarray(sizes, dtype=np.float64))
        low, median, high = np.quantile(drawn, [0.16, 0.5, 0.84], axis=0)
        return median, low, high

    def to_dict(self) -> dict[str, Any]:
        """This law as `result.json` holds it."""
        found = attributes(self, "name", "bounded", "log_evidence", "probability", "parameters", "limit")
        return {**found, "limit_one_sided": self.one_sided}


@dataclass(frozen=True, eq=False)
class Drift(Shown):
    """All laws fitted to the positions of one source.

    Attributes
    ----------
    source : str
        What the positions are: "crossings".
    sizes : array, shape (n,)
        Size of each point; for a pair of sizes their geometric mean, so that L and L^p stand for the pair alike.
    positions : array, shape (n,)
        Median disorder of each point.
    covariance : array, shape (n, n)
        Their covariance; neighbouring pairs share a size and so an error.
    laws : tuple of LawFit
        Empty where fewer than two points can be used.
    probability_bounded : float or None
        Posterior probability of the bounded family; None unless both families were fitted.
    rate_per_site : Interval or None
        Slope b of the `linear` law.
    deciding_size : float or None
        Smallest size at which the medians of the two most probable laws differ by three times the median error of
        one point; None if there is none up to 10^6.
    note : str
        Why nothing was fitted; empty otherwise.
    excluded : tuple of str
        One sentence for each pair left out.
    """

    source: str
    sizes: FloatArray
    positions: FloatArray
    covariance: FloatArray
    laws: tuple[LawFit, ...]
    probability_bounded: float | None
    rate_per_site: Interval | None
    deciding_size: float | None
    note: str = ""
    excluded: tuple[str, ...] = field(default=())
    prior: str = ""

    def to_dict(self) -> dict[str, Any]:
        """The object `drift` of `result.json`."""
        return attributes(self, "source", "laws", "probability_bounded", "rate_per_site", "deciding_size")

    def table(self) -> Table:
        """One row for each law, the most probable first."""
        rows = tuple(
            (
                law.name,
                law.formula,
                numerals.probability(law.probability),
                *_limit_cells(law),
                numerals.fixed(law.chi2_per_dof, 2),
            )
            for law in sorted(self.laws, key=lambda law: -law.log_evidence)
        )
        columns = ("law", "formula", "prob.", "limit", "95 %", "chi2/dof")
        return Table(f"Drift of the {self.source} with size", columns, rows)

    def sentences(self) -> list[str]:
        """What the drift says beyond its table."""
        # where nothing was fitted at all, the note says so, and the table of crossings shows why
        sentences = [self.note] if self.note else list(self.excluded)
        if self.probability_bounded is not None:
            sentences.append(f"Bounded as L grows: probability {numerals.probability(self.probability_bounded)}.")
        if self.rate_per_site is not None:
            rate, limits = numerals.short(self.rate_per_site), numerals.bracket(self.rate_per_site)
            sentences.append(f"Drift per unit of size: {rate}, 95 % {limits}.")
        if self.deciding_size is not None:
            sentences.append(
                f"The two best laws part at L = {numerals.significant(self.deciding_size)} at today's errors."
            )
        return sentences

    def shown(self) -> tuple[Table | str, ...]:
        """The laws and what follows from them."""
        return (self.table(), *self.sentences())

    def summary(self) -> str:
        """The laws as a table of at most 80 columns, with what follows from them."""
        lines = [f"Drift of the {self.source} with size"]
        if self.laws:
            lines.append(f"{'law':<14} {'formula':<20} {'P':>6} {'ln Z':>9}  {'limit (68 %)':>26}")
        lines += [_law_line(law) for law in self.laws]
        if self.probability_bounded is not None:
            lines.append(f"Probability that it stays bounded: {self.probability_bounded:.3f}")
        if self.rate_per_site is not None:
            rate = self.rate_per_site
            lines.append(f"Linear rate: {numerals.short(rate)} per unit of size")
        if self.deciding_size is not None:
            lines.append(f"Size at which the two best laws part by three errors: {self.deciding_size:.3g}")
        for sentence in (*self.excluded, self.note):
            lines += textwrap.wrap(sentence, 80)
        return "\n".join(lines)


def fit_drift(
    crossings: Crossings, *, laws: Sequence[str] | None = None, seed: int | np.random.Generator | None = 0
) -> Drift:
    """Fit drift laws to the crossings of adjacent sizes.

    Parameters
    ----------
    crossings : Crossings
        From `find_crossings`.
    laws : sequence of str, optional
        Names out of `LAWS`; by default `DEFAULT_LAWS`.
    seed : int, Generator or None
        Source of the parameter draws.

    Raises
    ------
    ConfigurationError
        If a law is unknown or named twice.

    Examples
    --------
    >>> from driftline.crossings import find_crossings
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 9), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> drift = fit_drift(find_crossings(curves, draws=200), laws=["constant", "linear"])
    >>> [law.name for law in drift.laws], drift.laws[0].parameters["a"].contains(4.0)
    (['constant', 'linear'], True)
    """
    chosen = _chosen(laws)
    rng = np.random.default_rng(seed)
    usable = [(pair, _why_not(pair, crossings.window)) for pair in crossings.adjacent]
    kept = [pair for pair, reason in usable if not reason]
    excluded = tuple(reason for _, reason in usable if reason)
    sizes = np.array([np.sqrt(pair.sizes[0] * pair.sizes[1]) for pair in kept])
    positions, covariance = _robust_moments([pair.draws for pair in kept])
    prior = Prior.of(crossings.curves.disorder_range)
    if len(kept) < 2:
        count = f"Only {len(kept)} pair{'s' * (len(kept) != 1)} of neighbouring sizes"
        note = f"{count} can be used, and at least two are needed to see a drift."
        return Drift("crossings", sizes, positions, covariance, (), None, None, None, note, excluded)
    return fit_laws(sizes, positions, covariance, prior, chosen, rng, source="crossings", excluded=excluded)


def fit_laws(
    sizes: FloatArray, positions: FloatArray, covariance: FloatArray, prior: Prior, laws: Sequence[DriftLaw],
    rng: np.random.Generator, *, source: str, excluded: tuple[str, ...] = (),
) -> Drift:  # fmt: skip
    """Fit `laws` to positions (n,) at sizes (n,) with covariance (n, n)."""
    points = Points(sizes, positions, np.asarray(cholesky(covariance, lower=True)), Span.of(sizes))
    posteriors = [_posterior(law, points, prior) for law in laws]
    probabilities = _probabilities(laws, [posterior.log_evidence for posterior in posteriors])
    fits = tuple(
        _law_fit(law, posterior, probability, points, prior, rng)
        for law, posterior, probability in zip(laws, posteriors, probabilities, strict=True)
    )
    families = {fit.bounded for fit in fits}
    bounded = sum(fit.probability for fit in fits if fit.bounded) if len(families) == 2 else None
    rate = next((fit.parameters["b"] for fit in fits if fit.name == "linear"), None)
    error = float(np.median(np.sqrt(np.diag(covariance))))
    deciding = _deciding_size(fits, points.span.high, error)
    return Drift(source, sizes, positions, covariance, fits, bounded, rate, deciding, "", excluded, prior.describe())


def _chosen(names: Sequence[str] | None) -> list[DriftLaw]:
    names = DEFAULT_LAWS if names is None else names
    for name in names:
        if name not in LAWS:
            raise ConfigurationError(f"unknown drift law {name!r}; {suggestion(name, LAWS)}")
        if list(names).count(name) > 1:
            raise ConfigurationError(f"drift law {name!r} is named twice; name it once")
    return [LAWS[name] for name in names]


def _why_not(pair: Crossing, window: tuple[float, float]) -> str:
    """The sentence that says why a pair cannot be used; empty if it can."""
    sizes = f"Sizes {pair.sizes[0]:g} and {pair.sizes[1]:g} are left out of the drift"
    if pair.disorder is None or pair.probability < MIN_PROBABILITY:
        return f"{sizes}: they cross in the common window with probability {pair.probability:.2f} only."
    margin = EDGE * (window[1] - window[0])
    if pair.disorder.low68 - window[0] < margin or window[1] - pair.disorder.high68 < margin:
        return f"{sizes}: the interval of their crossing is cut by an end of the common window."
    return ""


def _robust_moments(draws: list[FloatArray]) -> tuple[FloatArray, FloatArray]:
    """Medians (n,) and covariance (n, n) of skewed draws with gaps (NaN).

    Standard deviations from quantiles, the larger of those that the 68 % and the 95 % interval stand for, so that a
    long tail is not forgotten; correlations from ranks (for a Gaussian pair r = 2 sin(pi rho / 6), Pearson 1907).
    """
    if not draws:
        return np.zeros(0), np.zeros((0, 0))
    intervals = [Interval.of_draws(column[np.isfinite(column)]) for column in draws]
    unit = Interval.of_normal(0.0, 1.0)
    sd = np.array([max(i.sd / unit.sd, (i.high95 - i.low95) / (2 * unit.high95)) for i in intervals])
    correlation = np.eye(len(draws))
    for i, j in combinations(range(len(draws)), 2):
        both = np.isfinite(draws[i]) & np.isfinite(draws[j])
        ranks = np.corrcoef(rankdata(draws[i][both]), rankdata(draws[j][both]))[0, 1]
        correlation[i, j] = correlation[j, i] = 2 * np.sin(np.pi * ranks / 6)
    eigenvalues, vectors = np.linalg.eigh(correlation)
    # Built pair by pair it need not be positive definite; the floor keeps every combination at a tenth of an error
    correlation = (vectors * np.maximum(eigenvalues, 0.01)) @ vectors.T
    correlation /= np.sqrt(np.outer(np.diag(correlation), np.diag(correlation)))
    return np.array([i.median for i in intervals]), np.outer(sd, sd) * correlation


def _linear_gaussian(
    points: Points, design: FloatArray, mean: npt.ArrayLike, sd: npt.ArrayLike
) -> Conditional:  # fmt: skip
    """Evidence and posterior of a linear model with a Gaussian prior (Rasmussen, Williams 2006, section 2.1)."""
    mean, sd = np.asarray(mean, dtype=np.float64), np.asarray(sd, dtype=np.float64)
    columns = solve_triangular(points.root, design, lower=True) * sd
    residual = solve_triangular(points.root, points.positions - design @ mean, lower=True)
    root = cholesky(np.eye(len(sd)) + columns.T @ columns, lower=True)
    pull = solve_triangular(root, columns.T @ residual, lower=True)
    log_volume = np.log(np.diag(points.root)).sum() + np.log(np.diag(root)).sum()
    log_evidence = -0.5 * (residual @ residual - pull @ pull + residual.size * np.log(2 * np.pi)) - log_volume
    inverse = cho_solve((root, True), np.eye(len(sd)))
    return Conditional(float(log_evidence), mean + sd * (inverse @ columns.T @ residual), inverse * np.outer(sd, sd))


def _posterior(law: DriftLaw, points: Points, prior: Prior) -> _Posterior:
    """Posterior of all parameters, the third one on a grid that is even in its logarithm."""
    ends = law.shapes(points.span)
    if ends is None:
        only = law.given_shape(points, prior, 1.0)
        return _Posterior(only.log_evidence, np.ones(1), np.ones(1), only.mean[None], only.covariance[None])
    first, last = np.log(ends)
    low, high = first, last
    for _ in range(3):
        grid = np.linspace(low, high, SHAPE_POINTS)
        found = [law.given_shape(points, prior, float(np.exp(u))) for u in grid]
        density = np.array([conditional.log_evidence for conditional in found])
        alive = np.flatnonzero(density > density.max() - 25.0)  # e^-25: nothing is lost
        low, high = grid[max(alive[0] - 1, 0)], grid[min(alive[-1] + 1, grid.size - 1)]
    trapezium = np.full(grid.size, grid[1] - grid[0])
    trapezium[[0, -1]] /= 2
    mass = density + np.log(trapezium)
    total = logsumexp(mass)
    return _Posterior(
        float(total - np.log(last - first)), np.exp(grid), np.exp(mass - total),
        np.array([conditional.mean for conditional in found]),
        np.array([conditional.covariance for conditional in found]),
    )  # fmt: skip


def _draws(law: DriftLaw, posterior: _Posterior, span: Span, rng: np.random.Generator) -> FloatArray:
    """Draws of the reported parameters, shape (n, k)."""
    # Systematic resampling: a third parameter keeps its distribution without multinomial scatter
    places = (np.arange(POSTERIOR_DRAWS) + rng.random()) / POSTERIOR_DRAWS
    cell = np.minimum(np.searchsorted(np.cumsum(posterior.weights), places), posterior.weights.size - 1)
    mean, covariance = posterior.means[cell], posterior.covariances[cell]
    middle_mean, middle_variance = mean[:, 0], covariance[:, 0, 0]
    shift = np.zeros(POSTERIOR_DRAWS)
    if mean.shape[1] == 2:
        sd = np.sqrt(covariance[:, 1, 1])
        uniform = rng.random(POSTERIOR_DRAWS)
        # Truncated at D = 0 in the tail of the reflected variable, where ndtri keeps its digits
        z = -ndtri(uniform * ndtr(mean[:, 1] / sd)) if law.rising_only else ndtri(uniform)
        shift = mean[:, 1] + sd * z
        middle_mean = middle_mean + covariance[:, 0, 1] / sd * z
        middle_variance = middle_variance - (covariance[:, 0, 1] / sd) ** 2
    middle = middle_mean + np.sqrt(middle_variance) * rng.standard_normal(POSTERIOR_DRAWS)
    return law.coefficients(middle, shift, posterior.shapes[cell], span)


def _law_fit(
    law: DriftLaw, posterior: _Posterior, probability: float, points: Points, prior: Prior, rng: np.random.Generator
) -> LawFit:
    drawn = _draws(law, posterior, points.span, rng)
    parameters = {name: Interval.of_draws(column) for name, column in zip(law.symbols, drawn.T, strict=True)}
    limit = parameters["a"] if law.bounded else None
    chi2 = best_fit(law, points, drawn.mean(axis=0)).chi2_per_dof
    return LawFit(
        law.name, law.bounded, law.formula, posterior.log_evidence, probability, parameters, limit, chi2, drawn, law
    )


@dataclass(frozen=True, eq=False)
class BestFit:
    """Weighted least squares without priors: parameters of the formula and chi^2 per degree of freedom."""

    coefficients: FloatArray
    chi2_per_dof: float | None


def best_fit(law: DriftLaw, points: Points, start: FloatArray) -> BestFit:
    """Best fit of one law by lmfit, weighted with the inverse Cholesky factor of the covariance.

    `start`, shape (k,), are reported parameters. With fewer points than parameters the fit is not determined and
    `start` comes back.
    """
    freedom = points.positions.size - start.size
    if freedom < 0:
        return BestFit(start, None)
    import lmfit  # takes half a second to import, and only the drift needs it

    parameters = lmfit.Parameters()
    for name, value in zip(law.symbols, start, strict=True):
        parameters.add(name, value=float(value))
    shapes = law.shapes(points.span)
    if shapes is not None:
        parameters[law.symbols[-1]].set(min=shapes[0], max=shapes[1])

    def residual(current: Any) -> FloatArray:
        coefficients = np.array([[current[name].value for name in law.symbols]])
        misfit = points.positions - law.evaluate(coefficients, points.sizes)[0]
        return np.asarray(solve_triangular(points.root, misfit, lower=True))

    result = lmfit.minimize(residual, parameters)
    chi2 = float(result.chisqr) / freedom if freedom > 0 else None
    return BestFit(np.array([result.params[name].value for name in law.symbols]), chi2)


def _probabilities(laws: Sequence[DriftLaw], log_evidences: Sequence[float]) -> list[float]:
    """Posterior probabilities with equal prior weight of the families, split equally inside each."""
    members = {family: sum(law.bounded is family for law in laws) for family in (True, False)}
    log_prior = -np.log([members[law.bounded] for law in laws])
    score = np.asarray(log_evidences) + log_prior
    return [float(p) for p in np.exp(score - logsumexp(score))]


def _deciding_size(fits: tuple[LawFit, ...], largest: float, error: float) -> float | None:
    if len(fits) < 2:
        return None
    first, second = sorted(fits, key=lambda fit: -fit.probability)[:2]
    sizes = np.geomspace(largest, max(LARGEST_SIZE, largest), 400)
    apart = np.abs(first.predict(sizes)[0] - second.predict(sizes)[0]) >= TOLD_APART * error
    return float(sizes[np.argmax(apart)]) if apart.any() else None


def limit_text(law: LawFit, level: int = 68) -> str:
    """The limit with its interval, or the one side of it that the data constrain, said as such.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> limit_text(SimpleNamespace(limit=Interval(6.3, 5.0, 8.8, 4.9, 14.0), one_sided="above"))
    'above 4.9 (97.5 %)'
    """
    assert law.limit is not None  # callers have checked
    if law.one_sided == "above":
        return f"above {numerals.rounded(law.limit.low95, law.limit.median - law.limit.low95)} (97.5 %)"
    if law.one_sided == "below":
        return f"below {numerals.rounded(law.limit.high95, law.limit.high95 - law.limit.median)} (97.5 %)"
    return numerals.short(law.limit) if level == 68 else numerals.bracket(law.limit, level)


def _limit_cells(law: LawFit) -> tuple[str, str]:
    """Limit at infinite size and its interval; where the data constrain one side only, that side and how surely."""
    if law.limit is None:
        return "unbounded", numerals.MISSING
    if law.one_sided:
        bound, _, surely = limit_text(law).partition(" (")
        return bound, f"at {surely.rstrip(')')}"
    return numerals.short(law.limit), numerals.bracket(law.limit)


def _law_line(law: LawFit) -> str:
    limit = "unbounded"
    if law.limit is not None:
        limit = limit_text(law)
    return f"{law.name:<14} {law.formula:<20} {law.probability:>6.3f} {law.log_evidence:>9.2f}  {limit:>26}"
