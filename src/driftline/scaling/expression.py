"""The user's own scaling form: x as a formula of W, L and named parameters with priors of the user's choice.

It composes like any other form: ``my-form``, ``my-form:corrected``, ``my-form:amplitude``.  The formula is arithmetic
and nothing else, see `driftline.scaling.arithmetic`.
"""

from __future__ import annotations

import keyword
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import get_args

import numpy as np
from scipy.stats import qmc

from driftline.curves import Curves, FloatArray
from driftline.errors import ConfigurationError
from driftline.scaling.ansatz import AMPLITUDE, CORRECTED
from driftline.scaling.arithmetic import RESERVED, Formula, parse_formula
from driftline.scaling.forms import FORMS, Form
from driftline.scaling.lengths import LENGTHS
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogNormal, LogUniform, Normal, Prior, Uniform
from driftline.scaling.trajectories import TRAJECTORIES, Hypothesis
from driftline.wording import brief

DISORDER, SIZE = "W", "L"
TAKEN_NAMES = (*LENGTHS, *FORMS, *TRAJECTORIES, CORRECTED, AMPLITUDE)
#: Parameters that the program adds by itself.
TAKEN_PARAMETERS = ("omega", "kappa_A", "tau", "s")
GREEK = (
    "alpha", "beta", "gamma", "delta", "epsilon", "zeta", "eta", "theta", "kappa", "mu", "nu", "xi", "rho", "sigma",
    "phi", "chi", "psi", "omega",
)  # fmt: skip

#: Priors that a configuration file can express.
PRIORS = (Uniform, LogUniform, Normal, LogNormal)

CHECK_POWER = 8  # 2^8 draws of the prior
#: Draws of the prior at which x is not defined count as impossible, which lowers the evidence by the logarithm of
#: their share; up to a tenth that is 0.1, which changes no conclusion.
MOST_UNDEFINED = 0.1


@dataclass(frozen=True)
class ExpressionForm(Form):
    """A scaled variable given as text.

    Parameters
    ----------
    name : str
        By which an ansatz asks for it: letters, digits, ``-`` and ``_``.
    x : str
        Scaled variable as arithmetic of W, L and the parameters. It should rise or fall with W throughout.
    hypothesis : {"transition", "drift", "none"}
        What it would mean if the form were true. A transition counts towards the headline if it has a parameter
        called ``W_c``, its critical disorder; ``nu`` is taken as the correlation-length exponent.
    priors : mapping of Prior
        Prior of each parameter by name, see `driftline.scaling.priors`.

    Raises
    ------
    ConfigurationError
        If a name, the formula, the hypothesis or a prior cannot be used.

    Examples
    --------
    >>> from driftline.scaling.priors import LogUniform, Uniform
        >>> priors = {"W_c": Uniform(2, 6), "nu": LogUniform.between(0.2, 10)}
    >>> ExpressionForm("my-form", "(W - W_c) * L**(1/nu)", "transition", priors).formula
    'x = (W - W_c) * L**(1/nu)'
    """

    name: str
    x: str
    hypothesis: Hypothesis
    priors: Mapping[str, Prior] = field(hash=False)

    source = "the user's own"
    label = "x"
    tex = ""  # the text of the formula stands for itself

    def __post_init__(self) -> None:
        _check_name(self.name)
        priors = dict(self.priors)
        for parameter, prior in priors.items():
            _check_parameter(self.name, parameter)
            _check_prior(self.name, parameter, prior)
        if self.hypothesis not in get_args(Hypothesis):
            choices = ", ".join(get_args(Hypothesis))
            raise ConfigurationError(
                f"form {self.name!r}: hypothesis must be one of {choices}, not {brief(self.hypothesis)}"
            )
        object.__setattr__(self, "priors", priors)
        object.__setattr__(self, "x", self._formula.text)
        self._check_use()

    @cached_property
    def _formula(self) -> Formula:
        try:
            return parse_formula(self.x, (DISORDER, SIZE, *self.priors))
        except ConfigurationError as reason:
            raise ConfigurationError(f"form {self.name!r}: x {reason}") from reason

    def _check_use(self) -> None:
        """Refuse what the text alone shows to be a mistake."""
        used = self._formula.names
        if DISORDER not in used:
            raise ConfigurationError(f"form {self.name!r}: x does not depend on the disorder W; put W into it")
        if SIZE not in used and self.hypothesis != "none":
            raise ConfigurationError(
                f"form {self.name!r}: x does not depend on the size L, so it cannot stand for a {self.hypothesis}; put "
                'L into it, or set hypothesis = "none"'
            )
        if unused := [parameter for parameter in self.priors if parameter not in used]:
            raise ConfigurationError(
                f"form {self.name!r}: x does not use the parameter {unused[0]!r}; put it into x or take its prior away"
            )

    @property
    def formula(self) -> str:  # type: ignore[override]
        return f"x = {self.x}"

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return tuple(Parameter(name, symbol(name), prior, "the user's own") for name, prior in self.priors.items())

    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        """Scaled variable, shape (batch, points); NaN or infinite where the formula is not defined."""
        return self._formula({**values, DISORDER: disorder, SIZE: size})

    def check(self, curves: Curves) -> None:
        """Refuse the form if x is undefined, or the same for every W, at draws of the prior on these curves."""
        size, disorder, _, _ = curves.flat()
        values = self._prior_draws()
        x = np.broadcast_to(self.scaled(size, disorder, curves.sizes, values), (2**CHECK_POWER, size.size))
        undefined = ~np.isfinite(x)
        bad = np.flatnonzero(undefined.any(axis=1))
        if bad.size > MOST_UNDEFINED * len(x):
            row, point = int(bad[0]), int(np.argmax(undefined[bad[0]]))
            example = _place(size[point], disorder[point], values, row)
            raise ConfigurationError(
                f"form {self.name!r}: x = {self.x} is not a finite number at {bad.size} of {len(x)} draws of its "
                f"priors, for example at {example}; change x or narrow the priors"
            )
        varies = [np.ptp(x[:, size == one], axis=1) > 0 for one in curves.sizes]
        if not np.any(varies):
            raise ConfigurationError(
                f"form {self.name!r}: x = {self.x} is the same for all disorders of a size; let it rise or fall with W"
            )

    def _prior_draws(self) -> dict[str, FloatArray]:
        """Values of each parameter, shape (draws, 1), spread evenly over the prior; always the same."""
        if not self.priors:
            return {}
        unit = qmc.Sobol(len(self.priors), scramble=False).random_base2(CHECK_POWER)
        unit = unit + 0.5 / len(unit)  # the middle of each cell, as the first point is the corner
        return {
            name: np.asarray(prior.value(prior.quantile(unit[:, [i]])))
            for i, (name, prior) in enumerate(self.priors.items())
        }


