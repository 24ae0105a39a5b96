"""The rules of `Curve`, `Curves` and `Labels`: every refusal in full, and nothing that can be changed afterwards."""

from __future__ import annotations

import copy
import pickle
import re
from fractions import Fraction

import numpy as np
import pytest

from driftline.curves import LARGEST, Curve, Curves, Labels
from driftline.errors import ConfigurationError, DriftlineError, InputError

GRID = np.array([1.0, 2.0, 3.0, 4.0])
MEAN = np.array([0.5, 0.4, 0.3, 0.2])
ERROR = np.array([0.01, 0.02, 0.01, 0.02])


def curve(size=8.0, **changes):
    """A good curve but for the changes."""
    parts = {"disorder": GRID, "mean": MEAN, "error": ERROR, **changes}
    return Curve(size, **parts)


@pytest.fixture
def curves():
    """Three sizes on different grids, with a covariance and counts at one of them."""
    wide = np.linspace(0.5, 6.0, 12)
    return Curves(
        [
            Curve(16, wide, np.exp(-wide), np.full(12, 0.01)),
            curve(8, covariance=np.diag(ERROR**2), samples=[10, 20, 30, 40]),
            Curve(12, GRID + 0.5, MEAN, ERROR),
        ],
        Labels(observable="gap ratio", ergodic_value=0.53),
        {"path": "run.csv", "notes": ["sorted"]},
    )


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"size": 0}, "curves: a size must be positive, not 0"),
        ({"size": -8}, "curves: a size must be positive, not -8"),
        ({"size": np.nan}, "curves: a size must be a finite number up to 1e+100, not nan"),
        ({"size": "8"}, "curves: a size must be a number, not '8'"),
        ({"size": True}, "curves: a size must be a number, not True"),
        ({"size": None}, "curves: a size must be a number, not None"),
        ({"mean": [1, 2, 3]}, "size 8: disorder, mean and error must have the same length, not 4, 3 and 4"),
        ({"mean": np.ones((2, 2))}, "size 8: mean must have one dimension, not 2"),
        ({"mean": 1.0}, "size 8: mean must have one dimension, not 0"),
        ({"mean": ["1", "2", "3", "4"]}, "size 8: mean must be an array of numbers"),
        ({"mean": [1, 2, 3, "x"]}, "size 8: mean must be an array of numbers"),
        ({"mean": [1, 2, [3], 4]}, "size 8: mean must be an array of numbers"),
        ({"mean": MEAN + 0j}, "size 8: mean must be an array of numbers"),
        ({"mean": MEAN > 0}, "size 8: mean must be an array of numbers"),
        ({"mean": np.ma.masked_less(MEAN, 0.3)}, "size 8: mean must be an array of numbers"),
        ({"mean": [1, 2, None, 4]}, "size 8: mean is nan at point 3; give a finite number up to 1e+100"),
        ({"mean": [1, np.inf, 3, 4]}, "size 8: mean is inf at point 2; give a finite number up to 1e+100"),
        ({"mean": [1, 2, 3, -1e200]}, "size 8: mean is -1e+200 at point 4; give a finite number up to 1e+100"),
        ({"error": [1, 0, 1, 1]}, "size 8: the error at disorder 2 is 0; a standard error must be positive"),
        ({"error": [1, 1, 1, -2]}, "size 8: the error at disorder 4 is -2; a standard error must be positive"),
        ({"error": [1, 1e-200, 1, 1]}, "size 8: the error at disorder 2 is below 1e-100; use other units"),
        ({"disorder": [1, 2, 2, 3]}, "size 8: disorder 2 occurs twice"),
        ({"disorder": [1, 3, 2, 4]}, "size 8: the disorder values must increase"),
        ({"disorder": [], "mean": [], "error": []}, "size 8: 0 disorder values, but at least 4 are needed at every "
         "size; add points or drop this size"),
        ({"disorder": [1], "mean": [1], "error": [1]}, "size 8: 1 disorder value, but at least 4 are needed at every "
         "size; add points or drop this size"),
        ({"samples": [1, 2, 3]}, "size 8: samples must be one positive whole number for each disorder"),
        ({"samples": [1, 2, 3, 0]}, "size 8: samples must be one positive whole number for each disorder"),
        ({"samples": [1, 2, 3, 2.5]}, "size 8: samples must be one positive whole number for each disorder"),
        ({"samples": [1, 2, 3, 1e17]}, "size 8: samples must be one positive whole number for each disorder"),
        ({"samples": ["1", "2", "3", "4"]}, "size 8: samples must be an array of numbers"),
        ({"covariance": np.eye(3)}, "size 8: the covariance must be a finite matrix of 4 by 4"),
        ({"covariance": np.full((4, 4), np.nan)}, "size 8: the covariance must be a finite matrix of 4 by 4"),
        ({"covariance": [["a"]]}, "size 8: the covariance must be an array of numbers"),
        ({"covariance": np.eye(4)}, "size 8: the diagonal of the covariance is not the square of the errors"),
        ({"covariance": np.diag(ERROR**2) + np.triu(np.full((4, 4), 1e-5), 1)},
         "size 8: the covariance is not symmetric"),
        # Fully correlated points: exactly singular, though rounding may leave the smallest eigenvalue above zero
        ({"covariance": np.outer(ERROR, ERROR)}, "size 8: the covariance is not positive definite; estimate it from "
         "more realisations than there are disorders"),
    ],
)  # fmt: skip
def test_curve_refuses(changes, text):
    """What breaks a rule of `Curve` is named with the place and the value."""
    with pytest.raises(InputError) as caught:
        curve(**changes)
    assert str(caught.value) == text


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"disorder_kind": "random"},
         "labels: disorder_kind must be quenched, quasiperiodic or none, not 'random'"),
        ({"ergodic_value": np.inf}, "labels: ergodic_value must be a finite number up to 1e+100, not inf"),
        ({"localised_value": "0.39"}, "labels: localised_value must be a number, not '0.39'"),
        ({"dimension": 0}, "labels: dimension must be positive, not 0"),
        ({"observable": "two\nlines"}, r"labels: observable must be one line of printable text, not 'two\nlines'"),
        ({"observable_symbol": " "}, "labels: observable_symbol must be one line of printable text, not ' '"),
        ({"disorder_symbol": 3}, "labels: disorder_symbol must be one line of printable text, not 3"),
    ],
)  # fmt: skip
def test_labels_refuse(changes, text):
    """What breaks a rule of `Labels` is named, whichever way the label comes in."""
    for make in (lambda: Labels(**changes), lambda: Curves([curve(8), curve(12)]).relabel(**changes)):
        with pytest.raises(InputError) as caught:
            make()
        assert str(caught.value) == text


