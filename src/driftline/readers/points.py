"""All raw values of one size and disorder, brought to one value for each realisation."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from driftline.curves import LARGEST, FloatArray
from driftline.errors import InputError
from driftline.readers.averages import Average
from driftline.readers.repeats import FALSE_ALARM, IntArray, agreement, repeated, repeated_within


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
    rows, deviation : int and float, optional
        Where `values` are averages already, as a table too long for the memory gives them: the number of single values
        behind them and the standard deviation of those (n - 1 in the denominator).
    """

    size: float
    disorder: float
    values: FloatArray
    realisation: IntArray | None
    source: str
    rows: int | None = None
    deviation: float | None = None

    @property
    def where(self) -> str:
        """The place, for faults."""
        return f"{self.source}, {_point_name(self.size, self.disorder)}"


@dataclass(frozen=True, eq=False)
class Point:
    """One size and disorder: a value for each realisation, on the scale of the average.

    Attributes
    ----------
    disorder : float
        Disorder strength.
    values : array, shape (n,)
        One for each realisation; in the order of the file, or of the labels where there are any.
    labels : array of int, shape (n,), or None
        Labels of the realisations, increasing.
    single_error : float or None
        Standard error from counting every row as independent; None where each realisation has one row.
    dropped : int
        Values (or rows of a table) left out because they stood in the data before.
    notes : tuple of str
        What was dropped or merged.
    where : str
        The place, for faults.
    """

    disorder: float
    values: FloatArray
    labels: IntArray | None
    single_error: float | None
    dropped: int
    notes: tuple[str, ...]
    where: str


@dataclass(frozen=True, eq=False)
class _Rows:
    """Rows of a point: their values, the one label of each (None without labels), and the values behind each row."""

    values: FloatArray
    labels: IntArray | None
    per_row: IntArray
    variance: float

    @property
    def realisations(self) -> tuple[FloatArray, IntArray | None]:
        """Averages over the rows of a realisation, with their labels."""
        if self.labels is None:
            return self.values, None
        labels, index, counts = np.unique(self.labels, return_inverse=True, return_counts=True)
        return np.bincount(index, self.values) / counts, labels


def merged(blocks: Sequence[Block], average: Average) -> Point:
    """One value for each realisation from all `blocks` of one size and disorder.

    Raises
    ------
    InputError
        If shapes do not fit, a value is not finite or does not suit the average, or only some blocks have labels.
    """
    for block in blocks:
        _check(block, average)
    _check_labels(blocks)
    rows = _rows(blocks, average)
    rows, again, notes = _without_rewritten_rows(rows, blocks)
    values, labels = rows.realisations
    copies = repeated(values)
    values, labels = values[~copies], None if labels is None else labels[~copies]
    where = _where(blocks)
    if copies.any():
        found = f"{np.count_nonzero(copies)} of {copies.size} realisations repeat values that stand before them"
        notes.append(f"{where}: {found} (a restart, or a file copied?); they were counted once")
    total, variance = _single_values(blocks, rows)
    single = float(np.sqrt(variance / total)) if total > copies.size else None
    return Point(blocks[0].disorder, values, labels, single, again + int(np.count_nonzero(copies)), tuple(notes), where)


def _check(block: Block, average: Average) -> None:
    if block.values.ndim not in (1, 2) or block.values.size == 0:
        problem = f"the values must be a list or a table with at least one entry, not of shape {block.values.shape}"
        raise InputError(problem, where=block.where)
    if block.realisation is not None and block.realisation.shape != block.values.shape[:1]:
        raise InputError(
            f"there are {block.realisation.size} realisation labels for {len(block.values)} rows; give one for each",
            where=block.where,
        )
    bad = np.argwhere(~(np.abs(block.values) <= LARGEST))  # NaN included
    if len(bad):
        value = block.values[tuple(bad[0])]
        problem = f"row {bad[0][0] + 1} holds {value:g}; correct it or remove the row"
        raise InputError(problem, where=block.where)
    average.check(block.values, block.where)


