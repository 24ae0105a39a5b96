"""Files to curves and back: both formats to the last bit, what is tolerated with a note, and the text of inspect."""

from __future__ import annotations

import hashlib
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from driftline.curves import LARGEST, MIN_DISORDERS, Curve, Curves, Labels
from driftline.readers import LAYOUTS, Layout, read
from driftline.readers.inspection import inspect_text, what_looks_wrong
from driftline.readers.write import write_csv, write_hdf5

WRITERS = {"run.csv": write_csv, "run.h5": write_hdf5}
TABLE = """\
size,disorder,mean,error,samples
8,1,0.50,0.01,100
8,2,0.40,0.02,100
8,3,0.30,0.01,200
8,4,0.20,0.01,100
12,1,0.60,0.01,50
12,2,0.45,0.01,50
12,3,0.25,0.01,50
12,4,0.10,0.01,50
"""


@pytest.fixture
def table(tmp_path):
    """A summary CSV of two sizes."""
    path = tmp_path / "run.csv"
    path.write_text(TABLE)
    return path


def assert_same(one: Curves, other: Curves) -> None:
    """Equal to the last bit, the sign of zero included, labels and all."""
    assert one.labels == other.labels
    assert one.sizes.tolist() == other.sizes.tolist()
    for new, old in zip(one.curves, other.curves, strict=True):
        for name in ("disorder", "mean", "error", "covariance", "samples"):
            first, second = getattr(new, name), getattr(old, name)
            assert (first is None) == (second is None), name
            assert first is None or first.tobytes() == second.tobytes(), name


# ---------------------------------------------------------------- reading


def test_summary_csv(table):
    """The numbers, their order and the record of where they came from, by hand."""
    curves = read(table)
    assert curves.sizes.tolist() == [8.0, 12.0]
    first = curves.curves[0]
    assert first.disorder.tolist() == [1.0, 2.0, 3.0, 4.0]
    assert first.mean.tolist() == [0.5, 0.4, 0.3, 0.2]
    assert first.error.tolist() == [0.01, 0.02, 0.01, 0.01]
    assert first.samples.tolist() == [100, 100, 200, 100]
    assert curves.labels == Labels()
    assert dict(curves.origin) == {
        "path": str(table),
        "sha256": hashlib.sha256(TABLE.encode()).hexdigest(),
        "layout": "summary-csv",
        "columns": {name: name for name in ("size", "disorder", "mean", "error", "samples")},
        "rows": 8,
        "notes": [],
    }


@pytest.mark.parametrize(
    "change",
    [
        lambda text: "\ufeff" + text,
        lambda text: text.replace("\n", "\r\n"),
        lambda text: text.replace("\n", "\r"),
        lambda text: text.rstrip("\n"),
        lambda text: "# made in May\n\n" + text.replace("\n12,1,", "\n  # next size\n\n12,1,"),
        lambda text: text.replace(",", " , ").replace("0.50", "5.0D-01"),
        lambda text: text.replace("0.40", '"4e-1"').replace("size", '"size"'),
        lambda text: text.replace(",100\n", ",100.0\n").replace(",50\n", ",5e1\n"),
    ],
)
def test_the_same_table_in_other_clothes(tmp_path, change):
    """Byte-order marks, line endings, blanks, comments, quotes and Fortran exponents change nothing."""
    path = tmp_path / "run.csv"
    path.write_bytes(TABLE.encode())
    plain = read(path)
    path.write_bytes(change(TABLE).encode())
    assert_same(read(path), plain)
    assert read(path).origin["notes"] == []


def test_what_is_tolerated_is_noted(tmp_path, table):
    """Shuffled rows, further columns, comments that are no labels and a commented header read, each with a note."""
    plain = read(table)
    header, *rows = TABLE.splitlines()
    shuffled = tmp_path / "shuffled.csv"
    lines = ["# Author: somebody", f"# {header},seed,", *(f"{row},7," for row in reversed(rows))]
    shuffled.write_text("\n".join(lines))
    assert_same(read(shuffled), plain)
    assert read(shuffled).origin["notes"] == [
        "line 1: 'Author' is not a label, so this comment was not used",
        "line 2: the column names were taken from this comment",
        "columns not used: seed, one without a name",
        "rows of size 8, 12 were not in the order of disorder and have been sorted",
    ]


