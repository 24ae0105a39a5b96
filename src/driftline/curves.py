"""The data that everything else speaks in: one curve of an observable against disorder for each system size."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from driftline.errors import InputError

FloatArray = npt.NDArray[np.float64]
DisorderKind = Literal["quenched", "quasiperiodic", "none"]

MIN_SIZES = 2
MIN_DISORDERS = 4  # a cubic, the least a smooth crossing needs


@dataclass(frozen=True)
class Labels:
    """What the numbers are: names, symbols, units and reference values of one data set.

    Parameters
    ----------
    observable, observable_symbol : str
        Name in words and symbol (matplotlib mathtext without the dollar signs) of the ordinate.
    disorder_symbol, disorder_unit : str
        Symbol and unit of the abscissa; an empty unit means dimensionless.
    ergodic_value, localised_value : float or None
        Values of the observable deep in the two regimes, in its own units, where they are known.
    dimension : float or None
        Spatial dimension d, for the exponent bounds; None where the bound has no meaning.
    disorder_kind : {"quenched", "quasiperiodic", "none"}
        Decides which exponent bound applies (Chayes et al. 1986; Luck 1993).
    """

    observable: str = "observable"
    observable_symbol: str = "y"
    disorder_symbol: str = "W"
    disorder_unit: str = ""
    ergodic_value: float | None = None
    localised_value: float | None = None
    dimension: float | None = 1.0
    disorder_kind: DisorderKind = "quenched"

    def __post_init__(self) -> None:
        if self.disorder_kind not in ("quenched", "quasiperiodic", "none"):
            raise InputError(
                f"disorder_kind must be quenched, quasiperiodic or none, not {self.disorder_kind!r}", where="labels"
            )
        for name in ("ergodic_value", "localised_value", "dimension"):
            value = getattr(self, name)
            if value is not None and not np.isfinite(value):
                raise InputError(f"{name} must be a finite number, not {value}", where="labels")
        if self.dimension is not None and self.dimension <= 0:
            raise InputError(f"dimension must be positive, not {self.dimension:g}", where="labels")


@dataclass(frozen=True, eq=False)
class Curve:
    """One size: means with standard errors on a strictly increasing disorder grid.

    Parameters
    ----------
    size : float
        Linear size L (or any positive measure of size, such as ln N).
    disorder, mean, error : array, shape (n,)
        Disorder strength, mean over realisations, and the standard error of that mean.
    covariance : array, shape (n, n), optional
        Covariance of the means when the same realisations were used at several disorders. Its diagonal must equal
        ``error**2``.
    samples : array of int, shape (n,), optional
        Number of independent disorder realisations behind each mean.

    Raises
    ------
    InputError
        If shapes differ, a value is not finite, an error is not positive, or the grid is not strictly increasing.
    """

    size: float
    disorder: FloatArray
    mean: FloatArray
    error: FloatArray
    covariance: FloatArray | None = None
    samples: npt.NDArray[np.int64] | None = None

    def __post_init__(self) -> None:
        where = f"size {self.size:g}"
        if not (np.isfinite(self.size) and self.size > 0):
            raise InputError(f"a size must be a positive number, not {self.size}", where="curves")
        object.__setattr__(self, "size", float(self.size))
        for name in ("disorder", "mean", "error"):
            object.__setattr__(self, name, _frozen(getattr(self, name), where, name))
        if not (self.disorder.shape == self.mean.shape == self.error.shape):
            raise InputError("disorder, mean and error must have the same length", where=where)
        _check_points(self.disorder, self.error, where)
        if self.covariance is not None:
            object.__setattr__(self, "covariance", _checked_covariance(self.covariance, self.error, where))
        if self.samples is not None:
            counts = np.array(self.samples, dtype=np.int64)
            counts.flags.writeable = False
            if counts.shape != self.mean.shape or np.any(counts < 1):
                raise InputError("samples must be one positive count for each disorder", where=where)
            object.__setattr__(self, "samples", counts)

    def keep(self, mask: npt.NDArray[np.bool_]) -> Curve:
        """The same curve at the points where `mask`, shape (n,), is true."""
        covariance = None if self.covariance is None else self.covariance[np.ix_(mask, mask)]
        samples = None if self.samples is None else self.samples[mask]
        return Curve(self.size, self.disorder[mask], self.mean[mask], self.error[mask], covariance, samples)

    @property
    def noise(self) -> FloatArray:
        """Covariance of the means, shape (n, n): the given one, or the squared errors on the diagonal."""
        return np.diag(self.error**2) if self.covariance is None else self.covariance


@dataclass(frozen=True, eq=False)
class Curves:
    """Curves of all sizes, ordered by size, with what the numbers mean.

    Parameters
    ----------
    curves : iterable of Curve
        At least two sizes with at least four disorders each and a common disorder range.
    labels : Labels
        Names, symbols and reference values.
    origin : mapping
        Where the numbers came from (file, columns, hash); free-form, for `inspect` and the report.

    Raises
    ------
    InputError
        If there are too few sizes or points, a size occurs twice, or the grids share no range.

    Examples
    --------
    >>> import numpy as np
    >>> from driftline.curves import Curve, Curves
    >>> grid = np.linspace(1.0, 5.0, 9)
    >>> curves = Curves([Curve(L, grid, np.tanh((3 - grid) * L / 8), np.full(9, 0.01)) for L in (8, 12, 16)])
    >>> curves.sizes.tolist(), curves.points, curves.disorder_range
    ([8.0, 12.0, 16.0], 27, (1.0, 5.0))
    """

    curves: tuple[Curve, ...]
    labels: Labels = field(default_factory=Labels)
    origin: Mapping[str, Any] = field(default_factory=dict)

    def __init__(
        self, curves: Iterable[Curve], labels: Labels | None = None, origin: Mapping[str, Any] | None = None
    ) -> None:
        ordered = tuple(sorted(curves, key=lambda curve: curve.size))
        object.__setattr__(self, "curves", ordered)
        object.__setattr__(self, "labels", labels or Labels())
        object.__setattr__(self, "origin", dict(origin or {}))
        _check_set(ordered)

    @property
    def sizes(self) -> FloatArray:
        """Sizes in increasing order, shape (m,)."""
        return np.array([curve.size for curve in self.curves])

    @property
    def points(self) -> int:
        """Number of points of all sizes together."""
        return sum(curve.disorder.size for curve in self.curves)

    @property
    def disorder_range(self) -> tuple[float, float]:
        """Smallest and largest measured disorder."""
        return (
            float(min(curve.disorder[0] for curve in self.curves)),
            float(max(curve.disorder[-1] for curve in self.curves)),
        )

    @property
    def common_range(self) -> tuple[float, float]:
        """Disorder range that every size covers."""
        return (
            float(max(curve.disorder[0] for curve in self.curves)),
            float(min(curve.disorder[-1] for curve in self.curves)),
        )

    @property
    def correlated(self) -> bool:
        """Whether any size brings a covariance of its points."""
        return any(curve.covariance is not None for curve in self.curves)

    def flat(self) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Sizes, disorders, means and errors of all points, each of shape (points,), size by size."""
        size = np.concatenate([np.full(curve.disorder.size, curve.size) for curve in self.curves])
        columns = (np.concatenate([getattr(c, name) for c in self.curves]) for name in ("disorder", "mean", "error"))
        disorder, mean, error = columns
        return size, disorder, mean, error

    def select(
        self, *, smallest_size: float | None = None, largest_size: float | None = None,
        window: tuple[float, float] | None = None,
    ) -> Curves:  # fmt: skip
        """The part with sizes and disorders inside the given limits, ends included.

        Raises
        ------
        InputError
            If what is left breaks the rules of `Curves`.
        """
        low_size = 0.0 if smallest_size is None else smallest_size
        high_size = np.inf if largest_size is None else largest_size
        low, high = window or (-np.inf, np.inf)
        kept = []
        for curve in self.curves:
            if low_size <= curve.size <= high_size:
                mask = (curve.disorder >= low) & (curve.disorder <= high)
                if np.count_nonzero(mask) < MIN_DISORDERS:
                    raise InputError(
                        f"only {np.count_nonzero(mask)} disorders lie between {low:g} and {high:g} and at least "
                        f"{MIN_DISORDERS} are needed; widen the window or drop this size",
                        where=f"size {curve.size:g}",
                    )
                kept.append(curve.keep(mask))
        return Curves(kept, self.labels, self.origin)

    def relabel(self, **changes: Any) -> Curves:
        """The same numbers under labels in which `changes` (fields of `Labels`) replace the old ones."""
        return Curves(self.curves, replace(self.labels, **changes), self.origin)


