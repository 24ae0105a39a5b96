"""What a text for people is made of, and how it becomes plain lines of a given width.

A block is a paragraph or a table. The terminal sets them in colour (`driftline.cli.screen`), a file or a pipe gets
the plain lines made here; the words are the same.
"""

from __future__ import annotations

import re
import textwrap
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

WIDTH = 80  # columns of a file, and of what is piped
COMFORTABLE = 20  # with so much room for the first column the columns stand two blanks apart
TIED = "\N{NO-BREAK SPACE}"  # textwrap takes it for a letter, so a line never ends there

#: Roles of the lines, for whoever colours them.
GOOD, BAD, HEADING, WARNING, TEXT = "good", "bad", "heading", "warning", "text"

# a number as the tables write it: sign or comparison, digits, decimals, error in brackets, exponent
_NUMBER = re.compile(r"([-+<>]{0,2}\d+)((?:\.\d+)?(?:\([-+\d.]+\))?(?:e[-+]?\d+)?)")


@dataclass(frozen=True)
class Table:
    """A heading, column names, and rows of text."""

    heading: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]

    def aligned(self) -> Table:
        """The same table with the decimal points of its columns of numbers one below the other."""
        columns = [_aligned(cells) for cells in zip(*self.rows, strict=True)]
        return Table(self.heading, self.columns, tuple(zip(*columns, strict=True)))


@dataclass(frozen=True)
class Paragraph:
    """One sentence or more in one role; `first` replaces the indentation of the first line."""

    text: str
    role: str = TEXT
    indent: str = ""
    first: str | None = None

    def lines(self, width: int) -> list[str]:
        """Wrapped to `width`; never broken inside a word, so that names and numbers stay whole."""
        start = self.indent if self.first is None else self.first
        wrapped = textwrap.wrap(
            self.text, width, initial_indent=start, subsequent_indent=self.indent, break_on_hyphens=False,
            break_long_words=False,
        )  # fmt: skip
        return [line.replace(TIED, " ") for line in wrapped] or [""]


Block = Table | Paragraph
BLANK = Paragraph("")


def plain(blocks: Iterable[Block], width: int = WIDTH) -> str:
    """The blocks as text without colour, ending in a line break."""
    return "\n".join(line for _, line in lines(blocks, width)) + "\n"


def lines(blocks: Iterable[Block], width: int = WIDTH) -> Iterator[tuple[str, str]]:
    """The lines of the blocks with the role of each, in order."""
    for block in blocks:
        if isinstance(block, Paragraph):
            yield from ((block.role, line) for line in block.lines(width))
        else:
            yield from _table(block.aligned(), width)


def spaced(tables: Iterable[Table]) -> Iterator[Block]:
    """Those of the tables that have rows, with an empty line before each."""
    for table in tables:
        if table.rows:
            yield BLANK
            yield table


def column_widths(table: Table) -> list[int]:
    """Characters that each column needs."""
    everything = [table.columns, *table.rows]
    return [max(len(row[column]) for row in everything) for column in range(len(table.columns))]


def room_for_first(table: Table, width: int, gap: int) -> int:
    """Characters left for the first column when all others have what they need and two stand before it."""
    others = column_widths(table)[1:]
    return width - 2 - sum(others) - gap * len(others)


def least_for_first(table: Table) -> int:
    """Characters that the first column needs when its names are folded as far as they go."""
    return max(len(line) for row in (table.columns, *table.rows) for line in folded(row[0], 0))


def gap_between(table: Table, width: int) -> int:
    """Blanks between the columns: two, or one where the first column would be cut short."""
    enough = min(max(COMFORTABLE, least_for_first(table)), column_widths(table)[0])
    return 2 if room_for_first(table, width, 2) >= enough else 1


def too_narrow(table: Table, width: int) -> bool:
    """Whether the columns do not fit, however close they stand."""
    return room_for_first(table, width, 1) < least_for_first(table)


def folded(name: str, room: int) -> list[str]:
    """A long name on lines of at most `room` characters, broken after the colons that join its parts.

    Examples
    --------
    >>> folded("power-law:linear-drift:corrected", 24)
    ['power-law:linear-drift:', '  corrected']
    """
    lines = [""]
    for part in name.replace(":", ":\n").split("\n"):
        if lines[-1].strip() and len(lines[-1]) + len(part) > room:
            lines.append("  ")
        lines[-1] += part
    return lines


def records(table: Table, width: int) -> Iterator[Paragraph]:
    """The rows as paragraphs, where there is no room for columns: the first cell, then each value after its name."""
    for first, *others in table.rows:
        yield from (Paragraph(line, indent="  ") for line in folded(first, width - 2))
        pairs = zip(table.columns[1:], others, strict=True)
        named = (f"{name} {cell.strip()}".replace(" ", TIED) for name, cell in pairs)
        yield Paragraph("; ".join(named), TEXT, "    ")


def _table(table: Table, width: int) -> Iterator[tuple[str, str]]:
    """Columns under their names; a first cell too long for the page stands on a line of its own."""
    yield from ((HEADING, line) for line in Paragraph(table.heading).lines(width))
    if too_narrow(table, width):
        yield from lines(records(table, width), width)
        return
    widths = column_widths(table)
    gap = " " * gap_between(table, width)
    widths[0] = min(widths[0], room_for_first(table, width, len(gap)))
    for first, *others in (table.columns, *table.rows):
        if len(first) > widths[0]:
            yield TEXT, f"  {first}"
            first = ""
        cells = (cell.ljust(size) for cell, size in zip((first, *others), widths, strict=True))
        yield TEXT, "  " + gap.join(cells).rstrip()


def _aligned(cells: Sequence[str]) -> list[str]:
    """Numbers padded on the left to a common place of the decimal point; a column with any other text stays."""
    found = [_NUMBER.fullmatch(cell) for cell in cells]
    if any(match is None and cell != "-" for match, cell in zip(found, cells, strict=True)):
        return list(cells)
    before = [len(match[1]) if match else 1 for match in found]
    return [" " * (max(before) - size) + cell for size, cell in zip(before, cells, strict=True)]
