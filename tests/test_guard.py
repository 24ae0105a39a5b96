"""The guards that every layout reads through: each hazard ends in numbers or in one sentence, and in bounded memory."""

from __future__ import annotations

import gzip
import io
import os
import re
import struct
import zipfile
import zlib
from pathlib import Path

import h5py
import numpy as np
import pytest

from driftline.errors import ConfigurationError, InputError
from driftline.readers import guard
from driftline.readers.guard import hdf5, limits


def refusal(action) -> str:
    """The sentence of the InputError that `action` ends in."""
    with pytest.raises(InputError) as caught:
        action()
    return str(caught.value)


# ---------------------------------------------------------------- text


def packed(raw: bytes) -> bytes:
    """Gzip without the time, since test workers compare the names of their tests, which hold these bytes."""
    return gzip.compress(raw, mtime=0)


def lines_of(path: Path, **limits: int) -> list[tuple[int, str]]:
    return list(guard.lines(path, "run.txt", **limits))


def test_lines_of_every_system(tmp_path):
    """Line ends of three systems count once each, a mark in front is dropped, a form feed is no line end."""
    path = tmp_path / "run.txt"
    path.write_bytes(b"\xef\xbb\xbfa\r\nb\rc\n\nd\x0ce")
    assert lines_of(path) == [(1, "a"), (2, "b"), (3, "c"), (4, ""), (5, "d\x0ce")]


def test_gzip_reads_like_the_plain_text(tmp_path):
    """Packed text gives the same lines, also in several parts one after the other."""
    path = tmp_path / "run.txt.gz"
    path.write_bytes(packed(b"8,1.0\n") + packed(b"8,2.0\n"))
    assert lines_of(path) == [(1, "8,1.0"), (2, "8,2.0")]


@pytest.mark.parametrize(
    ("content", "text"),
    [
        (packed(b"8,1.0\n" * 1000)[:-9], ": the gzip file is truncated or damaged; copy or pack it again"),
        (b"\x1f\x8b\x08\0rest", ": the gzip file is truncated or damaged; copy or pack it again"),
        (packed(packed(b"8,1.0\n")), ": the file is compressed with gzip twice; unpack it once"),
        (packed(b"PK\x03\x04"), ": the file is a zip archive or a spreadsheet; save the table as CSV"),
        (b"BZh9", ": the file is compressed with bzip2; unpack it first"),
        (b"a\nb\0c", ", line 2: there is a zero byte, so this is binary data or UTF-16; save it as text in "
         "UTF-8"),
        (b"a\n\xe9\n\0", ", line 3: there is a zero byte, so this is binary data or UTF-16; save it as text in "
         "UTF-8"),
        (b"a\n\nb\xe9c\n", ", line 3: byte 0xe9 is not valid UTF-8; save the file as UTF-8"),
        (b"a\r\n" * 360_000 + b"\xff", ", line 360001: byte 0xff is not valid UTF-8; save the file as UTF-8"),
        (b"a\nb\xc3", ", line 2: byte 0xc3 is not valid UTF-8; save the file as UTF-8"),
        (b"a\n" + b"1," * 60_000 + b"1\n", ", line 2: the line is longer than 100000 characters; break it or "
         "give another file"),
        (b"", ": the file is empty"),
    ],
)  # fmt: skip
def test_text_that_is_refused(tmp_path, content, text):
    """Damage, other encodings, zero bytes and endless lines are named with their line."""
    path = tmp_path / "run.txt"
    path.write_bytes(content)
    assert refusal(lambda: lines_of(path)) == f"run.txt{text}"


def test_text_beyond_its_limits(tmp_path):
    """The limit holds for the file as it is and for what it unpacks to; just below it everything is read."""
    path, small = tmp_path / "run.txt", tmp_path / "run.txt.gz"
    path.write_bytes(b"x" * 99 + b"\n")
    small.write_bytes(packed(path.read_bytes()))
    for good in (path, small):
        assert lines_of(good, most=100, longest=99) == [(1, "x" * 99)]
    advice = "a summary has one row per size and disorder, so average over realisations first"
    plain = f"run.txt: the file is larger than 0.099 kB; {advice}"
    assert refusal(lambda: lines_of(path, most=99)) == plain
    assert refusal(lambda: lines_of(small, most=99)) == plain.replace("the file", "what the file unpacks to")
    assert refusal(lambda: lines_of(path, longest=98)).startswith("run.txt, line 1: the line is longer than 98 ")


