"""Smooth curves through the measured points of each size, as joint draws of function and slope.

Model of one curve (Rasmussen, Williams, Gaussian Processes for Machine Learning, 2006, chapters 2 and 5):

    y_i = f(W_i) + noise,    f(W) = c_0 + c_1 u + a g(u),    noise ~ N(0, measured covariance)

with u the disorder mapped to [-1, 1], c_0 and c_1 Gaussian with a broad proper prior, and g a Gaussian process of unit
variance, stationary in u or, where all disorders are positive, in ln W. Kernel, coordinate, length and amplitude a are
not set to their best values but averaged over, weighted by marginal likelihood: a smoother with plugged-in values
undercovers when points are few. How well intervals from these draws cover is measured in the tests of the crossings.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
import numpy.typing as npt
from scipy.linalg import solve_triangular
from scipy.special import logsumexp

from driftline.curves import Curve, Curves, FloatArray

#: Grid points over the common disorder range: the shortest length is five of their steps.
POINTS = 81
#: Lengths of the Gaussian process, in half-widths of the measured range: from a few points to practically a cubic.
LENGTHS = np.geomspace(0.12, 4.0, 10)
#: Amplitudes in units of the spread of y over all points.
AMPLITUDES = np.geomspace(0.003, 30.0, 17)
#: Prior standard deviation of constant and linear part, in units of the spread of y.
BROAD = 10.0
#: Curves with fewer points than this borrow their hyper-parameters from all sizes together.
ENOUGH_POINTS = 8
#: From this ratio of the largest to the smallest disorder, ln W is tried as a coordinate beside W.
WIDE_RANGE = 2.0
#: Cells that together hold less than this share of the posterior are left out.
NEGLECTED = 1e-3


@dataclass(frozen=True, eq=False)
class SmoothCurve:
    """Posterior of one size's curve.

    Attributes
    ----------
    size : float
        System size.
    grid : array, shape (g,)
        Disorders inside this size's measured range. All sizes share the points of the common range.
    mean, sd : array, shape (g,)
        Posterior mean and standard deviation of the function.
    draws, slope_draws : array, shape (n, g)
        Draws of the function and of its derivative by the disorder, joint over the grid and with each other.
    """

    size: float
    grid: FloatArray
    mean: FloatArray
    sd: FloatArray
    draws: FloatArray
    slope_draws: FloatArray


class Kernel(ABC):
    """Covariance of a stationary process of unit variance as a function of the distance r in units of the length."""

    @abstractmethod
    def terms(self, r: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """k(r), k'(r) and k''(r) for signed r."""


