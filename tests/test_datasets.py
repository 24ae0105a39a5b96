"""The stored data sets are what their generators compute, and show the physics that is known of them."""

from __future__ import annotations

import csv
import importlib.util
import json
import shutil
import subprocess
import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import h5py
import numpy as np
import pytest
import scipy.stats

from driftline.curves import Labels

DATASETS = Path(__file__).parents[1] / "datasets"
FOLDERS = (
    "anderson-cube", "anderson-square", "demo-clock-wall", "quasiperiodic-chain", "random-ising-chain",
    "rosenzweig-porter",
)  # fmt: skip
LEVEL_FOLDERS = ("anderson-cube", "anderson-square", "rosenzweig-porter")
POISSON = 2 * np.log(2) - 1  # Atas, Bogomolny, Giraud, Roux, PRL 110, 084101 (2013), exact
SURMISE = 4 - 2 * np.sqrt(3)  # the same paper: 3 x 3 orthogonal matrices, exact
ORTHOGONAL, ORTHOGONAL_ERROR = 0.5307, 0.0001  # the same paper, large matrices; number from memory


def generator(folder: str) -> ModuleType:
    """The module datasets/<folder>/generate.py, under a name of its own."""
    spec = importlib.util.spec_from_file_location(f"generate_{folder}", DATASETS / folder / "generate.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def rows(path: Path) -> list[dict[str, str]]:
    """Rows of a CSV file by column name, without the comment lines."""
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(line for line in file if not line.startswith("#")))


def stored_blocks(folder: str) -> dict[tuple[int, float], list[tuple[int, int, float, float]]]:
    """Blocks (number, realisations, mean, squares) of every (size, disorder), in the order in which they were done."""
    found: dict[tuple[int, float], list[tuple[int, int, float, float]]] = {}
    for r in rows(DATASETS / folder / "blocks.csv"):
        block = int(r["block"]), int(r["realisations"]), float(r["mean"]), float(r["squares"])
        found.setdefault((int(r["size"]), float(r["disorder"])), []).append(block)
    return found


def curve_table(folder: str) -> np.ndarray[Any, Any]:
    """Columns size, disorder, mean, error, samples of curves.csv, shape (points, 5)."""
    return np.array([[float(v) for v in r.values()] for r in rows(DATASETS / folder / "curves.csv")])


def block_size(folder: str) -> dict[float, int]:
    """The whole number by which blocks are stored, for every size of the curves."""
    study = generator(folder).STUDY
    return {float(study.reported.get(size, size)): size for size in study.plan}


@pytest.mark.parametrize("folder", FOLDERS)
def test_generator_reproduces_a_stored_block(folder: str) -> None:
    """Recomputing the first stored block of the smallest size gives its numbers, and not those of any other block."""
    stored = stored_blocks(folder)
    (size, disorder), blocks = min(stored.items())
    number, realisations, mean, squares = blocks[0]
    # In a process of its own, as somebody would run it, so that the generator's limit of one thread holds
    program = (
        f"import json, generate; print(json.dumps(generate.STUDY.block({size}, {disorder}, {number}), default=float))"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=DATASETS / folder, check=True, capture_output=True, text=True, timeout=120
    )
    again = json.loads(done.stdout)
    assert again[:4] == [size, disorder, number, realisations]
    # LAPACK keeps an eigenvalue to about n eps ||H|| < 216 x 2e-16 x 13 = 6e-13; a ratio of gaps amplifies that by
    # 4 / gap with gaps near 0.1, and an eigenvector by 1 / gap: 3e-11 before averaging. Files keep 12 digits or more.
    assert again[4] == pytest.approx(mean, abs=3e-11)
    assert again[5] == pytest.approx(squares, abs=2 * realisations * 3e-11)
    others = [other for key in stored for other in stored[key] if (key, other) != ((size, disorder), blocks[0])]
    assert all(abs(again[4] - other[2]) > 1e-9 for other in others)


