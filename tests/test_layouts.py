"""Text that people's scripts write: long and wide tables and folders of files, what is read and what is asked back."""

from __future__ import annotations

import gzip
import io
import os
from itertools import product
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import driftline as dl
from driftline.cli import main
from driftline.errors import ConfigurationError, InputError
from driftline.readers import read, table
from driftline.readers.pattern import Pattern, inferred
from driftline.readers.roles import known_as
from driftline.reading import InputOptions

SIZES, DISORDERS = (8, 10, 12), (0.5, 1.0, 1.5, 2.0, 2.5)
GRID = list(product(SIZES, DISORDERS))
MEAN = {(size, w): 0.46 - 0.01 * (w - 1.5) * size for size, w in GRID}
ERROR = {(size, w): 0.001 * (1 + w) + 0.0001 * size for size, w in GRID}
ROWS = [(size, w, MEAN[size, w], ERROR[size, w]) for size, w in GRID]


def fault(path: Path, **options: object) -> str:
    """What `read` says about the file, with the folder taken off."""
    with pytest.raises((InputError, ConfigurationError)) as caught:
        read(path, **options)
    return str(caught.value).replace(f"{path.parent}{os.sep}", "")


def assert_same_numbers(curves, digits=1e-12):
    """The numbers of `ROWS`, to what the file keeps of them."""
    size, disorder, mean, error = curves.flat()
    expected = np.array(ROWS).T
    assert np.array_equal([size, disorder], expected[:2])
    assert np.allclose([mean, error], expected[2:], rtol=0, atol=digits)


def assert_read_again(curves, path):
    """The options that the reader recorded read the file again with the same numbers, notes and record."""
    again = read(path, **curves.origin.get("input", {}))
    assert dict(again.origin) == dict(curves.origin)
    assert np.array_equal(again.flat(), curves.flat())


def savetxt(**options) -> str:
    """`ROWS` as numpy.savetxt writes them."""
    text = io.StringIO()
    np.savetxt(text, np.array(ROWS), **options)
    return text.getvalue()


def fortran(value: float, width: int, digits: int) -> str:
    """A number as Fortran's WRITE (Dw.d) writes it: 0.4600D+00, right-aligned."""
    mantissa, exponent = f"{value:.{digits - 1}E}".split("E")
    shifted, power = float(mantissa) / 10, int(exponent) + 1
    return f"{shifted:.{digits}f}D{power:+03d}".rjust(width)


# ---------------------------------------------------------------- long tables

FORTRAN = "".join(f"{s:4d}{fortran(w, 14, 6)}{fortran(m, 18, 10)}{fortran(e, 18, 10)}\n" for s, w, m, e in ROWS)
PRINTF = "".join(f"{s}\t{w:.2f}\t{m:.12f}\t{e:.12f}\n" for s, w, m, e in ROWS)
FRAME = pd.DataFrame(ROWS, columns=["L", "W", "r_mean", "r_sem"])
IN_ORDER = {"columns": ("size", "disorder", "mean", "error")}


