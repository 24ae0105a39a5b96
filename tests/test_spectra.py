"""The gap ratio: by hand for short lists, against random-matrix theory for long ones, and what cannot be computed."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from driftline.errors import ConfigurationError, InputError
from driftline.observables import POISSON, RANDOM_MATRICES
from driftline.spectra import Window, mean_gap_ratio

ALL = Window(fraction=1)


def _ensemble(kind: str, n: int, count: int, seed: int) -> np.ndarray:
    """Eigenvalues of `count` Gaussian matrices of the orthogonal or unitary class, shape (count, n)."""
    rng = np.random.default_rng(seed)
    matrix = rng.normal(size=(count, n, n))
    if kind == "unitary":
        matrix = matrix + 1j * rng.normal(size=(count, n, n))
    return np.linalg.eigvalsh(matrix + matrix.conj().swapaxes(1, 2))


def _mean_and_error(spectra: np.ndarray, window: Window) -> tuple[float, float]:
    ratios = np.array([mean_gap_ratio(levels, window).mean for levels in spectra])
    return float(ratios.mean()), float(ratios.std(ddof=1) / math.sqrt(ratios.size))


@pytest.mark.parametrize(
    ("levels", "expected"),
    [
        ([0.0, 1.0, 3.0], 1 / 2),  # gaps 1, 2
        ([3.0, 0.0, 1.0], 1 / 2),  # the same, unsorted
        ([0.0, 1.0, 3.0, 4.0], 1 / 2),  # gaps 1, 2, 1
        ([-5.0, -1.0, 0.0, 2.0, 8.0], (1 / 4 + 1 / 2 + 1 / 3) / 3),  # gaps 4, 1, 2, 6
        ([0.0, 1.0, 2.0, 3.0], 1.0),
        ([1e-9, 2e-9, 5e-9], 1 / 3),
    ],
)
def test_short_lists_by_hand(levels: list[float], expected: float) -> None:
    """The mean ratio of a few levels is what one gets on paper."""
    assert mean_gap_ratio(levels, ALL).mean == pytest.approx(expected, rel=1e-14)  # a few roundings


LEVELS = np.array([0.0, 1.0, 3.0, 4.0, 9.0, 10.0, 12.0])


@pytest.mark.parametrize(
    ("window", "expected"),
    [
        (Window(fraction=3 / 7), [3.0, 4.0, 9.0]),  # around the middle level
        (Window(states=4), [1.0, 3.0, 4.0, 9.0]),  # half a level to the lower side
        (Window(states=3, at=0.0), [0.0, 1.0, 3.0]),
        (Window(states=3, at=1.0), [9.0, 10.0, 12.0]),
        (Window(states=5, at=0.9), [3.0, 4.0, 9.0, 10.0, 12.0]),  # moved inwards where it would stick out
        (Window(states=3, centre="middle"), [3.0, 4.0, 9.0]),  # next to 6, at distances 3, 2, 3
        (Window(states=3, centre="energy", at=9.6), [9.0, 10.0, 12.0]),
        (Window(states=3, centre="energy", at=3.5), [1.0, 3.0, 4.0]),  # 1.0 (2.5 away) before 9.0 (5.5 away)
        (Window(states=3, centre="energy", at=0.0), [0.0, 1.0, 3.0]),
        (Window(states=4, centre="energy", at=6.5), [3.0, 4.0, 9.0, 10.0]),
        (ALL, LEVELS.tolist()),
    ],
)
def test_windows_by_hand(window: Window, expected: list[float]) -> None:
    """The levels inside each kind of window are those that one would count out."""
    assert window.cut(LEVELS).tolist() == expected


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.integers(-1000, 1000), min_size=4, max_size=30, unique=True),
    st.floats(0, 1),
    st.integers(3, 30),
    st.sampled_from(["energy", "middle"]),
)
def test_the_nearest_levels(levels: list[int], where: float, states: int, centre: str) -> None:
    """No level outside a window around an energy is nearer to it than one inside."""
    ordered = np.sort(np.array(levels, dtype=np.float64))
    energy = ordered[0] + where * (ordered[-1] - ordered[0])
    if centre == "middle":
        energy = (ordered[0] + ordered[-1]) / 2
    states = min(states, ordered.size)
    window = Window(states=states, centre=centre, at=energy if centre == "energy" else None)  # type: ignore[arg-type]
    inside = window.cut(ordered)
    outside = np.setdiff1d(ordered, inside)
    assert inside.size == states
    if outside.size:
        # whole numbers: distances are exact but for the energy itself
        assert np.abs(outside - energy).min() >= np.abs(inside - energy).max() - 1e-9


@settings(max_examples=40, deadline=None)
@given(st.lists(st.integers(0, 10**6), min_size=5, max_size=40, unique=True), st.floats(0.01, 100), st.floats(-50, 50))
def test_units_and_origin_drop_out(levels: list[int], factor: float, shift: float) -> None:
    """Scaled, shifted or mirrored levels have the same mean ratio."""
    energies = np.array(levels) / 7.0
    expected = mean_gap_ratio(energies, ALL).mean
    # gaps are at least 1/7 of levels up to 2e5 with rounding 3e-11, so ratios hold to some 1e-9
    assert mean_gap_ratio(energies * factor + shift, ALL).mean == pytest.approx(expected, abs=1e-8)
    assert mean_gap_ratio(-energies, ALL).mean == pytest.approx(expected, abs=1e-8)


def test_independent_levels() -> None:
    """Independent levels have 2 ln 2 - 1 (exact; Atas et al., PRL 110, 084101 (2013)), with a third of them as well."""
    spectra = np.random.default_rng(5).exponential(size=(400, 300)).cumsum(axis=1)
    for window in (ALL, Window()):
        mean, error = _mean_and_error(spectra, window)
        assert abs(mean - POISSON) < 4 * error  # false alarm 6e-5
        assert error < 0.004
    assert abs(mean - RANDOM_MATRICES["orthogonal"]) > 10 * error  # the negative control


@pytest.mark.parametrize(
    ("kind", "surmise"), [("orthogonal", 4 - 2 * math.sqrt(3)), ("unitary", 2 * math.sqrt(3) / math.pi - 1 / 2)]
)
def test_three_by_three_matrices(kind: str, surmise: float) -> None:
    """Matrices of three rows have the mean of the surmise exactly (Atas et al. 2013, table I, unitary from memory)."""
    mean, error = _mean_and_error(_ensemble(kind, 3, 3000, 6), ALL)
    assert abs(mean - surmise) < 4 * error  # false alarm 6e-5
    assert error < 0.006
    assert abs(mean - RANDOM_MATRICES["symplectic"]) > 10 * error  # the negative control


@pytest.mark.parametrize("kind", ["orthogonal", "unitary"])
def test_large_matrices(kind: str) -> None:
    """The middle third of large matrices has the values of Atas et al. 2013 (numbers from memory)."""
    mean, error = _mean_and_error(_ensemble(kind, 80, 120, 7), Window())
    assert abs(mean - RANDOM_MATRICES[kind]) < 4 * error + 1e-4  # false alarm 6e-5; the last digit of the value
    assert error < 0.007


def test_pairs_of_levels() -> None:
    """Kramers pairs are refused, count once when merged, and give the mean of single levels then."""
    single = np.sort(np.random.default_rng(8).normal(size=60))
    # as an eigensolver returns them: split by rounding, some 1e-15 of the largest energy
    pairs = np.concatenate([single, single + np.random.default_rng(9).normal(size=60) * 1e-15])
    with pytest.raises(
        InputError, match=r"^20 of 39 gaps in the window are zero, the first at energy -?0\.\d+: a symmet"
    ):
        mean_gap_ratio(pairs, Window(states=40))
    merged = mean_gap_ratio(pairs, Window(states=20), degenerate="merge")
    assert merged.mean == pytest.approx(mean_gap_ratio(single, Window(states=20)).mean, abs=1e-12)
    assert (merged.levels, merged.used, merged.coinciding) == (60, 20, 60)
    assert mean_gap_ratio(pairs, Window(states=40), degenerate="keep").mean == 0.0


def test_kept_gaps_of_zero() -> None:
    """A kept pair gives two ratios of exactly 0, and three coinciding levels are refused instead of giving NaN."""
    assert mean_gap_ratio([0.0, 1.0, 1.0, 3.0, 7.0], ALL, degenerate="keep").mean == pytest.approx((0 + 0 + 1 / 2) / 3)
    with pytest.raises(InputError, match=r"^three levels coincide at 1, and their gap ratio 0/0 has no value; resolve"):
        mean_gap_ratio([0.0, 1.0, 1.0, 1.0, 7.0], ALL, degenerate="keep")
    assert mean_gap_ratio([0.0, 1.0, 1.0, 1.0, 7.0], ALL, degenerate="merge").mean == pytest.approx(1 / 6)


def test_coinciding_levels_outside_the_window() -> None:
    """Levels that coincide elsewhere in the spectrum are counted but do not stop the window's ratios."""
    found = mean_gap_ratio([0.0, 0.0, 1.0, 2.0, 4.0, 5.0], Window(states=3, at=1.0))
    assert (found.mean, found.coinciding) == (0.5, 1)


