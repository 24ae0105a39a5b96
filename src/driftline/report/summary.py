"""The summary a physicist reads in ten seconds: verdict first, then numbers, then what to do."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.blocks import BAD, BLANK, GOOD, HEADING, WARNING, Block, Paragraph, plain, spaced
from driftline.report import rows
from driftline.report.base import Writer

if TYPE_CHECKING:
    from driftline.analysis import Analysis


def summary(analysis: Analysis) -> str:
    """The summary as plain text, at most 80 columns wide wherever names allow."""
    return plain(blocks(analysis))


def blocks(analysis: Analysis) -> Iterator[Block]:
    """What the summary is made of, in order."""
    yield from _verdict(analysis)
    tables = (rows.crossover(analysis), rows.collapse(analysis), rows.crossings(analysis), rows.drift(analysis))
    yield from spaced(tables)
    yield from (Paragraph(sentence, indent="  ") for sentence in rows.drift_sentences(analysis))
    yield from _warnings(analysis)
    yield from (BLANK, Paragraph(f"Data: {rows.data(analysis)}"))


class SummaryFile(Writer):
    """`summary.txt`: what the terminal shows, without colour."""

    title = "summary.txt"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/summary.txt`."""
        (folder / "summary.txt").write_text(summary(analysis), encoding="utf-8", newline="\n")


def _verdict(analysis: Analysis) -> Iterator[Block]:
    verdict = analysis.verdict
    yield Paragraph(verdict.statement, GOOD if verdict.code == "transition-supported" else BAD)
    yield Paragraph(f"Verdict: {verdict.code}")
    for reason in rows.reasons(analysis):
        yield Paragraph(reason, indent="    ", first="  - ")
    if verdict.false_alarm is not None:
        yield Paragraph(verdict.false_alarm.sentence)


def _warnings(analysis: Analysis) -> Iterator[Block]:
    if not analysis.verdict.warnings:
        return
    yield from (BLANK, Paragraph("Warnings", HEADING))
    for caution in analysis.verdict.warnings:
        yield Paragraph(caution.code, WARNING, "  ")
        yield Paragraph(caution.message, indent="    ")
        yield Paragraph(caution.action, indent="       ", first="    -> ")
