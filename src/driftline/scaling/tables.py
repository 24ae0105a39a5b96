"""The tables ``[ansatz.NAME]`` of a configuration file: how they become forms, and how forms become tables again.

    [ansatz.my-form]
    x = "(W - W_c) * L**(1/nu)"
    hypothesis = "transition"
    [ansatz.my-form.parameters]
    W_c = { prior = "uniform", low = 2, high = 6 }
    nu = { prior = "log-uniform", low = 0.2, high = 10 }

A prior is one entry in `KINDS`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any

import numpy as np

from driftline.errors import ConfigurationError
from driftline.scaling.expression import ExpressionForm
from driftline.scaling.priors import LogNormal, LogUniform, Normal, Prior, Uniform
from driftline.wording import brief, shown

Numbers = Mapping[str, float]


@dataclass(frozen=True)
class Kind:
    """A prior by the two numbers that a user gives.

    Parameters
    ----------
    type : type
        The class.
    keys : tuple of str
        Names of the numbers for the user.
    fields : tuple of str
        Names of the same in the class.
    logged : tuple of bool
        Whether the class keeps their logarithm.
    """

    type: Callable[[float, float], Prior]
    keys: tuple[str, str]
    fields: tuple[str, str]
    logged: tuple[bool, bool] = (False, False)

    @property
    def ends(self) -> bool:
        """Whether the numbers are two ends; else they are a centre and a standard deviation."""
        return self.fields[0] == "low"

    def build(self, numbers: tuple[float, float]) -> Prior:
        """The prior with these numbers of the user."""
        pairs = zip(numbers, self.logged, strict=True)
        return self.type(*(float(np.log(number)) if logged else number for number, logged in pairs))

    def numbers(self, prior: Prior) -> dict[str, float]:
        """The user's numbers of a prior, by key."""
        kept = [float(getattr(prior, field)) for field in self.fields]
        parts = zip(self.keys, kept, self.logged, strict=True)
        return {key: _unlogged(number) if logged else number for key, number, logged in parts}


KINDS: dict[str, Kind] = {
    "uniform": Kind(Uniform, ("low", "high"), ("low", "high")),
    "log-uniform": Kind(LogUniform, ("low", "high"), ("low", "high"), (True, True)),
    "normal": Kind(Normal, ("mean", "sd"), ("mean", "sd")),
    "log-normal": Kind(LogNormal, ("median", "sd"), ("mean", "sd"), (True, False)),
}
KEYS = ("x", "hypothesis", "parameters")


def read_forms(value: Any, where: str) -> tuple[ExpressionForm, ...]:
    """Forms from the tables of a file or from Python.

    Parameters
    ----------
    value : mapping or iterable
        Tables by name, as a TOML file gives them, or `ExpressionForm` objects.
    where : str
        The place, put in front of an error.

    Raises
    ------
    ConfigurationError
        If a table, a prior or a form cannot be used, or a name is given twice.
    """
    try:
        if isinstance(value, Mapping):
            forms = tuple(_form(name, table) for name, table in value.items())
        else:
            forms = tuple(_given(value))
        names = [form.name for form in forms]
        if twice := [name for name in names if names.count(name) > 1]:
            raise ConfigurationError(f"form {twice[0]!r} is given twice; give each form a name of its own")
    except ConfigurationError as reason:
        raise ConfigurationError(f"{where}: {reason}") from reason
    return forms


def form_table(form: ExpressionForm) -> dict[str, Any]:
    """The table that `read_forms` reads back as an equal form."""
    return {
        "x": form.x,
        "hypothesis": form.hypothesis,
        "parameters": {name: _prior_table(prior) for name, prior in form.priors.items()},
    }


def _given(value: Any) -> Iterable[ExpressionForm]:
    items = list(value) if isinstance(value, Iterable) and not isinstance(value, str) else [value]
    for item in items:
        if not isinstance(item, ExpressionForm):
            raise ConfigurationError(
                f"must hold a table [ansatz.NAME] for each form of your own, not {brief(item)}; the list of ansätze to "
                "run is called ansatze"
            )
    return items


