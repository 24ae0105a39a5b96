"""The choices of one analysis: TOML file and command-line options become one frozen object.

Nothing numerical is imported before a label is checked or curves are cut, so that the command line stays quick.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, fields, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from driftline.errors import ConfigurationError, InputError, suggestion
from driftline.figure_options import FigureOptions
from driftline.reading import InputOptions
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.wording import brief, shown

if TYPE_CHECKING:
    from driftline.curves import Curves
    from driftline.scaling.expression import ExpressionForm

FORMS_KEY = "ansatz"  # in a TOML file, where a form is a table [ansatz.NAME]
MIN_DRAWS = 200  # the 95 % interval then still has five draws in each tail
MAX_DRAWS = 1_000_000  # of some hundred points: a gigabyte
MAX_JOBS = 4096  # beyond any machine; a system refuses many more processes with words of its own


@dataclass(frozen=True)
class Settings:
    """What to compute, apart from the data.

    Parameters
    ----------
    ansatze : tuple of str
        Scaling ansätze to compare, by name (see ``driftline ansatze``); by default those of
        `driftline.scaling.defaults`.
    window : (low, high) or None
        Disorder range to use, ends included, in the user's unit; None uses everything.
    smallest_size : float or None
        Sizes below this one are left out.
    seed : int
        Seed of the one random generator; same seed, same numbers.
    quick : bool
        Shorter chains and fewer stability refits, for a first look.
    jobs : int
        Worker processes; the numbers do not depend on it.
    labels : mapping
        Fields of `driftline.Labels` that replace what the data file says.
    draws : int
        Joint posterior draws of the smoothed curves behind crossings and drift.
    forms : tuple of ExpressionForm
        Scaling forms of the user's own, which `ansatze` may name. A mapping of tables by name, as in a TOML file, is
        understood as well.
    input : InputOptions
        How the data file is read, as `driftline.read` takes it; `driftline.analyse` puts in its place what the curves
        say about their own reading.
    figure : FigureOptions
        How figures are drawn; a mapping of its fields, as in a TOML file, is understood as well.

    Raises
    ------
    ConfigurationError
        If a value cannot be used.

    Examples
    --------
    >>> Settings(window=(14, 19)).window
    (14.0, 19.0)
    """

    ansatze: tuple[str, ...] = DEFAULT_ANSATZE
    window: tuple[float, float] | None = None
    smallest_size: float | None = None
    seed: int = 0
    quick: bool = False
    jobs: int = 1
    labels: Mapping[str, Any] = field(default_factory=dict)
    draws: int = 2000
    forms: tuple[ExpressionForm, ...] = ()
    input: InputOptions = field(default_factory=InputOptions)
    figure: FigureOptions = field(default_factory=FigureOptions)

    def __post_init__(self) -> None:
        for name, check in _CHECKS.items():
            object.__setattr__(self, name, check(getattr(self, name), name))
        _check_ansatz_names(self.ansatze, self.forms, "ansatze")

    @classmethod
    def resolve(
        cls,
        file: str | Path | None = None,
        options: Mapping[str, Any] | None = None,
        defaults: Mapping[str, Any] | None = None,
    ) -> Settings:
        """Defaults, overridden by the TOML `file`, overridden by the command line's `options`.

        Parameters
        ----------
        file : path, optional
            TOML file with any of the fields of `Settings` as keys; the labels as a table ``[labels]``, the reading as a
            table ``[input]``, figures as ``[figure]``, each form of the user's own as a table ``[ansatz.NAME]``.
        options : mapping, optional
            Fields by name; those that are None count as not given.
        defaults : mapping, optional
            Fields whose defaults differ from those of `Settings`, already checked.

        Raises
        ------
        ConfigurationError
            If the file cannot be read or a key or value cannot be used; the text names the file or option.
        """
        chosen = {**(defaults or {}), **({} if file is None else _read_toml(Path(file)))}
        for name, value in (options or {}).items():
            if name == "observable":
                if value is not None:
                    labels = {**chosen.get("labels", {}), "observable": value}
                    chosen["labels"] = _labels(labels, "option --observable")
            elif name == "input":
                chosen[name] = chosen.get(name, InputOptions()).with_options(value)
            elif value is not None:
                where = f"option --{'ansatz' if name == 'ansatze' else name}".replace("_", "-")
                chosen[name] = _CHECKS[name](value, where)
                if name == "ansatze":
                    _check_ansatz_names(chosen[name], chosen.get("forms", ()), where)
        return cls(**chosen)

    def with_reading(self, curves: Curves) -> Settings:
        """These settings with the options that read the file of `curves` again in the same way, if it tells them."""
        found = curves.origin.get("input")
        return self if found is None else replace(self, input=InputOptions.of_table(found, "input"))

    def to_dict(self) -> dict[str, Any]:
        """The object ``config`` of `result.json`: the settings that can change a number.

        The seed stands beside it there, and the number of workers changes none.
        """
        from driftline.plain import attributes  # numpy comes with them, so only where they are needed
        from driftline.scaling.tables import form_table

        names = (part.name for part in fields(self) if part.name not in ("seed", "jobs", "forms", "input", "figure"))
        forms = {form.name: form_table(form) for form in self.forms}
        return {**attributes(self, *names), "forms": forms, "input": self.input.to_dict()}

    def select(self, curves: Curves) -> Curves:
        """The part of `curves` that window and smallest size leave, under the labels that replace those of the file.

        Raises
        ------
        ConfigurationError
            If too little is left to analyse.
        """
        if self.smallest_size is not None:
            left = int((curves.sizes >= self.smallest_size).sum())
            if left < 2:
                sizes = ", ".join(f"{size:g}" for size in curves.sizes)
                raise ConfigurationError(
                    f"smallest size {self.smallest_size:g} leaves {left} of the sizes {sizes}, and 2 are needed; "
                    f"choose {curves.sizes[-2]:g} or less"
                )
        labelled = curves.relabel(**self.labels) if self.labels else curves
        try:
            return labelled.select(smallest_size=self.smallest_size, window=self.window)
        except InputError as reason:
            raise ConfigurationError(str(reason)) from reason


def _read_toml(path: Path) -> dict[str, Any]:
    from driftline.readers.guard import read_toml  # numpy comes with it, so only where it is needed

    try:
        content = read_toml(path, str(path))
    except InputError as reason:
        raise ConfigurationError(str(reason)) from reason
    known = {FORMS_KEY if name == "forms" else name: name for name in _CHECKS}
    chosen = {}
    for key, value in content.items():
        if key not in known:
            raise ConfigurationError(f"{path}: unknown key {shown(key)}; {suggestion(key, known)}")
        chosen[known[key]] = _CHECKS[known[key]](_beside(value, key, path), f"{path}, {key}")
    _check_ansatz_names(chosen.get("ansatze", ()), chosen.get("forms", ()), f"{path}, ansatze")
    return chosen


def _beside(value: Any, key: str, path: Path) -> Any:
    """A style file named in a TOML file is sought beside it."""
    if key == "figure" and isinstance(value, dict) and isinstance(style := value.get("style"), str) and style:
        return {**value, "style": str(path.parent / style)}
    return value


def _number(value: Any, where: str) -> float:
    try:
        finite = isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
    except OverflowError:  # TOML knows whole numbers of any length
        finite = False
    if not finite:
        raise ConfigurationError(f"{where}: must be a finite number, not {brief(value)}")
    return float(value)


def _whole(value: Any, where: str, *, least: int, most: int) -> int:
    if isinstance(value, bool) or not isinstance(value, int):
        raise ConfigurationError(f"{where}: must be a whole number, not {brief(value)}")
    if value < least:
        raise ConfigurationError(f"{where}: must be at least {least}, not {brief(value)}")
    if value > most:
        raise ConfigurationError(f"{where}: must be at most {most}, not {brief(value)}")
    return value


def _ansatze(value: Any, where: str) -> tuple[str, ...]:
    if isinstance(value, str | Mapping) or not isinstance(value, Iterable):
        raise ConfigurationError(f"{where}: must be a list of names, not {brief(value)}")
    names = tuple(value)
    seen: set[str] = set()
    for name in names:
        if not isinstance(name, str):
            raise ConfigurationError(f"{where}: must be a list of names, but holds {brief(name)}")
        if name in seen:
            raise ConfigurationError(f"{where}: {shown(name)} is given twice; give each ansatz once")
        seen.add(name)
    if not names:
        raise ConfigurationError(f"{where}: is empty; give at least one ansatz or leave the key out")
    return names


def _check_ansatz_names(names: Iterable[str], forms: tuple[ExpressionForm, ...], where: str) -> None:
    from driftline.scaling.ansatz import check_ansatz_name  # numpy comes with it, so only where it is needed

    for name in names:
        try:
            check_ansatz_name(name, forms)
        except ConfigurationError as reason:
            raise ConfigurationError(f"{where}: {reason}") from reason


def _forms(value: Any, where: str) -> tuple[ExpressionForm, ...]:
    if isinstance(value, Mapping | tuple | list) and not value:
        return ()
    from driftline.scaling.tables import read_forms  # numpy comes with it, so only where it is needed

    return read_forms(value, where)


def _window(value: Any, where: str) -> tuple[float, float] | None:
    if value is None:
        return None
    if isinstance(value, str) or not isinstance(value, Iterable) or len(pair := tuple(value)) != 2:
        raise ConfigurationError(f"{where}: must be two numbers, low and high, not {brief(value)}")
    low, high = (_number(limit, where) for limit in pair)
    if low >= high:
        raise ConfigurationError(f"{where}: the low end {low:g} must lie below the high end {high:g}")
    return low, high


def _smallest_size(value: Any, where: str) -> float | None:
    if value is None:
        return None
    size = _number(value, where)
    if size <= 0:
        raise ConfigurationError(f"{where}: must be positive, not {size:g}")
    return size


def _switch(value: Any, where: str) -> bool:
    if not isinstance(value, bool):
        raise ConfigurationError(f"{where}: must be true or false, not {brief(value)}")
    return value


def _labels(value: Any, where: str) -> dict[str, Any]:
    if not isinstance(value, Mapping):
        raise ConfigurationError(f"{where}: must be a table of labels, not {brief(value)}")
    if not value:
        return {}
    from driftline.curves import Labels  # numpy comes with it, so only where it is needed

    kinds = {part.name: str(part.type) for part in fields(Labels)}
    checked = {}
    for name, label in value.items():
        if name not in kinds:
            raise ConfigurationError(f"{where}: unknown label {shown(name)}; {suggestion(name, kinds)}")
        checked[name] = _label(label, f"{where}.{name}", kinds[name])
    try:
        Labels(**checked)
    except InputError as reason:
        raise ConfigurationError(f"{where}: {reason.problem}") from reason
    return checked


def _label(value: Any, where: str, kind: str) -> Any:
    if "float" in kind:
        # TOML has no null, so the word none stands for it
        return None if value is None or value == "none" else _number(value, where)
    if not isinstance(value, str):
        raise ConfigurationError(f"{where}: must be text, not {brief(value)}")
    return value


_CHECKS: dict[str, Callable[[Any, str], Any]] = {
    "ansatze": _ansatze,
    "window": _window,
    "smallest_size": _smallest_size,
    "seed": lambda value, where: _whole(value, where, least=0, most=2**63 - 1),
    "quick": _switch,
    "jobs": lambda value, where: _whole(value, where, least=1, most=MAX_JOBS),
    "labels": _labels,
    "draws": lambda value, where: _whole(value, where, least=MIN_DRAWS, most=MAX_DRAWS),
    "forms": _forms,
    "input": InputOptions.of_table,
    "figure": FigureOptions.of_table,
}
