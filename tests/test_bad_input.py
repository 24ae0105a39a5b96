"""Input that cannot be used: each fault gets one sentence that says what, where and what to do; every text in full."""

from __future__ import annotations

import os
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from driftline.curves import Curves
from driftline.errors import ConfigurationError, InputError
from driftline.readers import read
from driftline.readers.guard import MAX_TEXT
from driftline.readers.write import replacing, write_csv, write_hdf5

HEADER = "size,disorder,mean,error\n"
EIGHT = "8,1,0.5,0.01\n8,2,0.4,0.01\n8,3,0.3,0.01\n8,4,0.2,0.01\n"
TWELVE = "12,1,0.6,0.01\n12,2,0.4,0.01\n12,3,0.2,0.01\n12,4,0.1,0.01\n"


def fault(path: Path, **options: object) -> str:
    """What `read` says about the file, with the folder taken off."""
    with pytest.raises(InputError) as caught:
        read(path, **options)  # type: ignore[arg-type]
    return str(caught.value).replace(f"{path.parent}{os.sep}", "")


@pytest.fixture
def csv_fault(tmp_path):
    """Write the given text or bytes as run.csv and return what `read` says about it."""

    def of(content: str | bytes) -> str:
        path = tmp_path / "run.csv"
        path.write_bytes(content.encode() if isinstance(content, str) else content)
        return fault(path)

    return of


def test_the_table_that_the_faults_are_made_from_is_good(tmp_path):
    """Without the fault the table of these tests reads, so that what is refused is the fault."""
    path = tmp_path / "run.csv"
    path.write_text(HEADER + EIGHT + TWELVE)
    assert read(path).points == 8


NO_ERROR = "add 'error', the standard error of the mean ({} divided by the square root of the number of realisations)"
SPREAD = (
    "may hold the standard error of the mean or the standard deviation over realisations; the columns are size, "
    "disorder, mean, {0}; say which with --columns error={0}, or with --columns deviation={0} and the number of "
    "realisations (samples=... there, or --samples-each N)"
)
UNTOLD = "the names do not tell which column holds {}; the columns are {}; say it with --columns {}"


@pytest.mark.parametrize(
    ("header", "text"),
    [
        ("Size,strange,mean,error", UNTOLD.format("the disorder", "Size, strange, mean, error",
         "size=Size,disorder=...,mean=mean,error=error")),
        ("size,disordr,mean,error", UNTOLD.format("the disorder", "size, disordr, mean, error",
         "size=size,disorder=disordr,mean=mean,error=error")),
        ("L,N,mean,error", UNTOLD.format("the size and the disorder", "L, N, mean, error",
         "size=...,disorder=...,mean=mean,error=error")),
        ("L,W,r,S", UNTOLD.format("the means (or the raw values)", "L, W, r, S",
         "size=L,disorder=W,mean=...,error=... (value=... for raw values)")),
        ("L,W,seed,weight", UNTOLD.format("the means (or the raw values)", "L, W, seed, weight",
         "size=L,disorder=W,mean=...,error=... (value=... for raw values)")),
        ("size,disorder,mean,std", "column 'std' " + SPREAD.format("std")),
        ("size,disorder,mean,err", "column 'err' " + SPREAD.format("err")),
        ("size,disorder,mean,Error", "column 'Error' " + SPREAD.format("Error")),
        ("size,disorder,mean,sigma", "column 'sigma' " + SPREAD.format("sigma")),
        ("size,disorder,mean,deviation", "a standard deviation becomes a standard error only with the number of "
         "realisations; the columns are size, disorder, mean, deviation; give its column with --columns samples=... or "
         "one number for all with --samples-each N"),
        ("size,disorder,mean,weight", "no column holds the error of the mean; the columns are size, disorder, mean, "
         "weight; name it with --columns error=... (standard error) or deviation=... (standard deviation over "
         "realisations), or declare raw values with value=...; a standard error is the standard deviation over "
         "realisations divided by the square root of their number"),
        ("8,1,0.5,0.01", "the 4 columns have no names; say what they hold, in their order, for example --columns "
         "size,disorder,mean,error"),
        ("W,8,10,12", "the columns are W, 8, 10, 12; if there is one for each size, say so with --columns "
         "disorder=W,mean={size} (and error=... or deviation=... in the same way)"),
        ("W,L8,L10,L12", "no column holds the error of the mean; the columns are L{size}, W; name it with --columns "
         "error=... (standard error) or deviation=... (standard deviation over realisations), or declare raw values "
         "with "
         "value=...; a standard error is the standard deviation over realisations divided by the square root of their "
         "number"),
        ('size,"disorder,mean,error', "the quotation marks do not match; remove them"),
        ("x" * 100_001, "the line is longer than 100000 characters; break it or give another file"),
    ],
)  # fmt: skip
def test_header(csv_fault, header, text):
    """A header that leaves open what a column holds is refused with the columns seen and the option that settles it."""
    assert csv_fault(f"# a comment\n\n{header}\n{EIGHT}{TWELVE}") == f"run.csv, line 3: {text}"


