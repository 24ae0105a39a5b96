"""``driftline inspect``: what is read, and what looks wrong."""

from __future__ import annotations

from pathlib import Path

import click

from driftline.cli.options import data_path


@click.command()
@data_path()
def inspect(path: Path) -> None:
    """Say what is read from PATH.

    From which columns the numbers come, and what looks wrong; computes and writes nothing.
    """
    from driftline.readers import read
    from driftline.readers.inspection import inspect_text

    click.echo(inspect_text(read(path)), nl=False)
