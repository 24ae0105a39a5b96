"""The registry of figures: what the report draws, in the order in which it shows them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from driftline.figures.base import Drawing
from driftline.figures.collapse import CollapseDrawing
from driftline.figures.comparison import ComparisonDrawing
from driftline.figures.curves import CurvesDrawing
from driftline.figures.drift import DriftDrawing
from driftline.figures.held_out import HeldOutDrawing
from driftline.figures.misfit import MisfitDrawing
from driftline.figures.posterior import PosteriorDrawing
from driftline.figures.stability import StabilityDrawing

if TYPE_CHECKING:
    from driftline.analysis import Analysis

#: One for each of `driftline.figure_options.FIGURE_NAMES`, in that order.
FIGURES: tuple[Drawing, ...] = (
    CurvesDrawing(),
    DriftDrawing(),
    CollapseDrawing(),
    PosteriorDrawing(),
    ComparisonDrawing(),
    StabilityDrawing(),
    HeldOutDrawing(),
    MisfitDrawing(),
)


def chosen(analysis: Analysis) -> tuple[Drawing, ...]:
    """The figures that were asked for and have something to show."""
    names = analysis.settings.figure.figures
    return tuple(figure for figure in FIGURES if figure.name in names and figure.applies(analysis))