def test_long_header_is_shortened(csv_fault):
    """Of many columns twelve are named, and a long name is cut."""
    header = ",".join([*(f"c{chr(97 + i)}" for i in range(13)), "y" * 50])
    seen = ", ".join(f"c{chr(97 + i)}" for i in range(12))
    expected = "run.csv, line 1: " + UNTOLD.format(
        "the size and the disorder and the means (or the raw values)", f"{seen} and 2 more",
        "size=...,disorder=...,mean=...,error=... (value=... for raw values)",
    )  # fmt: skip
    assert csv_fault(f"{header}\n{','.join('1' * 14)}\n") == expected


@pytest.mark.parametrize(
    ("header", "text"),
    [
        ("size,disorder,mean,weight", "column 'error' is missing; the columns are size, disorder, mean, weight; "
         + NO_ERROR.format("the standard deviation over disorder realisations")),
        ("size,disorder,mean,std", "column 'error' is missing; the columns are size, disorder, mean, std; "
         + NO_ERROR.format("'std'")),
        ("L,W,mean,error", "columns 'size' and 'disorder' are missing; the columns are L, W, mean, error; "
         "rename 'L' to 'size' and 'W' to 'disorder' if that is what they hold"),
        ("size,disorder,mean,mean", "column 'mean' occurs twice; give each column its own name"),
        ("8,1,0.5,0.01", "the first row holds numbers, so the columns have no names; put the line "
         "size,disorder,mean,error above it"),
    ],
)  # fmt: skip
def test_header_of_a_summary_that_was_asked_for(tmp_path, header, text):
    """Asked to read the program's own summary, the reader takes no other names."""
    path = tmp_path / "run.csv"
    path.write_text(f"# a comment\n\n{header}\n{EIGHT}{TWELVE}")
    assert fault(path, layout="summary-csv") == f"run.csv, line 3: {text}"


@pytest.mark.parametrize(
    ("row", "column", "text"),
    [
        ("8,5,abc,0.01", "mean", "'abc' is not a number"),
        ("8,5," + "x" * 99 + ",0.01", "mean", f"'{'x' * 27}...' is not a number"),
        ("8,5,0.5\x07,0.01", "mean", r"'0.5\x07' is not a number"),
        ("8,5,1_000,0.01", "mean", "'1_000' is not a number"),
        ("8,5,١,0.01", "mean", "'١' is not a number"),
        ('8,5,"0,53",0.01', "mean", "'0,53' is not a number; write a decimal point"),
        ("8,5,,0.01", "mean", "the cell is empty; give a number or remove the row"),
        ("8,5,NaN,0.01", "mean", "'NaN' is not a finite number; correct it or remove the row"),
        ("8,-inf,0.5,0.01", "disorder", "'-inf' is not a finite number; correct it or remove the row"),
        ("8,5,1e999,0.01", "mean", "'1e999' is larger than 1e+100; use other units"),
        ("8,5,0.5,0", "error", "a standard error must be positive, not 0; measure it or remove the row"),
        ("8,5,0.5,-0.01", "error", "a standard error must be positive, not -0.01; measure it or remove the row"),
        ("8,5,0.5,1e-400", "error", "a standard error must be positive, not 0; measure it or remove the row"),
        ("0,5,0.5,0.01", "size", "a size must be positive, not 0"),
        ("-8,5,0.5,0.01", "size", "a size must be positive, not -8"),
    ],
)
def test_cell(csv_fault, row, column, text):
    """A cell that holds no usable number is named by line and column and shown."""
    assert csv_fault(f"{HEADER}{EIGHT}# half time\n{row}\n{TWELVE}") == f"run.csv, line 7, column '{column}': {text}"


