"""The scaling function F: a penalised cubic B-spline (Eilers, Marx, Stat. Sci. 11, 89 (1996)) with a proper prior.

F(u) = sum_k c_k B_k(u) on u in [0, 1] with equally spaced knots.  The second differences of the coefficients are
independent Gaussians of scale tau; the constant and linear part, which the differences do not see, are broad Gaussians.
Both parts act on orthogonal spaces, so the prior precision is

    P(tau) = D^T D / tau^2 + R R^T,      ln det P = ln det(D D^T) + ln det of the other part - 2 (K - 2) ln tau
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from driftline.curves import FloatArray

#: Standard deviation of the constant and of the linear part (value at the ends) in units of the range of the data.
LINEAR_SD = 2.0


@dataclass(frozen=True)
class SplineFunction:
    """Cubic B-spline with `count` functions on [0, 1]."""

    count: int = 24

    def basis(self, u: FloatArray) -> tuple[np.ndarray, FloatArray]:
        """First non-zero function and the values of the four non-zero ones.

        Parameters
        ----------
        u : array, shape (...,)
            Positions in [0, 1].

        Returns
        -------
        first : int array, shape (...,)
        values : array, shape (..., 4)
        """
        cells = self.count - 3
        scaled = u * cells
        first = np.minimum(scaled.astype(np.intp), cells - 1)
        t = scaled - first
        r = 1.0 - t
        values = np.empty((*u.shape, 4))
        cube, other = t * t * t, r * r * r  # products: far faster than powers
        values[..., 0] = other / 6
        values[..., 3] = cube / 6
        values[..., 1] = 2 / 3 - t * t + cube / 2
        values[..., 2] = 2 / 3 - r * r + other / 2
        return first, values

    @cached_property
    def roughness(self) -> FloatArray:
        """D^T D of the second differences, shape (count, count)."""
        differences = np.diff(np.eye(self.count), 2, axis=0)
        return differences.T @ differences

    @cached_property
    def roughness_band(self) -> FloatArray:
        """Lower band of `roughness`, shape (count, 4): element (k, d) belongs to functions k and k + d."""
        band = np.zeros((self.count, 4))
        for d in range(3):
            band[: self.count - d, d] = np.diagonal(self.roughness, -d)
        return band

    @cached_property
    def line(self) -> FloatArray:
        """Root of the precision of the constant and linear part, shape (count, 2).

        A line from a - b to a + b has coefficients N (a, b); a and b have standard deviation `LINEAR_SD`.
        """
        line = np.column_stack([np.ones(self.count), np.linspace(-1, 1, self.count)])
        return np.asarray(line / np.sum(line**2, axis=0) / LINEAR_SD)  # the columns are orthogonal

    @cached_property
    def linear_precision(self) -> FloatArray:
        """Precision of the constant and linear part, shape (count, count)."""
        return np.asarray(self.line @ self.line.T)

    @cached_property
    def log_det(self) -> float:
        """ln det P at tau = 1."""
        return float(np.linalg.slogdet(self.roughness + self.linear_precision)[1])

    def log_det_precision(self, log_tau: FloatArray) -> FloatArray:
        """ln det P(tau) for each ln tau."""
        return self.log_det - 2 * (self.count - 2) * log_tau
