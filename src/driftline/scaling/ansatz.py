"""A scaling ansatz put together from its parts, and the names by which a user asks for one.

    y = A(L) [ F(x) + (L/L_min)^-omega G(x) ],      x = x(W, L)

The parts are the scaled variable x (a correlation length with a trajectory of the critical disorder, or a form without
one), the leading irrelevant term (`corrected`) and an amplitude L^kappa (`amplitude`, or `amplitude=VALUE` to hold the
exponent).  Names join with a colon: ``power-law``, ``power-law:corrected``, ``kt:linear-drift``.

On the irrelevant term: Slevin, Ohtsuki, PRL 82, 382 (1999).
"""

from __future__ import annotations

import difflib
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.errors import ConfigurationError
from driftline.scaling.forms import FIXED, FORMS, Critical, Form, typical_size
from driftline.scaling.lengths import LENGTHS
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogNormal, Normal
from driftline.scaling.trajectories import TRAJECTORIES, Hypothesis
from driftline.wording import shown

CORRECTED = "corrected"
AMPLITUDE = "amplitude"
AMPLITUDE_SD = 0.5


@dataclass(frozen=True)
class Ansatz:
    """One scaling form with the priors of its parameters; knows sizes and disorders, not the measured values.

    Use `parse_ansatz` to build one from its name.

    Parameters
    ----------
    name : str
        As `parse_ansatz` understands it.
    form : Form
        The scaled variable.
    corrected : bool
        Whether the leading irrelevant term is included.
    has_amplitude : bool
        Whether the model is multiplied by L^kappa.
    amplitude_exponent : float or None
        Exponent kappa of the amplitude where it is held; None where it is a parameter.
    parameters : tuple of Parameter
        In the order of the sampled coordinates.
    """

    name: str
    form: Form
    corrected: bool
    has_amplitude: bool
    amplitude_exponent: float | None
    parameters: tuple[Parameter, ...]

    @property
    def hypothesis(self) -> Hypothesis:
        """What it would mean if this form were true."""
        return self.form.hypothesis

    def on(self, curves: Curves) -> Ansatz:
        """The same ansatz with the priors that suit other curves."""
        return compose(self.name, curves, (self.form,))

    @property
    def formula(self) -> str:
        """One line for people."""
        function = "F(x) + (L/L_min)^-omega G(x)" if self.corrected else "F(x)"
        if self.has_amplitude:
            function = f"L^kappa_A [{function}]" if self.corrected else f"L^kappa_A {function}"
        return f"y = {function}, {self.form.formula}"

    def values(self, z: FloatArray) -> dict[str, FloatArray]:
        """Parameter values by name, each (batch, 1), from sampled coordinates `z`, shape (batch, parameters)."""
        return {p.name: p.prior.value(z[:, [i]]) for i, p in enumerate(self.parameters)}

    def scaled(self, z: FloatArray, size: FloatArray, disorder: FloatArray, sizes: FloatArray) -> FloatArray:
        """Scaled variable x, shape (batch, points), increasing with the disorder.

        Parameters
        ----------
        z : array, shape (batch, parameters)
            Sampled coordinates.
        size, disorder : array, shape (points,)
            Where the points are.
        sizes : array, shape (m,)
            The measured sizes; they fix the unit of size and the middle of a trajectory.
        """
        x = self.form.scaled(size, disorder, sizes, self.values(z))
        return np.broadcast_to(x, (len(z), size.size))

    def correction(self, z: FloatArray, size: FloatArray, sizes: FloatArray) -> FloatArray | None:
        """Weight (L/L_min)^-omega of the irrelevant term, shape (batch, points); None without correction."""
        if not self.corrected:
            return None
        return np.asarray(np.exp(-self.values(z)["omega"] * np.log(size / sizes[0])))

    def amplitude(self, z: FloatArray, size: FloatArray, sizes: FloatArray) -> FloatArray | None:
        """Factor (L/L_typical)^kappa of the whole model, shape (batch, points); None without amplitude."""
        if not self.has_amplitude:
            return None
        held = self.amplitude_exponent
        exponent = self.values(z)["kappa_A"] if held is None else np.full((len(z), 1), held)
        return np.asarray(np.exp(exponent * np.log(size / typical_size(sizes))))


def parse_ansatz(name: str, curves: Curves, forms: Iterable[Form] = ()) -> Ansatz:
    """The ansatz of this name with priors that suit these curves.

    Parameters
    ----------
    name : str
        Parts joined by colons.
    curves : Curves
        Measured data.
    forms : iterable of Form, optional
        Forms of the user's own that the name may begin with.

    Raises
    ------
    ConfigurationError
        If a part is unknown, given twice, does not fit the others, or the scaled variable is missing.

    Examples
    --------
    >>> import numpy as np
    >>> from driftline.curves import Curve, Curves
    >>> grid = np.linspace(1.0, 5.0, 9)
    >>> curves = Curves([Curve(L, grid, np.tanh((3 - grid) * L / 8), np.full(9, 0.01)) for L in (8, 12, 16)])
    >>> [p.name for p in parse_ansatz("power-law:corrected", curves).parameters]
    ['W_c', 'nu', 'omega']
    """
    ansatz = compose(name, curves, forms)
    ansatz.form.check(curves)
    return ansatz