@pytest.mark.parametrize(
    ("text", "options", "separator"),
    [
        (savetxt(header="L W r sem"), {}, "blanks"),
        (savetxt(header="L,W,r,sem", delimiter=","), {}, "comma"),
        (savetxt(header="L W r sem", comments=""), {}, "blanks"),
        (savetxt(delimiter=";"), IN_ORDER, "semicolon"),
        (savetxt(), {"columns": "size,disorder,mean,error"}, "blanks"),
        (savetxt(), {"columns": "size=1,disorder=2,mean=3,error=4"}, "blanks"),
        (FORTRAN, IN_ORDER, "blanks"),
        (PRINTF, IN_ORDER, "tab"),
        ("N\tDelta\tmean\tstderr\n" + PRINTF, {}, "tab"),
        ("L;h;entropy;std_err\n" + PRINTF.replace("\t", ";"), {}, "semicolon"),
        ("L, W, S, err\n" + PRINTF.replace("\t", ", "), {"columns": "error=err"}, "comma"),
        ('"L" "W" "r" "sem"\n' + PRINTF.replace("\t", "   "), {}, "blanks"),
        ("# run 7\n\n" + savetxt(header="L W r sem").replace("\n8", "\n\n# next\n8"), {}, "blanks"),
        (PRINTF.replace("\n", "\t# checked\n"), IN_ORDER, "tab"),
        (FRAME.to_csv(), {}, "comma"),
        (FRAME.to_csv(sep=";", index=False), {}, "semicolon"),
        (FRAME.to_csv(index=False, lineterminator="\r\n"), {}, "comma"),
        (FRAME.assign(model="GOE").to_csv(), {}, "comma"),
    ],
)
def test_long_table(tmp_path, text, options, separator):
    """Any separator, header, comment or exponent that scripts write gives the same numbers, and can be read again."""
    path = tmp_path / "run.dat"
    path.write_text(text)
    curves = read(path, **options)
    # savetxt keeps 18 digits, printf 12 decimals, Fortran's D18.10 ten digits of numbers below one: half a unit of the
    # tenth, 5e-11
    assert_same_numbers(curves, 6e-11 if text == FORTRAN else 1e-12)
    assert curves.origin["layout"] == "table"
    assert curves.origin["input"]["separator"] == separator
    assert_read_again(curves, path)


def test_gzip_is_read_like_the_text(tmp_path):
    """A compressed table gives the same curves, whatever its name."""
    for name in ("run.csv.gz", "run.dat"):
        (tmp_path / name).write_bytes(gzip.compress(FRAME.to_csv().encode()))
        assert_same_numbers(read(tmp_path / name))


def test_standard_deviation_is_converted_by_hand(tmp_path):
    """A standard deviation over n realisations becomes an error by 1/sqrt(n), with a column of counts or one count."""
    frame = FRAME.rename(columns={"r_sem": "r_std"}).assign(count=[25, 100, 400] * 5)
    path = tmp_path / "run.csv"
    frame.to_csv(path, index=False)
    curves = read(path, columns={"deviation": "r_std"})
    expected = [error / np.sqrt(n) for (*_, error), n in zip(ROWS, frame["count"], strict=True)]
    # rtol: two roundings of double precision
    assert np.allclose(curves.flat()[3], expected, rtol=1e-15, atol=0)
    assert [int(n) for curve in curves.curves for n in curve.samples] == frame["count"].tolist()
    assert "standard deviations were divided by the square root of the number of realisations" in curves.origin["notes"]
    frame.drop(columns="count").to_csv(path, index=False)
    each = read(path, columns={"deviation": "r_std"}, samples_each=16)
    assert np.allclose(each.flat()[3], np.array(ROWS)[:, 3] / 4, rtol=1e-15, atol=0)
    assert_read_again(each, path)


SD_OR_SE = (
    "column '{0}' may hold the standard error of the mean or the standard deviation over realisations; the columns are "
    "L, W, r, {0}; say which with --columns error={0}, or with --columns deviation={0} and the number of realisations "
    "(samples=... there, or --samples-each N)"
)


