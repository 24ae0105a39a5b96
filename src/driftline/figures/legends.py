"""Legends: above the axes, never on the data, and no wider than the axes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.lines import Line2D
from matplotlib.transforms import ScaledTranslation

from driftline.figures.style import figure_of

ROOM = 0.97  # share of the axes that a legend may take: the last layout moves the edges by a little


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


def legend_across(figure: Figure, *groups: Entries) -> None:
    """Legend above all panels of a figure, in as few rows as fit its width."""
    pairs = [pair for group in groups for pair in group.pairs()]
    for rows in range(1, len(pairs) + 1):
        columns = -(-len(pairs) // rows)
        handles, texts = _row_by_row(pairs, columns)
        legend = figure.legend(
            handles, texts, loc="outside upper center", ncols=columns, borderaxespad=0.2, borderpad=0.2,
            columnspacing=1.4, handlelength=2.2, handletextpad=0.5, labelspacing=0.3,
        )  # fmt: skip
        if columns == 1 or legend.get_window_extent().width <= ROOM * figure.bbox.width:
            return
        legend.remove()


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
