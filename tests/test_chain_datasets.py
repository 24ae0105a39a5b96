"""The random Ising chain, the Rosenzweig-Porter matrices and the random-field chain are what their notes say."""

from __future__ import annotations

import itertools
import json
import subprocess
import sys
from functools import cache, reduce
from math import comb
from pathlib import Path
from types import ModuleType
from typing import Any

import h5py
import numpy as np
import pytest
import scipy.stats
from scipy.special import digamma
from test_datasets import DATASETS, ORTHOGONAL, POISSON, curve_table, generator

import driftline as dl

FIELD = DATASETS / "random-field-chain"
SPIN = {"x": np.array([[0, 0.5], [0.5, 0]]), "y": np.array([[0, -0.5j], [0.5j, 0]]), "z": np.diag([0.5, -0.5])}


@cache
def field_chain() -> ModuleType:
    """The generator of the random-field chain."""
    return generator("random-field-chain")


@cache
def realisations() -> dict[int, dict[str, np.ndarray[Any, Any]]]:
    """Columns of realisations.h5 by size."""
    with h5py.File(FIELD / "realisations.h5") as file:
        return {int(name): {key: item[()] for key, item in group.items()} for name, group in file["sizes"].items()}


def longer_chains() -> list[int]:
    """Sizes from 10 with at least 200 realisations so far."""
    sizes = [size for size, columns in realisations().items() if size >= 10 and columns["number"].size >= 200]
    assert sizes
    return sizes


def on_site(sites: int, site: int, operator: np.ndarray[Any, Any]) -> np.ndarray[Any, Any]:
    """`operator` on one spin of a chain, with spin 0 the last factor (the lowest bit)."""
    factors = [operator if i == site else np.eye(2) for i in reversed(range(sites))]
    return reduce(np.kron, factors)


def collapse_chi2(points: np.ndarray[Any, Any], x: np.ndarray[Any, Any], degree: int) -> float:
    """Chi-squared of one polynomial in x through the points (rows size, disorder, mean, error, ...)."""
    powers = np.polynomial.chebyshev.chebvander(x / np.abs(x).max(), degree) / points[:, 3:4]
    target = points[:, 2] / points[:, 3]
    solution = np.linalg.lstsq(powers, target, rcond=None)[0]
    return float(np.sum((powers @ solution - target) ** 2))


# Random transverse-field Ising chain


def test_surface_magnetisation_is_that_of_the_spin_chain() -> None:
    """The product formula gives the ground-state value of s^x_1, from the spins themselves (Igloi, Rieger 1998)."""
    rng = np.random.default_rng(5)
    fields, couplings = rng.uniform(0.3, 1, (2, 5))
    pauli = {name: [on_site(5, site, 2 * SPIN[name]) for site in range(5)] for name in "xz"}
    energy = -sum(h * z for h, z in zip(fields, pauli["z"], strict=True))
    energy = energy - sum(couplings[i] * pauli["x"][i] @ pauli["x"][i + 1] for i in range(4))
    energy = energy - couplings[4] * pauli["x"][4]  # spin 6 is fixed
    ground = np.linalg.eigh(energy)[1][:, 0]
    value = ground @ pauli["x"][0] @ ground
    surface = generator("random-ising-chain").log_surface
    # an eigenvector is known to eps ||H|| / gap < 2e-16 x 10 / 0.01
    assert np.exp(surface(np.log(fields / couplings)) / 2) == pytest.approx(value, abs=1e-12)
    assert abs(np.exp(surface(np.log(fields / couplings)[::-1]) / 2) - value) > 1e-3  # control: the other end


