"""``driftline crossings``: where the curves cross, and how the crossings move with size."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

import click

from driftline.cli.options import (
    config_option,
    data_path,
    examples,
    force_option,
    json_option,
    names_option,
    out_option,
    quiet_option,
    seed_option,
    selection_options,
)
from driftline.cli.reading import read_data, reading_options, taken
from driftline.cli.screen import say, show, written

EXAMPLES = examples(
    "driftline crossings curves.csv",
    "driftline crossings curves.csv --window 14 19 --all-pairs",
    "driftline crossings curves.h5 --law constant --law inverse --law linear",
    "driftline crossings curves.csv --out crossings",
    "driftline crossings curves.csv --json | jq '.drift.probability_bounded'",
)


def law_names() -> Iterable[str]:
    """The drift laws on offer."""
    from driftline.drift import LAWS

    return LAWS


@click.command(epilog=EXAMPLES)
@data_path()
@config_option()
@out_option("Write numbers, tables and figures into this folder; without it nothing is written.")
@names_option("--law", "laws", law_names, "Drift law to fit; may be given repeatedly [default: all].")
@selection_options
@seed_option()
@click.option("--all-pairs", is_flag=True, help="Show every pair of sizes, not only adjacent ones.")
@force_option()
@quiet_option()
@json_option("Print the numbers as JSON and nothing else.")
@reading_options
def crossings(
    path: Path,
    config: Path | None,
    out: Path | None,
    laws: tuple[str, ...],
    all_pairs: bool,
    force: bool,
    quiet: bool,
    as_json: bool,
    **options: Any,
) -> None:
    """Where the curves in PATH cross, and how that moves with size.

    Crossings of all pairs of sizes, and drift laws fitted to those of adjacent sizes: the numbers that analyse gives,
    without collapse and verdict, in a second or two.
    """
    from driftline.report.folder import check_folder
    from driftline.settings import Settings

    options["input"] = taken(options)
    settings = Settings.resolve(config, options)
    if out is not None:
        check_folder(out, force=force)
    study = _studied(path, settings, laws, quiet)
    from driftline.report.parts import crossing_blocks, write_crossings

    if out is not None:
        write_crossings(study, out, force=force)
    if as_json:
        from driftline.report.record import to_json

        say(to_json(study))
    elif not quiet:
        show(crossing_blocks(study, every=all_pairs))
        written(out)


def _studied(path: Path, settings: Any, laws: tuple[str, ...], quiet: bool) -> Any:
    from driftline.partial import study_crossings
    from driftline.progress import terminal_progress

    curves = read_data(path, settings)
    with terminal_progress(quiet=quiet) as progress:
        return study_crossings(curves, settings=settings, laws=laws or None, progress=progress)