def compose(name: str, curves: Curves, forms: Iterable[Form] = ()) -> Ansatz:
    """As `parse_ansatz`, without the check that a form of the user's own is defined on these curves."""
    own = {form.name: form for form in forms}
    check_ansatz_name(name, own.values())
    first, *rest = name.split(":")
    trajectory = TRAJECTORIES[next((part for part in rest if part in TRAJECTORIES), FIXED)]
    form = Critical(LENGTHS[first], trajectory) if first in LENGTHS else {**own, **FORMS}[first]
    corrected = CORRECTED in rest
    amplitude = next((part for part in rest if _is_amplitude(part)), None)
    exponent = float(amplitude.partition("=")[2]) if amplitude and "=" in amplitude else None
    parameters = [*form.parameters(curves)]
    if corrected:
        parameters.append(_omega())
    if amplitude and exponent is None:
        parameters.append(_kappa())
    return Ansatz(name, form, corrected, amplitude is not None, exponent, tuple(parameters))


def applicable(names: Iterable[str], curves: Curves) -> tuple[str, ...]:
    """Those of the `names` that make sense for these curves."""
    kept = []
    for name in names:
        try:
            parse_ansatz(name, curves)
        except ConfigurationError:
            continue
        kept.append(name)
    return tuple(kept)


def _omega() -> Parameter:
    return Parameter("omega", r"\omega", LogNormal.around(1.0, 0.5), "exponent of the leading irrelevant term")


def _kappa() -> Parameter:
    return Parameter("kappa_A", r"\kappa_A", Normal(0.0, AMPLITUDE_SD), "exponent of the amplitude")


def check_ansatz_name(name: str, forms: Iterable[Form] = ()) -> None:
    """Raise ConfigurationError if `parse_ansatz` would not understand this name."""
    first, *rest = name.split(":")
    known = [*LENGTHS, *FORMS, *(form.name for form in forms)]
    if first not in known:
        raise ConfigurationError(
            f"ansatz {shown(name, longest=80)} must begin with a scaled variable ({', '.join(known)})"
            + _suggestion(first, known)
        )
    parts = [*TRAJECTORIES, CORRECTED, AMPLITUDE] if first in LENGTHS else [CORRECTED, AMPLITUDE]
    for part in rest:
        if part not in parts and not _is_amplitude(part):
            raise ConfigurationError(
                f"ansatz {shown(name, longest=80)} has a part {shown(part)} that {first} does not take; it takes "
                f"{', '.join(parts)}" + _suggestion(part, parts)
            )
    kinds = ["trajectory" if part in TRAJECTORIES else part.partition("=")[0] for part in rest]
    if len(set(kinds)) < len(kinds):
        raise ConfigurationError(f"ansatz {shown(name, longest=80)} names a part twice; one of each kind is enough")


def _is_amplitude(part: str) -> bool:
    """Whether it is `amplitude` or `amplitude=NUMBER`."""
    word, equals, number = part.partition("=")
    if word != AMPLITUDE:
        return False
    try:
        return not equals or math.isfinite(float(number))
    except ValueError:
        return False


def _suggestion(word: str, choices: list[str]) -> str:
    close = difflib.get_close_matches(word, choices, n=1)
    return f"; did you mean {close[0]!r}?" if close else ""


def available(forms: Iterable[Form] = ()) -> tuple[str, ...]:
    """Every combination of scaled variable and correction on offer, simplest first; any takes `amplitude` as well."""
    drifts = ["", *(f":{name}" for name in TRAJECTORIES if name != FIXED)]
    variables = [f"{length}{drift}" for length in LENGTHS for drift in drifts]
    variables += [*FORMS, *(form.name for form in forms)]
    return tuple(f"{variable}{tail}" for variable in variables for tail in ("", f":{CORRECTED}"))


def describe(name: str, curves: Curves) -> Mapping[str, str]:
    """Formula, hypothesis and priors of one ansatz in words, for listings."""
    ansatz = parse_ansatz(name, curves)
    priors = "; ".join(f"{p.name}: {p.prior.describe()}" for p in ansatz.parameters)
    return {
        "name": name, "hypothesis": ansatz.hypothesis, "formula": ansatz.formula,
        "parameters": priors, "source": ansatz.form.source,
    }  # fmt: skip
