"""Text of unknown origin, plain or gzip: one line at a time, never more than a stated amount.

A line, a file and what a compressed file unpacks to all have limits, so that neither a line of a gigabyte nor a
kilobyte that unpacks to a terabyte fills the memory.
"""

from __future__ import annotations

import codecs
import gzip
import io
import itertools
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO, cast

from driftline.errors import InputError
from driftline.readers.guard.files import opened, refusals
from driftline.readers.guard.limits import MAX_LINE, MAX_LINES, MAX_TEXT

#: What to do about a summary that is too large.
SUMMARY = "a summary has one row per size and disorder, so average over realisations first"

_BLOCK = 1 << 20
_GZIP = b"\x1f\x8b"
_FOREIGN = (
    (codecs.BOM_UTF32_LE, "is in UTF-32; save it as UTF-8"),  # before UTF-16, whose mark it begins with
    (codecs.BOM_UTF32_BE, "is in UTF-32; save it as UTF-8"),
    (codecs.BOM_UTF16_LE, "is in UTF-16; save it as UTF-8"),
    (codecs.BOM_UTF16_BE, "is in UTF-16; save it as UTF-8"),
    (b"PK\x03\x04", "is a zip archive or a spreadsheet; save the table as CSV"),
    (b"BZh", "is compressed with bzip2; unpack it first"),
    (b"\xfd7zXZ\0", "is compressed with xz; unpack it first"),
    (b"\x28\xb5\x2f\xfd", "is compressed with Zstandard; unpack it first"),
)


def lines(
    path: Path,
    place: str,
    *,
    most: int = MAX_TEXT,
    longest: int = MAX_LINE,
    ends: bool = False,
    advice: str = SUMMARY,
) -> Iterator[tuple[int, str]]:
    """Lines of a text file, each with its number from 1 and without its end, read as they are asked for.

    Parameters
    ----------
    path, place : path, str
        The file, and its name for faults.
    most : int
        Most bytes to read, after unpacking.
    longest : int
        Most characters of a line.
    ends : bool
        Leave the end at each line, as a newline: a last line that was cut short has none.
    advice : str
        What to do about a file that is too large.

    Yields
    ------
    (int, str)
        Line ends are those of any system; a form feed or a Unicode separator is no line end.

    Raises
    ------
    InputError
        If the file is not regular, not UTF-8, holds a zero byte, or is beyond a limit; the text names the line.

    Notes
    -----
    A fault is raised when its line is reached, so use nothing of a file before its last line has come.
    """
    with table_bytes(path, place, most=most, advice=advice) as stream:
        # utf-8-sig drops the mark that spreadsheets put in front
        reader = io.TextIOWrapper(stream, encoding="utf-8-sig", newline=None)
        for count in itertools.count(1):
            if count > MAX_LINES:
                raise InputError(f"the file has more than {MAX_LINES} lines; {advice}", where=place)
            try:
                line = reader.readline(longest + 2)  # one for the end of the line, one to see that it is too long
            except UnicodeDecodeError as reason:
                raise _not_utf8(path, place, most) from reason
            if not line:
                return
            body = line.removesuffix("\n")
            _check_line(body, longest, f"{place}, line {count}")
            yield count, line if ends else body


@contextmanager
def table_bytes(path: Path, place: str, *, most: int = MAX_TEXT, advice: str = SUMMARY) -> Iterator[BinaryIO]:
    """The bytes of a text file, unpacked if they are gzip, as a stream that stops with a fault after `most` bytes.

    For parsers that take a stream of bytes. Encoding, zero bytes and lengths of lines are left to them.

    Raises
    ------
    InputError
        If the file is not regular, starts like another kind of file, is beyond the limit, or its gzip is damaged.
    """
    with opened(path, place) as stream, _gzip_faults(place):
        packed = stream.read(len(_GZIP)) == _GZIP
        size = stream.seek(0, io.SEEK_END)
        stream.seek(0)
        if size > most:
            raise InputError(_too_large(most, advice, packed=packed), where=place)
        plain = cast("BinaryIO", gzip.GzipFile(fileobj=stream)) if packed else stream
        bounded = io.BufferedReader(cast("io.RawIOBase", _Bounded(plain, most, place, advice)), _BLOCK)
        _refuse_foreign(bounded.peek(8), packed, place)
        yield cast("BinaryIO", bounded)


