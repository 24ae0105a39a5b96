"""Texts in figures: mathtext from the symbols and units of the data, and plain text where that cannot be typeset."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache

from matplotlib.mathtext import MathTextParser

from driftline import numerals
from driftline.curves import FloatArray, Labels
from driftline.figures.style import quiet_about_letters

LONGEST = 30  # characters of mathtext, beyond which a symbol is no part of a formula


@lru_cache(maxsize=256)
def typesets(text: str) -> bool:
    """Whether mathtext understands `text`, given without dollar signs."""
    try:
        with quiet_about_letters():
            MathTextParser("path").parse(f"${text}$")
    except (ValueError, RuntimeError):  # the second from fonts that lack what TeX needs
        return False
    return True


def plain(text: str) -> str:
    """`text` as it stands: no part of it is read as mathtext."""
    return text.replace("$", r"\$")


def math(symbol: str) -> str:
    """`symbol` as mathtext, or as it stands if it cannot be typeset."""
    bare = symbol.replace("$", "")
    if not bare.strip() or not typesets(bare):
        return plain(symbol)
    return f"${bare}$"


def unit(text: str) -> str:
    """A unit in upright letters; as it stands unless it holds an index, a power or a command."""
    bare = text.replace("$", "")
    upright = rf"\mathrm{{{bare}}}"
    if any(sign in bare for sign in "\\^_") and typesets(upright):
        return f"${upright}$"
    return plain(text)


def disorder_label(labels: Labels) -> str:
    """Axis label of the disorder: symbol and unit."""
    return math(labels.disorder_symbol) + (f" ({unit(labels.disorder_unit)})" if labels.disorder_unit else "")


def observable_label(labels: Labels) -> str:
    """Axis label of the observable: its symbol."""
    return math(labels.observable_symbol)


def with_disorder(template: str, labels: Labels) -> str | None:
    """Mathtext `template` with {W} replaced by the symbol of the disorder; None where that gives no formula."""
    symbol = math(labels.disorder_symbol)
    if not symbol.startswith("$") or len(symbol) > LONGEST:
        return None
    text = template.format(W=f"{{{symbol[1:-1]}}}")  # braces: the symbol may have an index
    return f"${text}$" if typesets(text) else None


def sizes(values: Sequence[float] | FloatArray) -> list[str]:
    """Sizes as legends show them."""
    return numerals.sizes(values)
