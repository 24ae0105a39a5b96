"""`Curves` to files, in the program's own formats; reading them back gives the same numbers to the last bit.

Choose the CSV to look at the numbers or hand them on, HDF5 where the points of a size are correlated: only it holds
covariances.
"""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import asdict
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy.typing as npt

from driftline.curves import Curve, Curves, Labels
from driftline.errors import ConfigurationError, InputError
from driftline.readers.hdf5 import FORMAT, VECTORS
from driftline.readers.stores import REALISATIONS

if TYPE_CHECKING:
    import h5py  # imported inside the functions that need it

Facts = Mapping[str, str | float]


def write_csv(curves: Curves, path: str | os.PathLike[str], *, facts: Facts = MappingProxyType({})) -> None:
    """Write a summary CSV, with the labels as comments above the header.

    Parameters
    ----------
    curves : Curves
    path : path
    facts : mapping, optional
        Further comments, ``name = value``, which readers pass over.

    Raises
    ------
    InputError
        If a size brings a covariance, for which the CSV has no place.
    ConfigurationError
        If the file cannot be written.
    """
    if curves.correlated:
        raise InputError("a summary CSV has no place for the covariance of the points; write HDF5 instead")
    counted = any(curve.samples is not None for curve in curves.curves)
    lines = [f"# {name}: {value}".rstrip() for name, value in _label_texts(curves.labels)]
    lines += [f"# {name} = {value}" for name, value in facts.items()]
    lines.append("size,disorder,mean,error" + ",samples" * counted)
    for curve in curves.curves:
        lines.extend(_rows(curve, counted))
    with replacing(path) as part:
        part.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def write_hdf5(curves: Curves, path: str | os.PathLike[str], *, facts: Facts = MappingProxyType({})) -> None:
    """Write the program's own HDF5 (see `driftline.readers.hdf5`); the same curves give the same bytes.

    Parameters
    ----------
    curves : Curves
    path : path
    facts : mapping, optional
        Attributes of the group ``/curves``, which readers pass over.

    Raises
    ------
    ConfigurationError
        If the file cannot be written.
    """
    with replacing(path) as part, new_hdf5(part) as file:
        for name, value in {"format": FORMAT, **asdict(curves.labels)}.items():
            _set_attribute(file, name, "none" if value is None else value)
        group = file.create_group("curves")
        for name, value in facts.items():
            _set_attribute(group, name, value)
        for curve in curves.curves:
            group = file.create_group(f"curves/{_text(curve.size)}")
            for name in (*VECTORS, "covariance"):
                values = getattr(curve, name)
                if values is not None:
                    group.create_dataset(name, data=values, track_times=False)


def write_realisations(
    table: Mapping[str, npt.NDArray[Any]], labels: Mapping[str, str | float | None], path: str | os.PathLike[str],
    remark: str = "",
) -> None:  # fmt: skip
    """Write a realisation table: HDF5 where the name ends in ``.h5`` or ``.hdf5``, otherwise CSV.

    Parameters
    ----------
    table : mapping
        Equally long columns ``size``, ``disorder``, ``realisation`` and ``value``; in HDF5 a dataset each.
    labels : mapping
        Fields of `driftline.curves.Labels`: comments above the header of the CSV, attributes of the HDF5 file.
    path : path
        Where; the file appears when it is complete.
    remark : str
        A further line of comment.

    Raises
    ------
    ConfigurationError
        If the file cannot be written.
    """
    columns = {name: table[name] for name in ("size", "disorder", "realisation", "value")}
    with replacing(path) as part:
        if Path(path).suffix.lower() in (".h5", ".hdf5"):
            _write_columns(columns, labels, part, remark)
            return
        with part.open("w", encoding="utf-8", newline="\n") as stream:
            if remark:
                stream.write(f"# {remark}\n")
            for name, value in labels.items():
                stream.write(f"# {name}: {'none' if value is None else value}\n")
            stream.write(",".join(columns) + "\n")
            for row in zip(*(column.tolist() for column in columns.values()), strict=True):
                stream.write(",".join(_text(value) for value in row) + "\n")


def _write_columns(
    columns: Mapping[str, npt.NDArray[Any]], labels: Mapping[str, str | float | None], part: Path, remark: str
) -> None:
    with new_hdf5(part) as file:
        for name, value in {"format": REALISATIONS, **({"remark": remark} if remark else {}), **labels}.items():
            _set_attribute(file, name, "none" if value is None else value)
        for name, column in columns.items():
            file.create_dataset(name, data=column, track_times=False)


@contextmanager
def new_hdf5(path: Path, **options: Any) -> Iterator[h5py.File]:
    """A new HDF5 file, made in memory and put at `path` when the block ends well.

    The HDF5 library (seen with 2.0) ends the whole process with a segmentation fault when the disk is full.

    Parameters
    ----------
    path : Path
    **options
        Given on to `h5py.File`.

    Raises
    ------
    OSError
        If the system does not take the file.
    """
    import h5py

    with h5py.File(str(path), "w", driver="core", backing_store=False, **options) as file:
        yield file
        file.flush()
        image = file.id.get_file_image()
    path.write_bytes(image)


def _set_attribute(place: h5py.Group, name: str, value: str | float) -> None:
    """Text goes in with a fixed length: the HDF5 library can hang for ever in the damaged heap of variable lengths."""
    import h5py

    if isinstance(value, str):
        raw = value.encode("utf-8")
        place.attrs.create(name, raw, dtype=h5py.string_dtype("utf-8", max(1, len(raw))))
    else:
        place.attrs[name] = value


@contextmanager
def replacing(path: str | os.PathLike[str]) -> Iterator[Path]:
    """A temporary path beside `path` that takes its place when the block ends well, and vanishes when it does not.

    Raises
    ------
    ConfigurationError
        If the operating system refuses.
    """
    target = Path(path)
    if not target.parent.is_dir():
        raise ConfigurationError(f"{target}: the file cannot be written (there is no such folder)")
    part = target.with_name(f".{target.name}.{os.getpid()}.part")  # the process id keeps two runs apart
    try:
        yield part
        part.replace(target)
    except OSError as reason:
        raise ConfigurationError(f"{target}: the file cannot be written ({reason.strerror or reason})") from reason
    finally:
        part.unlink(missing_ok=True)


def _rows(curve: Curve, counted: bool) -> Iterator[str]:
    for i in range(curve.disorder.size):
        values = (curve.size, curve.disorder[i], curve.mean[i], curve.error[i])
        row = ",".join(_text(float(value)) for value in values)
        if counted:
            row += "," + ("" if curve.samples is None else str(int(curve.samples[i])))
        yield row


def _label_texts(labels: Labels) -> Iterator[tuple[str, str]]:
    for name, value in asdict(labels).items():
        if value is None:
            yield name, "none"
        else:
            yield name, _text(value) if isinstance(value, float) else value


def _text(value: float | int) -> str:
    """Shortest text that reads back as the same double, without a needless ``.0``."""
    return repr(value).removesuffix(".0")
