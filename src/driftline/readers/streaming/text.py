"""A long table of text in bounded memory: pieces of whole lines, each parsed to columns of numbers.

polars parses a piece at full speed but says little about what is wrong with it. So a piece that it refuses, or that
holds an empty or infinite cell, is gone through once more line by line, which either reads it (Fortran exponents,
comments, blank lines) or names the line at fault. A sound table pays nothing for that.
"""

from __future__ import annotations

import gzip
import re
import zlib
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any, TypeVar

import numpy as np
import numpy.typing as npt

from driftline.errors import ConfigurationError, InputError
from driftline.readers.base import number
from driftline.readers.guard.files import opened
from driftline.readers.streaming.runs import Rows, sound
from driftline.wording import shown

if TYPE_CHECKING:
    import polars as pl  # imported inside the function that needs it: nobody else should wait for it

Item = TypeVar("Item")

PIECE = 16 * 2**20  # bytes; some 600 000 rows, enough to keep two cores busy, and two of them are held at once
MAX_LINE = 2**20  # bytes; no table has longer lines, and a file without line breaks must not fill the memory
MAX_WIDTH = 10_000  # columns
GZIP = b"\x1f\x8b"

_WHOLE = re.compile(r"[+-]?\d{1,18}", re.ASCII)  # 18 digits always fit into 64 bits
_BLANKS = re.compile(rb"[ \t]+")
_EDGES = re.compile(rb"^[ \t]+|[ \t]+(?=\r?$)", re.MULTILINE)
_IDLE_LINES = re.compile(rb"^(?:[ \t]*(?:#[^\n]*)?\r?\n)+", re.MULTILINE)  # blank lines and comments
_COMMENT = re.compile(r"\s+#")
_FORTRAN = bytes.maketrans(b"dD", b"eE")


@dataclass(frozen=True)
class Positions:
    """Which column of a long table holds what, counted from zero.

    Parameters
    ----------
    width : int
        Number of columns.
    size, disorder, value : int
        Where the size, the disorder and the value stand.
    realisation : int, optional
        Where the label of the realisation stands, a whole number; without one every row counts as a realisation.
    """

    width: int
    size: int
    disorder: int
    value: int
    realisation: int | None = None

    def __post_init__(self) -> None:
        used = list(self.used.values())
        if not all(0 <= index < self.width <= MAX_WIDTH for index in used):
            raise ConfigurationError(f"columns {used} do not lie in a table of {self.width} (at most {MAX_WIDTH})")
        if len(set(used)) < len(used):
            raise ConfigurationError(f"columns {used}: one column cannot hold two things")

    @property
    def used(self) -> dict[str, int]:
        """Index of each meaning that has a column."""
        names = ("size", "disorder", "realisation", "value")
        return {name: getattr(self, name) for name in names if getattr(self, name) is not None}


