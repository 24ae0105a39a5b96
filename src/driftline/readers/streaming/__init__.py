"""Realisation tables of any length in bounded memory: blocks of realisation averages, point by point.

A table of 10^8 rows (some 3 GB of text) takes well under 2 GiB. The rows of a realisation are averaged while the
table is read, in whatever order they stand; what comes out are `Block`s, one for each size and disorder, ordered by
size and then by disorder, each with one value for each realisation in the order of their labels. Values of one
realisation at several disorders can be brought together by these labels, one size at a time.

    table = LongText(path, str(path), Positions(width=4, size=0, disorder=1, realisation=2, value=3))
    for block in stream(table): ...

The sources are `LongText` (text, plain or gzip) and `LongDatasets` (HDF5, a dataset for each column).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Protocol

from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.base import located
from driftline.readers.samples import Block
from driftline.readers.streaming.datasets import LongDatasets
from driftline.readers.streaming.gathering import MOST_ENTRIES, PointGatherer, PointValues
from driftline.readers.streaming.runs import Rows
from driftline.readers.streaming.text import LongText, Positions
from driftline.readers.text import TextTable
from driftline.reading import SEPARATORS

__all__ = ["LongDatasets", "LongText", "Positions", "Source", "long_text", "stream"]


class Source(Protocol):
    """A long table that is read a part at a time."""

    place: str
    notes: list[str]

    def rows(self) -> Iterator[Rows]:
        """Its rows in order."""
        ...


def stream(
    source: Source, *, averaged: bool = True, progress: Progress | None = None, most_entries: int = MOST_ENTRIES
) -> Iterator[Block]:
    """Blocks of a long table, one for each size and disorder, in order of size and then disorder.

    The table is read to its end before the first block comes.

    Parameters
    ----------
    source : LongText or LongDatasets
        The table; what was noticed is added to its `notes` by the time the last block has come.
    averaged : bool
        Average the rows of each realisation (and count them in the block). Otherwise every row is a value, those of
        one realisation behind each other, as spectra need it.
    progress : function, optional
        Called with what is done and the fraction of the table read.
    most_entries : int
        Runs of rows held in memory, about 100 bytes each; what goes beyond it is kept in a temporary file without a
        name, so an interrupted run leaves nothing behind.

    Raises
    ------
    InputError
        If a row cannot be used (the text names its line), or if there are no rows.
    """
    returned: list[PointValues] = []
    with PointGatherer(averaged=averaged, most_entries=most_entries) as gatherer:
        for rows in source.rows():
            gatherer.add(rows)
            if progress is not None:
                progress("reading", rows.fraction)
        if not gatherer.rows:
            raise InputError("the table has no rows", where=source.place)
        with located(source.place):
            for point in gatherer.points():
                if point.returns:
                    returned.append(point)
                yield _block(point, source.place, averaged)
    source.notes.extend(_returns(returned))


def long_text(
    path: Path, place: str, table: TextTable, columns: Mapping[str, int], *, skip_cut_lines: bool = False
) -> LongText:
    """A text file to be streamed, whose first lines were read as `table`.

    Parameters
    ----------
    path, place : Path, str
        The file, and what faults call it.
    table : TextTable
        What `driftline.readers.table.head` found in its first lines.
    columns : mapping
        Index of the columns ``size``, ``disorder``, ``value`` and, if there are labels, ``realisation``.
    skip_cut_lines : bool
        Leave out a last line without a line end.
    """
    positions = Positions(
        table.width, columns["size"], columns["disorder"], columns["value"], columns.get("realisation")
    )  # fmt: skip
    above = int(table.lines[0]) - 1  # lines above the first row
    separator = SEPARATORS[table.separator]
    return LongText(path, place, positions, separator=separator, skip=above, skip_cut_lines=skip_cut_lines)


def _block(point: PointValues, place: str, averaged: bool) -> Block:
    if not averaged or point.realisation is None:
        return Block(point.size, point.disorder, point.values, point.realisation, place)
    return Block(
        point.size, point.disorder, point.values, point.realisation, place, rows=point.rows, deviation=point.deviation
    )  # fmt: skip


def _returns(points: Sequence[PointValues]) -> list[str]:
    """A note where realisations come back after others: a restarted job that wrote them again looks like that."""
    if not points:
        return []
    worst = max(points, key=lambda point: point.returns)
    return [
        f"at {len(points)} points the rows of a realisation do not stand together (size {worst.size:g}, disorder "
        f"{worst.disorder:g}: {worst.returns} times); they were averaged all the same, so see that no job that was "
        "restarted has written realisations twice"
    ]
