"""Tables that are in memory already: data frames of pandas or polars, mappings of arrays, record arrays, plain arrays.

None of those libraries is imported: whatever names its columns and gives them up as arrays will do.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.errors import ConfigurationError, InputError
from driftline.readers.arrays import pieces_of_store, planned
from driftline.readers.assemble import assembled
from driftline.readers.base import Contents, built
from driftline.readers.columns import Choice, choose
from driftline.readers.roles import Scene
from driftline.readers.stores import MemoryStore
from driftline.reading import InputOptions
from driftline.wording import listed, shown

PLACE = "table"


def curves_of_table(table: Any, options: InputOptions, labels: Mapping[str, Any]) -> Curves:
    """Curves of a table in memory; see `driftline.curves.Curves.from_table`."""
    names, arrays, named = _columns(table)
    if not arrays:
        raise InputError("the table holds no column of numbers", where=PLACE)
    options = _by_name(list(arrays) if names is None else names, options, named)
    store = MemoryStore(arrays, PLACE)
    plan = planned(store, options)
    made = assembled(pieces_of_store(store, plan, options), options)
    unused = [name for name in arrays if name not in {*plan.roles.values(), *(path for path, _ in plan.matches)}]
    if any("{" in place for place in plan.roles.values()):
        unused = []  # columns for each size: which of them are used, the pattern says
    notes = [f"columns not used: {listed(unused)}"] if unused else []
    columns = {**dict.fromkeys(plan.placeholders, "the names"), **plan.roles}
    found = Contents(made.curves, {}, columns, made.rows, [*notes, *made.notes], made.realisations)
    return built(found, PLACE, labels, {"layout": "memory"})


def _columns(table: Any) -> tuple[list[str] | None, dict[str, FloatArray], bool]:
    """Names of all columns, those that hold numbers as arrays, and whether the table itself names them."""
    if isinstance(table, Mapping):
        raw = {str(name): table[name] for name in table}
    elif isinstance(table, np.ndarray) and table.dtype.names:
        raw = {name: table[name] for name in table.dtype.names}
    elif hasattr(table, "columns") and hasattr(table, "__getitem__"):
        raw = {str(name): table[name] for name in table.columns}
    else:
        return _plain(table)
    arrays = {name: array for name, values in raw.items() if (array := _numbers(values)) is not None}
    return list(raw), arrays, True


def _plain(table: Any) -> tuple[None, dict[str, FloatArray], bool]:
    """The columns of a plain array of rows, under their numbers from 1."""
    array = _numbers(table)
    if array is None or array.ndim != 2:
        raise InputError(
            "this is no table; give a data frame, a mapping of names to arrays, or an array of rows with "
            'columns=("size", "disorder", "mean", "error")',
            where=PLACE,
        )
    return None, {str(index + 1): array[:, index] for index in range(array.shape[1])}, False


def _numbers(values: Any) -> FloatArray | None:
    """The values as doubles, or None if they are something else. Masked and missing values become NaN."""
    try:
        raw = np.ma.filled(np.ma.asarray(values, dtype=np.float64), np.nan) if _masked(values) else np.asarray(values)
        return np.array(raw, dtype=np.float64) if raw.dtype.kind in "iufO" else None
    except (TypeError, ValueError, OverflowError):
        return None


def _masked(values: Any) -> bool:
    return isinstance(values, np.ma.MaskedArray)


def _by_name(names: Sequence[str], options: InputOptions, named: bool) -> InputOptions:
    """Roles given in the order of the columns, as roles by name; columns without names need one of the two."""
    if options.sizes:
        problem = "sizes belong to text files; name the columns of each size instead, such as mean='L{size}'"
        raise ConfigurationError(f"sizes: {problem}")
    if options.ordered or not named:
        choice: Choice = choose(names, Scene(PLACE, options), named=named)
        columns = {role: names[index] for role, index in choice.sets[0][1].items()}
        return replace(options, columns=columns)
    missing = [place for place in options.named.values() if "{" not in place and place not in names]
    if missing:
        raise InputError(f"there is no column {shown(missing[0])}; the columns are {listed(names)}", where=PLACE)
    return options
