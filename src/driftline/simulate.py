"""Synthetic curves with a known truth: what the estimators are tested and calibrated against.

Which truth to take: `PowerLawTruth` for a real transition, with or without a correction to scaling; `LinearDriftTruth`
and `LogDriftTruth` for a crossover that runs away with size, `InverseDriftTruth` for one that converges as 1/L;
`KosterlitzThoulessTruth` for a transition with an exponentially growing length; `FiniteLengthTruth` where every state
is localised and small samples only look extended; `SizeRatioTruth` and `DepartureTruth` for a crossover that moves out
with size without a single crossing; `SizeIndependentTruth` where size does nothing. Each takes any `ScalingFunction`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq

from driftline.curves import Curve, Curves, FloatArray, Labels
from driftline.errors import InputError


class ScalingFunction(ABC):
    """A smooth function F of the scaling variable x."""

    @abstractmethod
    def __call__(self, x: FloatArray) -> FloatArray:
        """Values of F, of the shape of `x`."""


@dataclass(frozen=True)
class Logistic(ScalingFunction):
    """F(x) = low + (high - low) / (1 + exp(x / scale)): symmetric, from `high` at small x to `low` at large x."""

    high: float = 0.53
    low: float = 0.39
    scale: float = 4.0

    def __call__(self, x: FloatArray) -> FloatArray:
        # tanh form: no overflow at any x
        return self.low + (self.high - self.low) * (0.5 - 0.5 * np.tanh(np.asarray(x) / (2 * self.scale)))


@dataclass(frozen=True)
class Gompertz(ScalingFunction):
    """F(x) = low + (high - low) exp(-ln2 exp(x / scale)): asymmetric, its steepest point off x = 0."""

    high: float = 0.53
    low: float = 0.39
    scale: float = 6.0

    def __call__(self, x: FloatArray) -> FloatArray:
        exponent = np.minimum(np.asarray(x) / self.scale, 700.0)  # exp(700) is still finite
        return np.asarray(self.low + (self.high - self.low) * np.exp(-np.log(2.0) * np.exp(exponent)))


@dataclass(frozen=True)
class SlowTails(ScalingFunction):
    """F(x) = low + (high - low) (1/2 - arctan(x / scale) / pi): tails that fall only as 1/x."""

    high: float = 0.53
    low: float = 0.39
    scale: float = 3.0

    def __call__(self, x: FloatArray) -> FloatArray:
        fall = np.arctan(np.asarray(x, dtype=np.float64) / self.scale) / np.pi
        return np.asarray(self.low + (self.high - self.low) * (0.5 - fall))


class Truth(ABC):
    """A noiseless family of curves y(W, L)."""

    @abstractmethod
    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        """The observable at `disorder`, any shape, for one size."""


@dataclass(frozen=True)
class PowerLawTruth(Truth):
    """y = F(x) + L^-omega G(x) with x = (W - W_c(L)) L^(1/nu); here W_c(L) is one number.

    `correction` holds the coefficients (g0, g1, ...) of G as a polynomial in x; none means no correction to scaling.
    """

    W_c: float = 4.0
    nu: float = 1.0
    scaling: ScalingFunction = field(default_factory=Logistic)
    correction: tuple[float, ...] = ()
    omega: float = 1.0

    def critical(self, size: float) -> float:
        """The critical disorder W_c(L) of the trajectory."""
        return self.W_c

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        x = (np.asarray(disorder, dtype=np.float64) - self.critical(size)) * size ** (1 / self.nu)
        y = self.scaling(x)
        if self.correction:
            y = y + size**-self.omega * np.polynomial.polynomial.polyval(x, self.correction)
        return y


@dataclass(frozen=True)
class LinearDriftTruth(PowerLawTruth):
    """W_c(L) = W_c + rate L, which grows without bound.

    Without a correction and with nu = 1 curves of sizes L1 and L2 cross exactly at W_c + rate (L1 + L2), twice as far
    out as the trajectory at the mean of the two sizes.
    """

    rate: float = 0.1

    def critical(self, size: float) -> float:
        return self.W_c + self.rate * size


@dataclass(frozen=True)
class LogDriftTruth(PowerLawTruth):
    """W_c(L) = W_c + rate ln L, which grows without bound, slowly."""

    rate: float = 0.5

    def critical(self, size: float) -> float:
        return self.W_c + self.rate * float(np.log(size))


@dataclass(frozen=True)
class InverseDriftTruth(PowerLawTruth):
    """W_c(L) = W_c + shift / L, which converges to W_c.

    With nu = 1 and no correction all curves cross exactly at W_c; take nu = 2 or 1/2 to see the crossings move.
    """

    shift: float = -4.0

    def critical(self, size: float) -> float:
        return self.W_c + self.shift / size


@dataclass(frozen=True)
class KosterlitzThoulessTruth(Truth):
    """y = F(x), x = sgn(W - W_c) L exp(-b / sqrt|W - W_c|): a length that grows exponentially at W_c."""

    W_c: float = 4.0
    b: float = 2.0
    scaling: ScalingFunction = field(default_factory=Logistic)

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        distance = np.asarray(disorder, dtype=np.float64) - self.W_c
        reach = np.sqrt(np.maximum(np.abs(distance), 1e-12))  # exp(-b/1e-6) is 0, as it should be at W_c itself
        return self.scaling(np.sign(distance) * size * np.exp(-self.b / reach))


@dataclass(frozen=True)
class FiniteLengthTruth(Truth):
    """No transition: y = F(ln(L / xi)) with ln xi = c (W_0 / W)^alpha, finite and falling for every disorder.

    The defaults of scale make small disorders look like a plateau for every size of practice.
    """

    W_0: float = 4.0
    c: float = 3.0
    alpha: float = 2.0
    scaling: ScalingFunction = field(default_factory=lambda: Gompertz(scale=1.0))

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        ratio = self.W_0 / np.asarray(disorder, dtype=np.float64)
        return self.scaling(np.log(size) - self.c * ratio**self.alpha)


@dataclass(frozen=True)
class SizeRatioTruth(Truth):
    """y = F(W/L - ratio): the crossover disorder grows in proportion to the size, and no two curves cross.

    The default scale of F is in units of W/L.
    """

    ratio: float = 0.36
    scaling: ScalingFunction = field(default_factory=lambda: Logistic(scale=0.08))

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        return self.scaling(np.asarray(disorder, dtype=np.float64) / size - self.ratio)


@dataclass(frozen=True)
class DepartureTruth(Truth):
    """y = F(W - W_0 - rate L): every size leaves a common plateau at its own disorder, and no two curves cross.

    Curves of all sizes are the same but for a shift, so a larger size lies above a smaller one wherever they differ.
    """

    W_0: float = 1.0
    rate: float = 0.2
    scaling: ScalingFunction = field(default_factory=lambda: Gompertz(scale=1.0))

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        return self.scaling(np.asarray(disorder, dtype=np.float64) - self.W_0 - self.rate * size)


@dataclass(frozen=True)
class SizeIndependentTruth(Truth):
    """y = F(W - W_0) for every size: nothing to find."""

    W_0: float = 4.0
    scaling: ScalingFunction = field(default_factory=lambda: Logistic(scale=0.7))

    def value(self, size: float, disorder: FloatArray) -> FloatArray:
        return self.scaling(np.asarray(disorder, dtype=np.float64) - self.W_0)


def simulate(
    sizes: npt.ArrayLike,
    disorder: npt.ArrayLike,
    truth: Truth,
    error: npt.ArrayLike,
    rng: int | np.random.Generator,
    *,
    correlation: float = 0.0,
    labels: Labels | None = None,
) -> Curves:
    """Curves of `truth` with Gaussian noise of the stated errors.

    Parameters
    ----------
    sizes : array_like, shape (m,)
        System sizes.
    disorder : array_like, shape (n,) or (m, n)
        Disorder grid of all sizes, or one row for each size.
    truth : Truth
        What the curves would be without noise.
    error : array_like, broadcast to (m, n)
        Standard error of each mean; the noise has exactly this standard deviation.
    rng : int or numpy.random.Generator
        Source of the noise; the same integer gives the same curves.
    correlation : float
        Correlation of any two disorders of one size (0 <= correlation < 1), as arises when the same realisations are
        used at all of them. If not 0 the curves carry their covariance.
    labels : Labels, optional
        Names and reference values.

    Raises
    ------
    InputError
        If the correlation is out of range, or the curves break the rules of `Curves`.

    Examples
    --------
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 15), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> curves.points
    45
    """
    if not 0 <= correlation < 1:
        raise InputError(f"correlation must be at least 0 and below 1, not {correlation:g}", where="simulate")
    generator = np.random.default_rng(rng)
    lengths = np.asarray(sizes, dtype=np.float64)
    grid = np.asarray(disorder, dtype=np.float64)
    grids = np.broadcast_to(grid, (lengths.size, grid.shape[-1]))
    errors = np.broadcast_to(np.asarray(error, dtype=np.float64), grids.shape)
    curves = []
    for size, points, sigma in zip(lengths, grids, errors, strict=True):
        shared, own = generator.standard_normal(), generator.standard_normal(points.size)
        noise = sigma * (np.sqrt(correlation) * shared + np.sqrt(1 - correlation) * own)
        mixing = correlation + (1 - correlation) * np.eye(points.size)
        covariance = np.outer(sigma, sigma) * mixing if correlation else None
        curves.append(Curve(float(size), points, truth.value(float(size), points) + noise, sigma, covariance))
    return Curves(curves, labels, {"truth": repr(truth)})


def true_crossing(truth: Truth, small: float, large: float, window: tuple[float, float]) -> float:
    """Disorder in `window` at which the noiseless curves of two sizes cross.

    Raises
    ------
    InputError
        If the curves do not cross with a change of sign between the ends of the window.
    """

    def difference(disorder: float) -> float:
        at = np.array([disorder])
        return float((truth.value(large, at) - truth.value(small, at))[0])

    if difference(window[0]) * difference(window[1]) >= 0:
        raise InputError(f"sizes {small:g} and {large:g} do not cross between {window[0]:g} and {window[1]:g}")
    return float(brentq(difference, *window, xtol=1e-12, rtol=1e-14))
