"""Text tables: the program's own summary CSV, and long or wide tables with any column names.

The summary CSV has one row per size and disorder under the header ``size,disorder,mean,error[,samples]``; it is plain
text in UTF-8 (a byte-order mark, any line ending and gzip will do), columns in any order, further columns ignored with
a note. Lines that begin with ``#`` are comments. Comments above the header may carry labels, one each, all optional::

    # observable: mean gap ratio
    # ergodic_value: 0.5307
    # localised_value: none
    size,disorder,mean,error,samples
    8,1.0,0.5221,0.0011,4000

A long table has the same rows, or one for each realisation, under other names or none, with other separators. A wide
one has a row for each disorder and columns for each size.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from itertools import islice
from pathlib import Path

import numpy as np

from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.assemble import Assembled, Piece, assembled, averaged_blocks, without_labels
from driftline.readers.base import NEEDED, OPTIONAL, Contents, Layout, check_columns
from driftline.readers.columns import Choice, choose, wide_names
from driftline.readers.guard import lines
from driftline.readers.roles import Scene
from driftline.readers.text import PROBED, TextTable, parsed, read_text
from driftline.reading import SEPARATORS, InputOptions
from driftline.wording import listed

RAW = ("size", "disorder", "value", "realisation")
STREAMED = 5_000_000  # bytes from which a table of raw values is read a piece at a time, some 10^5 rows
MAX_PACKED = 1 << 40  # bytes; only the first lines are read


class SummaryLayout(Layout):
    """The program's own summary CSV."""

    name = "summary-csv"
    description = "CSV with the header size,disorder,mean,error[,samples], one row per size and disorder"

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """By the program's own names in a header with commas, as long as no option asks for another reading."""
        if options.given():
            return False
        table = head(path, InputOptions(separator="comma"))
        return table is not None and table.names is not None and set(NEEDED) <= set(table.names)

    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read the table; see `Layout.contents`."""
        table = read_text(path, place, InputOptions(separator="comma"))
        if table.names is None:
            raise InputError(
                f"the first row holds numbers, so the columns have no names; put the line {','.join(NEEDED)} above it",
                where=table.where,
            )
        named = [name for name in table.names if name]
        twice = next((name for index, name in enumerate(named) if name in named[:index]), None)
        if twice is not None:
            raise InputError(f"column '{twice}' occurs twice; give each column its own name", where=table.where)
        check_columns(table.names, table.where)
        columns = {name: name for name in NEEDED + OPTIONAL if name in table.names}
        unused = tuple(name for name in table.names if name not in columns)
        choice = Choice(((None, {name: table.names.index(name) for name in columns}),), columns, unused, columns)
        return table_contents(table, choice, InputOptions(), InputOptions())


class TableLayout(Layout):
    """A long text table with any names of columns."""

    name = "table"
    description = (
        "text with a row per size and disorder, or per realisation; any column names, separated by comma, semicolon, "
        "tab or blanks, with or without header, possibly gzip"
    )

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """Any regular file: what is not text is refused with the reason while reading."""
        return path.is_file()

    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read the table; see `Layout.contents`."""
        if path.stat().st_size > STREAMED:
            first = head(path, options)
            if (
                first is not None
                and (choice := choice_of(replace(first, place=place), options)).raw
                and not choice.wide
            ):
                return _streamed(path, replace(first, place=place), choice, options, progress)
        table = read_text(path, place, options)
        choice = choice_of(table, options)
        return table_contents(table, choice, options, resolved(self.name, table, choice, options))


class WideLayout(TableLayout):
    """A text table with a row per disorder and columns for each size."""

    name = "wide"
    description = "text with a row per disorder and columns for each size, such as W, L8, L10, with or without errors"

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """By the names of the columns, or by an option that says which column belongs to which size."""
        table = head(path, options)
        return table is not None and wide_names(table.titles, options)


def head(path: Path, options: InputOptions) -> TextTable | None:
    """The table in the first lines of a file, or None if there is none."""
    first = islice(lines(path, str(path), ends=True, most=MAX_PACKED), PROBED)
    try:
        return parsed(first, str(path), options)
    except InputError:
        return None


def choice_of(table: TextTable, options: InputOptions, elsewhere: frozenset[str] = frozenset()) -> Choice:
    """What the columns of `table` hold."""
    scene = Scene(table.where, options, elsewhere)
    return choose(table.titles, scene, named=table.names is not None)


