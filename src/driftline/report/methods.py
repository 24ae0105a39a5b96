r"""`methods.txt`: what was done, in words and numbers to paste into a paper, with `methods.bib` beside it.

The text is LaTeX that needs no package. It says what this run did and nothing else: numbers come from the settings, the
data and the constants of the code, and only methods that were used are named and cited.
"""

from __future__ import annotations

import textwrap
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report import methods_collapse, methods_curves, methods_outcome
from driftline.report.base import Writer
from driftline.report.bibliography import bibtex
from driftline.report.latex import beyond_latex
from driftline.versions import software

if TYPE_CHECKING:
    from driftline.analysis import Analysis

Paragraph = Callable[["Analysis"], str]

#: In the order of the text; one that has nothing to say is empty.
PARAGRAPHS: tuple[Paragraph, ...] = (
    methods_curves.data,
    methods_curves.crossings,
    methods_curves.drift,
    methods_curves.separation,
    methods_collapse.model,
    methods_collapse.priors,
    methods_collapse.sampling,
    methods_collapse.weights,
    methods_collapse.checks,
    methods_outcome.rules,
    methods_outcome.outcome,
    methods_outcome.software,
)
WIDTH = 100


class MethodsFiles(Writer):
    """`methods.txt` and `methods.bib`."""

    title = "methods.txt"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write both into `folder`."""
        text = methods(analysis)
        (folder / "methods.txt").write_text(text, encoding="utf-8", newline="\n")
        (folder / "methods.bib").write_text(bibtex(text), encoding="utf-8", newline="\n")


def methods(analysis: Analysis) -> str:
    """The content of `methods.txt`: LaTeX, a comment first, then a paragraph for each step."""
    paragraphs = [text for paragraph in PARAGRAPHS if (text := paragraph(analysis))]
    wrapped = [textwrap.fill(text, WIDTH, break_long_words=False, break_on_hyphens=False) for text in paragraphs]
    return "\n".join([*_head(analysis, "".join(paragraphs)), "", "\n\n".join(wrapped), ""])


def _head(analysis: Analysis, text: str) -> list[str]:
    lines = [
        f"% Methods, written by driftline {software()['version']} for this very analysis. LaTeX without packages;",
        "% the references cited are in methods.bib. Errors in brackets are in units of the last digit.",
    ]
    if any(curve.samples is None for curve in analysis.curves.curves):
        lines.append("% The data do not say how many disorder realisations stand behind every mean: add it.")
    if unknown := beyond_latex(text):
        lines.append(f"% pdfLaTeX does not know {unknown}: use XeLaTeX or LuaLaTeX, or write it in another way.")
    return lines
