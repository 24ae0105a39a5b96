"""``.npz`` archives and ``.npy`` files of unknown origin: numbers only, counted before they are read, never pickles.

Hazards: an object array is a pickle, which runs code when it is read; a header of a hundred bytes declares any shape; a
member of an archive may unpack to a thousand times its size; the list of members may be longer than the memory.
"""

from __future__ import annotations

import io
import math
import struct
import tokenize
import warnings
import zipfile
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO, Any, BinaryIO

import numpy as np
import numpy.typing as npt

from driftline.errors import DriftlineError, InputError
from driftline.readers.guard.files import opened, refusals
from driftline.readers.guard.limits import MAX_NAME, MAX_NUMBERS, MAX_OBJECTS
from driftline.wording import listed, shown

_MAGIC = b"\x93NUMPY"
_END = b"PK\x05\x06"
_ENTRY = 46  # bytes of an entry in the list of members, without its name (zip specification 4.3.12)
_MAX_HEADER = 10_000  # bytes; the default of numpy


class Archive:
    """The arrays of an ``.npz`` that `open_npz` opened."""

    def __init__(self, packed: zipfile.ZipFile, place: str) -> None:
        self._place = place
        self._members = {info.filename.removesuffix(".npy"): info for info in packed.infolist()}
        self._packed = packed
        if long := next((name for name in self._members if len(name) > MAX_NAME), None):
            raise InputError(f"the name {shown(long)} is longer than {MAX_NAME} characters", where=place)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the arrays, in the order of the file."""
        return tuple(self._members)

    def shape(self, name: str) -> tuple[int, ...]:
        """Shape that the array called `name` declares, without reading it.

        Raises
        ------
        InputError
            As `read`, but for the number of values.
        """
        with self._member(name) as stream:
            return _header(stream, self._members[name].file_size, self._where(name))[0]

    def read(self, name: str, *, most: int = MAX_NUMBERS) -> npt.NDArray[Any]:
        """The array called `name`.

        Raises
        ------
        InputError
            If there is none, it is no array of real numbers, holds more than `most`, or is damaged.
        """
        with self._member(name) as stream:
            return _array(stream, self._members[name].file_size, self._where(name), most)

    def _member(self, name: str) -> IO[bytes]:
        if name not in self._members:
            known = listed(self._members) or "none"
            raise InputError(f"there is no array {shown(name)}; the arrays are {known}", where=self._place)
        info = self._members[name]
        if info.flag_bits & 1:
            raise InputError("the array is encrypted; save it without", where=self._where(name))
        if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
            raise InputError("the array is packed in an unusual way; use numpy.savez", where=self._where(name))
        return self._packed.open(info)

    def _where(self, name: str) -> str:
        return f"{self._place}, array {shown(name)}"


@contextmanager
def open_npz(path: Path, place: str) -> Iterator[Archive]:
    """The ``.npz`` archive at `path`; whatever is damaged inside becomes one sentence.

    Raises
    ------
    InputError
        If the file is not a zip archive, has too many members, or turns out to be damaged inside the block.
    """
    with _damage(place), opened(path, place) as stream:
        _check_directory(stream, place)
        with zipfile.ZipFile(stream) as packed:
            archive = Archive(packed, place)
            if len(archive.names) < len(packed.infolist()):
                raise InputError("two arrays have the same name; give each its own", where=place)
            yield archive


def read_npy(path: Path, place: str, *, most: int = MAX_NUMBERS) -> npt.NDArray[Any]:
    """The array in the ``.npy`` file at `path`.

    Raises
    ------
    InputError
        If it is no array of real numbers, holds more than `most`, or is damaged.
    """
    with _damage(place), opened(path, place) as stream:
        size = stream.seek(0, io.SEEK_END)
        stream.seek(0)
        return _array(stream, size, place, most)


def _check_directory(stream: BinaryIO, place: str) -> None:
    """Bound the list of members, which `zipfile` reads whole, by the record at the end (zip specification 4.3.16)."""
    size = stream.seek(0, io.SEEK_END)
    stream.seek(max(0, size - (1 << 16) - 22))  # the record of 22 bytes may be followed by a comment of 64 KiB
    tail = stream.read()
    at = tail.rfind(_END)
    if at < 0 or len(tail) < at + 22:
        raise InputError("this is not a zip archive, or it was cut short; write it again with numpy.savez", where=place)
    (length,) = struct.unpack_from("<I", tail, at + 12)
    sixty_four = tail[max(0, at - 20) : at].startswith(b"PK\x06\x07")
    if sixty_four:
        (record,) = struct.unpack_from("<Q", tail, at - 20 + 8)
        stream.seek(min(record + 40, size))
        field = stream.read(8)
        length = struct.unpack("<Q", field)[0] if len(field) == 8 else size
    if length > MAX_OBJECTS * _ENTRY:
        raise InputError(f"the archive holds more than {MAX_OBJECTS} arrays; split it", where=place)
    stream.seek(0)


def _array(stream: IO[bytes], size: int, where: str, most: int) -> npt.NDArray[Any]:
    shape, fortran, dtype, used = _header(stream, size, where)
    count = math.prod(shape)
    if count > most:
        raise InputError(f"the array declares {count} numbers, but at most {most} can be read", where=where)
    needed = count * dtype.itemsize
    if size - used != needed:
        problem = f"the array declares {needed} bytes of numbers, but {size - used} are stored; write it again"
        raise InputError(problem, where=where)
    raw = stream.read(needed + 1)  # one more, so that the checksum of a member is compared at its end
    if len(raw) != needed:
        raise EOFError
    flat = np.frombuffer(raw, dtype).astype(dtype.newbyteorder("="))  # a copy that may be written to
    return flat.reshape(shape[::-1]).T if fortran else flat.reshape(shape)


def _header(stream: IO[bytes], size: int, where: str) -> tuple[tuple[int, ...], bool, np.dtype[Any], int]:
    """Shape, order, type, and bytes of the header; see the description of the format in `numpy.lib.format`."""
    start = stream.read(len(_MAGIC) + 2)
    if not start.startswith(_MAGIC) or len(start) < len(_MAGIC) + 2:
        raise InputError("this is not an array of numpy; write it with numpy.save or numpy.savez", where=where)
    major = start[len(_MAGIC)]
    if major not in (1, 2):  # 3 is for names of fields beyond Latin-1, so for compound types only
        raise InputError("this must be an array of real numbers in version 1 or 2 of the format", where=where)
    reading = np.lib.format.read_array_header_1_0 if major == 1 else np.lib.format.read_array_header_2_0
    length = stream.read(2 if major == 1 else 4)
    body = stream.read(min(int.from_bytes(length, "little"), _MAX_HEADER + 1))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # that a header was written by Python 2
        shape, fortran, dtype = reading(io.BytesIO(length + body), max_header_size=_MAX_HEADER)
    if dtype.kind not in "iuf":
        problem = "this must be an array of real numbers, not objects, text, logical values or a compound type"
        raise InputError(problem, where=where)
    if any(extent < 0 for extent in shape):
        raise ValueError(shape)
    return shape, fortran, dtype, len(start) + len(length) + len(body)


@contextmanager
def _damage(place: str) -> Iterator[None]:
    """Turn what numpy and zipfile raise on a broken file into one sentence."""
    try:
        with refusals(place):
            yield
    except DriftlineError:  # ours are ValueErrors, like some of the libraries' own
        raise
    except (
        zipfile.BadZipFile, zlib.error, struct.error, EOFError, ValueError, TypeError, LookupError, SyntaxError,
        OverflowError, RuntimeError, NotImplementedError, MemoryError, tokenize.TokenError,
    ) as reason:  # fmt: skip
        raise InputError("the file is truncated or damaged; copy or write it again", where=place) from reason
