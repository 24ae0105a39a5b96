"""Do the curves depend on size with opposite sign on the two sides of the crossing?

A transition makes the observable run one way with size below it and the other way above. Curves that merely start to
differ somewhere (a crossover) are flat in size on one side, and noise supplies the crossings there. So the trend of y
with ln L, by weighted least squares over all sizes, is followed through the disorder range and sought on both sides:

- the trends of neighbouring disorders are averaged over every run of disorders, so that a small but steady size
  dependence is seen;
- a run counts as much as it does without its most helpful size: its significance is held to 3/2 of the smallest one
  found with a size left out, so that three standard deviations need two without any one size;
- the best run of all is the largest of many: its probability under curves that do not depend on size is taken from
  the simulated distribution of that largest value (the look-elsewhere effect; Gross, Vitells, Eur. Phys. J. C 70,
  525 (2010)), and turned back into standard deviations;
- the place that divides the sides is the one that makes the weaker side strongest. Each side is judged as if its run
  had been sought over the whole range and with either sign, which pays for that choice;
- where that weaker side is not resolved, the strongest run of all is reported beside the best of the opposite sign
  below or above it: a resolved side and a flat one, or none.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq
from scipy.special import log_ndtr, ndtri_exp

from driftline.crossings import Crossings
from driftline.curves import MIN_DISORDERS, Curves, FloatArray
from driftline.smoothing import SmoothCurve, smooth_curves

#: Standard deviations that count as resolved on a side.
THRESHOLD = 3.0
#: A run's significance is at most this many times the one it has without its most helpful size.
ODD_SIZE_FACTOR = 1.5
#: Where grids differ the smooth curves are compared at this many disorders.
SMOOTH_POINTS = 15
#: Simulated sets without size dependence; 20,000 give the 0.27 % point (three standard deviations) to 14 %.
SIMULATED = 20_000
#: Tail of the simulated distribution from which on it is continued by its asymptotic form.
TAIL = 0.005
#: A mean sits on a reference value if it lies within two of its errors or within this share of the value: reference
#: values are asymptotic and the smallest systems miss them by so much.
REFERENCE_TOLERANCE = 0.005


@dataclass(frozen=True)
class Separation:
    """Outcome of the test.

    Attributes
    ----------
    z_below, z_above : float
        Signed significance of the trend of y with ln L on either side of the crossing, in standard deviations, with
        the look-elsewhere effect counted and no single size deciding.
    disorder_below, disorder_above : float
        Centre of the run of disorders where it was found.
    split : float
        Disorder that divides the sides; next to a flat side the disorder at which it ends.
    sign_change : bool
        Whether the two trends have opposite signs, resolved or not.
    separated : bool
        Whether they have, each with at least three standard deviations.
    flat_side : {"below", "above"} or None
        The side (the flatter one of two) that stays below three standard deviations; None if neither does.
    flat_at_reference : bool
        Whether at least half of the means of the flat side sit on the ergodic or on the localised value.
    """

    z_below: float
    z_above: float
    disorder_below: float
    disorder_above: float
    split: float
    sign_change: bool
    separated: bool
    flat_side: Literal["below", "above"] | None
    flat_at_reference: bool

    def summary(self) -> str:
        """The outcome in one or two lines."""
        text = (
            f"Size dependence: {self.z_below:+.1f} sd below (near {self.disorder_below:.4g}), "
            f"{self.z_above:+.1f} sd above (near {self.disorder_above:.4g})"
        )
        if self.separated:
            return f"{text}\nopposite signs, resolved on both sides"
        place = " and sits on a reference value" if self.flat_at_reference else ""
        return text if self.flat_side is None else f"{text}\nthe side {self.flat_side} is flat{place}"


@dataclass(frozen=True, eq=False)
class Trends:
    """Slope of y against ln L at each disorder, shape (k,), with the covariance (k, k) of the slopes."""

    disorder: FloatArray
    slope: FloatArray
    covariance: FloatArray

    @property
    def weights(self) -> FloatArray:
        """Weight of each disorder in an average, shape (k,)."""
        return 1 / np.diag(self.covariance)

    def runs(self) -> FloatArray:
        """Significance of the mean trend of disorders i to j - 1 at [i, j], shape (k + 1, k + 1); NaN for j <= i."""
        total = np.concatenate([[0.0], np.cumsum(self.weights * self.slope)])
        with np.errstate(invalid="ignore"):  # the empty runs are NaN on purpose
            return np.asarray((total[None, :] - total[:, None]) / self._run_sd())

    def _run_sd(self) -> FloatArray:
        square = self.covariance * np.outer(self.weights, self.weights)
        sums = np.zeros((self.slope.size + 1,) * 2)
        sums[1:, 1:] = square.cumsum(axis=0).cumsum(axis=1)
        variance = np.diag(sums)[None, :] - 2 * sums + np.diag(sums)[:, None]
        i, j = np.indices(variance.shape)
        return np.asarray(np.where(j > i, np.sqrt(np.maximum(variance, 1e-300)), np.nan))


@dataclass(frozen=True, eq=False)
class LookElsewhere:
    """Distribution of the largest |significance| of any run when nothing depends on size.

    `largest`, shape (n,), holds simulated values in increasing order.
    """

    largest: FloatArray

    @classmethod
    def of(cls, trends: Trends, rng: np.random.Generator, simulated: int = SIMULATED) -> LookElsewhere:
        """Simulate `simulated` sets of trends with the covariance of `trends` about zero."""
        eigenvalues, vectors = np.linalg.eigh(trends.covariance)
        root = vectors * np.sqrt(np.maximum(eigenvalues, 0.0))
        drawn = rng.standard_normal((simulated, len(root))) @ root.T * trends.weights
        total = np.concatenate([np.zeros((simulated, 1)), np.cumsum(drawn, axis=1)], axis=1)
        sd, largest = trends._run_sd(), np.zeros(simulated)
        for length in range(1, total.shape[1]):
            z = np.abs(total[:, length:] - total[:, :-length]) / np.diag(sd, length)
            np.maximum(largest, z.max(axis=1), out=largest)
        return cls(np.sort(largest))

    def log_probability(self, z: float) -> float:
        """Log of the probability that the largest |significance| is at least `z` by chance.

        Beyond the simulated tail it is continued as z^2 times the normal tail, the form of the maximum of sums over
        intervals (Siegmund, Venkatraman, Ann. Statist. 23, 255 (1995)).
        """
        z = max(z, 0.0)
        anchor = float(np.quantile(self.largest, 1 - TAIL))
        if z <= anchor:
            return float(np.log(np.mean(self.largest >= z)))
        return float(np.log(TAIL) + 2 * np.log(z / anchor) + log_ndtr(-z) - log_ndtr(-anchor))

    def corrected(self, z: float) -> float:
        """Signed significance of one test that is as improbable by chance as `z` is as the largest of all runs."""
        return float(-np.sign(z) * ndtri_exp(self.log_probability(abs(z)) - np.log(2.0))) + 0.0  # no negative zero

    def uncorrected(self, z: float) -> float:
        """The largest |significance| that `corrected` turns into `z`."""
        return float(brentq(lambda largest: self.corrected(largest) - z, 0.0, 100.0))


def separation_test(
    source: Curves | Crossings, *, seed: int | np.random.Generator | None = 0
) -> Separation:  # fmt: skip
    """Test for size dependence of opposite sign on both sides of a crossing.

    Parameters
    ----------
    source : Curves or Crossings
        The data, or the crossings found in them (whose smooth curves are then used where grids differ).
    seed : int, Generator or None
        Source of the simulated sets.

    Examples
    --------
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 15), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> separation_test(curves).separated
    True
    """
    rng = np.random.default_rng(seed)
    curves = source if isinstance(source, Curves) else source.curves
    smooth = None if isinstance(source, Curves) else source.smooth
    disorder, means, noise = _table(curves, smooth, rng)
    log_size = np.log(curves.sizes)
    trends = fit_trends(disorder, log_size, means, noise)
    statistic = _held_to_odd_size(trends, log_size, means, noise)
    correction = LookElsewhere.of(trends, rng)
    opposite = _opposite_runs(statistic)
    resolved = correction.uncorrected(THRESHOLD)
    if opposite is not None and opposite[0] >= resolved:
        _, below, above, split = opposite
    else:
        below, above, split = _runs_beside_the_strongest(statistic, resolved)
    return _outcome(curves, trends, statistic, correction, below, above, split)


def fit_trends(disorder: FloatArray, log_size: FloatArray, means: FloatArray, noise: FloatArray) -> Trends:
    """Weighted least squares of y = a + b ln L at each disorder.

    Parameters
    ----------
    disorder : array, shape (k,)
    log_size : array, shape (m,)
    means : array, shape (m, k)
    noise : array, shape (m, k, k)
        Covariance of each size's means.
    """
    weight = 1 / np.diagonal(noise, axis1=1, axis2=2)
    centred = log_size[:, None] - (weight * log_size[:, None]).sum(axis=0) / weight.sum(axis=0)
    lever = weight * centred / (weight * centred**2).sum(axis=0)
    slope = (lever * means).sum(axis=0)
    return Trends(disorder, slope, np.einsum("mi,mij,mj->ij", lever, noise, lever))


def shared_disorders(curves: Curves) -> FloatArray | None:
    """Disorders that all sizes share, shape (k,), where the means can be compared there; None if they are too few."""
    low, high = curves.common_range
    shared = curves.curves[0].disorder
    for curve in curves.curves[1:]:
        shared = np.intersect1d(shared, curve.disorder)
    most = max(np.count_nonzero((c.disorder >= low) & (c.disorder <= high)) for c in curves.curves)
    return shared if shared.size >= MIN_DISORDERS and shared.size >= most / 2 else None


def _table(
    curves: Curves, smooth: tuple[SmoothCurve, ...] | None, rng: np.random.Generator
) -> tuple[FloatArray, FloatArray, FloatArray]:  # fmt: skip
    """Disorders (k,), means (m, k) and covariances (m, k, k): measured where all sizes share enough disorders."""
    shared = shared_disorders(curves)
    if shared is not None:
        at = [np.searchsorted(curve.disorder, shared) for curve in curves.curves]
        means = np.array([curve.mean[i] for curve, i in zip(curves.curves, at, strict=True)])
        noise = np.array([curve.noise[np.ix_(i, i)] for curve, i in zip(curves.curves, at, strict=True)])
        return shared, means, noise
    low, high = curves.common_range
    smooth = smooth or smooth_curves(curves, rng=rng)
    inside = [(curve.grid >= low) & (curve.grid <= high) for curve in smooth]
    places = np.unique(np.linspace(0, np.count_nonzero(inside[0]) - 1, SMOOTH_POINTS).round().astype(int))
    drawn = [curve.draws[:, mask][:, places] for curve, mask in zip(smooth, inside, strict=True)]
    noise = np.array([np.cov(draws, rowvar=False) for draws in drawn])
    return smooth[0].grid[inside[0]][places], np.array([draws.mean(axis=0) for draws in drawn]), noise


def _held_to_odd_size(trends: Trends, log_size: FloatArray, means: FloatArray, noise: FloatArray) -> FloatArray:
    """Significance of every run, held to 3/2 of the smallest with one size left out, and to 0 if the sign changes."""
    full = trends.runs()
    if log_size.size < 3:  # nothing can be left out of two
        return full
    sign, held = np.sign(full), np.abs(full)
    for left_out in range(log_size.size):
        keep = np.arange(log_size.size) != left_out
        without = fit_trends(trends.disorder, log_size[keep], means[keep], noise[keep]).runs()
        held = np.minimum(held, ODD_SIZE_FACTOR * np.maximum(sign * without, 0.0))
    return np.asarray(sign * held)


Run = tuple[int, int]


def _opposite_runs(statistic: FloatArray) -> tuple[float, Run, Run, int] | None:
    """Strength of the weaker side, runs below and above, and disorders below the split, where that strength is largest.

    None if no run has a run of the opposite sign beside it.
    """
    points = len(statistic) - 1
    best: tuple[float, Run, Run, int] | None = None
    for split in range(1, points):
        for sign in (+1.0, -1.0):
            below, above = _strongest(sign * statistic, 0, split), _strongest(-sign * statistic, split, points)
            weaker = float(min(sign * statistic[below], -sign * statistic[above]))
            if weaker > (best[0] if best else 0.0):
                best = (weaker, below, above, split)
    return best


def _runs_beside_the_strongest(statistic: FloatArray, resolved: float) -> tuple[Run, Run, int]:
    """Where no change of sign is resolved: the strongest run of all, and what there is on the other side of it.

    The other side is the one with the strongest run of opposite sign, or the longer one if neither has any; of it the
    flat part, in which nothing reaches `resolved`, or all if there is no flat part. A strongest run that covers
    everything is cut in the middle.
    """
    points = len(statistic) - 1
    first, last = _strongest(np.abs(statistic), 0, points)
    if (first, last) == (0, points):
        middle = points // 2
        return _strongest(np.abs(statistic), 0, middle), _strongest(np.abs(statistic), middle, points), middle
    opposite = -np.sign(statistic[first, last]) * statistic
    sides = [side for side in ((0, first), (last, points)) if side[0] < side[1]]
    strengths = [float(opposite[_strongest(opposite, *side)]) for side in sides]
    longer = int(np.argmax([side[1] - side[0] for side in sides]))
    side = sides[int(np.argmax(strengths)) if max(strengths) > 0 else longer]
    side = _flat_part(statistic, side, resolved) or side
    other = _strongest(np.abs(statistic), *side)
    return (other, (first, last), side[1]) if side[1] <= first else ((first, last), other, side[0])


def _flat_part(statistic: FloatArray, side: Run, resolved: float) -> Run | None:
    """The disorders from the far end of a side inwards among which no run reaches `resolved`; None if there are none.

    The strongest run leaves out the disorders where the size dependence only begins; they are not flat.
    """
    first, last = side
    parts = [(first, k) for k in range(last, first, -1)] if first == 0 else [(k, last) for k in range(first, last)]
    strength = np.abs(statistic)
    return next((part for part in parts if strength[_strongest(strength, *part)] < resolved), None)


def _strongest(statistic: FloatArray, first: int, last: int) -> Run:
    """Run (i, j) with first <= i < j <= last and the largest statistic."""
    part = np.nan_to_num(statistic[first : last + 1, first : last + 1], nan=-np.inf)
    i, j = np.unravel_index(np.argmax(part), part.shape)
    return first + int(i), first + int(j)


def _outcome(
    curves: Curves, trends: Trends, statistic: FloatArray, correction: LookElsewhere, below: Run, above: Run, split: int
) -> Separation:
    z = (correction.corrected(statistic[below]), correction.corrected(statistic[above]))
    centres = [float(np.average(trends.disorder[slice(*r)], weights=trends.weights[slice(*r)])) for r in (below, above)]
    edge = float(trends.disorder[split - 1 : split + 1].mean())
    sign_change = z[0] * z[1] < 0
    resolved = min(abs(z[0]), abs(z[1])) >= THRESHOLD
    flat: Literal["below", "above"] | None = None
    if not resolved:
        flat = "below" if abs(z[0]) < abs(z[1]) else "above"
    at_reference = flat is not None and _at_reference(curves, edge, flat)
    return Separation(
        z[0], z[1], centres[0], centres[1], edge, sign_change, sign_change and resolved, flat, at_reference
    )


def _at_reference(curves: Curves, edge: float, side: Literal["below", "above"]) -> bool:
    _, disorder, mean, error = curves.flat()
    mask: npt.NDArray[np.bool_] = disorder < edge if side == "below" else disorder > edge
    for reference in (curves.labels.ergodic_value, curves.labels.localised_value):
        if reference is not None:
            room = np.maximum(2 * error[mask], REFERENCE_TOLERANCE * abs(reference))
            if np.mean(np.abs(mean[mask] - reference) <= room) >= 0.5:
                return True
    return False
