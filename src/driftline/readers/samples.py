"""Raw values of single disorder realisations to `Curve`s: averages, standard errors, and what was noticed on the way.

Values of one realisation (its eigenstates) are averaged first, then the realisations; the standard error is that over
realisations. Eigenstates of one realisation share its disorder and are not independent: counting them as if they were
makes errors too small, by the factor reported as `SizeDiagnostics.error_ratio`.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from typing import Any, Literal

import numpy as np

from driftline.curves import Curve, FloatArray
from driftline.errors import InputError
from driftline.readers.averages import Average, Estimate, chosen
from driftline.readers.pairing import Pairing, following, pairing
from driftline.readers.points import Block, Point, identical, merged

__all__ = ["Block", "SampleOptions", "Sampled", "SizeDiagnostics", "sampled"]


@dataclass(frozen=True)
class SampleOptions:
    """How raw values become points.

    Parameters
    ----------
    average : {"mean", "median", "log-mean"}
        What is taken over realisations; the log-mean is exp<ln x>, the typical value.
    kind : {"numbers", "counts", "yes-no"}
        What a value is. Counts, and yes/no values (1 and 0), get errors that do not vanish where nothing, or always the
        same, happened.
    paired : bool or None
        Whether the same disorder realisations were used at several disorders of a size. None leaves it to the labels:
        values of one label belong to one realisation. Without labels, paired values are matched by their order.

    Raises
    ------
    ConfigurationError
        If there is no such average or kind, or the two do not go together.
    """

    average: Literal["mean", "median", "log-mean"] = "mean"
    kind: Literal["numbers", "counts", "yes-no"] = "numbers"
    paired: bool | None = None

    def __post_init__(self) -> None:
        chosen(self.average, self.kind)


@dataclass(frozen=True)
class SizeDiagnostics:
    """What the realisations of one size showed.

    Parameters
    ----------
    size : float
        System size.
    points, realisations : int
        Number of disorders and, of realisations, the least at any of them.
    error_ratio : float or None
        Error over realisations relative to the one from counting all values as independent, median over disorders; its
        square is the variance inflation. None where every realisation has one value.
    shared : bool
        Whether the points are treated as correlated, with a covariance.
    correlation, correlation_z : float or None
        Mean correlation of the values at neighbouring disorders and its distance from zero in standard errors; None
        where values cannot be matched.
    repeats : int
        Values that stood in the data twice and were counted once.
    kurtosis, kurtosis_at : float or None
        Largest excess kurtosis of the realisations at any disorder, and there; None where no moments are taken.
    error_doubt : float or None
        Relative standard error of the standard error at that disorder.
    serial, serial_z : float or None
        Mean correlation of values that follow one another in the file, and its distance from zero in standard errors;
        None where realisations have labels, or values are sorted.
    """

    size: float
    points: int
    realisations: int
    error_ratio: float | None
    shared: bool
    correlation: float | None
    correlation_z: float | None
    repeats: int
    kurtosis: float | None
    kurtosis_at: float | None
    error_doubt: float | None
    serial: float | None
    serial_z: float | None


@dataclass(frozen=True)
class Sampled:
    """Curves from raw values, with a record for the reader.

    Parameters
    ----------
    curves : tuple of Curve
        One for each size, in order of size.
    notes : tuple of str
        What was dropped or merged, one sentence each.
    rows : int
        Number of values read.
    diagnostics : tuple of SizeDiagnostics
        One for each size, in order of size.
    """

    curves: tuple[Curve, ...]
    notes: tuple[str, ...]
    rows: int
    diagnostics: tuple[SizeDiagnostics, ...]

    def record(self) -> list[dict[str, Any]]:
        """The diagnostics as plain values, for ``Curves.origin["realisations"]``, where `inspect` and warnings look."""
        return [asdict(found) for found in self.diagnostics]


def sampled(blocks: Iterable[Block], options: SampleOptions | None = None) -> Sampled:
    """Average raw values to curves.

    Parameters
    ----------
    blocks : iterable of Block
        In any order; several may belong to one size and disorder.
    options : SampleOptions, optional
        Plain means of numbers unless given.

    Raises
    ------
    InputError
        If shapes do not fit, a value is not finite or does not suit the average, a point has a single realisation or no
        spread, values said to be paired cannot be matched, or the points do not make a `Curve`.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> blocks = [Block(8, w, rng.normal(w, 1.0, (100, 20)), np.arange(100), "memory") for w in (1.0, 2.0, 3.0, 4.0)]
    >>> found = sampled(blocks)
    >>> found.rows, found.curves[0].samples.tolist(), found.curves[0].covariance.shape
    (8000, [100, 100, 100, 100], (4, 4))
    """
    options = options or SampleOptions()
    average = chosen(options.average, options.kind)
    groups: dict[float, dict[float, list[Block]]] = {}
    rows = 0
    for block in blocks:
        rows += block.rows or block.values.size
        groups.setdefault(float(block.size), {}).setdefault(float(block.disorder), []).append(block)
    curves, notes, diagnostics = [], [], []
    for size, group in sorted(groups.items()):
        points = [merged(found, average) for _, found in sorted(group.items())]
        estimates = [_estimate(point, average) for point in points]
        bonds = pairing(points, options.paired)
        curves.append(_curve(size, points, estimates, bonds))
        diagnostics.append(_diagnostics(size, points, bonds, average))
        notes += [note for point in points for note in point.notes] + identical(size, points)
    return Sampled(tuple(curves), tuple(notes), rows, tuple(diagnostics))


def _estimate(point: Point, average: Average) -> Estimate:
    if point.values.size < 2:
        problem = "there is one realisation only, so no error can be found; run at least two or drop this point"
        raise InputError(problem, where=point.where)
    found = average.estimate(point.values)
    if found.error == 0:
        problem = f"the {average.name} of {point.values.size} realisations has no error, because "
        same = "they have the same value" if np.ptp(point.values) == 0 else "too many of them have the same value"
        raise InputError(f"{problem}{same}; drop this point", where=point.where)
    return found


def _curve(size: float, points: Sequence[Point], estimates: Sequence[Estimate], bonds: Pairing) -> Curve:
    return Curve(
        size,
        np.array([point.disorder for point in points]),
        np.array([found.value for found in estimates]),
        np.array([found.error for found in estimates]),
        bonds.covariance(estimates),
        np.array([point.values.size for point in points]),
    )


def _diagnostics(size: float, points: Sequence[Point], bonds: Pairing, average: Average) -> SizeDiagnostics:
    errors = ((p.single_error, float(p.values.std(ddof=1) / np.sqrt(p.values.size))) for p in points)
    ratios = [error / single for single, error in errors if single]
    tails = [(*_tail(point.values), point.disorder) for point in points] if average.moments else []
    doubt, kurtosis, at = max(tails, default=(None, None, None))
    serial, serial_z = following(points)
    return SizeDiagnostics(
        size=size,
        points=len(points),
        realisations=min(point.values.size for point in points),
        error_ratio=float(np.median(ratios)) if ratios else None,
        shared=bonds.shared,
        correlation=bonds.correlation,
        correlation_z=bonds.z,
        repeats=sum(point.dropped for point in points),
        kurtosis=kurtosis,
        kurtosis_at=at,
        error_doubt=doubt,
        serial=serial,
        serial_z=serial_z,
    )


def _tail(values: FloatArray) -> tuple[float, float]:
    """Relative standard error of the standard error, and excess kurtosis K: sqrt((K + 2) / (4 n)) (textbook)."""
    offset = values - values.mean()
    kurtosis = float(np.mean(offset**4) / np.mean(offset**2) ** 2 - 3)
    return float(np.sqrt(max(kurtosis + 2, 0.0) / (4 * values.size))), kurtosis
