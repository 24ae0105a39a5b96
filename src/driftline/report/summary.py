"""The summary a physicist reads in ten seconds: verdict first, then numbers, then what to do."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report import rows
from driftline.report.base import Writer

if TYPE_CHECKING:
    from driftline.analysis import Analysis

WIDTH = 80

#: Roles of the lines, for whoever colours them.
GOOD, BAD, HEADING, WARNING, TEXT = "good", "bad", "heading", "warning", "text"


def summary(analysis: Analysis) -> str:
    """The summary as plain text, at most 80 columns wide wherever names allow."""
    return "\n".join(line for _, line in lines(analysis)) + "\n"


def lines(analysis: Analysis) -> Iterator[tuple[str, str]]:
    """The lines of the summary with the role of each, in order."""
    yield from _verdict(analysis)
    for table in (rows.crossover(analysis), rows.collapse(analysis), rows.crossings(analysis), rows.drift(analysis)):
        if table.rows:
            yield TEXT, ""
            yield from _table(table)
    for sentence in rows.drift_sentences(analysis):
        yield from _wrapped(sentence, TEXT, "  ")
    yield from _warnings(analysis)
    yield TEXT, ""
    yield from _wrapped(f"Data: {rows.data(analysis)}", TEXT)


class SummaryFile(Writer):
    """`summary.txt`: what the terminal shows, without colour."""

    title = "summary.txt"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/summary.txt`."""
        (folder / "summary.txt").write_text(summary(analysis), encoding="utf-8", newline="\n")


def _verdict(analysis: Analysis) -> Iterator[tuple[str, str]]:
    verdict = analysis.verdict
    role = GOOD if verdict.code == "transition-supported" else BAD
    yield from _wrapped(verdict.statement, role)
    yield TEXT, f"Verdict: {verdict.code}"
    for reason in rows.reasons(analysis):
        yield from _wrapped(reason, TEXT, "    ", first="  - ")


def _warnings(analysis: Analysis) -> Iterator[tuple[str, str]]:
    if not analysis.verdict.warnings:
        return
    yield TEXT, ""
    yield HEADING, "Warnings"
    for caution in analysis.verdict.warnings:
        yield WARNING, f"  {caution.code}"
        yield from _wrapped(caution.message, TEXT, "    ")
        yield from _wrapped(caution.action, TEXT, "       ", first="    -> ")


def _wrapped(text: str, role: str, indent: str = "", first: str | None = None) -> Iterator[tuple[str, str]]:
    start = indent if first is None else first
    for line in textwrap.wrap(text, WIDTH, initial_indent=start, subsequent_indent=indent, break_on_hyphens=False):
        yield role, line


def _table(table: rows.Table) -> Iterator[tuple[str, str]]:
    """Columns under their names; a first cell too long for the page stands on a line of its own."""
    yield HEADING, table.heading
    everything = [table.columns, *table.rows]
    widths = [max(len(row[column]) for row in everything) for column in range(len(table.columns))]
    gap = "  " if sum(widths) + 2 * len(widths) <= WIDTH else " "
    widths[0] = min(widths[0], WIDTH - 2 - sum(widths[1:]) - len(gap) * (len(widths) - 1))
    for first, *others in everything:
        if len(first) > widths[0]:
            yield TEXT, f"  {first}"
            first = ""
        cells = (cell.ljust(width) for cell, width in zip((first, *others), widths, strict=True))
        yield TEXT, "  " + gap.join(cells).rstrip()
