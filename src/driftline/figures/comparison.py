"""The ansätze side by side: how well each explains all data, and how well it predicts the largest size."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter

from driftline import numerals
from driftline.curves import FloatArray
from driftline.figures import style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.legends import Entries, legend_above, legend_across

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit, Comparison

#: Texts, colours and markers of the hypotheses.
HYPOTHESES = {
    "transition": ("transition", 0, "o"),
    "drift": ("drift", 1, "s"),
    "none": ("no critical disorder", 2, "^"),
}
ROW = 0.21  # inches
LINEAR = 10.0  # differences of logarithms up to which the axis is linear; beyond, a form is out of the running anyway


def draw_comparison(comparison: Comparison, *, ax: tuple[Axes, Axes] | None = None) -> tuple[Axes, Axes]:
    """Draw evidence (left) and held-out score (right) of every ansatz relative to the best, the most probable first.

    Parameters
    ----------
    comparison : Comparison
    ax : pair of matplotlib axes, optional
        Where to draw; by default a new figure of double-column width.

    Returns
    -------
    pair of matplotlib axes
        Rows are counted from 0 at the top. Without a held-out size the right one is switched off.
    """
    order = sorted(range(len(comparison.fits)), key=lambda number: -comparison.fits[number].log_evidence)
    fits = [comparison.fits[number] for number in order]
    with style.house_style():
        own = ax is None
        left, right = _panels(len(fits)) if ax is None else ax
        narrow = style.is_narrow(style.figure_of(left))
        _column(left, fits, _evidences(fits), r"$\ln Z$ below the best")
        if any(fit.held_out is not None for fit in fits):
            _column(right, fits, _scores(fits), "held-out $\\ln p$\nbelow the best" if narrow else _held_out_text(fits))
            right.tick_params(labelleft=False)
        else:
            right.axis("off")
        names = [fit.ansatz.name.replace(":", ":\n") if narrow else fit.ansatz.name for fit in fits]
        left.set_yticks(range(len(fits)), names, parse_math=False)
        _probabilities(left, [comparison.probabilities[number] for number in order])
        entries = _entries(left, fits)
        if not own:
            legend_above(left, entries)
        else:
            legend_across(style.figure_of(left), entries)
            finish(style.figure_of(left))
    return left, right


class ComparisonDrawing(Drawing):
    """`figures/comparison`."""

    name = "comparison"
    width = style.DOUBLE

    def applies(self, analysis: Analysis) -> bool:
        """Whether there is anything to compare."""
        return len(analysis.comparison.fits) > 1

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        fits = analysis.comparison.fits
        sizes = {fit.held_out.size for fit in fits if fit.held_out is not None}
        held_out = "".join(
            f"; right, log probability of the data of size {numerals.sizes([size])[0]} as predicted from the smaller "
            "sizes"
            for size in sizes
        )
        return (
            f"Scaling forms compared: log evidence below the best form, with posterior probabilities{held_out}; "
            f"beyond {LINEAR:g} the axes are logarithmic."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_comparison(analysis.comparison)[0])


def _panels(count: int) -> tuple[Axes, Axes]:
    figure = style.new_figure(style.DOUBLE, 0.85 + ROW * count, narrow=0.95 + 1.6 * ROW * count)
    left, right = figure.subplots(1, 2, sharey=True)
    return left, right


def _evidences(fits: Sequence[CollapseFit]) -> tuple[FloatArray, FloatArray]:
    values = np.array([fit.log_evidence for fit in fits])
    return values - values.max(), np.array([fit.log_evidence_error for fit in fits])


def _scores(fits: Sequence[CollapseFit]) -> tuple[FloatArray, FloatArray]:
    """Held-out scores below the best with their errors; NaN where there is none."""
    values = np.array([np.nan if fit.held_out is None else fit.held_out.log_score for fit in fits])
    errors = np.array([np.nan if fit.held_out is None else fit.held_out.log_score_error for fit in fits])
    return values - np.nanmax(values), errors


def _held_out_text(fits: Sequence[CollapseFit]) -> str:
    size = next(fit.held_out.size for fit in fits if fit.held_out is not None)
    return rf"$\ln p(L = {numerals.sizes([size])[0]}\,|\,$smaller sizes$)$ below the best"


def _column(axes: Axes, fits: Sequence[CollapseFit], values: tuple[FloatArray, FloatArray], label: str) -> None:
    centre, error = values
    for row, fit in enumerate(fits):
        axes.axhline(row, color=style.FAINT, linewidth=style.line(0.4), linestyle=(0, (1, 3)), zorder=1)
        _, number, marker = HYPOTHESES[fit.ansatz.hypothesis]
        axes.errorbar(
            [centre[row]], [row], xerr=[error[row]], linestyle="none", marker=marker, markersize=4.2, capsize=1.8,
            color=style.colour(number), markerfacecolor=_face(number), elinewidth=style.line(0.9), zorder=3,
        )  # fmt: skip
    axes.axvline(0.0, color=style.FAINT, linewidth=style.line(0.6), zorder=1)
    axes.set_ylim(len(fits) - 0.5, -0.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel(label)
    _scale(axes, float(np.nanmin(centre - error)), float(np.nanmax(centre + error)))


def _face(number: int) -> Any:
    """Hollow for the second hypothesis, so that grey tells it from its neighbours."""
    return "white" if number == 1 else style.colour(number)


def _scale(axes: Axes, lowest: float, highest: float) -> None:
    """Linear where the best rivals are, logarithmic where forms are far off."""
    if lowest > -1.5 * LINEAR:
        style.pad_limits(axes.set_xlim, min(lowest, -1.0), highest, share=0.06)
        return
    axes.set_xscale("symlog", linthresh=LINEAR, linscale=1.0)
    decades = int(np.ceil(np.log10(-lowest) - 0.02))
    step = -(-(decades - 1) // (1 if style.is_narrow(style.figure_of(axes)) else 3))
    ticks = [0.0, *(-(10.0**power) for power in range(1, decades + 1, step))]
    axes.set_xticks(ticks)
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: _short(value)))
    axes.minorticks_off()
    axes.set_xlim(min(1.6 * lowest, 1.05 * ticks[-1]), max(1.2, 1.5 * highest))


def _short(value: float) -> str:
    minus = "\N{MINUS SIGN}" if value < 0 else ""
    size = abs(value)
    return f"{minus}{size:.0f}" if size < 1e4 else rf"${'-' if minus else ''}10^{{{np.log10(size):.0f}}}$"


def _probabilities(axes: Axes, probabilities: Sequence[float]) -> None:
    """Posterior probabilities in a column right of the evidences."""
    transform = axes.get_yaxis_transform()
    for row, value in enumerate(probabilities):
        axes.text(
            1.02, row, numerals.probability(value), transform=transform, va="center_baseline", ha="left",
            fontsize=style.letters(),
        )  # fmt: skip
    axes.text(1.02, 1.0, " $P$", transform=axes.transAxes, va="bottom", ha="left", fontsize=style.letters())


def _entries(axes: Axes, fits: Sequence[CollapseFit]) -> Entries:
    present = [key for key in HYPOTHESES if any(fit.ansatz.hypothesis == key for fit in fits)]
    handles = []
    for key in present:
        _, number, marker = HYPOTHESES[key]
        handles.append(
            axes.errorbar(
                [np.nan],
                [np.nan],
                xerr=[np.nan],
                linestyle="none",
                marker=marker,
                markersize=4.2,
                color=style.colour(number),
                markerfacecolor=_face(number),
            )
        )
    return Entries(handles, [HYPOTHESES[key][0] for key in present])
