"""The marginal likelihood of a collapse, for a whole batch of parameter vectors at once.

Model (with y in units of its range, see `standardised`):

    y = Phi(theta) c + noise,      c ~ N(0, P^-1),      noise ~ N(0, s^2 C)

Phi holds the spline basis of F at the scaled positions and, for a corrected ansatz, w and w (2u - 1) with
w = (L/L_min)^-omega, the constant and linear part of G.  Integrating c out (Rasmussen, Williams 2006, eq. 2.43 with
the matrix-inversion lemma A.9, A.10):

    ln p(y | theta, tau, s) = -1/2 [ Q + ln det(M/s^2 + P) - ln det P + ln det(s^2 C) + n ln 2 pi ]
    M = Phi^T C^-1 Phi,     Q = (y^T C^-1 y - b^T (M + s^2 P)^-1 b) / s^2,     b = Phi^T C^-1 y

One Cholesky factor of the matrix [[M + s^2 P, b], [b^T, y^T C^-1 y]] gives both the determinant and, as the square of
its last diagonal element, s^2 Q: the Schur complement.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from driftline.curves import Curves, FloatArray
from driftline.scaling.ansatz import Ansatz
from driftline.scaling.function import SplineFunction
from driftline.scaling.kernel import Prior, solve_batch, solve_correlated
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LOG_2PI, LogNormal, LogUniform

#: Standard deviation of the constant and linear part of G in units of the range of y at the smallest size.
CORRECTION_SD = 0.3
CORRECTION_TERMS = 2

#: tau is the scale of second differences of the coefficients in units of the range of y.  A logistic step whose rise
#: from 10 to 90 % takes a third of the axis has 0.04 at most (0.096/w^2 times the squared knot spacing, w = 1/13).  The
#: ends are a straight line for all that data can tell and a step between two knots.  Ends are needed: below the lower
#: one the normal matrix is too badly conditioned for double precision.
TAU_PRIOR = LogUniform.between(5e-4, 5.0)
NOISE_PRIOR = LogNormal.around(1.0, 0.3)
NUISANCE = (
    Parameter("tau", r"\tau", TAU_PRIOR, "roughness of the scaling function"),
    Parameter("s", "s", NOISE_PRIOR, "factor on the measured errors"),
)


@dataclass(frozen=True, eq=False)
class Posterior:
    """Joint log density of the sampled coordinates: physical parameters, then ln tau, then ln s.

    Parameters
    ----------
    curves : Curves
        Measured data.
    ansatz : Ansatz
        Scaling form.
    log_tau : float, optional
        Hold the roughness at this value instead of sampling it; the coordinate is then left out.
    left_out : float, optional
        A size whose means are not fitted. Its points still take part in the layout of the axis, so that the model is
        the same with and without them.
    function : SplineFunction
        Basis of the scaling function.
    """

    curves: Curves
    ansatz: Ansatz
    log_tau: float | None = None
    left_out: float | None = None
    function: SplineFunction = field(default_factory=SplineFunction)

    @cached_property
    def parameters(self) -> tuple[Parameter, ...]:
        """All sampled parameters in order."""
        nuisance = NUISANCE if self.log_tau is None else NUISANCE[1:]
        return (*self.ansatz.parameters, *nuisance)

    @property
    def dimension(self) -> int:
        """Number of sampled coordinates."""
        return len(self.parameters)

    def log_prior(self, z: FloatArray) -> FloatArray:
        """Log prior density, shape (batch,), of coordinates `z`, shape (batch, dimension)."""
        densities = [p.prior.log_density(z[:, i]) for i, p in enumerate(self.parameters)]
        return np.asarray(np.sum(densities, axis=0))

    def from_unit(self, u: FloatArray) -> FloatArray:
        """Coordinates at prior quantiles `u`, shape (batch, dimension), each in (0, 1)."""
        return np.column_stack([p.prior.quantile(u[:, i]) for i, p in enumerate(self.parameters)])

    def values(self, z: FloatArray) -> FloatArray:
        """Parameter values, shape (batch, dimension), on their own scales."""
        return np.column_stack([p.prior.value(z[:, i]) for i, p in enumerate(self.parameters)])

    def __call__(self, z: FloatArray) -> FloatArray:
        """Log prior plus log marginal likelihood, shape (batch,); -inf outside the prior's support."""
        z = np.atleast_2d(z)
        total = self.log_prior(z)
        inside = np.isfinite(total)
        if inside.all():
            return total + self.log_likelihood(z)
        if inside.any():
            total[inside] += self.log_likelihood(z[inside])
        return total

    # --- the data in the units of the model -------------------------------------------------------------------

    @cached_property
    def spread(self) -> float:
        """Range of the measured means, the unit of y."""
        mean = self.curves.flat()[2]
        return float(np.ptp(mean)) or 1.0  # a constant observable has no range; any unit serves

    @cached_property
    def centre(self) -> float:
        """Middle of the measured means, the zero of y."""
        mean = self.curves.flat()[2]
        return float(mean.max() + mean.min()) / 2

    @cached_property
    def _points(self) -> tuple[FloatArray, FloatArray]:
        size, disorder, _, _ = self.curves.flat()
        return size, disorder

    @cached_property
    def _whitener(self) -> FloatArray | tuple[FloatArray, ...]:
        """1/error of each point or, with correlated points, the inverse Cholesky factor of each size."""
        if not self.curves.correlated:
            return self.spread / self.curves.flat()[3] * self.fitted
        factors = (np.linalg.cholesky(curve.noise / self.spread**2) for curve in self.curves.curves)
        kept = (curve.size != self.left_out for curve in self.curves.curves)
        return tuple(
            scipy.linalg.solve_triangular(f, np.eye(len(f)), lower=True) * keep
            for f, keep in zip(factors, kept, strict=True)
        )

    @cached_property
    def _inverse(self) -> tuple[FloatArray, NDArray[np.int64]]:
        """Inverse covariance of all points, shape (points, points), and the first point of every size and their end."""
        factor = scipy.linalg.block_diag(*self._whitener)
        lengths = [curve.mean.size for curve in self.curves.curves]
        return factor.T @ factor, np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64)

    def _whiten(self, matrix: FloatArray) -> None:
        """Multiply `matrix`, shape (..., points, columns), by the inverse root of C from the left, in place."""
        if isinstance(self._whitener, tuple):
            start = 0
            for factor in self._whitener:
                part = slice(start, start + len(factor))
                matrix[..., part, :] = factor @ matrix[..., part, :]
                start += len(factor)
        else:
            matrix *= self._whitener[:, None]

    @cached_property
    def standardised(self) -> FloatArray:
        """Means in units of their range, centred, shape (points,)."""
        return (self.curves.flat()[2] - self.centre) / self.spread

    @cached_property
    def fitted(self) -> NDArray[np.bool_]:
        """Which points are fitted, shape (points,)."""
        return np.asarray(self.curves.flat()[0] != self.left_out)

    @property
    def points(self) -> int:
        """Number of fitted points."""
        return int(np.count_nonzero(self.fitted))

    @cached_property
    def _constant(self) -> float:
        """n ln 2 pi + ln det C of the fitted points, in the user's units of y."""
        blocks = (np.linalg.slogdet(c.noise)[1] for c in self.curves.curves if c.size != self.left_out)
        return self.points * LOG_2PI + float(sum(blocks))

    @cached_property
    def correction_sd(self) -> float:
        """Prior standard deviation of the two coefficients of G, in units of the range of y."""
        return CORRECTION_SD * (float(np.ptp(self.curves.curves[0].mean)) / self.spread or 1.0)

    # --- the model --------------------------------------------------------------------------------------------

    def positions(self, z: FloatArray) -> FloatArray:
        """Positions u in [0, 1] of all points on the axis of the scaling function, shape (batch, points)."""
        return self._axis(z)[0]

    def _axis(self, z: FloatArray) -> tuple[FloatArray, NDArray[np.bool_]]:
        """Positions, and for each row whether they make an axis, shape (batch,).

        They make none where x is not finite or the same for all points, which a form of the user's own may give; such
        positions are all zero, so that what follows stays defined, and the row has no likelihood.
        """
        size, disorder = self._points
        x = self.ansatz.scaled(z, size, disorder, self.curves.sizes)
        low, high = x.min(axis=1, keepdims=True), x.max(axis=1, keepdims=True)
        with np.errstate(invalid="ignore", over="ignore"):
            span = high - low  # finite only if every x is
        sound = np.isfinite(span) & (span > 0)
        if not sound.all():
            x, low, span = np.where(sound, x, 0.0), np.where(sound, low, 0.0), np.where(sound, span, 1.0)
        return (x - low) / span, sound[:, 0]

    def targets(self, amplitude: FloatArray | None) -> FloatArray:
        """Data minus the prior mean of the model, in units of their range, shape (batch or 1, points).

        The prior mean of F is the middle of the data; with an amplitude A the model's mean is A times that.
        """
        if amplitude is None:
            return self.standardised[None]
        return np.asarray(self.standardised + (1 - amplitude) * self.centre / self.spread)

    def design(self, z: FloatArray) -> FloatArray:
        """Phi with the data as last column, shape (batch, points, columns + 1), not yet whitened."""
        u = self.positions(z)
        batch, points = u.shape
        weight = self.ansatz.correction(z, self._points[0], self.curves.sizes)
        count = self.function.count
        columns = count + (CORRECTION_TERMS if weight is not None else 0)
        matrix = np.zeros((batch, points, columns + 1))
        first, values = self.function.basis(u)
        start = np.arange(batch * points).reshape(batch, points) * (columns + 1) + first
        matrix.reshape(-1)[start[..., None] + np.arange(4)] = values
        if weight is not None:
            matrix[..., count] = weight
            matrix[..., count + 1] = weight * (2 * u - 1)
        amplitude = self.ansatz.amplitude(z, self._points[0], self.curves.sizes)
        if amplitude is not None:
            matrix *= amplitude[..., None]
        matrix[..., -1] = self.targets(amplitude)
        return matrix

    def _precision(self, log_tau: FloatArray, columns: int) -> FloatArray:
        """P for each ln tau, shape (batch, columns, columns)."""
        count = self.function.count
        precision = np.zeros((log_tau.size, columns, columns))
        precision[:, :count, :count] = self.function.roughness * np.exp(-2 * log_tau)[:, None, None]
        precision[:, :count, :count] += self.function.linear_precision
        extra = np.arange(count, columns)
        precision[:, extra, extra] = self.correction_sd**-2
        return precision

    def _nuisance(self, z: FloatArray) -> tuple[FloatArray, FloatArray]:
        log_tau = np.full(len(z), self.log_tau) if self.log_tau is not None else z[:, -2]
        return log_tau, z[:, -1]

    def system(self, z: FloatArray) -> FloatArray:
        """The matrix [[M + s^2 P, b], [b^T, y^T C^-1 y]], shape (batch, columns + 1, columns + 1)."""
        design = self.design(z)
        self._whiten(design)
        matrix: FloatArray = np.matmul(design.swapaxes(1, 2), design)
        log_tau, log_s = self._nuisance(z)
        columns = matrix.shape[1] - 1
        matrix[:, :-1, :-1] += self._precision(log_tau, columns) * np.exp(2 * log_s)[:, None, None]
        return matrix

    def log_likelihood(self, z: FloatArray) -> FloatArray:
        """Log marginal likelihood, shape (batch,), of coordinates `z`, shape (batch, dimension)."""
        log_tau, log_s = self._nuisance(z)
        quadratic, log_det = self._solved(z)
        terms = CORRECTION_TERMS if self.ansatz.corrected else 0
        log_det_prior = self.function.log_det_precision(log_tau) - 2 * terms * np.log(self.correction_sd)
        scale = 2 * (self.points - self.function.count - terms) * log_s
        total = -0.5 * (quadratic * np.exp(-2 * log_s) + log_det - log_det_prior + scale + self._constant)
        sound = np.isfinite(total) & (quadratic >= 0)  # below zero rounding has eaten the number
        return np.where(sound, total, -np.inf)

    def _solved(self, z: FloatArray) -> tuple[FloatArray, FloatArray]:
        """s^2 Q and ln det(M + s^2 P); Q is NaN where the positions make no axis."""
        size, sizes = self._points[0], self.curves.sizes
        correction, amplitude = self.ansatz.correction(z, size, sizes), self.ansatz.amplitude(z, size, sizes)
        u, sound = self._axis(z)
        prior = Prior(*self._nuisance(z), self.function.roughness_band, self.function.line, self.correction_sd)
        y = self.targets(amplitude)
        if isinstance(self._whitener, tuple):
            quadratic, log_det = solve_correlated(u, correction, amplitude, y, *self._inverse, prior)
        else:
            quadratic, log_det = solve_batch(u, correction, amplitude, y, self._whitener, prior)
        return np.where(sound, quadratic, np.nan), log_det

    def coefficients(self, z: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Posterior mean and covariance of c, in units of the range of y, at one vector `z`, shape (dimension,)."""
        matrix = self.system(z[None])[0]
        s2 = float(np.exp(2 * z[-1]))
        factor = scipy.linalg.cho_factor(matrix[:-1, :-1], lower=True)
        mean = scipy.linalg.cho_solve(factor, matrix[:-1, -1])
        return mean, s2 * scipy.linalg.cho_solve(factor, np.eye(len(mean)))

    def leave_one_out(self, z: FloatArray) -> FloatArray:
        """ln p(y_i | all other y, z) of each point in the user's unit, shape (batch, points).

        With S the covariance s^2 C + Phi P^-1 Phi^T of the data about their prior mean, and g = S^-1 y, the density is
        normal with variance 1 / (S^-1)_ii and distance g_i / (S^-1)_ii (Sundararajan, Keerthi, Neural Comput. 13, 1103
        (2001), from memory; the tests compare with the definition). These conditional densities, not those given F, are
        what leave-one-out methods ask for where F is integrated out.
        """
        design = self.design(z)
        columns = design.shape[2] - 1
        log_tau, log_s = self._nuisance(z)
        covariance = np.linalg.inv(self._precision(log_tau, columns))
        phi, data = design[..., :-1], design[..., -1]
        noise = scipy.linalg.block_diag(*(curve.noise / self.spread**2 for curve in self.curves.curves))
        total = np.exp(2 * log_s)[:, None, None] * noise + phi @ covariance @ phi.swapaxes(1, 2)
        precision = np.linalg.inv(total)
        diagonal = np.diagonal(precision, axis1=1, axis2=2)
        weighted = np.einsum("bij,bj->bi", precision, data)
        return np.asarray(0.5 * (np.log(diagonal) - LOG_2PI - weighted**2 / diagonal) - np.log(self.spread))

    def predictions(self, z: FloatArray, rng: np.random.Generator) -> FloatArray:
        """One draw of the noiseless model at all points, left out or not, for each row of `z`; (batch, points)."""
        bare = self.design(z)[..., :-1]
        amplitude = self.ansatz.amplitude(z, self._points[0], self.curves.sizes)
        mean = self.centre if amplitude is None else amplitude * self.centre
        return np.asarray(mean + self.spread * np.einsum("bpc,bc->bp", bare, self._coefficient_draws(z, rng)[0]))

    def chi2_of_draws(self, z: FloatArray, rng: np.random.Generator) -> FloatArray:
        """Chi-squared of the data, with the errors as given, at one draw of c for each row of `z`; shape (batch,)."""
        draw, phi, data = self._coefficient_draws(z, rng)
        residual = data - np.einsum("bpc,bc->bp", phi, draw)
        return np.asarray(np.sum(residual**2, axis=1))

    def _coefficient_draws(
        self, z: FloatArray, rng: np.random.Generator
    ) -> tuple[FloatArray, FloatArray, FloatArray]:  # fmt: skip
        """One draw of c for each row of `z`, (batch, columns), with the whitened design and data."""
        design = self.design(z)
        self._whiten(design)
        phi, data = design[..., :-1], design[..., -1]
        log_tau, log_s = self._nuisance(z)
        s = np.exp(log_s)[:, None]
        matrix = np.matmul(phi.swapaxes(1, 2), phi) + self._precision(log_tau, phi.shape[2]) * s[..., None] ** 2
        mean = np.linalg.solve(matrix, np.einsum("bpc,bp->bc", phi, data)[..., None])[..., 0]
        upper = np.linalg.cholesky(matrix).swapaxes(1, 2)
        normal = rng.standard_normal(mean.shape)
        return mean + s * np.linalg.solve(upper, normal[..., None])[..., 0], phi, data