@pytest.mark.parametrize("folder", FOLDERS)
def test_curves_pool_the_stored_blocks(folder: str) -> None:
    """Mean, standard error and samples of curves.csv follow from the blocks by the law of total variance."""
    blocks, whole = stored_blocks(folder), block_size(folder)
    for size, disorder, mean, error, samples in curve_table(folder):
        done = np.array(blocks[whole[size], disorder])
        # A running generator may have appended blocks since the curves were written; the curves hold the first ones
        used = done[: np.searchsorted(np.cumsum(done[:, 1]), samples) + 1]
        n, m, squares = used[:, 1], used[:, 2], used[:, 3]
        assert n.sum() == samples
        centre = np.average(m, weights=n)
        second_moment = np.sum(squares + n * m**2) / samples
        variance = (second_moment - centre**2) * samples / (samples - 1)
        # half a unit of the eighth decimal, and for the error the cancellation of eps / (2 sd sqrt(n)) < 1e-14
        assert mean == pytest.approx(centre, abs=0.51e-8)
        assert error == pytest.approx(np.sqrt(variance / samples), abs=0.51e-8)


@pytest.mark.parametrize("folder", FOLDERS)
def test_finished_runs_are_complete_and_precise(folder: str) -> None:
    """When every planned block is there, the curves hold all of them, and the errors meet what the README promises."""
    module = generator(folder)
    blocks = stored_blocks(folder)
    planned = {size: n * count for size, (n, count) in module.PLAN.items()}
    assert all(sum(b[1] for b in blocks[key]) <= planned[key[0]] for key in blocks)
    assert {key[0] for key in blocks} <= set(planned)
    finished = all(
        sum(b[1] for b in blocks.get((size, w), [])) == planned[size] for size in planned for w in module.DISORDERS
    )
    assert finished or folder == "anderson-cube"  # the only run of hours
    if not finished:
        return
    table, whole = curve_table(folder), block_size(folder)
    assert len(table) == len(planned) * len(module.DISORDERS)
    for size, _, _, error, samples in table:
        assert samples == planned[whole[size]]
        assert error <= promised_error(folder, size)


def promised_error(folder: str, size: float) -> float:
    """Largest standard error that the README of `folder` allows at `size`."""
    if folder == "anderson-cube":
        return 0.001 if size <= 10 else 0.002
    return {
        "anderson-square": 0.0014, "demo-clock-wall": 0.0045, "quasiperiodic-chain": 0.005,
        "random-ising-chain": 0.0025, "rosenzweig-porter": 0.002,
    }[folder]  # fmt: skip


@pytest.mark.parametrize("folder", FOLDERS)
def test_hdf5_and_csv_agree(folder: str) -> None:
    """curves.h5 holds the numbers of curves.csv, size by size, and its attributes are valid labels."""
    lines = (DATASETS / folder / "curves.csv").read_text(encoding="utf-8").splitlines()
    comments = [line for line in lines if line.startswith("#")]
    assert lines[len(comments)] == "size,disorder,mean,error,samples"
    table = curve_table(folder)
    with h5py.File(DATASETS / folder / "curves.h5") as file:
        assert {float(name) for name in file["curves"]} == set(table[:, 0])
        for name, group in file["curves"].items():
            part = table[table[:, 0] == float(name)]
            assert sorted(group) == ["disorder", "error", "mean", "samples"]
            assert np.array_equal(group["disorder"][:], part[:, 1])
            assert np.array_equal(group["samples"][:], part[:, 4])
            assert np.issubdtype(group["samples"].dtype, np.integer)
            # the CSV is rounded to eight decimals
            assert np.allclose(group["mean"][:], part[:, 2], rtol=0, atol=0.51e-8)
            assert np.allclose(group["error"][:], part[:, 3], rtol=0, atol=0.51e-8)
        attributes: dict[str, Any] = {
            key: value if isinstance(value, str) else float(value) for key, value in file.attrs.items()
        }
    written = dict(line.removeprefix("# ").split(": ", 1) for line in comments)
    assert {key: type(attributes[key])(value) for key, value in written.items()} == attributes
    if attributes.get("dimension") == "none":  # as the readers spell it
        attributes["dimension"] = None
    labels = Labels(**attributes)  # type: ignore[arg-type]
    expected = {
        "anderson-cube": (3.0, "quenched"), "anderson-square": (2.0, "quenched"),
        "demo-clock-wall": (2.0, "quenched"), "quasiperiodic-chain": (1.0, "quasiperiodic"),
        "random-ising-chain": (1.0, "quenched"), "rosenzweig-porter": (None, "none"),
    }  # fmt: skip
    assert (labels.dimension, labels.disorder_kind) == expected[folder]
    if folder in LEVEL_FOLDERS:
        assert labels.ergodic_value == ORTHOGONAL
        assert labels.localised_value == pytest.approx(POISSON, abs=1e-15)  # one rounding of a double near 0.4