class _Bounded(io.RawIOBase):
    """At most `most` bytes of `source`; asking for more is a fault rather than an end, which would look complete."""

    def __init__(self, source: BinaryIO, most: int, place: str, advice: str) -> None:
        self._source, self._left, self._most, self._place, self._advice = source, most, most, place, advice

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: bytearray) -> int:  # type: ignore[override]
        got = self._source.read(min(len(buffer), _BLOCK))
        self._left -= len(got)
        if self._left < 0:
            raise InputError(_too_large(self._most, self._advice, packed=True), where=self._place)
        buffer[: len(got)] = got
        return len(got)


@contextmanager
def _gzip_faults(place: str) -> Iterator[None]:
    try:
        with refusals(place):
            yield
    except (EOFError, zlib.error) as reason:
        raise InputError("the gzip file is truncated or damaged; copy or pack it again", where=place) from reason
    except InputError as reason:
        if isinstance(reason.__cause__, gzip.BadGzipFile):
            problem = "the gzip file is truncated or damaged; copy or pack it again"
            raise InputError(problem, where=place) from reason
        raise


def _too_large(most: int, advice: str, *, packed: bool) -> str:
    subject = "what the file unpacks to" if packed else "the file"
    amount = f"{most / 1e6:.0f} MB" if most >= 1_000_000 else f"{most / 1e3:g} kB"
    return f"{subject} is larger than {amount}; {advice}"


def _refuse_foreign(start: bytes, packed: bool, place: str) -> None:
    if packed and start.startswith(_GZIP):
        raise InputError("the file is compressed with gzip twice; unpack it once", where=place)
    for mark, problem in _FOREIGN:
        if start.startswith(mark):
            raise InputError(f"the file {problem}", where=place)


def _check_line(line: str, longest: int, where: str) -> None:
    if "\0" in line:
        raise _zero_byte(where)
    if len(line) > longest:
        raise InputError(f"the line is longer than {longest} characters; break it or give another file", where=where)


def _not_utf8(path: Path, place: str, most: int) -> InputError:
    """The fault with byte and line; found by a second pass, because the first one decodes ahead of the lines.

    A zero byte in the same megabyte says more than the wrong byte, since it tells binary data from another encoding.
    """
    decoder, before, last = codecs.getincrementaldecoder("utf-8")(), 1, b""
    with table_bytes(path, place, most=most) as stream:
        while block := stream.read(_BLOCK):
            held = len(decoder.getstate()[0])  # bytes of a character that the block before began
            try:
                decoder.decode(block)
            except UnicodeDecodeError as reason:
                zero = block.find(b"\0")
                at = max(0, reason.start - held) if zero < 0 else zero
                where = f"{place}, line {before + _line_ends(last + block[:at]) - _line_ends(last)}"
                return _bad_byte(reason.object[reason.start], where) if zero < 0 else _zero_byte(where)
            before += _line_ends(last + block) - _line_ends(last)
            last = block[-1:]
    return _bad_byte(last[0] if last else 0, f"{place}, line {before}")  # the file ends within a character


def _zero_byte(where: str) -> InputError:
    problem = "there is a zero byte, so this is binary data or UTF-16; save it as text in UTF-8"
    return InputError(problem, where=where)


def _bad_byte(value: int, where: str) -> InputError:
    return InputError(f"byte 0x{value:02x} is not valid UTF-8; save the file as UTF-8", where=where)


def _line_ends(raw: bytes) -> int:
    return raw.count(b"\n") + raw.count(b"\r") - raw.count(b"\r\n")
