"""Arrays with parameters along their dimensions to rows: which dimension is which, and what runs along it.

A parameter that is an array of its own (the disorders of a size, say) runs along the one dimension of its length. Where
two dimensions have that length, or more than one is left over for realisations and eigenstates, the axes must be named.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.readers.assemble import Piece
from driftline.readers.stores import Store
from driftline.reading import AXES, InputOptions
from driftline.wording import listed

#: Roles that may run along a dimension of the values
_PARAMETERS = ("size", "disorder", "realisation")


def rows_of(
    store: Store, main: str, role: str, arrays: Mapping[str, FloatArray], constants: Mapping[str, float],
    options: InputOptions,
) -> Piece:  # fmt: skip
    """One row for each value (or, with eigenstates, for each realisation) of the array at `main`.

    Parameters
    ----------
    store : Store
        Where the array is.
    main : str
        Path of the means or values.
    role : {"mean", "value"}
        Which of the two it holds.
    arrays : mapping
        Role to an array that goes with it.
    constants : mapping
        Role to a single number.
    options : InputOptions
        With the axes, if the user named them.

    Raises
    ------
    InputError
        If the dimensions cannot be told apart, or lengths do not fit.
    """
    values, where = store.read(main), store.where(main)
    singles = {name: float(array.ravel()[0]) for name, array in arrays.items() if array.size == 1}
    along = {name: array for name, array in arrays.items() if name not in singles}
    constants = {**constants, **singles}
    dims = _dimensions(values.shape, along, options, where)
    axes = options.axes or _axes(values.shape, dims, role, {*along, *constants}, where)
    _check_axes(axes, dims, along, values.shape, where)
    if role == "value" and not options.axes:
        _refuse_repeated_rows(dims, along, values.shape, where)
    return _measured(_piece(values, role, along, constants, dims, axes, where))


def _measured(piece: Piece) -> Piece:
    """Averaged points without those that hold NaN for both mean and error, as where nothing was measured."""
    spreads = [piece.data[name] for name in ("error", "deviation") if name in piece.data]
    if "mean" not in piece.data:
        return piece
    gaps = np.all(np.isnan([piece.data["mean"], *spreads]), axis=0)
    if not gaps.any():
        return piece
    kept = np.flatnonzero(~gaps)
    note = f"{piece.source}: points without a number, taken as not measured: {int(gaps.sum())}"
    data = {name: values[kept] for name, values in piece.data.items()}
    return Piece(piece.source, data, lambda row, name: piece.place(int(kept[row]), name), (note,))


def _dimensions(
    shape: tuple[int, ...], along: Mapping[str, FloatArray], options: InputOptions, where: str
) -> dict[str, int | None]:
    """Dimension along which each array runs; None if it has the shape of the values."""
    if options.axes and len(options.axes) != len(shape):
        raise InputError(
            f"{len(options.axes)} axes are named ({listed(options.axes)}), but the array has the shape {shape}",
            where=where,
        )
    dims: dict[str, int | None] = {}
    for name, array in along.items():
        if array.shape == shape:
            dims[name] = None
        elif name in options.axes:
            dims[name] = options.axes.index(name)
        elif array.ndim == 1:
            dims[name] = _only_dimension(name, array.size, shape, where)
        else:
            problem = f"the {name} has the shape {array.shape}, which does not go with values of shape {shape}"
            raise InputError(problem, where=where)
        dim = dims[name]
        if dim is not None and array.shape != (shape[dim],):
            problem = f"there are {array.size} values of {name} along a dimension of {shape[dim]}; the shape is {shape}"
            raise InputError(problem, where=where)
    return dims


def _only_dimension(name: str, length: int, shape: tuple[int, ...], where: str) -> int:
    able = [dim for dim, extent in enumerate(shape) if extent == length]
    if not able:
        raise InputError(
            f"there are {length} values of {name}, and no dimension of the array has that length; its shape is {shape}",
            where=where,
        )
    if len(able) > 1:
        _ask_axes(f"the {name} may run along dimension {' or '.join(str(dim + 1) for dim in able)}", shape, where)
    return able[0]


def _ask_axes(problem: str, shape: tuple[int, ...], where: str) -> None:
    raise InputError(
        f"{problem} of the shape {shape}; name the dimensions in order with --axes, {len(shape)} of {', '.join(AXES)}",
        where=where,
    )


def _check_axes(
    axes: Sequence[str], dims: Mapping[str, int | None], along: Mapping[str, FloatArray], shape: tuple[int, ...],
    where: str,
) -> None:  # fmt: skip
    """Sizes and disorders along an axis need their values, and nothing but values runs along the eigenstates."""
    loose = [axis for axis in axes if axis in ("size", "disorder") and axis not in dims]
    if loose:
        problem = f"the axis {loose[0]} needs its values; name their array with --columns {loose[0]}=..."
        raise InputError(problem, where=where)
    for name, dim in dims.items():
        if dim is not None and axes[dim] == "state":
            raise InputError(
                f"the {name} has {along[name].size} values, as many as there are eigenstates by the axes "
                f"({', '.join(axes)}) and the shape {shape}; correct the axes",
                where=where,
            )


def _refuse_repeated_rows(
    dims: Mapping[str, int | None], along: Mapping[str, FloatArray], shape: tuple[int, ...], where: str
) -> None:
    """Rows of one size and disorder may be its realisations, with eigenstates across, or parts of its realisations."""
    dim = dims.get("size")
    if len(shape) < 2 or dim is None or dims.get("disorder") != dim:
        return
    pairs = np.stack([along["size"], along["disorder"]])
    if len(np.unique(pairs, axis=1).T) < pairs.shape[1]:
        _ask_axes("rows of one size and disorder may be realisations or hold several, in an array", shape, where)


def _axes(
    shape: tuple[int, ...], dims: Mapping[str, int | None], role: str, given: set[str], where: str
) -> tuple[str, ...]:
    """A name for every dimension; the one that is left over is that of the realisations, or of their eigenstates."""
    if any(dim is None and name in _PARAMETERS for name, dim in dims.items()):
        return ("row",) * len(shape)
    names: list[str] = ["row" if role == "mean" and extent == 1 else "" for extent in shape]
    for name, dim in dims.items():
        if dim is not None and name in _PARAMETERS:
            names[dim] = name
    open_dims = [dim for dim, name in enumerate(names) if not name]
    if not open_dims:
        return tuple(names)
    if role == "mean" or len(open_dims) > 1:
        lead = "a mean has one dimension for each parameter, but" if role == "mean" else ""
        what = f"{lead} it is not told what runs along dimension {' and '.join(str(d + 1) for d in open_dims)}".strip()
        _ask_axes(what, shape, where)
    names[open_dims[0]] = "state" if "realisation" in given else "realisation"
    return tuple(names)


def _piece(
    values: FloatArray, role: str, along: Mapping[str, FloatArray], constants: Mapping[str, float],
    dims: Mapping[str, int | None], axes: Sequence[str], where: str,
) -> Piece:  # fmt: skip
    """Flatten all dimensions but that of the eigenstates."""
    states = axes.index("state") if "state" in axes else None

    def flat(array: FloatArray, dim: int | None) -> FloatArray:
        if dim is not None:
            array = np.broadcast_to(array.reshape([-1 if d == dim else 1 for d in range(values.ndim)]), values.shape)
        if states is None:
            return array.ravel()
        return np.asarray(np.take(array, 0, axis=states), dtype=np.float64).ravel()

    data = {name: flat(array, dims[name]) for name, array in along.items()}
    if states is None:
        data[role] = values.ravel()
    else:
        data[role] = np.moveaxis(values, states, -1).reshape(-1, values.shape[states])
    data |= {name: np.full(len(data[role]), value) for name, value in constants.items()}

    def place(row: int, name: str | None) -> str:
        shape = [extent for dim, extent in enumerate(values.shape) if dim != states]
        at = ", ".join(str(index + 1) for index in np.unravel_index(row, shape)) if shape else ""
        return f"{where}, {name or 'entry'} at ({at})"

    return Piece(where, data, place)
