"""How a data file is to be read, as far as its content does not say so itself: the options of every layout.

The same names are keys of the table ``[input]`` in a TOML file, options of the command line (with hyphens) and keywords
of `driftline.read`. Nothing numerical is imported here, so that the command line stays quick.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, fields, replace
from types import MappingProxyType
from typing import Any, Literal

from driftline.errors import ConfigurationError, suggestion

#: What a column, dataset or placeholder can hold. `error` is the standard error of the mean, `deviation` the standard
#: deviation over realisations, `value` one raw value of one realisation.
ROLES = ("size", "disorder", "mean", "error", "deviation", "samples", "value", "realisation")
SKIPPED = "-"  # in a list of roles in the order of the columns: not used
SEPARATORS: Mapping[str, str | None] = MappingProxyType(
    {"comma": ",", "semicolon": ";", "tab": "\t", "blanks": None}
)  # fmt: skip
AXES = ("size", "disorder", "realisation", "state")
AVERAGES = ("mean", "median", "log-mean")
KINDS = ("numbers", "counts", "yes-no")

Columns = Mapping[str, str] | tuple[str, ...]


@dataclass(frozen=True)
class InputOptions:
    """How to read a data file. Everything may be left out; then the content must decide, or the program asks.

    Parameters
    ----------
    layout : str, optional
        Name of a layout (`driftline.readers.LAYOUTS`), to take that one without asking the content.
    columns : mapping or sequence or str
        Where each of the `ROLES` stands: ``{"size": "L", "mean": "r", "error": "sem"}`` by the name of a column,
        dataset or array (with placeholders as in `pattern`), by the number of the column, from 1, where columns have
        no names, or as ``@NAME`` for an attribute of HDF5; or the roles in the order of the columns,
        ``("size", "disorder", "mean", "error")``, with ``"-"`` for a column that is not used. As one text:
        ``"size=L,mean=r,error=sem"`` or ``"size,disorder,mean,error"``.
    sizes : sequence of float
        Sizes of the columns of a wide table whose names do not tell them, in order.
    pattern : str, optional
        Path below a folder, or inside an HDF5 file, in which the placeholders ``{size}``, ``{disorder}`` and
        ``{realisation}`` stand for numbers and ``*`` for anything: ``L{size}/W{disorder}/r.dat``.
    axes : sequence of str
        Meaning of the dimensions of an array, in order, from `AXES`; only needed where their lengths do not tell.
    separator : {"comma", "semicolon", "tab", "blanks"}, optional
        What stands between the columns of a text file.
    header : bool, optional
        Whether the first row of a text file holds the names of the columns.
    samples_each : int, optional
        Number of realisations behind every mean, where no column holds it.
    error_each : float, optional
        Standard error of every mean, in units of the observable, where no column holds it.
    skip_cut_lines : bool
        Leave out the last line of a text file if it was cut short, as a killed job leaves it. Never done unasked: half
        a number can look like a whole one.
    average : {"mean", "median", "log-mean"}
        How raw values are averaged over realisations.
    kind : {"numbers", "counts", "yes-no"}
        What raw values are; counts and yes or no get binomial errors.
    paired : bool, optional
        Whether the same disorder realisations were used at several disorders, so that the points of one size are
        correlated; None lets the labels of the realisations decide.

    Raises
    ------
    ConfigurationError
        If a value cannot be used.

    Examples
    --------
    >>> InputOptions(columns="size=L,disorder=W,mean=r,error=sem").columns["size"]
    'L'
    >>> InputOptions(columns="size,-,mean").columns
    ('size', '-', 'mean')
    """

    layout: str | None = None
    columns: Columns = field(default_factory=dict)
    sizes: tuple[float, ...] = ()
    pattern: str | None = None
    axes: tuple[str, ...] = ()
    separator: Literal["comma", "semicolon", "tab", "blanks"] | None = None
    header: bool | None = None
    samples_each: int | None = None
    error_each: float | None = None
    skip_cut_lines: bool = False
    average: Literal["mean", "median", "log-mean"] = "mean"
    kind: Literal["numbers", "counts", "yes-no"] = "numbers"
    paired: bool | None = None

    def __post_init__(self) -> None:
        for name, check in _CHECKS.items():
            object.__setattr__(self, name, check(getattr(self, name), name))

    @classmethod
    def of_table(cls, table: Any, where: str) -> InputOptions:
        """The options in a table ``[input]`` of a TOML file; faults begin with `where`.

        Raises
        ------
        ConfigurationError
            If a key is unknown or a value cannot be used.
        """
        if isinstance(table, cls):
            return table
        if not isinstance(table, Mapping):
            raise ConfigurationError(f"{where}: must be a table, not {table!r}")
        for name in table:
            if name not in _CHECKS:
                raise ConfigurationError(f"{where}: unknown key {name!r}; {suggestion(name, _CHECKS)}")
        return cls(**{name: _CHECKS[name](value, f"{where}.{name}") for name, value in table.items()})

    @classmethod
    def names(cls) -> tuple[str, ...]:
        """The fields, in order."""
        return tuple(part.name for part in fields(cls))

    def to_dict(self) -> dict[str, Any]:
        """The object ``config.input`` of `result.json`: what differs from the defaults."""
        pairs = [f"{role}={place}" for role, place in self.named.items()]
        return {**self.given(), **({"columns": pairs} if pairs else {})}

    def over(self, base: InputOptions) -> InputOptions:
        """`base`, with what is given here put over it, key by key."""
        return InputOptions(**{**base.given(), **self.given()})

    def given(self) -> dict[str, Any]:
        """The options that differ from their defaults, as plain values fit for TOML and JSON."""
        default = type(self)()
        found = {part.name: getattr(self, part.name) for part in fields(self)}
        return {name: _plain(value) for name, value in found.items() if value != getattr(default, name)}

    def with_options(self, given: Mapping[str, Any]) -> InputOptions:
        """These with the options of the command line, by field, put over them; those that are None are not given.

        Raises
        ------
        ConfigurationError
            If a value cannot be used; the text names the option.
        """
        kept = {name: value for name, value in given.items() if value is not None}
        checked = {name: _CHECKS[name](kept[name], f"option --{name.replace('_', '-')}") for name in kept}
        return replace(self, **checked)

    @property
    def named(self) -> dict[str, str]:
        """Role to column as far as they were given by name or number."""
        return dict(self.columns) if isinstance(self.columns, Mapping) else {}

    @property
    def ordered(self) -> tuple[str, ...]:
        """Roles in the order of the columns, empty if they were given by name."""
        return () if isinstance(self.columns, Mapping) else self.columns


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return dict(value)
    return list(value) if isinstance(value, tuple) else value


def _columns(value: Any, where: str) -> Columns:
    if isinstance(value, str):
        value = _columns_of_text(value, where)
    if isinstance(value, Mapping):
        return {_role(role, where): _place(place, f"{where}.{role}") for role, place in value.items()}
    if not isinstance(value, Iterable):
        raise ConfigurationError(f'{where}: must be a table such as size = "L" or a list of roles, not {value!r}')
    roles = tuple(role if role == SKIPPED else _role(role, where) for role in value)
    return roles or {}


def _columns_of_text(text: str, where: str) -> dict[str, str] | list[str]:
    parts = [part.strip() for part in text.split(",")]
    if not any("=" in part for part in parts):
        return parts
    pairs = [part.split("=", 1) for part in parts]
    if odd := next((pair[0] for pair in pairs if len(pair) != 2), None):
        raise ConfigurationError(
            f"{where}: {odd!r} lacks a column; give roles in the order of the columns (size,disorder,mean,error) or a "
            "column for each role (size=L,disorder=W,mean=r,error=sem)"
        )
    roles = [role.strip() for role, _ in pairs]
    if twice := next((role for role in roles if roles.count(role) > 1), None):
        raise ConfigurationError(f"{where}: {twice!r} is given twice; give one column for each role")
    return {role.strip(): place.strip() for role, place in pairs}


def _role(role: Any, where: str) -> str:
    if role not in ROLES:
        raise ConfigurationError(f"{where}: there is no role {role!r}; {suggestion(str(role), ROLES)}")
    return str(role)


def _place(place: Any, where: str) -> str:
    if isinstance(place, int) and not isinstance(place, bool):
        place = str(place)
    if not isinstance(place, str) or not place.strip():
        raise ConfigurationError(f"{where}: must be the name or number of a column, not {place!r}")
    return place.strip()


def _sizes(value: Any, where: str) -> tuple[float, ...]:
    if isinstance(value, str):
        value = [_number_of_text(part, where) for part in value.split(",")]
    if not isinstance(value, Iterable):
        raise ConfigurationError(f"{where}: must be a list of numbers, not {value!r}")
    return tuple(_positive(size, where) for size in value)


def _number_of_text(text: str, where: str) -> float:
    try:
        return float(text)
    except ValueError as reason:
        raise ConfigurationError(f"{where}: {text.strip()!r} is not a number") from reason


def _axes(value: Any, where: str) -> tuple[str, ...]:
    if isinstance(value, str):
        value = [part.strip() for part in value.split(",")]
    if not isinstance(value, Iterable):
        raise ConfigurationError(f"{where}: must be a list such as realisation, disorder, not {value!r}")
    axes = tuple(value)
    for axis in axes:
        if axis not in AXES:
            raise ConfigurationError(f"{where}: there is no axis {axis!r}; {suggestion(str(axis), AXES)}")
        if axes.count(axis) > 1:
            raise ConfigurationError(f"{where}: {axis!r} is given twice; name each dimension of the array once")
    return axes


def _text(value: Any, where: str) -> str | None:
    if value is not None and (not isinstance(value, str) or not value.strip()):
        raise ConfigurationError(f"{where}: must be text, not {value!r}")
    return value


def _switch(value: Any, where: str) -> bool:
    if not isinstance(value, bool):
        raise ConfigurationError(f"{where}: must be true or false, not {value!r}")
    return value


def _maybe(check: Callable[[Any, str], Any]) -> Callable[[Any, str], Any]:
    return lambda value, where: None if value is None else check(value, where)


def _positive(value: Any, where: str) -> float:
    try:
        good = not isinstance(value, bool | str) and math.isfinite(number := float(value)) and number > 0
    except (TypeError, ValueError, OverflowError):
        good = False
    if not good:
        raise ConfigurationError(f"{where}: must be a positive number, not {value!r}")
    return float(value)


def _count(value: Any, where: str) -> int:
    if isinstance(value, bool) or not isinstance(value, int) or not 1 <= value <= 2**53:
        raise ConfigurationError(f"{where}: must be a positive whole number, not {value!r}")
    return value


def _one_of(choices: Iterable[str]) -> Callable[[Any, str], str]:
    names = tuple(choices)

    def check(value: Any, where: str) -> str:
        if value not in names:
            raise ConfigurationError(f"{where}: must be {', '.join(names[:-1])} or {names[-1]}, not {value!r}")
        return str(value)

    return check


_CHECKS: dict[str, Callable[[Any, str], Any]] = {
    "layout": _text,
    "columns": _columns,
    "sizes": _sizes,
    "pattern": _text,
    "axes": _axes,
    "separator": _maybe(_one_of(SEPARATORS)),
    "header": _maybe(_switch),
    "samples_each": _maybe(_count),
    "error_each": _maybe(_positive),
    "skip_cut_lines": _switch,
    "average": _one_of(AVERAGES),
    "kind": _one_of(KINDS),
    "paired": _maybe(_switch),
}