def _form(name: str, table: Any) -> ExpressionForm:
    if isinstance(table, ExpressionForm) and table.name == name:
        return table
    where = f"form {name!r}"
    if not isinstance(table, Mapping):
        raise ConfigurationError(f"{where}: must be a table with {', '.join(KEYS)}, not {brief(table)}")
    _require_keys(table, KEYS, KEYS[:2], where)
    if not isinstance(table["x"], str):
        raise ConfigurationError(f"{where}: x must be text, not {brief(table['x'])}")
    parameters = table.get("parameters", {})
    if not isinstance(parameters, Mapping):
        raise ConfigurationError(f"{where}: parameters must be a table of priors by name, not {brief(parameters)}")
    priors = {each: _prior(given, f"{where}: parameter {each!r}") for each, given in parameters.items()}
    return ExpressionForm(name, table["x"], table["hypothesis"], priors)


def _prior(table: Any, where: str) -> Prior:
    if isinstance(table, Prior):
        return table
    example = '{ prior = "uniform", low = 2, high = 6 }'
    if not isinstance(table, Mapping) or "prior" not in table:
        raise ConfigurationError(f"{where}: must be a prior such as {example}, not {brief(table)}")
    name = table["prior"]
    if not isinstance(name, str) or name not in KINDS:
        kinds = ", ".join(KINDS)
        raise ConfigurationError(f"{where}: prior must be one of {kinds}, not {brief(name)}{_near(name, KINDS)}")
    kind = KINDS[name]
    _require_keys(table, ("prior", *kind.keys), kind.keys, where)
    first, second = (_number(table[key], f"{where}: {key}") for key in kind.keys)
    _check_numbers(kind, first, second, where)
    return kind.build((first, second))


def _check_numbers(kind: Kind, first: float, second: float, where: str) -> None:
    one, other = kind.keys
    if kind.logged[0] and first <= 0:
        raise ConfigurationError(f"{where}: {one} must be positive in a logarithmic prior, not {first:g}")
    if kind.ends and first >= second:
        raise ConfigurationError(f"{where}: {one} = {first:g} must lie below {other} = {second:g}")
    if not kind.ends and second <= 0:
        raise ConfigurationError(f"{where}: {other} must be positive, not {second:g}")


def _require_keys(table: Mapping[str, Any], known: tuple[str, ...], needed: tuple[str, ...], where: str) -> None:
    for key in table:
        if key not in known:
            keys = ", ".join(known)
            raise ConfigurationError(f"{where}: unknown key {shown(key)}{_near(key, known)}; known are {keys}")
    for key in needed:
        if key not in table:
            raise ConfigurationError(f"{where}: {key} is missing; give {' and '.join(needed)}")


def _number(value: Any, where: str) -> float:
    try:
        finite = isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
    except OverflowError:  # TOML knows whole numbers of any length
        finite = False
    if not finite:
        raise ConfigurationError(f"{where} must be a finite number, not {brief(value)}")
    return float(value)


def _near(word: Any, known: Iterable[str]) -> str:
    close = get_close_matches(str(word), list(known), n=1)
    return f", did you mean {close[0]!r}?" if close else ""


def _prior_table(prior: Prior) -> dict[str, Any]:
    name, kind = next(item for item in KINDS.items() if type(prior) is item[1].type)
    return {"prior": name, **kind.numbers(prior)}


def _unlogged(logarithm: float) -> float:
    """The shortest number with exactly this logarithm, so that a form read back gives the same numbers to the bit."""
    nearest = float(np.exp(logarithm))
    rounded = (float(f"{nearest:.{digits}g}") for digits in range(1, 18))
    around = (nearest + step * math.ulp(nearest) for step in (-2, -1, 1, 2))
    return next((value for value in (*rounded, *around) if value > 0 and float(np.log(value)) == logarithm), nearest)
