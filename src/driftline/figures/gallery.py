"""The registry of figures: what the report draws, in the order in which it shows them."""

from __future__ import annotations

from driftline.figures.base import Drawing
from driftline.figures.collapse import CollapseDrawing
from driftline.figures.curves import CurvesDrawing
from driftline.figures.drift import DriftDrawing

FIGURES: tuple[Drawing, ...] = (CurvesDrawing(), DriftDrawing(), CollapseDrawing())