def test_only_regular_files_are_opened(tmp_path):
    """A FIFO would block for ever, a device may act, a folder has no bytes, and what is missing is missing."""
    os.mkfifo(tmp_path / "pipe")
    odd = "x: this is not a regular file; save the data to a file first"
    for path, text in (
        (tmp_path / "pipe", odd),
        (Path("/dev/zero"), odd),
        (tmp_path, "x: this is a folder; give a file"),
        (tmp_path / "gone", "x: there is no such file; check the path"),
        (tmp_path / ("n" * 300), "x: the file cannot be read (File name too long)"),
    ):
        assert refusal(lambda path=path: guard.check_file(path, "x")) == text
        assert refusal(lambda path=path: list(guard.lines(path, "x"))) == text


# ---------------------------------------------------------------- folders


@pytest.mark.parametrize("pattern", ["", "/", "/etc/*", "..", "a/../b", "~/a", "./", "a\0b"])
def test_patterns_that_leave_the_folder(pattern):
    """A pattern may only lead downwards."""
    with pytest.raises(ConfigurationError, match=r"^--pattern: the pattern .* must name files inside the folder, with"):
        guard.pattern_parts(pattern, "--pattern")


def test_pattern_parts():
    """Superfluous slashes and dots say nothing; names that begin with dashes or hold blanks and Greek are names."""
    assert guard.pattern_parts("./runs//-L{size}/ä b.dat", "--pattern") == ("runs", "-L{size}", "ä b.dat")


PARTS = (re.compile(r"L(\d+)"), re.compile(r"W(.*)\.dat"))


def found(root: Path, **limits: int) -> list[str]:
    return [
        path.relative_to(root.resolve()).as_posix() for path, _ in guard.matching_files(root, PARTS, "runs", **limits)
    ]


@pytest.fixture
def runs(tmp_path):
    """A folder of runs with strange names, and a file outside of it."""
    root = tmp_path / "-runs of µ"
    for name in ("L8/W1.dat", "L8/W 2.dat", "L12/Wé.dat", "L12/notes.txt", "other/W1.dat", "L16"):
        (root / name).parent.mkdir(parents=True, exist_ok=True)
        (root / name).write_text("1\n")
    (tmp_path / "secret.dat").write_text("2\n")
    return root


def test_matching_files(runs):
    """Files come in the order of names with what the placeholders stood for; what does not fit is passed over."""
    (runs / "L8" / "W5.dat").mkdir()
    assert found(runs) == ["L12/Wé.dat", "L8/W 2.dat", "L8/W1.dat"]
    first = next(guard.matching_files(runs, PARTS, "runs"))
    assert [match[1] for match in first[1]] == ["12", "é"]


def test_links_within_the_folder_are_followed_once(runs):
    """A link to a file or folder inside counts as that; one that leads in a circle ends with the pattern."""
    (runs / "L8" / "W3.dat").symlink_to(runs / "L12" / "Wé.dat")
    (runs / "L20").symlink_to(runs / "L12")
    (runs / "L12" / "L1").symlink_to(runs)
    assert found(runs) == ["L12/Wé.dat", "L20/Wé.dat", "L8/W 2.dat", "L8/W1.dat", "L8/W3.dat"]


OUT = "this link leads out of the folder, which is not followed; copy the data here or give the folder that holds them"


def test_links_in_a_circle_multiply_nothing(runs):
    """Twenty links to the folder itself cost twenty entries a visit, not the sixth power of twenty."""
    for number in range(20):
        (runs / f"here{number}").symlink_to(".")
    anything = [re.compile(".*")] * 6
    assert list(guard.matching_files(runs, anything, "runs", most=100)) == []


def test_what_is_refused_in_a_folder(runs):
    """Links out of the folder, broken links and FIFOs are refused where their name fits, and only there."""
    for name, target, text in (
        ("L8/W9.dat", runs.parent / "secret.dat", f"runs/L8/W9.dat: {OUT}"),
        ("L30", runs.parent, f"runs/L30: {OUT}"),
        ("L8/W9.dat", "nowhere", "runs/L8/W9.dat: this link leads nowhere; remove it or restore what it led to"),
        ("L8/W9.dat", "W9.dat", "runs/L8/W9.dat: this link leads nowhere; remove it or restore what it led to"),
    ):
        (runs / name).symlink_to(target)
        assert refusal(lambda: found(runs)) == text
        (runs / name).unlink()
    (runs / "L8" / "elsewhere").symlink_to(runs.parent / "secret.dat")
    assert len(found(runs)) == 3
    os.mkfifo(runs / "L8" / "W9.dat")
    odd = "runs/L8/W9.dat: this is not a regular file; move it away or narrow the pattern"
    assert refusal(lambda: found(runs)) == odd


