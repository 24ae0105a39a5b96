"""Whether the points of one size share their disorder realisations, and what covariance follows from it.

The same random numbers rescaled to every disorder strength make the points of one size correlated. Labels, or the user,
say so; where they do not, the correlation of values in the order of the file is looked at, so that it can be told.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from driftline.covariance import shared_covariance
from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.readers.averages import Estimate
from driftline.readers.points import Point
from driftline.readers.repeats import IntArray


@dataclass(frozen=True, eq=False)
class Pairing:
    """How the points of one size hang together.

    Attributes
    ----------
    shared : bool
        Whether the points are treated as correlated.
    correlation, z : float or None
        Mean correlation of the values at neighbouring disorders, and its distance from zero in standard errors; None
        where values cannot be matched.
    overlap : array, shape (realisations, k), or None
        Row of each realisation in each point, -1 where it is missing; None where values cannot be matched.
    """

    shared: bool
    correlation: float | None
    z: float | None
    overlap: IntArray | None

    def covariance(self, estimates: Sequence[Estimate]) -> FloatArray | None:
        """Covariance of the averages, shape (k, k); None for independent points."""
        if not self.shared or self.overlap is None:
            return None
        columns = zip(estimates, self.overlap.T, strict=True)
        influence = np.stack([np.where(at >= 0, found.influence[at], 0.0) for found, at in columns], axis=1)
        return shared_covariance(influence, np.array([found.error for found in estimates]), self.realisations)

    @property
    def realisations(self) -> int:
        """Independent realisations behind a correlation, as one number where some are missing.

        A sample correlation of points a and b scatters by sqrt(n_ab / (n_a n_b)) with n_ab realisations in common, the
        dilution by those that are not in common included; this is the inverse of the mean of the squares.
        """
        assert self.overlap is not None
        present = (self.overlap >= 0).astype(np.float64)
        common, counts = present.T @ present, present.sum(axis=0)
        off = ~np.eye(counts.size, dtype=np.bool_)
        scatter = float(np.mean((common / np.outer(counts, counts))[off]))
        return round(1 / scatter) if scatter > 0 else int(counts.min())


def pairing(points: Sequence[Point], paired: bool | None) -> Pairing:
    """How `points` of one size hang together, given what the user says (`paired`; None leaves it to the labels).

    Raises
    ------
    InputError
        If they are said to be paired but cannot be matched.
    """
    overlap = _matched(points)
    if paired and overlap is None:
        shortest = min(points, key=lambda point: point.values.size)
        raise InputError(f"the values are said to be paired, but {_obstacle(points)}", where=shortest.where)
    correlation, z = (None, None) if overlap is None else _neighbours(points, overlap)
    labelled = points[0].labels is not None
    shared = bool(paired or (paired is None and labelled)) and overlap is not None
    return Pairing(shared, correlation, z, overlap)


def _obstacle(points: Sequence[Point]) -> str:
    if all(point.labels is not None for point in points):
        return "no realisation label occurs at two disorders; correct the labels, or do not declare them paired"
    few, many = (f(points, key=lambda point: point.values.size) for f in (min, max))
    return (
        f"not every disorder has realisation labels, and there are {few.values.size} realisations at disorder "
        f"{few.disorder:g} and {many.values.size} at {many.disorder:g}, so they cannot be matched; give labels, or do "
        "not declare them paired"
    )


def _matched(points: Sequence[Point]) -> IntArray | None:
    """Row of each realisation in each point, shape (realisations, k), -1 where missing; None without any in common."""
    known = [point.labels for point in points if point.labels is not None]
    if len(known) < len(points):
        counts = {point.values.size for point in points}
        matched = not known and len(counts) == 1  # by their order in the file
        return np.tile(np.arange(counts.pop())[:, None], len(points)) if matched else None
    every, times = np.unique(np.concatenate(known), return_counts=True)
    if not (times > 1).any():
        return None
    overlap = np.full((every.size, len(points)), -1, dtype=np.int64)
    for column, labels in enumerate(known):
        overlap[np.searchsorted(every, labels), column] = np.arange(labels.size)
    return overlap


def following(points: Sequence[Point]) -> tuple[float | None, float | None]:
    """Mean correlation of values with the next ones in the file, and its z; None for labelled or sorted values.

    States of one realisation stand together in a file; where nothing tells them apart they count as realisations, and
    show themselves by this.
    """
    pairs = []
    for point in points:
        step = np.diff(point.values)
        if point.labels is None and step.min(initial=0) < 0 < step.max(initial=0):
            pairs.append((point.values[:-1], point.values[1:]))
    return _mean_correlation(pairs)


def _neighbours(points: Sequence[Point], overlap: IntArray) -> tuple[float | None, float | None]:
    """Mean correlation at neighbouring disorders and its z."""
    pairs = []
    for (first, at), (second, to) in pairwise(zip(points, overlap.T, strict=True)):
        both = (at >= 0) & (to >= 0)
        pairs.append((first.values[at[both]], second.values[to[both]]))
    return _mean_correlation(pairs)


def _mean_correlation(pairs: Sequence[tuple[FloatArray, FloatArray]]) -> tuple[float | None, float | None]:
    """Mean correlation of pairs of lists, and its z, from the variance 1/(n - 1) of independent values.

    That variance holds for values of any distribution, since it is that over all ways to match them (E. J. G. Pitman,
    Supplement to the Journal of the Royal Statistical Society 4, 225 (1937)).
    """
    found, freedom = [], []
    for x, y in pairs:
        if x.size > 2 and np.ptp(x) > 0 and np.ptp(y) > 0:
            found.append(float(np.corrcoef(x, y)[0, 1]))
            freedom.append(x.size - 1)
    if not found:
        return None, None
    weight = np.sqrt(freedom)
    return float(np.mean(found)), float(weight @ found / np.sqrt(len(found)))
