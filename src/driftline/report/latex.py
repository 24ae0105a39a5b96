r"""Text, symbols and numbers as LaTeX that compiles, whatever a data file holds.

Text is escaped (`escape`). A symbol is mathtext and so nearly LaTeX already; it is read token by token, and what is not
known to compile with LaTeX alone is written as plain text instead (`mathematics`). Numbers keep the rounding of
`driftline.numerals`.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Sequence

from driftline import numerals
from driftline.display import symbol
from driftline.inference.intervals import Interval
from driftline.numerals import Quoted

NOTHING = "--"


def _words(text: str) -> tuple[str, ...]:
    return tuple(text.split())


GREEK = _words(
    "alpha beta gamma delta epsilon varepsilon zeta eta theta vartheta iota kappa lambda mu nu xi pi varpi rho varrho "
    "sigma varsigma tau upsilon phi varphi chi psi omega Gamma Delta Theta Lambda Xi Pi Sigma Upsilon Phi Psi Omega"
)
#: Commands of mathtext that LaTeX knows without packages: alone, with an argument, and with two.
ALONE = GREEK + _words(
    "langle rangle ell hbar infty partial nabla cdot times pm mp leq geq neq approx sim propto equiv mid parallel perp "
    "prime dagger ast star circ bullet sum prod int ln log exp sin cos tan max min det Re Im quad to rightarrow"
)
_SAME = _words("mathrm mathbf mathit mathcal mathsf mathtt overline underline bar hat tilde vec dot ddot sqrt widehat")
WITH_ONE = {
    **{name: name for name in _SAME}, "text": "mathrm", "operatorname": "mathrm", "mathdefault": "mathrm",
    "mathbb": "mathbf", "boldsymbol": "mathbf",
}  # fmt: skip
WITH_TWO = {"frac": "frac", "dfrac": "frac", "tfrac": "frac"}
SIZES = ("left", "right", "displaystyle")  # say nothing that is needed

_TOKEN = re.compile(r"\\[A-Za-z]+|\\[,;:! ]|[{}_^]|[A-Za-z0-9 +\-*/=<>()\[\].,:;!|]")

_PLAIN = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "#": r"\#", "_": r"\_", "%": r"\%",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}", "<": "$<$", ">": "$>$", "|": "$|$", '"': "''",
    "ß": r"\ss{}", "ø": r"\o{}", "Ø": r"\O{}", "æ": r"\ae{}", "Æ": r"\AE{}", "œ": r"\oe{}", "Œ": r"\OE{}",
    "ł": r"\l{}", "Ł": r"\L{}", "ı": r"\i{}", "–": "--", "—": "---", "‘": "`", "’": "'", "“": "``", "”": "''",
    "−": "$-$", "×": r"$\times$", "±": r"$\pm$", "·": r"$\cdot$", "°": r"$^{\circ}$", "∞": r"$\infty$",
    "ħ": r"$\hbar$", "ℏ": r"$\hbar$", "ℓ": r"$\ell$", "⟨": r"$\langle$", "⟩": r"$\rangle$", "≤": r"$\leq$",
    "≥": r"$\geq$", "→": r"$\to$", "∂": r"$\partial$", "\N{NO-BREAK SPACE}": "~", "µ": r"$\mu$",
}  # fmt: skip
_ACCENTS = {
    "\u0300": "`", "\u0301": "'", "\u0302": "^", "\u0303": "~", "\u0304": "=", "\u0306": "u", "\u0307": ".",
    "\u0308": '"', "\u030a": "r", "\u030b": "H", "\u030c": "v", "\u0327": "c",
}  # fmt: skip
_POWERS = {"<super>": "^", "<sub>": "_"}


def escape(text: str) -> str:
    r"""Text of the user's as LaTeX text.

    Characters for which LaTeX alone has no command, as those of other scripts, stay as they are: `beyond_latex` tells.

    Examples
    --------
    >>> print(escape("50% of J_z & Šuntajs' Δ²"))
    50\% of J\_z \& \v{S}untajs' $\Delta$$^{2}$
    """
    return "".join(_character(each) for each in unicodedata.normalize("NFC", text))


def beyond_latex(text: str) -> str:
    """Those characters of LaTeX text that pdfLaTeX does not know; XeLaTeX and LuaLaTeX do, given the font."""
    return "".join(dict.fromkeys(each for each in text if not each.isascii()))


def _character(each: str) -> str:
    if each in _PLAIN:
        return _PLAIN[each]
    if each.isascii():
        return each
    name = unicodedata.name(each, "")
    if name.startswith("GREEK ") and (command := _greek(name)):
        return f"$\\{command}$"
    kind, _, rest = unicodedata.decomposition(each).partition(" ")
    if kind in _POWERS and (base := chr(int(rest, 16))).isalnum() and base.isascii():
        return f"${_POWERS[kind]}{{{base}}}$"
    base, accent = unicodedata.normalize("NFD", each)[:1], unicodedata.normalize("NFD", each)[1:]
    if base.isascii() and base.isalpha() and accent in _ACCENTS:
        return f"\\{_ACCENTS[accent]}{{{base}}}"
    return each


def _greek(name: str) -> str | None:
    """`Delta` for GREEK CAPITAL LETTER DELTA; None for letters without a command, as those that look Latin."""
    found = re.fullmatch(r"GREEK (SMALL|CAPITAL) LETTER (\w+)", name)
    if found is None:
        return None
    word = found[2].lower().replace("lamda", "lambda")
    word = word.capitalize() if found[1] == "CAPITAL" else word
    return word if word in GREEK else None


def mathematics(text: str) -> str:
    r"""A symbol in mathtext as LaTeX for math mode, one closed group if it carries indices.

    Examples
    --------
    >>> print(mathematics(r"\langle r\rangle"), mathematics(r"S_\mathrm{half}"), mathematics("50% x_y_z"))
    \langle r\rangle {S_{\mathrm{half}}} \mbox{50\% x\_y\_z}
    """
    bare = text.strip().strip("$")
    try:
        tokens = _tokens(bare)
        written, rest = _group(tokens, 0)
    except ValueError:
        return rf"\mbox{{{escape(symbol(text) or text)}}}"
    if rest != len(tokens) or not written.strip(" {}"):
        return rf"\mbox{{{escape(symbol(text) or text)}}}"
    return f"{{{written}}}" if "_" in written or "^" in written else written


def _tokens(text: str) -> list[str]:
    """Tokens of a symbol.

    Raises
    ------
    ValueError
        If there is a character that is none.
    """
    greek = "".join(f"\\{command} " if (command := _greek(unicodedata.name(c, ""))) else c for c in text)
    tokens = _TOKEN.findall(greek)
    if "".join(tokens) != greek:
        raise ValueError(text)
    return [token for token in tokens if token[1:] not in SIZES]


def _group(tokens: Sequence[str], at: int) -> tuple[str, int]:
    """Atoms up to a closing brace or the end, as LaTeX, and where they end.

    Raises
    ------
    ValueError
        If something is not known to compile.
    """
    written, scripts = "", ""
    while at < len(tokens) and tokens[at] != "}":
        token = tokens[at]
        if token in ("_", "^"):
            if token in scripts:
                raise ValueError("two indices of one kind")
            scripts += token
            atom, at = _atom(tokens, at + 1)
            written += token + (atom if atom.startswith("{") else f"{{{atom}}}")
        else:
            scripts = scripts if token == " " else ""
            atom, at = _atom(tokens, at)
            written += atom
    return written, at


def _atom(tokens: Sequence[str], at: int) -> tuple[str, int]:
    """One character, group, or command with its arguments."""
    if at >= len(tokens) or tokens[at] in ("_", "^", "}"):
        raise ValueError("something is missing")
    token, at = tokens[at], at + 1
    if token == "{":
        inner, at = _group(tokens, at)
        if at >= len(tokens):
            raise ValueError("a brace is not closed")
        return f"{{{inner}}}", at + 1
    if not token.startswith("\\") or not token[1:].isalpha():
        return token, at
    name = token[1:]
    arguments = 1 if name in WITH_ONE else 2 if name in WITH_TWO else 0
    if not arguments and name not in ALONE:
        raise ValueError(f"unknown command {name}")
    written = f"\\{WITH_ONE.get(name) or WITH_TWO.get(name) or name}"
    for _ in range(arguments):
        while at < len(tokens) and tokens[at] == " ":
            at += 1
        if at >= len(tokens) or tokens[at] != "{":
            raise ValueError("an argument is missing")
        argument, at = _atom(tokens, at)
        written += argument
    followed_by_letter = not arguments and at < len(tokens) and tokens[at].isalpha()
    return written + " " * followed_by_letter, at


def number(found: Quoted) -> str:
    r"""A rounded number in dollar signs: 16.53(12), or with upper and lower error 1.47(^{+36}_{-26}).

    Examples
    --------
    >>> print(number(Quoted("3.20", ("30", "10"), -9)))
    $3.20(^{+30}_{-10})\times 10^{-9}$
    """
    if found.number == numerals.MISSING:
        return NOTHING
    up, down = (*found.errors, "", "")[:2]
    error = rf"(^{{+{up}}}_{{-{down}}})" if down else f"({up})" if up else ""
    power = rf"\times 10^{{{found.power}}}" if found.power else ""
    return f"${found.number}{error}{power}$"


def with_systematic(interval: Interval, systematic: float) -> str:
    r"""Median with its error or errors and a systematic one, which has a bracket of its own.

    Examples
    --------
    >>> print(with_systematic(Interval(16.53, 16.41, 16.65, 16.31, 16.78), 0.05))
    $16.53(12)(5)$
    >>> print(with_systematic(Interval(2.2, 1.92, 2.30, 1.66, 2.41), 0.24))
    $2.20(^{+10}_{-28})(24)$
    """
    statistical = numerals.up_down(interval)
    if not statistical.errors:
        return number(statistical)
    errors = (interval.high68 - interval.median, interval.median - interval.low68)
    if len(statistical.errors) == 1:
        errors = (interval.sd, interval.sd)
    decisive = max(min(errors), max(errors) / 10)
    up, down, other = numerals.quoted(interval.median, *errors, systematic, decisive=decisive).errors
    both = (up,) if len(statistical.errors) == 1 else (up, down)
    return (
        number(Quoted(statistical.number, both, 0))[:-1]
        + f"({other})"
        + (rf"\times 10^{{{statistical.power}}}$" if statistical.power else "$")
    )


def value(interval: Interval | None) -> str:
    """Median with its error or errors."""
    return NOTHING if interval is None else number(numerals.up_down(interval))


def plain_number(text: str) -> str:
    r"""A number written by `driftline.numerals` without errors, as in ``<0.01`` or ``1e+30``, in dollar signs.

    Examples
    --------
    >>> print(plain_number("<0.01"), plain_number("2.5e-07"), plain_number("-"))
    $<0.01$ $2.5\times 10^{-7}$ --
    """
    if text == numerals.MISSING:
        return NOTHING
    mantissa, _, power = text.partition("e")
    return f"${mantissa}\\times 10^{{{int(power)}}}$" if power else f"${text}$"


def general(value: float) -> str:
    """A number of the user's own, as in ``%g``."""
    return plain_number(f"{value:g}")


def limits(interval: Interval | None, level: int = 95) -> str:
    """Ends of an interval."""
    if interval is None:
        return NOTHING
    low, high = (interval.low68, interval.high68) if level == 68 else (interval.low95, interval.high95)
    ends = (plain_number(numerals.rounded(end, interval.sd)) for end in (low, high))
    return "[{}, {}]".format(*ends)


def listed(parts: Iterable[str]) -> str:
    """Parts joined by commas and a last "and".

    Examples
    --------
    >>> listed(["6", "8", "12"]), listed(["6"])
    ('6, 8 and 12', '6')
    """
    *first, last = parts
    return f"{', '.join(first)} and {last}" if first else last


def name(text: str) -> str:
    """A name by which the program knows something, in the type of code."""
    return rf"\texttt{{{escape(text)}}}"


def number_words(count: int) -> str:
    """A whole number with thin spaces between groups of three digits.

    Examples
    --------
    >>> print(number_words(20000), number_words(400))
    20\\,000 400
    """
    return f"{count:,}".replace(",", r"\,")
