"""How often the verdict is wrong: rates measured on simulated data of known truth, looked up for data at hand.

`rates.csv` is written by the calibration study (``tests/calibration``): sixteen kinds of truth, three noise levels, two
grids of sizes.  The rates of the cell most like the data are printed with the verdict; ``driftline calibrate`` measures
them for the very grid and errors of the data.
"""

from __future__ import annotations

import csv
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from importlib import resources

import numpy as np

from driftline.curves import Curves, FloatArray

Z95 = 1.959963985  # two-sided 95 % point of the standard normal distribution
#: Height of every curve of the study, and its number of points: what its noise levels are relative to.
HEIGHT, POINTS = 0.14, 126
#: Data whose errors or range of sizes differ from the nearest cell by more than this factor are unlike all of them.
ALIKE = 2.0


@dataclass(frozen=True)
class Count:
    """So many of so many sets."""

    hits: int
    sets: int

    def __add__(self, other: Count) -> Count:
        """Both together."""
        return Count(self.hits + other.hits, self.sets + other.sets)

    @property
    def interval(self) -> tuple[float, float]:
        """95 % interval of the probability (Wilson, JASA 22, 209 (1927)); 0 to 1 without sets."""
        if not self.sets:
            return 0.0, 1.0
        rate, z2 = self.hits / self.sets, Z95**2 / self.sets
        centre = (rate + z2 / 2) / (1 + z2)
        half = Z95 / (1 + z2) * float(np.sqrt(rate * (1 - rate) / self.sets + z2 / (4 * self.sets)))
        return max(centre - half, 0.0), min(centre + half, 1.0)

    def __str__(self) -> str:
        """For people: ``3 of 400 (0.3 to 2.2 %)``."""
        low, high = self.interval
        return f"{self.hits} of {self.sets} ({100 * low:.1f} to {100 * high:.1f} %)"


@dataclass(frozen=True)
class FalseAlarm:
    """Rates of wrong and of right verdicts in the cell of the study that is most like the data.

    Parameters
    ----------
    noise : float
        Error of a point over the height of the curves in that cell.
    sizes : (float, float)
        Smallest and largest size there.
    false_transition : Count
        `transition-supported` where there is no transition.
    false_drifting : Count
        `drifting` where there is one.
    right_transition, right_drifting : Count
        Transitions, and drifts, recognised as such.
    covered : Count
        Headline 95 % intervals of W_c that hold the true value.
    alike : bool
        Whether the data are within a factor of two of that cell in noise and in the range of sizes.
    """

    noise: float
    sizes: tuple[float, float]
    false_transition: Count
    false_drifting: Count
    right_transition: Count
    right_drifting: Count
    covered: Count
    alike: bool

    @property
    def sentence(self) -> str:
        """One paragraph for people."""
        low, high = self.sizes
        unlike = (
            "" if self.alike else " These data are unlike any that were simulated: run driftline calibrate on them."
        )
        return (
            f"Measured on simulated data of known truth (sizes {low:g} to {high:g}, errors {100 * self.noise:.2g} % of "
            f"the height of the curves): transition-supported was wrong for {self.false_transition} sets without a "
            f"transition, drifting for {self.false_drifting} with one; transitions were recognised in "
            f"{self.right_transition}, drifts in {self.right_drifting}.{unlike}"
        )

    def to_dict(self) -> dict[str, float]:
        """As ``verdict.false_alarm`` of `result.json` holds them: counts, from which every rate follows."""
        counts = {
            "false_transition": self.false_transition, "false_drifting": self.false_drifting,
            "right_transition": self.right_transition, "right_drifting": self.right_drifting, "covered": self.covered,
        }  # fmt: skip
        flat = {f"{name}_{part}": getattr(count, part) for name, count in counts.items() for part in ("hits", "sets")}
        return {
            "relative_error": self.noise, "smallest_size": self.sizes[0], "largest_size": self.sizes[1], **flat,
            "alike": float(self.alike),
        }  # fmt: skip


@dataclass(frozen=True)
class Cell:
    """One line of the table: verdicts on one family of truths at one noise level on one grid."""

    truth: str
    noise: float
    grid: str
    counts: dict[str, int]

    @property
    def sizes(self) -> tuple[float, float]:
        """Smallest and largest size of the grid, whose name is ``low-high``."""
        low, _, high = self.grid.partition("-")
        return float(low), float(high)

    def count(self, name: str, of: str = "sets") -> Count:
        """So many verdicts, or intervals, of this cell."""
        return Count(self.counts[name], self.counts[of])


@cache
def cells() -> tuple[Cell, ...]:
    """The table of the study."""
    text = resources.files("driftline").joinpath("rates.csv").read_text(encoding="utf-8")
    words = ("family", "truth", "noise", "grid")
    return tuple(
        Cell(
            line["truth"],
            float(line["noise"]),
            line["grid"],
            {name: int(value) for name, value in line.items() if name not in words},
        )
        for line in csv.DictReader(text.splitlines())
    )


def relative_error(curves: Curves) -> float:
    """Median error over the height of the curves, as if there were as many points as in the study.

    The height is the range of the means less what their noise adds to it; what the data know goes with the root of the
    number of points.
    """
    _, _, mean, error = curves.flat()
    typical = float(np.median(error))
    return typical / _height(mean, typical) * float(np.sqrt(POINTS / curves.points))


def _height(mean: FloatArray, error: float) -> float:
    """Range between the 2 % and the 98 % point, which single odd means do not widen; never below the error itself."""
    low, high = np.quantile(mean, [0.02, 0.98])
    return max(float(high - low), error)


def nearest(curves: Curves) -> FalseAlarm | None:
    """Rates of the cell most like `curves`; None if the table is empty."""
    noise, ratio = relative_error(curves), float(curves.sizes[-1] / curves.sizes[0])
    known = {(cell.noise, cell.grid): cell for cell in cells() if cell.counts["sets"]}
    if not known:
        return None

    def distances(cell: Cell) -> tuple[float, float]:
        low, high = cell.sizes
        return abs(np.log(cell.noise / HEIGHT / noise)), abs(np.log(high / low / ratio))

    chosen = min(known.values(), key=lambda cell: sum(distances(cell)))
    alike = max(distances(chosen)) <= np.log(ALIKE)
    return _false_alarm([cell for cell in cells() if (cell.noise, cell.grid) == (chosen.noise, chosen.grid)], alike)


def _false_alarm(like: list[Cell], alike: bool) -> FalseAlarm:
    real = [cell for cell in like if cell.truth == "transition"]
    drift = [cell for cell in like if cell.truth == "drift"]
    # a drift too slow to be resolved ("slow") is in the table of the study, but in none of its rates
    without = [cell for cell in like if cell.truth not in ("transition", "slow")]
    return FalseAlarm(
        noise=like[0].noise / HEIGHT,
        sizes=like[0].sizes,
        false_transition=_total(cell.count("transition-supported") for cell in without),
        false_drifting=_total(cell.count("drifting") for cell in real),
        right_transition=_total(cell.count("transition-supported") for cell in real),
        right_drifting=_total(cell.count("drifting") for cell in drift),
        covered=_total(cell.count("wc_inside95") for cell in real),
        alike=alike,
    )


def _total(counts: Iterable[Count]) -> Count:
    return sum(counts, Count(0, 0))