@pytest.mark.parametrize(
    ("text", "options", "sentence"),
    [
        ("L W r std\n" + savetxt(), {}, "run.dat, line 1: " + SD_OR_SE.format("std")),
        ("L W r err\n" + savetxt(), {}, "run.dat, line 1: " + SD_OR_SE.format("err")),
        (savetxt(), {}, "run.dat, line 1: the 4 columns have no names; say what they hold, in their order, for example "
         "--columns size,disorder,mean,error"),
        ("L W r S sem\n" + "8 1 1 1 1\n", {}, "run.dat, line 1: the names do not tell which column holds the means (or "
         "the raw values); the columns are L, W, r, S, sem; say it with --columns size=L,disorder=W,mean=...,error=sem "
         "(value=... for raw values)"),
        ("L n W r sem\n" + "8 1 1 1 1\n", {}, "run.dat, line 1: the names do not tell which column holds the size; the "
         "columns are L, n, W, r, sem; say it with --columns size=...,disorder=W,mean=r,error=sem"),
        ("L W r\n8 1 1\n", {}, "run.dat, line 1: the names do not tell which column holds the means (or the raw "
         "values); "
         "the columns are L, W, r; say it with --columns size=L,disorder=W,mean=...,error=... (value=... for raw "
         "values)"),
        ("L W r sem\n" + savetxt(), {"columns": "mean=rr"}, "run.dat, line 1: there is no column 'rr' for the mean; "
         "did "
         "you mean 'r'? the columns are L, W, r, sem"),
        ("L W r sem\n" + savetxt(), {"columns": "size,disorder,mean,-,error"}, "columns: 5 roles are given (size, "
         "disorder, "
         "mean, -, error), but run.dat, line 1 has 4 columns (L, W, r, sem)"),
        ("L W r sem\n" + savetxt(), {"columns": "size,mean,error"}, "run.dat, line 1: the names do not tell which "
         "column "
         "holds the disorder; the columns are size, mean, error; say it with --columns "
         "size=size,disorder=...,mean=mean,"
         "error=error"),
        ("L W r std\n" + savetxt(), {"columns": "deviation=std"}, "run.dat, line 1: a standard deviation becomes a "
         "standard "
         "error only with the number of realisations; the columns are L, W, r, std; give its column with --columns "
         "samples=... or one number for all with --samples-each N"),
        ("L;W;mean;sem\n8;1,0;0,5;0,1\n", {}, "run.dat, line 2, column 'W': '1,0' is not a number; write a decimal "
         "point"),
        ("8,1;3\n8,2;4\n", {}, "run.dat, line 1: the columns may be separated by comma or semicolon; the first "
         "row is "
         "'8,1;3'; say which with --separator comma or --separator semicolon"),
        ("L W r sem\n8 1 0.5 0.1\n8 2 0.4 0.1\n8 3 0.3", {}, "run.dat, line 4: the last line, '8 3 0.3', has no line "
         "end "
         "and is shorter than the others, as a killed job leaves it; complete it, or leave it out with "
         "--skip-cut-lines"),
        ("L W r sem\n8 1 0.5 0.1\n8 2 0.4\n", {}, "run.dat, line 3: 3 values under 4 columns (L, W, r, sem); complete "
         "or "
         "remove the row"),
        ("L W seed r\n8 1 1.5 0.1\n", {}, "run.dat, line 2, column 'seed': the label of a realisation must be a whole "
         "number, not 1.5"),
        ("L W r sem\n8 1 0.5 0.1\n8 1 0.6 0.1\n", {}, "run.dat, lines 2 and 3: size 8 at disorder 1 occurs twice; "
         "keep one "
         "row or average them (raw values are declared with --columns value=...)"),
        ("nan\n0.5\n", {}, "run.dat, line 1: there is one column, so size and disorder must stand "
         "in the paths of such files; give the folder, with --pattern 'L{size}/W{disorder}/r.dat' or whatever the "
         "paths "
         "are"),
    ],
)  # fmt: skip
def test_what_a_table_leaves_open_is_asked_back(tmp_path, text, options, sentence):
    """The columns seen and the option that settles it, in full; a standard deviation is never taken for an error."""
    path = tmp_path / "run.dat"
    path.write_text(text)
    assert fault(path, **options) == sentence


@pytest.mark.parametrize(
    ("name", "meanings"),
    [
        ("L", ("size",)), ("N", ("size", "samples")), ("system_size", ("size",)), ("W", ("disorder",)),
        ("Delta", ("disorder",)), ("r", ("observable",)), ("r_mean", ("mean",)), ("('r', 'mean')", ("mean",)),
        ("r_sem", ("error",)), ("sem", ("error",)), ("error", ("error",)), ("Error", ("spread",)), ("err", ("spread",)),
        ("std", ("spread",)), ("r_std", ("spread",)), ("sigma", ("spread",)), ("seed", ("realisation",)),
        ("count", ("samples",)), ("weight", ()), ("errL{size}", ("spread",)), ("r_{size}", ("observable",)),
    ],
)  # fmt: skip
def test_what_names_commonly_mean(name, meanings):
    """Names of columns as practice has them; nothing but sem, stderr and the like is a standard error by its name."""
    assert known_as(name) == meanings


