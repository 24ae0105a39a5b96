"""The program's own HDF5: a group ``/curves/<size>`` for each size with the curve as datasets.

=====================================  ======================================================================
``/curves/<size>/disorder``            disorder strengths, shape (n,)
``/curves/<size>/mean``, ``error``     mean over realisations and its standard error, shape (n,)
``/curves/<size>/covariance``          covariance of the means, shape (n, n), optional
``/curves/<size>/samples``             realisations behind each mean, shape (n,), optional
=====================================  ======================================================================

The name of a group is its size as a number. Attributes of the file carry the labels under the names of the fields of
`driftline.curves.Labels`; the text ``none`` stands for a reference value that is not known. A file is not trusted:
links and storage that lead out of it are refused, and shapes are checked before anything is read.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from driftline.curves import Curve
from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.base import (
    LABEL_NAMES,
    NUMERIC_LABELS,
    Contents,
    Layout,
    check_columns,
    label,
    located,
    number,
)
from driftline.readers.guard import (
    MAX_NUMBERS,
    attribute,
    check_dataset,
    hdf5_signed,
    member,
    open_hdf5,
    refuse_foreign_values,
)
from driftline.reading import InputOptions
from driftline.wording import listed, shown

if TYPE_CHECKING:
    import h5py  # imported inside the functions that need it: nobody else should wait for it

FORMAT = "driftline-curves/1"
VECTORS = ("disorder", "mean", "error", "samples")
MAX_SIZES = 10_000
_SUFFIXES = (".h5", ".hdf5", ".hdf")


class Hdf5Layout(Layout):
    """The program's own HDF5 file."""

    name = "hdf5"
    description = "HDF5 with /curves/<size>/{disorder,mean,error[,covariance][,samples]} and labels as attributes"

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """By the group ``/curves`` as long as no option asks for another reading, or by the name of a file that lies.

        A damaged file counts as one, so that reading it says what is wrong.
        """
        if not hdf5_signed(path, str(path)):
            return path.suffix.lower() in _SUFFIXES
        try:
            with open_hdf5(path, str(path)) as file:
                return "curves" in file and not options.given()
        except InputError:
            return True

    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read the file; see `Layout.contents`."""
        with open_hdf5(path, place) as file:
            labels, notes = _labels(file, place)
            groups = _groups(file, place)
            _check_total(groups, place)
            curves, rows = [], 0
            for size, group in groups.items():
                curve, extra = _curve(size, group, place)
                curves.append(curve)
                notes.extend(extra)
                rows += curve.disorder.size
            used = [name for name in (*VECTORS, "covariance") if any(name in group for group in groups.values())]
        columns = {"size": "/curves/<size>", **{name: f"/curves/<size>/{name}" for name in used}}
        return Contents(curves, labels, columns, rows, notes)


def _labels(file: h5py.File, place: str) -> tuple[dict[str, str | float | None], list[str]]:
    labels: dict[str, str | float | None] = {}
    notes = []
    for name in file.attrs:
        where = f"{place}, attribute {shown(name)}"
        if name == "format":
            if (found := _attribute(file, name, where)) != FORMAT:
                raise InputError(f"the format is {shown(str(found))}, but only {FORMAT!r} can be read", where=where)
        elif name in LABEL_NAMES:
            labels[name] = label(name, _attribute(file, name, where), where)
        else:
            notes.append(f"attribute {shown(name)} is not a label and was not used")
    return labels, notes


def _attribute(file: h5py.File, name: str, where: str) -> str | float:
    kind = "a number" if name in NUMERIC_LABELS else "text"
    value = attribute(file, name, where, kind=kind)
    if isinstance(value, float) and kind == "text":
        raise InputError("the attribute must be text", where=where)
    return value


def _groups(file: h5py.File, place: str) -> dict[float, h5py.Group]:
    """Groups by size."""
    top = member(file, "curves", f"{place}, /curves")
    found = listed(file) or "nothing"
    if not _is_group(top):
        raise InputError(f"there is no group /curves; the file holds {found}", where=place)
    if len(top) > MAX_SIZES:
        raise InputError(f"there are {len(top)} sizes, but at most {MAX_SIZES} can be read", where=f"{place}, /curves")
    groups: dict[float, h5py.Group] = {}
    for name in top:
        where = f"{place}, /curves/{listed([name])}"
        size = _size(name, where)
        if size in groups:
            raise InputError(f"size {size:g} occurs twice; put its points into one group", where=where)
        group = member(top, name, where)
        if not _is_group(group):
            raise InputError("this must be a group with the datasets of one size", where=where)
        groups[size] = group
    return groups


def _size(name: str, where: str) -> float:
    try:
        size = number(name, where)
    except InputError as reason:
        raise InputError("the name of a group must be a size, a positive number", where=where) from reason
    if size <= 0:
        raise InputError("the name of a group must be a size, a positive number", where=where)
    return size


def _is_group(item: Any) -> bool:
    import h5py

    return isinstance(item, h5py.Group)


def _check_total(groups: dict[float, h5py.Group], place: str) -> None:
    """Check every dataset, and how many numbers they declare together, before any of them is read."""
    total = 0
    for group in groups.values():
        where = f"{place}, {group.name}"
        check_columns(list(group), where, word="dataset", needed=VECTORS[:3])
        for name in (*VECTORS, "covariance"):
            item = member(group, name, f"{place}, {group.name}/{name}")
            if item is not None:
                total += _checked_dataset(item, name, f"{place}, {group.name}/{name}")
        lengths = {group[name].shape[0] for name in VECTORS if name in group}
        if len(lengths) > 1:
            each = ", ".join(f"{name} {group[name].shape[0]}" for name in VECTORS if name in group)
            raise InputError(f"the datasets have different lengths ({each})", where=where)
    if total > MAX_NUMBERS:
        problem = f"the file declares {total} numbers, but a summary of at most {MAX_NUMBERS} can be read"
        raise InputError(problem, where=place)


def _checked_dataset(item: Any, name: str, where: str) -> int:
    """Number of values in a dataset that may be read."""
    import h5py

    if not isinstance(item, h5py.Dataset):
        raise InputError("this must be a dataset of numbers", where=where)
    refuse_foreign_values(item, where)
    wanted = 2 if name == "covariance" else 1
    if item.shape is None or len(item.shape) != wanted:
        found = "nothing" if item.shape is None else f"an array of shape {item.shape}"
        raise InputError(f"this must be an array with {wanted} dimension{'s' * (wanted > 1)}, not {found}", where=where)
    return check_dataset(item, where)


def _curve(size: float, group: h5py.Group, place: str) -> tuple[Curve, list[str]]:
    """One size, sorted by disorder, with notes."""
    data: dict[str, npt.NDArray[Any]] = {
        name: group[name][()] for name in (*VECTORS, "covariance") if name in group
    }  # fmt: skip
    where = listed([str(group.name)])
    notes = []
    unused = [name for name in group if name not in data]
    if unused:
        notes.append(f"{where}: not used: {listed(unused)}")
    order = np.argsort(data["disorder"], kind="stable")
    if np.any(order != np.arange(order.size)):
        notes.append(f"{where}: the points were not in the order of disorder and have been sorted")
        data = _sorted(data, order, f"{place}, {where}")
    with located(place):
        return Curve(size, **data), notes


def _sorted(data: dict[str, npt.NDArray[Any]], order: npt.NDArray[np.intp], where: str) -> dict[str, npt.NDArray[Any]]:
    n = order.size
    matrix = data.pop("covariance", None)
    result = {name: values[order] for name, values in data.items()}
    if matrix is not None:
        if matrix.shape != (n, n):
            raise InputError(f"the covariance must be a finite matrix of {n} by {n}", where=where)
        result["covariance"] = matrix[np.ix_(order, order)]
    return result