@pytest.mark.parametrize(
    ("count", "text"),
    [
        ("2.5", "2.5 is not a positive whole number of realisations"),
        ("0", "0 is not a positive whole number of realisations"),
        ("-3", "-3 is not a positive whole number of realisations"),
        ("1e17", "1e+17 is not a positive whole number of realisations"),
        ("many", "'many' is not a number"),
        ("", "the cell is empty, but other rows of this size have a count; give all or none"),
    ],
)
def test_samples(csv_fault, count, text):
    """The number of realisations is a positive whole number, in all rows of a size or in none."""
    rows = EIGHT.replace("\n", ",100\n") + TWELVE.replace("\n", ",100\n")
    table_ = "size,disorder,mean,error,samples\n" + rows.replace("8,3,0.3,0.01,100", f"8,3,0.3,0.01,{count}")
    assert csv_fault(table_) == f"run.csv, line 4, column 'samples': {text}"


@pytest.mark.parametrize(
    ("content", "text"),
    [
        (HEADER + EIGHT + TWELVE + "8,2.0,0.4,0.02\n",
         ", lines 3 and 10: size 8 at disorder 2 occurs twice; keep one row or average them "
         "(raw values are declared with --columns value=...)"),
        (HEADER + EIGHT + "12,1,0.5\n", ", line 6: 3 values under 4 columns (size, disorder, mean, error); "
         "complete or remove the row"),
        (HEADER + EIGHT + "12\n", ", line 6: 1 value under 4 columns (size, disorder, mean, error); "
         "complete or remove the row"),
        ("size,disorder,mean,error,\n8,1,2,3\n", ", line 2: 4 values under 5 columns (size, disorder, mean, error, "
         "without a name); complete or remove the row"),
        (HEADER + EIGHT, ": only size 8 was found and at least 2 sizes are needed to see a size dependence"),
        (HEADER + EIGHT + "12,1,0.6,0.01\n", ", size 12: 1 disorder value, but at least 4 are needed at every size; "
         "add points or drop this size"),
        (HEADER + EIGHT + TWELVE.replace("12,", "12,1"), ": the sizes have no common disorder range: size 12 begins at "
         "11, where size 8 has already ended at 4; measure all sizes on an overlapping range"),
        ("", ": the file is empty"),
        ("\ufeff", ": the file holds no table, only comments or blank lines"),
        ("# only\n\n# comments\n", ": the file holds no table, only comments or blank lines"),
        ("# c\n" + HEADER + "\n", ", line 2: there is a header but no row below it"),
    ],
)  # fmt: skip
def test_whole_table(csv_fault, content, text):
    """Faults of the table as a whole name the lines or sizes concerned."""
    assert csv_fault(content) == f"run.csv{text}"


@pytest.mark.parametrize(
    ("content", "text"),
    [
        ((HEADER + EIGHT).encode("utf-16"), ": the file is in UTF-16; save it as UTF-8"),
        ((HEADER + EIGHT).encode("utf-32"), ": the file is in UTF-32; save it as UTF-8"),
        ((HEADER + EIGHT).encode("utf-16-be"), ", line 1: there is a zero byte, so this is binary data or UTF-16; "
         "save it as text in UTF-8"),
        ((HEADER + EIGHT).encode() + b"\r\n12,\0", ", line 7: there is a zero byte, so this is binary data or UTF-16; "
         "save it as text in UTF-8"),
        (HEADER.encode() + "# Unschärfe\n".encode("latin-1"), ", line 2: byte 0xe4 is not valid UTF-8; "
         "save the file as UTF-8"),
        (b"\xef\xbb\xbfsize\r\xff", ", line 2: byte 0xff is not valid UTF-8; save the file as UTF-8"),
        (b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR", ", line 3: there is a zero byte, so this is binary data or UTF-16; "
         "save it as text in UTF-8"),
        (b"\x1f\x8b\x08\0rest", ": the gzip file is truncated or damaged; copy or pack it again"),
        (b"PK\x03\x04rest", ": the file is a zip archive or a spreadsheet; save the table as CSV"),
    ],
)  # fmt: skip
def test_encoding(csv_fault, content, text):
    """Binary files and foreign encodings are told apart from text, with the line of the first wrong byte."""
    assert csv_fault(content) == f"run.csv{text}"


