"""HDF5 of any shape, npz archives and tables in memory: what is read from names, options and axes, what is asked "
"back."""

from __future__ import annotations

import os
import subprocess
import sys
from itertools import product
from pathlib import Path

import h5py
import numpy as np
import pandas as pd
import polars as pl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import driftline as dl
from driftline.cli import main
from driftline.errors import ConfigurationError, InputError
from driftline.readers import arrays, read
from driftline.report.configuration import to_toml

ROOT = Path(__file__).parents[1]
CHAIN = ROOT / "datasets" / "random-field-chain" / "realisations.h5"
SIZES, DISORDERS, RUNS, STATES = (8, 10, 12), (0.5, 1.0, 1.5, 2.0, 2.5), 11, 4
RNG = np.random.default_rng(7)
VALUES = RNG.normal(0.5, 0.1, (len(SIZES), len(DISORDERS), RUNS, STATES))
MEAN = VALUES.mean(axis=(2, 3))
ERROR = VALUES.mean(axis=3).std(axis=2, ddof=1) / np.sqrt(RUNS)
POINTS = list(product(range(len(SIZES)), range(len(DISORDERS))))


def written(path: Path, arrays_: dict[str, object], attributes: dict[str, float] | None = None) -> Path:
    """An HDF5 file of these datasets and attributes (``path@name``)."""
    with h5py.File(path, "w") as file:
        for name, values in arrays_.items():
            file[name] = values
        for place, value in (attributes or {}).items():
            where, name = place.split("@")
            file[where or "/"].attrs[name] = value
    return path


def assert_numbers(curves):
    """Means and errors by their formulas: over eigenstates first, then over realisations."""
    *_, mean, error = curves.flat()
    # 1e-12: sums of some tens of numbers near 0.5 differ by the order of the terms only
    assert np.allclose(mean, MEAN.ravel(), rtol=0, atol=1e-12)
    assert np.allclose(error, ERROR.ravel(), rtol=0, atol=1e-12)
    assert curves.sizes.tolist() == list(SIZES)
    assert curves.curves[0].disorder.tolist() == list(DISORDERS)


def assert_read_again(curves, path):
    """The options that the reader recorded read the file again with the same numbers, notes and record."""
    again = read(path, **curves.origin["input"])
    assert dict(again.origin) == dict(curves.origin)
    assert np.array_equal(again.flat(), curves.flat())


# ---------------------------------------------------------------- HDF5

AXES = {"L": SIZES, "W": DISORDERS}
BY_POINT = {f"L{SIZES[i]}/W{DISORDERS[j]}": (i, j) for i, j in POINTS}
BY_RUN = {f"run{n:03d}": point for n, point in enumerate(POINTS)}
IN_ATTRIBUTES = {f"{run}@{n}": v for run, (i, j) in BY_RUN.items() for n, v in (("L", SIZES[i]), ("W", DISORDERS[j]))}
LONG = [np.array([axis[p[k]] for p in POINTS]) for k, axis in enumerate((SIZES, DISORDERS))]


