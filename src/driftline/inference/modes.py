"""Where a log density has its maxima: a quasi-random scan, then damped Newton steps for all candidates at once.

The densities here are cheap in batches and cost a fixed overhead per call, so derivatives are taken by central
differences over a stencil of all candidates in one call.  Steps are a fraction of the current standard deviations:
long enough to look past the small kinks of a spline likelihood, short enough to be local.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.stats import qmc

from driftline.curves import FloatArray

LogDensity = Callable[[FloatArray], FloatArray]

SCAN_POWER = 11  # 2^11 points: between four and five to an axis of a five-dimensional prior
CANDIDATES = 8
ITERATIONS = 25
STENCIL = 0.25  # of the current standard deviation
DAMPINGS = np.array([0.0, 1e-2, 1e-1, 1.0, 10.0, 100.0])  # in units of the curvature, Levenberg-Marquardt style


@dataclass(frozen=True, eq=False)
class Mode:
    """A local maximum: place, shape (d,), log density there, and the covariance of the Gaussian that fits it."""

    place: FloatArray
    log_density: float
    covariance: FloatArray

    @property
    def log_mass(self) -> float:
        """Laplace's approximation of the log of the integral."""
        log_det = np.linalg.slogdet(2 * np.pi * self.covariance)[1]
        return float(self.log_density + 0.5 * log_det)


def find_modes(log_density: LogDensity, from_unit: LogDensity, dimension: int, rng: np.random.Generator) -> list[Mode]:
    """Distinct local maxima, the heaviest first.

    Parameters
    ----------
    log_density : callable
        Maps coordinates, shape (batch, dimension), to log densities, shape (batch,).
    from_unit : callable
        Maps prior quantiles in (0, 1) to coordinates, both of shape (batch, dimension).
    dimension : int
        Number of coordinates.
    rng : numpy.random.Generator
        Scrambles the Sobol sequence of the scan.

    Returns
    -------
    list of Mode
        Empty if the density vanishes at every point of the scan.
    """
    unit = qmc.Sobol(dimension, rng=rng).random_base2(SCAN_POWER)
    unit = np.clip(unit, 1e-9, 1 - 1e-9)  # scrambled points may touch the edge, where quantiles are infinite
    places = from_unit(unit)
    values = _in_chunks(log_density, places)
    chosen = _spread_out(unit, values)
    if not chosen:
        return []
    width = np.ptp(from_unit(np.array([[0.16] * dimension, [0.84] * dimension])), axis=0) / 2
    found = _climb(log_density, places[chosen], values[chosen], width)
    return _distinct(found)


def _in_chunks(log_density: LogDensity, places: FloatArray, chunk: int = 256) -> FloatArray:
    return np.concatenate([log_density(places[i : i + chunk]) for i in range(0, len(places), chunk)])


def _spread_out(unit: FloatArray, values: FloatArray) -> list[int]:
    """Indices of the best scan points that keep a distance from each other in the prior's unit cube."""
    chosen: list[int] = []
    for index in np.argsort(-values):
        if not np.isfinite(values[index]) or len(chosen) == CANDIDATES:
            break
        if all(np.max(np.abs(unit[index] - unit[other])) > 0.1 for other in chosen):
            chosen.append(int(index))
    return chosen


