"""The registry of report writers, and the function that runs them all."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report.base import Writer
from driftline.report.configuration import ConfigurationFile
from driftline.report.drawings import Drawings
from driftline.report.folder import output_folder
from driftline.report.methods import MethodsFiles
from driftline.report.page import Page
from driftline.report.posterior import PosteriorFile
from driftline.report.record import ResultFile, Tables
from driftline.report.summary import SummaryFile
from driftline.report.tex_tables import TexTables

if TYPE_CHECKING:
    from driftline.analysis import Analysis

#: In the order of writing; the page comes last, since it shows the drawings.
WRITERS: tuple[Writer, ...] = (
    ResultFile(),
    Tables(),
    TexTables(),
    MethodsFiles(),
    SummaryFile(),
    ConfigurationFile(),
    PosteriorFile(),
    Drawings(),
    Page(),
)


def write_report(
    analysis: Analysis,
    folder: str | os.PathLike[str],
    *,
    force: bool = False,
    progress: Callable[[str, float], None] | None = None,
) -> None:
    """Write everything there is to say about `analysis` into `folder`, all or nothing.

    Parameters
    ----------
    analysis : Analysis
    folder : path
        Must not exist, or be empty, or with `force` be an earlier output, which is then replaced.
    force : bool
        Replace an earlier output.
    progress : callable, optional
        Called with what is being written and the fraction done.

    Raises
    ------
    ConfigurationError
        If the folder is in the way or cannot be written.
    """
    with output_folder(Path(folder), force=force) as unfinished:
        for number, writer in enumerate(WRITERS):
            if progress is not None:
                progress(f"writing {writer.title}", number / len(WRITERS))
            writer.write(analysis, unfinished)
