"""The data that everything else speaks in: one curve of an observable against disorder for each system size."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from copy import deepcopy
from dataclasses import asdict, dataclass, field, fields, replace
from itertools import pairwise
from types import MappingProxyType
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from driftline.blocks import Table
from driftline.covariance import doubt
from driftline.display import Shown, symbol
from driftline.errors import ConfigurationError, InputError
from driftline.plain import attributes, plain
from driftline.wording import brief, shown

FloatArray = npt.NDArray[np.float64]
DisorderKind = Literal["quenched", "quasiperiodic", "none"]

MIN_SIZES = 2
MIN_DISORDERS = 4  # a cubic, the least a smooth crossing needs

#: Largest magnitude of any number; its inverse is the smallest standard error. Their squares and ratios stay finite.
LARGEST = 1e100


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
        for name in ("observable", "observable_symbol", "disorder_symbol", "disorder_unit"):
            object.__setattr__(self, name, _line_of_text(getattr(self, name), name))
        if self.disorder_kind not in ("quenched", "quasiperiodic", "none"):
            kind = brief(self.disorder_kind)
            raise InputError(f"disorder_kind must be quenched, quasiperiodic or none, not {kind}", where="labels")
        for name in ("ergodic_value", "localised_value", "dimension"):
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, _finite(value, name, where="labels"))
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
        If shapes differ, a value is not finite or beyond ``LARGEST``, an error is not positive, the grid is not
        strictly increasing, the covariance is not positive definite, or a count is not a positive whole number.

    Notes
    -----
    The arrays are copies and cannot be written to.
    """

    size: float
    disorder: FloatArray
    mean: FloatArray
    error: FloatArray
    covariance: FloatArray | None = None
    samples: npt.NDArray[np.int64] | None = None

    def __post_init__(self) -> None:
        size = _finite(self.size, "a size", where="curves")
        if size <= 0:
            raise InputError(f"a size must be positive, not {size:g}", where="curves")
        object.__setattr__(self, "size", size)
        where = f"size {size:g}"
        for name in ("disorder", "mean", "error"):
            object.__setattr__(self, name, _frozen(getattr(self, name), where, name))
        if not (self.disorder.shape == self.mean.shape == self.error.shape):
            lengths = f"{self.disorder.size}, {self.mean.size} and {self.error.size}"
            raise InputError(f"disorder, mean and error must have the same length, not {lengths}", where=where)
        _check_points(self.disorder, self.error, where)
        if self.covariance is not None:
            object.__setattr__(self, "covariance", _checked_covariance(self.covariance, self.error, where))
        if self.samples is not None:
            object.__setattr__(self, "samples", _checked_counts(self.samples, self.mean.size, where))

    def __reduce__(self) -> tuple[Any, ...]:
        # Rebuilt through the constructor, because unpickled arrays would be writable
        return Curve, (self.size, self.disorder, self.mean, self.error, self.covariance, self.samples)

    def keep(self, mask: npt.NDArray[np.bool_]) -> Curve:
        """The same curve at the points where `mask`, shape (n,), is true."""
        covariance = None if self.covariance is None else self.covariance[np.ix_(mask, mask)]
        samples = None if self.samples is None else self.samples[mask]
        return Curve(self.size, self.disorder[mask], self.mean[mask], self.error[mask], covariance, samples)

    @property
    def noise(self) -> FloatArray:
        """Covariance that estimators use, shape (n, n): the squared errors on the diagonal, or the given covariance.

        The latter is multiplied by `driftline.covariance.doubt` where the number of realisations is known, since it is
        then an estimate. The factor depends on how many points are in use, so it is no part of `covariance`.
        """
        if self.covariance is None:
            return np.diag(self.error**2)
        if self.samples is None:
            return self.covariance
        # harmonic mean: every variance is as uncertain as its own number of realisations makes it
        return np.asarray(self.covariance * doubt(self.error.size, float(1 / np.mean(1 / self.samples))))


