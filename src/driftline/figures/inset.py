"""An inset that hides nothing: it takes the corner that is emptiest, and the ordinate is extended if need be."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from matplotlib.axes import Axes

from driftline.curves import FloatArray
from driftline.figures import style

Side = Literal["left", "right"]


@dataclass(frozen=True)
class Inset:
    """Size of an inset as part of the axes, and the room for its tick labels and to the frame around it."""

    width: float = 0.38
    height: float = 0.36
    label_width: float = 0.13
    label_height: float = 0.09
    margin: float = 0.035

    def span(self, side: Side) -> tuple[float, float]:
        """Ends of the part of the abscissa that is taken, tick labels included."""
        whole = self.width + self.label_width + self.margin
        return (0.0, whole) if side == "left" else (1 - whole, 1.0)

    @property
    def depth(self) -> float:
        """Part of the ordinate that is taken."""
        return self.height + self.label_height + self.margin


def place_inset(axes: Axes, x: FloatArray, low: FloatArray, high: FloatArray, inset: Inset) -> Axes:
    """New axes inside `axes`, whose limits are final but for the ordinate, which may be extended.

    Parameters
    ----------
    axes : matplotlib axes
    x, low, high : array, shape (n,)
        What is drawn: abscissae, lower and upper ends.
    inset : Inset
        Its size.
    """
    bottom, top = axes.get_ylim()
    corners: list[tuple[Side, bool]] = [(side, above) for side in ("right", "left") for above in (True, False)]
    missing = [_missing(axes, x, low, high, inset.span(side), inset.depth, above) for side, above in corners]
    side, above = corners[int(np.argmin(missing))]
    room = max(min(missing), 0.0)
    axes.set_ylim(bottom if above else bottom - room, top + room if above else top)
    left = inset.margin + inset.label_width if side == "left" else 1 - inset.margin - inset.width
    floor = 1 - inset.margin - inset.height if above else inset.margin + inset.label_height
    made = axes.inset_axes((left, floor, inset.width, inset.height), zorder=4)
    made.tick_params(labelsize=style.letters(style.SMALL), pad=2, length=2)
    return made


def _missing(
    axes: Axes, x: FloatArray, low: FloatArray, high: FloatArray, span: tuple[float, float], depth: float, above: bool
) -> float:
    """By how much the ordinate must be extended for a corner to be empty; negative where there is room to spare."""
    (left, right), (bottom, top) = axes.get_xlim(), axes.get_ylim()
    share = (x - left) / (right - left)
    mine = (share >= span[0]) & (share <= span[1])
    if not mine.any():
        return bottom - top
    # the taken part is `depth` of the extended range, and what reaches from the other end to the data is the rest
    reach = float(np.max(high[mine])) - bottom if above else top - float(np.min(low[mine]))
    return reach / (1 - depth) - (top - bottom)
