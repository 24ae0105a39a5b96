"""Crossing points against 1/L and against L with the fitted drift laws."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline.curves import FloatArray, Labels
from driftline.figures import style
from driftline.figures.base import Drawing
from driftline.numerals import probability

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.drift import Drift, LawFit

MOST_LAWS = 2  # of each family
BEYOND = 1.6  # the panel against L goes on to this many times the largest size


def draw_drift(drift: Drift, labels: Labels | None = None, *, ax: tuple[Axes, Axes] | None = None) -> tuple[Axes, Axes]:
    """Draw crossover disorder against 1/L (left) and L (right), with the laws' medians and 68 % bands.

    Parameters
    ----------
    drift : Drift
    labels : Labels, optional
        Symbol and unit of the disorder.
    ax : pair of matplotlib axes, optional
        Where to draw; by default a new figure of double-column width.

    Returns
    -------
    pair of matplotlib axes
        Without anything to fit, the points that there are and the sentence that says why.
    """
    labels = labels or Labels()
    with style.house_style():
        own = ax is None
        left, right = style.new_figure(style.DOUBLE, 2.7).subplots(1, 2, sharey=True) if ax is None else ax
        _limits(left, right, drift)
        handles, texts = _laws(left, right, drift)
        _points(left, right, drift)
        left.set_xlabel("$1/L$")
        right.set_xlabel("$L$")
        left.set_ylabel(style.disorder_label(labels))
        if drift.note:
            _note(left, drift)
        half = len(handles) if len(handles) < 3 else -(-len(handles) // 2)
        style.legend_above(left, style.Entries(handles[:half], texts[:half]))
        style.legend_above(right, style.Entries(handles[half:], texts[half:]))
        if own:
            wide = len(drift.sizes) > 0 and float(np.ptp(right.get_xlim())) > 4
            style.finish(style.figure_of(left), whole=(right.xaxis,) if wide else ())
    return left, right


class DriftDrawing(Drawing):
    """`figures/drift`."""

    name = "drift"
    width = style.DOUBLE

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        return (
            f"Disorder of the {analysis.drift.source} against inverse size and size, with one standard deviation; "
            "lines and bands: the two most probable laws with a limit and without, with their 68 % bands and posterior "
            "probabilities; at 1/L = 0 the limits of the former with 68 % intervals."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        figure = draw_drift(analysis.drift, analysis.curves.labels)[0].figure
        assert isinstance(figure, Figure)
        return figure


def shown_laws(drift: Drift) -> tuple[LawFit, ...]:
    """The most probable laws of each family, in the order of the registry; seven bands hide each other."""
    kept: list[LawFit] = []
    for bounded in (True, False):
        family = sorted((law for law in drift.laws if law.bounded == bounded), key=lambda law: -law.probability)
        kept += family[:MOST_LAWS]
    return tuple(law for law in drift.laws if law in kept)


def _points(left: Axes, right: Axes, drift: Drift) -> None:
    if not len(drift.sizes):
        return
    look: dict[str, Any] = {
        "linestyle": "none", "marker": "o", "markersize": 4.0, "color": style.INK, "elinewidth": 0.9, "capsize": 2.0,
        "zorder": 5,
    }  # fmt: skip
    sd = _sd(drift)
    left.errorbar(1 / drift.sizes, drift.positions, sd, **look)
    right.errorbar(drift.sizes, drift.positions, sd, **look)


def _laws(left: Axes, right: Axes, drift: Drift) -> tuple[list[Any], list[str]]:
    handles, texts = [], []
    for number, law in enumerate(shown_laws(drift)):
        colour, dashes = style.PALETTE[number % len(style.PALETTE)], style.DASHES[number % len(style.DASHES)]
        for axes, inverse in ((left, True), (right, False)):
            x, sizes = _grid(axes, inverse)
            middle, low, high = law.predict(sizes)
            (line,) = axes.plot(x, middle, color=colour, linestyle=dashes, zorder=3)
            axes.fill_between(x, low, high, color=colour, alpha=0.16, linewidth=0, zorder=1)
        handles.append(line)
        texts.append(f"P({law.name}) = {probability(law.probability)}")
    _asymptotes(left, drift)
    return handles, texts


def _grid(axes: Axes, inverse: bool) -> tuple[FloatArray, FloatArray]:
    """Abscissae over the whole panel, and the sizes they stand for; 1/L = 0 itself is no size."""
    low, high = axes.get_xlim()
    x = np.linspace(max(low, 1e-3 * high), high, 300)
    return x, 1 / x if inverse else x


def _asymptotes(left: Axes, drift: Drift) -> None:
    """The limits of the bounded laws side by side in the strip left of 1/L = 0, each in the colour of its law."""
    low, _ = left.get_xlim()
    bounded = [(number, law.limit) for number, law in enumerate(shown_laws(drift)) if law.limit is not None]
    if len(drift.sizes):
        left.axvline(0.0, color=style.FAINT, linewidth=0.6, zorder=1)
    for order, (number, limit) in enumerate(bounded, start=1):
        colour = style.PALETTE[number % len(style.PALETTE)]
        bars = np.abs([[limit.median - limit.low68], [limit.high68 - limit.median]])
        left.errorbar(
            [low * order / (len(bounded) + 1)], [limit.median], bars, marker="D", markersize=3.0, color=colour,
            markerfacecolor="white", markeredgecolor=colour, elinewidth=0.9, capsize=1.4, zorder=4,
        )  # fmt: skip


def _limits(left: Axes, right: Axes, drift: Drift) -> None:
    """Every point with its error bar, zero on the 1/L axis, and the limits of bounded laws as far as they are known."""
    sizes = drift.sizes if len(drift.sizes) else np.array([4.0, 16.0])
    largest = 1 / float(np.min(sizes))
    left.set_xlim(-0.1 * largest, 1.08 * largest)
    low, high = float(np.min(sizes)), float(np.max(sizes))
    right.set_xlim(low - 0.08 * (BEYOND * high - low), BEYOND * high)
    if not len(drift.sizes):
        left.set_ylim(0.0, 1.0)
        for axis in (left.xaxis, right.xaxis, left.yaxis):
            axis.set_ticks([])  # without points there is no scale
        return
    bottom, top = style.spread(drift.positions, _sd(drift))
    reach = 1.2 * max(top - bottom, 1e-9 * abs(top))  # a limit far away must not flatten the points
    for law in shown_laws(drift):
        if law.limit is not None:
            bottom = min(bottom, max(law.limit.low68, bottom - reach))
            top = max(top, min(law.limit.high68, top + reach))
    style.pad_limits(left.set_ylim, bottom, top, share=0.08)


def _note(axes: Axes, drift: Drift) -> None:
    axes.text(
        0.5, 0.96, textwrap.fill(drift.note, 46), transform=axes.transAxes, ha="center", va="top", color=style.SOFT,
        fontsize=7.5, parse_math=False,
    )  # fmt: skip


def _sd(drift: Drift) -> FloatArray:
    return np.sqrt(np.diag(drift.covariance))
