"""`report.html`: one self-contained page with the verdict, the tables and the figures."""

from __future__ import annotations

import base64
from html import escape
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report import rows
from driftline.report.base import Writer

if TYPE_CHECKING:
    from driftline.analysis import Analysis

STYLE = """
body { font: 16px/1.5 system-ui, sans-serif; max-width: 52rem; margin: 2rem auto; padding: 0 1rem; color: #1a1a1a; }
h1 { font-size: 1.5rem; } h2 { font-size: 1.15rem; margin-top: 2rem; }
.verdict { border-left: 0.4rem solid #b3471d; background: #fbf2ee; padding: 0.6rem 1rem; }
.verdict.good { border-color: #1f6f54; background: #eef7f3; }
.scroll { overflow-x: auto; }
table { border-collapse: collapse; font-variant-numeric: tabular-nums; }
th, td { text-align: left; padding: 0.25rem 1rem 0.25rem 0; border-bottom: 1px solid #ddd; white-space: nowrap; }
figure { margin: 1.5rem 0; } img { max-width: 100%; height: auto; } figcaption { color: #444; font-size: 0.9rem; }
code { background: #f2f2f2; padding: 0 0.2rem; } footer { color: #555; font-size: 0.85rem; margin-top: 3rem; }
"""


class Page(Writer):
    """`report.html`; shows the figures that `Drawings` wrote before."""

    title = "report.html"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/report.html`."""
        (folder / "report.html").write_text(page(analysis, folder / "figures"), encoding="utf-8", newline="\n")


def page(analysis: Analysis, figures: Path) -> str:
    """The whole page as HTML; the PNG files of the folder `figures` are put into it."""
    name = escape(analysis.curves.labels.observable)
    tables = (
        rows.crossover(analysis), rows.collapse(analysis), rows.crossings(analysis), rows.drift(analysis),
        rows.stability(analysis), rows.costs(analysis),
    )  # fmt: skip
    body = [
        f"<h1>Finite-size crossover of the {name}</h1>",
        _verdict(analysis),
        *(_table(table) for table in tables if table.rows),
        *(f"<p>{escape(sentence)}</p>" for sentence in rows.drift_sentences(analysis)),
        _figures(analysis, figures),
        f"<footer><p>{escape(rows.data(analysis))}</p><p>driftline {escape(version('driftline'))}</p></footer>",
    ]
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>driftline: {name}</title>\n<style>{STYLE}</style>\n</head>\n<body>\n"
        + "\n".join(body)
        + "\n</body>\n</html>\n"
    )


def _verdict(analysis: Analysis) -> str:
    verdict = analysis.verdict
    role = "verdict good" if verdict.code == "transition-supported" else "verdict"
    reasons = "".join(f"<li>{escape(reason)}</li>" for reason in rows.reasons(analysis))
    warnings = "".join(
        f"<li><code>{escape(each.code)}</code> {escape(each.message)}. <em>What to do: {escape(each.action)}.</em></li>"
        for each in verdict.warnings
    )
    return (
        f'<div class="{role}"><p><strong>{escape(verdict.statement)}</strong></p>'
        f"<p>Verdict: <code>{escape(verdict.code)}</code></p>"
        + (f"<ul>{reasons}</ul>" if reasons else "")
        + "</div>\n"
        + (f"<h2>Warnings</h2>\n<ul>{warnings}</ul>" if warnings else "")
    )


def _table(table: rows.Table) -> str:
    head = "".join(f"<th>{escape(name)}</th>" for name in table.columns)
    body = "".join("<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>\n" for row in table.rows)
    return f'<h2>{escape(table.heading)}</h2>\n<div class="scroll"><table>\n<tr>{head}</tr>\n{body}</table></div>'


def _figures(analysis: Analysis, folder: Path) -> str:
    from driftline.figures.gallery import FIGURES

    parts = []
    for figure in FIGURES:
        image = folder / f"{figure.name}.png"
        if image.is_file():
            text = escape(figure.caption(analysis))
            content = base64.b64encode(image.read_bytes()).decode("ascii")
            parts.append(
                f'<figure><img alt="{text}" width="{figure.width * 130:.0f}" src="data:image/png;base64,{content}">'
                f"<figcaption>{text}</figcaption></figure>"
            )
    return "\n".join(parts)