@pytest.mark.parametrize(
    ("parts", "text"),
    [
        ([], "no size was found and at least 2 sizes are needed to see a size dependence"),
        ([curve(8)], "only size 8 was found and at least 2 sizes are needed to see a size dependence"),
        ([curve(8), curve(12), curve(8)], "curves: size 8 occurs twice; put all its points into one curve"),
        ([curve(8), curve(12, disorder=GRID + 3)], "the sizes have no common disorder range: size 12 begins at 4, "
         "where size 8 has already ended at 4; measure all sizes on an overlapping range"),
    ],
)  # fmt: skip
def test_curves_refuse(parts, text):
    """What breaks a rule of `Curves` is named with the sizes concerned."""
    with pytest.raises(InputError) as caught:
        Curves(parts)
    assert str(caught.value) == text


def test_order_and_ranges(curves):
    """Sizes are put in order, and ranges and counts follow from the grids; values by hand."""
    assert curves.sizes.tolist() == [8.0, 12.0, 16.0]
    assert curves.points == 20
    assert curves.disorder_range == (0.5, 6.0)
    assert curves.common_range == (1.5, 4.0)
    assert curves.correlated
    size, disorder, mean, error = curves.flat()
    assert size.tolist() == [8.0] * 4 + [12.0] * 4 + [16.0] * 12
    assert disorder[:5].tolist() == [1.0, 2.0, 3.0, 4.0, 1.5]
    assert mean[:4].tolist() == MEAN.tolist()
    assert error[:4].tolist() == ERROR.tolist()


def test_select(curves):
    """Limits include their ends, and covariance, counts, labels and origin go with the points; values by hand."""
    part = curves.select(window=(1.0, 4.5), largest_size=12)
    assert [item.disorder.tolist() for item in part.curves] == [[1, 2, 3, 4], [1.5, 2.5, 3.5, 4.5]]
    assert part.curves[0].samples.tolist() == [10, 20, 30, 40]
    assert np.array_equal(part.curves[0].covariance, np.diag(ERROR**2))
    assert (part.labels, part.origin) == (curves.labels, curves.origin)
    assert curves.select(smallest_size=12).sizes.tolist() == [12.0, 16.0]
    big = curves.curves[2]
    assert big.keep(big.disorder < 3).disorder.tolist() == [0.5, 1.0, 1.5, 2.0, 2.5]


@pytest.mark.parametrize(
    ("limits", "kind", "text"),
    [
        ({"window": (2.0, 4.5)}, InputError, "size 8: the window from 2 to 4.5 holds 3 of its disorder values, but at "
         "least 4 are needed; widen the window or drop this size"),
        ({"smallest_size": 16}, InputError, "only size 16 was found and at least 2 sizes are needed to see a size "
         "dependence"),
        ({"window": (4.0, 1.0)}, ConfigurationError, "a window must run from a lower to a higher disorder, not from 4 "
         "to 1"),
        ({"window": (np.nan, 1.0)}, ConfigurationError, "a window must run from a lower to a higher disorder, not from "
         "nan to 1"),
    ],
)  # fmt: skip
def test_select_refuses(curves, limits, kind, text):
    """Limits that leave too little are refused with what they left."""
    with pytest.raises(kind) as caught:
        curves.select(**limits)
    assert str(caught.value) == text