@pytest.mark.parametrize(
    ("levels", "window", "fault"),
    [
        ([], ALL, "there are 0 levels, but a gap ratio needs 3"),
        ([1.0], ALL, "there is 1 level, but a gap ratio needs 3"),
        ([1.0, 2.0], ALL, "there are 2 levels, but a gap ratio needs 3"),
        ([1.0, 2.0, np.nan, 4.0], ALL, "a level is nan; correct it, or leave out the realisation"),
        ([1.0, 2.0, np.inf], ALL, "a level is inf; correct it, or leave out the realisation"),
        ([1.0, 2.0, 4.0, 8.0], Window(), "the window holds 1 of 4 levels, but a gap ratio needs 3; use a larger "
         "fraction"),
        ([1.0, 2.0, 4.0], Window(states=4), "4 states are asked for, but there are 3 levels; ask for fewer"),
        (
            [1.0, 2.0, 4.0],
            Window(fraction=1, centre="energy", at=5),
            "the energy 5 lies outside the spectrum, which runs from 1 to 4; choose an energy inside, or centre the "
            "window by a quantile",
        ),
        ([0.0, 0.0, 0.0], ALL, "2 of 2 gaps in the window are zero, the first at energy 0: a symmetry is not resolved, "
         "or the levels have too few digits; resolve it or write more digits, or say --degenerate merge (count "
         "coinciding levels once) or --degenerate keep (their gap is 0)"),
    ],
)  # fmt: skip
def test_what_cannot_be_computed(levels: list[float], window: Window, fault: str) -> None:
    """Too few levels, no numbers, and windows that do not fit are one sentence each, never NaN."""
    with pytest.raises(InputError) as caught:
        mean_gap_ratio(levels, window)
    assert str(caught.value) == fault


@pytest.mark.parametrize(
    ("given", "fault"),
    [
        ((0.5, 10, "middle"), "window: give a fraction of the levels or a number of states, not both"),
        ((0.0, None, "middle"), "fraction must lie above 0 and not above 1, not 0"),
        ((1.5, None, "middle"), "fraction must lie above 0 and not above 1, not 1.5"),
        ((None, 2, "middle"), "states must be at least 3, which make one gap ratio, not 2"),
        ((None, None, "centre"), "centre must be quantile=Q, energy=E or middle, not 'centre'"),
        ((None, None, "energy"), "centre: say which energy, as in energy=0"),
        ((None, None, "energy=x"), "centre: 'x' is not a number"),
        ((None, None, "energy=nan"), "centre: energy must be a finite number, not nan"),
        ((None, None, "middle=3"), "centre: middle takes no number"),
        ((None, None, "quantile=1.5"), "centre: a quantile lies between 0 and 1, not at 1.5"),
    ],
)
def test_windows_that_make_no_sense(given: tuple[float | None, int | None, str], fault: str) -> None:
    """Each wrong choice of a window is refused with what to write instead."""
    with pytest.raises(ConfigurationError) as caught:
        Window.of(*given)
    assert str(caught.value) == fault
