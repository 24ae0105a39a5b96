"""``driftline reduce``: spectra as people store them become a realisation table that `analyse` reads."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest

from driftline.cli import main
from driftline.errors import ConfigurationError, InputError
from driftline.readers import read
from driftline.reading import InputOptions
from driftline.reduction import Reduction, reduce_spectra
from driftline.spectra import Window, mean_gap_ratio

SIZES, DISORDERS, REALISATIONS = (6, 9), (1.0, 1.5, 2.0, 2.5), 5


def _spectra() -> dict[tuple[int, float, int], np.ndarray]:
    rng = np.random.default_rng(4)
    return {
        (size, disorder, label): np.sort(rng.normal(size=4 * size))
        for size in SIZES
        for disorder in DISORDERS
        for label in range(REALISATIONS)
    }


def _folder(root: Path) -> Path:
    for (size, disorder, label), levels in _spectra().items():
        folder = root / "runs" / f"L{size}" / f"W{disorder}"
        folder.mkdir(parents=True, exist_ok=True)
        np.savetxt(folder / f"eig_{label:03d}.dat", levels)
    return root / "runs"


def _hdf5(root: Path) -> Path:
    spectra = _spectra()
    with h5py.File(root / "ed.h5", "w") as file:
        for size in SIZES:
            for disorder in DISORDERS:
                rows = [spectra[size, disorder, label] for label in range(REALISATIONS)]
                file[f"L={size}/W={disorder}/levels"] = np.array(rows)
    return root / "ed.h5"


def _table(root: Path) -> Path:
    rows = [f"{k[0]},{k[1]},{k[2]},{float(level)!r}" for k, levels in _spectra().items() for level in levels]
    np.random.default_rng(1).shuffle(rows)  # as when many jobs write into one file
    (root / "levels.csv").write_text("L,W,seed,energy\n" + "\n".join(rows) + "\n", encoding="utf-8")
    return root / "levels.csv"


def _check(found: Reduction, window: Window) -> None:
    expected = {key: mean_gap_ratio(levels, window).mean for key, levels in sorted(_spectra().items())}
    keys = list(zip(found.size.tolist(), found.disorder.tolist(), found.realisation.tolist(), strict=True))
    assert keys == [(float(size), disorder, label) for size, disorder, label in expected]
    np.testing.assert_allclose(found.value, list(expected.values()), rtol=1e-12)  # text keeps 18 digits


WINDOW = Window(fraction=0.5, centre="middle")


def test_files_of_levels(tmp_path: Path) -> None:
    """A file for each realisation with a level per line, found by a pattern."""
    options = InputOptions(pattern="L{size}/W{disorder}/eig_{realisation}.dat")
    _check(reduce_spectra(_folder(tmp_path), window=WINDOW, input=options), WINDOW)


def test_matrices_in_hdf5(tmp_path: Path) -> None:
    """Matrices of realisations by levels: rows count as shared between disorders only when the user says so."""
    path, pattern = _hdf5(tmp_path), "L={size}/W={disorder}/levels"
    _check(reduce_spectra(path, window=WINDOW, input=InputOptions(pattern=pattern, paired=True)), WINDOW)
    apart = reduce_spectra(path, window=WINDOW, input=InputOptions(pattern=pattern))
    assert apart.numbered
    assert apart.realisation.tolist() == [*range(len(DISORDERS) * REALISATIONS)] * 2
    with h5py.File(path) as file:
        assert apart.value[0] == mean_gap_ratio(file["L=6/W=1.0/levels"][0], WINDOW).mean


def test_a_long_table_in_any_order(tmp_path: Path) -> None:
    """A table with a row for each level, all realisations mixed up."""
    _check(reduce_spectra(_table(tmp_path), window=WINDOW), WINDOW)


def test_text_files_with_a_row_for_each_realisation(tmp_path: Path) -> None:
    """Matrices in text files and ``.npy`` files give the same, row by row."""
    for key in ((6, 1.0), (6, 2.0)):
        rows = np.array([_spectra()[*key, label] for label in range(REALISATIONS)])
        np.savetxt(tmp_path / f"L{key[0]}_W{key[1]}.txt", rows)
        np.save(tmp_path / f"L{key[0]}_W{key[1]}.npy", rows)
    found = [
        reduce_spectra(tmp_path, input=InputOptions(pattern=f"L{{size}}_W{{disorder}}.{suffix}")).value
        for suffix in ("txt", "npy")
    ]
    assert found[0].size == 2 * REALISATIONS
    np.testing.assert_allclose(found[0], found[1], rtol=1e-12)


@pytest.mark.parametrize("name", ["r.csv", "r.h5"])
def test_the_table_is_read_again(tmp_path: Path, name: str, capsys: pytest.CaptureFixture[str]) -> None:
    """What the command writes, CSV or HDF5, reads as curves with reference values and the number of realisations."""
    out = tmp_path / name
    assert main(["reduce", str(_table(tmp_path)), "--out", str(out), "--observable", "gap-ratio:unitary"]) == 0
    printed = capsys.readouterr().out
    assert "0.3333 of the levels around quantile 0.5" in printed
    assert printed.endswith(f"Written to {out}\n")
    curves = read(out)
    reduction = reduce_spectra(tmp_path / "levels.csv")
    assert (curves.labels.ergodic_value, curves.labels.observable) == (0.5996, "gap-ratio:unitary")
    assert curves.labels.localised_value == pytest.approx(2 * np.log(2) - 1, rel=1e-15)
    for curve in curves.curves:
        assert curve.samples.tolist() == [REALISATIONS] * len(DISORDERS)
        values = reduction.value[reduction.size == curve.size].reshape(len(DISORDERS), REALISATIONS)
        np.testing.assert_allclose(curve.mean, values.mean(axis=1), rtol=1e-12)
        np.testing.assert_allclose(curve.error, values.std(axis=1, ddof=1) / np.sqrt(REALISATIONS), rtol=1e-12)


def test_an_earlier_table_is_kept(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Without --force an existing file is refused before anything is read; with it, it is replaced."""
    out = tmp_path / "r.csv"
    out.write_text("precious", encoding="utf-8")
    arguments = ["reduce", str(_table(tmp_path)), "--out", str(out), "--quiet"]
    assert main(arguments) == 1
    assert capsys.readouterr().err == (
        f"driftline: {out}: exists already; give --force to replace it or choose another name\n"
    )
    assert out.read_text(encoding="utf-8") == "precious"
    assert main([*arguments, "--force"]) == 0
    assert capsys.readouterr() == ("", "")
    assert len(out.read_text(encoding="utf-8").splitlines()) == 6 + len(_spectra())


