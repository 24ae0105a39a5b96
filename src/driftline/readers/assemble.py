"""Pieces of columns to curves: averaged rows become points, raw values go through `driftline.readers.samples`.

Every layout for tables, folders and arrays ends here, so that faults, sorting and the conversion of a standard
deviation are the same everywhere.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from driftline.curves import Curve, FloatArray
from driftline.errors import InputError
from driftline.readers.base import located
from driftline.readers.guard.limits import MAX_HELD
from driftline.reading import InputOptions
from driftline.wording import listed

UNLABELLED = "the values have no realisation labels: each counts as the one value of a realisation of its own"
MATCHED = "the values have no realisation labels: those at the same place in the order count as one realisation"

if TYPE_CHECKING:
    from driftline.readers.samples import Block  # scipy comes with it, so only where there are raw values

IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Piece:
    """Rows that belong together, from one file, one size of a wide table, or one dataset.

    Parameters
    ----------
    source : str
        Where they stood, for faults.
    data : mapping
        Role to its numbers, each of shape (n,); a raw `value` may have the shape (n, eigenstates).
    place : callable
        Place of row i in the role named, for faults; ``place(i, None)`` is the place of the row.
    notes : tuple of str
        What was left out.
    """

    source: str
    data: Mapping[str, FloatArray]
    place: Callable[[int, str | None], str]
    notes: tuple[str, ...] = ()

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(self.data["size"])


@dataclass(frozen=True, eq=False)
class Assembled:
    """Curves of all pieces together, with notes and, for raw values, the record of the realisations."""

    curves: Sequence[Curve]
    rows: int
    notes: list[str] = field(default_factory=list)
    realisations: Sequence[Mapping[str, Any]] = ()


def _held(pieces: Iterable[Piece]) -> Iterator[Piece]:
    """The pieces, as long as the memory holds them: a small file can name one large array under many names."""
    total = 0
    for piece in pieces:
        total += sum(array.size for array in piece.data.values())
        if total > MAX_HELD:
            raise InputError(
                f"the data hold more than {MAX_HELD} numbers with their parameters; average groups of realisations, or "
                "store one long table, which is read a part at a time",
                where=piece.source,
            )
        yield piece


def assembled(pieces: Iterable[Piece], options: InputOptions) -> Assembled:
    """Curves of `pieces`.

    Raises
    ------
    InputError
        If a size or error is not positive, a point occurs twice among averaged rows, or counts are missing.
    """
    every = list(_held(pieces))
    for piece in every:
        _check_positive(piece, "size", "a size must be positive, not {:g}")
    if any("value" in piece.data for piece in every):
        made = averaged_blocks(blocks(every), options)
        if any("realisation" not in piece.data and piece.data["value"].ndim == 1 for piece in every):
            made.notes.insert(0, without_labels(options))
    else:
        made = _averaged(every, options)
    made.notes[:0] = [note for piece in every for note in piece.notes]
    return made


def without_labels(options: InputOptions) -> str:
    """What is said about values without labels of realisations."""
    return MATCHED if options.paired else UNLABELLED


def averaged_blocks(raw: Iterable[Block], options: InputOptions) -> Assembled:
    """Curves of raw values, as `driftline.readers.samples` makes them."""
    from driftline.readers.samples import SampleOptions, sampled

    found = sampled(raw, SampleOptions(options.average, options.kind, options.paired))
    return Assembled(found.curves, found.rows, list(found.notes), found.record())


# ---------------------------------------------------------------- raw values


def blocks(pieces: Iterable[Piece]) -> Iterator[Block]:
    """One `Block` for each size and disorder of each piece, rows in the order of the file."""
    from driftline.readers.samples import Block

    for piece in pieces:
        values, labels = piece.data["value"], _labels(piece)
        for rows in _groups(piece.data["size"], piece.data["disorder"]):
            size, disorder = float(piece.data["size"][rows[0]]), float(piece.data["disorder"][rows[0]])
            yield Block(size, disorder, values[rows], None if labels is None else labels[rows], piece.source)


def _labels(piece: Piece) -> IntArray | None:
    raw = piece.data.get("realisation")
    if raw is None:
        return None
    bad = np.flatnonzero((raw != np.floor(raw)) | (np.abs(raw) > 2**53))  # 2**53: doubles hold every number up to it
    if bad.size:
        problem = f"the label of a realisation must be a whole number, not {raw[bad[0]]:g}"
        raise InputError(problem, where=piece.place(int(bad[0]), "realisation"))
    return raw.astype(np.int64)


def _groups(size: FloatArray, disorder: FloatArray) -> Iterator[npt.NDArray[np.intp]]:
    """Rows of each (size, disorder), in their own order."""
    order = np.lexsort((disorder, size))
    change = (np.diff(size[order]) != 0) | (np.diff(disorder[order]) != 0)
    yield from np.split(order, np.flatnonzero(change) + 1) if order.size else []


# ---------------------------------------------------------------- averaged rows


def _averaged(pieces: Sequence[Piece], options: InputOptions) -> Assembled:
    completed = [_with_error(piece, options) for piece in pieces]
    for piece in completed:
        _check_positive(piece, "error", "a standard error must be positive, not {:g}; measure it or remove the row")
    _refuse_repeats(completed)
    data = {
        role: np.concatenate([piece.data.get(role, np.full(piece.rows, np.nan)) for piece in completed])
        for role in ("size", "disorder", "mean", "error", "samples")
    }
    where = [(piece, row) for piece in completed for row in range(piece.rows)]
    curves, unsorted = [], []
    for size in np.unique(data["size"]):
        rows = np.flatnonzero(data["size"] == size)
        order = rows[np.argsort(data["disorder"][rows], kind="stable")]
        if np.any(order != rows):
            unsorted.append(f"{size:g}")
        counts = _counts(data["samples"][order], [where[row] for row in order])
        with located(where[rows[0]][0].source):
            disorder, mean, error = (data[name][order] for name in ("disorder", "mean", "error"))
            curves.append(Curve(float(size), disorder, mean, error, samples=counts))
    notes = []
    if unsorted:
        notes.append(f"rows of size {listed(unsorted)} were not in the order of disorder and have been sorted")
    if any("deviation" in piece.data and "error" not in piece.data for piece in pieces):
        notes.append("standard deviations were divided by the square root of the number of realisations")
    if options.error_each is not None and not any("error" in piece.data for piece in pieces):
        notes.append(f"every standard error is {options.error_each:g}, as the option says")
    return Assembled(curves, len(where), notes)


def _with_error(piece: Piece, options: InputOptions) -> Piece:
    """Complete the counts and the standard errors from what stands in their place."""
    data = dict(piece.data)
    if options.samples_each is not None and "samples" not in data:
        data["samples"] = np.full(piece.rows, float(options.samples_each))
    if "error" not in data and "deviation" in data:
        _check_positive(
            piece, "deviation", "a standard deviation must be positive, not {:g}; measure it or remove the row"
        )
        missing = np.flatnonzero(np.isnan(data["samples"]))
        if missing.size:
            problem = "without the number of realisations a standard deviation does not give a standard error; add it"
            raise InputError(problem, where=piece.place(int(missing[0]), "samples"))
        data["error"] = data["deviation"] / np.sqrt(data["samples"])
    elif "error" not in data and options.error_each is not None:
        data["error"] = np.full(piece.rows, options.error_each)
    return Piece(piece.source, data, piece.place)


def _check_positive(piece: Piece, role: str, problem: str) -> None:
    bad = np.flatnonzero(~(piece.data[role] > 0))
    if bad.size:
        row = int(bad[0])
        raise InputError(problem.format(float(piece.data[role][row])), where=piece.place(row, role))


def _refuse_repeats(pieces: Sequence[Piece]) -> None:
    first: dict[tuple[float, float], tuple[Piece, int]] = {}
    for piece in pieces:
        for row, point in enumerate(zip(piece.data["size"].tolist(), piece.data["disorder"].tolist(), strict=True)):
            before, count = first.setdefault(point, (piece, row))
            if (before, count) != (piece, row):
                raise InputError(
                    f"size {point[0]:g} at disorder {point[1]:g} occurs twice; keep one row or average them "
                    "(raw values are declared with --columns value=...)",
                    where=_two_places(before.place(count, None), piece.place(row, None)),
                )


def _two_places(one: str, other: str) -> str:
    """``run.csv, lines 3 and 10`` for two rows of one file, else both in full."""
    head, line = one.rpartition(", line ")[::2]
    if head and other.startswith(f"{head}, line "):
        return f"{head}, lines {line} and {other.rpartition(', line ')[2]}"
    return f"{one} and {other}"


def _counts(samples: FloatArray, places: Sequence[tuple[Piece, int]]) -> IntArray | None:
    """Numbers of realisations, all or none."""
    gaps = np.isnan(samples)
    if gaps.all():
        return None
    if gaps.any():
        piece, row = places[int(np.argmax(gaps))]
        problem = "the cell is empty, but other rows of this size have a count; give all or none"
        raise InputError(problem, where=piece.place(row, "samples"))
    bad = np.flatnonzero((samples < 1) | (samples != np.floor(samples)) | (samples > 2**53))
    if bad.size:
        piece, row = places[int(bad[0])]
        problem = f"{samples[bad[0]]:.15g} is not a positive whole number of realisations"
        raise InputError(problem, where=piece.place(row, "samples"))
    return samples.astype(np.int64)