def test_surface_magnetisation_is_the_weight_of_the_zero_mode() -> None:
    """The null vector of the (L-1) x L free-fermion matrix has weight m^2 on site 1."""
    module = generator("random-ising-chain")
    ratios = module.log_ratios(40, -0.5, np.random.default_rng(6))
    matrix = np.zeros((39, 40))
    matrix[range(39), range(39)], matrix[range(39), range(1, 40)] = np.exp(ratios), 1.0
    vector = np.linalg.svd(matrix)[2][-1]
    # a null vector is known to eps ||M|| / (smallest other singular value), here 2e-16 x 30 / 0.01 = 6e-13
    assert np.exp(module.log_surface(ratios)) == pytest.approx(vector[0] ** 2, abs=2e-12)
    assert vector[0] ** 2 > 1e-3  # the bound says something
    assert abs(vector[0] ** 2 - vector[-1] ** 2) > 1e-6  # control: the other end


def test_ising_share_is_one_half_at_zero_by_duality() -> None:
    """A sample and its dual share 1 exactly, and the stored means at delta and -delta add up to 1."""
    module = generator("random-ising-chain")
    ratios = module.log_ratios(128, 0.1, np.random.default_rng(7))
    assert module.order_share(ratios) + module.order_share(-ratios) == pytest.approx(1.0, abs=4e-16)  # two roundings
    table = {(size, delta): (mean, error) for size, delta, mean, error, _ in curve_table("random-ising-chain")}
    for size, delta in itertools.product((16, 32, 64, 128, 256), (0.01, 0.03)):
        (left, left_error), (right, right_error) = table[size, -delta], table[size, delta]
        deviation = (left + right - 1) / np.hypot(left_error, right_error)
        assert abs(deviation) < 4  # chance of a false alarm 6e-4 for the ten together, but the seed is fixed
        assert (left - right) / np.hypot(left_error, right_error) > 5  # control: the two are not the same


def test_ising_curves_collapse_with_exponent_two() -> None:
    """Against delta sqrt(L), as delta_c = 0 and nu = 2 demand (D. S. Fisher 1995), all sizes from 32 lie together."""
    table = curve_table("random-ising-chain")
    table = table[(table[:, 0] >= 32) & (np.abs(table[:, 1]) * np.sqrt(table[:, 0]) < 3)]
    size, delta = table[:, 0], table[:, 1]

    def chi2(critical: float, nu: float) -> float:
        return collapse_chi2(table, (delta - critical) * size ** (1 / nu), 7)

    limit = scipy.stats.chi2.isf(0.001, size.size - 8)
    assert chi2(0.0, 2.0) < limit
    assert chi2(0.0, 1.75) > limit  # control: another exponent
    assert chi2(0.01, 2.0) > limit  # control: another critical point


# Rosenzweig-Porter matrices


def test_matrix_entries_have_the_stated_variances() -> None:
    """Diagonal entries have variance 1, the others (0.4)^2 N^-gamma; the upper triangle is left to symmetry."""
    module = generator("rosenzweig-porter")
    matrix = module.matrix(400, 1.5, np.random.default_rng(8))
    assert not np.triu(matrix, 1).any()
    off = matrix[np.tril_indices(400, -1)]
    # a sample variance of n normal values has the relative error sqrt(2 / n)
    assert np.var(np.diag(matrix)) == pytest.approx(1.0, abs=4 * np.sqrt(2 / 400))
    assert np.var(off) * 400**1.5 / 0.4**2 == pytest.approx(1.0, abs=4 * np.sqrt(2 / off.size))


def test_matrix_ensemble_has_both_limits() -> None:
    """At gamma = 0 the levels are those of orthogonal matrices, at gamma = 6 independent (Atas et al. 2013)."""
    sample, rng = generator("rosenzweig-porter").sample, np.random.default_rng(9)
    for gamma, value, other in ((0.0, ORTHOGONAL, POISSON), (6.0, POISSON, ORTHOGONAL)):
        values = [sample(128, gamma, rng) for _ in range(200)]
        error = np.std(values, ddof=1) / np.sqrt(200)
        assert abs(np.mean(values) - value) < 4 * error  # chance of a false alarm 6e-5, but the seed is fixed
        assert abs(np.mean(values) - other) > 20 * error  # control


