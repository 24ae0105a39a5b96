"""``driftline inspect``: what is read, and what looks wrong."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from driftline.cli.options import config_option, data_path, examples
from driftline.cli.reading import observable_option, read_data, reading_options, taken

EXAMPLES = examples(
    "driftline inspect curves.csv",
    "driftline inspect runs --pattern 'L{size}/W{disorder}/r.dat'",
    "driftline inspect table.txt --columns size=L,disorder=W,mean=r,error=sem",
)


@click.command(epilog=EXAMPLES)
@data_path()
@config_option()
@observable_option()
@reading_options
def inspect(path: Path, config: Path | None, **options: Any) -> None:
    """Say what is read from PATH.

    From which columns the numbers come, and what looks wrong; computes and writes nothing.
    """
    from driftline.readers.inspection import inspect_text
    from driftline.settings import Settings

    settings = Settings.resolve(config, {"input": taken(options), **options})
    click.echo(inspect_text(read_data(path, settings)), nl=False)
