"""The truths, noise levels and grids of the calibration study, and how one data set of a cell is made.

Scales are chosen so that the scaling function runs through most of its range on every grid: at the typical size
L_0 = sqrt(L_min L_max) a curve falls from 0.53 to 0.39 with a logistic width of one unit of disorder, around the
middle of a grid from 1 to 8.
"""

from __future__ import annotations

import zlib
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from driftline import Curves, Labels
from driftline.simulate import (
    DepartureTruth,
    FiniteLengthTruth,
    Gompertz,
    KosterlitzThoulessTruth,
    LinearDriftTruth,
    LogDriftTruth,
    Logistic,
    PowerLawTruth,
    SizeIndependentTruth,
    SizeRatioTruth,
    Truth,
    simulate,
)  # fmt: skip

HIGH, LOW = 0.53, 0.39
DISORDER = np.linspace(1.0, 8.0, 21)
CENTRE = 4.3
WIDTH = 1.0
NOISES = (0.001, 0.003, 0.006)
MIDDLE_NOISE = 0.003
GRIDS = {"8-18": (8, 10, 12, 14, 16, 18), "6-12": (6, 7, 8, 9, 10, 11, 12)}
LARGE_GRID = "8-18"
#: Correction to scaling in units of the height of the curve: constant, and linear at the end of the smallest size's
#: curve; together they change it by 2 to 12 %.
CONSTANT_PART, LINEAR_PART = 0.07, 0.05
DRIFT = 0.2  # of W_c per site
SLOW_DRIFT = 0.05  # of W_c per site: 0.5 over the larger grid, where W_c is known to 0.1 at an error of 0.003
LOG_DRIFT = 2.0  # of W_c per unit of ln L: about 0.15 per site on the large grid
DRIFT_CENTRE = 3.6  # crossings run ahead of W_c, so it starts lower
LABELS = Labels(ergodic_value=HIGH, localised_value=LOW)

Build = Callable[[np.ndarray], Truth]


@dataclass(frozen=True)
class Family:
    """One kind of truth.

    Parameters
    ----------
    name : str
    kind : str
        ``transition``, ``drift``, ``finite`` (a length finite at every disorder), ``none`` (size does nothing) or
        ``slow`` (a drift that these errors hardly resolve: shown in every table, part of no target).
    build : callable
        Truth for an array of sizes.
    W_c, nu : float or None
        The true values, where there are any.
    """

    name: str
    kind: str
    build: Build
    W_c: float | None = None
    nu: float | None = None

    @property
    def expected(self) -> tuple[str, ...]:
        """Verdicts that say what is true; ``undecided`` is never wrong but says nothing."""
        return {
            "transition": ("transition-supported",),
            "drift": ("drifting",),
            "finite": ("drifting",),
            "slow": ("drifting",),
            "none": ("size-independent",),
        }[self.kind]


@dataclass(frozen=True)
class Cell:
    """One family at one noise level on one grid."""

    family: str
    noise: float
    grid: str

    def curves(self, seed: int) -> Curves:
        """Data set number `seed` of this cell; every cell has random numbers of its own."""
        sizes = np.array(GRIDS[self.grid], dtype=np.float64)
        key = zlib.crc32(f"{self.family} {self.noise:g} {self.grid}".encode())
        rng = np.random.default_rng([key, seed])
        return simulate(sizes, DISORDER, FAMILIES[self.family].build(sizes), self.noise, rng, labels=LABELS)


def typical(sizes: np.ndarray) -> float:
    """Geometric mean of smallest and largest size."""
    return float(np.sqrt(sizes[0] * sizes[-1]))


def power_law(nu: float, *, corrected: bool = False, width: float = WIDTH) -> Build:
    """Power law with exponent nu; `width` in disorder at the typical size."""

    def build(sizes: np.ndarray) -> Truth:
        stretch = typical(sizes) ** (1 / nu)
        end = (DISORDER[-1] - CENTRE) * sizes[0] ** (1 / nu)  # x at the end of the smallest size's curve
        height = (HIGH - LOW) * sizes[0]  # omega = 1: L^-1 at the smallest size is undone
        terms = (CONSTANT_PART * height, LINEAR_PART * height / end) if corrected else ()
        return PowerLawTruth(CENTRE, nu, Logistic(HIGH, LOW, width * stretch), terms, 1.0)

    return build


