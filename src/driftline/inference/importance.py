"""Evidence and weighted draws by importance sampling from a mixture of multivariate Student-t densities.

The mixture is fitted to draws (of a chain, or of an earlier round of importance sampling: Cappe et al., Stat. Comput.
18, 447 (2008)) and has heavier tails than the target, so the weights stay bounded; a broad component guards the tails.
The health check is the effective sample size (sum w)^2 / sum w^2 (Kong, Liu, Wong, JASA 89, 278 (1994)).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import gammaln, logsumexp

from driftline.curves import FloatArray
from driftline.inference.modes import LogDensity, Mode

DEGREES = 5.0  # of the t densities: finite fourth moments of the weights for Gaussian-tailed targets
ROUNDS = 8
ROUND_DRAWS = 1500
ENOUGH = 0.4  # effective fraction at which adaptation stops
COMPONENTS = 4
MOST_REPEATS = 5
BROAD_WEIGHT, BROAD_SCALE = 0.1, 3.0


@dataclass(frozen=True, eq=False)
class Mixture:
    """Multivariate t mixture: weights (k,), centres (k, d), lower Cholesky factors of the scale matrices (k, d, d)."""

    weights: FloatArray
    centres: FloatArray
    factors: FloatArray

    @classmethod
    def of_modes(cls, modes: Sequence[Mode]) -> Mixture:
        """One component for each mode, weighted by Laplace's approximation but none below a twentieth."""
        mass = np.array([mode.log_mass for mode in modes])
        weights = np.maximum(np.exp(mass - mass.max()), 0.05)
        keep = mass > mass.max() - 12  # e^-12 cannot matter to any figure reported
        factors = [np.linalg.cholesky(mode.covariance) for mode, k in zip(modes, keep, strict=True) if k]
        centres = [mode.place for mode, k in zip(modes, keep, strict=True) if k]
        return cls(weights[keep] / weights[keep].sum(), np.array(centres), np.array(factors)).guarded()

    def guarded(self) -> Mixture:
        """The same with a broad copy of every component for the tails."""
        weights = np.concatenate([(1 - BROAD_WEIGHT) * self.weights, BROAD_WEIGHT * self.weights])
        factors = np.concatenate([self.factors, BROAD_SCALE * self.factors])
        return Mixture(weights, np.tile(self.centres, (2, 1)), factors)

    def draw(self, count: int, rng: np.random.Generator) -> FloatArray:
        """`count` draws, shape (count, d); components get their shares as evenly as whole numbers allow."""
        places = (np.cumsum(self.weights) / self.weights.sum())[:-1]
        component = np.searchsorted(places, (np.arange(count) + rng.random()) / count)
        normal = rng.standard_normal((count, self.centres.shape[1]))
        radius = np.sqrt(DEGREES / rng.chisquare(DEGREES, count))
        offsets = np.einsum("nij,nj->ni", self.factors[component], normal) * radius[:, None]
        return np.asarray(self.centres[component] + offsets)

    def log_density(self, z: FloatArray) -> FloatArray:
        """Log density, shape (n,)."""
        d = z.shape[1]
        terms = []
        for weight, centre, factor in zip(self.weights, self.centres, self.factors, strict=True):
            standard = np.linalg.solve(factor, (z - centre).T)
            log_det = np.sum(np.log(np.diag(factor)))
            distance = np.sum(standard**2, axis=0)
            terms.append(np.log(weight) - log_det - 0.5 * (DEGREES + d) * np.log1p(distance / DEGREES))
        constant = gammaln((DEGREES + d) / 2) - gammaln(DEGREES / 2) - 0.5 * d * np.log(DEGREES * np.pi)
        return np.asarray(logsumexp(np.array(terms), axis=0) + constant)


@dataclass(frozen=True, eq=False)
class WeightedDraws:
    """Draws, shape (n, d), with their log weights; the mean weight is the evidence."""

    places: FloatArray
    log_weights: FloatArray

    @property
    def weights(self) -> FloatArray:
        """Weights that sum to one."""
        return np.exp(self.log_weights - logsumexp(self.log_weights))

    @property
    def log_evidence(self) -> float:
        """Log of the integral of the target."""
        return float(logsumexp(self.log_weights) - np.log(self.log_weights.size))

    @property
    def effective(self) -> float:
        """Effective sample size."""
        return float(1 / np.sum(self.weights**2))

    @property
    def log_evidence_error(self) -> float:
        """Standard error of `log_evidence`: relative standard deviation of the weights over root n."""
        n = self.log_weights.size
        return float(np.sqrt(max(n / self.effective - 1, 0) / n))

    def reweighted(self, log_factor: FloatArray) -> WeightedDraws:
        """The same draws of another target, whose log density is larger by `log_factor`, shape (n,)."""
        return WeightedDraws(self.places, self.log_weights + log_factor)

    def resample(self, count: int, rng: np.random.Generator) -> FloatArray:
        """`count` equally weighted draws by systematic resampling, in random order."""
        reached = np.cumsum(self.weights)
        index = np.searchsorted(reached / reached[-1], (np.arange(count) + rng.random()) / count)
        return np.asarray(self.places[rng.permutation(index)])