def _frozen(values: npt.ArrayLike, where: str, name: str) -> FloatArray:
    try:
        array = np.array(values, dtype=np.float64)  # a copy: the caller's array may change later
    except (TypeError, ValueError) as reason:
        raise InputError(f"{name} must be an array of numbers", where=where) from reason
    if array.ndim != 1:
        raise InputError(f"{name} must have one dimension, not {array.ndim}", where=where)
    bad = np.flatnonzero(~np.isfinite(array))
    if bad.size:
        raise InputError(f"{name} is {array[bad[0]]} at point {bad[0] + 1}; give a finite number", where=where)
    array.flags.writeable = False
    return array


def _check_points(disorder: FloatArray, error: FloatArray, where: str) -> None:
    if disorder.size < MIN_DISORDERS:
        raise InputError(
            f"{disorder.size} disorder value{'s' * (disorder.size != 1)}, but at least {MIN_DISORDERS} are needed "
            "at every size; add points or drop this size",
            where=where,
        )
    bad = np.flatnonzero(error <= 0)
    if bad.size:
        raise InputError(
            f"the error at disorder {disorder[bad[0]]:g} is {error[bad[0]]:g}; a standard error must be positive",
            where=where,
        )
    steps = np.diff(disorder)
    if np.any(steps == 0):
        raise InputError(f"disorder {disorder[np.flatnonzero(steps == 0)[0]]:g} occurs twice", where=where)
    if np.any(steps < 0):
        raise InputError("the disorder values must increase", where=where)


