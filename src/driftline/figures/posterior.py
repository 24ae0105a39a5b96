"""Corner plot: the posterior of every parameter of one ansatz with its prior, and of every pair of parameters.

Drawn here rather than by a package for corner plots: the priors belong into the picture, since a parameter that the
data do not determine shows by nothing else, and labels follow the symbols of the data.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from scipy.ndimage import gaussian_filter, gaussian_filter1d

from driftline import numerals
from driftline.curves import FloatArray
from driftline.figures import labels, style
from driftline.figures.base import Drawing
from driftline.figures.finish import finish
from driftline.figures.headline import headline_fit
from driftline.figures.legends import Entries, legend_above
from driftline.inference.intervals import Interval

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit

BINS = 40
SMOOTHING = 0.7  # of the kernel width that Scott's rule (Multivariate Density Estimation, 1992) gives
REACH = 0.004  # share of the draws beyond each end of an axis
EDGE = 0.04  # inches between the outermost labels and the edge of the figure
LONGEST_UNIT = 24  # characters, commands of mathtext included
LEVELS = (0.95, 0.68)  # shares of the posterior inside the contours
#: Symbols that follow the symbol of the disorder.
DISORDERS = {"W_c": r"{W}_c", "W_mid": r"{W}_\mathrm{{mid}}", "D": r"D"}


def draw_posterior(fit: CollapseFit, *, ax: Any = None) -> Any:
    """Draw the posterior draws of one fit as a corner plot.

    Parameters
    ----------
    fit : CollapseFit
        Its physical parameters, those derived from them and the noise scale are shown.
    ax : array of matplotlib axes, shape (n, n), optional
        Where to draw; by default a new figure of double-column width, or single-column for up to three parameters.

    Returns
    -------
    array of matplotlib axes, shape (n, n)
        Parameters as `shown_parameters` orders them; above the diagonal given axes are switched off, and a new figure
        has none, but None.
    """
    names = shown_parameters(fit)
    with style.house_style():
        own = ax is None
        grid = _panels(len(names)) if ax is None else ax
        draws = [fit.draws(name) for name in names]
        spans = [_span(column) for column in draws]
        for row, name in enumerate(names):
            for column in range(row + 1):
                panel = grid[row, column]
                if column == row:
                    _single(panel, fit, name, draws[row], spans[row])
                else:
                    _pair(panel, (draws[column], draws[row]), (spans[column], spans[row]), _kernel(fit, 2))
        _label(grid, [_symbol(fit, name) for name in names], [_unit(fit, name) for name in names])
        for unused in grid[np.triu_indices(len(names), 1)]:
            if unused is not None:
                unused.axis("off")
        _key(grid, any(_prior(fit, name) is not None for name in names))
        if own:
            _fit_margins(grid)  # labels are fitted to panels of nearly the final size
            finish(style.figure_of(grid[0, 0]), few=len(names) > 1)
            _fit_margins(grid)
            _shrink_titles(grid)
    return grid


class PosteriorDrawing(Drawing):
    """`figures/posterior`: of the fit that the headline rests on, or else the most probable one."""

    name = "posterior"
    width = style.DOUBLE
    effort = 3.0

    def applies(self, analysis: Analysis) -> bool:
        """Whether the form has a parameter of its own."""
        return bool(headline_fit(analysis).ansatz.parameters)

    def caption(self, analysis: Analysis) -> str:
        """What is to be seen."""
        fit = headline_fit(analysis)
        limited = f"; set by the prior: {', '.join(fit.prior_limited)}" if fit.prior_limited else ""
        return (
            f"Posterior under {fit.ansatz.name}: contours hold 68 % and 95 % of each pair; on the diagonal each "
            f"parameter with its 68 % interval, and dashed its prior{limited}."
        )

    def draw(self, analysis: Analysis) -> Figure:
        """The finished figure."""
        return style.figure_of(draw_posterior(headline_fit(analysis))[0, 0])


def shown_parameters(fit: CollapseFit) -> tuple[str, ...]:
    """Physical parameters, what derives from them, and the noise scale; the roughness of F means nothing to people."""
    return tuple(name for name in fit.names if name not in ("tau", "s")) + (("s",) if "s" in fit.names else ())


def _panels(count: int) -> Any:
    width = style.DOUBLE if count > 3 else style.SINGLE
    # matplotlib's layout takes a second for so many panels; `_fit_margins` does what is needed
    figure = style.new_figure(width, 0.95 * width, narrow=0.95 * style.SINGLE, laid_out=False)
    places = figure.add_gridspec(count, count)
    grid = np.full((count, count), None, dtype=object)
    for row, column in zip(*np.tril_indices(count), strict=True):
        grid[row, column] = figure.add_subplot(places[int(row), int(column)])
    return grid


def _span(draws: FloatArray) -> tuple[float, float]:
    low, high = np.quantile(draws, [REACH, 1 - REACH])
    margin = 0.06 * (high - low) or 0.05 * abs(low) or 1.0
    return float(low - margin), float(high + margin)


def _single(panel: Axes, fit: CollapseFit, name: str, draws: FloatArray, span: tuple[float, float]) -> None:
    density, edges = np.histogram(draws, BINS, span, density=True)
    centres, density = (edges[1:] + edges[:-1]) / 2, gaussian_filter1d(density, _kernel(fit, 1), mode="nearest")
    interval = fit.parameters.get(name) or Interval.of_draws(draws)
    panel.plot(centres, density, color=style.colour(0), linewidth=style.line(1.0), zorder=3)
    inside = (centres >= interval.low68) & (centres <= interval.high68)
    panel.fill_between(centres, density, where=inside, color=style.colour(0), alpha=0.3, linewidth=0, zorder=2)
    panel.axvline(interval.median, color=style.INK, linewidth=style.line(0.7), zorder=4)
    prior = _prior(fit, name)
    if prior is not None:
        grid = np.linspace(*span, 120)
        panel.plot(grid, prior(grid), color=style.colour(1), linestyle=(0, (4, 2)), linewidth=style.line(1.0), zorder=3)
    panel.set_xlim(*span)
    panel.set_ylim(0.0, 1.12 * float(density.max()))
    panel.set_yticks([])
    panel.set_title(f"{_symbol(fit, name)} = {numerals.short(interval)}", fontsize=style.letters(), pad=3)


def _kernel(fit: CollapseFit, dimension: int) -> float:
    """Standard deviation of the smoothing kernel in bins; the draws spread over about a sixth of the axis."""
    effective = float(np.clip(fit.sampler.effective_samples, 50.0, max(len(fit.samples), 50)))
    return float(SMOOTHING * BINS / 6 * effective ** (-1 / (dimension + 4)))


def _pair(
    panel: Axes, draws: tuple[FloatArray, FloatArray], spans: tuple[tuple[float, float], ...], kernel: float
) -> None:
    counts, x, y = np.histogram2d(*draws, bins=BINS, range=spans)
    density = gaussian_filter(counts, kernel, mode="constant").T
    centres = [(edges[1:] + edges[:-1]) / 2 for edges in (x, y)]
    levels = _levels(density)
    if levels[0] < levels[1]:  # draws that are all alike have no contours
        shades = [(*_rgb(0), alpha) for alpha in (0.25, 0.55)]
        panel.contourf(*centres, density, levels=[*levels, 1.01 * density.max()], colors=shades, zorder=2)
        panel.contour(*centres, density, levels=levels, colors=[_rgb(0)], linewidths=style.line(0.7), zorder=3)
    panel.plot(*(float(np.median(each)) for each in draws), "+", color=style.INK, markersize=5, zorder=4)
    panel.set_xlim(*spans[0])
    panel.set_ylim(*spans[1])


def _levels(density: FloatArray) -> list[float]:
    """Densities whose excursion sets hold the shares `LEVELS` of the posterior."""
    falling = np.sort(density.ravel())[::-1]
    held = np.cumsum(falling) / np.sum(falling)
    return [float(falling[min(int(np.searchsorted(held, share)), falling.size - 1)]) for share in LEVELS]


def _prior(fit: CollapseFit, name: str) -> Any:
    """Prior density of a parameter as a function of its value; None for one that is derived from others."""
    from driftline.scaling.likelihood import NUISANCE

    for parameter in (*fit.ansatz.parameters, *NUISANCE):
        if parameter.name == name:
            return parameter.prior.density
    return None


def _symbol(fit: CollapseFit, name: str) -> str:
    known = {each.name: each.symbol for each in fit.ansatz.parameters}
    own = known.get(name, name)
    if name in DISORDERS and own in ("W_c", r"W_\mathrm{mid}", "D", name):
        return labels.with_disorder(DISORDERS[name], fit.curves.labels) or labels.math(own)
    return labels.math(own)


def _unit(fit: CollapseFit, name: str) -> str:
    unit = fit.curves.labels.disorder_unit
    # a panel has no room for a long one, which the other figures show
    return f" ({labels.unit(unit)})" if name in DISORDERS and 0 < len(unit) <= LONGEST_UNIT else ""


def _label(grid: Any, symbols: Sequence[str], units: Sequence[str]) -> None:
    """Names along the left and the bottom, and no numbers in between."""
    last = len(symbols) - 1
    for row in range(last + 1):
        for column in range(row + 1):
            panel = grid[row, column]
            panel.tick_params(labelbottom=row == last, labelleft=column == 0 and row > 0, labelsize=style.letters(0.85))
            if row == last:
                panel.set_xlabel(symbols[column] + units[column])
            if column == 0 and row > 0:
                panel.set_ylabel(symbols[row] + units[row])


def _key(grid: Any, prior: bool) -> None:
    handles: list[Any] = [Patch(color=(*_rgb(0), alpha)) for alpha in (0.55, 0.25)]
    texts = ["68 %", "95 %"]
    if prior:
        handles.append(Line2D([], [], color=style.colour(1), linestyle=(0, (4, 2))))
        texts.append("prior")
    if len(grid) == 1:
        legend_above(grid[0, 0], Entries(handles[-1:], texts[-1:]))
    else:
        owner = grid[0, -1] or style.figure_of(grid[0, 0])
        owner.legend(handles, texts, loc="upper right", handlelength=1.7)


def _fit_margins(grid: Any) -> None:
    """Panels close together, and around them as much room as the labels take."""
    figure, count = style.figure_of(grid[0, 0]), len(grid)
    (width, height), dpi = figure.get_size_inches(), figure.dpi
    left = max(panel.bbox.x0 - panel.get_tightbbox().x0 for panel in grid[:, 0]) / dpi
    bottom = max(panel.bbox.y0 - panel.get_tightbbox().y0 for panel in grid[-1, :]) / dpi
    title = 1.6 * style.letters() / 72
    top = title if count > 1 else max(title, (grid[0, 0].get_tightbbox().y1 - grid[0, 0].bbox.y1) / dpi)
    panel_height = (height - bottom - top - 2 * EDGE - (count - 1) * title) / count
    figure.subplots_adjust(
        left=(left + EDGE) / width, right=1 - 2 * EDGE / width, bottom=(bottom + EDGE) / height,
        top=1 - (top + EDGE) / height, wspace=0.06, hspace=title / panel_height,
    )  # fmt: skip


def _shrink_titles(grid: Any) -> None:
    """A title wider than its panel runs into the next one."""
    for number in range(len(grid)):
        title, room = grid[number, number].title, grid[number, number].get_window_extent().width
        excess = title.get_window_extent().width / room
        if excess > 1:
            title.set_fontsize(title.get_fontsize() / excess)


def _rgb(number: int) -> tuple[float, float, float]:
    from matplotlib.colors import to_rgb

    return to_rgb(style.colour(number))
