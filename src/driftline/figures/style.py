"""How every figure looks: widths, letters, colours, markers, error bars, and files that come out the same twice.

The object interface of matplotlib is used throughout: no window, no current figure, and the user's own settings are
neither read nor changed. What the user asked for in ``[figure]`` is put on top of the house style by `drawn_with`.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Any

import matplotlib as mpl
import numpy as np
from cycler import cycler
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine

from driftline.curves import FloatArray
from driftline.figure_options import WIDTHS, FigureOptions, read_style

SINGLE, DOUBLE = WIDTHS["single"], WIDTHS["double"]
NARROW = 5.0  # inches: below this, panels that belong side by side are stacked
DPI = 300
MARKERS = "os^DvPX<>ph*"
INK, SOFT, FAINT = "#1a1a1a", "#5a5a5a", "#9a9a9a"
HIGHLIGHT = "#f5c542"
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
#: Size of letters in units of ordinary text.
LABEL, TICK, SMALL = 1.06, 0.94, 0.8

SETTINGS: Any = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],  # comes with matplotlib, so every machine draws the same
    "mathtext.fontset": "dejavusans",
    "axes.linewidth": 0.6,
    "axes.labelpad": 3.0,
    "axes.prop_cycle": cycler(color=PALETTE),
    "image.cmap": "viridis",
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.top": True,
    "ytick.right": True,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 3.0,
    "ytick.major.size": 3.0,
    "legend.frameon": False,
    "lines.linewidth": 1.0,
    "pdf.fonttype": 42,  # TrueType, which journals ask for and editors can change
    "svg.fonttype": "path",  # a page looks the same whatever fonts its reader has
    "figure.dpi": 100,
    "savefig.dpi": DPI,
    "svg.hashsalt": "driftline",
}
#: Kept whatever a style file says: the width of the column, a layout that makes room for everything, and letters that
#: are as wide on the screen, for which the layout is made, as on paper.
KEPT: Any = {
    "savefig.bbox": "standard",
    "figure.autolayout": False,
    "figure.constrained_layout.use": False,
    "text.hinting": "no_hinting",
}

_OPTIONS: ContextVar[FigureOptions] = ContextVar("options", default=FigureOptions())  # noqa: B039 - frozen


@contextmanager
def drawn_with(options: FigureOptions) -> Iterator[None]:
    """Inside the block figures are drawn with these options."""
    token = _OPTIONS.set(options)
    try:
        yield
    finally:
        _OPTIONS.reset(token)


@contextmanager
def house_style() -> Iterator[None]:
    """Matplotlib's defaults with `SETTINGS` and the options on top, whatever the user has set; restored afterwards."""
    options, defaults = _OPTIONS.get(), dict(mpl.rcParamsDefault)
    chosen = {**SETTINGS, **_letters(options.font_size), **(read_style(options.style) if options.style else {}), **KEPT}
    with mpl.rc_context({**{name: defaults[name] for name in defaults if "backend" not in name}, **chosen}):
        yield


def _letters(size: float) -> dict[str, float]:
    small = ("xtick.labelsize", "ytick.labelsize", "legend.fontsize", "legend.title_fontsize")
    return {"font.size": size, "axes.labelsize": LABEL * size, **dict.fromkeys(small, TICK * size)}


def letters(share: float = TICK) -> float:
    """Font size in points, as a share of ordinary text."""
    return share * float(mpl.rcParams["font.size"])


def line(width: float) -> float:
    """Line width in points, in units of the ordinary line."""
    return width * float(mpl.rcParams["lines.linewidth"])


def colour(number: int) -> Any:
    """Colour of a thing without order: the palette, over and over."""
    colours = mpl.rcParams["axes.prop_cycle"].by_key().get("color", PALETTE)
    return colours[number % len(colours)]


def new_figure(width: float, height: float, *, narrow: float | None = None, laid_out: bool = True) -> Figure:
    """An empty figure that makes room for everything in it.

    Parameters
    ----------
    width, height : float
        Inches, unless the user asked for another width; the height then grows with its square root.
    narrow : float, optional
        Height of a figure that is drawn narrower than `NARROW`, with its panels stacked.
    laid_out : bool
        Whether matplotlib shall place the panels; the caller does it otherwise.
    """
    asked = _OPTIONS.get().inches or width
    tall = narrow if narrow is not None and asked < NARROW <= width else height * (max(asked, width) / width) ** 0.5
    engine = ConstrainedLayoutEngine(w_pad=0.04, h_pad=0.04, wspace=0.03) if laid_out else None
    figure = Figure(figsize=(asked, tall), layout=engine)
    FigureCanvasAgg(figure)
    return figure


def is_narrow(figure: Figure) -> bool:
    """Whether panels should be stacked."""
    return float(figure.get_figwidth()) < NARROW


def save(figure: Figure, target: Path | IO[bytes], kind: str = "") -> None:
    """Write `figure` without dates: equal figures are equal files.

    Parameters
    ----------
    figure : matplotlib figure
    target : path or binary stream
    kind : str
        File format; by default what the name of the path says.
    """
    kind = kind or str(getattr(target, "suffix", ".png"))[1:]
    metadata: Any = {"pdf": {"CreationDate": None}, "svg": {"Date": None}}.get(kind, {})
    with house_style(), quiet_about_letters(), _lean_fonts():
        figure.savefig(target, format=kind, metadata=metadata)


@contextmanager
def _lean_fonts() -> Iterator[None]:
    """Leave the tables for typesetting out of embedded fonts: in a PDF every letter has its place already.

    It halves the time that a PDF takes. The list belongs to fontTools, has no public name, and matplotlib adds to it.
    """
    from fontTools.subset import Options

    kept = Options._drop_tables_default
    Options._drop_tables_default = [*kept, "GSUB", "GPOS", "GDEF"]
    try:
        yield
    finally:
        Options._drop_tables_default = kept


@contextmanager
def quiet_about_letters() -> Iterator[None]:
    """No warning where the font lacks a letter of the user's own labels: the empty box in the figure says so."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        yield


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
    colours = mpl.colormaps[mpl.rcParams["image.cmap"]](np.linspace(0.0, 0.82, len(sizes)))
    return [
        SizeLook(tuple(colour), MARKERS[number % len(MARKERS)], number % 2 == 0)
        for number, colour in enumerate(colours)
    ]


def marker_style(look: SizeLook, marker_size: float) -> dict[str, Any]:
    """Keyword arguments of a `Line2D` for points of one size without error bars."""
    return {
        "linestyle": "none",
        "marker": look.marker,
        "markersize": marker_size,
        "color": look.colour,
        "markerfacecolor": look.colour if look.filled else "white",
        "markeredgecolor": look.colour,
        "markeredgewidth": line(0.7),
    }


def point_style(look: SizeLook, marker_size: float) -> dict[str, Any]:
    """Keyword arguments of `Axes.errorbar` for points of one size: error bars stand out over small markers."""
    return {**marker_style(look, marker_size), "elinewidth": line(0.8), "capsize": 1.6, "capthick": line(0.8)}


def marker_size(errors: FloatArray, low: float, high: float, height: float) -> float:
    """Marker size in points, small enough for error bars to be seen beside it where that is possible.

    `low` to `high` is the range of the axis and `height` its length in inches.
    """
    bar = 2 * float(np.median(errors)) / (high - low) * height * 72 if high > low else np.inf
    return float(np.clip(0.9 * bar, 2.6, 3.8))


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