def test_matrix_curves_collapse_at_two() -> None:
    """Against (gamma - 2) ln N, as Pino, Tabanera and Serna (2019) have it, all points lie on one curve."""
    table = curve_table("rosenzweig-porter")
    size, gamma = table[:, 0], table[:, 1]

    def chi2(critical: float, nu: float) -> float:
        return collapse_chi2(table, (gamma - critical) * size ** (1 / nu), 6)

    limit = scipy.stats.chi2.isf(0.001, size.size - 7)
    assert chi2(2.0, 1.0) < limit
    assert chi2(1.9, 1.0) > limit  # control: another critical point
    assert chi2(2.0, 2.0) > limit  # control: another exponent


# Random-field Heisenberg chain


def test_chain_is_the_heisenberg_hamiltonian() -> None:
    """The sparse matrix equals the block of zero magnetisation of the one built from spin matrices."""
    fields = np.random.default_rng(10).uniform(-2, 2, 6)
    full = sum(h * on_site(6, i, SPIN["z"]) for i, h in enumerate(-fields))  # bit 1 is spin up, SPIN has up first
    for i in range(6):
        for name in "xyz":
            full = full + on_site(6, i, SPIN[name]) @ on_site(6, (i + 1) % 6, SPIN[name])
    states, _ = field_chain().basis(6)
    assert states.size == comb(6, 3)
    block = full[np.ix_(states, states)]
    matrix = field_chain().hamiltonian(6, fields).toarray()
    assert np.allclose(matrix, block, rtol=0, atol=1e-14)  # sums of a dozen numbers of order 1
    rest = np.setdiff1d(np.arange(64), states)
    assert np.abs(full[np.ix_(states, rest)]).max() == 0.0


def test_entropies_are_those_of_the_whole_state() -> None:
    """Block by block, as from the Schmidt values of the state on all 2^L configurations; a product state has none."""
    module = field_chain()
    states, _ = module.basis(8)
    vectors = np.linalg.qr(np.random.default_rng(11).standard_normal((states.size, 3)))[0]
    for vector, entropy in zip(vectors.T, module.entropies(8, vectors), strict=True):
        whole = np.zeros(256)
        whole[states] = vector
        weights = np.linalg.svd(whole.reshape(16, 16), compute_uv=False) ** 2
        weights = weights[weights > 1e-20]
        assert entropy == pytest.approx(-np.sum(weights * np.log(weights)), abs=1e-13)  # 16 terms below 0.4
    assert module.entropies(8, np.eye(states.size)[:, :2]) == pytest.approx(0.0, abs=1e-15)


def test_shift_and_invert_finds_the_same_states() -> None:
    """The sparse solver gives levels and entropies of full diagonalisation, and the states closest to the middle."""
    module = field_chain()
    matrix = module.hamiltonian(10, 2 * np.random.default_rng(12).uniform(-1, 1, 10))
    levels, states = module.middle_states(matrix, 30, sparse=True)
    whole = np.linalg.eigvalsh(matrix.toarray())
    distance = np.sort(np.abs(whole - (whole[0] + whole[-1]) / 2))
    dense_levels, dense_states = module.middle_states(matrix, 30, sparse=False)
    # rounding n eps ||H|| = 252 x 2e-16 x 15 = 1e-12 of levels; of a state that over the smallest gap, here 1e-3
    assert np.allclose(levels, dense_levels, rtol=0, atol=1e-12)
    assert np.abs(levels - (whole[0] + whole[-1]) / 2).max() == pytest.approx(distance[29], abs=1e-12)
    assert np.diff(levels).min() > 1e-4
    assert np.allclose(module.entropies(10, states), module.entropies(10, dense_states), rtol=0, atol=1e-8)


