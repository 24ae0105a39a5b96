"""What goes to the terminal: tables and colours where somebody looks, plain text where another program reads.

On a terminal the text takes its width, from 80 columns to `WIDEST`, and in a narrower one the rows of a table that do
not fit become short paragraphs. Colours are left out where NO_COLOR is set (https://no-color.org) or the terminal has
none. What is piped is plain, 80 columns wide, and the same as `summary.txt`.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from driftline.progress import columns_of
from driftline.wording import printable

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table as RichTable

    from driftline.blocks import Block, Table

WIDEST = 100  # longer lines are hard to read
ROLES = {"good": "bold green", "bad": "bold red", "heading": "bold", "warning": "yellow", "text": ""}


def show(blocks: Iterable[Block]) -> None:
    """Print the blocks on standard output."""
    if not sys.stdout.isatty():
        from driftline.blocks import plain

        click.echo(plain(blocks), nl=False)
        return
    console = _console()
    for block in blocks:
        _set(console, block)


def say(text: str) -> None:
    """Print text on standard output as it is."""
    click.echo(text, nl=False)


def written(folder: Path | None) -> None:
    """Say where the files are, if any were written."""
    if folder is not None:
        click.echo(f"\nWritten to {printable(str(folder))}{os.sep}")


def text_width() -> int:
    """Columns to wrap running text to: those of the terminal up to `WIDEST`, or 80 where there is none."""
    from driftline.blocks import WIDTH

    return min(columns_of(sys.stdout), WIDEST) if sys.stdout.isatty() else WIDTH


def _console() -> Console:
    from rich.console import Console

    colours = None if os.environ.get("NO_COLOR") else "auto"  # any text that is not empty
    return Console(color_system=colours, width=columns_of(sys.stdout), highlight=False, markup=False, emoji=False)  # type: ignore[arg-type]


def _set(console: Console, block: Block) -> None:
    from rich.padding import Padding
    from rich.text import Text

    from driftline.blocks import Paragraph, records, too_narrow

    if isinstance(block, Paragraph):
        for line in block.lines(min(console.width, WIDEST)):
            console.print(Text(printable(line), ROLES[block.role]), soft_wrap=True)
        return
    table = block.aligned()
    _set(console, Paragraph(table.heading, "heading"))
    if too_narrow(table, console.width):
        for row in records(table, console.width):
            _set(console, row)
    else:
        console.print(Padding(_table(table, console.width), (0, 0, 0, 2), expand=False))


def _table(table: Table, width: int) -> RichTable:
    from rich import box
    from rich.table import Table as RichTable
    from rich.text import Text

    from driftline.blocks import folded, gap_between, room_for_first

    gap = gap_between(table, width)
    # the rule under the head is drawn through a divider of one blank, so the padding is what is left of the gap
    drawn = RichTable(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, gap - 1, 0, 0), expand=False)
    for name in table.columns:
        drawn.add_column(Text(printable(name)), no_wrap=True, header_style="bold")
    room = room_for_first(table, width, gap)
    for first, *others in table.rows:
        drawn.add_row(*(Text(printable(cell, keep="\n")) for cell in ("\n".join(folded(first, room)), *others)))
    return drawn
