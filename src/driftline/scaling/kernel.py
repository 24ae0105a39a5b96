"""Compiled inner loops of the marginal likelihood.

For points with independent errors the spline's normal matrix is banded (four functions overlap); everything dense is
put into a border:

    [ A    U    G    b  ]     A  banded: Phi^T C^-1 Phi + s^2 D^T D / tau^2
    [ U^T  -I   0    0  ]     U  root of the rank-two precision of the constant and linear part, A + U U^T is meant
    [ G^T  0    H    g  ]     G  correction terms, H their own block with its prior
    [ b^T  0    g^T  yy ]     b, g, yy  products with the data

Eliminating A, then U, then H leaves s^2 Q in the last corner, and the pivots give the determinant; the elimination
of the block -I turns A into A + U U^T (matrix-determinant lemma).

Points of one size that share their disorder realisations fill the normal matrix; then only the products with the
inverse covariance use that a row of Phi has four entries, and the factor is dense.

Both are several times faster than batched dense algebra (`tests/benchmarks` measures it), which `likelihood.py` keeps
as `Posterior.system` and the tests compare with.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
from numba import njit

from driftline.curves import FloatArray

BAND = 4  # cubic B-splines: four overlap
RANK = 2  # constant and linear part
TERMS = 2  # constant and linear part of the correction


def _compiled(function: Callable[..., Any]) -> Callable[..., Any]:
    """Machine code of `function`, kept on disk for the next run where there is a place to keep it."""
    try:
        return njit(cache=True, nogil=True, error_model="numpy")(function)
    except RuntimeError:  # neither the package nor the home directory can be written: compile anew each time
        return njit(nogil=True, error_model="numpy")(function)


class Prior(NamedTuple):
    """What does not depend on the data.

    Parameters
    ----------
    log_tau, log_s : array, shape (batch,)
    roughness : array, shape (count, 4)
        Lower band of D^T D: element (k, d) belongs to functions k and k + d.
    line : array, shape (count, 2)
        Root N of the precision of constant and linear part, N N^T.
    correction_sd : float
        Prior standard deviation of the correction terms.
    """

    log_tau: FloatArray
    log_s: FloatArray
    roughness: FloatArray
    line: FloatArray
    correction_sd: float


def solve_batch(
    u: FloatArray, correction: FloatArray | None, amplitude: FloatArray | None, y: FloatArray, root: FloatArray,
    prior: Prior,
) -> tuple[FloatArray, FloatArray]:  # fmt: skip
    """s^2 Q and ln det(M + s^2 P) of a batch, each of shape (batch,); NaN where a pivot is not positive.

    Parameters
    ----------
    u : array, shape (batch, points)
        Positions in [0, 1].
    correction, amplitude : array, shape (batch, points), or None
        Weight of the irrelevant term; factor of the whole model.
    y : array, shape (batch or 1, points)
        Data, the same for all or one row each.
    root : array, shape (points,)
        Inverse standard errors.
    prior : Prior
    """
    return _solve_batch(u, _whole(correction), _whole(amplitude), y, root, *prior)  # type: ignore[no-any-return]


def _whole(table: FloatArray | None) -> FloatArray:
    """As the loops take it: in one piece, without entries where there is none."""
    return np.empty((0, 0)) if table is None else np.ascontiguousarray(table)


@_compiled
def _solve_batch(u, correction, amplitude, y, root, log_tau, log_s, roughness, line, correction_sd):  # type: ignore[no-untyped-def]
    batch, points = u.shape
    count = line.shape[0]
    cells = count - 3
    terms = TERMS if correction.size else 0
    border = RANK + terms + 1
    last = border - 1
    rows = y.shape[0] - 1
    quadratic = np.empty(batch)
    log_det = np.empty(batch)
    band = np.empty((count, BAND))
    side = np.empty((count, border))
    corner = np.empty((border, border))
    four = np.empty(BAND)
    extra = np.empty(border)
    for k in range(batch):
        s2 = np.exp(2 * log_s[k])
        stiff = s2 * np.exp(-2 * log_tau[k])
        soft = np.exp(log_s[k])
        for i in range(count):
            for d in range(BAND):
                band[i, d] = stiff * roughness[i, d]
            for c in range(border):
                side[i, c] = soft * line[i, c] if c < RANK else 0.0
        for a in range(border):
            for c in range(border):
                corner[a, c] = 0.0
        for a in range(RANK):
            corner[a, a] = -1.0
        for a in range(RANK, last):
            corner[a, a] = s2 / correction_sd**2
        # sums over the points
        for p in range(points):
            scaled = u[k, p] * cells
            first = min(int(scaled), cells - 1)
            t = scaled - first
            r = 1.0 - t
            factor = root[p]
            if amplitude.size:
                factor *= amplitude[k, p]
            four[0] = factor * r * r * r / 6
            four[3] = factor * t * t * t / 6
            four[1] = factor * (2 / 3 - t * t + t * t * t / 2)
            four[2] = factor * (2 / 3 - r * r + r * r * r / 2)
            if terms:
                extra[RANK] = factor * correction[k, p]
                extra[RANK + 1] = extra[RANK] * (2 * u[k, p] - 1)
            extra[last] = root[p] * y[min(k, rows), p]
            for a in range(BAND):
                for d in range(BAND - a):
                    band[first + a, d] += four[a] * four[a + d]
                for c in range(RANK, border):
                    side[first + a, c] += four[a] * extra[c]
            for a in range(RANK, border):
                for c in range(RANK, a + 1):
                    corner[a, c] += extra[a] * extra[c]
        # banded Cholesky factor in place, with the border carried along
        total = 0.0
        for i in range(count):
            pivot = np.sqrt(band[i, 0])
            total += np.log(pivot)
            band[i, 0] = pivot
            width = min(BAND, count - i)
            for d in range(1, width):
                band[i, d] /= pivot
            for c in range(border):
                side[i, c] /= pivot
            for d in range(1, width):
                for e in range(d, width):
                    band[i + d, e - d] -= band[i, d] * band[i, e]
                for c in range(border):
                    side[i + d, c] -= band[i, d] * side[i, c]
            for a in range(border):
                for c in range(a + 1):
                    corner[a, c] -= side[i, a] * side[i, c]
        # the corner, by elimination without roots: its first two pivots are negative
        for i in range(last):
            pivot = corner[i, i]
            total += 0.5 * np.log(-pivot if i < RANK else pivot)
            for a in range(i + 1, border):
                share = corner[a, i] / pivot
                for c in range(i + 1, a + 1):
                    corner[a, c] -= share * corner[c, i]
        quadratic[k] = corner[last, last]
        log_det[k] = 2 * total
    return quadratic, log_det


def solve_correlated(
    u: FloatArray, correction: FloatArray | None, amplitude: FloatArray | None, y: FloatArray, precision: FloatArray,
    starts: npt.NDArray[np.int64], prior: Prior,
) -> tuple[FloatArray, FloatArray]:  # fmt: skip
    """The same as `solve_batch` for points that are correlated within a size.

    Parameters
    ----------
    precision : array, shape (points, points)
        Inverse covariance, of which only the blocks of the sizes are used.
    starts : array of int, shape (sizes + 1,)
        First point of every size, and the number of points.
    u, correction, amplitude, y, prior
        As for `solve_batch`.
    """
    return _solve_correlated(  # type: ignore[no-any-return]
        u, _whole(correction), _whole(amplitude), y, precision, starts, *prior
    )


@_compiled
def _solve_correlated(u, correction, amplitude, y, precision, starts, log_tau, log_s, roughness, line, correction_sd):  # type: ignore[no-untyped-def]
    batch, points = u.shape
    count = line.shape[0]
    cells = count - 3
    terms = TERMS if correction.size else 0
    last = count + terms  # column of the data
    rows = y.shape[0] - 1
    quadratic = np.empty(batch)
    log_det = np.empty(batch)
    first = np.empty(points, np.int64)
    four = np.empty((points, BAND))
    extra = np.empty((points, TERMS + 1))  # correction terms, then the data
    matrix = np.empty((last + 1, last + 1))
    weighted = np.empty(last + 1)
    for k in range(batch):
        s2 = np.exp(2 * log_s[k])
        stiff = s2 * np.exp(-2 * log_tau[k])
        matrix[:, :] = 0.0
        for i in range(count):  # the prior, lower triangle
            for d in range(min(BAND, count - i)):
                matrix[i + d, i] = stiff * roughness[i, d]
            for j in range(i + 1):
                for c in range(RANK):
                    matrix[i, j] += s2 * line[i, c] * line[j, c]
        for i in range(count, last):
            matrix[i, i] = s2 / correction_sd**2
        for p in range(points):
            scaled = u[k, p] * cells
            first[p] = min(int(scaled), cells - 1)
            t = scaled - first[p]
            r = 1.0 - t
            factor = amplitude[k, p] if amplitude.size else 1.0
            four[p, 0] = factor * r * r * r / 6
            four[p, 3] = factor * t * t * t / 6
            four[p, 1] = factor * (2 / 3 - t * t + t * t * t / 2)
            four[p, 2] = factor * (2 / 3 - r * r + r * r * r / 2)
            if terms:
                extra[p, 0] = factor * correction[k, p]
                extra[p, 1] = extra[p, 0] * (2 * u[k, p] - 1)
            extra[p, terms] = y[min(k, rows), p]
        for block in range(starts.size - 1):
            for p in range(starts[block], starts[block + 1]):
                weighted[:] = 0.0  # row p of C^-1 times (Phi, y)
                for q in range(starts[block], starts[block + 1]):
                    c = precision[p, q]
                    for a in range(BAND):
                        weighted[first[q] + a] += c * four[q, a]
                    for e in range(terms + 1):
                        weighted[count + e] += c * extra[q, e]
                for a in range(BAND):
                    i = first[p] + a
                    for j in range(i + 1):
                        matrix[i, j] += four[p, a] * weighted[j]
                for e in range(terms + 1):
                    for j in range(count + e + 1):
                        matrix[count + e, j] += extra[p, e] * weighted[j]
        total = 0.0
        for i in range(last):  # Cholesky factor, the data as the last row
            for j in range(i):
                value = matrix[i, j]
                for m in range(j):
                    value -= matrix[i, m] * matrix[j, m]
                matrix[i, j] = value / matrix[j, j]
            pivot = matrix[i, i]
            for m in range(i):
                pivot -= matrix[i, m] * matrix[i, m]
            matrix[i, i] = np.sqrt(pivot)
            total += np.log(matrix[i, i])
        corner = matrix[last, last]
        for j in range(last):
            value = matrix[last, j]
            for m in range(j):
                value -= matrix[last, m] * matrix[j, m]
            matrix[last, j] = value / matrix[j, j]
            corner -= matrix[last, j] * matrix[last, j]
        quadratic[k] = corner
        log_det[k] = 2 * total
    return quadratic, log_det
