"""Direct labels: the size of each curve written beside its end, with its marker, outside the axes."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.transforms import ScaledTranslation
from scipy.optimize import isotonic_regression

from driftline.curves import FloatArray
from driftline.figures import style

LEADER, MARK, TEXT = 0.09, 0.14, 0.20  # inches right of the axes: end of the leader, marker, begin of the text
LINES = 1.25  # height of a line of text in units of its letters
SETTLED = 0.9  # the axes may get so much lower by the last layout


def label_ends(
    ax: Axes, ends: Sequence[tuple[float, float]], looks: Sequence[style.SizeLook], texts: Sequence[str], title: str
) -> None:
    """Write `texts` right of the axes, each with its marker and a thin line to the end of its curve.

    Parameters
    ----------
    ax : matplotlib axes
        With its final limits.
    ends : sequence of (x, y)
        Last point of each curve.
    looks, texts : sequences
        Look and text of each.
    title : str
        Written above the texts.
    """
    height = SETTLED * ax.get_window_extent().height / style.figure_of(ax).dpi * 72
    size = min(style.letters(), height / (LINES * len(ends)))
    low, high = ax.get_ylim()
    wanted = np.array([(y - low) / (high - low) for _, y in ends])
    places = spread_apart(wanted, LINES * size / height, 0.0, 1.0)
    inches = style.figure_of(ax).dpi_scale_trans
    for end, place, look, text in zip(ends, places, looks, texts, strict=True):
        leader, marker, start = (ax.transAxes + ScaledTranslation(shift, 0.0, inches) for shift in (LEADER, MARK, TEXT))
        thin = {"arrowstyle": "-", "color": look.colour, "linewidth": style.line(0.5), "shrinkA": 0, "shrinkB": 0}
        ax.annotate("", end, (1.0, place), textcoords=leader, arrowprops={**thin, "zorder": 1.5}, annotation_clip=False)
        kind = style.marker_style(look, min(3.8, 0.6 * size))
        ax.add_artist(Line2D([1.0], [place], transform=marker, **kind)).set_clip_on(False)
        ax.text(1.0, place, text, transform=start, ha="left", va="center_baseline", fontsize=size)
    above = ax.transAxes + ScaledTranslation(TEXT, 0.75 * size / 72, inches)
    ax.text(1.0, float(places.max()), title, transform=above, ha="left", va="bottom", fontsize=size)


def spread_apart(wanted: FloatArray, gap: float, low: float, high: float) -> FloatArray:
    """Places nearest to the wanted ones (least squares) in the same order, at least `gap` apart, from low to high.

    With the gaps taken off, neighbours need only keep their order, which is isotonic regression; clipping its solution
    solves the problem with bounds.

    Examples
    --------
    >>> spread_apart(np.array([0.5, 0.5, 0.9]), 0.2, 0.0, 1.0).round(3).tolist()
    [0.4, 0.6, 0.9]
    """
    order = np.argsort(wanted, kind="stable")
    steps = gap * np.arange(wanted.size)
    inner = high - low - steps[-1]
    if inner < 0:  # more than there is room for: evenly, as far apart as can be
        steps, inner = np.linspace(0.0, high - low, wanted.size), 0.0
    free = isotonic_regression(wanted[order] - steps).x
    places = np.empty_like(wanted, dtype=np.float64)
    places[order] = np.clip(free, low, low + inner) + steps
    return places
