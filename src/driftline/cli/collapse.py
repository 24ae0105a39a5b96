"""``driftline collapse``: chosen scaling forms fitted to the curves."""

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
from driftline.cli.reading import read_data, reading_options, taken
from driftline.cli.screen import say, show, written

USUAL = ("power-law:corrected",)
WRITING_FROM = 0.9  # share of the wall time after which only files are written, for the progress bar
EXAMPLES = examples(
    "driftline collapse curves.csv --ansatz power-law:corrected",
    "driftline collapse curves.csv --ansatz power-law --ansatz power-law:linear-drift",
    "driftline collapse curves.h5 --ansatz kt:corrected --quick --out kt",
    "driftline collapse curves.csv --config forms.toml --ansatz my-form",
    "driftline collapse curves.csv --json | jq '.collapse[0].parameters.W_c'",
)


@click.command(epilog=EXAMPLES)
@data_path()
@config_option()
@out_option("Write numbers, tables, draws and figures into this folder; without it nothing is written.")
@ansatz_option("Scaling ansatz; may be given repeatedly [default: power-law:corrected].")
@selection_options
@seed_option()
@quick_option()
@jobs_option()
@force_option()
@quiet_option()
@json_option("Print the numbers as JSON and nothing else.")
@reading_options
def collapse(
    path: Path, config: Path | None, out: Path | None, force: bool, quiet: bool, as_json: bool, **options: Any
) -> None:
    """Collapse the curves in PATH under chosen ansätze.

    Parameters, evidence and quality of each: the numbers that analyse gives for the same ansätze, without crossings,
    stability and verdict. Probabilities are those among the ansätze given.
    """
    from driftline.report.folder import check_folder
    from driftline.settings import Settings

    options["ansatze"] = options["ansatze"] or None
    options["input"] = taken(options)
    settings = Settings.resolve(config, options, {"jobs": cores(), "ansatze": USUAL})
    if out is not None:
        check_folder(out, force=force)
    study = _studied(path, settings, out, force, quiet)
    if as_json:
        from driftline.report.record import to_json

        say(to_json(study))
    elif not quiet:
        from driftline.report.parts import collapse_blocks

        show(collapse_blocks(study))
        written(out)


def _studied(path: Path, settings: Any, out: Path | None, force: bool, quiet: bool) -> Any:
    """The fits, and their files where there is a folder to write."""
    from driftline.partial import study_collapse
    from driftline.progress import part, terminal_progress

    curves = read_data(path, settings)
    with terminal_progress(quiet=quiet) as progress:
        study = study_collapse(curves, settings=settings, progress=part(progress, 0.0, WRITING_FROM if out else 1.0))
        if out is not None:
            from driftline.report.parts import write_collapse

            if progress is not None:
                progress(f"writing {out}", WRITING_FROM)
            write_collapse(study, out, force=force)
    return study
