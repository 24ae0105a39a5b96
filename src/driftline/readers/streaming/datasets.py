"""A long table in HDF5, a one-dimensional dataset for each column, a part at a time."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import cycle
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from driftline.curves import LARGEST
from driftline.errors import InputError
from driftline.readers.guard.hdf5 import check_dataset
from driftline.readers.streaming.runs import IntArray, Rows, sound
from driftline.readers.streaming.text import ahead

if TYPE_CHECKING:
    import h5py  # imported inside the functions that need it: nobody else should wait for it

AT_ONCE = 2**19  # rows: some 30 MB in all, and two threads need not wait for each other too often
NEEDED = ("size", "disorder", "value")


class LongDatasets:
    """The columns of a long table as datasets of an open HDF5 file.

    Parameters
    ----------
    place : str
        What faults call the file.
    datasets : mapping
        The datasets ``size``, ``disorder``, ``value`` and, if there are labels, ``realisation``.
    at_once : int
        Rows to read at once, rounded up to whole chunks of the file: a chunk that is read twice is unpacked twice.

    Raises
    ------
    InputError
        If the datasets are not equally long lists of real numbers.
    """

    def __init__(self, place: str, datasets: Mapping[str, h5py.Dataset], *, at_once: int = AT_ONCE) -> None:
        self.place, self.notes = place, list[str]()
        self._datasets = dict(datasets)
        for dataset in datasets.values():
            where = f"{place}, {dataset.name}"
            check_dataset(dataset, where, most=None)
            if len(dataset.shape) != 1:
                raise InputError(
                    f"a column must be a list of numbers, not an array of shape {dataset.shape}", where=where
                )
        lengths = {name: dataset.shape[0] for name, dataset in datasets.items()}
        if len(set(lengths.values())) > 1:
            each = ", ".join(f"{name} {length}" for name, length in lengths.items())
            raise InputError(f"the columns have different lengths ({each})", where=place)
        self._length = next(iter(lengths.values()))
        chunk = max((dataset.chunks or (1,))[0] for dataset in datasets.values())
        self._at_once = -(-at_once // chunk) * chunk

    def rows(self) -> Iterator[Rows]:
        """The rows in order; the next part is read in a thread of its own, into the arrays of the last but one.

        Raises
        ------
        InputError
            If a number cannot be used; the text names its row, counted from 1.
        """
        # fresh arrays for each part would cost as much as reading: the system clears the memory that it hands out
        held = [{name: np.empty(self._at_once, d.dtype) for name, d in self._datasets.items()} for _ in range(2)]
        starts = range(0, self._length, self._at_once)
        ends = (min(start + self._at_once, self._length) for start in starts)
        return ahead(self._part(*part) for part in zip(cycle(held), starts, ends))

    def _part(self, held: dict[str, npt.NDArray[Any]], start: int, end: int) -> Rows:
        found = {name: array[: end - start] for name, array in held.items()}
        for name, dataset in self._datasets.items():
            dataset.read_direct(found[name], np.s_[start:end])
        numbers = {name: found[name].astype(np.float64, copy=False) for name in NEEDED}
        rows = Rows(**numbers, realisation=self._labels(found.get("realisation"), start), fraction=end / self._length)
        if not sound(rows):
            for name, values in numbers.items():
                self._refuse(
                    ~(np.abs(values) <= LARGEST), values, name, start, "is not a finite number"
                )  # NaN included
            self._refuse(numbers["size"] <= 0, numbers["size"], "size", start, "is not a positive size")
        return rows

    def _labels(self, found: npt.NDArray[Any] | None, start: int) -> IntArray | None:
        if found is None or found.dtype.kind in "iu":
            return None if found is None else found.astype(np.int64, copy=False)
        labels = _whole(found)
        self._refuse(labels != found, found, "realisation", start, "is not a whole number")
        return labels

    def _refuse(self, bad: npt.NDArray[Any], values: npt.NDArray[Any], name: str, start: int, problem: str) -> None:
        if bad.any():
            row = int(np.argmax(bad))
            where = f"{self.place}, {self._datasets[name].name}, row {start + row + 1}"
            raise InputError(f"{values[row]} {problem}; correct it or remove the row", where=where)


def _whole(found: npt.NDArray[Any]) -> IntArray:
    """The whole numbers that doubles are; those that are none come out different."""
    safe = np.where(np.abs(found) <= 2**53, found, 0.5)  # beyond it a double does not hold every whole number
    return safe.astype(np.int64)