def _checked_covariance(covariance: FloatArray, error: FloatArray, where: str) -> FloatArray:
    matrix = np.array(covariance, dtype=np.float64)
    n = error.size
    if matrix.shape != (n, n) or not np.all(np.isfinite(matrix)):
        raise InputError(f"the covariance must be a finite matrix of {n} by {n}", where=where)
    scaled = matrix / np.outer(error, error)
    # 1e-6: room for files that store single precision or rounded errors, far below any statistical meaning
    if not np.allclose(scaled, scaled.T, rtol=0, atol=1e-6):
        raise InputError("the covariance is not symmetric", where=where)
    if not np.allclose(np.diag(scaled), 1.0, rtol=0, atol=1e-6):
        raise InputError("the diagonal of the covariance is not the square of the errors", where=where)
    if np.linalg.eigvalsh(scaled)[0] <= 0:
        raise InputError("the covariance is not positive definite", where=where)
    matrix = (matrix + matrix.T) / 2
    matrix.flags.writeable = False
    return matrix


def _check_set(curves: tuple[Curve, ...]) -> None:
    sizes = [curve.size for curve in curves]
    for before, after in pairwise(sizes):
        if before == after:
            raise InputError(f"size {after:g} occurs twice; put all its points into one curve", where="curves")
    if len(sizes) < MIN_SIZES:
        found = f"only size {sizes[0]:g} was" if sizes else "no size was"
        raise InputError(f"{found} found and at least {MIN_SIZES} sizes are needed to see a size dependence")
    low = max(curves, key=lambda curve: curve.disorder[0])
    high = min(curves, key=lambda curve: curve.disorder[-1])
    if low.disorder[0] >= high.disorder[-1]:
        raise InputError(
            f"the sizes have no common disorder range: size {low.size:g} begins at {low.disorder[0]:g}, where size "
            f"{high.size:g} has already ended at {high.disorder[-1]:g}; measure all sizes on an overlapping range"
        )
