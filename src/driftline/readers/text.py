"""A text file as a table: encoding, gzip, comments and labels, separator, header, and cells with their line numbers.

Nothing here knows what the columns mean. The separator is the one of comma, semicolon and tab that every row holds
equally often; where none is, runs of blanks separate. The standard library's csv module splits quoted lines on their
own: unlike a columnar reader, it tells where a fault stands.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import NoReturn

import numpy as np
import numpy.typing as npt

from driftline.curves import LARGEST, FloatArray
from driftline.errors import InputError
from driftline.readers.base import LABEL_NAMES, label, number
from driftline.readers.guard import lines
from driftline.readers.guard.limits import MAX_CELLS, MAX_COLUMNS
from driftline.reading import SEPARATORS, InputOptions
from driftline.wording import listed, shown

PROBED = 200  # rows that decide on the separator
MOST_NOTES = 100  # on comments that were not used

_LABEL = re.compile(r"#+\s*([A-Za-z_]\w*)\s*:(.*)", re.ASCII)
#: Takes away every character of plain numbers and what separates them when joined, and turns Fortran's D into E
_PLAIN = str.maketrans({**dict.fromkeys("0123456789+-.eE\n", None)})
_FORTRAN = str.maketrans({"d": "e", "D": "e"})


@dataclass(frozen=True, eq=False)
class TextTable:
    """Cells as text, with the number of the line each row stood on.

    Parameters
    ----------
    place : str
        The file in the user's own words.
    names : tuple of str or None
        Names of the columns, from a header or a comment above the first row; None where there are none.
    header_line : int or None
        Where they stood.
    rows : list of list of str
        Each with as many cells as there are columns.
    lines : array of int, shape (rows,)
        Number of the line of each row, from 1.
    labels, notes
        What the comments above the first row said.
    separator : str
        Key of `SEPARATORS`.
    closed : bool
        Whether the last line of the file has a line end; without one it may have been cut.
    commented : bool
        Whether the names stood in a comment, where they count only if they are good for something.
    """

    place: str
    names: tuple[str, ...] | None
    header_line: int | None
    rows: list[list[str]]
    lines: npt.NDArray[np.int64]
    labels: dict[str, str | float | None]
    notes: list[str]
    separator: str
    closed: bool = True
    commented: bool = False

    def refuse_cut_value(self) -> None:
        """Refuse a last line that was surely cut inside its last number; for raw values, where nothing else shows it.

        Raises
        ------
        InputError
            If the file does not end in a line end and its last cell is shorter than that of every other row.
        """
        if self.closed or len(self.rows) < 3:
            return
        if len(self.rows[-1][-1]) < min(len(row[-1]) for row in self.rows[:-1]):
            _refuse_cut(" ".join(self.rows[-1]), f"{self.place}, line {self.lines[-1]}")

    @property
    def width(self) -> int:
        """Number of columns."""
        return len(self.rows[0]) if self.rows else len(self.names or ())

    @cached_property
    def titles(self) -> list[str]:
        """Names of the columns, or their numbers from 1 where they have none."""
        return list(self.names) if self.names is not None else [str(i + 1) for i in range(self.width)]

    @property
    def where(self) -> str:
        """The place of the names, or of the first row."""
        line = self.header_line or (int(self.lines[0]) if self.lines.size else None)
        return self.place if line is None else f"{self.place}, line {line}"

    def cell_place(self, row: int, column: int) -> str:
        """The place of one cell, for faults."""
        title = f"'{self.titles[column]}'" if self.names is not None else str(column + 1)
        return f"{self.place}, line {self.lines[row]}, column {title}"

    def column(self, index: int, *, gaps: bool = False) -> FloatArray:
        """Numbers of one column, shape (rows,); with `gaps`, an empty cell or NaN is a NaN.

        Raises
        ------
        InputError
            If a cell holds no finite number; the text names line and column.
        """
        cells = [row[index] for row in self.rows]
        joined = "\n".join(cells).translate(_FORTRAN)
        if not joined.translate(_PLAIN):  # no letters, no underscores, no digits of other scripts: numpy reads it alike
            try:
                values = np.array(joined.split("\n"), dtype=np.float64)
            except ValueError:
                pass
            else:
                if np.all(np.abs(values) <= LARGEST):
                    return values
        return np.array([self._cell(cell, row, index, gaps) for row, cell in enumerate(cells)])

    def _cell(self, cell: str, row: int, index: int, gaps: bool) -> float:
        if gaps and cell.strip().lower() in ("", "nan"):
            return float("nan")
        return number(cell, self.cell_place(row, index))


def read_text(path: Path, place: str, options: InputOptions) -> TextTable:
    """The table in a text file, possibly compressed with gzip.

    Raises
    ------
    InputError
        If it is not text in UTF-8, has no rows, or its rows have different numbers of cells.
    """
    return parsed(lines(path, place, ends=True), place, options)


# ---------------------------------------------------------------- from lines to cells


@dataclass
class _Body:
    """Lines that are not comments, and what the comments above them said."""

    place: str
    lines: list[tuple[int, str]] = field(default_factory=list)
    labels: dict[str, str | float | None] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    comments: list[tuple[int, str]] = field(
        default_factory=list
    )  # above the first line, as numpy.savetxt puts a header

    def take(self, count: int, line: str) -> None:
        text = line.strip()
        if text.startswith("#"):
            if not self.lines:
                self._take_label(text, count)
                self.comments.append((count, text.lstrip("# \t")))
                del self.comments[:-PROBED]  # earlier ones are not looked at
        elif text:
            if len(self.lines) >= MAX_CELLS:
                _refuse_length(self.place)
            self.lines.append((count, line))

    def _take_label(self, text: str, count: int) -> None:
        match = _LABEL.fullmatch(text)
        if not match:
            return
        name, value = match[1], match[2].strip()
        where = f"{self.place}, line {count}, label {shown(name)}"
        if name not in LABEL_NAMES:
            if len(self.notes) < MOST_NOTES:
                self.notes.append(f"line {count}: {shown(name)} is not a label, so this comment was not used")
            return
        if name in self.labels:
            raise InputError("this label was already given above; keep one", where=where)
        self.labels[name] = label(name, value, where)


def parsed(numbered: Iterable[tuple[int, str]], place: str, options: InputOptions) -> TextTable:
    """Lines of text, each with its number and its end, as a table; see `read_text`."""
    body, last = _Body(place), "\n"
    for count, last in numbered:
        body.take(count, last.removesuffix("\n"))
    closed = last.endswith("\n")
    if not body.lines:
        raise InputError("the file holds no table, only comments or blank lines", where=place)
    separator = options.separator or _separator(body)
    cells = _cells(body, SEPARATORS[separator])
    header = options.header if options.header is not None else _is_header(cells[0])
    names, header_line, commented = None, None, False
    numbers = [count for count, _ in body.lines]
    if header:
        names, header_line = tuple(cells.pop(0)), numbers.pop(0)
    cells, numbers = _without_cut_line(cells, numbers, closed, body, options, names)
    if not cells:
        where = place if header_line is None else f"{place}, line {header_line}"
        raise InputError("there is a header but no row below it", where=where)
    if names is None:
        header_line, names = _names_in_comments(body.comments, SEPARATORS[separator], len(cells[0]))
        commented = names is not None
    width = len(cells[0]) if names is None else len(names)
    _check_widths(cells, numbers, width, names, place)
    whole = closed or options.skip_cut_lines
    return TextTable(
        place, names, header_line, cells, np.array(numbers), body.labels, body.notes, separator, whole, commented
    )  # fmt: skip


def _cells(body: _Body, separator: str | None) -> list[list[str]]:
    """The cells of every line, up to a number that the memory holds."""
    cells, total = [], 0
    for count, line in body.lines:
        row = _split(line, separator, f"{body.place}, line {count}")
        if len(row) > MAX_COLUMNS:
            problem = f"there are {len(row)} columns, but at most {MAX_COLUMNS} can be read"
            raise InputError(problem, where=f"{body.place}, line {count}")
        total += len(row)
        if total > MAX_CELLS:
            _refuse_length(body.place)
        cells.append(row)
    return cells


def _refuse_length(place: str) -> NoReturn:
    raise InputError(
        f"the table holds more than {MAX_CELLS} numbers; average groups of realisations, or write raw values as one "
        "table with the columns size, disorder, realisation, value, which is read a part at a time",
        where=place,
    )


def _separator(body: _Body) -> str:
    """The one that every line holds equally often.

    Raises
    ------
    InputError
        If more than one does, and the numbers do not tell.
    """
    probe = [_uncommented(line) for _, line in body.lines[:PROBED]]
    counts = {name: [_outside_quotes(line).count(mark) for line in probe] for name, mark in SEPARATORS.items() if mark}
    able = [name for name, found in counts.items() if min(found) > 0 and min(found) == max(found)]
    if len(able) > 1:
        able = _with_most_numbers(able, probe[-1])
    if len(able) > 1:
        raise InputError(
            f"the columns may be separated by {' or '.join(able)}; the first row is {shown(probe[0].strip())}; say "
            f"which with --separator {able[0]} or --separator {able[1]}",
            where=f"{body.place}, line {body.lines[0][0]}",
        )
    # In rows of different lengths the most frequent one: the odd row is then reported as such, not as text
    usual = [name for name, found in counts.items() if 2 * sum(count > 0 for count in found) >= len(probe)]
    return next(iter([*able, *usual]), "blanks")


def _with_most_numbers(names: Sequence[str], line: str) -> list[str]:
    numbers = {name: sum(map(is_number, line.split(SEPARATORS[name]))) for name in names}
    return [name for name in names if numbers[name] == max(numbers.values())]


def _outside_quotes(line: str) -> str:
    return line if '"' not in line else "".join(line.split('"')[::2])


def _split(line: str, separator: str | None, where: str) -> list[str]:
    if separator is None and '"' not in line:
        return _uncommented(line).split()
    if '"' not in line:
        return [cell.strip() for cell in _uncommented(line).split(separator)]
    try:
        cells = next(csv.reader([line.strip()], delimiter=separator or " ", strict=True, skipinitialspace=True))
    except csv.Error as reason:
        raise InputError("the quotation marks do not match; remove them", where=where) from reason
    stripped = [cell.strip() for cell in cells]
    return stripped if separator else [cell for cell in stripped if cell]


def _uncommented(line: str) -> str:
    """A row of numbers without a comment behind it; a ``#`` inside a name, as in ``#samples``, is no comment."""
    return re.split(r"\s#", line, maxsplit=1)[0] if "#" in line else line


