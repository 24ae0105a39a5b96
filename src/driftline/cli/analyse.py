"""``driftline analyse``: the whole job, from curves to a verdict."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import click

from driftline.cli.options import (
    ansatz_option,
    config_option,
    cores,
    data_path,
    jobs_option,
    seed_option,
    selection_options,
)

WRITING_FROM = 0.93  # share of the wall time after which only files are written, for the progress bar


@click.command()
@data_path()
@config_option()
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Output folder [default: NAME-driftline].")
@ansatz_option()
@selection_options
@seed_option()
@click.option("--quick", is_flag=True, default=None, help="A first look: shorter chains, fewer refits.")
@jobs_option()
@click.option("--force", is_flag=True, help="Replace an earlier output folder.")
def analyse(path: Path, config: Path | None, out: Path | None, force: bool, **options: Any) -> None:
    """The whole job, from curves to a verdict.

    Reads the curves in PATH, finds crossings and their drift, collapses them under each ansatz, judges, draws, and
    writes everything into one folder.
    """
    from driftline.report.folder import check_folder, default_folder
    from driftline.settings import Settings

    folder = default_folder(path) if out is None else out
    options["ansatze"] = options["ansatze"] or None
    settings = Settings.resolve(config, options, {"jobs": cores()})
    check_folder(folder, force=force)
    _analyse(path, settings, folder, force)


def _analyse(path: Path, settings: Any, folder: Path, force: bool) -> None:
    from driftline.analysis import analyse
    from driftline.progress import part, terminal_progress
    from driftline.readers import read
    from driftline.report.writers import write_report

    curves = read(path, **settings.labels)
    settings.select(curves)  # says what is wrong with a window before anything else happens
    with terminal_progress() as progress:
        analysis = analyse(curves, settings=settings, progress=part(progress, 0.0, WRITING_FROM))
        write_report(analysis, folder, force=force, progress=part(progress, WRITING_FROM, 1.0))
    _print_summary(analysis)
    click.echo(f"\nWritten to {folder}{os.sep}")


def _print_summary(analysis: Any) -> None:
    from driftline.report import summary

    colours: dict[str, dict[str, Any]] = {
        summary.GOOD: {"fg": "green", "bold": True},
        summary.BAD: {"fg": "red", "bold": True},
        summary.HEADING: {"bold": True},
        summary.WARNING: {"fg": "yellow"},
        summary.TEXT: {},
    }
    plain = bool(os.environ.get("NO_COLOR"))  # https://no-color.org: any text that is not empty
    for role, line in summary.lines(analysis):
        click.echo(line if plain else click.style(line, **colours[role]) if colours[role] else line)