class LongText:
    """A long table in a text file, plain or compressed with gzip.

    Parameters
    ----------
    path : Path
        The file.
    place : str
        What faults call it.
    columns : Positions
        What stands where.
    separator : str or None
        One character between the cells; None means runs of blanks and tabs.
    skip : int
        Lines above the first row (comments and the header).
    skip_cut_lines : bool
        Leave out a last line without a line break. A job that was killed while writing leaves one, and its value may
        be short of digits without looking so; by default it is used if it can be read, and `notes` says so.
    piece : int
        Bytes to read at once.
    """

    def __init__(
        self, path: Path, place: str, columns: Positions, *, separator: str | None = ",", skip: int = 1,
        skip_cut_lines: bool = False, piece: int = PIECE,
    ) -> None:  # fmt: skip
        if separator is not None and (len(separator) != 1 or not separator.isascii() or separator in "\r\n#\"'"):
            raise ConfigurationError(f"the separator must be one ASCII character, not {separator!r}")
        self.path, self.place, self.columns = path, place, columns
        self.separator, self.skip, self.skip_cut_lines, self.piece = separator, skip, skip_cut_lines, piece
        self.notes: list[str] = []
        self._untidy = separator is None  # whether pieces have to be tidied up before polars can read them

    def rows(self) -> Iterator[Rows]:
        """The rows in order, a piece at a time; the next piece is read in a thread of its own meanwhile.

        Raises
        ------
        InputError
            If a line cannot be used; the text names file, line and column.
        """
        with _readable(self.path, self.place) as (stream, fraction):
            pieces = ((offset, piece, fraction()) for offset, piece in self._pieces(stream))
            parsed = (rows for part in pieces if (rows := self._parsed(*part)).value.size)
            yield from ahead(parsed)

    def _pieces(self, stream: IO[bytes]) -> Iterator[tuple[int, bytes]]:
        """Runs of whole lines with the place of their first byte in the (unpacked) file."""
        offset = sum(len(self._short_line(stream)) for _ in range(self.skip))
        rest = b""
        while block := stream.read(self.piece):
            block = rest + block
            end = block.rfind(b"\n") + 1
            if not end and len(block) > MAX_LINE:
                raise InputError(_TOO_LONG, where=self._line(offset))
            rest = block[end:]
            if end:
                yield offset, block[:end]
                offset += end
        yield from self._last(offset, rest)

    def _short_line(self, stream: IO[bytes]) -> bytes:
        line = stream.readline(MAX_LINE + 1)
        if len(line) > MAX_LINE:
            raise InputError(_TOO_LONG, where=self.place)
        return line

    def _last(self, offset: int, line: bytes) -> Iterator[tuple[int, bytes]]:
        """The last line where it lacks a line break."""
        if not line.strip():
            return
        where = self._line(offset)
        name = where.removeprefix(f"{self.place}, ")
        if self.skip_cut_lines:
            self.notes.append(f"{name}: the last line has no line break, so it may be cut short; it was left out")
            return
        try:
            self._by_line(offset, line)
        except InputError as fault:
            raise InputError(
                f"the last line has no line end and cannot be used: {fault.problem}; complete it, or leave it out with "
                "--skip-cut-lines",
                where=fault.where,
            ) from fault
        self.notes.append(f"{name}: the last line has no line break, so its value may be cut short; it was used")
        yield offset, line + b"\n"

    def _parsed(self, offset: int, piece: bytes, fraction: float) -> Rows:
        found = None if self._untidy else self._fast(piece)
        if found is None:
            found = self._fast(_tidy(piece, self.separator))
            self._untidy = found is not None  # what one piece needed, the next will need
        rows = None if found is None else _rows(found, fraction)
        return rows if rows is not None and sound(rows) else _rows(self._by_line(offset, piece), fraction)

    def _fast(self, piece: bytes) -> dict[str, npt.NDArray[Any]] | None:
        """The columns as polars reads them; None where it does not, or where a cell is empty."""
        import polars as pl

        wanted = self.columns.used
        kinds: dict[str, type[pl.DataType]] = {f"column_{index + 1}": pl.String for index in range(self.columns.width)}
        kinds |= {
            f"column_{index + 1}": pl.Int64 if name == "realisation" else pl.Float64 for name, index in wanted.items()
        }
        try:
            # without quotes: a stray one would otherwise swallow the lines up to the next
            frame = pl.read_csv(
                piece, has_header=False, schema=kinds, columns=[f"column_{index + 1}" for index in wanted.values()],
                separator=self.separator or ",", quote_char=None,
            )  # fmt: skip
        except pl.exceptions.PolarsError:
            return None
        if any(column.null_count() for column in frame):
            return None
        return {name: frame[f"column_{index + 1}"].to_numpy() for name, index in wanted.items()}

    def _by_line(self, offset: int, piece: bytes) -> dict[str, npt.NDArray[Any]]:
        """The columns line by line, or the fault of the first line that cannot be used."""
        first = None
        kept: list[list[float | int]] = []
        for count, raw in enumerate(piece.split(b"\n")):
            text = raw.decode("utf-8", errors="replace").strip("\r \t" if self.separator != "\t" else "\r ")
            if not text or text.startswith("#"):
                continue
            try:
                kept.append(self._cells(text))
            except InputError as fault:
                first = self._lines_before(offset) + 1
                inner = f", {fault.where}" if fault.where else ""
                raise InputError(fault.problem, where=f"{self.place}, line {first + count}{inner}") from fault
        columns = zip(*kept, strict=True) if kept else ((),) * len(self.columns.used)
        kinds = {name: np.int64 if name == "realisation" else np.float64 for name in self.columns.used}
        return {name: np.array(column, dtype=kinds[name]) for name, column in zip(kinds, columns, strict=True)}

    def _cells(self, text: str) -> list[float | int]:
        cells = _COMMENT.split(text, maxsplit=1)[0].split(self.separator)
        if len(cells) != self.columns.width:
            raise InputError(f"{_counted(len(cells), 'value')} under {_counted(self.columns.width, 'column')}")
        return [_number(cells[index].strip().strip('"'), name) for name, index in self.columns.used.items()]

    def _line(self, offset: int) -> str:
        return f"{self.place}, line {self._lines_before(offset) + 1}"

    def _lines_before(self, offset: int) -> int:
        """Lines in front of a byte; counted when a fault asks for it only."""
        with _readable(self.path, self.place) as (stream, _):
            count, left = 0, offset
            while left and (block := stream.read(min(left, self.piece))):
                count += block.count(b"\n")
                left -= len(block)
        return count


