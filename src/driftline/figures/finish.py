"""Last touches once everything is drawn: ticks that do not touch, powers of ten in labels, labels that fit."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import Any

from matplotlib.axes import Axes
from matplotlib.axis import Axis, XAxis
from matplotlib.figure import Figure
from matplotlib.ticker import AutoLocator, MaxNLocator, ScalarFormatter

from driftline.figures.style import quiet_about_letters

ROOM = 0.97  # share of an axis that its label may take: the last layout moves the edges by a little
BREAK_FROM = 1.2  # a label so many times too long is broken, before its letters get smaller


def finish(figure: Figure, *, whole: Sequence[Axis] = (), few: bool = False) -> None:
    """Last touches once everything is drawn: ticks that do not touch, powers of ten in labels, labels that fit.

    Laying a figure out costs a tenth of a second, so it is done once before and once after, and then frozen.

    Parameters
    ----------
    figure : matplotlib figure
    whole : sequence of matplotlib axis
        Those that get ticks at whole numbers only.
    few : bool
        Three ticks at most, and none at the ends, for panels that touch each other.
    """
    with quiet_about_letters():
        _finish(figure, whole, few)


def _finish(figure: Figure, whole: Sequence[Axis], few: bool) -> None:
    laid_out = figure.get_layout_engine() is not None
    if laid_out:
        figure.draw_without_rendering()
    insets = [inset for ax in figure.axes for inset in ax.child_axes]
    for ax in panels(figure):
        for axis in (ax.xaxis, ax.yaxis):
            if isinstance(axis.get_major_locator(), AutoLocator):  # not where ticks were chosen, or taken off
                axis.set_major_formatter(_formatter())
                _thin_ticks(axis, whole=axis in whole, few=few or ax in insets)
            if isinstance(axis.get_major_formatter(), ScalarFormatter):  # also where ticks are those of another panel
                _power_into_label(axis)
            _shrink_label(ax, axis)
    for ax in figure.axes:
        for inset in ax.child_axes:
            _same_power(ax.xaxis, inset.xaxis)
            _same_power(ax.yaxis, inset.yaxis)
    if laid_out:
        figure.align_ylabels()
        figure.draw_without_rendering()
        figure.set_layout_engine("none")


def panels(figure: Figure) -> list[Axes]:
    """All axes of a figure, insets included."""
    found: list[Any] = [*figure.axes, *(inset for ax in figure.axes for inset in ax.child_axes)]
    return found


def _formatter() -> ScalarFormatter:
    formatter = ScalarFormatter(useOffset=False, useMathText=False)  # plain text needs no parsing, a third of the time
    formatter.set_powerlimits((-3, 6))
    return formatter


def _same_power(outer: Axis, inner: Axis) -> None:
    """An inset has no room for a power of ten, so it takes that of the axes around it."""
    text = outer.get_major_formatter().get_offset()
    power = int(text.partition("e")[2].replace("\N{MINUS SIGN}", "-")) if text else 0
    formatter = _formatter()
    if power:
        formatter.set_powerlimits((power, power))
    else:
        formatter.set_scientific(False)
    inner.set_major_formatter(formatter)


def _thin_ticks(axis: Axis, *, whole: bool, few: bool) -> None:
    horizontal = isinstance(axis, XAxis)
    prune = "both" if few else None
    for count in (3, 2, 1) if few else (6, 5, 4, 3, 2):
        axis.set_major_locator(MaxNLocator(count, steps=[1, 2, 2.5, 5, 10], integer=whole, prune=prune))
        axis.get_tightbbox()  # places the ticks
        boxes = [label.get_window_extent() for label in shown_ticks(axis)]
        ends = sorted((box.x0, box.x1) if horizontal else (box.y0, box.y1) for box in boxes)
        gap = 5.0 if horizontal else 2.0  # pixels at 100 per inch
        if all(before[1] + gap <= after[0] for before, after in pairwise(ends)):
            return


def shown_ticks(axis: Axis) -> list[Any]:
    """Tick labels of an axis that can be seen."""
    low, high = sorted(axis.get_view_interval())
    slack = 1e-9 * (high - low)
    return [
        tick.label1
        for tick in axis.get_major_ticks()
        if tick.label1.get_visible() and tick.label1.get_text() and low - slack <= tick.get_loc() <= high + slack
    ]


def _power_into_label(axis: Axis) -> None:
    """Write a common power of ten beside the axis label: above the axes it would collide with the legend."""
    text = axis.get_major_formatter().get_offset()  # "1e-6", or nothing
    axis.get_offset_text().set_visible(False)
    if text and axis.label.get_text():
        power = text.partition("e")[2].replace("\N{MINUS SIGN}", "-")
        axis.set_label_text(f"{axis.label.get_text()}  [$10^{{{power}}}$]")


def _shrink_label(ax: Axes, axis: Axis) -> None:
    """Make a long label no longer than its axis: the unit goes to a second line, then the letters get smaller."""
    if _excess(ax, axis) > BREAK_FROM:
        head, bracket, unit = axis.label.get_text().rpartition(" (")
        axis.set_label_text(f"{head}\n({unit}" if bracket else unit)
    excess = _excess(ax, axis)
    if excess > 1:
        axis.label.set_fontsize(float(axis.label.get_fontsize()) / excess)


def _excess(ax: Axes, axis: Axis) -> float:
    """Length of the label over the room for it."""
    box, room = axis.label.get_window_extent(), ax.get_window_extent()
    length, space = (box.width, room.width) if isinstance(axis, XAxis) else (box.height, room.height)
    return float(length / (ROOM * space))
