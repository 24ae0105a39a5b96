"""Where a collapse misses the data: the standardised residual of every point over disorder and size."""

from __future__ import annotations

from typing import TYPE_CHECKING

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colors import Colormap, Normalize
from matplotlib.figure import Figure

from driftline.curves import FloatArray
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.headline import headline_fit

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit

NOTABLE = 2.0  # standard errors from which a cell shows its sign
LEAST_REACH = 3.0  # the colours go to so many standard errors at least
HEIGHT = 0.42  # half the height of a row, in rows


def draw_misfit(fit: CollapseFit, *, ax: Axes | None = None) -> Axes:
    """Draw the residuals in units of the measured error, a row for each size, a cell for each disorder.

    Parameters
    ----------
    fit : CollapseFit
    ax : matplotlib axes, optional
        Where to draw; by default a new figure of single-column width.

    Returns
    -------
    matplotlib axes
        Rows are counted from 0, the smallest size. Residuals of two errors and more show their sign, which grey
        would not; the line is the critical disorder, where the form has one.
    """
    points = fit.points
    sizes = np.unique(points.size)
    with style.house_style():
        own = ax is None
        axes = style.new_figure(style.SINGLE, 1.1 + 0.2 * len(sizes)).subplots() if ax is None else ax
        reach = max(LEAST_REACH, float(np.max(np.abs(points.residual))))
        colours, norm = diverging(reach)
        for row, size in enumerate(sizes):
            mine = points.size == size
            edges = _edges(points.disorder[mine])
            cells = points.residual[mine][None, :]
            axes.pcolormesh(edges, [row - HEIGHT, row + HEIGHT], cells, cmap=colours, norm=norm, zorder=2)
            _signs(axes, points.disorder[mine], np.full(mine.sum(), float(row)), points.residual[mine], reach)
        _critical(axes, fit)
        axes.set_ylim(-0.5, len(sizes) - 0.5)
        axes.set_yticks(range(len(sizes)), labels.sizes(sizes))
        axes.tick_params(axis="y", length=0)
        axes.set_xlabel(labels.disorder_label(fit.curves.labels))
        axes.set_ylabel("$L$")
        colour_bar(axes, reach, "residual / error")
        if own:
            finish(style.figure_of(axes))
    return axes


class MisfitDrawing(Drawing):
    """`figures/misfit`: of the fit that the headline rests on, or else the most probable one."""

    name = "misfit"

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        fit = headline_fit(analysis)
        worst = fit.quality.max_residual
        size, disorder = fit.quality.max_residual_at
        line = "; lines: critical disorder with its 68 % interval" if "W_c" in fit.parameters else ""
        return (
            f"Residuals of the collapse under {fit.ansatz.name} in units of the measured error, with their sign from "
            f"two errors on; the largest, {worst:+.1f}, at size {labels.sizes([size])[0]} and disorder "
            f"{disorder:.6g}{line}."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_misfit(headline_fit(analysis)))


def diverging(reach: float) -> tuple[Colormap, Normalize]:
    """Colours from blue through white to red, white at zero, safe for colour-blind readers."""
    return mpl.colormaps["RdBu_r"], Normalize(-reach, reach)


def colour_bar(axes: Axes, reach: float, label: str) -> None:
    """The key of the colours, right of the axes."""
    colours, norm = diverging(reach)
    bar = style.figure_of(axes).colorbar(ScalarMappable(norm, colours), ax=axes, pad=0.02, fraction=0.06, aspect=25)
    bar.set_label(label)
    bar.outline.set_linewidth(style.line(0.6))


def _edges(disorder: FloatArray) -> FloatArray:
    """Ends of the cells: halfway between neighbours, and as far beyond the first and last."""
    middle = (disorder[1:] + disorder[:-1]) / 2
    first, last = 2 * disorder[0] - middle[0], 2 * disorder[-1] - middle[-1]
    return np.concatenate([[first], middle, [last]])


def _signs(axes: Axes, disorder: FloatArray, row: FloatArray, residual: FloatArray, reach: float) -> None:
    for sign, marker in ((1, "+"), (-1, "_")):
        for dark in (True, False):
            chosen = (sign * residual >= NOTABLE) & ((np.abs(residual) > 0.6 * reach) == dark)
            axes.plot(
                disorder[chosen], row[chosen], linestyle="none", marker=marker, markersize=4.5,
                color="white" if dark else style.INK, markeredgewidth=style.line(0.9), zorder=4,
            )  # fmt: skip


def _critical(axes: Axes, fit: CollapseFit) -> None:
    interval = fit.parameters.get("W_c")
    low, high = axes.get_xlim()
    if interval is not None and low < interval.median < high:
        axes.axvline(interval.median, color=style.INK, linewidth=style.line(0.8), linestyle=(0, (4, 2)), zorder=3)
        for end in (interval.low68, interval.high68):
            axes.axvline(end, color=style.INK, linewidth=style.line(0.5), linestyle=(0, (1, 2)), zorder=3)
    axes.set_xlim(low, high)