@dataclass(frozen=True, eq=False)
class Curves(Shown):
    """Curves of all sizes, ordered by size, with what the numbers mean.

    Parameters
    ----------
    curves : iterable of Curve
        At least two sizes with at least four disorders each and a common disorder range.
    labels : Labels
        Names, symbols and reference values.
    origin : mapping
        Where the numbers came from (file, columns, hash); free-form, for `inspect` and the report. A copy is kept,
        whose entries cannot be replaced.

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
        object.__setattr__(self, "origin", MappingProxyType(deepcopy(dict(origin or {}))))
        _check_set(ordered)

    def __reduce__(self) -> tuple[Any, ...]:
        return Curves, (self.curves, self.labels, dict(self.origin))  # a read-only mapping cannot be pickled

    @classmethod
    def from_table(cls, table: Any, **words: Any) -> Curves:
        """Curves of a table in memory: averaged rows, or raw values with a row for each realisation.

        Parameters
        ----------
        table : data frame, mapping, record array or array of rows
            A frame of pandas or polars (neither is imported here), a mapping of names to arrays, a numpy array with
            named fields, or an array of rows with ``columns=("size", "disorder", "mean", "error")``.
        **words
            Fields of `driftline.reading.InputOptions`, above all ``columns={"size": "L", "mean": "r"}``, and labels.

        Raises
        ------
        InputError
            If it is no table, its columns do not tell what they hold, or the numbers cannot be used.
        ConfigurationError
            If there is no such option or label.

        Examples
        --------
        >>> L, W = np.repeat([8, 12], 5), np.tile(np.linspace(1, 5, 5), 2)
        >>> table = {"L": L, "W": W, "r": np.tanh((3 - W) * L / 8), "sem": np.full(10, 0.01)}
        >>> Curves.from_table(table, ergodic_value=1.0).sizes.tolist()
        [8.0, 12.0]
        """
        from driftline.readers import read  # a floor above this one: only the convenience leads up there

        return read(table, **words)

    @classmethod
    def from_realisations(
        cls, tables: Mapping[float, npt.ArrayLike], disorder: npt.ArrayLike, *, paired: bool = True,
        average: Literal["mean", "median", "log-mean"] = "mean",
        kind: Literal["numbers", "counts", "yes-no"] = "numbers", **labels: Any,
    ) -> Curves:  # fmt: skip
        """Curves of raw values, with errors over realisations and the covariance of points that share them.

        Parameters
        ----------
        tables : mapping of size to array, shape (realisations, disorders) or (realisations, disorders, states)
            Values of each size. States of one realisation are averaged first. NaN where a realisation is missing.
        disorder : array, shape (disorders,)
            Disorder strengths of the columns.
        paired : bool
            Whether a row is one disorder realisation, used at all disorders. If False, the rows of different columns
            have nothing to do with each other. The default is the safe side: where rows are independent, their
            covariance is estimated to be small.
        average, kind
            See `driftline.readers.samples.SampleOptions`.
        **labels
            Fields of `Labels`.

        Raises
        ------
        InputError
            If a table has another shape, or its values cannot be averaged.
        ConfigurationError
            If there is no such average, kind or label.

        Examples
        --------
        >>> rng, grid = np.random.default_rng(1), np.linspace(1, 5, 5)
        >>> shared = {L: np.tanh((3 - grid) * L / 8) + rng.normal(size=(200, 1)) for L in (8, 12)}
        >>> tables = {L: each + 0.1 * rng.normal(size=(200, 5)) for L, each in shared.items()}
        >>> curves = Curves.from_realisations(tables, grid, ergodic_value=1.0)
        >>> curves.correlated, curves.curves[0].samples.tolist()
        (True, [200, 200, 200, 200, 200])
        """
        from driftline.readers.memory import from_tables  # a floor above this one, as in `from_table`

        return from_tables(tables, disorder, paired=paired, average=average, kind=kind, **labels)

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
        """Whether any size brings a covariance of its points; fits need it (Weigel, Janke, PRE 81, 066701 (2010))."""
        return any(curve.covariance is not None for curve in self.curves)

    def table(self) -> Table:
        """One row for each size: points, disorders, the median of their errors, and realisations."""
        rows = tuple(
            (
                f"{curve.size:g}",
                str(curve.disorder.size),
                f"{curve.disorder[0]:g} to {curve.disorder[-1]:g}",
                f"{np.median(curve.error):.2g}",
                "-" if curve.samples is None else _range_of(curve.samples),
                "no" if curve.covariance is None else "yes",
            )
            for curve in self.curves
        )
        unit = f" ({self.labels.disorder_unit})" if self.labels.disorder_unit else ""
        heading = f"{self.labels.observable} at {len(self.curves)} sizes, {self.points} points"
        disorder = f"{symbol(self.labels.disorder_symbol)}{unit}"
        return Table(heading, ("size", "points", disorder, "median error", "realisations", "covariance"), rows)

    def shown(self) -> tuple[Table, ...]:
        """The table of the sizes."""
        return (self.table(),)

    def to_dict(self) -> dict[str, Any]:
        """Labels and all points as plain data; null where there is no covariance or no count of realisations."""
        names = ("size", "disorder", "mean", "error", "covariance", "samples")
        return {"labels": plain(asdict(self.labels)), "curves": [attributes(curve, *names) for curve in self.curves]}

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
        ConfigurationError
            If the window does not run from a lower to a higher disorder.
        """
        if window is not None and not window[0] < window[1]:
            raise ConfigurationError(
                f"a window must run from a lower to a higher disorder, not from {window[0]:g} to {window[1]:g}"
            )
        low_size = 0.0 if smallest_size is None else smallest_size
        high_size = np.inf if largest_size is None else largest_size
        low, high = (-np.inf, np.inf) if window is None else window
        kept = []
        for curve in self.curves:
            if low_size <= curve.size <= high_size:
                mask = (curve.disorder >= low) & (curve.disorder <= high)
                if np.count_nonzero(mask) < MIN_DISORDERS:
                    raise InputError(
                        f"the window from {low:g} to {high:g} holds {np.count_nonzero(mask)} of its disorder values, "
                        f"but at least {MIN_DISORDERS} are needed; widen the window or drop this size",
                        where=f"size {curve.size:g}",
                    )
                kept.append(curve.keep(mask))
        return Curves(kept, self.labels, self.origin)

    def relabel(self, **changes: Any) -> Curves:
        """The same numbers under labels in which `changes` (fields of `Labels`) replace the old ones.

        Raises
        ------
        ConfigurationError
            If there is no such label.
        InputError
            If a value does not suit its label.
        """
        names = [item.name for item in fields(Labels)]
        for name in changes:
            if name not in names:
                raise ConfigurationError(f"there is no label {shown(name)}; the labels are {', '.join(names)}")
        return Curves(self.curves, replace(self.labels, **changes), self.origin)