@pytest.mark.parametrize(
    ("datasets", "attributes", "options"),
    [
        # averaged: scalars for each point, vectors for each size, one matrix, one long table
        ({f"{g}/{n}": a[p] for g, p in BY_POINT.items() for n, a in (("mean", MEAN), ("sem", ERROR))}, {}, {}),
        ({f"L{SIZES[i]}/{n}": v for i in range(3) for n, v in (("W", DISORDERS), ("r", MEAN[i]), ("sem", ERROR[i]))},
         {}, {}),
        ({**AXES, "r": MEAN, "sem": ERROR}, {}, {}),
        ({**AXES, "r": MEAN.T, "sem": ERROR.T}, {}, {}),
        ({"L": LONG[0], "W": LONG[1], "r": MEAN.ravel(), "sem": ERROR.ravel()}, {}, {}),
        ({f"{g}/{n}": a[p] for g, p in BY_RUN.items() for n, a in (("r", MEAN), ("err", ERROR))}, IN_ATTRIBUTES,
         {"pattern": "run*", "columns": "size=@L,disorder=@W,mean=r,error=err"}),
        # values of realisations: a vector for each point, in the names of groups or in attributes
        ({f"{g}/r": VALUES[p].mean(axis=1) for g, p in BY_POINT.items()}, {}, {}),
        ({f"data/{g}/gap ratio": VALUES[p].mean(axis=1) for g, p in BY_POINT.items()}, {}, {}),
        ({f"{g}/r": VALUES[p].mean(axis=1) for g, p in BY_RUN.items()}, IN_ATTRIBUTES,
         {"pattern": "/run*", "columns": "size=@L,disorder=@W,value=r"}),
        # a matrix of realisations and disorders for each size, the disorders beside it or at the top
        ({"W": DISORDERS, **{f"sizes/{s}/r": VALUES[i].mean(axis=2).T for i, s in enumerate(SIZES)}}, {},
         {"pattern": "/sizes/{size}/r", "columns": "disorder=/W"}),
        ({f"L{s}/{n}": v for i, s in enumerate(SIZES) for n, v in (("r", VALUES[i].mean(axis=2).T), ("W", DISORDERS))},
         {}, {"columns": "value=r"}),
        # realisations by eigenstates
        ({f"{g}/r": VALUES[p] for g, p in BY_POINT.items()}, {}, {"axes": "realisation,state"}),
        ({f"{g}/r": VALUES[p].T for g, p in BY_POINT.items()}, {}, {"axes": ["state", "realisation"]}),
        ({**AXES, "r": VALUES}, {}, {"columns": "value=r", "axes": "size,disorder,realisation,state"}),
        # a group for each realisation with a value for each eigenstate
        ({f"{g}/seed{k}/r": VALUES[p][k] for g, p in BY_POINT.items() for k in range(RUNS)}, {}, {}),
    ],
)  # fmt: skip
def test_hdf5_of_any_shape(tmp_path, datasets, attributes, options):
    """Parameters in names, attributes and axes; scalars, vectors and matrices; and each can be read again."""
    path = written(tmp_path / "run.h5", datasets, attributes)
    curves = read(path, **options)
    assert curves.origin["layout"] == "hdf5-tree"
    assert_numbers(curves)
    assert_read_again(curves, path)


WHICH = "name the dimensions in order with --axes, {} of size, disorder, realisation, state"


@pytest.mark.parametrize(
    ("datasets", "attributes", "options", "sentence"),
    [
        ({**AXES, "r": MEAN, "std": ERROR}, {}, {}, ": dataset 'std' may hold the standard error of the mean or the "
         "standard deviation over realisations; the datasets are L, W, r, std; say which with --columns error=std, or "
         "with "
         "--columns deviation=std and the number of realisations (samples=... there, or --samples-each N); it holds L "
         "(3), "
         "W (5), r (3 x 5), std (3 x 5)"),
        ({"a/8/x": [1.0], "a/10/x": [1.0], "a/8/y": [1.0], "a/10/y": [1.0]}, {"@model": 3}, {}, ": the names do not "
         "tell "
         "which dataset holds the size and the disorder and the means (or the raw values); the datasets are a/{?}/x, "
         "a/{?}/y; say it with --columns size=...,disorder=...,mean=...,error=... (value=... for raw values); it "
         "holds a/#/x "
         "(1, 2 times), a/#/y (1, 2 times) (# is a number); the attributes are model; a number in a path is read by a "
         "pattern, such as --pattern 'a/{size}'; an attribute by its name, such as --columns size=@L"),
        ({f"{g}/r": VALUES[p] for g, p in BY_POINT.items()}, {}, {}, ", dataset L10/W0.5/r: it is not told what runs "
         "along "
         "dimension 1 and 2 of the shape (11, 4); " + WHICH.format(2)),
        ({"L": SIZES, "W": DISORDERS[:3], "r": MEAN[:, :3], "sem": ERROR[:, :3]}, {}, {}, ", dataset r: the size may "
         "run "
         "along dimension 1 or 2 of the shape (3, 3); " + WHICH.format(2)),
        ({"L": SIZES, "W": DISORDERS, "r": MEAN[:, :4], "sem": ERROR[:, :4]}, {}, {}, ", dataset r: there are 5 "
         "values of "
         "disorder, and no dimension of the array has that length; its shape is (3, 4)"),
        ({"L": [8, 8, 10], "W": [1, 1, 1], "r": VALUES[0, :3, :, 0]}, {}, {"columns": "value=r"}, ", dataset r: rows "
         "of one "
         "size and disorder may be realisations or hold several, in an array of the shape (3, 11); " + WHICH.format(2)),
        ({"W": DISORDERS, "r": MEAN[0], "sem": ERROR[0]}, {}, {"columns": "size=@L"}, ", dataset r: there is no "
         "attribute "
         "'L' for the size here or in a group above"),
        ({"L8/r": MEAN[0]}, {}, {"pattern": "N{size}"}, ": nothing fits the pattern N{size}; the datasets are L#/r "
         "(5) (# is "
         "a number)"),
        ({"L8/r": MEAN[0], "W": DISORDERS}, {}, {"columns": "value=/L{size}/x,disorder=/W"}, ": no dataset fits "
         "value=L{size}/x; the datasets are W (5), L#/r (5) (# is a number)"),
        ({"L8/r": MEAN[0], "L8/sem": ERROR[0]}, {}, {"pattern": "L{size}", "columns": "disorder=W"}, ": one "
         "dataset must hold the disorder for L8/r, but there is none (L8/W); the datasets are L8/r, L8/sem"),
        ({**AXES, "r": VALUES[..., 0]}, {}, {"columns": "value=r", "axes": "size,disorder"}, ", dataset r: 2 axes are "
         "named "
         "(size, disorder), but the array has the shape (3, 5, 11)"),
        ({**AXES, "r": VALUES[..., 0]}, {}, {"columns": "value=r", "axes": "size,state,realisation"}, ", dataset r: "
         "the "
         "disorder has 5 values, as many as there are eigenstates by the axes (size, state, realisation) and the shape "
         "(3, 5, 11); correct the axes"),
        ({"text": np.bytes_("none")}, {}, {}, ": the file holds no dataset of numbers"),
    ],
)  # fmt: skip
def test_what_hdf5_leaves_open_is_asked_back(tmp_path, datasets, attributes, options, sentence):
    """The datasets seen with their shapes and the option that settles it, in full; axes are never guessed."""
    path = written(tmp_path / "run.h5", datasets, attributes)
    with pytest.raises(InputError) as caught:
        read(path, **options)
    assert str(caught.value).replace(f"{tmp_path}{os.sep}", "") == f"run.h5{sentence}"