def test_too_many_entries(runs):
    """Entries are counted whether or not they fit."""
    assert (
        refusal(lambda: found(runs, most=5)) == "runs: the folder holds more than 5 entries; give a folder further down"
    )


# ---------------------------------------------------------------- HDF5


@pytest.fixture
def h5(tmp_path):
    """Write an HDF5 file by `write`, open it guarded, and return what `use` gives."""

    def of(write, use):
        path = tmp_path / "run.h5"
        with h5py.File(path, "w") as file:
            write(file)
        with guard.open_hdf5(path, "run.h5") as file:
            return use(file)

    return of


def every(file) -> list[str]:
    return [path for path, _ in guard.walk(file, "run.h5")]


def test_walk(h5):
    """Every object comes with its path; a shared dataset comes under each name; links are passed over and named."""

    def write(file):
        file["L8/W1/r"] = [1.0]
        file["L8/W"] = [1.0]
        file.create_group("L12")["W"] = file["L8/W"]
        file["soft"], file["out"] = h5py.SoftLink("/L8"), h5py.ExternalLink("other.h5", "/")

    skipped: list[str] = []
    paths = h5(write, lambda file: [path for path, _ in guard.walk(file, "run.h5", skipped=skipped)])
    assert paths == ["/L12", "/L8", "/L12/W", "/L8/W", "/L8/W1", "/L8/W1/r"]
    assert skipped == ["/out", "/soft"]


def test_walk_in_circles(h5, monkeypatch):
    """A group that holds itself, one that holds much again and again, and a bottomless one end in a sentence."""

    def circle(file):
        file["a/b/c"] = [1.0]
        file["a/b/up"] = file["a"]

    def laughs(file):  # ten to the tenth paths in ten groups
        below = file.create_group("0")
        for level in range(1, 11):
            group = file.create_group(f"{level}")
            for copy in range(10):
                group[f"{copy}"] = below
            below = group

    expected = "run.h5, /a/b/up: this group contains itself through a link; remove the link"
    assert refusal(lambda: h5(circle, every)) == expected
    monkeypatch.setattr(hdf5, "MAX_REPEATED", 1000)  # the real limit takes a second
    many = "run.h5: groups hang in too many places at once; store each once"
    assert refusal(lambda: h5(laughs, every)) == many
    few = refusal(lambda: h5(circle, lambda file: list(guard.walk(file, "run.h5", most=2))))
    assert few == "run.h5: the file holds more than 2 objects; split it"
    deep = refusal(lambda: h5(lambda file: file.create_group("g/" * 40), every))
    assert deep.endswith(": the groups are nested more than 32 deep; store the data further up")


def test_resolve(h5):
    """A path leads to its object, to nothing, or to the first link on its way."""

    def write(file):
        file["L8/W1/r"] = [1.0]
        file["L8/alias"] = h5py.SoftLink("/L8/W1")
        file["L8/loop"] = h5py.SoftLink("/L8/loop")

    def use(file):
        assert guard.resolve(file, "/L8//W1/r", "run.h5")[0] == 1.0
        for path in ("L8/W2", "L8/W1/r/x", "L8/../L8", "L8/."):
            assert guard.resolve(file, path, "run.h5") is None
        link = "this is a link to another place, which is not followed; store the data themselves"
        for name in ("alias", "loop"):
            assert (
                refusal(lambda name=name: guard.resolve(file, f"L8/{name}/r", "run.h5"))
                == f"run.h5, /L8/{name}: {link}"
            )
        assert "more than 32 levels" in refusal(lambda: guard.resolve(file, "a/" * 33, "run.h5"))

    h5(write, use)