def resolved(name: str, table: TextTable, choice: Choice, options: InputOptions) -> InputOptions:
    """The options that read the file again in the same way."""
    header = table.header_line is not None and not table.commented
    found = {"layout": name, "columns": choice.named, "separator": table.separator, "header": header}
    return InputOptions(**found).over(options)  # type: ignore[arg-type]


def table_contents(table: TextTable, choice: Choice, options: InputOptions, again: InputOptions) -> Contents:
    """Curves of one text file."""
    notes = [*table.notes]
    if table.commented:
        notes.append(f"line {table.header_line}: the column names were taken from this comment")
    notes += unused_note(choice)
    pieces = list(pieces_of(table, choice, {}, notes))
    made: Assembled = assembled(pieces, options)
    return Contents(
        made.curves, table.labels, choice.columns, made.rows, [*notes, *made.notes], made.realisations, again
    )  # fmt: skip


def _streamed(
    path: Path, first: TextTable, choice: Choice, options: InputOptions, progress: Progress | None
) -> Contents:  # fmt: skip
    """A long table of raw values that is too large to be held at once; `first` is its beginning."""
    from driftline.readers.streaming import LongText, Positions, stream

    columns = {role: index for role, index in choice.sets[0][1].items() if role in RAW}
    source = LongText(
        path, first.place, Positions(first.width, **columns), separator=SEPARATORS[first.separator],
        skip=int(first.lines[0]) - 1, skip_cut_lines=options.skip_cut_lines,
    )  # fmt: skip
    made = averaged_blocks(stream(source, progress=progress), options)
    notes = [*first.notes, *unused_note(choice), *source.notes, *made.notes]
    if "realisation" not in columns:
        notes.append(without_labels(options))
    again = resolved(TableLayout.name, first, choice, options)
    return Contents(made.curves, first.labels, choice.columns, made.rows, notes, made.realisations, again)


def unused_note(choice: Choice) -> list[str]:
    """What is said about columns without a role."""
    if not choice.unused:
        return []
    return [f"columns not used: {listed(name or 'one without a name' for name in choice.unused)}"]


def pieces_of(
    table: TextTable, choice: Choice, constants: Mapping[str, float], notes: list[str]
) -> Iterator[Piece]:  # fmt: skip
    """One piece for each set of columns; `constants` are roles that do not come from columns.

    In a wide table, a cell may be empty (or NaN) where a size was not measured at a disorder.
    """
    if choice.raw:
        table.refuse_cut_value()
    for size, columns in choice.sets:
        gaps = choice.wide
        data = {
            role: table.column(index, gaps=(gaps and role != "disorder") or role == "samples")
            for role, index in columns.items()
        }
        rows = np.arange(len(table.rows))
        if size is not None:
            data["size"] = np.full(rows.size, size)
            rows = _measured(data, table, size, columns, notes)
            data = {role: values[rows] for role, values in data.items()}
        for role, value in constants.items():
            data[role] = np.full(rows.size, value)
        yield Piece(table.place, data, _placer(table, columns, rows))


def _measured(
    data: Mapping[str, FloatArray], table: TextTable, size: float, columns: Mapping[str, int], notes: list[str]
) -> np.typing.NDArray[np.intp]:
    """Rows at which a size was measured.

    Raises
    ------
    InputError
        If there is a mean without its error, or the other way round.
    """
    gaps = {role: np.isnan(data[role]) for role in columns if role not in ("disorder", "samples")}
    some, every = np.any(list(gaps.values()), axis=0), np.all(list(gaps.values()), axis=0)
    if (odd := np.flatnonzero(some & ~every)).size:
        role = next(role for role, missing in gaps.items() if missing[odd[0]])
        raise InputError("the cell is empty, but others of its size are not; give all or none",
                         where=table.cell_place(int(odd[0]), columns[role]))  # fmt: skip
    if every.any():
        at = listed(f"{value:g}" for value in data["disorder"][every])
        notes.append(f"size {size:g}: not measured at disorder {at}, where the cells are empty")
    return np.flatnonzero(~every)


def _placer(
    table: TextTable, columns: Mapping[str, int], rows: np.typing.NDArray[np.intp]
) -> Callable[[int, str | None], str]:
    """Place of row i of a piece, for faults."""

    def place(row: int, role: str | None) -> str:
        if role is not None and role in columns:
            return table.cell_place(int(rows[row]), columns[role])
        return f"{table.place}, line {table.lines[rows[row]]}"

    return place
