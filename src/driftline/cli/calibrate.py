"""``driftline calibrate``: how often the verdict is wrong for this very grid and these errors."""

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
    quiet_option,
    seed_option,
    selection_options,
)
from driftline.cli.reading import read_data, reading_options, taken
from driftline.cli.screen import say, show

EXAMPLES = examples(
    "driftline calibrate curves.csv",
    "driftline calibrate curves.h5 --sets 100 --out calibration.json",
)


@click.command(epilog=EXAMPLES)
@data_path()
@config_option()
@click.option("--sets", type=click.IntRange(min=1), metavar="N", help="Simulated sets for each truth [default: 20].")
@click.option("--out", type=click.Path(path_type=Path), metavar="FILE", help="Write the counts to a JSON file as well.")
@ansatz_option()
@selection_options
@seed_option()
@jobs_option()
@force_option("Replace an earlier file.")
@quiet_option()
@json_option("Print the counts as JSON and nothing else.")
@reading_options
def calibrate(
    path: Path, config: Path | None, sets: int | None, out: Path | None, force: bool, quiet: bool, as_json: bool,
    **options: Any,
) -> None:  # fmt: skip
    """Measure false alarms and coverage for these data.

    The best fitted form of each hypothesis is taken for the truth in turn: its curves get the noise of the data in PATH
    and are analysed like them. Every simulated set takes a few seconds of one core.
    """
    from driftline.calibration import SETS
    from driftline.calibration import calibrate as measure
    from driftline.progress import terminal_progress
    from driftline.report.reliability import blocks, check_target, write
    from driftline.settings import Settings

    options["ansatze"] = options["ansatze"] or None
    options["input"] = taken(options)
    settings = Settings.resolve(config, options, {"jobs": cores()})
    if out is not None:
        check_target(out, force=force)
    curves = read_data(path, settings)
    settings.select(curves)  # says what is wrong with a window before anything else happens
    with terminal_progress(quiet=quiet) as progress:
        found = measure(curves, settings=settings, sets=sets or SETS, progress=progress)
    if out is not None:
        write(found, out, force=force)
    if as_json:
        import json

        say(json.dumps(found.to_dict(), indent=1) + "\n")
    elif not quiet:
        show(blocks(found))
