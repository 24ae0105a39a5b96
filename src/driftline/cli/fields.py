"""``driftline fields``: what each field of `result.json` means."""

from __future__ import annotations

import click

from driftline.cli.options import examples


@click.command(epilog=examples("driftline fields", "driftline fields | less"))
def fields() -> None:
    """Explain result.json field by field.

    Type, unit and meaning of each, as a page of Markdown.
    """
    from driftline.report.fields import result_fields

    click.echo(result_fields(), nl=False)