def ahead(items: Iterable[Item]) -> Iterator[Item]:
    """The same items; each is made in a second thread while the one before it is in use."""
    source, end = iter(items), object()
    worker = ThreadPoolExecutor(1)
    try:
        coming = worker.submit(next, source, end)
        while (item := coming.result()) is not end:
            coming = worker.submit(next, source, end)
            yield item  # type: ignore[misc]
    finally:
        worker.shutdown(wait=True, cancel_futures=True)


_TOO_LONG = f"the line is longer than {MAX_LINE} bytes; this is not a table of numbers"


@contextmanager
def _readable(path: Path, place: str) -> Iterator[tuple[IO[bytes], Callable[[], float]]]:
    """The bytes of a file, unpacked if need be, and a function that tells the fraction read so far."""
    with opened(path, place) as raw:
        total = max(1, path.stat().st_size)
        packed = raw.read(2) == GZIP
        raw.seek(0)
        stream: IO[bytes] = gzip.GzipFile(fileobj=raw) if packed else raw  # type: ignore[assignment]
        try:
            yield stream, lambda: min(1.0, raw.tell() / total)
        except (EOFError, zlib.error, gzip.BadGzipFile) as reason:
            raise InputError(
                f"the compressed data are damaged or cut short ({reason}); compress or copy the file again", where=place
            ) from reason


def _rows(found: dict[str, npt.NDArray[Any]], fraction: float) -> Rows:
    return Rows(found["size"], found["disorder"], found["value"], found.get("realisation"), fraction)


def _tidy(piece: bytes, separator: str | None) -> bytes:
    """What polars can read of tables written by hand or by Fortran: no comments, quotes or blanks, exponents with E."""
    if b"#" in piece or b"\n\n" in piece or b"\n\r" in piece or piece.startswith((b"\n", b"\r")):
        piece = _IDLE_LINES.sub(b"", piece)
    piece = piece.translate(_FORTRAN, b'"')
    if separator is None:
        return _BLANKS.sub(b",", _EDGES.sub(b"", piece))
    return piece.translate(None, b" \t".replace(separator.encode(), b""))


def _number(cell: str, name: str) -> float | int:
    where = f"column '{name}'"
    if name == "realisation" and _WHOLE.fullmatch(cell):
        return int(cell)
    value = number(cell, where)
    if name == "size" and value <= 0:
        raise InputError(f"a size must be positive, not {shown(cell)}", where=where)
    if name == "realisation":
        if value != np.floor(value) or abs(value) > 2**53:  # beyond it a double does not hold every whole number
            raise InputError(f"a realisation is a whole number, not {shown(cell)}", where=where)
        return int(value)
    return value


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}{'s' * (count != 1)}"