def test_a_fault_leaves_no_table(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A bad level in the last file names the file, and nothing is written."""
    root = _folder(tmp_path)
    (root / "L9" / "W2.5" / "eig_004.dat").write_text("0.5\n0.75\nx\n", encoding="utf-8")
    out = tmp_path / "out" / "r.csv"
    out.parent.mkdir()
    arguments = ["reduce", str(root), "--pattern", "L{size}/W{disorder}/eig_{realisation}.dat", "--out", str(out)]
    assert main(arguments) == 1
    assert f"driftline: {root}/L9/W2.5/eig_004.dat, line 3, column 1: 'x' is not a number" in capsys.readouterr().err
    assert list(out.parent.iterdir()) == []


def test_a_spectrum_that_cannot_be_used_names_its_place(tmp_path: Path) -> None:
    """Coinciding levels and too few levels say in which realisation they are."""
    path = tmp_path / "levels.csv"
    path.write_text("L,W,seed,energy\n" + "".join(f"8,1,7,{e}\n" for e in (1, 2, 2, 3)), encoding="utf-8")
    place = f"{path}, size 8, disorder 1, realisation 7: "
    with pytest.raises(InputError) as caught:
        reduce_spectra(path, window=Window(fraction=1))
    assert str(caught.value).startswith(f"{place}1 of 3 gaps in the window is zero, the first at energy 2: a symmetry")
    with pytest.raises(InputError) as caught:
        reduce_spectra(path)
    assert str(caught.value).startswith(f"{place}the window holds 1 of 4 levels, but a gap ratio needs 3")


def test_a_realisation_that_stands_twice(tmp_path: Path) -> None:
    """Two files of one realisation are refused with both names."""
    for name in ("eig_3.dat", "eig_03.dat"):
        np.savetxt(tmp_path / name, np.arange(9.0) ** 2)
    options = InputOptions(pattern="eig_{realisation}.dat")
    with pytest.raises(ConfigurationError, match=r"^option --pattern: 'eig_\{realisation\}\.dat' lacks \{size\}"):
        reduce_spectra(tmp_path, input=options)
    (tmp_path / "L8_W1").mkdir()
    for name in ("eig_3.dat", "eig_03.dat"):
        (tmp_path / name).rename(tmp_path / "L8_W1" / name)
    options = InputOptions(pattern="L{size}_W{disorder}/eig_{realisation}.dat")
    with pytest.raises(InputError, match=r"realisation 3 stands in .*eig_03\.dat already; keep one$"):
        reduce_spectra(tmp_path, input=options)


@pytest.mark.parametrize(
    ("content", "pattern", "fault"),
    [
        ("1 2 3\n4 5 6\n", "L{size}_W{disorder}_{realisation}.dat", "there are 3 columns (1, 2, 3); say which holds"),
        (
            "1\n2\n4\n",
            "L{size}_W{disorder}_*.dat",
            "there is one number in a row; this must be a matrix of realisations",
        ),
        ("1\n2\n4\n", "L{size}/W{disorder}.dat", "no file fits the pattern L{size}/W{disorder}.dat"),
    ],
)
def test_files_that_do_not_suit(tmp_path: Path, content: str, pattern: str, fault: str) -> None:
    """What a file holds and what the pattern says must go together."""
    (tmp_path / "L8_W1_0.dat").write_text(content, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        reduce_spectra(tmp_path, input=InputOptions(pattern=pattern))
    assert fault in str(caught.value)


def test_hdf5_that_does_not_suit(tmp_path: Path) -> None:
    """Without a pattern, with one that fits nothing, and with arrays of another shape, the sentence says what to do."""
    path = _hdf5(tmp_path)
    with pytest.raises(ConfigurationError, match=r"say which datasets hold the levels, as in --pattern 'L\{size\}/W"):
        reduce_spectra(path)
    with pytest.raises(
        InputError, match=r"no dataset fits the pattern N\{size\}/W\{disorder\}; the datasets are L=6/W="
    ):
        reduce_spectra(path, input=InputOptions(pattern="N{size}/W{disorder}"))
    with h5py.File(path, "w") as file:
        file["L8/W1"] = np.arange(5.0)
    with pytest.raises(
        InputError, match=r"this must be a matrix of realisations by levels \(or put \{realisation\} into"
    ):
        reduce_spectra(path, input=InputOptions(pattern="L{size}/W{disorder}"))


def test_a_table_without_labels_of_realisations(tmp_path: Path) -> None:
    """Levels of different realisations must not be mixed, so a table without their labels is refused."""
    path = tmp_path / "levels.csv"
    path.write_text("L,W,E\n8,1,0.5\n8,1,0.7\n", encoding="utf-8")
    with pytest.raises(
        InputError, match=r"line 1: no column holds the realisation; the columns are L, W, E; say which wi"
    ):
        reduce_spectra(path)


def test_a_level_that_may_be_cut_short(tmp_path: Path) -> None:
    """A last level without a line end may lack digits: it is refused, and left out only when asked."""
    path = tmp_path / "levels.csv"
    path.write_text("L,W,seed,energy\n" + "".join(f"8,1,0,{e}\n" for e in (1, 2, 4)) + "8,1,0,5", encoding="utf-8")
    with pytest.raises(
        InputError, match=r"line 5: the last line has no line break, so its value may be cut short; end"
    ):
        reduce_spectra(path, window=Window(fraction=1))
    found = reduce_spectra(path, window=Window(fraction=1), input=InputOptions(skip_cut_lines=True))
    assert (found.value.tolist(), found.levels.tolist()) == ([0.5], [3])
