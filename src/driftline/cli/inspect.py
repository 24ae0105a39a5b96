"""``driftline inspect``: what is read, and what looks wrong."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from driftline.cli.options import config_option, data_path
from driftline.cli.reading import read_data, reading_options, taken


@click.command()
@data_path()
@config_option()
@reading_options
def inspect(path: Path, config: Path | None, **options: Any) -> None:
    """Say what is read from PATH.

    From which columns the numbers come, and what looks wrong; computes and writes nothing.
    """
    from driftline.readers.inspection import inspect_text
    from driftline.settings import Settings

    settings = Settings.resolve(config, {"input": taken(options)})
    click.echo(inspect_text(read_data(path, settings)), nl=False)