def _climb(log_density: LogDensity, places: FloatArray, values: FloatArray, width: FloatArray) -> list[Mode]:
    """Newton ascent of all candidates side by side."""
    places, values = places.copy(), values.copy()
    scale = np.tile(0.1 * width, (len(places), 1))
    active = np.ones(len(places), dtype=bool)
    for _ in range(ITERATIONS):
        index = np.flatnonzero(active)
        gradient, hessian = _derivatives(log_density, places[index], values[index], STENCIL * scale[index])
        steps = _newton_steps(gradient, hessian, width)
        trial = places[index, None] + steps
        trial_values = _in_chunks(log_density, trial.reshape(-1, places.shape[1])).reshape(steps.shape[:2])
        trial_values = np.where(np.isfinite(trial_values), trial_values, -np.inf)
        best = np.argmax(trial_values, axis=1)
        rows = np.arange(len(index))
        gain = trial_values[rows, best] - values[index]
        better = gain > 0
        places[index[better]] = trial[rows, best][better]
        values[index[better]] = trial_values[rows, best][better]
        curvature = np.maximum(-np.diagonal(hessian, axis1=1, axis2=2), width**-2)
        scale[index] = np.clip(1 / np.sqrt(curvature), 1e-6 * width, width)
        active[index] = gain > 1e-3  # a thousandth of a unit of log density is far below any use of a mode
        if not active.any():
            break
    _, hessian = _derivatives(log_density, places, values, STENCIL * scale)
    return [
        Mode(place, float(value), _covariance(matrix, width))
        for place, value, matrix in zip(places, values, hessian, strict=True)
    ]


def _derivatives(
    log_density: LogDensity, places: FloatArray, values: FloatArray, step: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Central-difference gradient, shape (m, d), and Hessian, shape (m, d, d), of m places in one call."""
    m, d = places.shape
    pairs = [(i, j) for i in range(d) for j in range(i)]
    offsets = np.concatenate(
        [np.eye(d), -np.eye(d)] + [np.outer([1, -1], np.eye(d)[i] + np.eye(d)[j]) for i, j in pairs]
    )  # 2 d points on the axes, then one pair on a diagonal for each mixed derivative
    stencil = places[:, None] + offsets * step[:, None]
    around = _in_chunks(log_density, stencil.reshape(-1, d)).reshape(m, -1)
    around = np.where(np.isfinite(around), around, values[:, None] - 10.0)  # beyond the support: a wall, but finite
    up, down = around[:, :d], around[:, d : 2 * d]
    gradient = (up - down) / (2 * step)
    hessian = np.zeros((m, d, d))
    second = up + down - 2 * values[:, None]
    hessian[:, range(d), range(d)] = second / step**2
    for k, (i, j) in enumerate(pairs):
        diagonal = around[:, 2 * d + 2 * k] + around[:, 2 * d + 2 * k + 1] - 2 * values
        hessian[:, i, j] = (diagonal - second[:, i] - second[:, j]) / (2 * step[:, i] * step[:, j])
        hessian[:, j, i] = hessian[:, i, j]
    return gradient, hessian


def _positive(hessian: FloatArray, width: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Eigenvalues (made positive) and vectors of minus the Hessian in units of the prior widths."""
    eigenvalues, vectors = np.linalg.eigh(-hessian * np.outer(width, width))
    return np.maximum(np.abs(eigenvalues), 0.25), vectors  # never broader than twice the prior


def _newton_steps(gradient: FloatArray, hessian: FloatArray, width: FloatArray) -> FloatArray:
    """Damped steps, shape (m, dampings, d); saddle-free: curvatures count by their size."""
    eigenvalues, vectors = _positive(hessian, width)
    along = np.einsum("mji,mj->mi", vectors, gradient * width)
    damped = along[:, None] / (eigenvalues[:, None] * (1 + DAMPINGS[:, None]))
    steps: FloatArray = np.einsum("mij,mkj->mki", vectors, damped) * width
    return steps


def _covariance(hessian: FloatArray, width: FloatArray) -> FloatArray:
    eigenvalues, vectors = _positive(hessian, width)
    return (vectors / eigenvalues) @ vectors.T * np.outer(width, width)


def _distinct(found: list[Mode]) -> list[Mode]:
    """Heaviest first; a mode within two standard deviations of a heavier one is the same."""
    kept: list[Mode] = []
    for mode in sorted(found, key=lambda m: -m.log_mass):
        if all(_distance2(mode, other) > 4 for other in kept):
            kept.append(mode)
    return kept


def _distance2(mode: Mode, other: Mode) -> float:
    offset = mode.place - other.place
    return float(offset @ np.linalg.solve(other.covariance, offset))