def test_interrupted_run_ends_in_the_same_files(tmp_path: Path) -> None:
    """A run that goes on from half of its blocks writes the same curves as an unbroken one, byte for byte."""
    shutil.copy(DATASETS / "_blocks.py", tmp_path)
    folder = tmp_path / "demo-clock-wall"
    folder.mkdir()
    shutil.copy(DATASETS / "demo-clock-wall" / "generate.py", folder)

    def run(*arguments: str) -> str:
        command = [sys.executable, str(folder / "generate.py"), *arguments]
        subprocess.run(command, check=True, capture_output=True, timeout=120)
        return (folder / "curves.csv").read_text(encoding="utf-8")

    unbroken = run("--workers", "1")
    header, *lines = (folder / "blocks.csv").read_text(encoding="utf-8").splitlines(keepends=True)
    (folder / "blocks.csv").write_text(header + "".join(lines[::-2]), encoding="utf-8", newline="\n")
    assert run("--write") != unbroken
    assert run("--workers", "2") == unbroken


@pytest.mark.parametrize("folder", LEVEL_FOLDERS)
def test_gap_ratio_of_independent_levels(folder: str) -> None:
    """Levels with independent exponential spacings have the mean gap ratio 2 ln 2 - 1 (Atas et al. 2013)."""
    gap_ratio = generator(folder).mean_gap_ratio
    rng = np.random.default_rng(1)
    values = [gap_ratio(np.cumsum(rng.exponential(size=1000)), 1000) for _ in range(100)]
    error = np.std(values, ddof=1) / 10
    assert abs(np.mean(values) - POISSON) < 4 * error  # chance of a false alarm 6e-5, but the seed is fixed
    assert abs(np.mean(values) - ORTHOGONAL) > 20 * error  # control: the test can tell the two classes apart


@pytest.mark.parametrize(
    ("dimension", "count", "matrices", "value", "uncertainty"),
    [(3, 3, 6000, SURMISE, 0.0), (60, 20, 300, ORTHOGONAL, ORTHOGONAL_ERROR)],
)
def test_gap_ratio_of_random_matrices(
    dimension: int, count: int, matrices: int, value: float, uncertainty: float
) -> None:
    """Orthogonal random matrices give 4 - 2 sqrt(3) at 3 x 3 and 0.5307(1) when large (Atas et al. 2013)."""
    entries = np.random.default_rng(2).standard_normal((matrices, dimension, dimension))
    levels = np.linalg.eigvalsh(entries + np.swapaxes(entries, 1, 2))
    for folder in LEVEL_FOLDERS:
        gap_ratio = generator(folder).mean_gap_ratio
        values = [gap_ratio(row, count) for row in levels]
        error = np.hypot(np.std(values, ddof=1) / np.sqrt(matrices), uncertainty)
        assert abs(np.mean(values) - value) < 4 * error  # chance of a false alarm 6e-5, but the seed is fixed
        assert abs(np.mean(values) - POISSON) > 20 * error  # control


def test_lattices_have_the_free_spectrum() -> None:
    """Without disorder the levels are the sums of 2 cos k of a periodic lattice (Bloch); the chain carries a flux."""
    k = 2 * np.pi * np.arange(6) / 6
    band = 2 * np.cos(k)
    # 1e-12: n eps ||H|| = 216 x 2e-16 x 6 = 3e-13
    square = np.sort(np.add.outer(band, band).ravel())
    assert np.allclose(np.linalg.eigvalsh(generator("anderson-square").hopping(6)), square, rtol=0, atol=1e-12)
    cube = np.sort(np.add.outer(np.add.outer(band, band), band).ravel())
    assert np.allclose(np.linalg.eigvalsh(generator("anderson-cube").hopping(6)), cube, rtol=0, atol=1e-12)
    chain = generator("quasiperiodic-chain").hamiltonian(55, 0.0, 0.4, 1.1)
    free = np.sort(2 * np.cos(2 * np.pi * np.arange(55) / 55 + 1.1))
    assert np.allclose(np.linalg.eigvalsh(chain), free, rtol=0, atol=1e-12)


