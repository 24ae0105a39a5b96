"""The largest size as it was measured, and as the smaller sizes predict it under one scaling form."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline import numerals
from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.collapse import guides, residual_limits
from driftline.figures.finish import finish
from driftline.figures.headline import headline_fit
from driftline.figures.keys import label_ends
from driftline.figures.legends import Entries, legend_above

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit, HeldOut

TWO_SIDED = ((0.994, 0.35), (1.96, 0.18))  # standard deviations of the 68 % and 95 % bands, and how opaque they are


def draw_held_out(fit: CollapseFit, *, ax: tuple[Axes, Axes] | None = None) -> tuple[Axes, Axes]:
    """Draw the largest size over its predicted band (above), and the difference in units of its error (below).

    Parameters
    ----------
    fit : CollapseFit
        With `held_out`.
    ax : pair of matplotlib axes, optional
        Where to draw; by default a new figure of single-column width.

    Returns
    -------
    pair of matplotlib axes
        Curves, and differences over the root of measured plus predicted variance.

    Raises
    ------
    InputError
        If no size was held out.
    """
    held_out = fit.held_out
    if held_out is None:
        raise InputError(
            "no size was held out of this fit; it needs three sizes and extras=True", where=fit.ansatz.name
        )
    with style.house_style():
        own = ax is None
        if ax is None:
            figure = style.new_figure(style.SINGLE, 3.5)
            upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 1))
        else:
            upper, lower = ax
        _limits(upper, fit, held_out)
        band = _band(upper, held_out)
        _points(upper, lower, fit, held_out)
        upper.set_ylabel(labels.observable_label(fit.curves.labels))
        lower.set_xlabel(labels.disorder_label(fit.curves.labels))
        lower.set_ylabel("difference")
        upper.tick_params(labelbottom=False)
        legend_above(upper, band)
        if own:
            finish(style.figure_of(upper))
    return upper, lower


class HeldOutDrawing(Drawing):
    """`figures/held-out`: of the fit that the headline rests on, or else the most probable one."""

    name = "held-out"

    def applies(self, analysis: Analysis) -> bool:
        """Whether a size could be held out."""
        return headline_fit(analysis).held_out is not None

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        fit = headline_fit(analysis)
        held_out = fit.held_out
        assert held_out is not None  # as `applies` says
        return (
            f"Size {labels.sizes([held_out.size])[0]} as predicted from the smaller sizes under {fit.ansatz.name}, "
            "68 % and 95 % bands without measurement noise, and as measured; below, the difference in units of the "
            f"joint standard deviation; chi-squared per point {numerals.fixed(held_out.chi2_per_point, 2)} with the "
            "correlations of the prediction."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_held_out(headline_fit(analysis))[0])


def _band(upper: Axes, held_out: HeldOut) -> Entries:
    x, centre, sd, colour = held_out.disorder, held_out.predicted, held_out.predicted_sd, style.colour(1)
    (line,) = upper.plot(x, centre, color=colour, linestyle=(0, (5, 2)), zorder=2)
    bands = [
        upper.fill_between(x, centre - z * sd, centre + z * sd, color=colour, alpha=alpha, linewidth=0, zorder=1)
        for z, alpha in TWO_SIDED
    ]
    return Entries([line, *bands], ["predicted", "68 %", "95 %"])


def _points(upper: Axes, lower: Axes, fit: CollapseFit, held_out: HeldOut) -> None:
    curves, looks = fit.curves.curves, style.size_looks(fit.curves.sizes)
    _, _, _, error = fit.curves.flat()
    (low, high), height = upper.get_ylim(), upper.get_window_extent().height / style.figure_of(upper).dpi
    marker = style.marker_size(error, low, high, height)
    for curve, look in zip(curves[:-1], looks[:-1], strict=True):
        upper.plot(curve.disorder, curve.mean, color=look.colour, linewidth=style.line(0.5), alpha=0.7, zorder=1.5)
        upper.plot(curve.disorder, curve.mean, zorder=1.5, **style.marker_style(look, 0.6 * marker))
    largest, look = curves[-1], looks[-1]
    upper.errorbar(largest.disorder, largest.mean, largest.error, zorder=4, **style.point_style(look, marker))
    difference = _difference(fit, held_out)
    lower.plot(largest.disorder, difference, zorder=3, **style.marker_style(look, 3.0))
    guides(lower)
    residual_limits(lower, difference)
    ends = [(float(curve.disorder[-1]), float(curve.mean[-1])) for curve in curves]
    label_ends(upper, ends, looks, labels.sizes(fit.curves.sizes), "$L$")


def _difference(fit: CollapseFit, held_out: HeldOut) -> FloatArray:
    largest = fit.curves.curves[-1]
    return (largest.mean - held_out.predicted) / np.hypot(largest.error, held_out.predicted_sd)


def _limits(upper: Axes, fit: CollapseFit, held_out: HeldOut) -> None:
    _, disorder, mean, error = fit.curves.flat()
    style.pad_limits(upper.set_xlim, *style.spread(disorder), share=0.04)
    reach = TWO_SIDED[-1][0] * held_out.predicted_sd
    low, high = style.spread(mean, error)
    lowest, highest = style.spread(held_out.predicted, reach)
    span = high - low  # a prediction that is far off must not flatten the points
    style.pad_limits(
        upper.set_ylim, min(low, max(lowest, low - span)), max(high, min(highest, high + span)), share=0.06
    )
