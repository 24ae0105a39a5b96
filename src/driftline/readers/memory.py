"""Realisations in memory: a table for each size, a row for each realisation and a column for each disorder."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from driftline.curves import Curves, FloatArray, Labels
from driftline.errors import InputError
from driftline.readers.samples import Block, SampleOptions, sampled


def from_tables(
    tables: Mapping[float, npt.ArrayLike],
    disorder: npt.ArrayLike,
    *,
    paired: bool,
    average: Literal["mean", "median", "log-mean"],
    kind: Literal["numbers", "counts", "yes-no"],
    **labels: Any,
) -> Curves:
    """See `driftline.curves.Curves.from_realisations`."""
    grid = np.asarray(disorder, dtype=np.float64)
    options = SampleOptions(average=average, kind=kind, paired=None if paired else False)
    found = sampled((block for size, table in tables.items() for block in _blocks(size, table, grid)), options)
    origin = {"rows": found.rows, "notes": list(found.notes), "realisations": found.record()}
    return Curves(found.curves, Labels(), origin).relabel(**labels)


def _blocks(size: float, table: npt.ArrayLike, grid: FloatArray) -> Iterator[Block]:
    source, values = f"table of size {size:g}", np.asarray(table, dtype=np.float64)
    if values.ndim not in (2, 3) or values.shape[1:2] != grid.shape:
        raise InputError(
            f"the table must be realisations by disorders, or by disorders and states, with {grid.size} disorders, not "
            f"of shape {values.shape}",
            where=source,
        )
    for column, w in enumerate(grid):
        each = values[:, column]
        present = ~np.isnan(each).reshape(len(each), -1).all(axis=1)
        yield Block(float(size), float(w), each[present], np.flatnonzero(present), source)