def _range_of(counts: npt.NDArray[np.int64]) -> str:
    low, high = int(counts.min()), int(counts.max())
    return str(low) if low == high else f"{low} to {high}"


def _line_of_text(value: object, name: str) -> str:
    text = value.strip() if isinstance(value, str) else ""
    if not isinstance(value, str) or not text.isprintable() or not (text or name == "disorder_unit"):
        raise InputError(f"{name} must be one line of printable text, not {brief(value)}", where="labels")
    return text


def _finite(value: object, name: str, *, where: str) -> float:
    try:
        if isinstance(value, str | bytes | bool | np.bool_):
            raise TypeError
        result = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError, OverflowError) as reason:
        raise InputError(f"{name} must be a number, not {brief(value)}", where=where) from reason
    if not abs(result) <= LARGEST:  # NaN included
        raise InputError(f"{name} must be a finite number up to {LARGEST:g}, not {result:g}", where=where)
    return result


def _frozen(values: npt.ArrayLike, where: str, name: str) -> FloatArray:
    """A read-only copy as doubles; text, logical and complex values and masked points are refused, not converted."""
    try:
        raw = np.asanyarray(values)
        if raw.dtype.kind not in "iufO" or np.ma.is_masked(raw):
            raise TypeError
        array = np.array(raw, dtype=np.float64)
    except (TypeError, ValueError, OverflowError) as reason:
        raise InputError(f"{name} must be an array of numbers", where=where) from reason
    if array.ndim != 1:
        raise InputError(f"{name} must have one dimension, not {array.ndim}", where=where)
    bad = np.flatnonzero(~(np.abs(array) <= LARGEST))  # NaN included
    if bad.size:
        problem = f"{name} is {array[bad[0]]:g} at point {bad[0] + 1}; give a finite number up to {LARGEST:g}"
        raise InputError(problem, where=where)
    array.flags.writeable = False
    return array


def _checked_counts(samples: npt.ArrayLike, n: int, where: str) -> npt.NDArray[np.int64]:
    values = _frozen(samples, where, "samples")
    # 2**53: beyond it, double precision no longer holds every whole number
    if values.shape != (n,) or np.any((values < 1) | (values != np.floor(values)) | (values > 2**53)):
        raise InputError("samples must be one positive whole number for each disorder", where=where)
    counts = values.astype(np.int64)
    counts.flags.writeable = False
    return counts


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
    if np.min(error) < 1 / LARGEST:
        at = disorder[np.argmin(error)]
        raise InputError(f"the error at disorder {at:g} is below {1 / LARGEST:g}; use other units", where=where)
    steps = np.diff(disorder)
    if np.any(steps == 0):
        raise InputError(f"disorder {disorder[np.flatnonzero(steps == 0)[0]]:g} occurs twice", where=where)
    if np.any(steps < 0):
        raise InputError("the disorder values must increase", where=where)


def _checked_covariance(covariance: npt.ArrayLike, error: FloatArray, where: str) -> FloatArray:
    n = error.size
    matrix = _matrix(covariance, n, where)
    scaled = matrix / np.outer(error, error)
    # 1e-6: room for files that store single precision or rounded errors, far below any statistical meaning
    if not np.allclose(scaled, scaled.T, rtol=0, atol=1e-6):
        raise InputError("the covariance is not symmetric", where=where)
    if not np.allclose(np.diag(scaled), 1.0, rtol=0, atol=1e-6):
        raise InputError("the diagonal of the covariance is not the square of the errors", where=where)
    matrix = (matrix + matrix.T) / 2
    spectrum = np.linalg.eigvalsh(matrix / np.outer(error, error))
    # Rounding of the eigenvalues is of order n times machine precision times the largest one
    if spectrum[0] <= n * np.finfo(np.float64).eps * spectrum[-1]:
        raise InputError(
            "the covariance is not positive definite; estimate it from more realisations than there are disorders",
            where=where,
        )
    matrix.flags.writeable = False
    return matrix


def _matrix(values: npt.ArrayLike, n: int, where: str) -> FloatArray:
    try:
        raw = np.asanyarray(values)
        if raw.dtype.kind not in "iufO" or np.ma.is_masked(raw):
            raise TypeError
        matrix = np.array(raw, dtype=np.float64)
    except (TypeError, ValueError, OverflowError) as reason:
        raise InputError("the covariance must be an array of numbers", where=where) from reason
    if matrix.shape != (n, n) or not np.all(np.isfinite(matrix)):
        raise InputError(f"the covariance must be a finite matrix of {n} by {n}", where=where)
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