@pytest.mark.parametrize(
    ("line", "text"),
    [
        ("# ergodic_value: high", "label 'ergodic_value': 'high' is not a number"),
        ("# dimension: -1", "label 'dimension': dimension must be positive, not -1"),
        ("# disorder_kind: random", "label 'disorder_kind': disorder_kind must be quenched, quasiperiodic or none, "
         "not 'random'"),
        ("# observable:", "label 'observable': observable must be one line of printable text, not ''"),
        ("# observable: twice", "label 'observable': this label was already given above; keep one"),
    ],
)  # fmt: skip
def test_label(csv_fault, line, text):
    """A label with a useless value is named with its line."""
    first = "# observable: gap ratio" if "twice" in line else "#"
    assert csv_fault(f"{first}\n{line}\n{HEADER}{EIGHT}{TWELVE}") == f"run.csv, line 2, {text}"


def test_not_a_file(tmp_path):
    """Folders, devices, missing files and unknown layouts or labels are refused before anything is read."""
    assert fault(tmp_path / "gone.csv") == "gone.csv: there is no such file; check the path"
    (tmp_path / "folder").mkdir()
    assert fault(tmp_path / "folder") == "folder: no file in this folder has a number in its path; it holds nothing"
    text = "folder: this is a folder, and the layout summary-csv reads a file"
    assert fault(tmp_path / "folder", layout="summary-csv") == text
    os.mkfifo(tmp_path / "pipe")
    assert fault(tmp_path / "pipe") == "pipe: this is not a regular file; save the data to a file first"


def test_unknown_layout_or_label(tmp_path):
    """A layout or label that does not exist is answered with those that do."""
    with pytest.raises(
        ConfigurationError,
        match=r"^there is no layout 'xml'; the layouts are folder, hdf5, hdf5-tree, npz, summary-csv, wide, table$",
    ):
        read("any.csv", layout="xml")
    path = tmp_path / "run.csv"
    path.write_text(HEADER + EIGHT + TWELVE)
    names = (
        "observable, observable_symbol, disorder_symbol, disorder_unit, ergodic_value, localised_value, dimension, "
        "disorder_kind"
    )
    with pytest.raises(ConfigurationError, match=rf"^there is no label 'colour'; the labels are {names}$"):
        read(path, colour="red")
    with pytest.raises(InputError, match=r"^labels: ergodic_value must be a number, not 'high'$"):
        read(path, ergodic_value="high")


def test_file_that_may_not_be_read(tmp_path, monkeypatch):
    """A refusal by the operating system becomes one sentence; raised by hand, since an administrator may read all."""
    path = tmp_path / "run.csv"
    path.write_text(HEADER + EIGHT + TWELVE)

    def refuse(reason: OSError):
        def opened(*args, **kwargs):
            raise reason

        monkeypatch.setattr(os, "open", opened)

    refuse(PermissionError(13, "Permission denied"))
    assert fault(path) == "run.csv: the file may not be read; check its permissions"
    refuse(OSError(5, "Input/output error"))
    assert fault(path) == "run.csv: the file cannot be read (Input/output error)"


def test_huge_table_is_refused_before_it_is_read(tmp_path):
    """A sparse file beyond the limit is refused by its size alone."""
    path = tmp_path / "run.csv"
    with path.open("wb") as stream:
        stream.truncate(MAX_TEXT + 1)
    expected = (
        "run.csv: the file is larger than 500 MB; a summary has one row per size and disorder, so average over "
        "realisations first"
    )
    assert fault(path) == expected


# ---------------------------------------------------------------- HDF5


@pytest.fixture
def h5_fault(tmp_path):
    """Write a good HDF5 file, let `change` spoil it, and return what `read` says about it."""
    source = tmp_path / "run.csv"
    source.write_text(HEADER + EIGHT + TWELVE)

    def of(change) -> str:
        path = tmp_path / "run.h5"
        write_hdf5(read(source), path)
        assert read(path).points == 8
        with h5py.File(path, "r+") as file:
            change(file)
        return fault(path)

    return of


