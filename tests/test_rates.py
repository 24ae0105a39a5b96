"""Rates of wrong verdicts: the table of the study, the cell most like the data, and the sentence made of it."""

from __future__ import annotations

import numpy as np
import pytest

from driftline.curves import Curves
from driftline.rates import HEIGHT, Count, cells, nearest, relative_error
from driftline.simulate import Logistic, PowerLawTruth, simulate

GRID = np.linspace(1, 8, 21)


def made(sizes: tuple[float, ...], error: float, grid: np.ndarray = GRID) -> Curves:
    """Curves from 0.53 to 0.39 with a logistic of width 1 at size 12, as in the study."""
    return simulate(sizes, grid, PowerLawTruth(4.3, 1.0, Logistic(0.53, 0.39, 12.0)), error, 1)


@pytest.mark.parametrize(
    ("count", "ends"),
    # by hand from Wilson (1927): z^2 / (n + z^2) = 3.8415 / 13.8415 for none of ten; one half is symmetric, with half
    # width 1.96 sqrt(0.25 / 100 + 3.8415 / 40000) / 1.038415 = 0.0962 for 50 of 100
    [(Count(0, 10), (0.0, 0.27753)), (Count(50, 100), (0.40383, 0.59617)), (Count(0, 0), (0.0, 1.0))],
)
def test_binomial_interval(count: Count, ends: tuple[float, float]) -> None:
    """Wilson's interval by hand."""
    assert count.interval == pytest.approx(ends, abs=1e-5)


def test_every_cell_of_the_study_finds_itself() -> None:
    """Data made like those of a cell are most like that cell, and within a factor of two of it."""
    for sizes, name in (((8, 10, 12, 14, 16, 18), (8.0, 18.0)), ((6, 7, 8, 9, 10, 11, 12), (6.0, 12.0))):
        found = nearest(made(sizes, 0.003))
        assert found is not None
        assert (found.noise, found.sizes, found.alike) == (0.003 / HEIGHT, name, True)


def test_error_counts_relative_to_height_and_points() -> None:
    """Half the height or a quarter of the points is as bad as twice the error; units do not matter."""
    curves = made((8, 10, 12, 14, 16, 18), 0.003)
    # the range between the 2 % and the 98 % points of these curves is 0.94 to 0.98 of the height
    assert relative_error(curves) == pytest.approx(0.003 / HEIGHT, rel=0.08)
    quarter = made((8, 12), 0.003, GRID[::2])  # 22 points instead of 126
    assert relative_error(quarter) == pytest.approx(0.003 / HEIGHT * np.sqrt(126 / 22), rel=0.15)


def test_data_unlike_the_study_are_told_so() -> None:
    """Errors of a third of the height are beyond the noisiest cell (4 %) by more than a factor of two."""
    found = nearest(made((8, 10, 12, 14, 16, 18), 0.05))
    assert found is not None
    assert not found.alike
    assert "run driftline calibrate" in found.sentence
    like = nearest(made((8, 10, 12, 14, 16, 18), 0.003))
    assert like is not None
    assert "run driftline calibrate" not in like.sentence


def test_counts_of_the_table_add_up() -> None:
    """Verdicts of a cell are as many as its sets, and what is wrong is among them."""
    codes = ("transition-supported", "drifting", "undecided", "size-independent", "insufficient-data")
    assert len(cells()) == 17 * 3 * 2
    for cell in cells():
        assert sum(cell.counts[code] for code in codes) == cell.counts["sets"]
        assert cell.counts["wrong"] == cell.counts["drifting" if cell.truth == "transition" else "transition-supported"]


def test_what_result_json_holds() -> None:
    """Counts of the cell: all sets without and with a transition, however they were judged."""
    found = nearest(made((8, 10, 12, 14, 16, 18), 0.003))
    assert found is not None
    told = found.to_dict()
    like = [cell for cell in cells() if (cell.noise, cell.grid) == (0.003, "8-18")]
    assert told["false_transition_sets"] == sum(
        cell.counts["sets"] for cell in like if cell.truth not in ("transition", "slow")
    )
    assert told["false_drifting_hits"] == sum(cell.counts["drifting"] for cell in like if cell.truth == "transition")
    assert told["false_drifting_sets"] == told["right_transition_sets"] == told["covered_sets"]
