"""How every figure looks: sizes, colours, markers, labels, legends, and files that come out the same twice.

The object interface of matplotlib is used throughout: no window, no current figure, and the user's own settings are
neither read nor changed.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.axis import Axis, XAxis
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.legend import Legend
from matplotlib.lines import Line2D
from matplotlib.mathtext import MathTextParser
from matplotlib.ticker import AutoLocator, MaxNLocator, ScalarFormatter
from matplotlib.transforms import ScaledTranslation

from driftline.curves import FloatArray, Labels

SINGLE, DOUBLE = 3.4, 7.0  # inches: one and two columns of the usual journals
DPI = 300
ROOM = 0.97  # share of an axis that a legend or label may take: the last layout moves the edges by a little
BREAK_FROM = 1.2  # a label so many times too long is broken, before its letters get smaller than 7 points
MARKERS = "os^DvPX<>ph*"
INK, SOFT, FAINT = "#1a1a1a", "#5a5a5a", "#9a9a9a"
#: Okabe and Ito's palette (common practice for colour-blind readers), for things that have no order.
PALETTE = ("#0072b2", "#d55e00", "#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#8a6d00")
DASHES: tuple[Any, ...] = (
    "-",
    (0, (5, 2)),
    (0, (1.2, 1.4)),
    (0, (6, 1.5, 1.2, 1.5)),
    (0, (9, 2.5)),
    (0, (3, 1.2)),
    "-.",
)

SETTINGS: Any = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],  # comes with matplotlib, so every machine draws the same
    "mathtext.fontset": "dejavusans",
    "font.size": 8.0,
    "axes.labelsize": 8.5,
    "axes.linewidth": 0.6,
    "axes.labelpad": 3.0,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.top": True,
    "ytick.right": True,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 3.0,
    "ytick.major.size": 3.0,
    "legend.fontsize": 7.5,
    "legend.title_fontsize": 7.5,
    "legend.frameon": False,
    "lines.linewidth": 1.0,
    "pdf.fonttype": 42,  # TrueType, which journals ask for and editors can change
    "savefig.bbox": "standard",
    "figure.dpi": 100,
    "savefig.dpi": DPI,
    "svg.hashsalt": "driftline",
}


@contextmanager
def house_style() -> Iterator[None]:
    """Matplotlib's defaults with `SETTINGS` on top, whatever the user has set; restored afterwards."""
    defaults: Any = mpl.rcParamsDefault
    with mpl.rc_context({**{name: defaults[name] for name in defaults if "backend" not in name}, **SETTINGS}):
        yield


def new_figure(width: float, height: float) -> Figure:
    """An empty figure of this size in inches that makes room for everything in it."""
    figure = Figure(figsize=(width, height), layout=ConstrainedLayoutEngine(w_pad=0.04, h_pad=0.04, wspace=0.03))
    FigureCanvasAgg(figure)
    return figure


def save(figure: Figure, path: Path) -> None:
    """Write `figure` in the format that the name of `path` says, without dates: equal figures are equal files."""
    metadata = {".pdf": {"CreationDate": None}, ".svg": {"Date": None}}.get(path.suffix, {})
    with house_style():
        figure.savefig(path, metadata=metadata)


@dataclass(frozen=True)
class SizeLook:
    """Colour and marker of one size."""

    colour: tuple[float, float, float, float]
    marker: str
    filled: bool


def size_looks(sizes: Sequence[float] | FloatArray) -> list[SizeLook]:
    """A look for each size: colour from dark to light, which grey keeps, and a marker of its own.

    Every other marker is hollow, so that neighbours differ in shape, fill and lightness.
    """
    colours = mpl.colormaps["viridis"](np.linspace(0.0, 0.82, len(sizes)))
    return [
        SizeLook(tuple(colour), MARKERS[number % len(MARKERS)], number % 2 == 0)
        for number, colour in enumerate(colours)
    ]


def point_style(look: SizeLook, marker_size: float) -> dict[str, Any]:
    """Keyword arguments of `Axes.errorbar` for points of one size: error bars stand out over small markers."""
    return {
        "linestyle": "none",
        "marker": look.marker,
        "markersize": marker_size,
        "color": look.colour,
        "markerfacecolor": look.colour if look.filled else "white",
        "markeredgecolor": look.colour,
        "markeredgewidth": 0.7,
        "elinewidth": 0.8,
        "capsize": 1.6,
        "capthick": 0.8,
    }


def marker_size(errors: FloatArray, low: float, high: float, height: float) -> float:
    """Marker size in points, small enough for error bars to be seen beside it where that is possible.

    `low` to `high` is the range of the axis and `height` its length in inches.
    """
    bar = 2 * float(np.median(errors)) / (high - low) * height * 72 if high > low else np.inf
    return float(np.clip(0.9 * bar, 2.6, 3.8))


def math(symbol: str) -> str:
    """`symbol` as mathtext, or as it stands if it cannot be typeset."""
    bare = symbol.replace("$", "")
    try:
        MathTextParser("path").parse(f"${bare}$")
    except ValueError:
        return symbol.replace("$", r"\$")
    return f"${bare}$" if bare.strip() else ""


def disorder_label(labels: Labels) -> str:
    """Axis label of the disorder: symbol and unit."""
    unit = labels.disorder_unit.replace("$", r"\$")
    return math(labels.disorder_symbol) + (f" ({unit})" if unit else "")


def observable_label(labels: Labels) -> str:
    """Axis label of the observable: its symbol."""
    return math(labels.observable_symbol)


