"""Lists of energy levels, one for each disorder realisation, from the ways in which diagonalisation codes store them.

- a folder of files by a pattern such as ``L{size}/W{disorder}/{realisation}.dat``, a level per line (or ``.npy``);
  without ``{realisation}`` every row of a file (or array) is a realisation, with its levels in the columns;
- HDF5 by a pattern such as ``L{size}/W{disorder}/levels``: matrices of realisations by levels, or with
  ``{realisation}`` in the pattern, lists of levels;
- a long table of text with columns for size, disorder, realisation and energy, of any length.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from driftline.curves import FloatArray
from driftline.errors import ConfigurationError, InputError
from driftline.progress import Progress
from driftline.readers.base import number
from driftline.readers.folder import files_of, found_pattern
from driftline.readers.guard import (
    check_dataset,
    hdf5_signed,
    open_hdf5,
    pieces,
    read_npy,
    walk,
)
from driftline.readers.pattern import Pattern
from driftline.readers.streaming import long_text, stream
from driftline.readers.table import choice_of, head
from driftline.readers.text import read_text
from driftline.reading import InputOptions
from driftline.wording import listed, shown

#: Names that people give to a column of energies (common practice)
ENERGIES = ("energy", "energies", "e", "level", "levels", "eigenvalue", "eigenvalues", "epsilon", "eps", "lambda")


@dataclass(frozen=True, eq=False)
class Spectrum:
    """The levels of one realisation.

    Parameters
    ----------
    size, disorder : float
        Where it belongs.
    realisation : int
        Its label; the number of its row from 0 where there is none.
    labelled : bool
        Whether it is a label. Rows of two matrices with the same number need not be the same realisation.
    levels : array, shape (n,)
        Energies, in the order of the file.
    where : str
        The place, for faults.
    """

    size: float
    disorder: float
    realisation: int
    levels: FloatArray
    where: str
    labelled: bool = True


def spectra(path: Path, place: str, options: InputOptions, progress: Progress | None = None) -> Iterator[Spectrum]:
    """The spectra at `path`, one after the other.

    Parameters
    ----------
    path, place : Path, str
        File or folder, and what faults call it.
    options : InputOptions
        Pattern, columns, separator, header; the role ``value`` is the energy.
    progress : function, optional
        Called with what is done and the fraction read.

    Raises
    ------
    InputError
        If something cannot be read; the text says where it stands.
    ConfigurationError
        If the pattern is missing or does not suit.
    """
    if path.is_dir():
        return _folder(path, place, options, progress)
    return _hdf5(path, place, options, progress) if hdf5_signed(path, place) else _table(path, place, options, progress)


# ---------------------------------------------------------------- a folder of files


def _folder(path: Path, place: str, options: InputOptions, progress: Progress | None) -> Iterator[Spectrum]:
    pattern = found_pattern(path, place) if options.pattern is None else Pattern.of(options.pattern, "option --pattern")
    _check_names(pattern, "L{size}/W{disorder}/{realisation}.dat")
    found = files_of(path, pattern, place)
    for index, file in enumerate(found):
        rows = _file_rows(file.path, file.place, options, "realisation" in file.texts)
        yield from _parted(rows, file.texts, file.place)
        if progress is not None:
            progress("reading", (index + 1) / len(found))


def _file_rows(path: Path, where: str, options: InputOptions, single: bool) -> FloatArray:
    """Levels in a file: a list if it holds a `single` realisation, else a matrix with a row for each."""
    if path.suffix == ".npy":
        values = read_npy(path, where)
        if values.ndim != (1 if single else 2) or values.dtype.kind not in "iuf":
            raise InputError(
                f"this must be {_expected(single)}, not {values.dtype} of shape {values.shape}", where=where
            )
        return np.asarray(values, dtype=np.float64)
    table = read_text(path, where, options)
    table.refuse_cut_value()
    if not single:
        if table.width == 1:
            raise InputError(f"there is one number in a row; this must be {_expected(single)}", where=where)
        return np.stack([table.column(index) for index in range(table.width)], axis=1)
    if table.width > 1 and "value" not in options.named:
        seen = listed(table.titles)
        problem = f"there are {table.width} columns ({seen}); say which holds the levels with --columns value=..."
        raise InputError(problem, where=where)
    name = options.named.get("value", table.titles[0])
    if name not in table.titles:
        raise InputError(f"there is no column {shown(name)}; the columns are {listed(table.titles)}", where=where)
    return table.column(table.titles.index(name))


# ---------------------------------------------------------------- HDF5


def _hdf5(path: Path, place: str, options: InputOptions, progress: Progress | None) -> Iterator[Spectrum]:
    import h5py

    example = "L{size}/W{disorder}/levels"
    if options.pattern is None:
        raise ConfigurationError(f"{place}: say which datasets hold the levels, as in --pattern '{example}'")
    pattern = Pattern.of(options.pattern, "option --pattern")
    _check_names(pattern, example)
    with open_hdf5(path, place) as file:
        items = ((name.lstrip("/"), item) for name, item in walk(file, place) if isinstance(item, h5py.Dataset))
        seen, found = [], []
        for name, item in items:
            seen.append(name)
            if (texts := pattern.match(name)) is not None:
                found.append((item, f"{place}, {name}", texts))
        if not found:
            problem = f"no dataset fits the pattern {pattern.text}; the datasets are {listed(seen) or 'none'}"
            raise InputError(problem, where=place)
        for index, (item, where, texts) in enumerate(found):
            yield from _dataset(item, texts, where)
            if progress is not None:
                progress("reading", (index + 1) / len(found))


def _dataset(item: Any, texts: Mapping[str, str], where: str) -> Iterator[Spectrum]:
    single = "realisation" in texts
    check_dataset(item, where, most=None)
    if len(item.shape) != (1 if single else 2):
        raise InputError(f"this must be {_expected(single)}, not an array of shape {item.shape}", where=where)
    if single:
        yield from _parted(np.asarray(item[()], dtype=np.float64), texts, where)
        return
    first = 0
    for block in pieces(item, where):  # so many realisations as fit into the memory
        yield from _parted(np.asarray(block, dtype=np.float64), texts, where, first)
        first += len(block)


# ---------------------------------------------------------------- a long table


def _table(path: Path, place: str, options: InputOptions, progress: Progress | None) -> Iterator[Spectrum]:
    table = head(path, options)
    if table is None:
        read_text(path, place, options)  # says what is wrong
        raise InputError("the first lines are no table", where=place)
    energy = next((name for name in table.titles if name.strip().lower() in ENERGIES), None)
    if "value" not in options.named and not options.ordered and energy is not None:
        options = InputOptions(columns={**options.named, "value": energy}).over(options)
    columns = choice_of(table, options).sets[0][1]
    for role, word in (("value", "energy"), ("realisation", "realisation")):
        if role not in columns:
            problem = f"no column holds the {word}; the columns are {listed(table.titles)}; say which with --columns "
            raise InputError(f"{problem}{role}=...", where=table.where)
    source = long_text(path, place, table, columns, skip_cut_lines=options.skip_cut_lines)
    for block in stream(source, averaged=False, progress=progress):
        if source.notes and not options.skip_cut_lines:  # the whole table has been read by now
            problem = f"{source.notes[0]}; end it with a line break if it is whole, or say --skip-cut-lines"
            raise InputError(problem.replace("; it was used", ""), where=place)
        assert block.realisation is not None
        starts = np.flatnonzero(np.diff(block.realisation, prepend=block.realisation[0] - 1))
        for label, levels in zip(block.realisation[starts], np.split(block.values, starts[1:]), strict=True):
            where = f"{place}, size {block.size:g}, disorder {block.disorder:g}, realisation {label}"
            yield Spectrum(block.size, block.disorder, int(label), levels, where)


# ---------------------------------------------------------------- shared


def _check_names(pattern: Pattern, example: str) -> None:
    for name in ("size", "disorder"):
        if name not in pattern.names:
            raise ConfigurationError(
                f"option --pattern: {pattern.text!r} lacks {{{name}}}, which stands in '{example}'"
            )


def _parted(values: FloatArray, texts: Mapping[str, str], where: str, first: int = 0) -> Iterator[Spectrum]:
    """One spectrum from a list, or one for each row of a matrix, numbered from `first`."""
    size, disorder = (number(texts[name], where) for name in ("size", "disorder"))
    if size <= 0:
        raise InputError(f"a size must be positive, not {size:g}", where=where)
    if values.ndim == 1:
        yield Spectrum(size, disorder, int(texts["realisation"]), values, where)
        return
    for row, levels in enumerate(values, start=first):
        yield Spectrum(size, disorder, row, levels, f"{where}, row {row + 1}", labelled=False)


def _expected(single: bool) -> str:
    if single:
        return "a list of the levels of one realisation"
    return "a matrix of realisations by levels (or put {realisation} into the pattern, if it is one realisation)"