class Matern52(Kernel):
    """Matern kernel of order 5/2 (Rasmussen, Williams 2006, equation 4.17): twice differentiable draws."""

    def terms(self, r: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        s = np.sqrt(5.0) * np.abs(r)
        decay = np.exp(-s)
        return (1 + s + s**2 / 3) * decay, -(5 / 3) * r * (1 + s) * decay, -(5 / 3) * (1 + s - s**2) * decay


class SquaredExponential(Kernel):
    """Squared exponential kernel (Rasmussen, Williams 2006, equation 4.9): infinitely smooth draws."""

    def terms(self, r: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        value = np.exp(-(r**2) / 2)
        return value, -r * value, (r**2 - 1) * value


KERNELS: tuple[Kernel, ...] = (Matern52(), SquaredExponential())


@dataclass(frozen=True, eq=False)
class Process:
    """A Gaussian process of unit variance on the p points in use: one kernel in one coordinate at one length.

    Attributes
    ----------
    value : array, shape (p, p)
        Covariance of the function at the points.
    slope_value : array, shape (g, p)
        Covariance of the slope (by disorder) at the g grid points with the function at all points.
    slope_slope : array, shape (g, g)
        Covariance of the slopes at the grid points.
    """

    value: FloatArray
    slope_value: FloatArray
    slope_slope: FloatArray

    @cached_property
    def factor(self) -> FloatArray:
        """A matrix B with B B^T the covariance of (function at all points, slope at the grid), shape (p + g, rank)."""
        scale = np.concatenate([np.ones(len(self.value)), 1 / np.sqrt(np.diag(self.slope_slope))])
        joint = np.block([[self.value, self.slope_value.T], [self.slope_value, self.slope_slope]])
        eigenvalues, vectors = np.linalg.eigh(joint * np.outer(scale, scale))
        kept = eigenvalues > 1e-13 * eigenvalues[-1]  # below this they are rounding
        return np.asarray(vectors[:, kept] * np.sqrt(eigenvalues[kept]) / scale[:, None])


def smooth_curves(
    curves: Curves, *, draws: int = 2000, rng: int | np.random.Generator | None = 0, points: int = POINTS
) -> tuple[SmoothCurve, ...]:
    """Posterior draws of every size's curve.

    Parameters
    ----------
    curves : Curves
        The measured points.
    draws : int
        Number of joint draws n; draw k of one size is independent of draw k of any other size.
    rng : int, Generator or None
        Source of the draws.
    points : int
        Number of grid points over the common disorder range.

    Returns
    -------
    tuple of SmoothCurve
        One for each size, in order of size.

    Examples
    --------
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12], np.linspace(2, 6, 15), PowerLawTruth(), 0.003, 1)
    >>> smooth = smooth_curves(curves, draws=50, rng=1)
    >>> smooth[0].draws.shape
    (50, 81)
    """
    generator = np.random.default_rng(rng)
    smoother = _Smoother.of(curves, points)
    posteriors = smoother.posteriors()
    return tuple(
        smoother.draw(curve, posterior, draws, generator)
        for curve, posterior in zip(curves.curves, posteriors, strict=True)
    )


def shared_grid(curves: Curves, points: int) -> FloatArray:
    """`points` even disorders over the common range, continued with the same step to the ends of every size."""
    low, high = curves.common_range
    step = (high - low) / (points - 1)
    first, last = curves.disorder_range
    below = low - step * np.arange(1, int((low - first) / step) + 1)
    above = high + step * np.arange(1, int((last - high) / step) + 1)
    ends = [end for curve in curves.curves for end in (curve.disorder[0], curve.disorder[-1])]
    return np.unique(np.concatenate([below, np.linspace(low, high, points), above, ends]))


@dataclass(frozen=True, eq=False)
class _Smoother:
    """All that the sizes have in common: points in use, unit of y, and the processes on them."""

    curves: Curves
    points: FloatArray
    grid: FloatArray
    centre: float
    unit: float
    processes: tuple[Process, ...]

    @classmethod
    def of(cls, curves: Curves, points: int) -> _Smoother:
        _, disorder, mean, _ = curves.flat()
        grid = shared_grid(curves, points)
        every = np.unique(np.concatenate([grid, disorder]))
        unit = float(np.std(mean)) or float(np.max(np.abs(mean))) or 1.0  # identical means have no spread
        return cls(curves, every, grid, float(np.mean(mean)), unit, _processes(every.tobytes(), grid.tobytes()))

    def linear(self, disorder: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Constant and linear part with their prior scale, and their derivatives by disorder; each (n, 2)."""
        low, high = self.points[0], self.points[-1]
        u = (2 * disorder - low - high) / (high - low)
        values = BROAD * np.column_stack([np.ones_like(u), u])
        slopes = BROAD * np.column_stack([np.zeros_like(u), np.full_like(u, 2 / (high - low))])
        return values, slopes

    def log_likelihood(self, curve: Curve) -> FloatArray:
        """Log marginal likelihood of every cell, shape (processes, amplitudes), up to a constant.

        With C C^T the covariance of noise, constant and linear part, and C^-1 K C^-T = U diag(lambda) U^T, the
        covariance at amplitude a is C U diag(1 + a^2 lambda) U^T C^T, so that all amplitudes cost one
        eigendecomposition.
        """
        at = np.searchsorted(self.points, curve.disorder)
        values, _ = self.linear(curve.disorder)
        factor = np.linalg.cholesky(curve.noise / self.unit**2 + values @ values.T)
        whiten = solve_triangular(factor, np.eye(at.size), lower=True)
        data = whiten @ (curve.mean - self.centre) / self.unit
        kernels = np.array([process.value[np.ix_(at, at)] for process in self.processes])
        eigenvalues, vectors = np.linalg.eigh(whiten @ kernels @ whiten.T)
        projected = (data @ vectors)[:, None, :]
        variance = 1 + AMPLITUDES[:, None] ** 2 * np.maximum(eigenvalues, 0.0)[:, None, :]
        return np.asarray(-0.5 * np.sum(np.log(variance) + projected**2 / variance, axis=2))

    def posteriors(self) -> list[FloatArray]:
        """Weights of the cells for each size; short curves take those of all sizes together."""
        own = [self.log_likelihood(curve) for curve in self.curves.curves]
        pooled = np.sum(own, axis=0)
        short = [curve.disorder.size < ENOUGH_POINTS for curve in self.curves.curves]
        return [_weights(pooled if few else single) for few, single in zip(short, own, strict=True)]

    def draw(self, curve: Curve, weights: FloatArray, draws: int, rng: np.random.Generator) -> SmoothCurve:
        """Draws from the mixture over cells."""
        sampler = _Sampler.of(self, curve)
        counts = rng.multinomial(draws, weights.ravel()).reshape(weights.shape)
        parts = [
            sampler.draw(process, cells, rng)
            for process, cells in zip(self.processes, counts, strict=True)
            if cells.any()
        ]
        # Draws come ordered by cell; shuffled, so that draw k of one size knows nothing of draw k of another
        values, slopes = np.split(np.concatenate(parts)[rng.permutation(draws)] * self.unit, 2, axis=1)
        values = values + self.centre
        return SmoothCurve(curve.size, sampler.grid, values.mean(axis=0), values.std(axis=0), values, slopes)


@dataclass(frozen=True, eq=False)
class _Sampler:
    """What draws of one size's curve need, in units of the spread of y.

    Rows run over (function, slope) at the grid of this size, then the function at its data.
    """

    grid: FloatArray
    rows: npt.NDArray[np.intp]
    at: npt.NDArray[np.intp]
    linear: FloatArray
    data: FloatArray
    noise: FloatArray
    noise_root: FloatArray

    @classmethod
    def of(cls, smoother: _Smoother, curve: Curve) -> _Sampler:
        inside = (smoother.grid >= curve.disorder[0]) & (smoother.grid <= curve.disorder[-1])
        grid = smoother.grid[inside]
        at, on = np.searchsorted(smoother.points, curve.disorder), np.searchsorted(smoother.points, grid)
        rows = np.concatenate([on, smoother.points.size + np.flatnonzero(inside), at])
        values, slopes = smoother.linear(grid)
        linear = np.concatenate([values, slopes, smoother.linear(curve.disorder)[0]])
        noise = curve.noise / smoother.unit**2
        data = (curve.mean - smoother.centre) / smoother.unit
        return cls(grid, rows, at, linear, data, noise, np.asarray(np.linalg.cholesky(noise), dtype=np.float64))

    def draw(self, process: Process, counts: npt.NDArray[np.int64], rng: np.random.Generator) -> FloatArray:
        """Draws of (function, slope) on the grid for one process, `counts` of them at each amplitude.

        Prior draws are moved onto the data (Matheron's rule; Journel, Huijbregts, Mining Geostatistics, 1978): with
        prior draw f and noise draw e,  f + K_*d (K_dd + N)^-1 (y - f_d - e)  is a posterior draw.
        """
        total, points = int(counts.sum()), self.at.size
        amplitude = np.repeat(AMPLITUDES, counts)[:, None]
        factor = process.factor[self.rows]
        prior = amplitude * (rng.standard_normal((total, factor.shape[1])) @ factor.T)
        prior += rng.standard_normal((total, 2)) @ self.linear.T
        misfit = self.data - prior[:, -points:] - rng.standard_normal((total, points)) @ self.noise_root.T
        kernel = np.concatenate([process.value[:, self.at], process.slope_value[:, self.at]])[self.rows]
        background = self.linear @ self.linear[-points:].T
        drawn, last = prior[:, :-points], np.cumsum(counts)
        for a, count, stop in zip(AMPLITUDES[counts > 0], counts[counts > 0], last[counts > 0], strict=True):
            covariance = a**2 * kernel + background
            gain = np.linalg.solve(covariance[-points:] + self.noise, covariance[:-points].T)
            drawn[stop - count : stop] += misfit[stop - count : stop] @ gain
        return drawn


@lru_cache(maxsize=2)  # the same disorders come back in every refit and calibration set; an entry takes some 20 MB
def _processes(points_bytes: bytes, grid_bytes: bytes) -> tuple[Process, ...]:
    points, grid = np.frombuffer(points_bytes), np.frombuffer(grid_bytes)
    on = np.searchsorted(points, grid)
    processes = []
    for coordinate, stretch in _coordinates(points):
        for kernel in KERNELS:
            for length in LENGTHS:
                value, first, second = kernel.terms((coordinate[:, None] - coordinate[None, :]) / length)
                rate = stretch / length  # dr/dW
                slope_value, slope_slope = rate[:, None] * first, -np.outer(rate, rate) * second
                processes.append(Process(value, slope_value[on], slope_slope[np.ix_(on, on)]))
    return tuple(processes)


def _coordinates(points: FloatArray) -> Iterator[tuple[FloatArray, FloatArray]]:
    """Coordinates on [-1, 1] in which the process is stationary, with their derivatives by disorder."""
    low, high = points[0], points[-1]
    yield (2 * points - low - high) / (high - low), np.full_like(points, 2 / (high - low))
    if low > 0 and high / low > WIDE_RANGE:
        span = np.log(high / low)
        yield (2 * np.log(points) - np.log(low * high)) / span, 2 / (points * span)


def _weights(log_likelihood: FloatArray) -> FloatArray:
    """Normalised weights with the cells of negligible weight removed."""
    weights = np.exp(log_likelihood - logsumexp(log_likelihood))
    order = np.argsort(weights, axis=None)
    tail = np.cumsum(weights.ravel()[order]) < NEGLECTED
    weights.ravel()[order[tail]] = 0.0
    return np.asarray(weights / weights.sum())