def test_table_without_samples(tmp_path):
    """Counts may be missing altogether or at a whole size."""
    path = tmp_path / "run.csv"
    path.write_text("\n".join(line.rsplit(",", 1)[0] for line in TABLE.splitlines()))
    assert [curve.samples for curve in read(path).curves] == [None, None]
    assert "samples" not in read(path).origin["columns"]
    path.write_text(TABLE.replace(",50\n", ",\n"))
    assert [curve.samples is None for curve in read(path).curves] == [False, True]


def test_labels_from_comments_and_from_the_call(tmp_path):
    """Comments above the header name the labels; what the call says comes over them."""
    path = tmp_path / "run.csv"
    head = "# observable: gap ratio: mean\n## ergodic_value: 0.5307\n# localised_value: none\n#dimension:3\n"
    path.write_text(head + "# disorder_kind: none\n# disorder_unit:\n" + TABLE + "# observable: too late\n")
    labels = Labels("gap ratio: mean", ergodic_value=0.5307, dimension=3.0, disorder_kind="none")
    assert read(path).labels == labels
    assert read(path, ergodic_value=0.6, dimension=None).labels == replace(labels, ergodic_value=0.6, dimension=None)


def test_content_decides_not_the_name(tmp_path, table):
    """HDF5 is told by its signature, behind a user block too, and everything else is taken for a table."""
    plain = read(table)
    write_hdf5(plain, tmp_path / "run.dat")
    assert read(tmp_path / "run.dat").origin["layout"] == "hdf5"
    block = tmp_path / "block.bin"
    block.write_bytes(b"#" * 512 + (tmp_path / "run.dat").read_bytes())
    assert_same(read(block), plain)
    text = tmp_path / "run"
    text.write_text(TABLE)
    assert_same(read(text), plain)
    assert_same(read(str(text), layout="summary-csv"), plain)


def test_hdf5_out_of_order_and_with_more_in_it(tmp_path):
    """Points are sorted with their covariance, integers and single precision read, and the rest is noted."""
    path = tmp_path / "run.h5"
    covariance = np.array([[4.0, 1.0, 0.5, 0.0], [1.0, 9.0, 0.0, 0.0], [0.5, 0.0, 1.0, 0.0], [0.0, 0.0, 0.0, 1.0]])
    with h5py.File(path, "w") as file:
        file.attrs["observable"] = np.bytes_(b"entropy")
        file.attrs["dimension"] = 2
        file.attrs["author"] = "somebody"
        for size in ("8", "1.2e1"):
            group = file.create_group(f"curves/{size}")
            group["disorder"] = [2, 1, 4, 3]
            group["mean"] = np.float32([0.5, 0.25, 0.125, 1.0])
            group["error"] = [2.0, 3.0, 1.0, 1.0]
        file["curves/8/covariance"] = covariance
        file["curves/8/seed"] = 3
    curves = read(path)
    order = [1, 0, 3, 2]
    assert curves.labels == Labels("entropy", dimension=2.0)
    assert curves.sizes.tolist() == [8.0, 12.0]
    assert curves.curves[0].mean.tolist() == [0.25, 0.5, 1.0, 0.125]
    assert curves.curves[0].error.tolist() == [3.0, 2.0, 1.0, 1.0]
    assert np.array_equal(curves.curves[0].covariance, covariance[np.ix_(order, order)])
    names = ("disorder", "mean", "error", "covariance")
    assert curves.origin["columns"] == {"size": "/curves/<size>"} | {name: f"/curves/<size>/{name}" for name in names}
    assert curves.origin["rows"] == 8
    assert sorted(curves.origin["notes"]) == [
        "/curves/1.2e1: the points were not in the order of disorder and have been sorted",
        "/curves/8: not used: seed",
        "/curves/8: the points were not in the order of disorder and have been sorted",
        "attribute 'author' is not a label and was not used",
    ]


def test_registry():
    """Layouts have distinct names and a description, and each is a strategy of the one base class."""
    assert [layout.name for layout in LAYOUTS] == ["folder", "hdf5", "hdf5-tree", "npz", "summary-csv", "wide", "table"]
    assert all(isinstance(layout, Layout) and layout.description for layout in LAYOUTS)


