"""``driftline fields``: what each field of `result.json` means."""

from __future__ import annotations

import click


@click.command()
def fields() -> None:
    """Explain result.json field by field.

    Type, unit and meaning of each, as a page of Markdown.
    """
    from driftline.report.fields import result_fields

    click.echo(result_fields(), nl=False)