# ---------------------------------------------------------------- raw values in tables

RAW = np.random.default_rng(5).normal(0.5, 0.1, (len(GRID), 12))


def raw_frame(seeds=range(12)) -> pd.DataFrame:
    """A row for each realisation."""
    rows = [
        (s, w, seed, x) for (s, w), values in zip(GRID, RAW, strict=True) for seed, x in zip(seeds, values, strict=True)
    ]
    return pd.DataFrame(rows, columns=["size", "disorder", "realisation", "value"])


def assert_averages(curves, values=RAW):
    """Mean and standard error over realisations, by their formulas."""
    *_, mean, error = curves.flat()
    # 1e-12: sums of a dozen numbers near 0.5 differ by the order of the terms only
    assert np.allclose(mean, values.mean(axis=1), rtol=0, atol=1e-12)
    assert np.allclose(error, values.std(axis=1, ddof=1) / np.sqrt(values.shape[1]), rtol=0, atol=1e-12)


def test_realisation_csv(tmp_path):
    """The program's own form is read, its labels pair the points, and a declaration to the contrary is heard."""
    path = tmp_path / "run.csv"
    raw_frame().to_csv(path, index=False)
    curves = read(path)
    assert_averages(curves)
    assert curves.correlated
    assert curves.origin["rows"] == RAW.size
    assert_read_again(curves, path)
    alone = read(path, paired=False)
    assert not alone.correlated
    assert_read_again(alone, path)


def test_rows_that_are_declared_as_values(tmp_path):
    """Without labels each row counts as a realisation, and the record says so."""
    path = tmp_path / "run.txt"
    path.write_text(raw_frame().drop(columns="realisation").to_csv(sep=" ", index=False, header=["L", "W", "r"]))
    curves = read(path, columns={"value": "r"})
    assert_averages(curves)
    told = "the values have no realisation labels: each counts as the one value of a realisation of its own"
    assert told in curves.origin["notes"]


def test_a_large_table_of_values_is_streamed_to_the_same_curves(tmp_path, monkeypatch):
    """The two ways through the program agree to rounding, with and without header."""
    path = tmp_path / "run.csv"
    raw_frame().to_csv(path, index=False)
    whole = read(path)
    monkeypatch.setattr(table, "STREAMED", 0)
    part = read(path)
    assert np.allclose(part.flat(), whole.flat(), rtol=1e-12, atol=0)
    assert part.origin["input"] == whole.origin["input"]
    path.write_text("# of May\n" + raw_frame().to_csv(index=False, header=False))
    assert_averages(read(path, columns="size,disorder,realisation,value"))


# ---------------------------------------------------------------- wide tables


def wide_frame(mean="L{}", error="sem_L{}") -> pd.DataFrame:
    """A row for each disorder."""
    columns = {"W": DISORDERS}
    for size in SIZES:
        columns[mean.format(size)] = [MEAN[size, w] for w in DISORDERS]
        if error:
            columns[error.format(size)] = [ERROR[size, w] for w in DISORDERS]
    return pd.DataFrame(columns)


@pytest.mark.parametrize(
    ("frame", "options"),
    [
        (wide_frame(), {}),
        (wide_frame("r(L={})", "sem(L={})"), {}),
        (wide_frame("r_L{}", "err_L{}"), {"columns": "error=err_L{size}"}),
        (wide_frame("{}", "e{}"), {"columns": "disorder=W,mean={size},error=e{size}"}),
        (wide_frame("a{}", "b{}"), {"columns": "disorder,mean,error,mean,error,mean,error", "sizes": "8,10,12"}),
    ],
)
def test_wide_table(tmp_path, frame, options):
    """Columns for each size are told by a word for size before the number, or by the options."""
    path = tmp_path / "run.tsv"
    frame.to_csv(path, sep="\t", index=False)
    curves = read(path, **options)
    assert curves.origin["layout"] == "wide"
    assert_same_numbers(curves)
    assert_read_again(curves, path)