def test_random_states_have_the_reference_entropy() -> None:
    """RANDOM_STATE holds the mean entropy of real random states; that of complex ones (Page 1993) is larger."""
    module, rng = field_chain(), np.random.default_rng(13)
    for size in (8, 10, 12):
        vectors = rng.standard_normal((comb(size, size // 2), 1000))
        values = module.entropies(size, vectors / np.linalg.norm(vectors, axis=0))
        error = np.hypot(np.std(values) / np.sqrt(1000), 0.0002)
        assert abs(np.mean(values) - module.RANDOM_STATE[size]) < 4 * error
        # control: Page's formula block by block with the entropy of the blocks' weights, for complex states
        blocks = np.array([comb(size // 2, k) for k in range(size // 2 + 1)])
        terms = digamma(blocks @ blocks + 1) - digamma(blocks + 1) - (blocks - 1) / (2 * blocks)
        page = blocks**2 @ terms / (blocks @ blocks)
        assert page - np.mean(values) > 6 * error


def test_generator_reproduces_a_stored_realisation() -> None:
    """Recomputing a realisation gives its stored numbers, with the same fields at every disorder."""
    program = (
        "import json, generate as g; size, number, r, s = g.realisation(8, 7); "
        "print(json.dumps([r.mean(axis=1).tolist(), s.mean(axis=1).tolist(), r.tolist(), s.tolist()]))"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=FIELD, check=True, capture_output=True, text=True, timeout=120
    )
    ratio, entropy, state_ratio, state_entropy = json.loads(done.stdout)
    stored = realisations()[8]
    assert stored["number"][7] == 7
    # rounding n eps ||H|| = 70 x 2e-16 x 20 = 3e-13, over gaps near 1e-2
    assert stored["gap_ratio"][7] == pytest.approx(ratio, abs=1e-10)
    assert stored["entanglement"][7] == pytest.approx(entropy, abs=1e-10)
    assert np.allclose(stored["state_gap_ratio"][7], state_ratio, rtol=0, atol=1e-7)  # single precision
    assert np.allclose(stored["state_entanglement"][7], state_entropy, rtol=0, atol=3e-7)
    assert np.abs(stored["gap_ratio"][6] - ratio).max() > 1e-3  # control: another realisation


def test_interrupted_realisations_end_in_the_same_file(tmp_path: Path) -> None:
    """A run that goes on from two realisations holds what an unbroken one does, value for value."""
    program = (
        "import sys, generate as g; from pathlib import Path; a, b = Path(sys.argv[1]), Path(sys.argv[2]);"
        "g.PLAN = {8: 5}; g.KEPT = 3; g.STAGES = ((8, 5),); g.compute(a, 1);"
        "found = g.load(a); found[8] = {n: found[8][n] for n in (1, 4)}; g.save(b, found); g.compute(b, 2)"
    )
    paths = [str(tmp_path / name) for name in ("a.h5", "b.h5")]
    subprocess.run([sys.executable, "-c", program, *paths], cwd=FIELD, check=True, capture_output=True, timeout=120)
    with h5py.File(paths[0]) as first, h5py.File(paths[1]) as second:
        one, two = first["sizes/8"], second["sizes/8"]
        assert sorted(one) == sorted(two)
        assert len(one["number"]) == 5
        assert len(one["state_gap_ratio"]) == 3
        for name in one:
            assert np.array_equal(one[name][()], two[name][()])


@pytest.mark.parametrize("observable", ["gap-ratio", "entanglement"])
def test_field_curves_follow_from_the_realisations(observable: str) -> None:
    """Means, errors and covariances are those of the first stored realisations, and driftline reads them."""
    curves = dl.read(FIELD / f"{observable}.h5")
    assert curves.sizes[:2].tolist() == [8.0, 10.0]
    assert (curves.labels.dimension, curves.labels.disorder_kind) == (1.0, "quenched")
    for curve in curves.curves:
        size = int(curve.size)
        assert curve.samples is not None
        assert curve.covariance is not None
        count = int(curve.samples[0])
        assert count >= 4 * len(field_chain().DISORDERS)
        # A running generator may have appended realisations since the curves were written
        values = realisations()[size][observable.replace("-", "_")][:count]
        values = values / (field_chain().RANDOM_STATE[size] if observable == "entanglement" else 1)
        spread = values - values.mean(axis=0)
        expected = spread.T @ spread / (count - 1) / count
        scale = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
        assert np.allclose(curve.mean, values.mean(axis=0), rtol=1e-12, atol=0)  # sums of up to 2000 terms
        assert np.allclose(curve.covariance / scale, expected / scale, rtol=0, atol=1e-11)
        assert np.array_equal(curve.error, np.sqrt(np.diag(curve.covariance)))
        spectrum = np.linalg.eigvalsh(curve.covariance / np.outer(curve.error, curve.error))
        assert spectrum[0] > 1e-3  # positive definite by far more than rounding


@pytest.mark.parametrize("observable", ["gap-ratio", "entanglement"])
def test_field_curves_in_csv_are_the_same(observable: str) -> None:
    """The CSV holds the means and errors of the HDF5 file to eight decimals."""
    stored, table = dl.read(FIELD / f"{observable}.h5"), dl.read(FIELD / f"{observable}.csv")
    assert table.labels == stored.labels
    assert np.allclose(np.array(table.flat()), np.array(stored.flat()), rtol=0, atol=0.51e-8)


def test_raw_values_fit_into_the_repository() -> None:
    """The HDF5 file of the raw values is below 5 MB and holds only realisations that are planned."""
    assert (FIELD / "realisations.h5").stat().st_size < 5_000_000
    for size, columns in realisations().items():
        assert columns["number"].size <= field_chain().PLAN[size]
        assert np.all(np.diff(columns["number"]) > 0)
        kept = np.count_nonzero(columns["number"] < field_chain().KEPT)
        assert columns["state_entanglement"].shape == (kept, 13, field_chain().STATES[size])
        assert np.allclose(columns["state_gap_ratio"].mean(axis=2), columns["gap_ratio"][:kept], rtol=0, atol=1e-6)


def test_gap_ratios_of_the_chain_reach_both_limits() -> None:
    """The ratio of the larger chains is orthogonal at W = 1, and nearly that of independent levels at W = 8."""
    curves = [curve for curve in dl.read(FIELD / "gap-ratio.h5").curves if curve.size >= 10]
    assert curves
    for curve in curves:
        assert abs(curve.mean[0] - ORTHOGONAL) < 4 * curve.error[0]
        # 0.008: level repulsion left at W = 8 by chains this short; at L = 8 it is twice that
        assert POISSON - 4 * curve.error[-1] < curve.mean[-1] < POISSON + 0.008 + 4 * curve.error[-1]
        assert curve.mean[0] - curve.mean[-1] > 20 * curve.error[0]  # control: the limits are told apart


def test_states_of_one_realisation_are_not_independent() -> None:
    """Counting states as samples understates errors: 1.2 to 1.4 times for ratios, about 5 for entropies (practice)."""
    for size in longer_chains():
        columns = realisations()[size]
        factors = {}
        for name in ("gap_ratio", "entanglement"):
            states = columns[f"state_{name}"].astype(float)
            true = states.mean(axis=2).std(axis=0, ddof=1)
            naive = states.std(axis=(0, 2), ddof=1) / np.sqrt(states.shape[2])
            factors[name] = float(np.median(true / naive))
        # 13 disorders, each factor known to 1 / sqrt(2 x 200) = 5 per cent
        assert 1.1 < factors["gap_ratio"] < 1.5
        assert 3.5 < factors["entanglement"] < 6.5


def test_rescaled_fields_correlate_the_points() -> None:
    """Means at W = 3 and 3.5 correlate by about 0.95 (entanglement) and 0.2 (gap ratio), as practice has it."""
    module = field_chain()
    pair = [module.DISORDERS.index(w) for w in (3.0, 3.5)]
    for size in longer_chains():
        columns = realisations()[size]
        entropy, ratio = (np.corrcoef(columns[k][:, pair].T)[0, 1] for k in ("entanglement", "gap_ratio"))
        # a correlation rho of n pairs is known to (1 - rho^2) / sqrt(n): 0.006 and 0.05 at n = 300
        assert 0.9 < entropy < 0.98
        assert 0.0 < ratio < 0.4
