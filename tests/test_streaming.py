"""Long realisation tables in bounded memory: the right numbers in any order, faults with their line, nothing left."""

from __future__ import annotations

import gzip
import tempfile
import threading
import tracemalloc
from pathlib import Path
from typing import IO, Any

import h5py
import numpy as np
import polars as pl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from driftline.errors import ConfigurationError, InputError
from driftline.readers.points import Block
from driftline.readers.samples import sampled
from driftline.readers.streaming import LongDatasets, LongText, Positions, stream
from driftline.readers.streaming.runs import Rows

POSITIONS = Positions(width=4, size=0, disorder=1, realisation=2, value=3)
HEADER = "size,disorder,realisation,value\n"


def _table(rows: int, seed: int = 1, *, order: str = "states") -> pl.DataFrame:
    """Two sizes by five disorders, with seven rows a realisation, or mixed, or one row a realisation."""
    rng = np.random.default_rng(seed)
    frame = pl.DataFrame(
        {
            "size": np.repeat([8.0, 10.0], 5)[np.arange(rows) * 10 // rows],
            "disorder": np.tile([0.5, 1.0, 1.5, 2.0, 2.5], 2)[np.arange(rows) * 10 // rows],
            "realisation": np.arange(rows) % (-(-rows // 10)) // (1 if order == "single" else 7),
            "value": rng.normal(0.5, 0.1, rows).round(10),
        }
    )
    return frame.sample(fraction=1.0, shuffle=True, seed=seed) if order == "mixed" else frame


def _text(folder: Path, frame: pl.DataFrame) -> Path:
    path = folder / "table.csv"
    frame.write_csv(path)
    return path


def _long(path: Path, **options: object) -> LongText:
    return LongText(path, "table.csv", POSITIONS, **options)  # type: ignore[arg-type]


def _expected(frame: pl.DataFrame) -> list[tuple[float, float, np.ndarray, np.ndarray]]:
    """Independent of the code under test: polars' group-by."""
    single = frame.group_by("size", "disorder", "realisation").agg(pl.col("value").mean())
    points = single.sort("size", "disorder", "realisation").group_by("size", "disorder", maintain_order=True)
    return [(size, disorder, g["realisation"].to_numpy(), g["value"].to_numpy()) for (size, disorder), g in points]


def _check(blocks: list, frame: pl.DataFrame) -> None:
    expected = _expected(frame)
    assert [(b.size, b.disorder) for b in blocks] == [(size, disorder) for size, disorder, _, _ in expected]
    for block, (size, disorder, label, value) in zip(blocks, expected, strict=True):
        np.testing.assert_array_equal(block.realisation, label)
        # sums of at most a few hundred values near 0.5 in another order: a few hundred roundings of 1e-16
        np.testing.assert_allclose(block.values, value, rtol=1e-13)
        rows = frame.filter((pl.col("size") == size) & (pl.col("disorder") == disorder))["value"]
        assert block.rows == rows.len()
        assert block.deviation == pytest.approx(rows.std() or 0.0, rel=1e-10)  # n roundings relative to 0.1 around 0.5


@pytest.mark.parametrize("order", ["states", "mixed", "single"])
@pytest.mark.parametrize("most_entries", [100, 4_000_000])
def test_blocks_are_those_of_a_group_by(tmp_path: Path, order: str, most_entries: int) -> None:
    """Realisation averages of a million rows agree with polars' group-by, in memory and by way of the disk."""
    frame = _table(1_000_000 if most_entries > 100 and order == "states" else 20_000, order=order)
    source = _long(_text(tmp_path, frame), piece=2**24 if most_entries > 100 else 2**14)
    _check(list(stream(source, most_entries=most_entries)), frame)


@settings(max_examples=40, deadline=None)
@given(
    st.lists(
        st.tuples(
            st.sampled_from([4.0, 8.0, 8.5]),
            st.sampled_from([-1.0, 0.0, 0.1, 3.0]),
            st.sampled_from([-(2**62), -3, 0, 1, 2, 5000, 2**62]),
            st.floats(-1e6, 1e6),
        ),
        min_size=1,
        max_size=60,
    ),
    st.integers(1, 40),
    st.integers(2, 30),
)
def test_any_order_any_labels_any_part(
    rows: list[tuple[float, float, int, float]], at_once: int, most_entries: int
) -> None:
    """However rows and labels are mixed and wherever parts end, the averages are those of a plain dictionary."""

    class Memory:
        place = "memory"

        def __init__(self) -> None:
            self.notes: list[str] = []

        def rows(self):  # type: ignore[no-untyped-def]
            for start in range(0, len(rows), at_once):
                size, disorder, label, value = map(np.array, zip(*rows[start : start + at_once], strict=True))
                yield Rows(size, disorder, value, label.astype(np.int64), 1.0)

    expected: dict[tuple[float, float], dict[int, list[float]]] = {}
    for size, disorder, label, value in rows:
        expected.setdefault((size, disorder), {}).setdefault(label, []).append(value)
    found = {(b.size, b.disorder): b for b in stream(Memory(), most_entries=most_entries)}
    assert list(found) == sorted(expected)
    for point, labels in expected.items():
        assert found[point].realisation.tolist() == sorted(labels)
        # at most 60 roundings of the largest value, 1e6 times 1e-16 each
        means = [np.mean(labels[label]) for label in sorted(labels)]
        np.testing.assert_allclose(found[point].values, means, rtol=0, atol=1e-8)


def test_rows_are_kept_where_asked(tmp_path: Path) -> None:
    """Without averaging every row comes back, those of a realisation behind each other, in their own order."""
    frame = _table(5_000, order="mixed")
    blocks = list(stream(_long(_text(tmp_path, frame), piece=2**14), averaged=False, most_entries=700))
    for block in blocks:
        rows = frame.filter((pl.col("size") == block.size) & (pl.col("disorder") == block.disorder))
        rows = rows.sort("realisation", maintain_order=True)
        np.testing.assert_array_equal(block.realisation, rows["realisation"].to_numpy())
        np.testing.assert_array_equal(block.values, rows["value"].to_numpy())
    assert sum(block.values.size for block in blocks) == 5_000


def test_without_labels_every_row_is_a_realisation(tmp_path: Path) -> None:
    """A table without a column of labels gives the rows of a point as they stand, and no labels."""
    path = tmp_path / "bare.csv"
    path.write_text("W,L,r\n1.5,8,0.25\n1.0,8,0.5\n1.5,8,0.75\n", encoding="utf-8")
    source = LongText(path, "bare.csv", Positions(width=3, size=1, disorder=0, value=2))
    found = [(b.size, b.disorder, b.values.tolist(), b.realisation) for b in stream(source)]
    assert found == [(8, 1.0, [0.5], None), (8, 1.5, [0.25, 0.75], None)]


def test_hdf5_columns_are_the_same_table(tmp_path: Path) -> None:
    """Datasets of any number type, one for each column, give the blocks of the text file of the same content."""
    frame = _table(20_000)
    with h5py.File(tmp_path / "table.h5", "w") as file:
        for name, kind in (("size", "i2"), ("disorder", "f8"), ("realisation", "u4"), ("value", "f8")):
            file.create_dataset(name, data=frame[name].to_numpy().astype(kind), chunks=(1000,), compression="gzip")
        source = LongDatasets("table.h5", {name: file[name] for name in file}, at_once=1500)
        _check(list(stream(source)), frame)


@pytest.mark.parametrize(
    ("row", "fault"),
    [
        ("8,0.5,3,x", "column 'value': 'x' is not a number"),
        ("8,0.5,3,NaN", "column 'value': 'NaN' is not a finite number; correct it or remove the row"),
        ("8,0.5,3,-inf", "column 'value': '-inf' is not a finite number; correct it or remove the row"),
        ("8,0.5,3,", "column 'value': the cell is empty; give a number or remove the row"),
        ("8,0.5,3,1e300", "column 'value': '1e300' is larger than 1e+100; use other units"),
        ("8,0.5,3.5,1", "column 'realisation': a realisation is a whole number, not '3.5'"),
        ("0,0.5,3,1", "column 'size': a size must be positive, not '0'"),
        ("8,0.5,3", "3 values under 4 columns"),
        ("8,0.5,3,0,5", "5 values under 4 columns"),
        ('8,0.5,3,"0', "column 'value'"),
        ("8,0.5,3,0\0", "column 'value'"),
        ("8,0.5,3,\xff", "column 'value'"),
    ],
)
def test_a_fault_names_its_line(tmp_path: Path, row: str, fault: str) -> None:
    """One bad row deep inside the table is refused with file, line and column, wherever the pieces end."""
    lines = [f"8,{k % 5 / 2},{k},0.25" for k in range(3000)]
    lines[2345] = row
    path = tmp_path / "table.csv"
    path.write_bytes((HEADER + "\n".join(lines) + "\n").encode("latin-1"))
    for piece in (5_000, 2**24):
        if row.endswith('"0'):  # quotation marks around a number are harmless, even a single one
            assert sum(b.rows or 0 for b in stream(_long(path, piece=piece))) == 3000
            continue
        with pytest.raises(InputError) as caught:
            list(stream(_long(path, piece=piece)))
        assert str(caught.value).startswith(f"table.csv, line 2347{', ' if 'column ' in fault else ': '}{fault}")


def test_a_bad_number_in_hdf5_names_its_row(tmp_path: Path) -> None:
    """A NaN in a dataset is refused with the name of the dataset and its row, counted from 1."""
    with h5py.File(tmp_path / "table.h5", "w") as file:
        for name in ("size", "disorder", "value"):
            file[name] = np.arange(1.0, 301.0)
        file["value"][123] = np.nan
        with pytest.raises(InputError, match=r"^t\.h5, /value, row 124: nan is not a finite number; correct it or"):
            list(stream(LongDatasets("t.h5", {name: file[name] for name in file}, at_once=50)))


def test_a_cut_last_line(tmp_path: Path) -> None:
    """A last line without its end is refused if it cannot be read, noted if it can, and left out only when asked."""
    path = tmp_path / "table.csv"
    path.write_text(HEADER + "8,1,0,0.25\n8,1,1,0.75\n8,1,2", encoding="utf-8")
    with pytest.raises(
        InputError, match=r"^table\.csv, line 4: the last line has no line end and cannot be used: 3 val"
    ):
        list(stream(_long(path)))
    source = _long(path, skip_cut_lines=True)
    assert [b.values.tolist() for b in stream(source)] == [[0.25, 0.75]]
    assert source.notes == ["line 4: the last line has no line break, so it may be cut short; it was left out"]
    path.write_text(HEADER + "8,1,0,0.25\n8,1,1,0.7", encoding="utf-8")
    source = _long(path)
    assert [b.values.tolist() for b in stream(source)] == [[0.25, 0.7]]
    assert source.notes == ["line 3: the last line has no line break, so its value may be cut short; it was used"]


@pytest.mark.parametrize(
    ("text", "separator"),
    [
        ("8,1.0,0,2.5D-01\n8,1.0,1,7.5d-1\n", ","),
        ("# a comment\n\n8,1.0,0,0.25\n# another\n8,1.0,1,0.75 # a remark\n", ","),
        ("8;1;0;0.25\r\n8;1;1;0.75\r\n", ";"),
        ("  8   1.0 0  2.5E-01\n  8\t1.0   1  7.5D-01  \n", None),
        ("8\t1\t0.0\t0.25\n8\t 1\t1e0\t0.75\n", "\t"),
        ('"8","1","0",".25"\n"8","1","1","+.75"\n', ","),
    ],
)
def test_habits_of_scripts(tmp_path: Path, text: str, separator: str | None) -> None:
    """Fortran exponents, comments, blanks, quotes and other separators are read, packed by gzip or not."""
    path = tmp_path / "table.csv"
    for raw in ((HEADER + text).encode(), gzip.compress((HEADER + text).encode())):
        path.write_bytes(raw)
        (block,) = stream(_long(path, separator=separator))
        assert (block.values.tolist(), block.realisation.tolist()) == ([0.25, 0.75], [0, 1])


def test_a_gzip_that_is_cut_short(tmp_path: Path) -> None:
    """Damaged compressed data are one sentence."""
    path = tmp_path / "table.csv"
    path.write_bytes(gzip.compress((HEADER + "8,1,0,0.25\n" * 1000).encode())[:-12])
    with pytest.raises(InputError, match=r"^table\.csv: the compressed data are damaged or cut short"):
        list(stream(_long(path)))


def test_a_file_without_line_breaks(tmp_path: Path) -> None:
    """A line longer than any row is refused instead of being kept in memory."""
    path = tmp_path / "table.csv"
    path.write_bytes(HEADER.encode() + b"8,1,0,0." + b"3" * 3_000_000)
    with pytest.raises(InputError, match=r"^table\.csv, line 2: the line is longer than 1048576 bytes"):
        list(stream(_long(path, piece=2**18)))


def test_no_rows_and_too_many_points(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An empty table, and one whose columns make too many points to be sizes and disorders, are refused."""
    path = tmp_path / "table.csv"
    path.write_text(HEADER, encoding="utf-8")
    with pytest.raises(InputError, match=r"^table\.csv: the table has no rows$"):
        list(stream(_long(path)))
    monkeypatch.setattr("driftline.readers.streaming.gathering.MOST_POINTS", 100)
    path.write_text(HEADER + "".join(f"8,{k},0,0\n" for k in range(101)), encoding="utf-8")
    with pytest.raises(InputError, match="there are more than 100 different pairs of size and disorder"):
        list(stream(_long(path)))


def test_realisations_that_come_back_are_noted(tmp_path: Path) -> None:
    """Rows of a realisation in two places, as a restarted job leaves them, are noted; the end of a piece is not."""
    path = tmp_path / "table.csv"
    rows = "".join(f"8,1,{k // 3},{k / 64}\n" for k in range(90))
    path.write_text(HEADER + rows, encoding="utf-8")
    source = _long(path, piece=50)
    list(stream(source))
    assert source.notes == []
    path.write_text(HEADER + rows + "8,1,4,0.5\n8,1,5,0.5\n", encoding="utf-8")
    source = _long(path, piece=50)
    list(stream(source))
    assert len(source.notes) == 1
    assert "(size 8, disorder 1: 2 times)" in source.notes[0]


def test_memory_does_not_grow_with_the_table(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Four times the rows, each a realisation of its own, take the same memory while they are read."""
    monkeypatch.setenv("TMPDIR", str(tmp_path))
    monkeypatch.setattr("tempfile.tempdir", None)

    def peak(rows: int) -> int:
        path = _text(tmp_path, _table(rows, order="single"))
        tracemalloc.start()
        blocks = stream(_long(path, piece=2**15), most_entries=5_000)
        next(blocks)
        found = tracemalloc.get_traced_memory()[1]
        blocks.close()
        tracemalloc.stop()
        return found

    small, large = peak(25_000), peak(100_000)
    # one point of the large table (10 000 values, labels and their copies, some 0.1 kB each) is more than 5000 entries
    assert large < small + 10_000 * 130
    assert small > 5_000 * 20  # the negative control: the measurement sees the entries that are held


def test_an_interrupted_run_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Interrupted in the middle, with rows already put aside on disk, no file and no thread is left."""
    monkeypatch.setenv("TMPDIR", str(tmp_path))
    monkeypatch.setattr("tempfile.tempdir", None)
    (tmp_path / "data").mkdir()
    path = _text(tmp_path / "data", _table(50_000, order="single"))
    seen: list[float] = []
    files: list[IO[bytes]] = []
    threads = set(threading.enumerate())
    temporary = tempfile.TemporaryFile

    def watched(**options: Any) -> IO[bytes]:
        files.append(temporary(**options))
        return files[-1]

    monkeypatch.setattr("tempfile.TemporaryFile", watched)

    def interrupt(text: str, fraction: float) -> None:
        seen.append(fraction)
        if fraction > 0.6:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        list(stream(_long(path, piece=2**15), most_entries=2_000, progress=interrupt))
    assert len(files) == 1
    assert files[0].closed
    assert seen == sorted(seen)
    assert [entry.name for entry in tmp_path.iterdir()] == ["data"]
    assert set(threading.enumerate()) == threads


def test_a_full_disk_is_one_sentence(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where rows cannot be put aside the sentence names the folder and the remedy."""

    def refuse(**options: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("tempfile.TemporaryFile", refuse)
    path = _text(tmp_path, _table(10_000, order="single"))
    with pytest.raises(ConfigurationError, match=r"No space left on device\); set TMPDIR to a folder with more room$"):
        list(stream(_long(path), most_entries=1_000))


def test_samples_know_the_single_rows(tmp_path: Path) -> None:
    """Curves, errors, counts and the variance inflation are those of the same rows read without streaming."""
    frame = _table(40_000).with_columns(pl.col("value") + 0.05 * (pl.col("realisation") % 11))
    plain = [
        Block(size, disorder, g["value"].to_numpy(), g["realisation"].to_numpy(), "memory")
        for (size, disorder), g in frame.group_by("size", "disorder", maintain_order=True)
    ]
    expected, found = sampled(plain), sampled(stream(_long(_text(tmp_path, frame))))
    assert found.rows == expected.rows == 40_000
    for ours, theirs in zip(found.curves, expected.curves, strict=True):
        np.testing.assert_allclose(ours.mean, theirs.mean, rtol=1e-12)  # sums of 4000 values, in another order
        np.testing.assert_allclose(ours.error, theirs.error, rtol=1e-10)
        np.testing.assert_allclose(ours.covariance, theirs.covariance, rtol=0, atol=1e-10 * theirs.error[0] ** 2)
    for ours, theirs in zip(found.diagnostics, expected.diagnostics, strict=True):
        assert ours.error_ratio == pytest.approx(theirs.error_ratio, rel=1e-9)
        assert ours.error_ratio > 1.1
