"""Pieces of HTML. Whatever comes from the user's file passes through `text` or `embedded`, and through nothing else."""

from __future__ import annotations

import json
from collections.abc import Iterable
from html import escape as text
from typing import Any

from driftline.blocks import Table

__all__ = ["bullets", "embedded", "paragraph", "section", "table", "text"]


def section(name: str, heading: str, *parts: str) -> str:
    """A part of the page with a heading of its own, reachable as ``#name``; nothing if it has no content."""
    content = "\n".join(part for part in parts if part)
    if not content:
        return ""
    title = f"{name}-heading"
    return (
        f'<section id="{name}" aria-labelledby="{title}">\n<h2 id="{title}">{text(heading)}</h2>\n{content}\n</section>'
    )


def paragraph(sentence: str, role: str = "") -> str:
    """One paragraph of plain text."""
    return f"<p{_role(role)}>{text(sentence)}</p>"


def bullets(sentences: Iterable[str]) -> str:
    """A list of sentences; nothing if there are none."""
    items = "".join(f"<li>{text(each)}</li>\n" for each in sentences)
    return f"<ul>\n{items}</ul>" if items else ""


def table(content: Table, role: str = "") -> str:
    """A table with caption and scopes in a box that scrolls by itself, by keyboard too; nothing if it has no rows."""
    if not content.rows:
        return ""
    head = "".join(f'<th scope="col">{text(name)}</th>' for name in content.columns)
    body = "".join(_row(row) for row in content.rows)
    caption = text(content.heading)
    return (
        f'<div class="scroll" role="region" aria-label="{caption}" tabindex="0">\n<table{_role(role)}>\n'
        f"<caption>{caption}</caption>\n<thead>\n<tr>{head}</tr>\n</thead>\n<tbody>\n{body}</tbody>\n</table>\n</div>"
    )


def _row(cells: tuple[str, ...]) -> str:
    # the limits of an interval stay on one line
    first, *others = (cell.replace(", ", ",\N{NO-BREAK SPACE}") if cell.startswith("[") else cell for cell in cells)
    return f'<tr><th scope="row">{text(first)}</th>' + "".join(f"<td>{text(cell)}</td>" for cell in others) + "</tr>\n"


def _role(role: str) -> str:
    return f' class="{role}"' if role else ""


def embedded(name: str, data: Any) -> str:
    """`data` as JSON in a script element that is never run, with the id `name`.

    No text can end the element or begin another: every ``<``, ``>`` and ``&`` is written by its number.
    """
    content = json.dumps(data, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    for character in "<>&":
        content = content.replace(character, f"\\u{ord(character):04x}")
    return f'<script type="application/json" id="{name}">{content}</script>'
