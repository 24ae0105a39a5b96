"""Crossing points against 1/L and against L with the fitted drift laws."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline.curves import FloatArray, Labels
from driftline.figures import labels as texts_of
from driftline.figures import style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.legends import Entries, legend_above, legend_across
from driftline.numerals import probability

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.drift import Drift, LawFit
    from driftline.inference.intervals import Interval

MOST_LAWS = 2  # of each family
ARROW = 0.12  # length of the arrow at a bound, as a share of the ordinate
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
        left, right = _panels() if ax is None else ax
        _limits(left, right, drift)
        groups = _laws(left, right, drift)
        _points(left, right, drift)
        left.set_xlabel("$1/L$")
        right.set_xlabel("$L$")
        left.set_ylabel(texts_of.disorder_label(labels))
        if own and style.is_narrow(style.figure_of(left)):
            right.set_ylabel(texts_of.disorder_label(labels))
        if drift.note:
            _note(left, drift)
        if own:
            legend_across(style.figure_of(left), *groups)
        else:
            for axes, group in zip((left, right), groups, strict=True):
                legend_above(axes, group)
        if own:
            wide = len(drift.sizes) > 0 and float(np.ptp(right.get_xlim())) > 4
            finish(style.figure_of(left), whole=(right.xaxis,) if wide else ())
    return left, right


def _panels() -> tuple[Axes, Axes]:
    figure = style.new_figure(style.DOUBLE, 2.7, narrow=4.6)
    shape = (2, 1) if style.is_narrow(figure) else (1, 2)
    left, right = figure.subplots(*shape, sharey=True)
    return left, right


class DriftDrawing(Drawing):
    """`figures/drift`."""

    name = "drift"
    width = style.DOUBLE

    def applies(self, analysis: Analysis) -> bool:
        """Whether there is a point at all; why there is none is said in the text."""
        return len(analysis.drift.sizes) > 0

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        return (
            f"Disorder of the {analysis.drift.source} against inverse size and size, with one standard deviation; "
            "lines and bands: the two most probable laws with a limit and without, with their 68 % bands and posterior "
            "probabilities; at 1/L = 0 the limits of the former with 68 % intervals, or an arrow from the 97.5 % bound "
            "where only one side is constrained."
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
        "linestyle": "none", "marker": "o", "markersize": 4.0, "color": style.INK, "elinewidth": style.line(0.9),
        "capsize": 2.0, "zorder": 5,
    }  # fmt: skip
    sd = _sd(drift)
    left.errorbar(1 / drift.sizes, drift.positions, sd, **look)
    right.errorbar(drift.sizes, drift.positions, sd, **look)


def _laws(left: Axes, right: Axes, drift: Drift) -> list[Entries]:
    """Draw laws and limits; legend entries of the laws with a limit, and of those without."""
    entries: dict[bool, list[tuple[Any, str]]] = {True: [], False: []}
    for number, law in enumerate(shown_laws(drift)):
        colour, dashes = style.colour(number), style.DASHES[number % len(style.DASHES)]
        for axes, inverse in ((left, True), (right, False)):
            x, sizes = _grid(axes, inverse)
            middle, low, high = law.predict(sizes)
            (line,) = axes.plot(x, middle, color=colour, linestyle=dashes, zorder=3)
            axes.fill_between(x, low, high, color=colour, alpha=0.16, linewidth=0, zorder=1)
        entries[law.bounded].append((line, f"{law.name} {probability(law.probability)}"))
    _asymptotes(left, drift)
    return [Entries([line for line, _ in family], [text for _, text in family]) for family in entries.values()]


def _grid(axes: Axes, inverse: bool) -> tuple[FloatArray, FloatArray]:
    """Abscissae over the whole panel, and the sizes they stand for; 1/L = 0 itself is no size."""
    low, high = axes.get_xlim()
    x = np.linspace(max(low, 1e-3 * high), high, 300)
    return x, 1 / x if inverse else x


def _asymptotes(left: Axes, drift: Drift) -> None:
    """The limits of the bounded laws side by side in the strip left of 1/L = 0, each in the colour of its law."""
    low, _ = left.get_xlim()
    bounded = [(number, law) for number, law in enumerate(shown_laws(drift)) if law.limit is not None]
    if len(drift.sizes):
        left.axvline(0.0, color=style.FAINT, linewidth=style.line(0.6), zorder=1)
    for order, (number, law) in enumerate(bounded, start=1):
        kind = {
            "marker": "D", "markersize": 3.0, "color": style.colour(number), "markerfacecolor": "white",
            "markeredgecolor": style.colour(number), "elinewidth": style.line(0.9), "zorder": 4,
        }  # fmt: skip
        _limit(left, low * order / (len(bounded) + 1), law, kind)


def _limit(left: Axes, x: float, law: LawFit, kind: dict[str, Any]) -> None:
    """A limit with its interval; an arrow from a bound, or from the frame towards a limit that lies beyond it."""
    limit, side = law.limit, law.one_sided
    assert limit is not None  # callers have checked
    bottom, top = left.get_ylim()
    arrow, inset = ARROW * (top - bottom), 0.02 * (top - bottom)
    if side is None and bottom < limit.median < top:
        bars = [[limit.median - max(limit.low68, bottom)], [min(limit.high68, top) - limit.median]]
        left.errorbar([x], [limit.median], bars, capsize=1.4, **kind)
        return
    upwards = side == "above" if side else limit.median >= top
    bound = (limit.low95 if upwards else limit.high95) if side else limit.median
    start = float(np.clip(bound, bottom + inset + (0.0 if upwards else arrow), top - inset - (arrow if upwards else 0)))
    left.errorbar([x], [start], [[arrow]] * 2, lolims=upwards, uplims=not upwards, capsize=2.0, **kind)


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
    lowest, highest = bottom, top
    for law in shown_laws(drift):
        if law.limit is not None:
            ends = _shown_ends(law, law.limit)
            lowest, highest = min(lowest, *ends), max(highest, *ends)
    bottom, top = max(lowest, bottom - reach), min(highest, top + reach)
    style.pad_limits(left.set_ylim, bottom, top, share=0.08)


def _shown_ends(law: LawFit, limit: Interval) -> tuple[float, float]:
    if law.one_sided == "above":
        return limit.low95, limit.low95
    return (limit.high95, limit.high95) if law.one_sided == "below" else (limit.low68, limit.high68)


def _note(axes: Axes, drift: Drift) -> None:
    axes.text(
        0.0, 1.02, textwrap.fill(drift.note, 48), transform=axes.transAxes, ha="left", va="bottom", color=style.SOFT,
        fontsize=style.letters(), parse_math=False,
    )  # fmt: skip


def _sd(drift: Drift) -> FloatArray:
    return np.sqrt(np.diag(drift.covariance))