def test_a_table_is_read_without_the_libraries_for_other_formats(table):
    """Reading a CSV imports neither h5py nor polars, whose loading takes longer than the reading."""
    code = (
        "import sys; from driftline.readers import read; read(sys.argv[1]); "
        "print([name for name in ('h5py', 'polars', 'matplotlib', 'scipy') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code, str(table)], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


# ---------------------------------------------------------------- there and back

NUMBERS = st.floats(-LARGEST, LARGEST)
ERRORS = st.floats(1 / LARGEST, LARGEST)
TEXT = st.text(st.characters(codec="utf-8", categories=("L", "M", "N", "P", "S")), min_size=1, max_size=12).filter(
    str.isprintable
)
REFERENCE = st.none() | NUMBERS


@st.composite
def curve_sets(draw):
    """Any `Curves` without covariance: two sizes or three, own grids that share a range, counts at some sizes."""
    sizes = draw(st.lists(st.floats(1e-6, LARGEST), min_size=2, max_size=3, unique=True))
    parts = []
    for size in sizes:
        inner = draw(st.lists(st.floats(-1.0, 1.0), min_size=MIN_DISORDERS - 2, max_size=6, unique=True))
        ends = draw(st.floats(-LARGEST, -2.0)), draw(st.floats(2.0, LARGEST))
        grid = sorted([ends[0], *inner, ends[1]])
        mean, error = (draw(arrays.arrays(float, len(grid), elements=kind)) for kind in (NUMBERS, ERRORS))
        counts = draw(st.none() | arrays.arrays(np.int64, len(grid), elements=st.integers(1, 2**53)))
        parts.append(Curve(size, grid, mean, error, samples=counts))
    labels = Labels(
        draw(TEXT), draw(TEXT), draw(TEXT), draw(TEXT | st.just("")), draw(REFERENCE), draw(REFERENCE),
        draw(st.none() | st.floats(1e-3, LARGEST)), draw(st.sampled_from(["quenched", "quasiperiodic", "none"])),
    )  # fmt: skip
    return Curves(parts, labels)


@settings(max_examples=20, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(curves=curve_sets())
def test_there_and_back_to_the_last_bit(tmp_path, curves):
    """Whatever curves are written, in either format, the same curves are read."""
    for name, write in WRITERS.items():
        write(curves, tmp_path / name)
        assert_same(read(tmp_path / name), curves)
        assert read(tmp_path / name).origin["notes"] == []


def test_covariance_there_and_back(tmp_path):
    """HDF5 keeps a covariance to the last bit; a third of the way to full correlation it is positive definite."""
    error = np.array([0.1, 0.2, 0.3, 0.7])
    matrix = (np.outer(error, error) + 2 * np.diag(error**2)) / 3
    np.fill_diagonal(matrix, error**2)
    grid = np.arange(1.0, 5.0)
    curves = Curves([Curve(8, grid, grid, error, matrix), Curve(12, grid, grid, error)])
    write_hdf5(curves, tmp_path / "run.h5")
    assert_same(read(tmp_path / "run.h5"), curves)
    with pytest.raises(
        ValueError, match=r"^a summary CSV has no place for the covariance of the points; write HDF5 ins"
    ):
        write_csv(curves, tmp_path / "run.csv")
    assert not (tmp_path / "run.csv").exists()


@pytest.mark.parametrize("name", WRITERS)
def test_same_curves_same_bytes(tmp_path, table, name):
    """Writing twice gives the same file, so that its hash names its content; no temporary file is left."""
    curves, path = read(table), tmp_path / name
    WRITERS[name](curves, path)
    first = path.read_bytes()
    WRITERS[name](curves, path)
    assert path.read_bytes() == first
    assert {item.name for item in tmp_path.iterdir()} == {"run.csv", name}


# ---------------------------------------------------------------- inspect


def example(rng, *, points=17, scatter=1.0, sizes=(8, 12, 16, 20), error=0.005, **labels):
    """Curves that cross at disorder 3, with errors of about `error` and a scatter of `scatter` times that."""
    grid, parts = np.linspace(1.0, 5.0, points), []
    for size in sizes:
        errors = error * rng.uniform(0.8, 1.2, points)
        mean = 0.46 + 0.07 * np.tanh((3 - grid) * size / 8) + scatter * errors * rng.normal(size=points)
        parts.append(Curve(size, grid, mean, errors, samples=np.full(points, 100)))
    return Curves(parts, Labels("gap ratio", "r", **labels))


def changed(curves, index, **parts):
    """`curves` with fields of one size replaced."""
    every = list(curves.curves)
    every[index] = replace(every[index], **parts)
    return Curves(every, curves.labels, curves.origin)


def test_inspect_text(table):
    """The whole text for a small table, by hand but for the hash; nothing is wider than 80 columns."""
    curves = read(table, observable="gap ratio", ergodic_value=0.5307)
    expected = """\
Layout       summary-csv
Rows         8
Columns      size, disorder, mean, error, samples

Observable   gap ratio, y
Disorder     W, quenched
Ergodic      0.5307
Localised    not given
Dimension    1

      size  points  disorder from         to  median error        realisations
         8       4              1          4          0.01          100 to 200
        12       4              1          4          0.01                  50

Common range 1 to 4
Disorders    the same at every size
Covariance   given at 0 of 2 sizes

What looks wrong
  - There are 2 sizes only: one crossing shows no drift. Add sizes before
    trusting an extrapolation.
  - All errors are exactly equal at size 12: measured errors never are. Compute
    them from the realisations of each point.
"""
    text = inspect_text(curves)
    assert text.endswith(expected)
    assert text.split("Layout")[0].split() == ["File", *str(table).split(), "SHA-256", curves.origin["sha256"]]
    assert max(map(len, text.splitlines())) <= 80


def test_inspect_shows_notes_grids_and_long_paths(tmp_path):
    """Notes are shown, differing grids said, and a long path is wrapped rather than cut."""
    path = tmp_path / ("long-name-" * 12 + ".csv")
    path.write_text(TABLE.replace("12,4,", "12,5,").replace("samples", "count"))
    text = inspect_text(read(path, disorder_unit="J"))
    assert "Note         columns not used: count\n" in text
    assert "Disorders    different between sizes\n" in text
    assert "Disorder     W (J), quenched\n" in text
    assert "".join(str(path).split()) in "".join(text.split())
    assert max(map(len, text.splitlines())) <= 80


def test_inspect_without_a_file():
    """Curves made in memory have no file to name, and good ones nothing to be said against them."""
    text = inspect_text(example(np.random.default_rng(1), ergodic_value=0.53, localised_value=0.3863))
    assert text.startswith("These curves were made in memory; there is no file to name.\n")
    assert text.endswith("Nothing looks wrong.\n")


def test_good_curves_are_not_suspected():
    """Of 25 good data sets none is suspected.

    Each has 52 judged points; by chance a point exceeds five standard errors once in 1.7 million, so the chance of any
    alarm in all of them is below 0.1 %; the scatter leaves 0.4 to 2.5 less often (none in 900 sets of a trial run).
    """
    rng = np.random.default_rng(2)
    assert [what_looks_wrong(example(rng, ergodic_value=0.6, localised_value=0.3)) for _ in range(25)] == [[]] * 25


def test_step_between_two_points_is_no_outlier():
    """A curve that falls within one grid step is under-resolved, not wrong: what the grid hides counts as unknown."""
    rng = np.random.default_rng(3)
    grid = np.linspace(1.0, 5.0, 9)
    errors = 1e-4 * rng.uniform(0.8, 1.2, (4, 9))
    steps = 0.46 + 0.07 * np.sign(3.2 - grid)
    curves = Curves(
        [
            Curve(8 + 4 * i, grid, steps + e * rng.normal(size=9), e, samples=np.full(9, 99))
            for i, e in enumerate(errors)
        ]
    )
    assert what_looks_wrong(curves) == []


def test_outlier_is_found():
    """A point moved by 15 errors is found, and found where it is, in at least 17 of 20 data sets.

    A trial run of 100 sets found 99; at that rate fewer than 17 of 20 have a chance of 4e-5. Moved by no error, none is
    found: `test_good_curves_are_not_suspected`.
    """
    rng, found = np.random.default_rng(4), 0
    for index in rng.integers(3, 14, 20):
        curves = example(rng)
        mean = curves.curves[1].mean.copy()
        mean[index] += 15 * curves.curves[1].error[index]
        findings = what_looks_wrong(changed(curves, 1, mean=mean))
        place = f"at disorder {curves.curves[1].disorder[index]:g} ("
        found += any(item.startswith("At size 12 a point lies far off") and place in item for item in findings)
    assert found >= 17


@pytest.mark.parametrize(
    ("scatter", "text"),
    [
        (0.1, "times as much as their errors say. Either 'error' holds a standard deviation instead of a standard "
         "error, or the same disorder realisations were used at several disorders (then give the covariance)."),
        (5.0, "times as much as their errors say. Were eigenstates of one realisation counted as independent? Average "
         "them first, then take the error over realisations."),
    ],
)  # fmt: skip
def test_scatter_unlike_the_errors(scatter, text):
    """Errors ten times too large, as standard deviations are, or five times too small are told from the scatter."""
    rng = np.random.default_rng(5)
    found = [what_looks_wrong(example(rng, scatter=scatter, sizes=(8, 10, 12, 14, 16))) for _ in range(5)]
    assert all(any(finding.endswith(text) for finding in findings) for findings in found)


def test_scatter_of_correlated_points_is_not_judged():
    """With a covariance, smooth curves are expected and say nothing against the errors."""
    curves = example(np.random.default_rng(6), scatter=0.1)
    covariance = np.diag(curves.curves[0].error ** 2)
    assert len(what_looks_wrong(curves)) == 1
    assert what_looks_wrong(changed(curves, 0, covariance=covariance)) == []


def test_suspicious_errors_and_counts():
    """Errors that differ by more than 30, few realisations and missing counts are named with their numbers."""
    curves = example(np.random.default_rng(7))
    error = curves.curves[0].error.copy()
    error[0], error[1] = 1.0, 0.03
    wide = changed(curves, 0, error=error)
    low = min(float(np.min(curve.error)) for curve in wide.curves)
    (finding,) = what_looks_wrong(wide)
    assert finding.startswith(f"The errors differ by a factor of {1 / low:.0f}: {low:.3g} at size ")
    assert finding.endswith(
        ", and 1 at size 8, disorder 1. Check that both come from enough realisations and in the same way."
    )
    # 1/sqrt(2*19) = 16 %
    assert what_looks_wrong(changed(curves, 2, samples=np.full(17, 20))) == [
        "Only 20 realisations at size 16: an error from so few is itself uncertain by 16 %. Run at least 30."
    ]
    assert what_looks_wrong(changed(curves, 2, samples=np.full(17, 1))) == [
        "Only 1 realisation at size 16: an error from so few is itself unknowable. Run at least 30."
    ]
    assert what_looks_wrong(changed(curves, 3, samples=None)) == [
        "The number of realisations is not given at size 20. Add a column 'samples', so that errors from too few "
        "realisations can be told."
    ]


def test_few_sizes():
    """Up to three sizes are called few; four are not."""
    rng = np.random.default_rng(8)
    assert what_looks_wrong(example(rng, sizes=(8, 12, 16))) == [
        "There are 3 sizes only: two successive crossings fit any law of drift. Add sizes before trusting an "
        "extrapolation."
    ]
    assert what_looks_wrong(example(rng, sizes=(8, 12, 16, 20))) == []


def test_means_outside_the_references():
    """Means beyond a reference value by more than five errors are counted, whichever reference is the larger."""
    curves = example(np.random.default_rng(9), ergodic_value=0.53, localised_value=0.39, error=0.001)
    mean = curves.curves[3].mean
    for references in ({"ergodic_value": 0.52}, {"ergodic_value": 0.39, "localised_value": 0.52}):
        (finding,) = what_looks_wrong(curves.relabel(**references))
        assert "outside the reference values 0.39 and 0.52; the worst is " in finding
        assert finding.endswith(" errors). Check the labels and the normalisation.")
    assert mean.max() > 0.525
    assert what_looks_wrong(curves.relabel(localised_value=None, ergodic_value=0.4)) == []


def test_plateau_of_two_blocks():
    """A gap ratio of 0.4234 at weak disorder (Giraud et al. 2022, from memory) points to an unresolved symmetry.

    The same numbers under another name, or with the plateau of one block (0.5307), do not.
    """
    rng = np.random.default_rng(10)
    grid = np.linspace(0.5, 8.0, 16)

    def data(plateau, name):
        parts = []
        for size in (8, 10, 12, 14):
            error = 0.001 * rng.uniform(0.8, 1.2, 16)
            mean = 0.3863 + (plateau - 0.3863) / (1 + np.exp((grid - 5) * size / 8)) + error * rng.normal(size=16)
            parts.append(Curve(size, grid, mean, error, samples=np.full(16, 500)))
        return Curves(parts, Labels(name))

    assert what_looks_wrong(data(0.4234, "mean gap-ratio")) == [
        "At weak disorder the gap ratio sits at 0.4234 (size 8, 10, 12, 14), the value of two independent blocks "
        "(Giraud et al. 2022): a symmetry may be unresolved. Compute it within one sector."
    ]
    assert what_looks_wrong(data(0.5307, "mean gap-ratio")) == []
    assert what_looks_wrong(data(0.4234, "imbalance")) == []


def test_inspection_changes_nothing(table):
    """Looking at the curves leaves the file and its folder as they were."""
    before = {item: item.read_bytes() for item in Path(table.parent).iterdir()}
    inspect_text(read(table))
    assert {item: item.read_bytes() for item in Path(table.parent).iterdir()} == before
