"""The summary CSV: one row per size and disorder under the header ``size,disorder,mean,error[,samples]``.

Plain text in UTF-8 (a byte-order mark and any line ending will do), columns in any order, further columns ignored with
a note. Lines that begin with ``#`` are comments. Comments above the header may carry labels, one each, all optional::

    # observable: mean gap ratio
    # ergodic_value: 0.5307
    # localised_value: none
    size,disorder,mean,error,samples
    8,1.0,0.5221,0.0011,4000

The standard library's csv module splits each line on its own: unlike a columnar reader, it tells where a fault stands.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from driftline.curves import Curve
from driftline.errors import InputError
from driftline.readers.base import (
    LABEL_NAMES,
    NEEDED,
    OPTIONAL,
    Contents,
    Layout,
    check_columns,
    label,
    located,
    number,
    whole_number,
)
from driftline.readers.guard import MAX_NUMBERS, lines
from driftline.wording import listed, shown

_LABEL = re.compile(r"#+\s*([A-Za-z_]\w*)\s*:(.*)", re.ASCII)
_SEPARATORS = ((";", "semicolons"), ("\t", "tabs"), (None, "blanks"))


class TableLayout(Layout):
    """One CSV table with a row per size and disorder."""

    name = "summary-csv"
    description = "CSV with the header size,disorder,mean,error[,samples], one row per size and disorder"

    def recognises(self, path: Path) -> bool:
        """Any regular file: what is not text is refused with the reason while reading."""
        return path.is_file()

    def contents(self, path: Path, place: str) -> Contents:
        """Read the table; see `Layout.contents`."""
        table = _Table.of_lines(lines(path, place), place)
        points = [_point(table, row, place) for row in table.rows]
        _refuse_repeats(points, place)
        curves, notes = _curves(points, place)
        present = [name for name in NEEDED + OPTIONAL if name in table.columns]
        return Contents(
            curves, table.labels, {name: name for name in present}, len(points), [*table.notes, *_extra(table), *notes]
        )


@dataclass
class _Table:
    """Cells as text, with the number of the line each row stood on."""

    place: str
    columns: list[str] = field(default_factory=list)
    rows: list[tuple[int, list[str]]] = field(default_factory=list)
    labels: dict[str, str | float | None] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)

    @classmethod
    def of_lines(cls, lines: Iterable[tuple[int, str]], place: str) -> _Table:
        table, comment, last = cls(place), (0, ""), 0
        for count, line in lines:
            text = line.strip()
            if text.startswith("#"):
                if not table.columns:
                    table._take_label(text, count)
                    comment = (count, text.lstrip("# \t"))
            elif text:
                cells, last = _split(line, f"{place}, line {count}"), count
                if not table.columns and not _is_number(cells[0]):
                    table._take_header(cells, count)
                    continue
                if not table.columns:
                    table._take_commented_header(comment, count)
                table._take_row(cells, count)
        if not table.columns:
            raise InputError("the file holds no table, only comments or blank lines", where=place)
        if not table.rows:
            raise InputError("there is a header but no row below it", where=f"{place}, line {last}")
        return table

    def _take_label(self, text: str, count: int) -> None:
        match = _LABEL.fullmatch(text)
        if not match:
            return
        name, value = match[1], match[2].strip()
        where = f"{self.place}, line {count}, label {shown(name)}"
        if name not in LABEL_NAMES:
            self.notes.append(f"line {count}: {shown(name)} is not a label, so this comment was not used")
            return
        if name in self.labels:
            raise InputError("this label was already given above; keep one", where=where)
        self.labels[name] = label(name, value, where)

    def _take_header(self, cells: list[str], count: int) -> None:
        where = f"{self.place}, line {count}"
        if len(cells) == 1 and (word := _other_separator(cells[0])):
            raise InputError(f"the columns are separated by {word}; separate them by commas", where=where)
        names = [name for name in cells if name]
        twice = next((name for index, name in enumerate(names) if name in names[:index]), None)
        if twice is not None:
            raise InputError(f"column {shown(twice)} occurs twice; give each column its own name", where=where)
        check_columns(names, where)
        self.columns = cells

    def _take_commented_header(self, comment: tuple[int, str], count: int) -> None:
        # numpy.savetxt writes its header as a comment; it counts as one only with the right names in it
        names = [name.strip() for name in comment[1].split(",")]
        if not set(NEEDED) <= set(names):
            raise InputError(
                f"the first row holds numbers, so the columns have no names; put the line {','.join(NEEDED)} above it",
                where=f"{self.place}, line {count}",
            )
        self._take_header(names, comment[0])
        self.notes.append(f"line {comment[0]}: the column names were taken from this comment")

    def _take_row(self, cells: list[str], count: int) -> None:
        if len(cells) != len(self.columns):
            raise InputError(
                f"{len(cells)} value{'s' * (len(cells) != 1)} under {len(self.columns)} columns "
                f"({listed(name or 'without a name' for name in self.columns)}); complete or remove the row",
                where=f"{self.place}, line {count}",
            )
        if len(self.rows) * len(cells) > MAX_NUMBERS:
            problem = f"the table holds more than {MAX_NUMBERS} numbers; average over realisations first"
            raise InputError(problem, where=self.place)
        self.rows.append((count, cells))


@dataclass(frozen=True)
class _Point:
    line: int
    size: float
    disorder: float
    mean: float
    error: float
    samples: int | None


def _split(line: str, where: str) -> list[str]:
    try:
        return [cell.strip() for cell in next(csv.reader([line], strict=True, skipinitialspace=True))]
    except csv.Error as reason:
        raise InputError("the quotation marks do not match; remove them", where=where) from reason


def _is_number(cell: str) -> bool:
    try:
        number(cell, "")
    except InputError:
        return False
    return True


def _other_separator(header: str) -> str | None:
    for separator, word in _SEPARATORS:
        if set(NEEDED) <= {name.strip() for name in header.split(separator)}:
            return word
    return None


def _point(table: _Table, row: tuple[int, list[str]], place: str) -> _Point:
    line, cells = row
    found = dict(zip(table.columns, cells, strict=True))

    def where(name: str) -> str:
        return f"{place}, line {line}, column '{name}'"

    size, disorder, mean, error = (number(found[name], where(name)) for name in NEEDED)
    if size <= 0:
        raise InputError(f"a size must be positive, not {shown(found['size'])}", where=where("size"))
    if error <= 0:
        problem = f"a standard error must be positive, not {shown(found['error'])}; measure it or remove the row"
        raise InputError(problem, where=where("error"))
    count = found.get("samples", "")
    return _Point(line, size, disorder, mean, error, whole_number(count, where("samples")) if count else None)


def _refuse_repeats(points: Sequence[_Point], place: str) -> None:
    first: dict[tuple[float, float], int] = {}
    for point in points:
        line = first.setdefault((point.size, point.disorder), point.line)
        if line != point.line:
            raise InputError(
                f"size {point.size:g} at disorder {point.disorder:g} occurs twice; keep one row or average them",
                where=f"{place}, lines {line} and {point.line}",
            )


def _curves(points: Sequence[_Point], place: str) -> tuple[list[Curve], list[str]]:
    by_size: dict[float, list[_Point]] = {}
    for point in points:
        by_size.setdefault(point.size, []).append(point)
    unsorted = []
    curves = []
    for size, group in sorted(by_size.items()):
        ordered = sorted(group, key=lambda point: point.disorder)
        if ordered != group:
            unsorted.append(f"{size:g}")
        disorder, mean, error = (np.array([getattr(p, name) for p in ordered]) for name in NEEDED[1:])
        with located(place):
            curves.append(Curve(size, disorder, mean, error, samples=_samples(ordered)))
    if not unsorted:
        return curves, []
    return curves, [f"rows of size {listed(unsorted)} were not in the order of disorder and have been sorted"]


def _samples(points: Sequence[_Point]) -> np.typing.NDArray[np.int64] | None:
    counts = [point.samples for point in points]
    if all(count is None for count in counts):
        return None
    if None in counts:
        gap = points[counts.index(None)]
        problem = "the cell is empty, but other rows of this size have a count; give all or none"
        raise InputError(problem, where=f"line {gap.line}, column 'samples'")
    return np.array(counts, dtype=np.int64)


def _extra(table: _Table) -> Iterator[str]:
    extra = [name or "one without a name" for name in table.columns if name not in NEEDED + OPTIONAL]
    if extra:
        yield f"columns not used: {listed(extra)}"
