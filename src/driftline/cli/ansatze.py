"""``driftline ansatze``: the scaling forms with formulas, parameters and priors."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from driftline.cli.options import config_option, data_path, examples
from driftline.cli.reading import read_data, reading_options, taken
from driftline.cli.screen import text_width

EXAMPLES = examples(
    "driftline ansatze",
    "driftline ansatze curves.csv",
    "driftline ansatze curves.csv --config forms.toml",
)


@click.command(epilog=EXAMPLES)
@data_path(required=False)
@config_option("TOML file with forms of your own.")
@reading_options
def ansatze(path: Path | None, config: Path | None, **options: Any) -> None:
    """List the scaling ansätze.

    With formula, parameters and priors; if PATH is given, the priors for the curves in it.
    """
    from driftline.report.listing import listing
    from driftline.settings import Settings

    settings = Settings.resolve(config, {"input": taken(options)})
    curves = None if path is None else settings.select(read_data(path, settings))
    click.echo(listing(curves, settings.forms, width=text_width()), nl=False)
