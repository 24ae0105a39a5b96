"""Known observables: their reference values, Page's value, and how a name brings them."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from driftline.cli import main
from driftline.curves import Curve, Curves
from driftline.errors import ConfigurationError, InputError
from driftline.observables import named, page_entropy
from driftline.readers import read
from driftline.settings import Settings


@pytest.mark.parametrize(
    ("m", "n"), [(1, 1), (1, 7), (2, 2), (2, 3), (3, 2), (4, 8), (16, 32)]
)  # fmt: skip
def test_page_formula_by_summing_it(m: int, n: int) -> None:
    """The value is the sum of Page, PRL 71, 1291 (1993), term by term, in either order of the dimensions."""
    low, high = min(m, n), max(m, n)
    expected = math.fsum(1 / k for k in range(high + 1, low * high + 1)) - (low - 1) / (2 * high)
    assert page_entropy(m, n) == pytest.approx(expected, abs=1e-13)  # digamma to some roundings of values up to 7


def test_page_value_of_random_states() -> None:
    """The mean entropy of sampled random states agrees, and the maximum ln m does not."""
    rng = np.random.default_rng(3)
    state = rng.normal(size=(4000, 4, 6)) + 1j * rng.normal(size=(4000, 4, 6))
    weight = np.linalg.svd(state, compute_uv=False) ** 2
    weight /= weight.sum(axis=1, keepdims=True)
    entropy = -(weight * np.log(weight)).sum(axis=1)
    error = entropy.std(ddof=1) / math.sqrt(entropy.size)
    assert abs(entropy.mean() - page_entropy(4, 6)) < 4 * error  # false alarm 6e-5
    assert abs(entropy.mean() - math.log(4)) > 20 * error


def test_large_dimensions() -> None:
    """For large dimensions the value tends to ln m - m/(2n) (Page 1993, equation 1, from memory)."""
    for sites in (30, 60, 200):
        m = 2 ** (sites // 2)
        assert page_entropy(m, m) == pytest.approx(math.log(m) - 0.5, abs=1e-4)  # corrections of order 1/m
    with pytest.raises(ConfigurationError, match="a dimension must be at least 1, not 0"):
        page_entropy(0, 3)


@pytest.mark.parametrize(
    ("name", "ergodic", "localised"),
    [
        ("gap-ratio", 0.5307, 2 * math.log(2) - 1),
        ("gap-ratio:orthogonal", 0.5307, 2 * math.log(2) - 1),
        ("gap-ratio : unitary", 0.5996, 2 * math.log(2) - 1),
        ("gap-ratio:symplectic", 0.6744, 2 * math.log(2) - 1),
        ("entanglement", 1.0, 0.0),
        ("entanglement=3", 1.0, 0.0),
        ("entanglement:ratio", 1.0, 0.0),
        ("occupation=0.25", 0.25, 1.0),
    ],
)
def test_reference_values(name: str, ergodic: float, localised: float) -> None:
    """Each known name brings both reference values (gap ratios: Atas et al. 2013, numbers from memory)."""
    found = named(name)
    assert found is not None
    assert (found.labels["ergodic_value"], found.labels["localised_value"]) == (ergodic, localised)


@pytest.mark.parametrize(
    ("name", "fault"),
    [
        ("gap-ratio:unitry", "observable: 'gap-ratio:unitry' has no choice 'unitry'; did you mean unitary?"),
        ("gap-ratio=2", "observable: gap-ratio takes no number, but has '2'"),
        ("occupation", "observable: occupation needs the filling, as in occupation=0.5"),
        ("occupation=x", "observable: occupation: the filling must be a number, not 'x'"),
        ("occupation=1.5", "observable: occupation: the filling must lie between 0 and 1, not at 1.5"),
        ("occupation:half", "observable: 'occupation:half' has no choice 'half'; write occupation without a colon"),
        (
            "entanglement=2.5",
            "observable: entanglement: the states of a site must be a whole number from 2 on, not 2.5",
        ),
    ],
)
def test_names_that_cannot_be_used(name: str, fault: str) -> None:
    """A known name with something wrong behind it is refused with what to write."""
    with pytest.raises(ConfigurationError) as caught:
        named(name)
    assert str(caught.value) == fault


def _file(folder: Path, comments: str = "", scale: float = 0.5) -> Path:
    path = folder / "curves.csv"
    rows = [f"{size},{w},{scale * size / w},0.01" for size in (8, 9, 10) for w in (2, 3, 4, 5)]
    path.write_text(comments + "size,disorder,mean,error\n" + "\n".join(rows) + "\n", encoding="utf-8")
    return path


def test_labels_of_a_file_are_completed(tmp_path: Path) -> None:
    """A file that names a known observable gets its values, but keeps its own; free text gets nothing."""
    labels = read(_file(tmp_path, "# observable: gap-ratio\n# localised_value: none\n")).labels
    assert (labels.ergodic_value, labels.localised_value) == (0.5307, None)
    labels = read(_file(tmp_path, "# observable: mean gap ratio\n")).labels
    assert (labels.ergodic_value, labels.localised_value) == (None, None)


def test_a_comment_never_changes_or_refuses_data(tmp_path: Path) -> None:
    """A comment that reads like a known name with something missing brings a note, and the numbers stay."""
    for name, note in (("occupation", "needs the filling"), ("entanglement", "say --observable entanglement")):
        curves = read(_file(tmp_path, f"# observable: {name}\n"))
        assert curves.labels.ergodic_value is None
        assert any(note in found for found in curves.origin["notes"])
        assert curves.curves[0].mean[0] == 2.0


def test_the_users_name_goes_first(tmp_path: Path) -> None:
    """The option replaces what file and TOML say of the observable, but not the values that TOML gives."""
    config = tmp_path / "c.toml"
    config.write_text('[labels]\nobservable = "gap-ratio"\nlocalised_value = 0.4\n', encoding="utf-8")
    settings = Settings.resolve(config, {"observable": "gap-ratio:unitary"})
    labels = read(_file(tmp_path, "# ergodic_value: 0.5\n"), **settings.labels).labels
    assert (labels.ergodic_value, labels.localised_value) == (0.5996, 0.4)


def test_entropies_are_divided_by_pages_value(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Means, errors and covariances are divided, size by size, with floor(L/2) sites on one side."""
    path = _file(tmp_path)
    plain, divided = read(path), read(path, observable="entanglement")
    for raw, found in zip(plain.curves, divided.curves, strict=True):
        sites = int(raw.size)
        page = page_entropy(2 ** (sites // 2), 2 ** (sites - sites // 2))
        np.testing.assert_allclose(found.mean * page, raw.mean, rtol=1e-14)
        np.testing.assert_allclose(found.error * page, raw.error, rtol=1e-14)
    assert divided.origin["notes"][-1] == "entropies were divided by Page's value of each size"
    assert main(["inspect", str(path), "--observable", "entanglement"]) == 0
    assert "divided by Page's value" in " ".join(capsys.readouterr().out.split())
    grid = np.arange(1.0, 5.0)
    correlated = Curves([Curve(size, grid, grid, np.ones(4), np.eye(4)) for size in (10.0, 12.0)])
    found = named("entanglement=3").applied(correlated).curves[0]  # type: ignore[union-attr]
    np.testing.assert_allclose(found.covariance, np.eye(4) / page_entropy(3**5, 3**5) ** 2, rtol=1e-14)


def test_entropies_that_cannot_be(tmp_path: Path) -> None:
    """Bits instead of natural units, and sizes that are no numbers of sites, are refused."""
    with pytest.raises(
        InputError, match=r"curves\.csv, size 8: an entropy of 4 exceeds 4 ln 2 = 2\.77259; give natural"
    ):
        read(_file(tmp_path, scale=1.0), observable="entanglement")
    grid = np.arange(1.0, 5.0)
    curves = Curves([Curve(size, grid, grid / 10, np.ones(4)) for size in (4.5, 12.0)])
    with pytest.raises(InputError, match=r"^size 4\.5: Page's value needs a number of sites as size"):
        named("entanglement").applied(curves)  # type: ignore[union-attr]
