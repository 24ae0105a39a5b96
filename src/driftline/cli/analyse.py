"""``driftline analyse``: the whole job, from curves to a verdict."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from driftline.cli.options import (
    ansatz_option,
    config_option,
    cores,
    data_path,
    examples,
    force_option,
    jobs_option,
    json_option,
    out_option,
    quick_option,
    quiet_option,
    seed_option,
    selection_options,
)
from driftline.cli.reading import observable_option, read_data, reading_options, taken
from driftline.cli.screen import say, show, written

# Share of the wall time after which only files are written, for the progress bar: rough, for two cores, where the
# figures take about 7 s
WRITING_FROM = {"quick": 0.5, "full": 0.85}
EXAMPLES = examples(
    "driftline analyse curves.csv",
    "driftline analyse curves.h5 --quick --out first-look",
    "driftline analyse curves.csv --window 14 19 --smallest-size 8",
    "driftline analyse curves.csv --ansatz power-law --ansatz power-law:corrected",
    "driftline analyse runs --pattern 'L{size}/W{disorder}/r.dat'",
    "driftline analyse curves.csv --json | jq .verdict.code",
)


@click.command(epilog=EXAMPLES)
@data_path()
@config_option()
@out_option("Output folder [default: NAME-driftline].")
@ansatz_option()
@selection_options
@seed_option()
@quick_option()
@jobs_option()
@force_option()
@quiet_option()
@json_option("Print result.json and nothing else; a folder is then written only if --out names one.")
@observable_option()
@reading_options
def analyse(
    path: Path, config: Path | None, out: Path | None, force: bool, quiet: bool, as_json: bool, **options: Any
) -> None:
    """The whole job, from curves to a verdict.

    Reads the curves in PATH, finds crossings and their drift, collapses them under each ansatz, judges, draws, and
    writes everything into one folder.
    """
    from driftline.report.folder import check_folder, default_folder
    from driftline.settings import Settings

    folder = default_folder(path) if out is None and not as_json else out
    options["ansatze"] = options["ansatze"] or None
    options["input"] = taken(options)
    settings = Settings.resolve(config, options, {"jobs": cores()})
    if folder is not None:
        check_folder(folder, force=force)
    analysis = _analysed(path, settings, folder, force, quiet)
    if as_json:
        from driftline.report.record import to_json

        say(to_json(analysis))
    elif not quiet:
        from driftline.report.summary import blocks

        show(blocks(analysis))
        written(folder)


def _analysed(path: Path, settings: Any, folder: Path | None, force: bool, quiet: bool) -> Any:
    """The analysis, and its files where there is a folder to write."""
    from driftline.analysis import analyse
    from driftline.progress import part, terminal_progress

    curves = read_data(path, settings, quiet=quiet)
    settings.select(curves)  # says what is wrong with a window before anything else happens
    with terminal_progress(quiet=quiet) as progress:
        writing_from = WRITING_FROM["quick" if settings.quick else "full"]
        end = 1.0 if folder is None else writing_from
        analysis = analyse(curves, settings=settings, progress=part(progress, 0.0, end))
        if folder is not None:
            from driftline.report.writers import write_report

            write_report(analysis, folder, force=force, progress=part(progress, writing_from, 1.0))
    return analysis