def replaced(name, data):
    """A change that puts `data` in the place of one dataset of size 8."""

    def change(file):
        del file[f"curves/8/{name}"]
        file[f"curves/8/{name}"] = data

    return change


MISSING = "/curves/8: dataset '{}' is missing; the datasets are {}"


@pytest.mark.parametrize(
    ("change", "text"),
    [
        (lambda f: f.pop("curves"), ": the file holds no dataset of numbers"),
        (lambda f: f["curves"].pop("8"), ": only size 12 was found and at least 2 sizes are needed to see a size "
         "dependence"),
        (lambda f: f.move("curves/8", "curves/eight"), ", /curves/eight: the name of a group must be a size, a "
         "positive number"),
        (lambda f: f.move("curves/8", "curves/-8"), ", /curves/-8: the name of a group must be a size, a positive "
         "number"),
        (lambda f: f.move("curves/8", "curves/12.0"), ", /curves/12.0: size 12 occurs twice; put its points into one "
         "group"),
        (lambda f: f["curves"].create_dataset("16", data=[1.0]), ", /curves/16: this must be a group with the datasets "
         "of one size"),
        (lambda f: f.move("curves/8/error", "curves/8/std"), ", " + MISSING.format("error", "disorder, mean, std; ")
         + NO_ERROR.format("'std'")),
        (lambda f: f.move("curves/8/disorder", "curves/8/W"), ", " + MISSING.format("disorder", "W, error, mean; "
         "rename 'W' to 'disorder' if that is what it holds")),
        (replaced("mean", np.ones((4, 1))), ", /curves/8/mean: this must be an array with 1 dimension, not an array of "
         "shape (4, 1)"),
        (replaced("mean", 1.0), ", /curves/8/mean: this must be an array with 1 dimension, not an array of shape ()"),
        (replaced("mean", h5py.Empty("f")), ", /curves/8/mean: this must be an array with 1 dimension, not nothing"),
        (replaced("mean", np.ones(3)), ", /curves/8: the datasets have different lengths (disorder 4, mean 3, error "
         "4)"),
        (replaced("mean", ["1", "2", "3", "4"]), ", /curves/8/mean: this must be real numbers, not text, logical "
         "values or a compound type"),
        (replaced("mean", np.ones(4, dtype=complex)), ", /curves/8/mean: this must be real numbers, not text, logical "
         "values or a compound type"),
        (replaced("mean", np.ones(4, dtype=bool)), ", /curves/8/mean: this must be real numbers, not text, logical "
         "values or a compound type"),
        (replaced("mean", [1, 2, np.nan, 3]), ", size 8: mean is nan at point 3; give a finite number up to 1e+100"),
        (replaced("error", [1, 2, 0, 3]), ", size 8: the error at disorder 3 is 0; a standard error must be positive"),
        (replaced("disorder", [1, 2, 2, 3]), ", size 8: disorder 2 occurs twice"),
        (lambda f: f["curves/8"].create_dataset("samples", data=[1, 2, 3, 4.5]), ", size 8: samples must be one "
         "positive whole number for each disorder"),
        (lambda f: f["curves/8"].create_dataset("covariance", data=np.eye(3)), ", size 8: the covariance must be a "
         "finite matrix of 4 by 4"),
        (lambda f: f["curves/8"].create_group("samples"), ", /curves/8/samples: this must be a dataset of numbers"),
        (lambda f: f.attrs.create("format", "driftline-curves/9"), ", attribute 'format': the format is "
         "'driftline-curves/9', but only 'driftline-curves/1' can be read"),
        (lambda f: f.attrs.create("observable", 3.0), ", attribute 'observable': the attribute must be text"),
        (lambda f: f.attrs.create("dimension", [1.0, 2.0]), ", attribute 'dimension': the attribute must be a number, "
         "not an array"),
        (lambda f: f.attrs.create("dimension", 1j), ", attribute 'dimension': the attribute must be a number"),
        (lambda f: f.attrs.create("dimension", "three"), ", attribute 'dimension': 'three' is not a number"),
        (lambda f: f.attrs.create("ergodic_value", np.nan), ", attribute 'ergodic_value': ergodic_value must be a "
         "finite number up to 1e+100, not nan"),
    ],
)  # fmt: skip
def test_hdf5(h5_fault, change, text):
    """Each way to spoil an HDF5 file is answered with the object concerned."""
    assert h5_fault(change) == f"run.h5{text}"