def test_relabel(curves):
    """New labels come over the same numbers, numbers become floats, and an unknown label is refused."""
    renamed = curves.relabel(dimension=3, localised_value=np.float32(0.5), observable=" r ")
    assert all(new is old for new, old in zip(renamed.curves, curves.curves, strict=True))
    assert (renamed.labels.dimension, renamed.labels.localised_value, renamed.labels.observable) == (3.0, 0.5, "r")
    assert type(renamed.labels.dimension) is float
    text = (
        "there is no label 'color'; the labels are observable, observable_symbol, disorder_symbol, disorder_unit, "
        "ergodic_value, localised_value, dimension, disorder_kind"
    )
    with pytest.raises(ConfigurationError, match=f"^{re.escape(text)}$"):
        curves.relabel(color="red")


def is_frozen(item):
    """Whether every array of the curve refuses to be written to."""
    arrays = (item.disorder, item.mean, item.error, item.covariance, item.samples)
    return not any(array is not None and array.flags.writeable for array in arrays)


def test_nothing_changes_afterwards(curves):
    """Neither the arrays, the fields nor the origin can be changed, not even through what was handed in."""
    grid, origin = GRID.copy(), {"notes": ["sorted"]}
    made = Curves([curve(8, disorder=grid), curve(12)], origin=origin)
    grid[0] = -5.0
    origin["notes"].append("later")
    assert made.curves[0].disorder[0] == 1.0
    assert made.origin == {"notes": ["sorted"]}
    with pytest.raises(ValueError, match=r"^assignment destination is read-only$"):
        made.curves[0].mean[0] = 1.0
    with pytest.raises(TypeError, match=r"does not support item assignment"):
        made.origin["path"] = "other.csv"
    with pytest.raises(AttributeError, match=r"^cannot assign to field 'labels'$"):
        made.labels = Labels()
    assert all(is_frozen(item) for item in curves.curves)


@pytest.mark.parametrize("through", [copy.deepcopy, lambda curves: pickle.loads(pickle.dumps(curves))])
def test_copies_are_equal_and_read_only(curves, through):
    """A copy, as worker processes get it, holds the same numbers and is as unchangeable as the original."""
    other = through(curves)
    assert (other.labels, dict(other.origin)) == (curves.labels, dict(curves.origin))
    for new, old in zip(other.curves, curves.curves, strict=True):
        assert is_frozen(new)
        assert new.size == old.size
        for name in ("disorder", "mean", "error", "noise"):
            assert np.array_equal(getattr(new, name), getattr(old, name))
    assert other.curves[0].samples.tolist() == [10, 20, 30, 40]


def test_what_is_converted():
    """Lists, integers and exact fractions are numbers; sizes and counts get one type, whatever comes in."""
    made = Curve(np.int64(8), [1, 2, 3, 4], [Fraction(1, 2)] * 4, ERROR.tolist(), samples=[1.0, 2.0, 3.0, 4.0])
    assert type(made.size) is float
    assert made.mean.tolist() == [0.5] * 4
    assert made.samples.dtype == np.int64
    assert np.array_equal(made.noise, np.diag(ERROR**2))


def test_extreme_numbers_stay_finite():
    """At the limits of what is accepted, the covariance of the points is still finite and positive."""
    errors = np.array([1 / LARGEST, 1.0, 1.0, LARGEST])
    made = curve(error=errors, mean=[-LARGEST, 0, 0, LARGEST], covariance=np.diag(errors**2))
    assert np.all(np.isfinite(made.noise))
    assert np.all(np.diag(made.noise) > 0)


def test_single_precision_covariance_is_accepted():
    """A covariance rounded to single precision (relative 6e-8, below the tolerance of 1e-6) still fits its errors."""
    rounded = np.float32(0.5 * np.outer(ERROR, ERROR) + 0.5 * np.diag(ERROR**2))
    assert curve(covariance=rounded).covariance.dtype == np.float64


def test_faults_keep_their_parts():
    """Problem and place of a fault can be had apart, and every fault is a DriftlineError and a ValueError."""
    with pytest.raises(DriftlineError) as caught:
        curve(error=[1, 1, 1, -2])
    assert caught.value.where == "size 8"
    assert caught.value.problem == "the error at disorder 4 is -2; a standard error must be positive"
    assert isinstance(caught.value, ValueError)