def symbol(name: str) -> str:
    """A parameter's name as mathtext: Greek letters by name, what follows an underscore as index.

    Examples
    --------
    >>> symbol("nu"), symbol("W_c"), symbol("a_below")
    ('\\\\nu', 'W_{c}', 'a_{\\\\mathrm{below}}')
    """
    letters, *index = (f"\\{p}" if p in GREEK else p if len(p) == 1 else rf"\mathrm{{{p}}}" for p in name.split("_"))
    return letters + (f"_{{{','.join(index)}}}" if index else "")


def _place(size: float, disorder: float, values: Mapping[str, FloatArray], row: int) -> str:
    numbers = {DISORDER: disorder, SIZE: size, **{name: value[row, 0] for name, value in values.items()}}
    return ", ".join(f"{name} = {value:.4g}" for name, value in numbers.items())


def _check_name(name: str) -> None:
    if not isinstance(name, str) or not re.fullmatch(r"[A-Za-z][A-Za-z0-9_-]{0,39}", name):
        raise ConfigurationError(
            f"form {name!r}: the name must be up to 40 letters, digits, - and _, and begin with a letter"
        )
    if name in TAKEN_NAMES:
        raise ConfigurationError(f"form {name!r}: the program has a part of this name itself; choose another name")


def _check_parameter(form: str, name: str) -> None:
    where = f"form {form!r}: parameter {name!r}"
    if not isinstance(name, str) or not re.fullmatch(r"[A-Za-z]([A-Za-z0-9_]{0,22}[A-Za-z0-9])?", name):
        raise ConfigurationError(
            f"{where}: the name must be up to 24 letters, digits and _, and begin with a letter; choose another name"
        )
    if name in (DISORDER, SIZE):
        raise ConfigurationError(f"{where}: {DISORDER} is the disorder and {SIZE} the size; choose another name")
    if name in RESERVED:
        raise ConfigurationError(f"{where}: this is the name of a function or constant; choose another name")
    if name in TAKEN_PARAMETERS:
        raise ConfigurationError(f"{where}: the program has a parameter of this name itself; choose another name")
    if keyword.iskeyword(name):
        raise ConfigurationError(f"{where}: this is a word of the Python language; choose another name")


def _check_prior(form: str, name: str, prior: Prior) -> None:
    if type(prior) not in PRIORS:
        kinds = ", ".join(kind.__name__ for kind in PRIORS)
        where = f"form {form!r}: parameter {name!r}"
        raise ConfigurationError(f"{where}: the prior must be one of {kinds}, not {brief(prior)}")
    with np.errstate(all="ignore"):
        ends = prior.value(prior.quantile(np.array([0.001, 0.999])))
    if not (np.isfinite(ends).all() and ends[0] < ends[1]):
        raise ConfigurationError(
            f"form {form!r}: parameter {name!r}: the prior ({prior.describe()}) has no width, or no finite ends"
        )
