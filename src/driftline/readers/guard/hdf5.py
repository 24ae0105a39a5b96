"""HDF5 of unknown origin: what leads out of the file, round in circles or beyond all size is refused before reading.

Hazards, each met by a function here: external links, external storage and virtual datasets name any other file of the
reader's; soft links may lead in a circle and hard links may make a group its own member; a shape costs nothing to
declare, nor does a chunk that unpacks to a thousand times the size of its file, and filters in a row multiply that; an
attribute may be as large as a dataset; object types hold references.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from driftline.errors import DriftlineError, InputError
from driftline.readers.guard.files import opened
from driftline.readers.guard.limits import MAX_DEPTH, MAX_NAME, MAX_NUMBERS, MAX_OBJECTS, MAX_REPEATED
from driftline.wording import listed, shown

if TYPE_CHECKING:
    import h5py  # imported inside the functions that need it: nobody else should wait for it

Numbers = npt.NDArray[Any]

MAX_TEXT_BYTES = 1 << 16  # of a text attribute, and of an attribute in the classic form of the format
# Packed chunks above this size are unpacked once for counting; below it they cannot exceed a gigabyte (factor 1032)
_TRUSTED_CHUNK = 1 << 20
_SIGNATURE = b"\x89HDF\r\n\x1a\n"
_PACKING = {1: "gzip", 4: "szip", 32000: "lzf"}
_HARMLESS = {2, 3, 5, 6}  # shuffle, checksum, nbit, scale-offset: as large before as after, or smaller by a few bits


def hdf5_signed(path: Path, place: str) -> bool:
    """Whether the signature stands at byte 0, 512, 1024, 2048, ... (HDF5 file format specification, III.A).

    Raises
    ------
    InputError
        If the file cannot be opened, see `opened`.
    """
    with opened(path, place) as stream:
        size, offset = stream.seek(0, 2), 0
        while offset < size:
            stream.seek(offset)
            if stream.read(len(_SIGNATURE)) == _SIGNATURE:
                return True
            offset = 2 * offset or 512
    return False


@contextmanager
def open_hdf5(path: Path, place: str) -> Iterator[h5py.File]:
    """The HDF5 file at `path`, for reading; whatever h5py raises inside the block becomes one sentence.

    Raises
    ------
    InputError
        If the file is not HDF5, is being written by another program, or turns out to be damaged inside the block.
    """
    import h5py

    if not hdf5_signed(path, place):
        raise InputError("the file is named as HDF5 but is not; give it the name of its format", where=place)
    with _damage(place), h5py.File(path, "r") as file:
        yield file


def member(group: h5py.Group, name: str, where: str) -> Any:
    """The group or dataset called `name` in `group` (one level), or None if there is none.

    Raises
    ------
    InputError
        If it is a soft or external link, which may lead to any other file, in a circle or nowhere.
    """
    import h5py

    link = group.get(name, getlink=True)
    if link is None:
        return None
    if not isinstance(link, h5py.HardLink):
        problem = "this is a link to another place, which is not followed; store the data themselves"
        raise InputError(problem, where=where)
    return group[name]


def resolve(file: h5py.File, path: str, place: str) -> Any:
    """The group or dataset at `path`, such as ``L8/W1.5/r``, or None; every level is guarded as by `member`.

    Raises
    ------
    InputError
        As `member`, or if `path` has more than `MAX_DEPTH` levels.
    """
    import h5py

    names = [name for name in path.split("/") if name]
    if len(names) > MAX_DEPTH:
        raise InputError(f"the path {shown(path)} has more than {MAX_DEPTH} levels", where=place)
    item: Any = file
    for depth, name in enumerate(names, start=1):
        if not isinstance(item, h5py.Group) or name == ".":
            return None
        item = member(item, name, f"{place}, /{listed(['/'.join(names[:depth])])}")
    return item


def walk(
    file: h5py.File, place: str, *, skipped: list[str] | None = None, most: int = MAX_OBJECTS
) -> Iterator[tuple[str, Any]]:
    """Every group and dataset of the file with its path, parents first, in the order of names.

    Parameters
    ----------
    skipped : list of str, optional
        Is given the paths of soft and external links, which are passed over.
    most : int
        Most objects to look at. A dataset that hangs in several groups counts, and comes, once for each.

    Yields
    ------
    (str, h5py.Group or h5py.Dataset)
        The path begins with a slash. Datasets are not checked; do that with `check_dataset` or `read_numbers`.

    Raises
    ------
    InputError
        If a group contains itself, groups are nested too deeply, a name is too long, or there are too many objects.
    """
    import h5py

    left, repeated, seen = most, MAX_REPEATED, set[int]()
    waiting: list[tuple[str, h5py.Group, tuple[int, ...]]] = [("", file, (_address(file),))]
    while waiting:
        path, group, above = waiting.pop()
        members = len(group)  # known without listing the names
        left -= members
        repeated -= members if above[-1] in seen else 0
        if left < 0:
            raise InputError(f"the file holds more than {most} objects; split it", where=place)
        if repeated < 0:  # groups that hold others twice make a thousand paths of ten groups
            raise InputError("groups hang in too many places at once; store each once", where=place)
        seen.add(above[-1])
        below = []
        for name in group:
            if len(name) > MAX_NAME:
                raise InputError(f"the name {shown(name)} is longer than {MAX_NAME} characters", where=place)
            inner = f"{path}/{name}"
            if not _is_hard(group, name):
                if skipped is not None:
                    skipped.append(inner)
                continue
            item = group[name]
            yield inner, item
            if isinstance(item, h5py.Group):
                address = _address(item)
                _check_nesting(address, above, f"{place}, {listed([inner])}")
                below.append((inner, item, (*above, address)))
        waiting.extend(reversed(below))


def _is_hard(group: h5py.Group, name: str) -> bool:
    """As the public ``get(name, getlink=True)`` would say, in a third of the time."""
    from h5py import h5l

    return bool(group.id.links.get_info(name.encode("utf-8", "surrogateescape")).type == h5l.TYPE_HARD)


def _address(item: Any) -> int:
    from h5py import h5o

    return int(h5o.get_info(item.id).addr)


def _check_nesting(address: int, above: tuple[int, ...], where: str) -> None:
    if address in above:
        raise InputError("this group contains itself through a link; remove the link", where=where)
    if len(above) >= MAX_DEPTH:
        raise InputError(f"the groups are nested more than {MAX_DEPTH} deep; store the data further up", where=where)


def attribute(item: h5py.Group | h5py.Dataset, name: str, where: str, *, kind: str = "a number or text") -> str | float:
    """The attribute `name` of a group or dataset, which must be there (ask ``name in item.attrs``): a text or number.

    An array of one element counts as that element, since some libraries write every attribute so.

    Raises
    ------
    InputError
        If it is an array, longer than ``MAX_TEXT_BYTES``, or of another type; `where` names the attribute,
        `kind` says what it must be.
    """
    import h5py

    handle = item.attrs.get_id(name)  # before reading: an attribute may declare any size
    if handle.shape not in ((), (1,)):
        raise InputError(f"the attribute must be {kind}, not an array", where=where)
    if handle.dtype.itemsize > MAX_TEXT_BYTES:
        raise InputError(f"the attribute is longer than {MAX_TEXT_BYTES} bytes; shorten it", where=where)
    text = handle.dtype.kind == "S" or h5py.check_string_dtype(handle.dtype) is not None
    if not text and handle.dtype.kind not in "iuf":
        raise InputError(f"the attribute must be {kind}", where=where)
    value = item.attrs[name]
    value = value if handle.shape == () else value[0]
    if not text:
        return float(value)
    return value.decode("utf-8") if isinstance(value, bytes) else str(value)


def check_dataset(item: Any, where: str, *, most: int | None = MAX_NUMBERS) -> int:
    """See that `item` is a dataset of real numbers that can be read, and return how many it holds.

    Parameters
    ----------
    item : h5py object
    where : str
        The file and the path inside it, for faults.
    most : int or None
        Most numbers; None leaves the number open, for reading by `pieces`. Even then everything that is declared must
        have been stored, so the file itself is the bound.

    Raises
    ------
    InputError
        If it is no dataset of integers or floats, its values lie in other files, were never stored, are too many, or
        unpack to more than they declare.
    """
    import h5py

    if not isinstance(item, h5py.Dataset):
        raise InputError("this must be a dataset of numbers", where=where)
    refuse_foreign_values(item, where)
    if item.shape is None:
        raise InputError("this must be an array of numbers, not nothing", where=where)
    if item.dtype.kind not in "iuf":
        raise InputError("this must be real numbers, not text, logical values or a compound type", where=where)
    count: int = math.prod(item.shape)
    if most is not None and count > most:
        raise InputError(f"the dataset declares {count} numbers, but at most {most} can be read", where=where)
    if count:
        _check_storage(item, where)
    return count


def refuse_foreign_values(item: h5py.Dataset, where: str) -> None:
    """Refuse a dataset whose values lie in other files; to be called before even its shape is asked for.

    The shape of a virtual dataset without limits is found by opening the files that it names.

    Raises
    ------
    InputError
        If the storage is external or virtual.
    """
    import h5py

    plan = item.id.get_create_plist()
    if plan.get_external_count() or plan.get_layout() == h5py.h5d.VIRTUAL:
        problem = "the values lie in another file, which is not followed; store the data themselves"
        raise InputError(problem, where=where)


def _check_storage(item: h5py.Dataset, where: str) -> None:
    import h5py

    plan = item.id.get_create_plist()
    if plan.get_layout() != h5py.h5d.CHUNKED:
        _check_stored(item.id.get_storage_size(), item.size * item.dtype.itemsize, where)
        return
    chunk = math.prod(item.chunks)
    if chunk > MAX_NUMBERS:
        raise InputError(f"a chunk of more than {MAX_NUMBERS} numbers is too large to be read", where=where)
    needed = math.prod(-(-length // step) for length, step in zip(item.shape, item.chunks, strict=True))
    _check_stored(item.id.get_num_chunks(), needed, where)
    if plan.get_nfilters():
        _check_filters([plan.get_filter(index)[0] for index in range(plan.get_nfilters())], where)
        _check_unpacking(item, chunk * item.dtype.itemsize, where)


def _check_stored(found: int, needed: int, where: str) -> None:
    if found < needed:
        share = f"only {100 * found // needed} % of them are" if found else "none is"
        raise InputError(
            f"numbers are declared but {share} stored in the file, as after a run that was stopped; store all of them "
            "or shorten the dataset",
            where=where,
        )


def _check_filters(codes: list[int], where: str) -> None:
    from h5py import h5z

    for code in codes:
        if not h5z.filter_avail(code):
            problem = f"the values are packed with the filter {code}, which is not at hand; store them with gzip"
            raise InputError(problem, where=where)
        if code not in _PACKING and code not in _HARMLESS:
            problem = f"the values are packed with the filter {code}, which is not supported; store them with gzip"
            raise InputError(problem, where=where)
    if sum(code in _PACKING for code in codes) > 1:
        raise InputError("the values are packed more than once; store them with one compression", where=where)


def _check_unpacking(item: h5py.Dataset, size: int, where: str) -> None:
    """Each packed chunk against the `size` it should unpack to; the library itself would unpack without end."""
    problem = f"a chunk unpacks to more than the {size} bytes it declares; the file is damaged or made to do harm"
    longest = size + size // 8 + 4096  # packing hardly ever makes numbers longer, and never by more
    for index in range(item.id.get_num_chunks()):
        info = item.id.get_chunk_info(index)
        if info.size > longest:
            raise InputError(problem, where=where)
        if info.size > _TRUSTED_CHUNK and _PACKING[1] == item.compression:
            mask, raw = item.id.read_direct_chunk(info.chunk_offset)
            if not mask and not _unpacks_within(raw, size):
                raise InputError(problem, where=where)


def _unpacks_within(raw: bytes, size: int) -> bool:
    unpacking, total = zlib.decompressobj(), 0
    while raw and total <= size + 4:  # 4: a checksum below the compression
        total += len(unpacking.decompress(raw, _TRUSTED_CHUNK))
        raw = unpacking.unconsumed_tail
    return total <= size + 4


def read_numbers(item: Any, where: str, *, most: int = MAX_NUMBERS) -> Numbers:
    """All values of a dataset after `check_dataset`, in its shape and native byte order."""
    check_dataset(item, where, most=most)
    values = np.asarray(item[()])
    return values.astype(values.dtype.newbyteorder("="), copy=False)


def pieces(item: Any, where: str, *, numbers: int = 1_000_000) -> Iterator[Numbers]:
    """A dataset of any length in consecutive blocks of rows, each of about `numbers` values, after `check_dataset`.

    Blocks end where chunks end, so that no chunk is unpacked twice. Values are in the byte order of the file.

    Raises
    ------
    InputError
        As `check_dataset`; also if a single row, or the rows of one chunk, are too many for the memory.
    """
    check_dataset(item, where, most=None)
    if item.shape == ():
        yield np.asarray(item[()]).reshape(1)
        return
    across = max(1, math.prod(item.shape[1:]))
    chunk = item.chunks[0] if item.chunks else 1
    step = max(1, numbers // (across * chunk)) * chunk
    if step * across > max(MAX_NUMBERS, numbers):
        raise InputError(f"rows of {across} numbers in chunks of {chunk} rows are too large to be read", where=where)
    for start in range(0, item.shape[0], step):
        yield item[start : start + step]


@contextmanager
def _damage(place: str) -> Iterator[None]:
    """Turn what h5py raises on a broken file into one sentence; it raises many kinds, depending on what is broken."""
    try:
        yield
    except DriftlineError:  # ours are ValueErrors, like some of the libraries' own
        raise
    except BlockingIOError as reason:
        raise InputError("another program is writing the file; try again when it is done", where=place) from reason
    except (
        OSError,
        RuntimeError,
        LookupError,
        ValueError,
        TypeError,
        AttributeError,
        MemoryError,
        SystemError,
    ) as reason:
        problem = "the HDF5 file is truncated or damaged; copy or write it again"
        raise InputError(problem, where=place) from reason