def test_attributes(h5):
    """Numbers and texts of any storage are read; everything else, and everything large, is refused before reading."""
    values = {
        "a": 8, "b": np.float32(0.5), "c": "µ", "d": np.bytes_("x"), "e": np.array([3.0]),
        "f": np.array(["t"], dtype="O"),
    }  # fmt: skip

    def write(file):
        for name, value in values.items():
            file.attrs[name] = value
        file.attrs["array"], file.attrs["flag"], file.attrs["where"] = [1.0, 2.0], True, file.ref
        file.attrs["none"] = h5py.Empty("f")

    def use(file):
        assert [guard.attribute(file, name, "x") for name in values] == [8.0, 0.5, "µ", "x", 3.0, "t"]
        for name, text in (
            ("array", "x: the attribute must be a number or text, not an array"),
            ("none", "x: the attribute must be a number or text, not an array"),
            ("flag", "x: the attribute must be a number or text"),
            ("where", "x: the attribute must be a number or text"),
        ):
            assert refusal(lambda name=name: guard.attribute(file, name, "x")) == text

    h5(write, use)


def dataset(file, **options):
    return file.create_dataset("x", track_times=False, **options)


def read_x(file):
    return guard.read_numbers(file["x"], "run.h5, /x")


@pytest.mark.parametrize("packing", [None, "gzip", "lzf"])
@pytest.mark.parametrize("dtype", [">f4", "<i2", "f8", "u8"])
def test_numbers_read_as_they_were_written(h5, packing, dtype):
    """Any real type, byte order and compression gives the numbers back, whole and in pieces."""
    data = np.arange(700).reshape(100, 7).astype(dtype)

    def write(file):
        dataset(file, data=data, chunks=(8, 7), compression=packing, shuffle=True, fletcher32=True)

    whole, parts = h5(write, lambda file: (read_x(file), list(guard.pieces(file["x"], "x", numbers=100))))
    assert whole.dtype.isnative
    np.testing.assert_array_equal(whole, data)
    np.testing.assert_array_equal(np.concatenate(parts), data)
    assert [len(part) for part in parts] == [8] * 12 + [4]  # 100 numbers hold one chunk of 8 rows by 7


@pytest.mark.parametrize(
    ("options", "text"),
    [
        ({"data": h5py.Empty("f8")}, "this must be an array of numbers, not nothing"),
        ({"data": [True]}, "this must be real numbers, not text, logical values or a compound type"),
        ({"data": [1j]}, "this must be real numbers, not text, logical values or a compound type"),
        ({"data": ["a"]}, "this must be real numbers, not text, logical values or a compound type"),
        ({"shape": 2, "dtype": h5py.vlen_dtype(float)}, "this must be real numbers, not text, logical values or a "
         "compound type"),
        ({"shape": 2, "dtype": h5py.ref_dtype}, "this must be real numbers, not text, logical values or a compound "
         "type"),
        ({"shape": (10**6, 10**6), "dtype": "f8", "chunks": (1, 100)}, "the dataset declares 1000000000000 numbers, "
         "but at most 10000000 can be read"),
        ({"shape": 10**6, "dtype": "f8", "chunks": (100,)}, "numbers are declared but none is stored in the file, as "
         "after a run that was stopped; store all of them or shorten the dataset"),
        ({"shape": 10**6, "dtype": "f8"}, "numbers are declared but none is stored in the file, as after a run that "
         "was stopped; store all of them or shorten the dataset"),
        ({"shape": 5, "dtype": "f8", "chunks": (10**8,), "maxshape": (None,)}, "a chunk of more than 10000000 numbers "
         "is too large to be read"),
    ],
)  # fmt: skip
def test_datasets_that_are_refused(h5, options, text):
    """Types that are no numbers and shapes that were never filled are refused before anything is read."""
    assert refusal(lambda: h5(lambda file: dataset(file, **options), read_x)) == f"run.h5, /x: {text}"


def test_pieces_of_what_was_never_stored(h5):
    """Without a limit on their number, the numbers must at least be in the file: a million of 10^12 are not enough."""

    def write(file):
        dataset(file, shape=(10**12,), dtype="f8", chunks=(10**6,))[: 10**6] = 1.0

    expected = (
        "x: numbers are declared but only 0 % of them are stored in the file, as after a run that was stopped; store "
        "all of them or shorten the dataset"
    )
    assert refusal(lambda: h5(write, lambda file: next(guard.pieces(file["x"], "x")))) == expected


def test_pieces_of_rows_that_are_too_long(h5):
    """One row of the first axis must fit into the memory."""

    def write(file):
        dataset(file, shape=(2, 2 * 10**7), dtype="u1", fillvalue=1)[0, 0] = 1

    assert refusal(lambda: h5(write, lambda file: next(guard.pieces(file["x"], "x")))) == (
        "x: rows of 20000000 numbers in chunks of 1 rows are too large to be read"
    )