def test_a_fault_in_the_options_is_not_taken_for_damage(tmp_path):
    """A pattern that cannot be used is named as such, though the file is open when that comes out."""
    path = written(tmp_path / "run.h5", {**AXES, "r": MEAN, "sem": ERROR})
    np.savez(tmp_path / "run.npz", r=MEAN)
    for name in (path, tmp_path / "run.npz"):
        with pytest.raises(ConfigurationError, match=r"^pattern: there is no placeholder '\{sise\}'; they are"):
            read(name, pattern="L{sise}")
        with pytest.raises(
            ConfigurationError, match=r"^pattern: there are more than 2 \* in '\*a\*b\*'; write out more"
        ):
            read(name, pattern="*a*b*")


def test_points_that_were_not_measured(tmp_path):
    """NaN for both mean and error leaves a point out with a note; NaN for one of them is refused."""
    mean, error = MEAN.copy(), ERROR.copy()
    mean[0, 0] = error[0, 0] = np.nan
    path = written(tmp_path / "run.h5", {**AXES, "r": mean, "sem": error})
    curves = read(path)
    assert curves.curves[0].disorder.tolist() == [1.0, 1.5, 2.0, 2.5]
    assert "run.h5, dataset r: points without a number, taken as not measured: 1" in "".join(curves.origin["notes"])
    error[0, 0] = 0.1
    written(path, {**AXES, "r": mean, "sem": error})
    with pytest.raises(InputError, match=r"run\.h5, dataset r, size 8: mean is nan at point 1; give a finite number"):
        read(path)


def test_a_long_hdf5_table_is_streamed_to_the_same_curves(tmp_path, monkeypatch):
    """The two ways through the program agree to rounding."""
    point = np.repeat(np.arange(len(POINTS)), RUNS * STATES)
    columns = {
        "L": LONG[0][point],
        "W": LONG[1][point],
        "seed": np.tile(np.repeat(np.arange(RUNS), STATES), len(POINTS)),
    }
    path = written(tmp_path / "run.h5", {**columns, "r": VALUES.ravel()})
    whole = read(path)
    assert_numbers(whole)
    monkeypatch.setattr(arrays, "STREAMED", 1)
    part = read(path)
    assert_numbers(part)
    assert part.origin["input"] == whole.origin["input"]


