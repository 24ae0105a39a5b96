"""The page as a whole: head, sections, scripts, and the policy that lets nothing else in."""

from __future__ import annotations

import base64
import hashlib
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.report import rows
from driftline.report.base import Writer
from driftline.report.page.elements import paragraph, text
from driftline.report.page.sections import HEADINGS, sections

if TYPE_CHECKING:
    from driftline.analysis import Analysis

#: In the order in which they need each other.
SCRIPTS = ("scaling.js", "refit.js", "plot.js", "panel.js")


class Page(Writer):
    """`report.html`; shows the figures that `Drawings` wrote before."""

    title = "report.html"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/report.html`."""
        (folder / "report.html").write_text(page(analysis, folder / "figures"), encoding="utf-8", newline="\n")


def page(analysis: Analysis, figures: Path) -> str:
    """The whole page as HTML; the SVG files of the folder `figures` are put into it."""
    name = text(analysis.curves.labels.observable)
    parts = sections(analysis, figures)
    script = "".join(resource(each) for each in SCRIPTS)
    contents = "".join(f'<li><a href="#{each}">{text(HEADINGS[each])}</a></li>' for each in parts)
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{policy(script)}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>driftline: {name}</title>\n<style>{resource('style.css')}</style>\n</head>\n<body>\n"
        '<a class="skip" href="#verdict">To the verdict</a>\n'
        f"<header>\n<h1>Finite-size crossover: {name}</h1>\n{paragraph(rows.data(analysis), 'about')}\n"
        f'<nav aria-label="Contents"><ul>{contents}</ul></nav>\n</header>\n<main>\n'
        + "\n".join(parts.values())
        + f"\n</main>\n<footer>{paragraph('Made by driftline.')}</footer>\n<script>{script}</script>\n"
        "</body>\n</html>\n"
    )


def resource(name: str) -> str:
    """A style sheet or script that stands beside this file."""
    return (files("driftline.report.page") / name).read_text(encoding="utf-8")


def policy(script: str) -> str:
    """Content security policy: this script and no other, styles and pictures of the page itself, no network.

    The script is named by its SHA-256 (Content Security Policy Level 3, section 2.3.1), so that not even markup that
    slipped through from a data file could run.
    """
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode("ascii")
    return (
        f"default-src 'none'; script-src 'sha256-{digest}'; style-src 'unsafe-inline'; img-src data:; "
        "base-uri 'none'; form-action 'none'"
    )
