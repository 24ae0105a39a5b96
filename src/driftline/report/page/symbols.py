"""Mathtext symbols as HTML: Greek letters, indices and powers, everything else as text."""

from __future__ import annotations

import re
from html import escape

_TOKEN = re.compile(r"(\\[A-Za-z]+) ?|(\\.|.)", re.DOTALL)
_GREEK = (
    "alpha", "beta", "gamma", "delta", "epsilon", "zeta", "eta", "theta", "iota", "kappa", "lambda", "mu", "nu", "xi",
    "omicron", "pi", "rho", "varsigma", "sigma", "tau", "upsilon", "phi", "chi", "psi", "omega",
)  # fmt: skip
_NAMED = {
    **{name: chr(0x3B1 + number) for number, name in enumerate(_GREEK)},
    **{name.capitalize(): chr(0x391 + number) for number, name in enumerate(_GREEK) if name != "varsigma"},
    "langle": "⟨", "rangle": "⟩", "pm": "±", "infty": "∞", "cdot": "·", "times": "×", "hbar": "ħ", "ell": "ℓ",
    "sqrt": "√", "partial": "∂", "sum": "∑", "ln": "ln", "log": "log",
}  # fmt: skip
#: Commands that only change the letters' look; their argument is written upright.
_UPRIGHT = ("mathrm", "mathbf", "mathsf", "mathcal", "text", "operatorname")
_OVER = ("overline", "bar")
_MARKS = {"_": "sub", "^": "sup"}


def mathtext_to_html(symbol: str) -> str:
    """`symbol`, mathtext with or without dollar signs, as escaped HTML.

    What is not understood is shown as it was written, without its backslash; braces that do not match are tolerated.

    Examples
    --------
    >>> mathtext_to_html(r"W_c"), mathtext_to_html(r"L^{1/\\nu}"), mathtext_to_html("<b>")
    ('<i>W</i><sub><i>c</i></sub>', '<i>L</i><sup>1/<i>ν</i></sup>', '&lt;<i>b</i>&gt;')
    """
    tokens = [command or other for command, other in _TOKEN.findall(symbol.replace("$", ""))]
    return _sequence(tokens, upright=False)


def _sequence(tokens: list[str], *, upright: bool) -> str:
    parts = []
    while tokens:
        token = tokens.pop(0)
        if token in _MARKS and tokens:
            parts.append(f"<{_MARKS[token]}>{_argument(tokens, upright=upright)}</{_MARKS[token]}>")
        elif token[1:] in _UPRIGHT and tokens:
            parts.append(_argument(tokens, upright=True))
        elif token[1:] in _OVER and tokens:
            parts.append(f'<span style="text-decoration:overline">{_argument(tokens, upright=upright)}</span>')
        elif token == "{":
            parts.append(_sequence(_group(tokens), upright=upright))
        elif token != "}":
            parts.append(_letter(token, upright))
    return "".join(parts)


def _argument(tokens: list[str], *, upright: bool) -> str:
    """The next group or the next single token."""
    first = tokens.pop(0)
    return _sequence(_group(tokens) if first == "{" else [first], upright=upright)


def _group(tokens: list[str]) -> list[str]:
    """The tokens up to the brace that closes, or to the end."""
    depth, inside = 1, []
    while tokens:
        token = tokens.pop(0)
        depth += {"{": 1, "}": -1}.get(token, 0)
        if depth == 0:
            break
        inside.append(token)
    return inside


def _letter(token: str, upright: bool) -> str:
    if len(token) > 1 and token[0] == "\\":
        name = token[1:]
        if not name.isalpha():
            return "\N{THIN SPACE}" if name in ",;: !" else escape(name)
        token = _NAMED.get(name, name)
    slanted = not upright and len(token) == 1 and token.isalpha()
    return f"<i>{escape(token)}</i>" if slanted else escape(token)