def test_wide_table_without_errors_and_with_gaps(tmp_path):
    """An error that the user states serves all points; a cell may be empty where a size was not measured."""
    frame = FRAME.pivot(index="W", columns="L", values="r_mean")
    frame.loc[0.5, 8] = np.nan
    path = tmp_path / "run.csv"
    frame.to_csv(path)
    curves = read(path, columns="disorder=W,mean={size}", error_each=0.002)
    assert curves.curves[0].disorder.tolist() == [1.0, 1.5, 2.0, 2.5]
    assert set(curves.flat()[3]) == {0.002}
    assert curves.origin["notes"] == [
        "size 8: not measured at disorder 0.5, where the cells are empty",
        "every standard error is 0.002, as the option says",
    ]
    assert_read_again(curves, path)


@pytest.mark.parametrize(
    ("frame", "options", "sentence"),
    [
        (wide_frame("L{}", "std_L{}"), {}, ", line 1: column 'std_L{size}' may hold the standard error of the mean or "
         "the "
         "standard deviation over realisations; the columns are L{size}, std_L{size}, W; say which with --columns "
         "error=std_L{size}, or with --columns deviation=std_L{size} and the number of realisations (samples=... "
         "there, or "
         "--samples-each N)"),
        (wide_frame("{}", ""), {}, ", line 1: the columns are W, 8, 10, 12; if there is one for each size, say so with "
         "--columns disorder=W,mean={size} (and error=... or deviation=... in the same way)"),
        (wide_frame().drop(columns="sem_L10"), {}, ", line 1: size 10 has the column 'L10', but none that fits "
         "error=sem_L{size}"),
        (wide_frame().assign(sem_L10=[0.1, None, 0.1, 0.1, 0.1]), {}, ", line 3, column 'sem_L10': the cell is empty, "
         "but "
         "others of its size are not; give all or none"),
        (wide_frame(), {"columns": "disorder,mean,error,mean,error", "sizes": "8,10,12"}, "columns: there are 2 of "
         "'mean', "
         "but 3 sizes are given; give one for each size"),
    ],
)  # fmt: skip
def test_what_a_wide_table_leaves_open_is_asked_back(tmp_path, frame, options, sentence):
    """Bare numbers might be realisations, and a spread might be either; both are asked."""
    path = tmp_path / "run.csv"
    frame.to_csv(path, index=False)
    assert fault(path, **options) == ("" if sentence.startswith("columns") else "run.csv") + sentence


# ---------------------------------------------------------------- folders


def folder_of(root: Path, pattern: str, text) -> Path:
    """A file for each size and disorder (and realisation), filled by `text`."""
    for size, w in GRID:
        path = root / pattern.format(size=size, disorder=w)
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text(size, w))
    return root


def a_value_per_line(size, w) -> str:
    """The raw values as C's printf writes them."""
    return "".join(f"{x:.15f}\n" for x in RAW[GRID.index((size, w))])


@pytest.mark.parametrize(
    ("names", "options"),
    [
        ("L{size}/W{disorder}/r.dat", {}),
        ("L{size}/W{disorder:.3f}/r.dat", {"pattern": "L{size}/W{disorder}/r.dat"}),
        ("r_L{size}_h{disorder}.txt", {}),
        ("L={size}/r_L{size}_W{disorder}.out", {}),
        ("{size}/{disorder}", {"pattern": "{size}/{disorder}"}),
        ("run {size}/-W{disorder} é.dat", {"pattern": "run {size}/-W{disorder} *.dat"}),
    ],
)
def test_folder_with_a_value_per_line(tmp_path, names, options):
    """Parameters come from the paths, by a pattern or where the names leave one reading only."""
    folder_of(tmp_path, names, a_value_per_line)
    curves = read(tmp_path, **options)
    assert_averages(curves)
    assert curves.sizes.tolist() == list(SIZES)
    assert curves.origin["layout"] == "folder"
    assert_read_again(curves, tmp_path)