def test_hdf5_without_curves_when_they_were_asked_for(tmp_path):
    """Asked to read the program's own HDF5, the reader takes nothing else."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w") as file:
        file["data/8/mean"] = [1.0]
    assert fault(path, layout="hdf5") == "run.h5: there is no group /curves; the file holds data"


def test_unsorted_hdf5_with_a_covariance_of_the_wrong_shape(h5_fault):
    """The shape is checked before the rows and columns are put in order."""

    def change(file):
        replaced("disorder", [4, 3, 2, 1])(file)
        file["curves/8/covariance"] = np.eye(3)

    assert h5_fault(change) == "run.h5, /curves/8: the covariance must be a finite matrix of 4 by 4"


def linked(link):
    """A change that puts a link in the place of a dataset."""

    def change(file):
        del file["curves/8/mean"]
        file["curves/8/mean"] = link

    return change


@pytest.mark.parametrize("link", [h5py.ExternalLink("other.h5", "/mean"), h5py.SoftLink("/curves/12/mean")])
def test_hdf5_links_are_not_followed(h5_fault, link):
    """A link might lead to any file of the reader's, so it is refused wherever it leads."""
    expected = (
        "run.h5, /curves/8/mean: this is a link to another place, which is not followed; store the data themselves"
    )
    assert h5_fault(linked(link)) == expected


def test_hdf5_link_in_the_place_of_a_group_is_not_followed(h5_fault):
    """The groups are guarded like the datasets."""

    def change(file):
        file.move("curves", "hidden")
        file["curves"] = h5py.SoftLink("/hidden")

    expected = "run.h5, /curves: this is a link to another place, which is not followed; store the data themselves"
    assert h5_fault(change) == expected


def test_hdf5_values_in_other_files_are_not_read(h5_fault, tmp_path):
    """Neither external storage nor virtual datasets may pull numbers out of other files."""
    raw = tmp_path / "secret.bin"
    raw.write_bytes(np.ones(4).tobytes())
    layout = h5py.VirtualLayout(shape=(4,), dtype="f8")
    layout[:] = h5py.VirtualSource(str(tmp_path / "run.csv"), "mean", shape=(4,))

    def external(file):
        del file["curves/8/mean"]
        file["curves/8"].create_dataset("mean", (4,), "f8", external=[(str(raw), 0, 32)])

    def virtual(file):
        del file["curves/8/mean"]
        file["curves/8"].create_virtual_dataset("mean", layout)

    expected = (
        "run.h5, /curves/8/mean: the values lie in another file, which is not followed; store the data themselves"
    )
    assert h5_fault(external) == expected
    assert h5_fault(virtual) == expected


def test_hdf5_of_absurd_shape_is_refused_before_it_is_read(h5_fault):
    """A few bytes can declare more numbers than fit into memory; they are counted over the file, not allocated."""

    def declared(shape, chunks=None):
        def change(file):
            for name in ("disorder", "mean", "error"):
                del file[f"curves/8/{name}"]
                file["curves/8"].create_dataset(name, shape, "f8", chunks=chunks, maxshape=(None,))

        return change

    text = "run.h5, /curves/8/disorder: the dataset declares 1000000000000 numbers, but at most 10000000 can be read"
    assert h5_fault(declared((10**12,), (1000,))) == text
    text = "run.h5, /curves/8/disorder: a chunk of more than 10000000 numbers is too large to be read"
    assert h5_fault(declared((5,), (10**8,))) == text


DAMAGED = "run.h5: the HDF5 file is truncated or damaged; copy or write it again"


