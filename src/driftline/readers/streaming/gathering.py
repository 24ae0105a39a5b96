"""Rows of a long table gathered point by point in bounded memory, whatever their order in the file.

Rows of one realisation mostly stand together, so runs of them are summed as they come: what is kept is an entry
(point, realisation, sum, count) for each run. When entries fill their share of the memory they are merged; if that
does not help (as with one row for each realisation) they go to a file without a name, which the operating system
removes however the program ends.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from types import TracebackType
from typing import IO, Any, Self

import numpy as np
import numpy.typing as npt

from driftline.curves import FloatArray
from driftline.errors import ConfigurationError, InputError
from driftline.readers.streaming.runs import IntArray, Rows, Runs, changes, runs

#: Entries held in memory; with the copies that merging makes, some 120 bytes each.
MOST_ENTRIES = 4_000_000
MOST_POINTS = 100_000  # pairs of a size and a disorder; real tables have hundreds
MOST_AT_A_POINT = 20_000_000  # realisations at one of them, which has to fit into the memory

Entries = dict[str, npt.NDArray[Any]]  #: equally long arrays: point, total, and if they are needed realisation, count


@dataclass(frozen=True, eq=False)
class PointValues:
    """What was found at one size and disorder.

    Parameters
    ----------
    size, disorder : float
        The point.
    values : array, shape (n,)
        Averages over the rows of each realisation, or the rows themselves.
    realisation : array of int, shape (n,), or None
        Labels, in increasing order.
    rows : int
        Number of rows behind `values`.
    deviation : float
        Standard deviation of the single rows (n - 1 in the denominator); 0 for a single row.
    returns : int
        How often a realisation came back after rows of another: once for each realisation that a restarted job wrote
        again, and often where several jobs wrote into one file.
    """

    size: float
    disorder: float
    values: FloatArray
    realisation: IntArray | None
    rows: int
    deviation: float
    returns: int


class PointGatherer:
    """Takes `Rows` and gives `PointValues`; a context manager, so that the file for what does not fit is closed.

    Parameters
    ----------
    averaged : bool
        Average the rows of one realisation; otherwise all rows are kept.
    most_entries : int
        Entries held in memory.
    """

    def __init__(self, *, averaged: bool = True, most_entries: int = MOST_ENTRIES) -> None:
        self._averaged, self._most = averaged, most_entries
        self._grid, self._spread = _Grid(), _Spread()
        self._sums: _Sums | None = _Sums(2 * most_entries) if averaged else None
        self._held: list[Entries] = []
        self._shelf = _Shelf()
        self._last: tuple[int, int] | None = None  # point and realisation of the row before
        self._seen = np.zeros(0, dtype=np.int64)  # runs of rows at each point

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._shelf.close()

    @property
    def rows(self) -> int:
        """Number of rows taken so far."""
        return self._spread.total

    def add(self, rows: Rows) -> None:
        """Take some rows, at least one.

        Raises
        ------
        InputError
            If there are too many points.
        ConfigurationError
            If memory and disk do not hold the table.
        """
        found = runs(rows, labelled=self._averaged)
        point = self._grid.numbers(rows.size[found.point], rows.disorder[found.point])
        self._spread.add(point, found)
        entries = self._entries(rows, point, found)
        if self._sums is not None:
            if "count" in entries and self._sums.add(entries, self._grid.count):
                return
            self._held += self._sums.entries()
            self._sums = None
        self._held.append(entries)
        if _length(self._held) > self._most:
            self._held = [_merged(self._held, self._averaged)]
            if _length(self._held) > self._most // 2:
                self._shelf.put(self._held.pop())

    def points(self) -> Iterator[PointValues]:
        """Everything taken so far, ordered by size and then by disorder.

        Raises
        ------
        InputError
            If one point has too many realisations.
        """
        self._held = [_merged(self._held, self._averaged)] if self._held else []
        for number, size, disorder in self._grid.ordered():
            parts = [*self._shelf.take(number), *(_at(held, number) for held in self._held)]
            if self._sums is not None:
                parts.append(self._sums.at(number))
            if _length(parts) > MOST_AT_A_POINT:
                raise InputError(
                    f"size {size:g} at disorder {disorder:g} has more than {MOST_AT_A_POINT} realisations; "
                    "average groups of them first"
                )
            yield self._values(_merged(parts, self._averaged), number, size, disorder)

    def _entries(self, rows: Rows, point: IntArray, found: Runs) -> Entries:
        if not self._averaged or rows.realisation is None:
            # copies: the source may use its arrays again
            entries = {"point": np.repeat(point, found.length), "total": rows.value.copy()}
            return entries if rows.realisation is None else {**entries, "realisation": rows.realisation.copy()}
        if point.size == 1:
            of_run = np.full(found.first.size, point[0])
        else:
            of_run = point[np.searchsorted(found.point, found.first, side="right") - 1]
        label = rows.realisation[found.first]
        self._count_runs(of_run, label)
        count = np.diff(found.first, append=rows.value.size)
        return {"point": of_run, "total": found.total, "realisation": label, "count": count}

    def _count_runs(self, point: IntArray, label: IntArray) -> None:
        self._seen = _grown(self._seen, self._grid.count)
        if point[0] == point[-1] and (point == point[0]).all():
            self._seen[point[0]] += point.size
        else:
            self._seen += np.bincount(point, minlength=self._seen.size)
        if self._last == (point[0], label[0]):  # the run of the rows before goes on
            self._seen[point[0]] -= 1
        self._last = int(point[-1]), int(label[-1])

    def _values(self, found: Entries, number: int, size: float, disorder: float) -> PointValues:
        label = found.get("realisation")
        values = found["total"] / found["count"] if "count" in found else found["total"]
        rows, deviation = self._spread.at(number)
        returns = int(self._seen[number]) - values.size if "count" in found else 0
        return PointValues(size, disorder, values, label, rows, deviation, returns)


class _Sums:
    """Sums and counts in a table of points by labels, as long as the labels are small numbers from 0 on.

    Rows in any order go straight to their place; no sorting, no merging.
    """

    def __init__(self, most: int) -> None:
        self._most = most  # cells of 16 bytes
        self._total, self._count = np.zeros((1, 1024)), np.zeros((1, 1024), dtype=np.int64)

    def add(self, entries: Entries, points: int) -> bool:
        """Take the entries; False if they do not fit, and then nothing is taken."""
        label = entries["realisation"]
        if label.min() < 0 or not self._room(points, int(label.max()) + 1):
            return False
        place = entries["point"] * self._total.shape[1] + label
        np.add.at(self._total.reshape(-1), place, entries["total"])
        np.add.at(self._count.reshape(-1), place, entries["count"])
        return True

    def entries(self) -> list[Entries]:
        """Everything in the table."""
        found = [self.at(number) for number in range(self._total.shape[0])]
        return [part for part in found if part["point"].size]

    def at(self, number: int) -> Entries:
        """What belongs to one point."""
        label = np.flatnonzero(self._count[number])
        point = np.full(label.size, number)
        return {"point": point, "total": self._total[number, label], "realisation": label,
                "count": self._count[number, label]}  # fmt: skip

    def _room(self, points: int, labels: int) -> bool:
        rows, columns = self._total.shape
        shape = rows, columns
        if points > rows:
            shape = 2 ** (points - 1).bit_length(), shape[1]
        if labels > columns:
            shape = shape[0], 2 ** (labels - 1).bit_length()
        if shape[0] * shape[1] > self._most:
            return False
        if shape != (rows, columns):
            padding = ((0, shape[0] - rows), (0, shape[1] - columns))
            self._total, self._count = np.pad(self._total, padding), np.pad(self._count, padding)
        return True


class _Grid:
    """Numbers 0, 1, ... for the pairs of size and disorder, in the order in which they turn up."""

    def __init__(self) -> None:
        self._sizes, self._disorders, self._pairs = _Numbered(), _Numbered(), _Numbered()

    @property
    def count(self) -> int:
        return self._pairs.known.size

    def numbers(self, size: FloatArray, disorder: FloatArray) -> IntArray:
        pairs = self._sizes.numbers(size) * MOST_POINTS + self._disorders.numbers(disorder)
        return self._pairs.numbers(pairs)

    def ordered(self) -> Iterator[tuple[int, float, float]]:
        sizes, disorders = self._sizes.by_number(), self._disorders.by_number()
        pairs = ((number, *divmod(int(pair), MOST_POINTS)) for number, pair in enumerate(self._pairs.by_number()))
        points = ((number, float(sizes[size]), float(disorders[disorder])) for number, size, disorder in pairs)
        yield from sorted(points, key=lambda point: point[1:])


class _Numbered:
    """Numbers for values, in the order in which they turn up."""

    def __init__(self) -> None:
        self.known: npt.NDArray[Any] = np.zeros(0)  # sorted
        self._numbers = np.zeros(0, dtype=np.int64)

    def numbers(self, values: npt.NDArray[Any]) -> IntArray:
        place = self._places(values)
        if place is None:
            self._learn(values)
            place = self._places(values)
            assert place is not None
        return self._numbers[place]

    def by_number(self) -> npt.NDArray[Any]:
        return self.known[np.argsort(self._numbers)]

    def _places(self, values: npt.NDArray[Any]) -> IntArray | None:
        if not self.known.size:
            return None
        place = np.minimum(np.searchsorted(self.known, values), self.known.size - 1)
        return place if bool((self.known[place] == values).all()) else None

    def _learn(self, values: npt.NDArray[Any]) -> None:
        new = np.setdiff1d(values, self.known) if self.known.size else np.unique(values)
        count = self.known.size + new.size
        if count > MOST_POINTS:
            raise InputError(
                f"there are more than {MOST_POINTS} different pairs of size and disorder; "
                "see that the columns are the right ones"
            )
        known = np.concatenate([self.known.astype(new.dtype), new])
        numbers = np.concatenate([self._numbers, np.arange(self.known.size, count)])
        order = np.argsort(known, kind="stable")
        self.known, self._numbers = known[order], numbers[order]


class _Spread:
    """Number, mean and sum of squared deviations of the rows at each point, merged as in Chan, Golub, LeVeque (1983).

    The American Statistician 37, 242, equation 2.1; sums of plain squares would lose all digits where the mean is
    large.
    """

    def __init__(self) -> None:
        self._rows, self._mean, self._squares = np.zeros(0), np.zeros(0), np.zeros(0)

    def add(self, point: IntArray, found: Runs) -> None:
        size = int(point.max()) + 1
        self._rows, self._mean, self._squares = (_grown(a, size) for a in (self._rows, self._mean, self._squares))
        if point.size == 1:
            self._join(point, found.length, found.mean, found.squares)
        else:
            self._join(slice(None), *_by_point(point, found, self._rows.size))

    @property
    def total(self) -> int:
        return int(self._rows.sum())

    def at(self, number: int) -> tuple[int, float]:
        rows = int(self._rows[number])
        return rows, float(np.sqrt(self._squares[number] / (rows - 1))) if rows > 1 else 0.0

    def _join(self, where: IntArray | slice, rows: Any, mean: FloatArray, squares: FloatArray) -> None:
        before = np.array(self._rows[where])  # a copy: a slice would change with the next line but two
        every = np.maximum(before + rows, 1)
        shift = mean - self._mean[where]
        self._rows[where] += rows
        self._mean[where] += shift * rows / every
        self._squares[where] += squares + shift**2 * (before * rows / every)


class _Shelf:
    """Entries that do not fit into the memory, in a temporary file that never has a name."""

    def __init__(self) -> None:
        self._file: IO[bytes] | None = None
        self._sections: list[tuple[dict[str, tuple[int, np.dtype[Any]]], IntArray]] = []

    def put(self, entries: Entries) -> None:
        try:
            if self._file is None:
                self._file = tempfile.TemporaryFile(prefix="driftline-")  # noqa: SIM115 - closed by `close`
            places = {}
            for name, array in entries.items():
                places[name] = (self._file.seek(0, 2), array.dtype)
                self._file.write(np.ascontiguousarray(array).view(np.uint8).data)
        except OSError as reason:
            raise ConfigurationError(
                f"{tempfile.gettempdir()}: the table does not fit into the memory and cannot be kept there "
                f"({reason.strerror or reason}); set TMPDIR to a folder with more room"
            ) from reason
        bounds = np.searchsorted(entries["point"], np.arange(entries["point"][-1] + 2))
        self._sections.append((places, bounds))

    def take(self, number: int) -> Iterator[Entries]:
        for places, bounds in self._sections:
            if number + 1 < bounds.size and bounds[number] < bounds[number + 1]:
                yield {name: self._read(*place, bounds[number], bounds[number + 1]) for name, place in places.items()}

    def close(self) -> None:
        if self._file is not None:
            self._file.close()

    def _read(self, place: int, kind: np.dtype[Any], first: int, end: int) -> npt.NDArray[Any]:
        assert self._file is not None
        self._file.seek(place + int(first) * kind.itemsize)
        return np.fromfile(self._file, kind, int(end - first))


def _merged(parts: Sequence[Entries], averaged: bool) -> Entries:
    """All entries ordered by point and realisation; those of the same realisation joined if they are `averaged`."""
    every = {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    label = every.get("realisation")
    if not _in_order(every["point"], label):
        # stable, so that the result does not depend on the sorting algorithm of the machine
        order = np.argsort(every["point"], kind="stable") if label is None else np.lexsort((label, every["point"]))
        every = {name: array[order] for name, array in every.items()}
    if not averaged or "count" not in every:
        return every
    first = changes(every["point"]) | changes(every["realisation"])
    if first.all():
        return every
    starts = np.flatnonzero(first)
    joined = {name: np.add.reduceat(every[name], starts) for name in ("total", "count")}
    return {**{name: every[name][starts] for name in ("point", "realisation")}, **joined}


def _in_order(point: IntArray, label: IntArray | None) -> bool:
    after, before = point[1:], point[:-1]
    if label is None:
        return bool((after >= before).all())
    return bool(((after > before) | ((after == before) & (label[1:] >= label[:-1]))).all())


def _at(entries: Entries, number: int) -> Entries:
    first, end = np.searchsorted(entries["point"], (number, number + 1))
    return {name: array[first:end] for name, array in entries.items()}


def _by_point(point: IntArray, found: Runs, points: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Number, mean and squared deviations of runs joined to those of so many points."""
    rows = np.bincount(point, found.length, points).astype(np.float64)
    joint = np.bincount(point, found.length * found.mean, points) / np.maximum(rows, 1)
    inside = np.bincount(point, found.squares + found.length * (found.mean - joint[point]) ** 2, points)
    return rows, joint, inside.astype(np.float64)


def _grown(array: npt.NDArray[Any], size: int) -> npt.NDArray[Any]:
    """The array, with room for at least `size` elements; new ones are zero."""
    return array if array.size >= size else np.pad(array, (0, max(size, 2 * array.size) - array.size))


def _length(parts: Sequence[Entries]) -> int:
    return sum(part["point"].size for part in parts)
