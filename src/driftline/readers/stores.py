"""HDF5 files and ``.npz`` archives as one thing: arrays under paths, with shapes known before anything is read."""

from __future__ import annotations

import re
from abc import ABC, abstractmethod
from collections.abc import Iterator
from contextlib import contextmanager
from itertools import islice
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.readers.base import LABEL_NAMES, label, number
from driftline.readers.guard import Archive, attribute, open_hdf5, open_npz, read_numbers, refuse_foreign_values, walk
from driftline.wording import listed, printable, shown

if TYPE_CHECKING:
    import h5py  # imported inside the functions that need it: nobody else should wait for it


MOST_SHOWN = 12  # kinds of arrays in a sentence

#: Attribute ``format`` of a realisation table that the program wrote
REALISATIONS = "driftline-realisations/1"


class Store(ABC):
    """Arrays by path; groups are paths without an array. Paths have no slash at the front.

    Parameters
    ----------
    place : str
        The file in the user's own words.
    shapes : dict
        Path to shape, in the order of the file.
    groups : list of str
        Paths of the groups.
    """

    word = "dataset"

    def __init__(self, place: str, shapes: dict[str, tuple[int, ...]], groups: list[str]) -> None:
        self.place, self.shapes, self.groups = place, shapes, groups

    def where(self, path: str) -> str:
        """Place of an array, for faults."""
        return f"{self.place}, {self.word} {path}"

    @abstractmethod
    def read(self, path: str) -> FloatArray:
        """The array at `path`, in double precision.

        Raises
        ------
        InputError
            If it is not one of numbers, or too large.
        """

    @abstractmethod
    def parameter(self, path: str, name: str) -> float | None:
        """The attribute `name` of the object at `path` or of the nearest group above that has it."""

    def attributes(self) -> list[str]:
        """Names of attributes, each once."""
        return []

    def labels(self) -> dict[str, str | float | None]:
        """Labels that the file carries; only the program's own files do, elsewhere such names could mean anything."""
        return {}

    def seen(self) -> str:
        """The arrays with their shapes, for a sentence; those whose paths differ in numbers only count as one."""
        kinds: dict[str, list[tuple[int, ...]]] = {}
        for path, shape in self.shapes.items():
            kinds.setdefault(re.sub(r"\d+(\.\d+)?", "#", path), []).append(shape)
        every = [f"{printable(kind)[:60]} {_sizes(shapes)}" for kind, shapes in kinds.items()]
        rest = f" and {len(every) - MOST_SHOWN} more" if len(every) > MOST_SHOWN else ""
        numbers = " (# is a number)" if any("#" in kind for kind in kinds) else ""
        found = self.attributes()
        attributes = f"; the attributes are {listed(found)}" if found else ""
        return f"{', '.join(every[:MOST_SHOWN])}{rest}{numbers}{attributes}"


def _sizes(shapes: list[tuple[int, ...]]) -> str:
    first = " x ".join(map(str, shapes[0])) or "one number"
    many = f", {len(shapes)} times" if len(shapes) > 1 else ""
    return f"({first}{' and others' if len(set(shapes)) > 1 else ''}{many})"


class Hdf5Store(Store):
    """The datasets of an open HDF5 file."""

    def __init__(self, file: h5py.File, place: str) -> None:
        import h5py

        shapes: dict[str, tuple[int, ...]] = {}
        self._objects: dict[str, Any] = {"": file}
        for path, item in walk(file, place, skipped=[]):
            name = path.lstrip("/")
            self._objects[name] = item
            if isinstance(item, h5py.Dataset):
                refuse_foreign_values(item, f"{place}, dataset {name}")
                if item.shape is not None and item.dtype.kind in "iuf":
                    shapes[name] = item.shape
        groups = [name for name, item in self._objects.items() if name and isinstance(item, h5py.Group)]
        super().__init__(place, shapes, groups)

    def read(self, path: str) -> FloatArray:
        """See `Store.read`."""
        return np.asarray(read_numbers(self._objects[path], self.where(path)), dtype=np.float64)

    def dataset(self, path: str) -> h5py.Dataset:
        """The dataset itself, for reading it a piece at a time."""
        return self._objects[path]

    def attributes(self) -> list[str]:
        """See `Store.attributes`; a few objects are enough, since alike ones have alike attributes."""
        few = islice(self._objects.values(), 100)
        return list(dict.fromkeys(name for item in few for name in islice(item.attrs, 20)))

    def labels(self) -> dict[str, str | float | None]:
        """See `Store.labels`."""
        file = self._objects[""]
        if "format" not in file.attrs or attribute(file, "format", self.place) != REALISATIONS:
            return {}
        places = {name: f"{self.place}, attribute {name}" for name in LABEL_NAMES if name in file.attrs}
        return {name: label(name, attribute(file, name, where), where) for name, where in places.items()}

    def parameter(self, path: str, name: str) -> float | None:
        """See `Store.parameter`."""
        parts = path.split("/") if path else []
        for depth in range(len(parts), -1, -1):
            item = self._objects["/".join(parts[:depth])]
            if name in item.attrs:
                where = f"{self.place}, /{'/'.join(parts[:depth])}, attribute {shown(name)}"
                value = attribute(item, name, where, kind="a number")
                return number(value, where) if isinstance(value, str) else value
        return None


class NpzStore(Store):
    """The arrays of an open ``.npz`` archive; it has no attributes."""

    word = "array"

    def __init__(self, archive: Archive, place: str) -> None:
        self._archive = archive
        super().__init__(place, {name: archive.shape(name) for name in archive.names}, [])

    def read(self, path: str) -> FloatArray:
        """See `Store.read`."""
        return np.asarray(self._archive.read(path), dtype=np.float64)

    def parameter(self, path: str, name: str) -> float | None:
        """See `Store.parameter`."""
        return None


class MemoryStore(Store):
    """Arrays that are in memory already."""

    word = "column"

    def __init__(self, arrays: dict[str, FloatArray], place: str) -> None:
        self._arrays = arrays
        super().__init__(place, {name: array.shape for name, array in arrays.items()}, [])

    def read(self, path: str) -> FloatArray:
        """See `Store.read`."""
        return self._arrays[path]

    def parameter(self, path: str, name: str) -> float | None:
        """See `Store.parameter`."""
        return None


@contextmanager
def opened_store(path: Path, place: str, kind: type[Store]) -> Iterator[Store]:
    """The store at `path`; faults of the libraries inside the block become one sentence.

    Raises
    ------
    InputError
        If the file cannot be opened or holds no array of numbers.
    """
    if kind is NpzStore:
        with open_npz(path, place) as archive:
            yield _filled(NpzStore(archive, place))
    else:
        with open_hdf5(path, place) as file:
            yield _filled(Hdf5Store(file, place))


def _filled(store: Store) -> Store:
    if not store.shapes:
        raise InputError(f"the file holds no {store.word} of numbers", where=store.place)
    return store