@pytest.mark.parametrize(("potential", "phi", "theta"), [(2.0, 0.1, 0.2), (2.3, 0.7, 1.9), (1.8, 3.0, 5.5)])
@pytest.mark.parametrize("size", [55, 89])
def test_chain_is_self_dual_state_by_state(size: int, potential: float, phi: float, theta: float) -> None:
    """V -> 4/V with the two phases exchanged scales the levels by V/2 and swaps the two ratios (Aubry, Andre 1980)."""
    module = generator("quasiperiodic-chain")
    levels, states = np.linalg.eigh(module.hamiltonian(size, potential, phi, theta))
    dual_levels, dual_states = np.linalg.eigh(module.hamiltonian(size, 4 / potential, theta, phi))
    # n eps ||H|| = 89 x 2e-16 x 4.3 = 8e-14
    assert np.allclose(levels, potential / 2 * dual_levels, rtol=0, atol=1e-12)
    # a state is known to eps ||H|| n / gap, and its ratio to a few times that
    tolerance = 10 * 89 * 2.2e-16 * 4.3 / np.diff(levels).min()
    sums = module.position_share(states) + module.position_share(dual_states)
    assert np.allclose(sums, 1.0, rtol=0, atol=tolerance)
    assert tolerance < 1e-3  # the bound says something
    unequal = module.position_share(np.linalg.eigh(module.hamiltonian(size, 4 / potential + 0.1, theta, phi))[1])
    assert np.abs(module.position_share(states) + unequal - 1).max() > 0.01  # control: not the dual


def test_chain_curves_pass_through_one_half_at_two() -> None:
    """At V = 2 the mean is 1/2 at every size, exactly by duality; beside it the largest size has left 1/2."""
    table = curve_table("quasiperiodic-chain")
    at_two = table[table[:, 1] == 2.0]
    assert len(at_two) == 6
    assert np.all(np.abs(at_two[:, 2] - 0.5) < 4 * at_two[:, 3])  # chance of a false alarm 4e-4 for the six together
    largest = table[table[:, 0] == 610]
    beside = largest[np.isin(largest[:, 1], (1.993, 2.007))]
    assert np.all(np.abs(beside[:, 2] - 0.5) > 10 * beside[:, 3])


def test_chain_curves_collapse_with_exponent_one() -> None:
    """Against (V - 2) N, as V_c = 2 and nu = 1 demand (Aubry, Andre 1980), all points lie on one polynomial."""
    table = curve_table("quasiperiodic-chain")
    size, potential, mean, error, _ = table[np.abs(table[:, 1] - 2) * table[:, 0] <= 6].T

    def chi2(critical: float, nu: float) -> float:
        x = (potential - critical) * size ** (1 / nu)
        powers = np.vander(x / np.abs(x).max(), 8) / error[:, None]
        solution = np.linalg.lstsq(powers, mean / error, rcond=None)[0]
        return float(np.sum((powers @ solution - mean / error) ** 2))

    # quantile of probability 0.999 with 8 coefficients fitted; the curve is smooth, so degree 7 is enough for |x| <= 6
    limit = scipy.stats.chi2.isf(0.001, size.size - 8)
    assert chi2(2.0, 1.0) < limit
    assert chi2(2.0, 1.2) > limit  # control: another exponent
    assert chi2(2.005, 1.0) > limit  # control: another critical potential


def test_clock_wall_follows_its_stated_law() -> None:
    """The invented data scatter around their law by the stated errors: chi^2 lies in its central 99.9 %."""
    law = generator("demo-clock-wall").law
    size, disorder, mean, error, _ = curve_table("demo-clock-wall").T
    assert 33.9 < np.sum(((mean - law(size, disorder)) / error) ** 2) < 109.2  # 65 degrees of freedom
    assert np.sum(((mean - law(size, disorder - 0.02)) / error) ** 2) > 109.2  # control: s_c moved by 0.02
