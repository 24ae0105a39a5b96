"""The measured curves of all sizes with their smoother and the crossings of adjacent sizes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline.curves import Curves
from driftline.figures import style
from driftline.figures.base import Drawing

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.crossings import Crossing, Crossings

RESOLVED = 0.95  # from this probability of separation on a crossing is drawn filled
LIKELY = 0.5  # crossings less probable than this are not drawn


def draw_curves(curves: Curves, crossings: Crossings | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw observable against disorder, one colour and marker for each size.

    Parameters
    ----------
    curves : Curves
    crossings : Crossings, optional
        Adds the smoother of each size with its 68 % band, and the crossings of adjacent sizes that are more likely
        than not: filled where the curves are separated on both sides with probability 0.95 or more, else hollow.
    ax : matplotlib axes, optional
        Where to draw; by default a new figure of single-column width.

    Returns
    -------
    matplotlib axes
        Its ``.figure`` can be saved with `driftline.figures.style.save`.
    """
    with style.house_style():
        own = ax is None
        axes = style.new_figure(style.SINGLE, 2.9).subplots() if ax is None else ax
        sizes, marks = _points(axes, curves), style.Entries([], [])
        if crossings is not None:
            _smoothers(axes, curves, crossings)
            marks = _marks(axes, [each for each in crossings.adjacent if shown(each)])
        _limits(axes, curves)
        axes.set_xlabel(style.disorder_label(curves.labels))
        axes.set_ylabel(style.observable_label(curves.labels))
        style.legend_above(axes, sizes, marks)
        if own:
            style.finish(style.figure_of(axes))
    return axes


class CurvesDrawing(Drawing):
    """`figures/curves`."""

    name = "curves"
    width = style.SINGLE

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        count = sum(shown(each) for each in analysis.crossings.adjacent)
        seen = f"{count} crossing{'s' * (count != 1)} of adjacent sizes" if count else "no crossing of adjacent sizes"
        return (
            f"{analysis.curves.labels.observable.capitalize()} against disorder with one standard error; "
            f"lines and bands: smoother and its 68 % band; {seen} more likely than not, with 68 % intervals, filled "
            "where the curves are separated on both sides with probability 0.95 or more."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_curves(analysis.curves, analysis.crossings))


def shown(crossing: Crossing) -> bool:
    """Whether a crossing is likely enough to be drawn."""
    return crossing.disorder is not None and crossing.value is not None and crossing.probability >= LIKELY


def _points(axes: Axes, curves: Curves) -> style.Entries:
    _, _, mean, error = curves.flat()
    marker = style.marker_size(error, *style.spread(mean, error), height=2.1)
    handles = [
        axes.errorbar(curve.disorder, curve.mean, curve.error, zorder=3, **style.point_style(look, marker))
        for curve, look in zip(curves.curves, style.size_looks(curves.sizes), strict=True)
    ]
    return style.Entries(handles, [f"{size:g}" for size in curves.sizes], "$L$ =")


def _smoothers(axes: Axes, curves: Curves, crossings: Crossings) -> None:
    looks = dict(zip(curves.sizes.tolist(), style.size_looks(curves.sizes), strict=True))
    for smooth in crossings.smooth:
        colour = looks[float(smooth.size)].colour
        axes.plot(smooth.grid, smooth.mean, color=colour, linewidth=0.8, zorder=2)
        axes.fill_between(
            smooth.grid,
            smooth.mean - smooth.sd,
            smooth.mean + smooth.sd,
            color=colour,
            alpha=0.25,
            linewidth=0,
            zorder=1,
        )


def _marks(axes: Axes, crossings: list[Crossing]) -> style.Entries:
    handles: list[Any] = []
    texts: list[str] = []
    for resolved, text in ((True, "crossing"), (False, "crossing, not separated")):
        chosen = [each for each in crossings if (each.separated >= RESOLVED) == resolved]
        if not chosen:
            continue
        places = [(each.disorder, each.value) for each in chosen]
        x, y = (np.array([pair[part].median for pair in places]) for part in (0, 1))  # type: ignore[union-attr]
        x_bars, y_bars = (
            np.abs([[pair[part].median - pair[part].low68, pair[part].high68 - pair[part].median] for pair in places]).T  # type: ignore[union-attr]
            for part in (0, 1)
        )
        mark = axes.errorbar(
            x, y, yerr=y_bars, xerr=x_bars, linestyle="none", marker="o", markersize=3.8, color=style.INK,
            markerfacecolor="#f5c542" if resolved else "white", markeredgecolor=style.INK, markeredgewidth=0.8,
            elinewidth=0.9, capsize=1.8, capthick=0.9, zorder=5,
        )  # fmt: skip
        handles.append(mark)
        texts.append(text)
    return style.Entries(handles, texts)


def _limits(axes: Axes, curves: Curves) -> None:
    _, disorder, mean, error = curves.flat()
    style.pad_limits(axes.set_xlim, *style.spread(disorder), share=0.04)
    style.pad_limits(axes.set_ylim, *style.spread(mean, error), share=0.06)