def _check_labels(blocks: Sequence[Block]) -> None:
    bare = [block for block in blocks if block.realisation is None]
    if bare and len(bare) < len(blocks):
        labelled = next(block for block in blocks if block.realisation is not None)
        raise InputError(
            f"these values have no realisation labels, but those in {labelled.source} have; give labels to all or to "
            "none",
            where=bare[0].where,
        )


def _rows(blocks: Sequence[Block], average: Average) -> _Rows:
    scaled = [average.scale(np.asarray(block.values, dtype=np.float64)) for block in blocks]
    values = np.concatenate([each if each.ndim == 1 else each.mean(axis=1) for each in scaled])
    per_row = np.concatenate([np.full(len(each), each[0].size, dtype=np.int64) for each in scaled])
    labels = [block.realisation for block in blocks if block.realisation is not None]
    variance = np.concatenate([each.ravel() for each in scaled]).var(ddof=1) if per_row.sum() > 1 else 0.0
    joined = np.concatenate(labels).astype(np.int64) if labels else None
    return _Rows(values, joined, per_row, float(variance))


def _single_values(blocks: Sequence[Block], rows: _Rows) -> tuple[int, float]:
    """Number and variance of the single values, those behind averages that came as such included."""
    if len(blocks) == 1 and blocks[0].rows is not None and blocks[0].deviation is not None:
        return blocks[0].rows, blocks[0].deviation ** 2
    return int(rows.per_row.sum()), rows.variance


def _without_rewritten_rows(rows: _Rows, blocks: Sequence[Block]) -> tuple[_Rows, int, list[str]]:
    """Rows whose realisation and value stood before are dropped; labels that mean two things are named."""
    if rows.labels is None:
        return rows, 0, []
    labels, group = np.unique(rows.labels, return_inverse=True)
    again = repeated_within(rows.values, group)
    notes = []
    if again.any():
        which = _some(labels[np.unique(group[again])])
        notes.append(
            f"{_where(blocks)}: {_rows_stand(int(np.count_nonzero(again)))} twice, of realisation {which} "
            "(a restart?); counted once"
        )
    kept = _Rows(rows.values[~again], rows.labels[~again], rows.per_row[~again], rows.variance)
    counts = np.bincount(group[~again])
    if np.median(counts) == 1 and (counts > 1).any():
        notes.append(
            f"{_where(blocks)}: realisation {_some(labels[counts > 1])} occurs more than once with different values; "
            "each was averaged and counted once"
        )
    return kept, int(np.count_nonzero(again)), notes


def identical(size: float, points: Iterable[Point]) -> list[str]:
    """A sentence for each disorder whose values are those of another one, number for number, if not by chance."""
    seen: dict[bytes, Point] = {}
    notes = []
    for point in points:
        twin = seen.setdefault(point.values.tobytes(), point)
        if twin is not point and agreement(point.values) ** point.values.size < FALSE_ALARM:
            notes.append(
                f"size {size:g}: all {point.values.size} values at disorder {point.disorder:g} are those at disorder "
                f"{twin.disorder:g}, number for number; one may be a copy of the other"
            )
    return notes


def _where(blocks: Sequence[Block]) -> str:
    sources = list(dict.fromkeys(block.source for block in blocks))
    more = f" and {len(sources) - 1} more" if len(sources) > 1 else ""
    return f"{sources[0]}{more}, {_point_name(blocks[0].size, blocks[0].disorder)}"


def _point_name(size: float, disorder: float) -> str:
    return f"size {size:g}, disorder {disorder:g}"


def _rows_stand(count: int) -> str:
    return "1 row stands" if count == 1 else f"{count} rows stand"


def _some(labels: IntArray) -> str:
    rest = f" and {labels.size - 3} more" if labels.size > 3 else ""
    return ", ".join(str(label) for label in labels[:3]) + rest
