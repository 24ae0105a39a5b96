"""The figures as files: PDF for the paper and PNG for slides, or what was asked for, and SVG for web pages."""

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
        """Draw every figure that was asked for into `folder/figures`."""
        from driftline.figures.rendering import pictures  # matplotlib comes with it

        place = folder / "figures"
        place.mkdir()
        for picture in pictures(analysis):
            for kind, content in picture.files.items():
                (place / f"{picture.name}.{kind}").write_bytes(content)
