"""Files to `Curves`: `read` finds the layout of a file and reads it; one strategy per layout stands in `LAYOUTS`.

The formats of the program's own are the summary CSV (`driftline.readers.table`) and HDF5 (`driftline.readers.hdf5`);
both can be written back with `driftline.readers.write`.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from driftline.curves import Curves
from driftline.errors import ConfigurationError, InputError
from driftline.progress import Progress
from driftline.readers.arrays import Hdf5TreeLayout, NpzLayout
from driftline.readers.base import Layout
from driftline.readers.folder import FolderLayout
from driftline.readers.frames import curves_of_table
from driftline.readers.hdf5 import Hdf5Layout
from driftline.readers.table import SummaryLayout, TableLayout, WideLayout
from driftline.reading import InputOptions
from driftline.wording import shown

#: Asked in this order; the table comes last because any text file might be one.
LAYOUTS: tuple[Layout, ...] = (
    FolderLayout(),
    Hdf5Layout(),
    Hdf5TreeLayout(),
    NpzLayout(),
    SummaryLayout(),
    WideLayout(),
    TableLayout(),
)

__all__ = ["LAYOUTS", "Layout", "read"]


def read(
    path: Any, *, input: InputOptions | None = None, progress: Progress | None = None, **words: Any
) -> Curves:  # fmt: skip
    """Read the curves in a file or folder.

    Parameters
    ----------
    path : path or table
        A file or folder in one of the `LAYOUTS`; the content decides which, not the name. Or a table in memory, as
        `Curves.from_table` takes it.
    input : InputOptions, optional
        How to read it, as far as the content does not say so.
    progress : callable, optional
        Called with (what is being done, fraction done) while a large file is read.
    **words
        Fields of `driftline.reading.InputOptions`, put over `input`: ``columns={"size": "L", "mean": "r"}``; and fields
        of `driftline.curves.Labels` that replace what the file says: ``ergodic_value=0.5307``.

    Returns
    -------
    Curves
        With ``origin`` holding path, sha256, layout, columns, rows and notes, and as ``input`` the options that read
        the file again in the same way.

    Raises
    ------
    InputError
        If the file is missing, cannot be read, breaks the rules of its layout, or leaves open what its columns hold;
        the text names file, line and column.
    ConfigurationError
        If there is no such layout, option or label, or an option cannot be used.
    """
    options, labels = split_words(input, words)
    if not isinstance(path, str | os.PathLike):
        return curves_of_table(path, options, labels)
    place, target = os.fspath(path), Path(path)
    chosen = None if options.layout is None else _named(options.layout)
    try:
        _check_kind(target, place)
        chosen = chosen or _recognised(target, place, options)
        if target.is_dir() != chosen.folder:
            kinds = ("file", "folder") if chosen.folder else ("folder", "file")
            raise InputError(f"this is a {kinds[0]}, and the layout {chosen.name} reads a {kinds[1]}", where=place)
        return chosen.read(target, place, labels, options, progress)
    except PermissionError as reason:
        raise InputError("the file may not be read; check its permissions", where=place) from reason
    except OSError as reason:
        raise InputError(f"the file cannot be read ({reason.strerror or reason})", where=place) from reason


def split_words(input: InputOptions | None, words: Mapping[str, Any]) -> tuple[InputOptions, dict[str, Any]]:
    """Keywords of `read` as options and labels."""
    names = InputOptions.names()
    given = {name: value for name, value in words.items() if name in names}
    labels = {name: value for name, value in words.items() if name not in names}
    return replace(input or InputOptions(), **given), labels


def _named(name: str) -> Layout:
    for layout in LAYOUTS:
        if layout.name == name:
            return layout
    names = ", ".join(layout.name for layout in LAYOUTS)
    raise ConfigurationError(f"there is no layout {shown(name)}; the layouts are {names}")


def _recognised(path: Path, place: str, options: InputOptions) -> Layout:
    for layout in LAYOUTS:
        if layout.folder == path.is_dir() and layout.recognises(path, options):
            return layout
    raise InputError("no layout recognises this file; say which it is with --layout", where=place)


def _check_kind(path: Path, place: str) -> None:
    if not path.exists():
        raise InputError("there is no such file; check the path", where=place)
    if path.is_dir():
        return
    if not path.is_file():
        raise InputError("this is not a regular file; save the data to a file first", where=place)
    if path.stat().st_size == 0:
        raise InputError("the file is empty", where=place)
