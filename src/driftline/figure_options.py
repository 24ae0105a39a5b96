"""The options of figures: width, file formats, size of the letters, which figures, and a style file of the user's own.

They are checked together with the other settings, before a long computation; matplotlib is imported only to check a
style file.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, fields
from difflib import get_close_matches
from pathlib import Path
from typing import Any

from driftline.errors import ConfigurationError, suggestion
from driftline.wording import brief, printable, shown

#: Every figure, in the order of the report; the registry of drawings in `figures/gallery.py` has one for each.
FIGURE_NAMES = ("curves", "drift", "collapse", "posterior", "comparison", "stability", "held-out", "misfit")
FORMATS = ("pdf", "png", "svg")
#: Inches: one and two columns of the usual journals.
WIDTHS = {"single": 3.4, "double": 7.0}
#: Narrower than this no label fits, wider than this no page.
LEAST_WIDTH, MOST_WIDTH = 2.5, 20.0
#: Points; journals print nothing below 5.
LEAST_FONT, MOST_FONT = 5.0, 16.0
#: Bytes; the longest style files of matplotlib itself have a few thousand.
LARGEST_STYLE = 100_000
#: Settings of matplotlib that say nothing about looks; a style file may hold them, and they are passed over.
NOT_LOOKS = (
    "backend",
    "interactive",
    "toolbar",
    "timezone",
    "tk.",
    "webagg.",
    "docstring.",
    "keymap.",
    "figure.figsize",
)


@dataclass(frozen=True)
class FigureOptions:
    """How the figures of a report are made; the table ``[figure]`` of a TOML file.

    Parameters
    ----------
    width : {"single", "double"} or float or None
        3.4 in, 7 in, or so many inches, for every figure; by default each has the width that suits it.
    format : tuple of str
        File formats out of ``pdf``, ``png`` (300 dots per inch) and ``svg``; the last is written in any case, since the
        page is made with it.
    font_size : float
        Size of ordinary text in points.
    figures : tuple of str
        Which figures, by name; by default all of `FIGURE_NAMES`.
    style : str or None
        Path of a matplotlib style file, whose settings replace those of the house.

    Raises
    ------
    ConfigurationError
        If a value cannot be used, or the style file cannot be read.

    Examples
    --------
    >>> FigureOptions(width="double").inches
    7.0
    """

    width: str | float | None = None
    format: tuple[str, ...] = ("pdf", "png")
    font_size: float = 8.0
    figures: tuple[str, ...] = FIGURE_NAMES
    style: str | None = None

    def __post_init__(self) -> None:
        for name, value in _checked({part.name: getattr(self, part.name) for part in fields(self)}, "figure").items():
            object.__setattr__(self, name, value)

    @classmethod
    def of_table(cls, table: Any, where: str) -> FigureOptions:
        """The options in a table ``[figure]`` of a TOML file; faults begin with `where`.

        Raises
        ------
        ConfigurationError
            If a key is unknown or a value cannot be used.
        """
        if isinstance(table, cls):
            return table
        if not isinstance(table, Mapping):
            raise ConfigurationError(f"{where}: must be a table, not {brief(table)}")
        known = [part.name for part in fields(cls)]
        for name in table:
            if name not in known:
                raise ConfigurationError(f"{where}: unknown key {shown(str(name))}; {suggestion(name, known)}")
        return cls(**_checked(table, where))

    @property
    def inches(self) -> float | None:
        """Width in inches; None where each figure has its own."""
        return WIDTHS[self.width] if isinstance(self.width, str) else self.width


def read_style(path: str | Path) -> dict[str, Any]:
    """The settings of a matplotlib style file that concern looks, checked line by line.

    Parameters
    ----------
    path : path
        A file of lines ``name: value`` with comments after ``#``.

    Raises
    ------
    ConfigurationError
        If the file cannot be read, or a line is not a setting that matplotlib knows; the text names the line.
    """
    chosen: dict[str, Any] = {}
    for number, name, value in _style_lines(Path(path)):
        if not name.startswith(NOT_LOOKS):
            chosen.update(_style_setting(name, value, f"{path}, line {number}"))
    return chosen


def _style_lines(path: Path) -> Iterator[tuple[int, str, str]]:
    try:
        with path.open("rb") as stream:
            content = stream.read(LARGEST_STYLE + 1)
        if len(content) > LARGEST_STYLE:
            raise ConfigurationError(f"{path}: is larger than {LARGEST_STYLE} bytes, too large for a style file")
        lines = content.decode("utf-8").splitlines()
    except OSError as reason:
        raise ConfigurationError(
            f"{path}: cannot be read ({reason.strerror}); give a matplotlib style file"
        ) from reason
    except UnicodeDecodeError as reason:
        raise ConfigurationError(f"{path}: is not UTF-8 text at byte {reason.start + 1}; save it as UTF-8") from reason
    for number, line in enumerate(lines, 1):
        setting = _without_comment(line).strip()
        if setting:
            name, colon, value = setting.partition(":")
            if not colon:
                raise ConfigurationError(f"{path}, line {number}: must read 'name: value', not {shown(setting)}")
            yield number, name.strip(), value.strip()


def _without_comment(line: str) -> str:
    """The line up to a hash sign outside double quotes."""
    quoted = False
    for place, character in enumerate(line):
        quoted ^= character == '"'
        if character == "#" and not quoted:
            return line[:place]
    return line


def _style_setting(name: str, value: str, where: str) -> dict[str, Any]:
    import matplotlib as mpl  # half a second, and only needed for a style of the user's own

    if value.startswith('"') and value.endswith('"') and len(value) > 1:
        value = value[1:-1]
    if name not in mpl.rcParamsDefault:
        near = get_close_matches(name, mpl.rcParamsDefault, n=1)
        advice = f"did you mean {near[0]}?" if near else "see the list in its documentation"
        raise ConfigurationError(f"{where}: matplotlib has no setting {shown(name)}; {advice}")
    try:
        known: Any = mpl.RcParams  # typed with the names it knows, which is what is to be found out
        checked: dict[str, Any] = dict(known({name: value}))
    except ValueError as reason:
        raise ConfigurationError(f"{where}: {printable(str(reason).splitlines()[0][:200])}") from reason
    if name == "text.usetex" and checked[name]:
        raise ConfigurationError(
            f"{where}: text.usetex is not supported, for labels are mathtext; leave it out (mathtext.fontset: cm has "
            "the letters of TeX)"
        )
    return checked


def _checked(values: Mapping[str, Any], where: str) -> dict[str, Any]:
    checks = {"width": _width, "format": _formats, "font_size": _font_size, "figures": _figures, "style": _style}
    return {name: checks[name](value, f"{where}.{name}") for name, value in values.items()}


def _width(value: Any, where: str) -> str | float | None:
    if value is None or (isinstance(value, str) and value in WIDTHS):
        return value
    number = _number(value)
    if number is None or not LEAST_WIDTH <= number <= MOST_WIDTH:
        raise ConfigurationError(
            f'{where}: must be "single", "double" or inches from {LEAST_WIDTH:g} to {MOST_WIDTH:g}, not {brief(value)}'
        )
    return number


def _font_size(value: Any, where: str) -> float:
    number = _number(value)
    if number is None or not LEAST_FONT <= number <= MOST_FONT:
        raise ConfigurationError(f"{where}: must be points from {LEAST_FONT:g} to {MOST_FONT:g}, not {brief(value)}")
    return number


def _number(value: Any) -> float | None:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    try:
        return float(value) if math.isfinite(value) else None
    except OverflowError:  # TOML knows whole numbers of any length
        return None


def _formats(value: Any, where: str) -> tuple[str, ...]:
    return _names([value] if isinstance(value, str) else value, FORMATS, where)


def _figures(value: Any, where: str) -> tuple[str, ...]:
    return _names(value, FIGURE_NAMES, where)


def _names(value: Any, known: tuple[str, ...], where: str) -> tuple[str, ...]:
    """Some of the known names, each once, in their usual order."""
    if isinstance(value, str | Mapping) or not isinstance(value, Iterable):
        raise ConfigurationError(f"{where}: must be a list of names, not {brief(value)}")
    names = list(value)
    for name in names:
        if name not in known:
            raise ConfigurationError(f"{where}: there is no {brief(name)}; {suggestion(str(name), known)}")
    if not names:
        raise ConfigurationError(f"{where}: is empty; give at least one of {', '.join(known)} or leave the key out")
    return tuple(name for name in known if name in names)


def _style(value: Any, where: str) -> str | None:
    if value is None:
        return None
    if not isinstance(value, str | Path) or not str(value):
        raise ConfigurationError(f"{where}: must be the path of a matplotlib style file, not {brief(value)}")
    path = Path(value).absolute()  # the resolved configuration is read from another folder
    read_style(path)
    return str(path)