def test_folder_with_a_chosen_column_and_labels_in_the_paths(tmp_path):
    """One file for each realisation with a row for each eigenstate: averaged within the file first."""
    states = np.random.default_rng(6).normal(0.0, 0.3, (*RAW.shape, 4))
    for (point, (size, w)), seed in product(enumerate(GRID), range(12)):
        text = "".join(f"{i} {RAW[point, seed] + x:.15f}\n" for i, x in enumerate(states[point, seed]))
        (tmp_path / f"L{size}_W{w}_seed{seed}.dat").write_text(text)
    curves = read(tmp_path, columns="-,value")
    assert_averages(curves, RAW + states.mean(axis=2))
    assert curves.curves[0].samples.tolist() == [12] * 5
    assert_read_again(curves, tmp_path)


def test_folder_of_averaged_tables(tmp_path):
    """A file for each size with columns for disorder, mean and error."""
    for size in SIZES:
        np.savetxt(tmp_path / f"L{size}.dat", [row[1:] for row in ROWS if row[0] == size], header="W r sem")
    assert_same_numbers(read(tmp_path))
    curves = read(tmp_path, pattern="L{size}.dat", columns="disorder,mean,deviation", samples_each=4)
    assert np.allclose(curves.flat()[3], np.array(ROWS)[:, 3] / 2, rtol=1e-15, atol=0)


def test_folder_of_arrays(tmp_path):
    """numpy.save of a vector for each point, or of realisations by eigenstates once the axes are named."""
    for point, (size, w) in enumerate(GRID):
        np.save(tmp_path / f"r_L{size}_W{w}.npy", RAW[point])
        np.save(tmp_path / f"s_L{size}_W{w}.npy", np.stack([RAW[point] - 1, RAW[point] + 1]))
    assert_averages(read(tmp_path, pattern="r_L{size}_W{disorder}.npy"))
    pattern = "s_L{size}_W{disorder}.npy"
    assert_averages(read(tmp_path, pattern=pattern, axes="state,realisation"))
    assert fault(tmp_path, pattern=pattern).endswith(
        "s_L8_W0.5.npy: the array has the shape (2, 12); say which dimension is which with --axes realisation,state or "
        "--axes state,realisation"
    )


def test_ragged_files_and_a_cut_last_line(tmp_path):
    """Counts may differ; a last number that was cut is reported, and left out only when asked."""
    folder_of(tmp_path, "L{size}/W{disorder}/r.dat", a_value_per_line)
    cut = tmp_path / "L8" / "W0.5" / "r.dat"
    cut.write_text(cut.read_text()[:-5])
    rest = cut.read_text().splitlines()[-1]
    expected = (
        f"L8/W0.5/r.dat, line 12: the last line, '{rest}', has no line end and is shorter than the others, as a "
        f"killed job "
        "leaves it; complete it, or leave it out with --skip-cut-lines"
    )
    assert fault(tmp_path).split(f"{tmp_path.name}/")[1] == expected
    curves = read(tmp_path, skip_cut_lines=True)
    assert curves.curves[0].samples.tolist() == [11, 12, 12, 12, 12]
    assert f"L8/W0.5/r.dat: line 12: '{rest}' has no line end and was left out as cut short" in curves.origin["notes"]
    assert_read_again(curves, tmp_path)


def test_a_missing_line_end_that_may_hide_a_cut_is_noted(tmp_path):
    """Where the last value looks whole it is used, and the note names the file."""
    folder_of(tmp_path, "L{size}/W{disorder}/r.dat", a_value_per_line)
    last = tmp_path / "L8" / "W0.5" / "r.dat"
    last.write_text(last.read_text()[:-1])
    curves = read(tmp_path)
    assert_averages(curves)
    assert curves.origin["notes"][1] == (
        "L8/W0.5/r.dat: no line end at the end of the file, so the last value may be cut short; --skip-cut-lines "
        "leaves it "
        "out"
    )


FILES = "the files are 10/0.5, 10/1.0, 10/1.5, 10/2.0 and 11 more"


