"""The measured curves of all sizes with their smoother, and the crossings of adjacent sizes, enlarged in an inset."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline.curves import Curves, FloatArray
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.inset import Inset, place_inset
from driftline.figures.keys import label_ends
from driftline.figures.legends import Entries, legend_above
from driftline.numerals import exponent

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.crossings import Crossing, Crossings

RESOLVED = 0.95  # from this probability of separation on a crossing is drawn filled
LIKELY = 0.5  # crossings less probable than this are not drawn
ENLARGED = 0.4  # an inset that would have to show more than this part of the range enlarges nothing
DIGIT = 0.64  # width of a digit in units of the size of its letters
LEAST_SHOWN = 1 / 40  # part of the range that the inset shows beside the outermost crossings, so that points are in it


def draw_curves(curves: Curves, crossings: Crossings | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw observable against disorder, one colour and marker for each size, the size written beside its curve.

    Parameters
    ----------
    curves : Curves
    crossings : Crossings, optional
        Adds the smoother of each size with its 68 % band, and the crossings of adjacent sizes that are more likely
        than not: filled where the curves are separated on both sides with probability 0.95 or more, else hollow. An
        inset enlarges their neighbourhood, unless that is most of the range.
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
        found = [each for each in crossings.adjacent if shown(each)] if crossings is not None else []
        _limits(axes, curves)
        marks = _content(axes, curves, crossings, found)
        window = _inset_window(curves, found)
        if crossings is not None and window is not None:
            _inset(axes, curves, crossings, found, window)
        axes.set_xlabel(labels.disorder_label(curves.labels))
        axes.set_ylabel(labels.observable_label(curves.labels))
        ends = [_end(curve.size, (curve.disorder[-1], curve.mean[-1]), crossings) for curve in curves.curves]
        label_ends(axes, ends, style.size_looks(curves.sizes), labels.sizes(curves.sizes), "$L$")
        legend_above(axes, marks)
        if own:
            finish(style.figure_of(axes))
    return axes


class CurvesDrawing(Drawing):
    """`figures/curves`."""

    name = "curves"

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


def _content(axes: Axes, curves: Curves, crossings: Crossings | None, found: list[Crossing]) -> Entries:
    """Points, smoothers and crossings; legend entries of the last."""
    error = curves.flat()[3]
    (low, high), height = axes.get_ylim(), axes.get_window_extent().height / style.figure_of(axes).dpi
    marker = style.marker_size(error, low, high, height)
    for curve, look in zip(curves.curves, style.size_looks(curves.sizes), strict=True):
        axes.errorbar(curve.disorder, curve.mean, curve.error, zorder=3, **style.point_style(look, marker))
    if crossings is None:
        return Entries([], [])
    _smoothers(axes, curves, crossings)
    return _marks(axes, found)


def _smoothers(axes: Axes, curves: Curves, crossings: Crossings) -> None:
    looks = dict(zip(curves.sizes.tolist(), style.size_looks(curves.sizes), strict=True))
    for smooth in crossings.smooth:
        colour = looks[float(smooth.size)].colour
        axes.plot(smooth.grid, smooth.mean, color=colour, linewidth=style.line(0.8), zorder=2)
        low, high = smooth.mean - smooth.sd, smooth.mean + smooth.sd
        axes.fill_between(smooth.grid, low, high, color=colour, alpha=0.25, linewidth=0, zorder=1)


def _marks(axes: Axes, crossings: list[Crossing]) -> Entries:
    handles: list[Any] = []
    texts: list[str] = []
    for resolved, text in ((True, "crossing"), (False, "crossing, not separated")):
        chosen = [each for each in crossings if (each.separated >= RESOLVED) == resolved]
        if not chosen:
            continue
        x, y = (_medians_and_bars(chosen, name) for name in ("disorder", "value"))
        mark = axes.errorbar(
            x[0], y[0], yerr=y[1], xerr=x[1], linestyle="none", marker="o", markersize=3.8, color=style.INK,
            markerfacecolor=style.HIGHLIGHT if resolved else "white", markeredgecolor=style.INK,
            markeredgewidth=style.line(0.8), elinewidth=style.line(0.9), capsize=1.8, capthick=style.line(0.9),
            zorder=5,
        )  # fmt: skip
        handles.append(mark)
        texts.append(text)
    return Entries(handles, texts)


def _medians_and_bars(crossings: list[Crossing], name: str) -> tuple[FloatArray, FloatArray]:
    """Medians, shape (n,), and lengths of the 68 % bars, shape (2, n), of one coordinate of the crossings."""
    intervals = [getattr(each, name) for each in crossings]
    medians = np.array([each.median for each in intervals])
    bars = np.array([[each.median - each.low68, each.high68 - each.median] for each in intervals]).T
    return medians, np.abs(bars)


def _limits(axes: Axes, curves: Curves) -> None:
    _, disorder, mean, error = curves.flat()
    style.pad_limits(axes.set_xlim, *style.spread(disorder), share=0.04)
    style.pad_limits(axes.set_ylim, *style.spread(mean, error), share=0.06)


def _end(size: float, last: tuple[float, float], crossings: Crossings | None) -> tuple[float, float]:
    """Where the curve of a size ends: its smoother if there is one, else its last point."""
    for smooth in crossings.smooth if crossings is not None else ():
        if smooth.size == size:
            return float(smooth.grid[-1]), float(smooth.mean[-1])
    return last


def _inset_window(curves: Curves, crossings: list[Crossing]) -> tuple[float, float] | None:
    """Disorders that the inset shows: all crossings, with as much of their intervals as there is room for.

    None where there is nothing to enlarge.
    """
    if not crossings:
        return None
    (low, high), width = curves.disorder_range, float(np.ptp(curves.disorder_range))
    medians, bars = _medians_and_bars(crossings, "disorder")
    least = float(np.ptp(medians)) / 2 + LEAST_SHOWN * width
    if 2 * least > ENLARGED * width:
        return None
    whole = 1.3 * float(np.max(medians + bars[1]) - np.min(medians - bars[0])) / 2
    half = min(max(least, whole), ENLARGED * width / 2)
    centre = float(np.clip((medians.min() + medians.max()) / 2, low + half, high - half))
    return centre - half, centre + half


def _inset(
    axes: Axes, curves: Curves, crossings: Crossings, found: list[Crossing], window: tuple[float, float]
) -> None:
    """Enlarge the crossings in that corner that needs the least room made for it."""
    lowest, highest = _heights(curves, crossings, found, window)
    step = (highest - lowest) / 3
    size = style.letters(style.SMALL) / 72 / (axes.get_window_extent().width / style.figure_of(axes).dpi)
    room = Inset(label_width=max(0.1, (DIGIT * _characters(lowest, highest, step) + 0.8) * size))
    inset = place_inset(axes, *_occupied(curves, crossings), room)
    inset.set_xlim(*window)
    style.pad_limits(inset.set_ylim, lowest, highest, share=0.08)
    _content(inset, curves, crossings, found)
    axes.indicate_inset(
        (window[0], inset.get_ylim()[0], window[1] - window[0], np.ptp(inset.get_ylim())),
        edgecolor=style.FAINT, linewidth=style.line(0.6), alpha=1.0, zorder=0.5,
    )  # fmt: skip


def _heights(
    curves: Curves, crossings: Crossings, found: list[Crossing], window: tuple[float, float]
) -> tuple[float, float]:
    """Lowest and highest end of what the inset shows."""
    ends = [np.array([each.value.low68, each.value.high68]) for each in found if each.value]
    for x, y, sd in [
        *((each.disorder, each.mean, each.error) for each in curves.curves),
        *((each.grid, each.mean, each.sd) for each in crossings.smooth),
    ]:
        mask = (x >= window[0]) & (x <= window[1])
        ends += [(y - sd)[mask], (y + sd)[mask]]
    every = np.concatenate(ends)
    return float(every.min()), float(every.max())


def _characters(lowest: float, highest: float, step: float) -> int:
    """Length of a number on an axis with such a step: digits, point, leading zeros if no power is split off, sign."""
    largest = max(abs(lowest), abs(highest))
    top, last = exponent(largest), exponent(step or largest)
    zeros = -top if -3 <= top < 0 else 0
    return max(top - last + 1, 1) + 1 + zeros + (lowest < 0)


def _occupied(curves: Curves, crossings: Crossings) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Abscissae of everything drawn, with its lower and upper ends, each of shape (n,)."""
    _, disorder, mean, error = curves.flat()
    parts = [(disorder, mean - error, mean + error)]
    parts += [(each.grid, each.mean - each.sd, each.mean + each.sd) for each in crossings.smooth]
    x, low, high = (np.concatenate(column) for column in zip(*parts, strict=True))
    return x, low, high
