"""How a correlation length is defined: the scaled variable x of each scaling form, increasing with the disorder.

A length turns the distance from the critical disorder, delta = W - W_c(L), and the size into x.  Any monotone map of
sgn(delta) L / xi(delta) gives the same collapse, since the scaling function is free; each class uses the one in which
the points spread most evenly.  Adding a length is one class and one line in `LENGTHS`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogUniform


class CorrelationLength(ABC):
    """A form of xi(delta)."""

    name: str
    formula: str
    source: str
    #: mathtext of x as a format string; {W} becomes the disorder symbol
    label: str

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

    @abstractmethod
    def unit(self, reference: float, values: Mapping[str, float]) -> float:
        """Factor from x with sizes in units of `reference` to x with sizes as measured, for axes that people read."""


@dataclass(frozen=True)
class PowerLaw(CorrelationLength):
    """xi = |W - W_c|^-nu, in the form x = (W - W_c) L^(1/nu) (Fisher, Barber, PRL 28, 1516 (1972))."""

    name = "power-law"
    formula = "xi = |W - W_c|^-nu"
    source = "Fisher, Barber, PRL 28, 1516 (1972)"
    label = r"({W} - {W}_c)\,L^{{1/\nu}}"

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return (Parameter("nu", r"\nu", LogUniform.between(0.2, 10.0), "correlation-length exponent"),)

    def scaled(self, delta: FloatArray, size: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        return delta * np.exp(np.log(size) / values["nu"])

    def unit(self, reference: float, values: Mapping[str, float]) -> float:
        return float(reference ** (1 / values["nu"]))


LENGTHS: dict[str, CorrelationLength] = {length.name: length for length in (PowerLaw(),)}
