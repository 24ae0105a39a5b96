"""Foreign words inside our sentences: shortened, and without characters that act on a terminal."""

from __future__ import annotations

import re
import reprlib
from collections.abc import Iterable
from typing import Any

# Control characters (a terminal obeys escape sequences, and a carriage return hides what stood before), line and
# paragraph separators, marks that reverse the direction of writing, and halves of surrogate pairs, which stand for
# bytes of a file name that are not UTF-8 and which no stream can encode
_ACTIVE = re.compile("[\x00-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\ud800-\udfff]")


def printable(text: str, *, keep: str = "") -> str:
    r"""`text` with every character that acts on a terminal written out as an escape, save those in `keep`.

    Examples
    --------
    >>> print(printable("run\x1b[2J.csv"))
    run\x1b[2J.csv
    """
    return _ACTIVE.sub(lambda found: found[0] if found[0] in keep else repr(found[0])[1:-1], text)


def shown(text: str, *, longest: int = 30) -> str:
    """`text` in quotes, shortened, with unprintable characters escaped, for use inside a sentence."""
    return repr(text if len(text) <= longest else text[: longest - 3] + "...")


def listed(names: Iterable[str], *, most: int = 12) -> str:
    """Names as a list for a sentence: commas, shortened names, and a count of what does not fit."""
    every = [name if len(name) <= 30 and name.isprintable() else shown(name)[1:-1] for name in names]
    rest = f" and {len(every) - most} more" if len(every) > most else ""
    return ", ".join(every[:most]) + rest


def brief(value: Any) -> str:
    """A value of a configuration as Python writes it, shortened at every level, for use inside a sentence."""
    return _BRIEF.repr(value)


class _Brief(reprlib.Repr):
    def __init__(self) -> None:
        super().__init__()
        self.maxstring = self.maxother = 60

    def repr_int(self, x: int, level: int) -> str:
        # the interpreter refuses to write out more than some thousand digits
        return super().repr_int(x, level) if x.bit_length() < 1000 else f"a whole number of {x.bit_length()} bits"


_BRIEF = _Brief()