def kosterlitz_thouless(sizes: np.ndarray) -> Truth:
    """KT length with b = 2; at the ends of the grid the typical size is three and a half widths away."""
    end = typical(sizes) * np.exp(-2 / np.sqrt(DISORDER[-1] - CENTRE))
    return KosterlitzThoulessTruth(CENTRE, 2.0, Logistic(HIGH, LOW, float(end) / 3.5))


def linear_drift(sizes: np.ndarray) -> Truth:
    """W_c moves by 0.2 per site, which moves the crossings by 0.4 per site."""
    start = DRIFT_CENTRE - DRIFT * (sizes[0] + sizes[-1]) / 2
    return LinearDriftTruth(start, 1.0, Logistic(HIGH, LOW, WIDTH * typical(sizes)), rate=DRIFT)


def slow_drift(sizes: np.ndarray) -> Truth:
    """W_c moves by 0.05 per site, a quarter of `linear_drift`."""
    start = CENTRE - SLOW_DRIFT * (sizes[0] + sizes[-1]) / 2
    return LinearDriftTruth(start, 1.0, Logistic(HIGH, LOW, WIDTH * typical(sizes)), rate=SLOW_DRIFT)


def log_drift(sizes: np.ndarray) -> Truth:
    """W_c moves by 2 ln L."""
    start = DRIFT_CENTRE - LOG_DRIFT * np.log(typical(sizes))
    return LogDriftTruth(float(start), 1.0, Logistic(HIGH, LOW, WIDTH * typical(sizes)), rate=LOG_DRIFT)


def size_ratio(sizes: np.ndarray) -> Truth:
    """A function of W/L."""
    unit = typical(sizes)
    return SizeRatioTruth(CENTRE / unit, Logistic(HIGH, LOW, WIDTH / unit))


def finite_length(sizes: np.ndarray) -> Truth:
    """ln xi = c (4/W)^2 with all sizes on the plateau below W of about 2.5, whatever the grid."""
    c = 3.0 * np.log(typical(sizes)) / np.log(12.0)
    return FiniteLengthTruth(4.0, float(c), 2.0, Gompertz(HIGH, LOW, 1.0))


def departure(sizes: np.ndarray) -> Truth:
    """Every size leaves the plateau 0.2 per site further out; nothing crosses."""
    return DepartureTruth(CENTRE - DRIFT * (sizes[0] + sizes[-1]) / 2, DRIFT, Gompertz(HIGH, LOW, 1.2))


def size_independent(sizes: np.ndarray) -> Truth:
    """One curve for all sizes."""
    return SizeIndependentTruth(CENTRE, Logistic(HIGH, LOW, WIDTH))


EXPONENTS = (0.7, 1.0, 1.6, 3.0)
FAMILIES: dict[str, Family] = {
    family.name: family
    for family in (
        *(Family(f"nu-{nu:g}", "transition", power_law(nu), CENTRE, nu) for nu in EXPONENTS),
        *(
            Family(f"nu-{nu:g}-corrected", "transition", power_law(nu, corrected=True), CENTRE, nu)
            for nu in EXPONENTS
        ),
        Family("kt", "transition", kosterlitz_thouless, CENTRE),
        Family("sharp", "transition", power_law(1.0, width=WIDTH / 4), CENTRE, 1.0),
        Family("linear-drift", "drift", linear_drift),
        Family("log-drift", "drift", log_drift),
        Family("size-ratio", "drift", size_ratio),
        Family("departure", "drift", departure),
        Family("finite-length", "finite", finite_length),
        Family("size-independent", "none", size_independent),
        Family("slow-drift", "slow", slow_drift),
    )
}  # fmt: skip