MORE = "run.h5, /x: a chunk unpacks to more than the {} bytes it declares; the file is damaged or made to do harm"


def zeros(length: int) -> bytes:
    """A zlib stream that unpacks to `length` zero bytes."""
    packer = zlib.compressobj(9)
    return b"".join(packer.compress(bytes(1 << 20)) for _ in range(length >> 20)) + packer.flush()


def test_chunk_that_unpacks_without_end(h5, monkeypatch):
    """HDF5 unpacks a chunk to whatever is in it; both guards against that, the stored length and the count, hold."""

    def bomb(length, shape):
        def write(file):
            chunk = dataset(file, shape=shape, chunks=shape, dtype="f8", compression="gzip")
            chunk.id.write_direct_chunk((0,), zeros(length))

        return write

    assert refusal(lambda: h5(bomb(1 << 24, 1000), read_x)) == MORE.format(8000)
    monkeypatch.setattr(hdf5, "_TRUSTED_CHUNK", 10_000)  # the real threshold would need a gigabyte of zeros
    assert refusal(lambda: h5(bomb(1 << 24, 100_000), read_x)) == MORE.format(800_000)
    np.testing.assert_array_equal(h5(bomb(1 << 20, 1 << 17), read_x), np.zeros(1 << 17))


def test_compression_upon_compression(h5):
    """Two packings in a row multiply their factors, so they are refused; so are filters that nobody knows."""

    def write(code):
        def of(file):
            plan = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
            plan.set_chunk((4,))
            plan.set_deflate(4)
            if code == 1:
                plan.set_deflate(4)
            else:
                plan.set_filter(code, h5py.h5z.FLAG_OPTIONAL, ())
            space = h5py.h5s.create_simple((4,))
            h5py.Dataset(h5py.h5d.create(file.id, b"x", h5py.h5t.IEEE_F64LE, space, dcpl=plan))[...] = 1.0

        return of

    twice = "run.h5, /x: the values are packed more than once; store them with one compression"
    assert refusal(lambda: h5(write(1), read_x)) == twice
    unknown = "run.h5, /x: the values are packed with the filter 257, which is not at hand; store them with gzip"
    assert refusal(lambda: h5(write(257), read_x)) == unknown


# ---------------------------------------------------------------- npz and npy


def npz(tmp_path, **members: bytes) -> Path:
    path = tmp_path / "run.npz"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as file:
        for name, content in members.items():
            file.writestr(f"{name}.npy", content)
    return path


def npy(array, **options) -> bytes:
    stream = io.BytesIO()
    np.lib.format.write_array(stream, np.asanyarray(array), **options)
    return stream.getvalue()


def declared(shape: str, descr: str = "'<f8'", body: bytes = b"", *, version: int = 1) -> bytes:
    """An array file whose header says whatever is given."""
    header = f"{{'descr': {descr}, 'fortran_order': False, 'shape': {shape}}}\n".encode()
    length = struct.pack("<H" if version == 1 else "<I", len(header))
    return b"\x93NUMPY" + bytes([version, 0]) + length + header + body


def array_of(path: Path, **options):
    with guard.open_npz(path, "run.npz") as archive:
        return archive.read("x", **options)


@pytest.mark.parametrize("array", [np.arange(6.0), np.arange(6, dtype=">i4").reshape(2, 3), np.eye(3, 4, order="F"),
                                   np.float32(2), np.empty((0, 3))])  # fmt: skip
def test_arrays_read_as_they_were_written(tmp_path, array):
    """Any real type, order and shape comes back, packed or not, from an archive and from a single file."""
    for save in (np.savez, np.savez_compressed):
        save(tmp_path / "run.npz", x=array, y=1.0)
        with guard.open_npz(tmp_path / "run.npz", "run.npz") as archive:
            assert archive.names == ("x", "y")
            assert archive.shape("x") == np.shape(array)
            np.testing.assert_array_equal(archive.read("x"), array)
            assert archive.read("x").dtype.isnative
    np.save(tmp_path / "run.npy", array)
    np.testing.assert_array_equal(guard.read_npy(tmp_path / "run.npy", "run.npy"), array)