def test_truncated_hdf5(tmp_path):
    """An HDF5 file cut anywhere is refused with one sentence; only a cut of trailing padding may go unnoticed."""
    (tmp_path / "run.csv").write_text(HEADER + EIGHT + TWELVE)
    path = tmp_path / "run.h5"
    write_hdf5(read(tmp_path / "run.csv"), path)
    whole = path.read_bytes()
    for length in np.linspace(8, len(whole) - 1, 40, dtype=int):
        path.write_bytes(whole[:length])
        assert fault(path) == DAMAGED
    path.write_bytes(whole[:5])
    assert fault(path) == "run.h5: the file is named as HDF5 but is not; give it the name of its format"
    path.write_bytes(b"")
    assert fault(path) == "run.h5: the file is empty"


def test_damaged_hdf5_reads_or_is_refused(tmp_path):
    """Overwritten stretches of a file never lead to anything but curves or an InputError."""
    (tmp_path / "run.csv").write_text(HEADER + EIGHT + TWELVE)
    path = tmp_path / "run.h5"
    write_hdf5(read(tmp_path / "run.csv"), path)
    whole, rng, refused = path.read_bytes(), np.random.default_rng(20), 0
    for _ in range(80):
        spoiled = bytearray(whole)
        start = rng.integers(8, len(whole) - 8)
        spoiled[start : start + 8] = rng.bytes(8)
        path.write_bytes(spoiled)
        refused += not reads(path)
    assert refused > 5  # the damage was felt at all: the headers are well over a tenth of the file


def reads(path: Path) -> bool:
    """Whether `path` gives curves; anything but curves or a one-line InputError fails the test that asks."""
    curves, text = None, ""
    try:
        curves = read(path)
    except InputError as reason:
        text = str(reason)
    assert isinstance(curves, Curves) or (text.startswith(str(path)) and "\n" not in text)
    return curves is not None


# ---------------------------------------------------------------- anything at all

CELL = st.one_of(
    st.sampled_from(
        ["8", "12", "1", "2", "3", "4", "0.5", "-1", "0", "nan", "inf", "1e9999", "", '"', "#", "1D-3", "é"]
    ),
    st.floats().map(repr),
    st.text(max_size=8),
)
ROW = st.lists(CELL, min_size=1, max_size=6).map(",".join)
NEARLY = st.tuples(
    st.sampled_from([HEADER, HEADER.strip() + ",samples\n", "size,disorder,mean\n", "# dimension: 3\n" + HEADER, ""]),
    st.lists(st.one_of(st.sampled_from((EIGHT + TWELVE).splitlines()), ROW), max_size=12).map("\n".join),
).map("".join)
QUICK = settings(
    max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture], derandomize=True
)


@QUICK
@given(text=st.one_of(NEARLY, st.text(max_size=200)))
def test_any_text_reads_or_is_refused(tmp_path, text):
    """Whatever text a table holds, the answer is curves or one sentence."""
    path = tmp_path / "any.csv"
    path.write_text(text, encoding="utf-8", errors="surrogatepass")
    reads(path)


@QUICK
@given(content=st.binary(max_size=200))
def test_any_bytes_read_or_are_refused(tmp_path, content):
    """Whatever bytes a file holds, under either name, the answer is curves or one sentence."""
    for name in ("any.csv", "any.h5", "any"):
        path = tmp_path / name
        path.write_bytes(content)
        reads(path)


# ---------------------------------------------------------------- writing


def test_writing_what_cannot_be_written(tmp_path):
    """A covariance has no place in a CSV, a missing folder is not made, and a failure leaves no file behind."""
    (tmp_path / "run.csv").write_text(HEADER + EIGHT + TWELVE)
    curves = read(tmp_path / "run.csv")
    for write in (write_csv, write_hdf5):
        target = tmp_path / "gone" / "run.out"
        with pytest.raises(ConfigurationError) as caught:
            write(curves, target)
        assert str(caught.value) == f"{target}: the file cannot be written (there is no such folder)"
        with pytest.raises(ConfigurationError) as caught:
            write(curves, tmp_path)
        assert str(caught.value) == f"{tmp_path}: the file cannot be written (Is a directory)"

    def killed():
        with replacing(tmp_path / "run.csv") as part:
            part.write_text("half")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        killed()
    assert (tmp_path / "run.csv").read_text() == HEADER + EIGHT + TWELVE
    assert sorted(item.name for item in tmp_path.iterdir()) == ["run.csv"]