@pytest.mark.parametrize(
    ("names", "options", "sentence"),
    [
        ("{size}/{disorder}", {}, "the paths do not tell which numbers are size and disorder; say it with --pattern "
         "'{?}/{?}', where each {?} becomes {size}, {disorder}, {realisation} or *; " + FILES),
        ("{size}/{disorder}", {"pattern": "L{size}/*"}, "no file fits the pattern L{size}/*; " + FILES),
        ("{size}/{disorder}", {"pattern": "{size}/{disordr}"}, "pattern: there is no placeholder '{disordr}'; they are "
         "{size}, {disorder}, {realisation} and *"),
        ("{size}/{disorder}", {"pattern": "../{size}/{disorder}"}, "pattern: the pattern '../{size}/{disorder}' must "
         "name "
         "files inside the folder, without a leading slash, '..' or '~'; give the folder itself as the path"),
        ("readme.txt", {}, "no file in this folder has a number in its path; it holds readme.txt"),
    ],
)  # fmt: skip
def test_what_a_folder_leaves_open_is_asked_back(tmp_path, names, options, sentence):
    """The files seen and the pattern to begin with, in full."""
    folder = folder_of(tmp_path / "runs", names, a_value_per_line)
    expected = sentence if sentence.startswith("pattern:") else f"runs: {sentence}"
    assert fault(folder, **options) == expected


def test_a_second_kind_of_file_makes_the_program_ask(tmp_path):
    """Logs beside the data have the same parameters in their paths: which to read, the user must say."""
    folder_of(tmp_path, "L{size}/W{disorder}/r.dat", a_value_per_line)
    folder_of(tmp_path, "L{size}/W{disorder}/log.txt", lambda *_: "done\n")
    (tmp_path / "README").write_text("no number in this name\n")
    assert fault(tmp_path).split(": ", 1)[1] == (
        "the paths have 2 forms; choose one with --pattern 'L{size}/W{disorder}/log.txt' or --pattern "
        "'L{size}/W{disorder}/r.dat'; the files are L10/W0.5/log.txt, L10/W0.5/r.dat, L10/W1.0/log.txt, "
        "L10/W1.0/r.dat and "
        "26 more"
    )
    assert_averages(read(tmp_path, pattern="L{size}/W{disorder}/r.dat"))
    wrong = fault(tmp_path, pattern=f"{tmp_path.name}/L{{size}}/W{{disorder}}/r.dat")
    assert wrong.endswith(f"; the pattern begins below the folder, so leave out {tmp_path.name}/")


NUMBER = st.integers(1, 999).map(str) | st.decimals(0, 99, places=2).map(str)
WORD = st.text(st.sampled_from("LWhrunx_.=- é{"), max_size=6).filter(lambda text: "{" not in text)


@settings(max_examples=30, deadline=None, derandomize=True)
@given(words=st.tuples(WORD, WORD, WORD), slash=st.sampled_from(["", "/a"]), size=NUMBER, disorder=NUMBER)
def test_a_pattern_reads_what_it_was_filled_with(words, slash, size, disorder):
    """Filling a pattern and matching the result gives the numbers back, unless a word could belong to a number."""
    first, second, third = words
    pattern = Pattern.of(f"x{first}{{size}}{slash}_{second}_{{disorder}}_{third}y")
    path = pattern.filled({"size": size, "disorder": disorder})
    found = pattern.match(path)
    assert found is not None
    # a hyphen or a full stop in front of a number may be read as its sign or its point
    if not (first.endswith((".", "-")) or second.startswith(".")):
        assert found == {"size": size, "disorder": disorder}


def test_inference_takes_no_sign_for_a_joint():
    """Whether h-0.5 is minus one half nobody can tell, so it is asked; nor is one word taken for two numbers."""
    assert inferred(["L8_h-0.5", "L8_h-1.0", "L10_h-0.5"]).pattern is None
    assert inferred(["W1_W2", "W2_W3"]).pattern is None
    assert inferred(["L8/L8_W1", "L9/L9_W2"]).pattern == "L{size}/L{size}_W{disorder}"


# ---------------------------------------------------------------- there and back, options everywhere


