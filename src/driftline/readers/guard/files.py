"""Opening one file: only a regular one, without waiting for it, and with the refusals of the system as sentences."""

from __future__ import annotations

import os
import stat
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO

from driftline.errors import InputError

# A FIFO without a writer blocks open() for ever and a terminal may become ours; Windows has neither flag
_FLAGS = os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_NOCTTY", 0) | getattr(os, "O_BINARY", 0)


def check_file(path: Path, place: str) -> None:
    """See that `path` is a regular file with something in it.

    A link is followed, for the user named it; so it must not be called on paths that a file or a pattern named
    (`matching_files` does that).

    Raises
    ------
    InputError
        If it is missing, a folder, a FIFO, a socket or a device, may not be looked at, or is empty.
    """
    with refusals(place):
        _check_status(path.stat(), place)


@contextmanager
def opened(path: Path, place: str) -> Iterator[BinaryIO]:
    """The regular file at `path` as a binary stream, buffered and seekable.

    What kind of file it is gets checked before and after opening: opening a FIFO waits for ever, opening a device can
    act on it, and between the two looks another file may have taken the name.

    Raises
    ------
    InputError
        As `check_file`; also for whatever the system refuses inside the block.
    """
    check_file(path, place)
    with refusals(place), os.fdopen(os.open(path, _FLAGS), "rb") as stream:
        _check_status(os.fstat(stream.fileno()), place)
        yield stream


@contextmanager
def refusals(place: str) -> Iterator[None]:
    """Turn what the operating system refuses inside the block into one sentence about `place`.

    Raises
    ------
    InputError
        For every `OSError`, and for a path that is none.
    """
    try:
        yield
    except FileNotFoundError as reason:
        raise InputError("there is no such file; check the path", where=place) from reason
    except PermissionError as reason:
        raise InputError("the file may not be read; check its permissions", where=place) from reason
    except OSError as reason:
        raise InputError(f"the file cannot be read ({reason.strerror or reason})", where=place) from reason


def _check_status(status: os.stat_result, place: str) -> None:
    if stat.S_ISDIR(status.st_mode):
        raise InputError("this is a folder; give a file", where=place)
    if not stat.S_ISREG(status.st_mode):
        raise InputError("this is not a regular file; save the data to a file first", where=place)
    if status.st_size == 0:
        raise InputError("the file is empty", where=place)