def _is_header(cells: Sequence[str]) -> bool:
    """Whether the first cell is a name. A spoiled number is none: a header is not read, so it would vanish."""
    first = cells[0] if cells else ""
    return not re.match(r"[+-]?\.?\d", first) and first.lower().lstrip("+-") not in ("nan", "inf", "infinity")


def is_number(cell: str) -> bool:
    """Whether `cell` holds a finite number."""
    try:
        number(cell, "")
    except InputError:
        return False
    return True


def _without_cut_line(
    cells: list[list[str]], numbers: list[int], closed: bool, body: _Body, options: InputOptions,
    names: tuple[str, ...] | None,
) -> tuple[list[list[str]], list[int]]:  # fmt: skip
    """Leave out the last line if it was cut short and the user asked for it; refuse it if it surely was cut."""
    if closed or not cells:
        return cells, numbers
    last = body.lines[-1][1].strip()
    if options.skip_cut_lines:
        body.notes.append(f"line {numbers[-1]}: {shown(last)} has no line end and was left out as cut short")
        return cells[:-1], numbers[:-1]
    if len(cells[-1]) < (len(names) if names is not None else len(cells[0])):
        _refuse_cut(last, f"{body.place}, line {numbers[-1]}")
    return cells, numbers


def _refuse_cut(line: str, where: str) -> None:
    raise InputError(
        f"the last line, {shown(line)}, has no line end and is shorter than the others, as a killed job leaves it; "
        "complete it, or leave it out with --skip-cut-lines",
        where=where,
    )


def _names_in_comments(
    comments: Sequence[tuple[int, str]], separator: str | None, width: int
) -> tuple[int | None, tuple[str, ...] | None]:
    """Names of the columns in the last comment above the first row with as many words in it as there are columns."""
    for count, comment in reversed(comments[-PROBED:]):
        for mark in dict.fromkeys((separator, ",", None)):
            names = [name.strip() for name in comment.split(mark)]
            if len(names) == width and not is_number(names[0]):
                return count, tuple(names)
    return None, None


def _check_widths(
    cells: Sequence[Sequence[str]], numbers: Sequence[int], width: int, names: Sequence[str] | None, place: str
) -> None:
    for count, row in zip(numbers, cells, strict=True):
        if len(row) != width:
            under = f"{width} column{'s' * (width != 1)}"
            if names is not None:
                under += f" ({listed(name or 'without a name' for name in names)})"
            raise InputError(
                f"{len(row)} value{'s' * (len(row) != 1)} under {under}; complete or remove the row",
                where=f"{place}, line {count}",
            )
