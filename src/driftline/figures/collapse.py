"""The collapsed points on the scaling function, and what is left over below."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline import numerals
from driftline.curves import FloatArray
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.headline import headline_fit
from driftline.figures.legends import Entries, legend_above

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit


def draw_collapse(fit: CollapseFit, *, ax: tuple[Axes, Axes] | None = None) -> tuple[Axes, Axes]:
    """Draw the collapse at the posterior median (above) and the standardised residuals (below).

    Parameters
    ----------
    fit : CollapseFit
    ax : pair of matplotlib axes, optional
        Where to draw; by default a new figure of single-column width.

    Returns
    -------
    pair of matplotlib axes
        Collapse and residuals.
    """
    with style.house_style():
        own = ax is None
        if ax is None:
            figure = style.new_figure(style.SINGLE, 3.7)
            upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 1))
        else:
            upper, lower = ax
        _function(upper, fit)
        _points(upper, lower, fit)
        _limits(upper, lower, fit)
        upper.set_ylabel(_ordinate(fit))
        lower.set_xlabel(_abscissa(fit))
        lower.set_ylabel("residual")
        upper.tick_params(labelbottom=False)
        if own:
            finish(style.figure_of(upper))
    return upper, lower


class CollapseDrawing(Drawing):
    """`figures/collapse`: the collapse that the headline rests on, or else the most probable one."""

    name = "collapse"

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        fit = headline_fit(analysis)
        names = [each.name for each in fit.ansatz.parameters if each.name in fit.parameters]
        values = ", ".join(f"{name} = {numerals.short(fit.parameters[name])}" for name in names)
        at = f"the posterior median ({values})" if values else "the posterior median"
        return (
            f"Collapse under {fit.ansatz.name} at {at} with one standard error, and the scaling function with its 68 % "
            "band; below, residuals in units of the error."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        figure = draw_collapse(headline_fit(analysis))[0].figure
        assert isinstance(figure, Figure)
        return figure


def _function(upper: Axes, fit: CollapseFit) -> None:
    x, mean, sd = fit.function_x, fit.function_mean, fit.function_sd
    upper.fill_between(x, mean - sd, mean + sd, color=style.FAINT, alpha=0.5, linewidth=0, zorder=1)
    upper.plot(x, mean, color=style.SOFT, linewidth=style.line(0.9), zorder=2)


def _points(upper: Axes, lower: Axes, fit: CollapseFit) -> None:
    points = fit.points
    sizes = np.unique(points.size)
    marker = style.marker_size(points.error, *style.spread(points.y, points.error), height=2.1)
    handles = []
    for size, look in zip(sizes, style.size_looks(sizes), strict=True):
        mine = points.size == size
        kind = style.point_style(look, marker)
        handles.append(upper.errorbar(points.x[mine], points.y[mine], points.error[mine], zorder=3, **kind))
        lower.plot(points.x[mine], points.residual[mine], zorder=3, **style.marker_style(look, 2.8))
    guides(lower)
    legend_above(upper, Entries(handles, labels.sizes(sizes), "$L$ ="))


def guides(axes: Axes) -> None:
    """Lines at zero and at two standard errors in a panel of residuals."""
    for level, width, dashes in ((0.0, 0.8, "-"), (-2.0, 0.5, (0, (3, 2))), (2.0, 0.5, (0, (3, 2)))):
        axes.axhline(level, color=style.FAINT, linewidth=style.line(width), linestyle=dashes, zorder=1)


def residual_limits(axes: Axes, residual: FloatArray) -> None:
    """A symmetric ordinate that holds every residual."""
    reach = 1.15 * max(2.5, float(np.max(np.abs(residual))))
    axes.set_ylim(-reach, reach)


def _limits(upper: Axes, lower: Axes, fit: CollapseFit) -> None:
    points = fit.points
    style.pad_limits(upper.set_xlim, *style.spread(points.x), share=0.05)
    style.pad_limits(upper.set_ylim, *style.spread(points.y, points.error), share=0.06)
    residual_limits(lower, points.residual)


def _ordinate(fit: CollapseFit) -> str:
    """The observable, marked as corrected where the correction term has been taken off the points."""
    label = labels.observable_label(fit.curves.labels)
    return f"{label} (corrected)" if "omega" in fit.parameters else label


def _abscissa(fit: CollapseFit) -> str:
    """The scaled variable in the disorder's own symbol, where that can be typeset and is short enough."""
    return labels.with_disorder(fit.ansatz.form.label, fit.curves.labels) or "scaled disorder $x$"