def test_random_field_chain_by_options():
    """The raw values of this repository, paired by declaration: mean and error as its own curves were computed."""
    options = {"pattern": "/sizes/{size}/gap_ratio", "columns": "disorder=/disorder", "axes": "realisation,disorder"}
    curves = read(CHAIN, **options, paired=True)
    assert curves.correlated
    with h5py.File(CHAIN) as file:
        for curve in curves.curves:
            values = file[f"sizes/{curve.size:g}/gap_ratio"][()]
            # 1e-12: sums of 2000 numbers below one differ by the order of the terms only
            assert np.allclose(curve.mean, values.mean(axis=0), rtol=0, atol=1e-12)
            assert np.allclose(curve.error, values.std(axis=0, ddof=1) / np.sqrt(len(values)), rtol=0, atol=1e-12)
            assert set(curve.samples.tolist()) == {len(values)}
    assert_read_again(curves, CHAIN)
    assert not read(CHAIN, **options, paired=False).correlated


def test_eigenstates_of_the_random_field_chain():
    """Single states are averaged within each realisation first, which the error ratio shows."""
    options = {"pattern": "/sizes/{size}/state_gap_ratio", "columns": "disorder=/disorder"}
    curves = read(CHAIN, **options, axes="realisation,disorder,state")
    # 1.2 with 20 to 50 states by the notes of the data set; the first 200 realisations scatter about it
    assert all(1.1 < size["error_ratio"] < 1.35 for size in curves.origin["realisations"])


# ---------------------------------------------------------------- npz

PER_SIZE = (("r", MEAN), ("sem", ERROR))


@pytest.mark.parametrize(
    ("content", "options"),
    [
        ({**AXES, "r": MEAN, "sem": ERROR}, {}),
        ({"size": LONG[0], "disorder": LONG[1], "mean": MEAN.ravel(), "error": ERROR.ravel()}, {}),
        ({"W": DISORDERS, **{f"{n}_L{SIZES[i]}": a[i] for i in range(3) for n, a in PER_SIZE}}, {}),
        ({"W": DISORDERS, **{f"r{s}": VALUES[i].mean(axis=2).T for i, s in enumerate(SIZES)}},
         {"columns": {"disorder": "W", "value": "r{size}"}}),
        ({**AXES, "r": VALUES.mean(axis=3)}, {"columns": {"value": "r"}}),
    ],
)  # fmt: skip
def test_npz(tmp_path, content, options):
    """Matrices with their axes, long tables, and arrays for each size; compressed or not."""
    for name, save in (("run.npz", np.savez), ("packed.npz", np.savez_compressed)):
        save(tmp_path / name, **content)
        curves = read(tmp_path / name, **options)
        assert curves.origin["layout"] == "npz"
        assert_numbers(curves)
        assert_read_again(curves, tmp_path / name)


def test_npz_without_errors_is_asked_back(tmp_path):
    """The arrays seen, with their shapes."""
    np.savez(tmp_path / "run.npz", **AXES, mean=MEAN)
    with pytest.raises(InputError) as caught:
        read(tmp_path / "run.npz")
    assert str(caught.value).endswith(
        "run.npz: no array holds the error of the mean; the arrays are L, W, mean; name it with --columns error=... "
        "(standard "
        "error) or deviation=... (standard deviation over realisations), or declare raw values with value=...; a "
        "standard "
        "error is the standard deviation over realisations divided by the square root of their number; it holds L "
        "(3), W "
        "(5), mean (3 x 5)"
    )


# ---------------------------------------------------------------- tables in memory

TABLE = {"L": LONG[0], "W": LONG[1], "r": MEAN.ravel(), "sem": ERROR.ravel()}
RECORDS = np.rec.fromarrays(list(TABLE.values()), names=list(TABLE))
WIDE = {"W": DISORDERS, **{f"{n}{s}": a[i] for i, s in enumerate(SIZES) for n, a in (("L", MEAN), ("sem_L", ERROR))}}
RAW = pd.DataFrame(
    [(SIZES[i], DISORDERS[j], k, x) for i, j in POINTS for k in range(RUNS) for x in VALUES[i, j, k]],
    columns=["L", "W", "seed", "r"],
)


@pytest.mark.parametrize(
    ("table", "options"),
    [
        (TABLE, {}),
        (pd.DataFrame(TABLE), {}),
        (pd.DataFrame(TABLE).assign(model="GOE"), {}),
        (pd.DataFrame(TABLE).set_index(["L", "W"]).reset_index(), {}),
        (pd.DataFrame(TABLE).convert_dtypes(), {}),
        (pl.DataFrame(TABLE), {}),
        (RECORDS, {}),
        (np.column_stack(list(TABLE.values())), {"columns": ("size", "disorder", "mean", "error")}),
        (np.column_stack(list(TABLE.values())).tolist(), {"columns": "size=1,disorder=2,mean=3,error=4"}),
        (pd.DataFrame(WIDE), {}),
        (pl.DataFrame(RAW.to_dict("list")), {}),
        (RAW, {}),
        ({**AXES, "r": MEAN, "sem": ERROR}, {}),
        (
            pd.DataFrame(TABLE).assign(sd=ERROR.ravel() * 3, count=9).drop(columns="sem"),
            {"columns": {"deviation": "sd"}},
        ),
    ],
    ids=range(14),
)
def test_tables_in_memory(table, options):
    """Frames of pandas and polars, mappings, record arrays and plain arrays, averaged or raw, by either door."""
    for curves in (dl.Curves.from_table(table, **options), dl.read(table, **options)):
        assert_numbers(curves)
        assert curves.origin["layout"] == "memory"


