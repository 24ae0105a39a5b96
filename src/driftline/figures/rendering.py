"""The figures of an analysis as files, each drawn once for all formats, on all cores."""

from __future__ import annotations

import io
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from driftline.figures import style
from driftline.figures.base import Drawing
from driftline.figures.gallery import chosen
from driftline.parallel import Task, run_tasks

if TYPE_CHECKING:
    from driftline.analysis import Analysis


@dataclass(frozen=True)
class Picture:
    """One figure, drawn.

    Attributes
    ----------
    name : str
        Of the figure, for file names.
    files : dict
        Content of the file by format.
    """

    name: str
    files: dict[str, bytes]


def pictures(analysis: Analysis, progress: Callable[[str, float], None] | None = None) -> tuple[Picture, ...]:
    """Every figure that was asked for and has something to show.

    Parameters
    ----------
    analysis : Analysis
        Its settings say which figures, in which formats and style, and on how many processes they are drawn.
    progress : callable, optional
        Called with what is being drawn and the fraction done.
    """
    slim = _without_draws(analysis)
    # the one that takes longest goes first, so that no process waits for it at the end
    order = sorted(chosen(analysis), key=lambda each: -each.effort)
    tasks = [Task(f"drawing {each.name}", picture, (each, slim), {}) for each in order]
    return tuple(run_tasks(tasks, analysis.settings.jobs, progress or (lambda _text, _fraction: None)))


def picture(drawing: Drawing, analysis: Analysis) -> Picture:
    """One figure in the formats that were asked for, and as SVG."""
    options, files = analysis.settings.figure, {}
    with style.drawn_with(options):
        figure = drawing.draw(analysis)
        for kind in dict.fromkeys([*options.format, "svg"]):  # the page is made with the SVG
            stream = io.BytesIO()
            style.save(figure, stream, kind)
            files[kind] = stream.getvalue()
    return Picture(drawing.name, files)


def _without_draws(analysis: Analysis) -> Analysis:
    """Without the draws of the smoothers: no figure shows them, and they are most of what a process would be sent."""
    none = np.zeros((0, 0))
    smooth = tuple(replace(each, draws=none, slope_draws=none) for each in analysis.crossings.smooth)
    return replace(analysis, crossings=replace(analysis.crossings, smooth=smooth))
