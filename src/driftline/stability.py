"""Does the answer survive when the smallest sizes or the outer disorders are left out?

A fit to a part of the data differs from the fit to all of it by chance as well: if the form is right, the
difference has variance sigma_part^2 - sigma_all^2 (Hausman, Econometrica 46, 1251 (1978)).  What exceeds that is
systematic.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from driftline.collapse import CollapseFit, fit_collapse
from driftline.curves import MIN_DISORDERS, Curves
from driftline.errors import InputError
from driftline.inference.intervals import Interval
from driftline.plain import attributes
from driftline.scaling.ansatz import Ansatz

#: Parts of the disorder range that the windows keep, around the crossover; the first is everything.
WINDOWS = (1.0, 0.8, 0.6)
QUICK_WINDOWS = (1.0, 0.7)
#: So many of the smallest sizes are left out at most.
MOST_DROPPED = 2
#: A drop of the smallest size must leave this many sizes, or the correction has nothing to stand on.
SIZES_LEFT = 3
#: Expected scatter is taken as at least this part of the full fit's error: nearly equal errors must not make a
#: negligible shift look significant.
LEAST_SCATTER = 0.3


@dataclass(frozen=True)
class Cut:
    """A part of the data: sizes from `smallest_size`, disorders inside `window`."""

    smallest_size: float
    window: tuple[float, float]


@dataclass(frozen=True)
class StabilityRow:
    """The critical disorder from a part of the data."""

    ansatz: str
    smallest_size: float
    window: tuple[float, float]
    disorder: Interval
    p_value: float

    def shift(self, full: Interval) -> float:
        """Change of the median against the full fit, in the unit of the disorder."""
        return self.disorder.median - full.median

    def scatter(self, full: Interval) -> float:
        """Standard deviation of that change expected by chance alone."""
        variance = max(self.disorder.sd**2 - full.sd**2, (LEAST_SCATTER * full.sd) ** 2)
        return float(np.sqrt(variance))

    def significance(self, full: Interval) -> float:
        """Change over its expected scatter."""
        return self.shift(full) / self.scatter(full)

    def to_dict(self) -> dict[str, Any]:
        """This refit as an entry of ``stability`` in `result.json`."""
        return attributes(self, "ansatz", "smallest_size", "window", "disorder", "p_value")


def cuts(curves: Curves, centre: float, *, quick: bool = False) -> tuple[Cut, ...]:
    """The parts to refit: smallest sizes dropped, the window narrowed around `centre`, and both.

    With `quick` only one size is dropped and the window narrowed once, not both together.
    """
    most = max(0, min(1 if quick else MOST_DROPPED, curves.sizes.size - SIZES_LEFT))
    found = []
    for dropped in range(most + 1):
        for kept in QUICK_WINDOWS if quick else WINDOWS:
            nothing_left_out, both = not dropped and kept == 1, dropped and kept < 1
            cut = Cut(float(curves.sizes[dropped]), _window(curves, centre, kept))
            if not nothing_left_out and not (quick and both) and _possible(curves, cut):
                found.append(cut)
    return tuple(found)


def _window(curves: Curves, centre: float, kept: float) -> tuple[float, float]:
    """Window of a part of the range, as near to `centre` as the range allows."""
    low, high = curves.disorder_range
    width = kept * (high - low)
    # an end of the range is taken as it is: computed, it may lie within rounding of it and cut the outermost points off
    if kept == 1:
        return low, high
    if centre - width / 2 <= low:
        return low, low + width
    if centre + width / 2 >= high:
        return high - width, high
    return centre - width / 2, centre + width / 2


def _possible(curves: Curves, cut: Cut) -> bool:
    try:
        part = curves.select(smallest_size=cut.smallest_size, window=cut.window)
    except InputError:
        return False
    return all(curve.disorder.size > MIN_DISORDERS for curve in part.curves)


def refit(curves: Curves, ansatz: Ansatz, cut: Cut, seed: int | np.random.Generator) -> StabilityRow:
    """Fit `ansatz` to one part of the data, by importance sampling alone."""
    part = curves.select(smallest_size=cut.smallest_size, window=cut.window)
    fit = fit_collapse(part, ansatz.on(part), seed=seed, quick=True, extras=False)
    return StabilityRow(ansatz.name, cut.smallest_size, cut.window, fit.parameters["W_c"], fit.quality.p_value)


def systematic(full: CollapseFit, rows: Sequence[StabilityRow]) -> float | None:
    """Root mean square of the shifts beyond what chance explains, in the unit of the disorder; None without refits."""
    interval = full.parameters["W_c"]
    own = [row for row in rows if row.ansatz == full.ansatz.name]
    excess = [row.shift(interval) ** 2 - row.scatter(interval) ** 2 for row in own]
    return float(np.sqrt(max(float(np.mean(excess)), 0.0))) if excess else None
