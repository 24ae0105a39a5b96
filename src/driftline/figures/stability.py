"""Does the critical disorder stay where it is when sizes or disorders are left out: a map of the refits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from driftline import numerals
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.headline import headline_fit
from driftline.figures.misfit import colour_bar, diverging

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit
    from driftline.stability import StabilityRow

REACH = 3.0  # the colours go to so many standard deviations
POOR_P = 0.01  # below this a cell shows its p-value

Window = tuple[float, float]


def draw_stability(rows: Sequence[StabilityRow], full: CollapseFit, *, ax: Axes | None = None) -> Axes:
    """Draw the critical disorder of every refit: smallest size upwards, disorder window to the right.

    Parameters
    ----------
    rows : sequence of StabilityRow
        Refits; those of other ansätze are passed over.
    full : CollapseFit
        The fit to all data, with a critical disorder.
    ax : matplotlib axes, optional
        Where to draw; by default a new figure of single-column width.

    Returns
    -------
    matplotlib axes
        Cells are counted from 0, windows from the widest, sizes from the smallest.
    """
    mine = [row for row in rows if row.ansatz == full.ansatz.name]
    everything = (full.curves.disorder_range, float(full.curves.sizes[0]))
    windows = sorted({everything[0], *(row.window for row in mine)}, key=lambda window: window[0] - window[1])
    sizes = sorted({everything[1], *(row.smallest_size for row in mine)})
    with style.house_style():
        own = ax is None
        axes = style.new_figure(style.SINGLE, max(1.7, 0.95 + 0.5 * len(sizes))).subplots() if ax is None else ax
        _cells(axes, mine, full, windows, sizes)
        colour_bar(axes, REACH, r"shift / its $\sigma$")
        axes.set_xticks(range(len(windows)), [_window_text(window) for window in windows])
        axes.set_yticks(range(len(sizes)), labels.sizes(sizes))
        axes.tick_params(length=0)
        axes.set_xlabel(f"{labels.disorder_label(full.curves.labels)}, range used")
        axes.set_ylabel("smallest $L$")
        if own:
            finish(style.figure_of(axes))
    return axes


class StabilityDrawing(Drawing):
    """`figures/stability`: of the fit that the headline rests on."""

    name = "stability"

    def applies(self, analysis: Analysis) -> bool:
        """Whether that fit was repeated with less."""
        fit = headline_fit(analysis)
        return "W_c" in fit.parameters and any(row.ansatz == fit.ansatz.name for row in analysis.stability)

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        return (
            f"Critical disorder under {headline_fit(analysis).ansatz.name} when the smallest sizes and the outer "
            "disorders are left out; colour and second line: shift against the fit to all data, in units of the "
            f"standard deviation expected by chance; p-values where they are below {POOR_P:g}; hatched: not tried."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_stability(analysis.stability, headline_fit(analysis)))


def _cells(
    axes: Axes, rows: Sequence[StabilityRow], full: CollapseFit, windows: Sequence[Window], sizes: Sequence[float]
) -> None:
    whole = full.parameters["W_c"]
    shifts = np.full((len(sizes), len(windows)), np.nan)
    texts = {(0, 0): f"{numerals.short(whole)}\nall data"}
    shifts[0, 0] = 0.0
    for row in rows:
        at = sizes.index(row.smallest_size), windows.index(row.window)
        shifts[at] = row.significance(whole)
        poor = f"\np = {numerals.probability(row.p_value)}" if row.p_value < POOR_P else ""
        texts[at] = f"{numerals.short(row.disorder)}\n{_signed(shifts[at])}{poor}"
    colours, norm = diverging(REACH)
    edges = (np.arange(len(windows) + 1) - 0.5, np.arange(len(sizes) + 1) - 0.5)
    axes.set_facecolor("white")
    axes.patch.set(hatch="///", edgecolor=style.FAINT)
    axes.pcolormesh(*edges, np.ma.masked_invalid(shifts), cmap=colours, norm=norm, edgecolors="white", linewidth=1.0)
    axes.set(xlim=edges[0][[0, -1]], ylim=edges[1][[0, -1]])
    room = 0.72 * style.figure_of(axes).get_figwidth() * 72 / len(windows)  # points; the rest is labels and colours
    longest = max(len(line) for text in texts.values() for line in text.split("\n"))
    size = min(style.letters(), room / (0.62 * longest))  # a digit is 0.62 of its height wide
    for (line, column), text in texts.items():
        dark = abs(shifts[line, column]) > 0.6 * REACH
        axes.text(
            column, line, text, ha="center", va="center", fontsize=size, color="white" if dark else style.INK,
            parse_math=False,
        )  # fmt: skip


def _signed(value: float) -> str:
    return f"{value:+.1f}".replace("-", "\N{MINUS SIGN}") + " \N{GREEK SMALL LETTER SIGMA}"


def _window_text(window: Window) -> str:
    """Ends of a window, to a hundredth of its width."""
    step = (window[1] - window[0]) / 100
    return " to\n".join(numerals.rounded(end, step, 1).replace("-", "\N{MINUS SIGN}") for end in window)
