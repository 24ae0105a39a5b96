"""A scaling ansatz put together from its parts, and the names by which a user asks for one.

    y = F(x) + (L/L_min)^-omega G(x),      x = x(W - W_c(L), L)

The parts are a correlation length, a trajectory of the critical disorder and, with `corrected`, the leading
irrelevant term.  Names join with a colon: ``power-law``, ``power-law:corrected``, ``power-law:linear-drift``.
"""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.errors import ConfigurationError
from driftline.scaling.lengths import LENGTHS, CorrelationLength
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogNormal
from driftline.scaling.trajectories import TRAJECTORIES, Hypothesis, Trajectory

CORRECTED = "corrected"
FIXED = "fixed"


@dataclass(frozen=True)
class Ansatz:
    """One scaling form with the priors of its parameters; knows sizes and disorders, not the measured values.

    Use `parse_ansatz` to build one from its name.
    """

    length: CorrelationLength
    trajectory: Trajectory
    corrected: bool
    parameters: tuple[Parameter, ...]

    @property
    def name(self) -> str:
        """The name that `parse_ansatz` understands."""
        parts = [self.length.name]
        if self.trajectory.name != FIXED:
            parts.append(self.trajectory.name)
        if self.corrected:
            parts.append(CORRECTED)
        return ":".join(parts)

    @property
    def hypothesis(self) -> Hypothesis:
        """What it would mean if this form were true."""
        return self.trajectory.hypothesis

    @property
    def formula(self) -> str:
        """One line for people."""
        function = "y = F(x) + (L/L_min)^-omega G(x)" if self.corrected else "y = F(x)"
        return f"{function}, {self.length.formula}, {self.trajectory.formula}"

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
        values = self.values(z)
        delta = disorder - self.trajectory.critical(size, sizes, values)
        return self.length.scaled(delta, size / np.sqrt(sizes[0] * sizes[-1]), values)

    def correction(self, z: FloatArray, size: FloatArray, sizes: FloatArray) -> FloatArray | None:
        """Weight (L/L_min)^-omega of the irrelevant term, shape (batch, points); None without correction."""
        if not self.corrected:
            return None
        return np.asarray(np.exp(-self.values(z)["omega"] * np.log(size / sizes[0])))


def _omega() -> Parameter:
    return Parameter("omega", r"\omega", LogNormal.around(1.0, 0.5), "exponent of the leading irrelevant term")


def parse_ansatz(name: str, curves: Curves) -> Ansatz:
    """The ansatz of this name with priors that suit these curves.

    Raises
    ------
    ConfigurationError
        If a part is unknown, given twice, or the correlation length is missing.

    Examples
    --------
    >>> import numpy as np
    >>> from driftline.curves import Curve, Curves
    >>> grid = np.linspace(1.0, 5.0, 9)
    >>> curves = Curves([Curve(L, grid, np.tanh((3 - grid) * L / 8), np.full(9, 0.01)) for L in (8, 12, 16)])
    >>> [p.name for p in parse_ansatz("power-law:corrected", curves).parameters]
    ['W_c', 'nu', 'omega']
    """
    parts = name.split(":")
    _check_parts(name, parts)
    length = LENGTHS[parts[0]]
    trajectory = TRAJECTORIES[next((part for part in parts[1:] if part in TRAJECTORIES), FIXED)]
    corrected = CORRECTED in parts
    irrelevant = (_omega(),) if corrected else ()
    parameters = trajectory.parameters(curves)
    first, shift = parameters[:1], parameters[1:]
    return Ansatz(length, trajectory, corrected, (*first, *length.parameters(curves), *shift, *irrelevant))


def check_ansatz_name(name: str) -> None:
    """Raise ConfigurationError if `parse_ansatz` would not understand this name."""
    _check_parts(name, name.split(":"))


def _check_parts(name: str, parts: list[str]) -> None:
    if parts[0] not in LENGTHS:
        raise ConfigurationError(
            f"ansatz {name!r} must begin with a correlation length ({', '.join(LENGTHS)})"
            + _suggestion(parts[0], list(LENGTHS))
        )
    known = [*TRAJECTORIES, CORRECTED]
    for part in parts[1:]:
        if part not in known:
            raise ConfigurationError(
                f"ansatz {name!r} has an unknown part {part!r}; the parts are {', '.join(known)}"
                + _suggestion(part, known)
            )
    if sum(part in TRAJECTORIES for part in parts[1:]) > 1 or len(set(parts)) < len(parts):
        raise ConfigurationError(f"ansatz {name!r} names a part twice; one trajectory and one `{CORRECTED}` are enough")


def _suggestion(word: str, choices: list[str]) -> str:
    close = difflib.get_close_matches(word, choices, n=1)
    return f"; did you mean {close[0]!r}?" if close else ""


def available() -> tuple[str, ...]:
    """Every name that the parts on offer make, simplest first."""
    drifts = ["", *(f":{name}" for name in TRAJECTORIES if name != FIXED)]
    return tuple(f"{length}{drift}{tail}" for length in LENGTHS for drift in drifts for tail in ("", f":{CORRECTED}"))


def describe(name: str, curves: Curves) -> Mapping[str, str]:
    """Formula, hypothesis and priors of one ansatz in words, for listings."""
    ansatz = parse_ansatz(name, curves)
    priors = "; ".join(f"{p.name}: {p.prior.describe()}" for p in ansatz.parameters)
    return {
        "name": name, "hypothesis": ansatz.hypothesis, "formula": ansatz.formula,
        "parameters": priors, "source": ansatz.length.source,
    }  # fmt: skip
