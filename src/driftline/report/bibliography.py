"""The references of the methods, and a `.bib` file of those that a text cites.

The entries stand in `references.bib` beside this file. Authors, journals, volumes, pages and years are those of the
sources named in the code (a test compares them); titles were written from memory and left out where that was not sure.
"""

from __future__ import annotations

import re
from functools import cache
from importlib.resources import files

_ENTRY = re.compile(r"^@\w+\{(\w+),\n.*?^\}\n", re.MULTILINE | re.DOTALL)
_CITED = re.compile(r"\\cite\{([\w,]+)\}")

HEAD = """\
% References of the methods used, cited in methods.txt.
% Titles, first names, and the entries {remembered} as a whole were written from memory:
% check them before you submit. A field that was not sure is left out.

"""
#: Cited in the code "from memory", or by name and year only.
REMEMBERED = (
    "bhattacharjee2001", "chen2010", "dodelson2013", "foremanmackey2013", "harris2020", "houdayer2004", "kawashima1993",
    "ledoit2020", "suntajs2020", "terbraak2006", "terbraak2008", "virtanen2020",
)  # fmt: skip


@cache
def references() -> dict[str, str]:
    """Every entry by its key, as BibTeX.

    Examples
    --------
    >>> print(references()["binder1981"].splitlines()[-2].strip())
    journal = {Z. Phys. B}, volume = {43}, pages = {119}, year = {1981},
    """
    text = files("driftline.report").joinpath("references.bib").read_text(encoding="utf-8")
    return {entry[1]: entry[0] for entry in _ENTRY.finditer(text)}


def cited(text: str) -> tuple[str, ...]:
    r"""The keys that a LaTeX text cites, each once, in the order of their first citation.

    Examples
    --------
    >>> cited(r"Splines~\cite{eilers1996} and chains~\cite{goodman2010,eilers1996}.")
    ('eilers1996', 'goodman2010')
    """
    return tuple(dict.fromkeys(key for group in _CITED.findall(text) for key in group.split(",")))


def bibtex(text: str) -> str:
    """A `.bib` file with the references that a LaTeX text cites, in alphabetical order."""
    keys = sorted(cited(text))
    remembered = [key for key in keys if key in REMEMBERED]
    head = HEAD.format(remembered=", ".join(remembered) or "(none)")
    return head + "\n".join(references()[key] for key in keys)
