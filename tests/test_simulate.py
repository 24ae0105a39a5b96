"""Truths without crossings: their defining relations, and that the crossing search finds none."""

from __future__ import annotations

import numpy as np
import pytest

from driftline.errors import InputError
from driftline.simulate import DepartureTruth, SizeRatioTruth, Truth, true_crossing

GRID = np.linspace(1.0, 8.0, 29)


def test_size_ratio_depends_on_disorder_over_size() -> None:
    """y(2 W, 2 L) = y(W, L); the two arguments of F differ by rounding only, some 1e-16 of the values."""
    truth = SizeRatioTruth()
    np.testing.assert_allclose(truth.value(20.0, 2 * GRID), truth.value(10.0, GRID), rtol=1e-14)


def test_departure_is_one_curve_shifted() -> None:
    """y(W + rate (L2 - L1), L2) = y(W, L1), to rounding."""
    truth = DepartureTruth(rate=0.25)
    np.testing.assert_allclose(truth.value(12.0, GRID + 1.0), truth.value(8.0, GRID), rtol=1e-14)


@pytest.mark.parametrize("truth", [SizeRatioTruth(), DepartureTruth()])
def test_no_two_curves_cross(truth: Truth) -> None:
    """The larger size lies above wherever rounding leaves a difference, so the search for a crossing finds none."""
    rise = truth.value(12.0, GRID) - truth.value(8.0, GRID)
    assert np.all(rise >= 0)
    assert np.all(rise[:15] > 0)
    with pytest.raises(InputError, match=r"sizes 8 and 12 do not cross between 1 and 8"):
        true_crossing(truth, 8, 12, (1.0, 8.0))
