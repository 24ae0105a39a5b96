"""``driftline ansatze``: the scaling forms with formulas, parameters and priors."""

from __future__ import annotations

from pathlib import Path

import click

from driftline.cli.options import config_option, data_path


@click.command()
@data_path(required=False)
@config_option("TOML file with forms of your own.")
def ansatze(path: Path | None, config: Path | None) -> None:
    """List the scaling ansätze.

    With formula, parameters and priors; if PATH is given, the priors for the curves in it.
    """
    from driftline.report.listing import listing
    from driftline.settings import Settings

    settings = Settings.resolve(config)
    if path is None:
        curves = None
    else:
        from driftline.readers import read

        curves = settings.select(read(path, **settings.labels))
    click.echo(listing(curves, settings.forms), nl=False)
