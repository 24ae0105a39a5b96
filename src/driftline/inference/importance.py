"""Evidence and weighted draws by importance sampling from a mixture of multivariate Student-t densities.

The mixture is fitted to draws (of a chain, or of the earlier rounds of importance sampling: Cappe et al., Stat. Comput.
18, 447 (2008)) and has heavier tails than the target, so the weights stay bounded; a broad component guards the tails.
The health check is the effective sample size (sum w)^2 / sum w^2 (Kong, Liu, Wong, JASA 89, 278 (1994)).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln, logsumexp

from driftline.curves import FloatArray
from driftline.inference.modes import LogDensity, Mode

DEGREES = 5.0  # of the t densities: finite fourth moments of the weights for Gaussian-tailed targets
ROUNDS = 12
ROUND_DRAWS = 1000
WANTED = 800.0  # effective draws at which adaptation stops: no single round of a thousand reaches it
CHUNK = 256  # rows at once: their tables stay in the cache
COMPONENTS = 4
STEPS = 10  # of expectation-maximisation: a proposal need not be a converged fit
LEAST_WEIGHT = 1e-6  # of the largest weight, below which a draw is left out of a fit
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
        return self._of(np.searchsorted(places, (np.arange(count) + rng.random()) / count), rng)

    def draw_independent(self, count: int, rng: np.random.Generator) -> FloatArray:
        """`count` draws, shape (count, d), each of which knows nothing of the others."""
        return self._of(rng.choice(self.weights.size, count, p=self.weights / self.weights.sum()), rng)

    def _of(self, component: npt.NDArray[np.intp], rng: np.random.Generator) -> FloatArray:
        """One draw of each of these components."""
        count = component.size
        normal = rng.standard_normal((count, self.centres.shape[1]))
        radius = np.sqrt(DEGREES / rng.chisquare(DEGREES, count))
        offsets = np.einsum("nij,nj->ni", self.factors[component], normal) * radius[:, None]
        return np.asarray(self.centres[component] + offsets)

    def log_density(self, z: FloatArray) -> FloatArray:
        """Log density, shape (n,)."""
        d = z.shape[1]
        constant = gammaln((DEGREES + d) / 2) - gammaln(DEGREES / 2) - 0.5 * d * np.log(DEGREES * np.pi)
        logs = self._of_components(z, lambda distance: -0.5 * (DEGREES + d) * np.log1p(distance / DEGREES))
        return np.asarray(_log_sum(logs) + constant)

    def memberships(self, z: FloatArray) -> FloatArray:
        """Probability of each component, taken as a Gaussian, at each place, shape (k, n)."""
        logs = self._of_components(z, lambda distance: -0.5 * distance)
        return np.exp(logs - _log_sum(logs))

    def _of_components(self, z: FloatArray, profile: Callable[[FloatArray], FloatArray]) -> FloatArray:
        """Log weight, volume and `profile` of the squared distance for each component, shape (k, n)."""
        rows = []
        for weight, centre, factor in zip(self.weights, self.centres, self.factors, strict=True):
            standard = (z - centre) @ np.linalg.inv(factor).T
            distance = np.einsum("ni,ni->n", standard, standard)
            rows.append(np.log(weight) - np.sum(np.log(np.diag(factor))) + profile(distance))
        return np.array(rows)


def _log_sum(logs: FloatArray) -> FloatArray:
    """Log of the sum of exponentials over the first axis; scipy's has ten times the overhead at these shapes."""
    top = np.max(logs, axis=0)
    return np.asarray(top + np.log(np.sum(np.exp(logs - top), axis=0)))


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
    return WeightedDraws(places, _in_chunks(target, places) - mixture.log_density(places))


def _in_chunks(target: LogDensity, places: FloatArray) -> FloatArray:
    return np.concatenate([target(places[i : i + CHUNK]) for i in range(0, len(places), CHUNK)])


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


def adapt(
    target: LogDensity, mixture: Mixture, rng: np.random.Generator, *, wanted: float = WANTED
) -> tuple[Mixture, WeightedDraws]:
    """Draw, refit `mixture` to all draws so far, and so on until `wanted` draws are effective.

    Returns the last mixture and the draws of all rounds.  These are weighted against the average of all mixtures drawn
    from (deterministic mixture weights; Cornuet, Marin, Mira, Robert, Scand. J. Stat. 39, 798 (2012)): rounds that
    missed a part of the target then do no harm once a later one has found it.  Draws that the next mixture was fitted
    to are weighted once more, which biases the evidence by a few tenths of its error; `sample_until` has no such bias.
    """
    mixtures: list[Mixture] = []
    places, logs = np.empty((0, mixture.centres.shape[1])), np.empty(0)
    densities = np.empty((0, 0))  # of each mixture at each place
    for last in range(ROUNDS):
        mixtures.append(mixture)
        fresh = mixture.draw(ROUND_DRAWS, rng)
        above = np.array([each.log_density(fresh) for each in mixtures])
        left = np.vstack([densities, mixture.log_density(places)[None]]) if last else np.empty((1, 0))
        densities = np.hstack([left, above])
        places, logs = np.vstack([places, fresh]), np.concatenate([logs, _in_chunks(target, fresh)])
        draws = WeightedDraws(places, logs - _log_sum(densities) + np.log(len(mixtures)))
        if draws.effective >= wanted:
            break
        mixture = fit_mixture(places, _tempered(draws), rng)
    return mixtures[-1], draws


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
    heavy = weights > LEAST_WEIGHT * weights.max()  # the rest moves nothing but takes the time
    places, weights = places[heavy], weights[heavy] / np.sum(weights[heavy])
    n, d = places.shape
    mean = weights @ places
    spread = (places - mean).T @ ((places - mean) * weights[:, None])
    spread += 1e-12 * np.diag(np.maximum(np.diag(spread), 1e-300))
    count = min(COMPONENTS, max(1, int(1 / np.sum(weights**2) / (20 * d))))
    centres = places[rng.choice(n, count, p=weights)] if count > 1 else mean[None]
    share, factors = np.full(count, 1 / count), np.tile(np.linalg.cholesky(spread), (count, 1, 1))
    for _ in range(STEPS if count > 1 else 0):
        belong = Mixture(share, centres, factors).memberships(places) * weights
        share = belong.sum(axis=1)
        alive = share > 0.02
        belong, share = belong[alive], share[alive]
        centres = (belong @ places) / share[:, None]
        offsets = places - centres[:, None]
        matrices = np.matmul((offsets * belong[..., None]).swapaxes(1, 2), offsets) / share[:, None, None]
        factors = np.linalg.cholesky(matrices + 0.02 * spread)  # regularised towards the whole
    return Mixture(share / share.sum(), centres, factors).guarded()
