"""Opening what nobody has vouched for: every layout reads through these functions, so that none can be tricked.

A data file comes from a cluster, a colleague or a download, and may be cut short, enormous, or made to do harm. What
is read through here costs bounded time and memory, follows nothing outside what the user named, runs no code of the
file's (no pickle), and ends in numbers or in one `InputError`. How to use it, by what is to be read:

======================================  ============================================================================
a file of any kind                      `opened` (binary stream; no FIFO, device or folder)
text, plain or gzip                     ``for count, line in lines(path, place)``; `table_bytes` for a parser of bytes
files in a folder, by a pattern         ``parts = pattern_parts(pattern, where)``, compile each part to a regular
                                        expression of your own, then `matching_files`
HDF5                                    ``with open_hdf5(path, place) as file``, then `resolve` or `member` for one
                                        object, `walk` for all of them, `attribute` for a parameter, `read_numbers` for
                                        a dataset, `pieces` for a dataset that is too large for the memory
``.npz``, ``.npy``                      ``with open_npz(path, place) as archive`` (``archive.names``, ``.shape(name)``,
                                        ``.read(name)``), `read_npy`
TOML                                    `read_toml`
======================================  ============================================================================

`place` is the path in the user's own words and `where` the place within, both for the sentence of a fault. Limits are
arguments with generous defaults. Inside ``open_hdf5`` and ``open_npz`` whatever the libraries raise on a damaged file
becomes an `InputError`, so do the whole reading inside the block, but no computation that could fail for other reasons.
Never call ``h5py.File``, ``numpy.load``, ``Path.glob`` or ``Path.rglob`` on a user's path elsewhere.
"""

from driftline.readers.guard.files import check_file, opened
from driftline.readers.guard.folders import matching_files, pattern_parts
from driftline.readers.guard.hdf5 import (
    attribute,
    check_dataset,
    hdf5_signed,
    member,
    open_hdf5,
    pieces,
    read_numbers,
    refuse_foreign_values,
    resolve,
    walk,
)
from driftline.readers.guard.limits import MAX_FILES, MAX_LINE, MAX_NUMBERS, MAX_TEXT
from driftline.readers.guard.npz import Archive, open_npz, read_npy
from driftline.readers.guard.text import lines, table_bytes
from driftline.readers.guard.toml import read_toml

__all__ = [
    "MAX_FILES",
    "MAX_LINE",
    "MAX_NUMBERS",
    "MAX_TEXT",
    "Archive",
    "attribute",
    "check_dataset",
    "check_file",
    "hdf5_signed",
    "lines",
    "matching_files",
    "member",
    "open_hdf5",
    "open_npz",
    "opened",
    "pattern_parts",
    "pieces",
    "read_npy",
    "read_numbers",
    "read_toml",
    "refuse_foreign_values",
    "resolve",
    "table_bytes",
    "walk",
]
