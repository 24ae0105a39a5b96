"""Parts of the job for people and as files: crossings with their drift, or collapse fits."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.blocks import BLANK, WARNING, Block, Paragraph, Table, plain, spaced
from driftline.report import rows
from driftline.report.configuration import ConfigurationFile
from driftline.report.folder import output_folder
from driftline.report.posterior import PosteriorFile
from driftline.report.record import ResultFile, collapse_tables, crossing_tables, write_tables

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from driftline.collapse import CollapseFit
    from driftline.figure_options import FigureOptions
    from driftline.partial import CollapseStudy, CrossingStudy

CHECKS = (
    "worst: largest residual in errors; held-out: chi-squared per point of the largest size as predicted from the "
    "others, and score: the log of its probability; draws: effective posterior draws."
)
ONE_SIDE = (
    "A good collapse is no evidence of a transition by itself, for curves that merely drift collapse well, too: "
    "driftline analyse compares the rivals."
)


def crossing_blocks(study: CrossingStudy, *, every: bool = False) -> Iterator[Block]:
    """Crossings of adjacent sizes (or of `every` pair) and the drift laws, with what they say."""
    yield rows.crossings(study, every=every)
    yield from spaced([rows.drift(study)])
    yield from (Paragraph(sentence, indent="  ") for sentence in rows.drift_sentences(study))
    yield from (BLANK, Paragraph(f"Data: {rows.data(study)}"))


def collapse_blocks(study: CollapseStudy) -> Iterator[Block]:
    """The ansätze by evidence, their checks, and the parameters of each."""
    fits = sorted(study.comparison.fits, key=lambda fit: -fit.log_evidence)
    yield rows.collapse(study)
    yield from spaced([rows.checks(study)])
    yield Paragraph(CHECKS, indent="  ")
    for fit in fits:
        yield from _parameters(fit)
    yield BLANK
    for fit in fits:
        if fit.sampler.note:
            yield Paragraph(f"{fit.ansatz.name}: {fit.sampler.note}.", WARNING)
    if {fit.ansatz.hypothesis for fit in fits} == {"transition"}:
        yield Paragraph(ONE_SIDE, WARNING)
    yield Paragraph(f"Data: {rows.data(study)}")


def _parameters(fit: CollapseFit) -> Iterator[Block]:
    """The parameters as a table that fits a terminal, and their priors, which are long, below it."""
    whole = fit.table()
    yield from spaced([Table(whole.heading, whole.columns[:-1], tuple(row[:-1] for row in whole.rows))])
    priors = "; ".join(f"{name.partition(' ')[0]} {prior}" for name, *_, prior in whole.rows)
    yield Paragraph(f"priors: {priors}.", indent="  ")


def write_crossings(study: CrossingStudy, folder: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write numbers, tables, summary, configuration and figures of a crossing study into `folder`, all or nothing.

    Raises
    ------
    ConfigurationError
        If the folder is in the way or cannot be written.
    """
    from driftline.figures.curves import draw_curves  # matplotlib comes with them
    from driftline.figures.drift import draw_drift
    from driftline.figures.style import drawn_with, figure_of

    options = study.settings.figure
    with output_folder(Path(folder), force=force) as place, drawn_with(options):
        ResultFile().write(study, place)
        ConfigurationFile().write(study, place)
        write_tables(crossing_tables(study), place)
        _write_summary(plain(crossing_blocks(study, every=True)), place)
        curves = figure_of(draw_curves(study.curves, study.crossings))
        _save({"curves": curves, "drift": figure_of(draw_drift(study.drift, study.curves.labels)[0])}, place, options)


def write_collapse(study: CollapseStudy, folder: str | os.PathLike[str], *, force: bool = False) -> None:
    """Write numbers, tables, summary, posterior draws, configuration and figures of collapse fits, all or nothing.

    Raises
    ------
    ConfigurationError
        If the folder is in the way or cannot be written.
    """
    from driftline.figures.collapse import draw_collapse  # matplotlib comes with them
    from driftline.figures.style import drawn_with, figure_of

    options = study.settings.figure
    with output_folder(Path(folder), force=force) as place, drawn_with(options):
        ResultFile().write(study, place)
        ConfigurationFile().write(study, place)
        PosteriorFile().write(study, place)
        write_tables(collapse_tables(study), place)
        _write_summary(plain(collapse_blocks(study)), place)
        # a colon is not allowed in the names of some file systems
        fits = {f"collapse-{fit.ansatz.name.replace(':', '_')}": fit for fit in study.comparison.fits}
        _save({name: figure_of(draw_collapse(fit)[0]) for name, fit in fits.items()}, place, options)


def _write_summary(text: str, folder: Path) -> None:
    (folder / "summary.txt").write_text(text, encoding="utf-8", newline="\n")


def _save(figures: dict[str, Figure], folder: Path, options: FigureOptions) -> None:
    from driftline.figures.style import save

    place = folder / "figures"
    place.mkdir()
    for name, figure in figures.items():
        for kind in options.format:
            save(figure, place / f"{name}.{kind}")
