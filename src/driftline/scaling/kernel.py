"""Compiled inner loop of the marginal likelihood for points with independent errors.

The spline's normal matrix is banded (four functions overlap); everything dense is put into a border:

    [ A    U    G    b  ]     A  banded: Phi^T C^-1 Phi + s^2 D^T D / tau^2
    [ U^T  -I   0    0  ]     U  root of the rank-two precision of the constant and linear part, A + U U^T is meant
    [ G^T  0    H    g  ]     G  correction terms, H their own block with its prior
    [ b^T  0    g^T  yy ]     b, g, yy  products with the data

Eliminating A, then U, then H leaves s^2 Q in the last corner, and the pivots give the determinant; the elimination
of the block -I turns A into A + U U^T (matrix-determinant lemma).  Several times faster than batched dense algebra
(`tests/benchmarks` measures it), which `likelihood.py` keeps for correlated points and the tests compare with.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
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


def solve_batch(
    u: FloatArray, correction: FloatArray | None, amplitude: FloatArray | None, y: FloatArray, root: FloatArray,
    log_tau: FloatArray, log_s: FloatArray, roughness: FloatArray, line: FloatArray, correction_sd: float,
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
    log_tau, log_s : array, shape (batch,)
    roughness : array, shape (count, 4)
        Lower band of D^T D: element (k, d) belongs to functions k and k + d.
    line : array, shape (count, 2)
        Root N of the precision of constant and linear part, N N^T.
    correction_sd : float
        Prior standard deviation of the correction terms.
    """
    empty = np.empty((0, 0))
    return _solve_batch(  # type: ignore[no-any-return]
        np.ascontiguousarray(u), empty if correction is None else np.ascontiguousarray(correction),
        empty if amplitude is None else np.ascontiguousarray(amplitude), y, root, log_tau, log_s, roughness, line,
        correction_sd,
    )  # fmt: skip


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
