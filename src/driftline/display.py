"""What a result shows of itself: the same tables and sentences as plain text, and as HTML in a notebook."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterable
from html import escape

from driftline.blocks import Paragraph, Table, plain

#: Notebooks look for mathematics between dollar signs in any output; text from a data file is not meant by that.
NO_MATHEMATICS = "tex2jax_ignore mathjax_ignore"


class Shown(ABC):
    """A result with a face."""

    @abstractmethod
    def shown(self) -> Iterable[Table | str]:
        """Tables and sentences in order, as plain text; tables without rows are left out."""

    def summary(self) -> str:
        """Tables and sentences as text of at most 80 columns."""
        parts = [part for part in self.shown() if isinstance(part, str) or part.rows]
        return plain(Paragraph(part) if isinstance(part, str) else part for part in parts).rstrip("\n")

    def _repr_html_(self) -> str:
        """What a notebook shows where the result is the last value of a cell."""
        parts = "".join(_html(part) for part in self.shown())
        return f'<div class="{NO_MATHEMATICS}">{parts}</div>'


def _html(part: Table | str) -> str:
    if isinstance(part, str):
        return f"<p>{escape(part)}</p>"
    if not part.rows:
        return ""
    head = "".join(f"<th>{escape(name)}</th>" for name in part.columns)
    body = "".join("<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>" for row in part.rows)
    caption = f'<caption style="text-align: left">{escape(part.heading)}</caption>'
    return f"<table>{caption}<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"


def symbol(text: str) -> str:
    r"""A mathtext symbol as plain text.

    Examples
    --------
    >>> symbol(r"\langle r\rangle"), symbol(r"S_{\mathrm{half}}")
    ('<r>', 'S_half')
    """
    for mathtext, word in ((r"\langle", "<"), (r"\rangle", ">"), (r"\mathrm", ""), (r"\,", " "), (r"\overline", "")):
        text = text.replace(mathtext, word)
    for character in "\\{}$":
        text = text.replace(character, "")
    return text.replace("< ", "<").replace(" >", ">").strip()
