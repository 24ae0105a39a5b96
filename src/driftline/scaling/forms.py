"""The scaled variable x(W, L) as a whole: with a critical disorder, or with none at all.

`Critical` joins a correlation length with a trajectory of the critical disorder.  The other forms have no critical
disorder: what they explain needs no transition.  Adding one is one class and one entry in `FORMS`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.errors import ConfigurationError
from driftline.scaling.lengths import SOFTENING, CorrelationLength
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogUniform, Uniform
from driftline.scaling.trajectories import Hypothesis, Trajectory

FIXED = "fixed"


class Form(ABC):
    """x(W, L) with its parameters."""

    name: str
    formula: str
    source: str
    hypothesis: Hypothesis
    #: mathtext of x as a format string; {W} becomes the disorder symbol
    label: str
    #: the formula in LaTeX, as a format string like `label`, and keys of its sources in `report/references.bib`
    tex: str
    citations: tuple[str, ...] = ()

    @abstractmethod
    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        """Parameters with the priors that suit these curves.

        Raises
        ------
        ConfigurationError
            If the form makes no sense for these curves.
        """

    @abstractmethod
    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        """Scaled variable, shape (batch, points), increasing with the disorder.

        Parameters
        ----------
        size, disorder : array, shape (points,)
            Where the points are.
        sizes : array, shape (m,)
            The measured sizes; they fix the unit of size and the middle of a trajectory.
        values : mapping of arrays, shape (batch, 1)
            Parameter values by name.
        """

    def derived(self, sizes: FloatArray, values: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
        """Quantities to report that follow from the parameters, each of shape (batch, 1)."""
        return {}

    def unit(self, sizes: FloatArray, values: Mapping[str, float]) -> float:
        """Factor from x to the x of the label, for axes that people read."""
        return 1.0

    def check(self, curves: Curves) -> None:  # noqa: B027 - most forms are right by construction
        """Raise ConfigurationError if x cannot be computed for these curves."""


def typical_size(sizes: FloatArray) -> float:
    """Geometric mean of the smallest and largest size: the unit of size inside scaled variables."""
    return float(np.sqrt(sizes[0] * sizes[-1]))


@dataclass(frozen=True)
class Critical(Form):
    """A correlation length around a trajectory of the critical disorder."""

    length: CorrelationLength
    trajectory: Trajectory

    @property
    def name(self) -> str:  # type: ignore[override]
        moving = self.trajectory.name != FIXED
        return f"{self.length.name}:{self.trajectory.name}" if moving else self.length.name

    @property
    def formula(self) -> str:  # type: ignore[override]
        return f"{self.length.formula}, {self.trajectory.formula}"

    @property
    def source(self) -> str:  # type: ignore[override]
        return self.length.source

    @property
    def label(self) -> str:  # type: ignore[override]
        return self.length.label

    @property
    def tex(self) -> str:  # type: ignore[override]
        moving = self.trajectory.name != FIXED
        return f"{self.length.tex},\\ {self.trajectory.tex}" if moving else self.length.tex

    @property
    def citations(self) -> tuple[str, ...]:  # type: ignore[override]
        return self.length.citations

    @property
    def hypothesis(self) -> Hypothesis:  # type: ignore[override]
        return self.trajectory.hypothesis

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        critical, *shift = self.trajectory.parameters(curves)
        return (critical, *self.length.parameters(curves), *shift)

    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        delta = disorder - self.trajectory.critical(size, sizes, values)
        return self.length.scaled(delta, size / typical_size(sizes), values)

    def derived(self, sizes: FloatArray, values: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
        limit = self.trajectory.limit(sizes, values)
        return {} if limit is None else {"W_c": limit}

    def unit(self, sizes: FloatArray, values: Mapping[str, float]) -> float:
        return self.length.unit(typical_size(sizes), values)


def _require_positive(name: str, curves: Curves) -> tuple[float, float]:
    low, high = curves.disorder_range
    if low <= 0:
        raise ConfigurationError(
            f"ansatz {name!r} needs positive disorders, and the smallest is {low:g}; leave this ansatz out or set "
            "a window above zero"
        )
    return low, high


@dataclass(frozen=True)
class SizeRatio(Form):
    """x = W / L^kappa: the crossover grows as a power of the size (kappa = 1: the ratio W/L)."""

    name = "size-ratio"
    formula = "x = W/L^kappa"
    source = "Suntajs, Bonca, Prosen, Vidmar, PRB 102, 064207 (2020), for kappa = 1"
    hypothesis = "drift"
    label = r"{W}/L^{{\kappa}}"
    tex = r"x = {W}/L^{{\kappa}}"
    citations = ("suntajs2020",)

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        _require_positive(self.name, curves)
        return (Parameter("kappa", r"\kappa", Uniform(0.0, 2.0), "power of the size by which the crossover grows"),)

    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        return np.asarray(disorder * np.exp(-values["kappa"] * np.log(size / typical_size(sizes))))

    def unit(self, sizes: FloatArray, values: Mapping[str, float]) -> float:
        return float(typical_size(sizes) ** -values["kappa"])


class _FiniteLength(Form):
    """x = L/xi(W) with xi finite and falling for every W, in a map of bounded slope (asinh)."""

    hypothesis = "none"
    label = r"\mathrm{{asinh}}(c\,L/\xi({W}))"

    @abstractmethod
    def log_length(self, disorder: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        """ln xi up to a constant, shape (batch, points), falling with the disorder."""

    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        log_length = self.log_length(disorder, values)
        shortest = log_length.min(axis=1, keepdims=True)
        return np.asarray(np.arcsinh(size / typical_size(sizes) * np.exp(shortest - log_length) / SOFTENING))


@dataclass(frozen=True)
class FiniteLength(_FiniteLength):
    """ln xi = c (W_mid/W)^alpha with W_mid the geometric middle of the measured range."""

    name = "finite-length"
    formula = "x = L/xi(W), ln xi = c (W_mid/W)^alpha, finite for every W"
    source = "Abrahams et al., PRL 42, 673 (1979); L/xi scaling: MacKinnon, Kramer, Z. Phys. B 53, 1 (1983)"
    tex = r"x = L/\xi({W}),\ \ln\xi = c\,({W}_\mathrm{{mid}}/{W})^{{\alpha}}"
    citations = ("abrahams1979", "mackinnon1983")

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        _require_positive(self.name, curves)
        return (
            Parameter("c", "c", LogUniform.between(0.1, 30.0), "ln xi at the middle disorder"),
            Parameter("alpha", r"\alpha", LogUniform.between(0.1, 5.0), "power by which ln xi falls"),
        )

    def log_length(self, disorder: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        middle = np.sqrt(disorder.min() * disorder.max())
        return np.asarray(values["c"] * np.exp(-values["alpha"] * np.log(disorder / middle)))


@dataclass(frozen=True)
class FiniteLengthQuadratic(_FiniteLength):
    """ln xi a falling quadratic polynomial of ln W, given by its slopes at the two ends of the measured range."""

    name = "finite-length-quadratic"
    formula = "x = L/xi(W), ln xi = -p_1 ln W - p_2 (ln W)^2, falling over the whole range"
    source = "Abrahams et al., PRL 42, 673 (1979); low-order polynomial"
    tex = r"x = L/\xi({W}),\ \ln\xi = -p_1\ln {W} - p_2(\ln {W})^2"
    citations = ("abrahams1979",)

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        _require_positive(self.name, curves)
        prior = LogUniform.between(0.1, 50.0)
        return (
            Parameter("slope_low", "p_<", prior, "-d ln xi / d ln W at the smallest disorder"),
            Parameter("slope_high", "p_>", prior, "-d ln xi / d ln W at the largest disorder"),
        )

    def log_length(self, disorder: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        t = np.log(disorder / disorder.min())
        bend = (values["slope_high"] - values["slope_low"]) / (2 * t.max())
        return np.asarray(-values["slope_low"] * t - bend * t**2)


@dataclass(frozen=True)
class SizeIndependent(Form):
    """x = W: size does nothing."""

    name = "size-independent"
    formula = "x = W"
    source = "null hypothesis"
    hypothesis = "none"
    label = "{W}"
    tex = "x = {W}"

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return ()

    def scaled(
        self, size: FloatArray, disorder: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]
    ) -> FloatArray:
        return disorder


FORMS: dict[str, Form] = {
    form.name: form for form in (SizeRatio(), FiniteLength(), FiniteLengthQuadratic(), SizeIndependent())
}