def importance_sample(target: LogDensity, mixture: Mixture, count: int, rng: np.random.Generator) -> WeightedDraws:
    """`count` draws of `mixture` weighted by ``target / mixture``."""
    places = mixture.draw(count, rng)
    chunks = (target(places[i : i + 256]) for i in range(0, count, 256))
    return WeightedDraws(places, np.concatenate(list(chunks)) - mixture.log_density(places))


def sample_until(
    target: LogDensity, mixture: Mixture, count: int, wanted: float, rng: np.random.Generator
) -> WeightedDraws:  # fmt: skip
    """`count` weighted draws; while fewer than `wanted` are effective, the mixture is refitted and more are drawn.

    A part of the target that the mixture had missed shows itself as a few draws of huge weight; refitting to them moves
    a component there.  The last set is returned, never the one with the most effective draws: a mixture that misses a
    part of the target looks better than one that has just found it.
    """
    draws = importance_sample(target, mixture, count, rng)
    for repeat in range(MOST_REPEATS):
        if draws.effective >= wanted:
            break
        mixture = fit_mixture(draws.places, _tempered(draws), rng)
        draws = importance_sample(target, mixture, count * (1 + repeat), rng)
    return draws


def adapt(target: LogDensity, mixture: Mixture, rng: np.random.Generator) -> tuple[Mixture, WeightedDraws]:
    """Refit `mixture` to its own weighted draws until the weights are even enough; returns the last round as well."""
    best = (mixture, importance_sample(target, mixture, ROUND_DRAWS, rng))
    for _ in range(ROUNDS):
        current, draws = best
        if draws.effective > ENOUGH * draws.log_weights.size:
            break
        refitted = fit_mixture(draws.places, _tempered(draws), rng)
        candidate = (refitted, importance_sample(target, refitted, ROUND_DRAWS, rng))
        improved = candidate[1].effective > draws.effective
        best = candidate if improved else (current, draws)
        if not improved and draws.effective > 0.1 * draws.log_weights.size:
            break
    return best


def _tempered(draws: WeightedDraws) -> FloatArray:
    """Weights to fit to, flattened while a few draws carry all of it, lest the mixture collapse on them."""
    for power in (1.0, 0.7, 0.5, 0.3, 0.2, 0.1):
        weights: FloatArray = np.exp(power * (draws.log_weights - draws.log_weights.max()))
        weights /= weights.sum()
        if 1 / np.sum(weights**2) > 20 * draws.places.shape[1]:
            break
    return weights


def fit_mixture(places: FloatArray, weights: FloatArray, rng: np.random.Generator) -> Mixture:
    """Weighted expectation-maximisation of a few Gaussian components, returned as a guarded t mixture.

    Parameters
    ----------
    places : array, shape (n, d)
    weights : array, shape (n,)
        Non-negative, summing to one.
    """
    n, d = places.shape
    mean = weights @ places
    spread = (places - mean).T @ ((places - mean) * weights[:, None])
    spread += 1e-12 * np.diag(np.maximum(np.diag(spread), 1e-300))
    count = min(COMPONENTS, max(1, int(1 / np.sum(weights**2) / (20 * d))))
    centres = places[rng.choice(n, count, p=weights)] if count > 1 else mean[None]
    share, factors = np.full(count, 1 / count), np.tile(np.linalg.cholesky(spread), (count, 1, 1))
    for _ in range(20 if count > 1 else 0):
        belong = _memberships(Mixture(share, centres, factors), places) * weights[:, None]
        share = belong.sum(axis=0)
        alive = share > 0.02
        belong, share = belong[:, alive], share[alive]
        centres = (belong.T @ places) / share[:, None]
        offsets = places[:, None] - centres
        matrices = np.einsum("nk,nki,nkj->kij", belong, offsets, offsets) / share[:, None, None]
        factors = np.linalg.cholesky(matrices + 0.02 * spread)  # regularised towards the whole
    return Mixture(share / share.sum(), centres, factors).guarded()


def _memberships(mixture: Mixture, z: FloatArray) -> FloatArray:
    """Probability of each Gaussian component at each place, shape (n, k)."""
    columns = []
    for weight, centre, factor in zip(mixture.weights, mixture.centres, mixture.factors, strict=True):
        standard = np.linalg.solve(factor, (z - centre).T)
        columns.append(np.log(weight) - np.sum(np.log(np.diag(factor))) - 0.5 * np.sum(standard**2, axis=0))
    logs = np.array(columns).T
    return np.asarray(np.exp(logs - logsumexp(logs, axis=1, keepdims=True)))
