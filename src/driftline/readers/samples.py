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
import numpy.typing as npt

from driftline.curves import LARGEST, Curve, FloatArray
from driftline.errors import ConfigurationError, InputError

IntArray = npt.NDArray[np.int64]

AVERAGES = ("mean", "median", "log-mean")
KINDS = ("numbers", "counts", "yes-no")


@dataclass(frozen=True, eq=False)
class Block:
    """Raw values at one size and disorder.

    Parameters
    ----------
    size, disorder : float
        System size and disorder strength.
    values : array, shape (n,) or (realisations, eigenstates)
        One value for each realisation or row; in two dimensions, a row for each realisation.
    realisation : array of int, shape (n,), or None
        Label of the realisation behind each value or row. Those of one label are averaged first. Without labels every
        value (or row) is a realisation of its own.
    source : str
        Where the values stood, for faults and for naming duplicates, e.g. ``"runs/L8/W1.0/r.dat"``.
    """

    size: float
    disorder: float
    values: FloatArray
    realisation: IntArray | None
    source: str


@dataclass(frozen=True)
class SampleOptions:
    """How raw values become points.

    Parameters
    ----------
    average : {"mean", "median", "log-mean"}
        What is taken over realisations; the log-mean is exp<ln x>, the typical value.
    kind : {"numbers", "counts", "yes-no"}
        What a value is; counts and yes/no values (0 and 1) get binomial errors.
    paired : bool or None
        Whether the same disorder realisations were used at several disorders; None leaves it to the labels.
    seed : int
        Seed of the bootstrap.
    """

    average: Literal["mean", "median", "log-mean"] = "mean"
    kind: Literal["numbers", "counts", "yes-no"] = "numbers"
    paired: bool | None = None
    seed: int = 0

    def __post_init__(self) -> None:
        for name, choices in (("average", AVERAGES), ("kind", KINDS)):
            if getattr(self, name) not in choices:
                raise ConfigurationError(f"{name} must be {_either(choices)}, not {getattr(self, name)!r}")


@dataclass(frozen=True)
class SizeDiagnostics:
    """What the realisations of one size showed.

    Parameters
    ----------
    size : float
        System size.
    error_ratio : float or None
        Error over realisations relative to the one from counting all values as independent, median over disorders; its
        square is the variance inflation. None where every realisation has one value.
    """

    size: float
    error_ratio: float | None


@dataclass(frozen=True)
class Sampled:
    """Curves from raw values, with a record for the reader.

    Parameters
    ----------
    curves : tuple of Curve
        One for each size, in order of size.
    notes : tuple of str
        What was dropped, averaged or noticed, one sentence each.
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


@dataclass(frozen=True, eq=False)
class _Point:
    """One disorder of a size: a value for each realisation, the rows behind it, and the labels where there are any."""

    disorder: float
    values: FloatArray
    rows: FloatArray
    labels: IntArray | None
    source: str


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
        If shapes do not fit, a value is not finite, a point has a single realisation or no spread, or the points do not
        make a `Curve`.
    """
    options = options or SampleOptions()
    groups: dict[float, dict[float, list[Block]]] = {}
    rows = 0
    for block in blocks:
        _check(block)
        rows += block.values.size
        groups.setdefault(float(block.size), {}).setdefault(float(block.disorder), []).append(block)
    curves, diagnostics = [], []
    for size, group in sorted(groups.items()):
        points = [_point(disorder, found) for disorder, found in sorted(group.items())]
        curves.append(_curve(size, points))
        diagnostics.append(SizeDiagnostics(size, _error_ratio(points)))
    return Sampled(tuple(curves), (), rows, tuple(diagnostics))


def _check(block: Block) -> None:
    where = f"{block.source}, size {block.size:g}, disorder {block.disorder:g}"
    if block.values.ndim not in (1, 2) or block.values.size == 0:
        problem = f"the values must be a list or a table with at least one entry, not of shape {block.values.shape}"
        raise InputError(problem, where=where)
    if block.realisation is not None and block.realisation.shape != block.values.shape[:1]:
        raise InputError(
            f"there are {block.realisation.size} realisation labels for {len(block.values)} rows; give one for each",
            where=where,
        )
    bad = np.argwhere(~(np.abs(block.values) <= LARGEST))  # NaN included
    if len(bad):
        value = block.values[tuple(bad[0])]
        raise InputError(f"row {bad[0][0] + 1} holds {value:g}; correct it or remove the row", where=where)


def _point(disorder: float, blocks: Sequence[Block]) -> _Point:
    """Realisation averages of all blocks of one point."""
    labelled = [block.realisation is not None for block in blocks]
    if any(labelled) and not all(labelled):
        bare = blocks[labelled.index(False)]
        raise InputError(
            f"these values have no realisation labels, but those in {blocks[labelled.index(True)].source} have; "
            "give labels to all or to none",
            where=f"{bare.source}, size {bare.size:g}, disorder {disorder:g}",
        )
    values = np.concatenate([b.values if b.values.ndim == 1 else b.values.mean(axis=1) for b in blocks])
    rows = np.concatenate([block.values.ravel() for block in blocks])
    labels = None
    if all(labelled):
        every = np.concatenate([np.asarray(block.realisation, dtype=np.int64) for block in blocks])
        labels, index = np.unique(every, return_inverse=True)
        values = np.bincount(index, values) / np.bincount(index)
    return _Point(disorder, values, rows, labels, blocks[0].source)


def _curve(size: float, points: Sequence[_Point]) -> Curve:
    errors = np.array([_error(size, point) for point in points])
    means = np.array([point.values.mean() for point in points])
    counts = np.array([point.values.size for point in points])
    return Curve(size, np.array([point.disorder for point in points]), means, errors, samples=counts)


def _error(size: float, point: _Point) -> float:
    """Standard error of the mean over realisations."""
    where = f"{point.source}, size {size:g}, disorder {point.disorder:g}"
    if point.values.size < 2:
        problem = "there is one realisation only, so no error can be found; run at least two or drop this point"
        raise InputError(problem, where=where)
    error = float(point.values.std(ddof=1) / np.sqrt(point.values.size))
    if error == 0:
        problem = f"all {point.values.size} realisations have the same value, so no error can be found; drop this point"
        raise InputError(problem, where=where)
    return error


def _error_ratio(points: Sequence[_Point]) -> float | None:
    ratios = [
        float(p.values.std(ddof=1) / np.sqrt(p.values.size) / (p.rows.std(ddof=1) / np.sqrt(p.rows.size)))
        for p in points
        if p.rows.size > p.values.size
    ]
    return float(np.median(ratios)) if ratios else None


def _either(choices: Sequence[str]) -> str:
    return f"{', '.join(choices[:-1])} or {choices[-1]}"
