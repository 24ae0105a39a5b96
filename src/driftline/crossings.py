"""Where the curves of two sizes cross, from joint posterior draws of all curves.

Which crossing is taken where a draw has several. Noise makes curves cross many times wherever they coincide, so the
first root, or the steepest, would say nothing. With Z the difference (larger size minus smaller) in units of its
posterior standard deviation, w = |mean of Z| and s = +1 or -1 the expected direction, each draw's crossing is the
root of s Z from plus to minus that maximises

    G(c) = integral from the window's lower end to c of s w Z dW  -  integral from c to its upper end of s w Z dW,

the place that best splits the window into a side where the larger size lies above and one where it lies below (the
change-point estimate of a step; maxima of G are such roots, since dG/dc = 2 s w Z(c)). The weight w keeps a plateau,
where Z is noise about zero, from outvoting the places where the curves differ. The direction is one for all
draws and pairs: in a scaling y = F((W - W_c) L^(1/nu)) the curve of the larger size is the steeper one at the
crossing, so s follows from whether the curves fall or rise; only if the other direction is resolved on both sides,
and better, do the data overrule this.

Draws are shared between pairs: crossings of pairs with a size in common keep their covariance.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
import numpy.typing as npt

from driftline import numerals
from driftline.blocks import Table
from driftline.curves import Curves, FloatArray, Labels
from driftline.display import Shown, symbol
from driftline.errors import InputError
from driftline.inference.intervals import Interval
from driftline.plain import attributes
from driftline.smoothing import SmoothCurve, smooth_curves

#: Below this probability of a crossing nothing is said about where it is.
SPEAKABLE = 0.05
#: Fewer draws give no 95 % interval.
MIN_DRAWS = 100
#: Separation in standard deviations from which the data may overrule the expected direction of the crossing.
RESOLVED = 3.0


@dataclass(frozen=True, eq=False)
class Crossing:
    """Crossing of the curves of two sizes.

    Attributes
    ----------
    sizes : tuple of float
        The smaller and the larger size.
    probability : float
        Fraction of the joint draws that cross, in the expected direction, inside the common window.
    separated : float
        Posterior probability that the two curves are resolved with opposite sign on both sides of the crossing: the
        share of draws that cross and in which no deviation of the difference from its mean, at any disorder of a
        side, is as large as the separation found on that side. Counting every disorder makes it a simultaneous
        statement; on a plateau where the curves coincide it scatters over 0 to 1 and does not pile up near 1.
    disorder, value : Interval or None
        Position of the crossing and the observable there, given that the curves cross inside the window; None where
        `probability` is below 0.05.
    inverse_nu : Interval or None
        ln[y'(W*, L2) / y'(W*, L1)] / ln(L2 / L1) over the draws in which both slopes have the same sign (quotients:
        Nightingale, Physica A 83, 561 (1976)); None where fewer than half of the crossing draws do.
    inverse_nu_valid : float
        Share of the crossing draws in which both slopes have the same sign.
    draws : array, shape (n,)
        Crossing disorder of each joint draw, NaN where that draw has none.
    adjacent : bool
        Whether no other size lies between the two.
    """

    sizes: tuple[float, float]
    probability: float
    separated: float
    disorder: Interval | None
    value: Interval | None
    inverse_nu: Interval | None
    draws: FloatArray
    adjacent: bool
    inverse_nu_valid: float = 0.0

    def to_dict(self) -> dict[str, Any]:
        """This crossing as `result.json` holds it."""
        return attributes(self, "sizes", "probability", "separated", "disorder", "value", "inverse_nu")


@dataclass(frozen=True, eq=False)
class Crossings(Shown):
    """Crossings of all pairs of sizes, with the smooth curves they come from.

    Attributes
    ----------
    pairs : tuple of Crossing
        All pairs, ordered by the smaller and then the larger size.
    smooth : tuple of SmoothCurve
        Smooth curve of each size.
    window : tuple of float
        Common disorder range, in which crossings were sought.
    labels : Labels
        What the numbers are.
    curves : Curves
        The measured points.
    direction : int
        +1 where the larger size passes from above to below with growing disorder, -1 for the opposite.
    """

    pairs: tuple[Crossing, ...]
    smooth: tuple[SmoothCurve, ...]
    window: tuple[float, float]
    labels: Labels
    curves: Curves
    direction: int

    @property
    def adjacent(self) -> tuple[Crossing, ...]:
        """The pairs of neighbouring sizes, which feed the drift."""
        return tuple(pair for pair in self.pairs if pair.adjacent)

    def to_dict(self) -> list[dict[str, Any]]:
        """The list `crossings` of `result.json`."""
        return [pair.to_dict() for pair in self.pairs]

    def table(self, *, every: bool = False) -> Table:
        """One row for each pair of adjacent sizes, or for `every` pair."""
        rows = tuple(
            (
                f"{each.sizes[0]:g}, {each.sizes[1]:g}",
                numerals.probability(each.probability),
                numerals.probability(each.separated),
                numerals.short(each.disorder),
                numerals.bracket(each.disorder),
                numerals.short(each.inverse_nu),
            )
            for each in (self.pairs if every else self.adjacent)
        )
        columns = ("sizes", "prob.", "separated", symbol(self.labels.disorder_symbol), "95 %", "1/nu")
        return Table(f"Crossings of {'all pairs of' if every else 'adjacent'} sizes", columns, rows)

    def shown(self) -> tuple[Table, ...]:
        """The table of the adjacent sizes."""
        return (self.table(),)

    def summary(self) -> str:
        """A table of at most 80 columns, one line for each pair."""
        symbol, unit = self.labels.disorder_symbol, self.labels.disorder_unit
        head = f"Crossings in {symbol} = {self.window[0]:g} to {self.window[1]:g}{' ' + unit if unit else ''}"
        columns = f"{'sizes':>13}  {'P(cross)':>8}  {'separated':>9}  {symbol + '* (68 %)':>22}  {'1/nu (68 %)':>18}"
        return "\n".join([head, columns, *(_line(pair) for pair in self.pairs)])


def find_crossings(
    curves: Curves, *, draws: int = 2000, seed: int | np.random.Generator | None = 0
) -> Crossings:  # fmt: skip
    """Crossings of every pair of sizes.

    Parameters
    ----------
    curves : Curves
        The measured points.
    draws : int
        Number of joint posterior draws of all curves, at least 100.
    seed : int, Generator or None
        Source of the draws.

    Raises
    ------
    InputError
        If `draws` is below 100.

    Examples
    --------
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12], np.linspace(2, 6, 15), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> find_crossings(curves, draws=500).pairs[0].probability
    1.0
    """
    if draws < MIN_DRAWS:
        raise InputError(f"at least {MIN_DRAWS} draws are needed for an interval, not {draws}", where="find_crossings")
    smooth = smooth_curves(curves, draws=draws, rng=seed)
    window = curves.common_range
    inside = [_restrict(curve, window) for curve in smooth]
    pairs = list(combinations(range(len(inside)), 2))
    direction = _direction(inside)
    found = tuple(_cross(inside[i], inside[j], direction, adjacent=j == i + 1) for i, j in pairs)
    return Crossings(found, smooth, window, curves.labels, curves, direction)


def _restrict(curve: SmoothCurve, window: tuple[float, float]) -> SmoothCurve:
    mask = (curve.grid >= window[0]) & (curve.grid <= window[1])
    return SmoothCurve(
        curve.size, curve.grid[mask], curve.mean[mask], curve.sd[mask], curve.draws[:, mask], curve.slope_draws[:, mask]
    )


def _direction(smooth: list[SmoothCurve]) -> int:
    """Expected direction: the one in which the larger size is the steeper, unless the other is clearly seen."""
    fall = np.mean([curve.mean[0] - curve.mean[-1] for curve in smooth])
    expected = 1 if fall >= 0 else -1
    seen = {+1: 0.0, -1: 0.0}
    pairs = list(combinations(smooth, 2))
    for small, large in pairs:
        z = (large.mean - small.mean) / np.hypot(large.sd, small.sd)
        for sign in seen:
            below, above = np.maximum.accumulate(sign * z), np.maximum.accumulate(-sign * z[::-1])[::-1]
            seen[sign] += float(np.max(np.minimum(below, above))) / len(pairs)
    overruled = seen[-expected] > max(seen[expected], RESOLVED)
    return -expected if overruled else expected


def _cross(small: SmoothCurve, large: SmoothCurve, direction: int, *, adjacent: bool) -> Crossing:
    grid, difference = small.grid, large.draws - small.draws
    slope = large.slope_draws - small.slope_draws
    mean, sd = difference.mean(axis=0), difference.std(axis=0)
    step, has = _best_root(grid, direction * difference / sd)
    position, fraction = _refine(grid, difference, slope, step, has)
    probability = float(np.mean(has))
    separated = _separated(direction * mean / sd, direction * (difference - mean) / sd, step, has)
    sizes = (small.size, large.size)
    if probability < SPEAKABLE:
        return Crossing(sizes, probability, separated, None, None, None, position, adjacent)
    value = _at(large.draws, step, fraction, has)
    inverse_nu, valid = _inverse_nu(small, large, step, fraction, has)
    disorder = Interval.of_draws(position[has])
    return Crossing(
        sizes, probability, separated, disorder, Interval.of_draws(value), inverse_nu, position, adjacent, valid
    )


def _best_root(grid: FloatArray, z: FloatArray) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.bool_]]:
    """Grid step that holds each draw's best change of `z` from plus to minus, and whether it has one.

    The integrals are trapezia; the split inside a step is good to its width, which only matters between candidates.
    """
    weighted = z * np.abs(z.mean(axis=0))
    area = np.cumsum((weighted[:, 1:] + weighted[:, :-1]) / 2 * np.diff(grid), axis=1)
    gain = 2 * area - area[:, -1:]
    candidate = (z[:, :-1] > 0) & (z[:, 1:] <= 0)
    gain[~candidate] = -np.inf
    return np.argmax(gain, axis=1), np.asarray(candidate.any(axis=1))


def _refine(
    grid: FloatArray, difference: FloatArray, slope: FloatArray, step: npt.NDArray[np.intp],
    has: npt.NDArray[np.bool_],
) -> tuple[FloatArray, FloatArray]:  # fmt: skip
    """Root of the cubic through values and slopes at both ends of the step: disorder, and its place in the step."""
    rows = np.arange(len(step))
    width = np.diff(grid)[step]
    y0, y1 = difference[rows, step], difference[rows, step + 1]
    m0, m1 = width * slope[rows, step], width * slope[rows, step + 1]
    low, high = np.zeros_like(y0), np.ones_like(y0)
    for _ in range(30):  # bisection keeps the bracket whatever the slopes say; 2^-30 of a step is far enough
        t = (low + high) / 2
        cubic = y0 * (1 + 2 * t) * (1 - t) ** 2 + m0 * t * (1 - t) ** 2 + y1 * t**2 * (3 - 2 * t) + m1 * t**2 * (t - 1)
        same = np.sign(cubic) == np.sign(y0)
        low, high = np.where(same, t, low), np.where(same, high, t)
    fraction = (low + high) / 2
    return np.where(has, grid[step] + fraction * width, np.nan), fraction


def _at(
    draws: FloatArray, step: npt.NDArray[np.intp], fraction: FloatArray, has: npt.NDArray[np.bool_]
) -> FloatArray:  # fmt: skip
    rows, left, t = np.flatnonzero(has), step[has], fraction[has]
    return np.asarray((1 - t) * draws[rows, left] + t * draws[rows, left + 1])


def _inverse_nu(
    small: SmoothCurve, large: SmoothCurve, step: npt.NDArray[np.intp], fraction: FloatArray,
    has: npt.NDArray[np.bool_],
) -> tuple[Interval | None, float]:  # fmt: skip
    ratio = _at(large.slope_draws, step, fraction, has) / _at(small.slope_draws, step, fraction, has)
    valid = np.isfinite(ratio) & (ratio > 0)
    share = float(np.mean(valid))
    if share < 0.5:
        return None, share
    return Interval.of_draws(np.log(ratio[valid]) / np.log(large.size / small.size)), share


def _separated(
    centre: FloatArray, deviation: FloatArray, step: npt.NDArray[np.intp], has: npt.NDArray[np.bool_]
) -> float:  # fmt: skip
    """Share of draws that cross and whose deviations cannot undo the separation on either side.

    `centre`, shape (g,), is the mean difference in standard deviations, positive below the crossing; `deviation`,
    shape (n, g), are the draws about it in the same unit. The sides are divided at the median crossing. The largest
    deviation is taken over the whole window, since the separation could have been found anywhere.
    """
    if not has.any():
        return 0.0
    split = int(np.median(step[has]))
    below, above = centre[: split + 1].max(), (-centre[split + 1 :]).max()
    resolved = (np.max(-deviation, axis=1) < below) & (np.max(deviation, axis=1) < above)
    return float(np.mean(has & resolved))


def _line(pair: Crossing) -> str:
    sizes = f"{pair.sizes[0]:g}, {pair.sizes[1]:g}"
    disorder = "-" if pair.disorder is None else _plus_minus(pair.disorder)
    slope = "-" if pair.inverse_nu is None else _plus_minus(pair.inverse_nu)
    return f"{sizes:>13}  {pair.probability:>8.3f}  {pair.separated:>9.3f}  {disorder:>22}  {slope:>18}"


def _plus_minus(interval: Interval) -> str:
    """Median with the distances to the ends of the 68 % interval, to two figures of the smaller one."""
    up, down = interval.high68 - interval.median, interval.median - interval.low68
    smallest = max(min(up, down), 1e-300)
    digits = min(max(1 - int(np.floor(np.log10(smallest))), 0), 8)
    return f"{interval.median:.{digits}f} +{up:.{digits}f} -{down:.{digits}f}"
