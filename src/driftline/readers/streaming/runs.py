"""Rows of a long table, and the runs in them.

Rows of one point, and inside it of one realisation, mostly stand together. Runs of them are found and summed: of 10^8
rows with fifty eigenstates a realisation that leaves two million sums.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from driftline.curves import LARGEST, FloatArray

IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Rows:
    """Some rows of a long table: equally long arrays, and the fraction of the table that is read with them.

    Values are finite and sizes positive.
    """

    size: FloatArray
    disorder: FloatArray
    value: FloatArray
    realisation: IntArray | None
    fraction: float


@dataclass(frozen=True, eq=False)
class Runs:
    """What one pass over some rows finds.

    Parameters
    ----------
    point : array of int, shape (p,)
        Row at which each run of one point begins.
    length : array of int, shape (p,)
        Rows of each of these runs.
    mean, squares : array, shape (p,)
        Mean of their values, and the sum of squared deviations from it.
    first : array of int, shape (r,)
        Row at which each run of one realisation begins; empty where no labels are asked for.
    total : array, shape (r,)
        Sum of its values.
    """

    point: IntArray
    length: IntArray
    mean: FloatArray
    squares: FloatArray
    first: IntArray
    total: FloatArray


def sound(rows: Rows) -> bool:
    """Whether all numbers are finite (up to ``LARGEST``) and all sizes positive."""
    if not 0 < rows.size.min() <= rows.size.max() <= LARGEST:  # NaN: not
        return False
    # one pass each settles nearly every case: a sum of squares is larger than the square of any of its terms
    with np.errstate(all="ignore"):
        return all(
            np.dot(array, array) <= LARGEST**2 or -LARGEST <= array.min() <= array.max() <= LARGEST
            for array in (rows.disorder, rows.value)
        )


def runs(rows: Rows, *, labelled: bool) -> Runs:
    """Runs of points, and of realisations if `labelled`; the rows must be `sound`.

    Plain array operations: on parts that fit into the cache they are as fast as a compiled loop.
    """
    if _constant(rows.size) and _constant(rows.disorder):
        change = np.zeros(rows.value.size, dtype=np.bool_)
        change[0] = True
        point = np.zeros(1, dtype=np.int64)
    else:
        change = changes(rows.size) | changes(rows.disorder)
        point = np.flatnonzero(change)
    length = np.diff(point, append=rows.value.size)
    mean, squares = _spread(rows.value, point, length)
    if not labelled or rows.realisation is None:
        return Runs(point, length, mean, squares, point[:0], mean[:0])
    change[1:] |= rows.realisation[1:] != rows.realisation[:-1]
    first = np.flatnonzero(change)
    return Runs(point, length, mean, squares, first, np.add.reduceat(rows.value, first))


def _constant(array: FloatArray) -> bool:
    return bool(array[0] == array[-1] and (array == array[0]).all())


def changes(array: npt.NDArray[Any]) -> npt.NDArray[np.bool_]:
    """Whether an element differs from the one before; true for the first."""
    result = np.ones(array.size, dtype=np.bool_)
    np.not_equal(array[1:], array[:-1], out=result[1:])
    return result


def _spread(value: FloatArray, point: IntArray, length: IntArray) -> tuple[FloatArray, FloatArray]:
    """Means of runs and the squared deviations from them; plain sums of squares lose digits where the mean is large."""
    if point.size == 1:
        mean = value.mean()
        deviation = value - mean
        return np.array([mean]), np.array([np.dot(deviation, deviation)])
    mean = np.add.reduceat(value, point) / length
    deviation = value - np.repeat(mean, length)
    deviation *= deviation
    return mean, np.add.reduceat(deviation, point)