class Harm:
    """A pickle of this touches a file."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def __reduce__(self):
        return os.mkdir, (str(self.path),)


def test_pickles_are_never_opened(tmp_path):
    """An object array is refused by its header; what it would run is not run."""
    harm = npy(np.array([Harm(tmp_path / "harmed")], dtype=object))
    text = "this must be an array of real numbers, not objects, text, logical values or a compound type"
    assert refusal(lambda: array_of(npz(tmp_path, x=harm))) == f"run.npz, array 'x': {text}"
    (tmp_path / "run.npy").write_bytes(harm)
    assert refusal(lambda: guard.read_npy(tmp_path / "run.npy", "run.npy")) == f"run.npy: {text}"
    assert not (tmp_path / "harmed").exists()


DAMAGED = "run.npz: the file is truncated or damaged; copy or write it again"
NUMBERS = "this must be an array of real numbers, not objects, text, logical values or a compound type"


@pytest.mark.parametrize(
    ("content", "text"),
    [
        (npy([True]), f"run.npz, array 'x': {NUMBERS}"),
        (npy(["a"]), f"run.npz, array 'x': {NUMBERS}"),
        (npy(np.zeros(2, dtype=[("a", float)])), f"run.npz, array 'x': {NUMBERS}"),
        (declared("(1000000000000,)"), "run.npz, array 'x': the array declares 1000000000000 numbers, but at most "
         "10000000 can be read"),
        (declared("(4,)"), "run.npz, array 'x': the array declares 32 bytes of numbers, but 0 are stored; write it "
         "again"),
        (declared("(1,)", body=bytes(80)), "run.npz, array 'x': the array declares 8 bytes of numbers, but 80 are "
         "stored; write it again"),
        (declared("(-1,)"), DAMAGED),
        (declared("(1,)", "__import__('os')"), DAMAGED),
        (declared("(" * 5000), DAMAGED),
        (declared("(1,)", version=3), "run.npz, array 'x': this must be an array of real numbers in version 1 or 2 of "
         "the format"),
        (b"\x93NUMPY\x02\0\xff\xff\xff\xff", DAMAGED),
        (b"size,disorder", "run.npz, array 'x': this is not an array of numpy; write it with numpy.save or "
         "numpy.savez"),
        (bytes(1 << 24), "run.npz, array 'x': this is not an array of numpy; write it with numpy.save or numpy.savez"),
    ],
)  # fmt: skip
def test_arrays_that_are_refused(tmp_path, content, text):
    """Other types, false headers and members that are no arrays end in one sentence."""
    assert refusal(lambda: array_of(npz(tmp_path, x=content))) == text


def test_archives_that_are_refused(tmp_path):
    """Unknown names, twins, other packings, damage and endless lists of members end in one sentence."""
    path = npz(tmp_path, x=npy([1.0]), y=npy([2.0]))
    with guard.open_npz(path, "run.npz") as archive:
        assert refusal(lambda: archive.read("z")) == "run.npz: there is no array 'z'; the arrays are x, y"
    whole = path.read_bytes()
    path.write_bytes(whole[:-30])
    cut = "run.npz: this is not a zip archive, or it was cut short; write it again with numpy.savez"
    assert refusal(lambda: array_of(path)) == cut
    at = whole.index(b"PK\x05\x06")
    path.write_bytes(whole[: at + 12] + b"\xfe\xff\xff\xff" + whole[at + 16 :])
    assert (
        refusal(lambda: array_of(path)) == f"run.npz: the archive holds more than {limits.MAX_OBJECTS} arrays; split it"
    )
    with zipfile.ZipFile(path, "w", zipfile.ZIP_BZIP2) as file:
        file.writestr("x.npy", npy([1.0]))
    assert refusal(lambda: array_of(path)).endswith("'x': the array is packed in an unusual way; use numpy.savez")
    with zipfile.ZipFile(path, "w") as file:
        file.writestr("x.npy", npy([1.0]))
        file.writestr("x", npy([1.0]))
    assert refusal(lambda: array_of(path)) == "run.npz: two arrays have the same name; give each its own"


def test_spoiled_archives(tmp_path):
    """Overwritten stretches lead to numbers or to one sentence, never to anything else."""
    whole, rng, refused = npz(tmp_path, x=npy(np.arange(50.0))).read_bytes(), np.random.default_rng(5), 0
    path = tmp_path / "spoiled.npz"
    for _ in range(300):
        spoiled = bytearray(whole)
        start = rng.integers(0, len(whole) - 4)
        spoiled[start : start + 4] = rng.bytes(4)
        path.write_bytes(spoiled)
        try:
            array_of(path)
        except InputError:
            refused += 1
    assert refused > 150  # most of an archive is the packed data under its checksum
