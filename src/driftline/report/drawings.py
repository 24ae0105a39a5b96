"""The figures as files: PDF for the paper, PNG for slides, SVG for web pages."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report.base import Writer

if TYPE_CHECKING:
    from driftline.analysis import Analysis


class Drawings(Writer):
    """`figures/*.pdf`, `figures/*.png` and `figures/*.svg`."""

    title = "figures"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Draw every figure of the registry into `folder/figures`."""
        from driftline.figures.gallery import FIGURES  # matplotlib comes with it
        from driftline.figures.style import save

        place = folder / "figures"
        place.mkdir()
        for figure in FIGURES:
            drawn = figure.draw(analysis)
            for kind in ("pdf", "png", "svg"):
                save(drawn, place / f"{figure.name}.{kind}")
