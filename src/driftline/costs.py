"""Cost functions of the literature: one number for how badly points collapse, reported and never used for a verdict.

Papers quote such numbers, so they are given for comparison. Which to look at: `HoudayerHartmann` and `KawashimaIto` are
chi-squared-like, near 1 for a good collapse with honest errors; `BhattacharjeeSeno` is a distance in the unit of the
observable and knows no errors; `SortedIncrement` knows neither errors nor neighbours and expects a monotone curve. None
has an absolute scale, so `collapse_costs` sets beside each the values that measurement noise alone would give.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_array

from driftline.collapse import CollapseFit
from driftline.curves import FloatArray
from driftline.inference.intervals import Interval
from driftline.plain import attributes

IntArray = npt.NDArray[np.intp]

#: Sets of noise behind a floor: 50 would leave the ends of its 95 % interval to the outermost set or two; these take
#: about 10 ms a fit for 126 points.
BOOTSTRAP = 200


@dataclass(frozen=True)
class Cost:
    """One cost function at the posterior median of a fit.

    Parameters
    ----------
    name : str
        Name in `COST_FUNCTIONS`.
    value : float
        Cost of the measured points; NaN where it is not defined, as when no two sizes overlap in x.
    floor : Interval
        What pure noise gives: quantiles over synthetic points on the fitted curve, not a credible interval.
    ratio : float
        `value` over the median of `floor`; NaN where that is zero or not defined.
    """

    name: str
    value: float
    floor: Interval
    ratio: float

    def to_dict(self) -> dict[str, Any]:
        """This cost as `result.json` holds it."""
        return attributes(self, "name", "value", "floor")


@dataclass(frozen=True)
class CostFunction(ABC):
    """A measure of the quality of a collapse; larger is worse."""

    @abstractmethod
    def __call__(self, size: FloatArray, x: FloatArray, y: FloatArray, error: FloatArray) -> FloatArray:
        """Cost of each set of ordinates.

        Parameters
        ----------
        size, x, error : array, shape (points,)
            Size, scaled variable, and standard error of the ordinate, of every point in any order.
        y : array, shape (..., points)
            One or many sets of ordinates at these places.

        Returns
        -------
        array, shape (...,)
            NaN where the cost is not defined.
        """


@dataclass(frozen=True)
class KawashimaIto(CostFunction):
    """Distance of each point from the line through its two neighbours in x, in units of the error of that distance.

    Kawashima, Ito, J. Phys. Soc. Jpn. 62, 435 (1993), from memory. With all points ordered by x, whatever their size,

        S = 1/(n-2) sum_{i=2}^{n-1} [(y_i - p y_{i+1} - q y_{i-1}) / D_i]^2,
        p = (x_i - x_{i-1}) / (x_{i+1} - x_{i-1}),  q = 1 - p,
        D_i^2 = e_i^2 + p^2 e_{i+1}^2 + q^2 e_{i-1}^2.

    Points at the same x are ordered by size; where all three are at one x the limit p = q = 1/2 is taken, which is our
    choice.
    """

    def __call__(self, size: FloatArray, x: FloatArray, y: FloatArray, error: FloatArray) -> FloatArray:
        order = np.lexsort((size, x))
        x, y, error = x[order], y[..., order], error[order]
        if x.size < 3:
            return np.full(y.shape[:-1], np.nan)
        span = x[2:] - x[:-2]
        p = np.divide(x[1:-1] - x[:-2], span, out=np.full(span.shape, 0.5), where=span > 0)
        q = 1 - p
        scale = np.hypot(error[1:-1], np.hypot(p * error[2:], q * error[:-2]))
        distance = (y[..., 1:-1] - p * y[..., 2:] - q * y[..., :-2]) / scale
        return np.asarray(np.mean(distance**2, axis=-1))


@dataclass(frozen=True)
class BhattacharjeeSeno(CostFunction):
    """Mean distance of the points of every size from the curve of every other size, in the unit of the ordinate.

    Bhattacharjee, Seno, J. Phys. A 34, 6375 (2001), from memory:

        P_b = [ 1/N_over sum_p sum_{j != p} sum_{i, over} |y_ij - E_p(x_ij)|^q ]^(1/q),

    where E_p interpolates the points of size p, the sum takes the points of the other sizes j that lie in the range of
    x which size p covers, and N_over counts them. Here E_p is linear (the paper leaves the choice open) and q = 1.

    Parameters
    ----------
    q : float
        Power of the distances.
    """

    q: float = 1.0

    def __call__(self, size: FloatArray, x: FloatArray, y: FloatArray, error: FloatArray) -> FloatArray:
        pairs = _brackets(size, x)
        if pairs.target.size == 0:
            return np.full(y.shape[:-1], np.nan)
        part = (x[pairs.target] - x[pairs.left]) / (x[pairs.right] - x[pairs.left])
        distance = y[..., pairs.target] - (1 - part) * y[..., pairs.left] - part * y[..., pairs.right]
        return np.asarray(np.mean(np.abs(distance) ** self.q, axis=-1) ** (1 / self.q))


@dataclass(frozen=True)
class HoudayerHartmann(CostFunction):
    """Chi-squared of each point against a straight line through its neighbours of all other sizes.

    Houdayer, Hartmann, Phys. Rev. B 70, 014418 (2004), from memory:

        S = 1/N sum_ij (y_ij - Y_ij)^2 / (dy_ij^2 + dY_ij^2).

    The master curve Y_ij at x_ij comes from a linear fit, with weights w = 1/dy^2, through the two points of each other
    size that enclose x_ij (sizes that do not enclose it give none; points without any are left out of the N):

        Y = [Kxx Ky - Kx Kxy + x_ij (K Kxy - Kx Ky)] / Delta,   dY^2 = (Kxx - 2 x_ij Kx + x_ij^2 K) / Delta,
        K = sum w, Kx = sum w x, Ky = sum w y, Kxx = sum w x^2, Kxy = sum w x y, Delta = K Kxx - Kx^2.
    """

    def __call__(self, size: FloatArray, x: FloatArray, y: FloatArray, error: FloatArray) -> FloatArray:
        pairs = _brackets(size, x)
        if pairs.target.size == 0:
            return np.full(y.shape[:-1], np.nan)
        master, master_error, used = self._master(x, error, pairs)
        expected = (master @ y.reshape(-1, x.size).T).T.reshape(y.shape)
        distance = (y - expected)[..., used] / np.hypot(error[used], master_error[used])
        return np.asarray(np.mean(distance**2, axis=-1))

    @staticmethod
    def _master(x: FloatArray, error: FloatArray, pairs: Brackets) -> tuple[csr_array, FloatArray, IntArray]:
        """Matrix that takes all y to Y, shape (points, points); dY, shape (points,); and the points that have both."""
        at, node = np.concatenate([pairs.target] * 2), np.concatenate([pairs.left, pairs.right])
        used = np.unique(at)
        # Distances from x_ij in units of its widest bracket, errors in units of the least one: the fit does not depend
        # on either unit, and for lengths that grow exponentially the squares of x itself would underflow.
        reach = np.ones(x.size)
        reach[used] = 0.0
        np.maximum.at(reach, pairs.target, x[pairs.right] - x[pairs.left])
        u, least = (x[node] - x[at]) / reach[at], error.min()
        w = (least / error[node]) ** 2
        K, Kx, Kxx = (np.bincount(at, w * u**power, minlength=x.size) for power in range(3))
        delta = np.where(K > 0, K * Kxx - Kx**2, 1.0)
        weight = w * (Kxx[at] - Kx[at] * u) / delta[at]
        return csr_array((weight, (at, node)), shape=(x.size, x.size)), least * np.sqrt(Kxx / delta), used


@dataclass(frozen=True)
class SortedIncrement(CostFunction):
    """Sum of all steps up and down along x, over the range of the ordinates, less one.

    Suntajs, Bonca, Prosen, Vidmar, Phys. Rev. B 102, 064207 (2020), from memory. With all points ordered by x,

        C = sum_{j=1}^{n-1} |y_{j+1} - y_j| / (max y - min y) - 1,

    which is zero for points on any monotone curve. With U and D the sums of the steps up and down, and R the range,
    C = [2 min(U, D) - (R - |y_n - y_1|)] / R, which is what is computed: it is exactly zero where it should be.
    Points at the same x are ordered by size, which is our choice.
    """

    def __call__(self, size: FloatArray, x: FloatArray, y: FloatArray, error: FloatArray) -> FloatArray:
        y = y[..., np.lexsort((size, x))]
        steps = np.diff(y, axis=-1)
        up, down = np.maximum(steps, 0).sum(axis=-1), np.maximum(-steps, 0).sum(axis=-1)
        span = np.ptp(y, axis=-1)
        detours = 2 * np.minimum(up, down) - (span - np.abs(y[..., -1] - y[..., 0]))
        return np.asarray(np.divide(detours, span, out=np.full(np.shape(span), np.nan), where=span > 0))


#: Every cost function by name, in the order of the report.
COST_FUNCTIONS: dict[str, CostFunction] = {
    "kawashima-ito": KawashimaIto(),
    "bhattacharjee-seno": BhattacharjeeSeno(),
    "houdayer-hartmann": HoudayerHartmann(),
    "sorted-increment": SortedIncrement(),
}


@dataclass(frozen=True, eq=False)
class Brackets:
    """Pairs of neighbouring points of one size that enclose a point of another size; index arrays, shape (pairs,)."""

    target: IntArray
    left: IntArray
    right: IntArray


def _brackets(size: FloatArray, x: FloatArray) -> Brackets:
    """For each size, x_left <= x_target <= x_right with x_left < x_right, at every target of other sizes."""
    none = np.zeros(0, dtype=np.intp)
    found = [(none, none, none)]
    for value in np.unique(size):
        own = np.flatnonzero(size == value)
        own = own[np.argsort(x[own], kind="stable")]
        if own.size < 2:
            continue
        target = np.flatnonzero((size != value) & (x >= x[own[0]]) & (x <= x[own[-1]]))
        upper = np.clip(np.searchsorted(x[own], x[target], side="right"), 1, own.size - 1)
        left, right = own[upper - 1], own[upper]
        distinct = x[left] < x[right]  # two points at one x define no line
        found.append((target[distinct], left[distinct], right[distinct]))
    return Brackets(*(np.concatenate(part) for part in zip(*found, strict=True)))


def collapse_costs(
    fit: CollapseFit, *, bootstrap: int = BOOTSTRAP, seed: int | np.random.Generator | None = 0
) -> tuple[Cost, ...]:
    """Every cost function at the posterior median of a fit, with its noise floor.

    Parameters
    ----------
    fit : CollapseFit
        Its points are taken as they lie on the scaling function: divided by the amplitude, freed of the correction.
    bootstrap : int
        Number of synthetic sets behind the floor.
    seed : int, Generator or None
        Source of the noise.

    Returns
    -------
    tuple of Cost
        In the order of `COST_FUNCTIONS`.

    Notes
    -----
    The floor is a parametric bootstrap (Efron, Tibshirani, An Introduction to the Bootstrap (1993), section 6.5): y is
    drawn from the fitted curve plus noise of the measured covariance (noise scale 1) at the same x. Nothing is fitted
    again, so a floor lies higher than that of refitted sets by about the part of the degrees of freedom that the
    parameters take up, a few in a hundred.

    A floor also holds what lines between neighbours miss of the bend of the curve, so that of a chi-squared-like cost
    exceeds 1 on a coarse grid. A ratio near 1 says that the points scatter about their own curve as noise does; where
    the sizes hardly overlap in x, a wrong form can do that as well. This is why no verdict rests on it.

    Examples
    --------
    >>> from driftline.collapse import fit_collapse
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 15), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> costs = collapse_costs(fit_collapse(curves, "power-law", quick=True))
    >>> [cost.name for cost in costs if not 0.5 < cost.ratio < 2]
    []
    """
    points = fit.points
    y = np.vstack([points.y, synthetic_ordinates(fit, bootstrap, np.random.default_rng(seed))])
    return tuple(
        _cost(name, function(points.size, points.x, y, points.error)) for name, function in COST_FUNCTIONS.items()
    )


def _cost(name: str, values: FloatArray) -> Cost:
    """From the cost of the measured points, which is the first, and of the synthetic ones."""
    value, floor = float(values[0]), Interval.of_draws(values[1:])
    return Cost(name, value, floor, value / floor.median if floor.median > 0 else np.nan)


def synthetic_ordinates(fit: CollapseFit, count: int, rng: np.random.Generator) -> FloatArray:
    """Sets of ordinates that scatter about the fitted scaling function by measurement noise alone.

    Returns
    -------
    array, shape (count, points)
        In the order of `fit.points`; amplitude and correction are divided out of the curve, the former of the noise.
    """
    points = fit.points
    # residual = (mean - fitted) / measured error, and amplitude = measured error / error on the scaling function
    curve = points.y - points.residual * points.error
    amplitude = fit.curves.flat()[3] / points.error
    noise = [rng.standard_normal((count, c.mean.size)) @ np.linalg.cholesky(c.noise).T for c in fit.curves.curves]
    return np.asarray(curve + np.hstack(noise) / amplitude)
