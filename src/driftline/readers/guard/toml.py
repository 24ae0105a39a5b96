"""TOML of unknown origin: small, parsed once, with every way to fail turned into one sentence."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

from driftline.errors import InputError
from driftline.readers.guard.limits import MAX_CONFIG, MAX_CONFIG_DEPTH, MAX_CONFIG_DOTS, MAX_LINE
from driftline.readers.guard.text import lines
from driftline.wording import shown


def read_toml(path: Path, place: str) -> dict[str, Any]:
    """The content of the TOML file at `path`.

    Raises
    ------
    InputError
        If it cannot be read, is too large, or is not TOML.

    Notes
    -----
    The parser's time and memory grow with the square of the parts of a dotted key, and its recursion with the depth of
    lists, so both the size of the file and the number of dots are bounded. Whole numbers are those of 64 bits that the
    format asks for; Python's own would be of any length.
    """
    text = "\n".join(
        line
        for _, line in lines(
            path, place, most=MAX_CONFIG, longest=MAX_LINE, advice="a configuration has some hundred lines"
        )
    )
    if text.count(".") > MAX_CONFIG_DOTS:
        raise InputError(f"there are more than {MAX_CONFIG_DOTS} dots, so this is no configuration", where=place)
    try:
        content = tomllib.loads(text)
        _check(content, place)
    except tomllib.TOMLDecodeError as reason:
        raise InputError(f"is not valid TOML: {shown(str(reason), longest=200)[1:-1]}", where=place) from reason
    except RecursionError as reason:
        raise InputError(_TOO_DEEP, where=place) from reason
    except ValueError as reason:  # beyond the interpreter's limit of digits, before the check below
        raise InputError(_TOO_LONG, where=place) from reason
    return content


_TOO_DEEP = "lists or tables are nested too deeply; write them flat"
_TOO_LONG = "there is a whole number that does not fit into 64 bits, which TOML does not allow; shorten it"


def _check(value: Any, place: str, depth: int = 0) -> None:
    """Refuse what TOML allows and nobody writes: deep nesting; and what it does not allow: long whole numbers."""
    if isinstance(value, dict | list):
        if depth > MAX_CONFIG_DEPTH:
            raise InputError(_TOO_DEEP, where=place)
        for inner in value.values() if isinstance(value, dict) else value:
            _check(inner, place, depth + 1)
    elif isinstance(value, int) and not -(2**63) <= value < 2**63:
        raise InputError(_TOO_LONG, where=place)