@pytest.mark.parametrize(
    ("table", "options", "sentence"),
    [
        (3, {}, 'this is no table; give a data frame, a mapping of names to arrays, or an array of rows with '
         'columns=("size", "disorder", "mean", "error")'),
        ({"L": ["a"], "W": ["b"]}, {}, "the table holds no column of numbers"),
        (np.ones((3, 4)), {}, "the 4 columns have no names; say what they hold, in their order, for example --columns "
         "size,disorder,mean,error"),
        (TABLE, {"columns": {"mean": "S"}}, "there is no column 'S'; the columns are L, W, r, sem"),
        ({**TABLE, "r": [None, *MEAN.ravel()[1:]]}, {}, "column r, size 8: mean is nan at point 1; give a finite "
         "number up "
         "to 1e+100"),
    ],
)  # fmt: skip
def test_what_a_table_in_memory_leaves_open_is_asked_back(table, options, sentence):
    """The columns seen, in full."""
    with pytest.raises(InputError) as caught:
        dl.Curves.from_table(table, **options)
    assert str(caught.value).removeprefix("table").lstrip(":, ") == sentence


def test_sizes_are_no_option_of_tables_in_memory():
    """Names say it there."""
    with pytest.raises(ConfigurationError, match=r"^sizes: sizes belong to text files; name the columns of each size"):
        dl.Curves.from_table(WIDE, sizes=[8, 10])


def test_frames_are_read_without_pandas():
    """A frame is whatever has columns that can be taken by name; nothing imports pandas for it."""
    code = (
        "import sys, numpy as np; import driftline as dl\n"
        "class Frame:\n"
        "    columns = ['L', 'W', 'r', 'sem']\n"
        "    def __getitem__(self, name):\n"
        "        return {'L': np.repeat([8, 12], 4), 'W': np.tile(np.arange(4.0), 2)}.get(name, np.arange(1.0, 9.0))\n"
        "print(dl.Curves.from_table(Frame()).points, [n for n in ('pandas', 'polars', 'h5py') if n in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "8 []"


# ---------------------------------------------------------------- there and back, and the record of it


@settings(max_examples=15, deadline=None, derandomize=True)
@given(order=st.permutations(["size", "disorder", "realisation", "state"]), seed=st.integers(0, 2**32 - 1))
def test_any_order_of_the_axes_gives_the_same_curves(order, seed):
    """An array transposed together with its axes is the same data."""
    values = np.random.default_rng(seed).normal(size=(2, 4, 3, 2))
    names = ["size", "disorder", "realisation", "state"]
    table = {"L": [8, 10], "W": [1.0, 2.0, 3.0, 4.0], "r": values.transpose([names.index(name) for name in order])}
    curves = dl.Curves.from_table(table, columns={"value": "r"}, axes=order)
    # 1e-14: a dozen roundings of numbers of order one
    assert np.allclose(curves.flat()[2], values.mean(axis=(2, 3)).ravel(), rtol=0, atol=1e-14)


def test_configuration_reproduces_the_reading(tmp_path, capsys):
    """The options that the curves record come out of analysis.toml and read the file again, by the command line too."""
    path = written(tmp_path / "run.h5", {f"{g}/r": VALUES[p] for g, p in BY_POINT.items()})
    curves = read(path, axes="realisation,state", average="median")
    settings_ = dl.Settings().with_reading(curves)
    assert settings_.input.pattern == "L{size}/W{disorder}"
    toml = tmp_path / "analysis.toml"
    toml.write_text(to_toml(settings_))
    assert dl.Settings.resolve(toml) == settings_
    again = read(path, input=dl.Settings.resolve(toml).input)
    assert np.array_equal(again.flat(), curves.flat())
    assert main(["inspect", str(path), "--config", str(toml)]) == 0
    assert "Layout       hdf5-tree" in capsys.readouterr().out