@settings(max_examples=12, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    numbers=st.lists(st.floats(-1e3, 1e3), min_size=8, max_size=8),
    separator=st.sampled_from([",", ";", "\t", " "]),
    names=st.permutations(["L", "W", "r", "sem"]),
)
def test_tables_there_and_back_to_the_last_bit(tmp_path, numbers, separator, names):
    """Whatever the order of the columns and the separator, repr writes and the reader reads the same doubles."""
    rows = [{"L": 8 + 4 * (i // 4), "W": i % 4, "r": x, "sem": 0.1 + i} for i, x in enumerate(numbers)]
    lines = [separator.join(names), *(separator.join(repr(row[name]) for name in names) for row in rows)]
    path = tmp_path / "run.txt"
    path.write_text("\n".join(lines) + "\n")
    assert read(path).flat()[2].tobytes() == np.array(numbers).tobytes()


def test_options_on_the_command_line_and_in_toml(tmp_path, capsys):
    """The same reading by options, by the table [input], and by options over the table."""
    path = tmp_path / "run.dat"
    path.write_text(savetxt())
    assert main(["inspect", str(path)]) == 1
    assert "the 4 columns have no names" in capsys.readouterr().err
    assert main(["inspect", str(path), "--columns", "size,disorder,mean,error"]) == 0
    by_options = capsys.readouterr().out
    assert "Columns      size from column 1, disorder from column 2, mean from column 3," in by_options
    toml = tmp_path / "run.toml"
    toml.write_text('[input]\ncolumns = ["size", "disorder", "mean", "error"]\nseparator = "blanks"\n')
    assert main(["inspect", str(path), "--config", str(toml)]) == 0
    assert capsys.readouterr().out == by_options
    toml.write_text('[input]\nseparator = "comma"\ncolumns = { size = 1, disorder = 2, mean = 3, deviation = 4 }\n')
    arguments = ["--config", str(toml), "--separator", "blanks", "--samples-each", "4"]
    assert main(["inspect", str(path), *arguments]) == 0
    assert "standard deviations were divided" in capsys.readouterr().out
    raw = tmp_path / "raw.csv"
    raw_frame().to_csv(raw, index=False)
    toml.write_text('[input]\naverage = "median"\npaired = false\n')
    medians = dl.read(raw, average="median", paired=False)
    means = dl.Settings.resolve(toml, {"input": {"average": "mean", "paired": None}}).input
    assert (means.average, means.paired) == ("mean", False)
    assert dl.read(raw, input=dl.Settings.resolve(toml).input).flat()[2].tolist() == medians.flat()[2].tolist()
    assert_averages(dl.read(raw, input=means))


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        ({"columns": "size=L,W"}, "columns: 'W' lacks a column; give roles in the order of the columns "
         "(size,disorder,mean,error) or a column for each role (size=L,disorder=W,mean=r,error=sem)"),
        ({"columns": "size=L,size=N"}, "columns: 'size' is given twice; give one column for each role"),
        ({"columns": {"sise": "L"}}, "columns: there is no role 'sise'; did you mean size?"),
        ({"columns": {"size": ""}}, "columns.size: must be the name or number of a column, not ''"),
        ({"columns": 3}, "columns: must be a table such as size = \"L\" or a list of roles, not 3"),
        ({"sizes": "8,x"}, "sizes: 'x' is not a number"),
        ({"sizes": [0]}, "sizes: must be a positive number, not 0"),
        ({"axes": "realization"}, "axes: there is no axis 'realization'; did you mean realisation?"),
        ({"separator": "pipe"}, "separator: must be comma, semicolon, tab or blanks, not 'pipe'"),
        ({"samples_each": 0}, "samples_each: must be a positive whole number, not 0"),
        ({"error_each": float("nan")}, "error_each: must be a positive number, not nan"),
        ({"skip_cut_lines": 1}, "skip_cut_lines: must be true or false, not 1"),
    ],
)  # fmt: skip
def test_options_that_cannot_be_used(options, sentence):
    """Every bad value is refused with key, rule and value."""
    with pytest.raises(ConfigurationError) as caught:
        InputOptions(**options)
    assert str(caught.value) == sentence
