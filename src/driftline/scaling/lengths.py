"""How a correlation length is defined: the scaled variable x of each scaling form, increasing with the disorder.

A length turns the distance from the critical disorder, delta = W - W_c(L), and the size into x.  Any monotone map of
sgn(delta) L / xi(delta) gives the same collapse, since the scaling function is free; each class uses the one in which
the points spread most evenly.  Adding a length is one class and one entry in `LENGTHS`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogUniform

#: L/xi at which the bounded-slope map of exponential lengths turns from linear to logarithmic, in units of the typical
#: size over the shortest length: small enough that the decades of L/xi spread, large enough that x = 0 is no knot.
SOFTENING = 0.05


class CorrelationLength(ABC):
    """A form of xi(delta)."""

    name: str
    formula: str
    source: str
    #: mathtext of x as a format string; {W} becomes the disorder symbol
    label: str
    #: the formula in LaTeX, as a format string like `label`, and keys of its sources in `report/references.bib`
    tex: str
    citations: tuple[str, ...]

    @abstractmethod
    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        """Parameters with the priors that suit these curves."""

    @abstractmethod
    def scaled(self, delta: FloatArray, size: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        """Scaled variable, shape (batch, points).

        Parameters
        ----------
        delta : array, shape (batch, points)
            Distance from the critical disorder.
        size : array, shape (points,)
            Sizes, in units of a typical one, so that powers stay of order one.
        values : mapping of arrays, shape (batch, 1)
            Parameter values by name.
        """

    def unit(self, reference: float, values: Mapping[str, float]) -> float:
        """Factor from x with sizes in units of `reference` to x with sizes as measured, for axes that people read."""
        return 1.0


def _exponent(name: str, symbol: str, meaning: str) -> Parameter:
    return Parameter(name, symbol, LogUniform.between(0.2, 10.0), meaning)


@dataclass(frozen=True)
class PowerLaw(CorrelationLength):
    """xi = |W - W_c|^-nu, in the form x = (W - W_c) L^(1/nu) (Fisher, Barber, PRL 28, 1516 (1972))."""

    name = "power-law"
    formula = "xi = |W - W_c|^-nu"
    source = "Fisher, Barber, PRL 28, 1516 (1972)"
    label = r"({W} - {W}_c)\,L^{{1/\nu}}"
    tex = r"\xi = |{W} - {W}_c|^{{-\nu}}"
    citations = ("fisher1972",)

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return (_exponent("nu", r"\nu", "correlation-length exponent"),)

    def scaled(self, delta: FloatArray, size: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        return delta * np.exp(np.log(size) / values["nu"])

    def unit(self, reference: float, values: Mapping[str, float]) -> float:
        return float(reference ** (1 / values["nu"]))


@dataclass(frozen=True)
class AsymmetricPowerLaw(CorrelationLength):
    """xi = |W - W_c|^-nu with an exponent of its own on each side of W_c."""

    name = "power-law-asymmetric"
    formula = "xi = |W - W_c|^-nu_below for W < W_c, |W - W_c|^-nu_above for W > W_c"
    source = "Fisher, Barber, PRL 28, 1516 (1972), with one exponent a side"
    label = r"({W} - {W}_c)\,(L/L_0)^{{1/\nu_\pm}}"
    tex = r"\xi = |{W} - {W}_c|^{{-\nu_\pm}}"
    citations = ("fisher1972",)

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return (
            _exponent("nu_below", r"\nu_-", "exponent below W_c"),
            _exponent("nu_above", r"\nu_+", "exponent above W_c"),
        )

    def scaled(self, delta: FloatArray, size: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        nu = np.where(delta < 0, values["nu_below"], values["nu_above"])
        return np.asarray(delta * np.exp(np.log(size) / nu))


@dataclass(frozen=True)
class KosterlitzThouless(CorrelationLength):
    """xi = exp(b / sqrt|W - W_c|), with b on each side (Goremykina, Vasseur, Serbyn, PRL 122, 040601 (2019)).

    x = asinh of sgn(W - W_c) L/xi over a small number: bounded slope at W_c, logarithmic far from it.
    """

    name = "kt"
    formula = "xi = exp(b/sqrt|W - W_c|), b on each side"
    source = "Goremykina, Vasseur, Serbyn, PRL 122, 040601 (2019); Dumitrescu et al., PRB 99, 094205 (2019)"
    label = r"\mathrm{{sgn}}({W} - {W}_c)\,\mathrm{{asinh}}(c\,L/\xi)"
    tex = r"\xi = \exp(b_\pm/\sqrt{{|{W} - {W}_c|}})"
    citations = ("goremykina2019", "dumitrescu2019")

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        low, high = curves.disorder_range
        unit = float(np.sqrt(high - low))  # b has the dimension of the root of a disorder
        prior = LogUniform.between(0.1 * unit, 10 * unit)
        return (
            Parameter("b_below", "b_-", prior, "coefficient below W_c, root of a disorder"),
            Parameter("b_above", "b_+", prior, "coefficient above W_c, root of a disorder"),
        )

    def scaled(self, delta: FloatArray, size: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        b = np.where(delta < 0, values["b_below"], values["b_above"])
        root = np.sqrt(np.maximum(np.abs(delta), 1e-300))  # at W_c itself exp(-b/0) is 0, which 1e-300 gives as well
        # relative to the largest possible L/xi on the measured range, so that the softening means the same for any b
        return np.asarray(np.sign(delta) * np.arcsinh(size * np.exp(-b / root + _least(b, root)) / SOFTENING))


def _least(b: FloatArray, root: FloatArray) -> FloatArray:
    """Smallest b / root of each row, shape (batch, 1): ln xi at the point farthest from criticality."""
    return np.asarray(np.min(b / root, axis=1, keepdims=True))


LENGTHS: dict[str, CorrelationLength] = {
    length.name: length for length in (PowerLaw(), AsymmetricPowerLaw(), KosterlitzThouless())
}
