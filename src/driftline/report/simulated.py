"""Synthetic curves as files and for people."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path

import numpy as np

from driftline import numerals
from driftline.blocks import Block, Paragraph, Table, spaced
from driftline.errors import ConfigurationError, InputError
from driftline.readers.write import write_csv, write_hdf5
from driftline.simulate import true_crossing
from driftline.truths import Synthetic

WRITERS = {".csv": write_csv, ".h5": write_hdf5, ".hdf5": write_hdf5}


def check_target(file: Path, *, force: bool = False) -> None:
    """See that `file` has a name that decides its format and is in nobody's way.

    Raises
    ------
    ConfigurationError
        Otherwise.
    """
    if file.suffix.lower() not in WRITERS:
        raise ConfigurationError(f"{file}: the name decides the format, so let it end in .csv or .h5")
    if file.is_dir():
        raise ConfigurationError(f"{file}: is a folder; give the name of a file")
    if not file.parent.is_dir():
        raise ConfigurationError(f"{file}: the file cannot be written (there is no such folder)")
    if (file.exists() or file.is_symlink()) and not force:
        raise ConfigurationError(f"{file}: exists already; give --force to replace it or choose another name")


def write_simulated(made: Synthetic, file: Path) -> None:
    """Write the curves in the format that the name of the file asks for, with the truth beside them.

    Raises
    ------
    InputError
        If a CSV is to hold correlated points.
    ConfigurationError
        If the file cannot be written.
    """
    WRITERS[file.suffix.lower()](made.curves, file, facts=made.facts())


def simulated_blocks(made: Synthetic, file: Path) -> Iterator[Block]:
    """The truth, where its noiseless curves cross, and where the file is."""
    facts = tuple((name, value if isinstance(value, str) else f"{value:g}") for name, value in made.facts().items())
    yield Table("Truth", ("name", "value"), facts)
    yield from spaced([_crossings(made)])
    yield Paragraph("")
    yield Paragraph(f"{made.curves.points} points of {len(made.curves.sizes)} sizes written to {file}")


def _crossings(made: Synthetic) -> Table:
    sizes = made.curves.sizes.tolist()
    rows = []
    for small, large in pairwise(sizes):
        try:
            with np.errstate(all="ignore"):  # some truths are infinite inside at zero disorder
                at = true_crossing(made.truth, small, large, made.curves.disorder_range)
            place = numerals.significant(at, 6)
        except InputError:
            place = numerals.MISSING
        rows.append((f"{small:g}, {large:g}", place))
    return Table(
        "Crossings of adjacent sizes without noise", ("sizes", made.curves.labels.disorder_symbol), tuple(rows)
    )
