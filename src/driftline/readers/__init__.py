"""Files to `Curves`: `read` finds the layout of a file and reads it; one strategy per layout stands in `LAYOUTS`.

The formats of the program's own are the summary CSV (`driftline.readers.table`) and HDF5 (`driftline.readers.hdf5`);
both can be written back with `driftline.readers.write`.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

from driftline.curves import Curves
from driftline.errors import ConfigurationError, InputError
from driftline.readers.base import Layout
from driftline.readers.hdf5 import Hdf5Layout
from driftline.readers.table import TableLayout

#: Asked in this order; the table comes last because any text file might be one.
LAYOUTS: tuple[Layout, ...] = (
    Hdf5Layout(),
    TableLayout(),
)

__all__ = ["LAYOUTS", "Layout", "read"]


def read(path: str | os.PathLike[str], *, layout: str | None = None, **labels: Any) -> Curves:
    """Read the curves in a file.

    Parameters
    ----------
    path : path
        A summary CSV (header ``size,disorder,mean,error[,samples]``) or HDF5 file of the program's own; the content
        decides, not the name.
    layout : str, optional
        Name of a layout in `LAYOUTS`, to take that one without asking the content.
    **labels
        Fields of `driftline.curves.Labels` that replace what the file says, for example ``ergodic_value=0.5307``.

    Returns
    -------
    Curves
        With ``origin`` holding path, sha256, layout, columns, rows and notes.

    Raises
    ------
    InputError
        If the file is missing, cannot be read or breaks the rules of its layout; the text names file, line and column.
    ConfigurationError
        If there is no such layout or label.
    """
    place, target = os.fspath(path), Path(path)
    chosen = None if layout is None else _named(layout)
    try:
        _check_kind(target, place)
        chosen = chosen or _recognised(target, place)
        if target.is_dir() != chosen.folder:
            _refuse_kind(target, place)
        return chosen.read(target, place, labels)
    except PermissionError as reason:
        raise InputError("the file may not be read; check its permissions", where=place) from reason
    except OSError as reason:
        raise InputError(f"the file cannot be read ({reason.strerror or reason})", where=place) from reason


def _named(name: str) -> Layout:
    for layout in LAYOUTS:
        if layout.name == name:
            return layout
    names = ", ".join(layout.name for layout in LAYOUTS)
    raise ConfigurationError(f"there is no layout {name!r}; the layouts are {names}")


def _recognised(path: Path, place: str) -> Layout:
    for layout in LAYOUTS:
        if layout.folder == path.is_dir() and layout.recognises(path):
            return layout
    return _refuse_kind(path, place)


def _check_kind(path: Path, place: str) -> None:
    if not path.exists():
        raise InputError("there is no such file; check the path", where=place)
    if path.is_dir():
        return
    if not path.is_file():
        raise InputError("this is not a regular file; save the data to a file first", where=place)
    if path.stat().st_size == 0:
        raise InputError("the file is empty", where=place)


def _refuse_kind(path: Path, place: str) -> Layout:
    if path.is_dir():
        raise InputError("this is a folder; give a file (a summary CSV or HDF5)", where=place)
    raise InputError("no layout recognises this file; give a summary CSV or HDF5", where=place)