def figure_of(ax: Axes) -> Figure:
    """The whole figure that `ax` is part of."""
    figure = ax.get_figure(root=True)
    assert figure is not None, "axes that were removed from their figure cannot be drawn into"
    return figure


def pad_limits(axis_limits: Any, low: float, high: float, share: float = 0.05) -> None:
    """Set limits through `axis_limits` (``ax.set_xlim`` or ``ax.set_ylim``) with a margin around low to high."""
    span = high - low
    margin = share * span if span > 0 else 0.05 * (abs(high) or 1.0)
    axis_limits(low - margin, high + margin)


def spread(values: FloatArray, errors: FloatArray | float = 0.0) -> tuple[float, float]:
    """Smallest and largest end of the error bars."""
    return float(np.min(values - errors)), float(np.max(values + errors))


@dataclass(frozen=True)
class Entries:
    """Legend entries that belong together, with a few words in front of them."""

    handles: Sequence[Any]
    texts: Sequence[str]
    title: str = ""

    def pairs(self) -> list[tuple[Any, str]]:
        """Handle and text of each entry; the title is an entry without a handle, which saves a line."""
        head = [(_blank(), self.title)] if self.title else []
        return head + list(zip(self.handles, self.texts, strict=True))


def legend_above(ax: Axes, *groups: Entries) -> None:
    """Legend above the axes and no wider than they are: in one row if all groups fit, else the groups stacked."""
    groups = tuple(group for group in groups if group.handles)
    if not groups:
        return
    everything = [pair for group in groups for pair in group.pairs()]
    if _fits(ax, _add_legend(ax, everything, len(everything), 0.0)):
        return
    ax.get_legend().remove()  # type: ignore[union-attr]
    height = 0.0
    for group in reversed(groups):
        height += _narrowed(ax, group.pairs(), height)


def _narrowed(ax: Axes, pairs: list[tuple[Any, str]], height: float) -> float:
    """Add a legend with as many columns as fit, `height` inches above the axes; return its own height."""
    for rows in range(1, len(pairs) + 1):
        columns = -(-len(pairs) // rows)  # rows of nearly equal length
        legend = _add_legend(ax, pairs, columns, height)
        if columns == 1 or _fits(ax, legend):
            break
        legend.remove()
    ax.legend_ = None  # else the next legend would take this one's place
    ax.add_artist(legend)
    legend.set_clip_on(False)  # `add_artist` clips to the axes, outside of which the legend lies
    return float(legend.get_window_extent().height / figure_of(ax).dpi)


def _add_legend(ax: Axes, pairs: list[tuple[Any, str]], columns: int, height: float) -> Legend:
    return ax.legend(
        *_row_by_row(pairs, columns),
        loc="lower left",
        bbox_to_anchor=(0.0, 1.0),
        bbox_transform=ax.transAxes + ScaledTranslation(0.0, height, figure_of(ax).dpi_scale_trans),
        ncols=columns,
        borderaxespad=0.2,
        borderpad=0.2,
        columnspacing=0.9,
        handlelength=1.7 if any(handle_is_line(handle) for handle, _ in pairs) else 1.0,
        handletextpad=0.4,
        labelspacing=0.3,
    )


def handle_is_line(handle: Any) -> bool:
    """Whether a legend entry is a line, whose dashes need room to be told apart."""
    return isinstance(handle, Line2D) and handle.get_linestyle() != "None"


def _fits(ax: Axes, legend: Legend) -> bool:
    # neither width depends on where the layout puts things later, so nothing has to be drawn to compare them
    return bool(legend.get_window_extent().width <= ROOM * ax.get_window_extent().width)


def _blank() -> Line2D:
    return Line2D([], [], linestyle="none")


def _row_by_row(entries: list[Any], columns: int) -> tuple[list[Any], list[str]]:
    """Matplotlib fills a legend column by column; reorder so that it reads row by row."""
    rows = -(-len(entries) // columns)
    filled = entries + [None] * (rows * columns - len(entries))
    by_column = [filled[row * columns + column] for column in range(columns) for row in range(rows)]
    kept = [(_blank(), "") if entry is None else entry for entry in by_column]
    return [handle for handle, _ in kept], [text for _, text in kept]


def finish(figure: Figure, whole: Sequence[Axis] = ()) -> None:
    """Last touches once everything is drawn: ticks that do not touch, powers of ten in labels, labels that fit.

    The axes in `whole` get ticks at whole numbers. Laying a figure out costs a tenth of a second, so it is done once
    before and once after, and then frozen.
    """
    figure.draw_without_rendering()
    for ax in figure.axes:
        for axis in (ax.xaxis, ax.yaxis):
            if isinstance(axis.get_major_locator(), AutoLocator):  # not where ticks were chosen, or taken off
                axis.set_major_formatter(_formatter())
                _thin_ticks(axis, whole=axis in whole)
                _power_into_label(axis)
            _shrink_label(ax, axis)
    figure.align_ylabels()
    figure.draw_without_rendering()
    figure.set_layout_engine("none")


def _formatter() -> ScalarFormatter:
    formatter = ScalarFormatter(useOffset=False, useMathText=False)  # plain text needs no parsing, a third of the time
    formatter.set_powerlimits((-3, 6))
    return formatter


def _thin_ticks(axis: Axis, *, whole: bool) -> None:
    horizontal = isinstance(axis, XAxis)
    for count in (6, 5, 4, 3, 2):
        axis.set_major_locator(MaxNLocator(count, steps=[1, 2, 2.5, 5, 10], integer=whole))
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
