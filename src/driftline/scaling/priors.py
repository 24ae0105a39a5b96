"""Prior densities of single parameters, each in the coordinate in which it is sampled.

A positive parameter whose order of magnitude is unknown is sampled as its logarithm (`LogUniform`, `LogNormal`);
a location as it is (`Uniform`, `Normal`).  Adding a prior is one class here.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from driftline.curves import FloatArray

LOG_2PI = float(np.log(2 * np.pi))
#: Width of the central 68 % of a unit uniform and of a unit normal distribution
UNIFORM_68 = 0.68
NORMAL_68 = 2 * 0.994457883


class Prior(ABC):
    """A normalised density of one coordinate z; `value` turns coordinates into the parameter's own scale."""

    @abstractmethod
    def log_density(self, z: FloatArray) -> FloatArray:
        """Natural log of the density per unit of z; -inf outside the support."""

    @abstractmethod
    def quantile(self, u: FloatArray) -> FloatArray:
        """Coordinate below which a fraction `u` of the prior lies."""

    @abstractmethod
    def describe(self) -> str:
        """The prior in words, for people."""

    @property
    @abstractmethod
    def width68(self) -> float:
        """Width of the central 68 % in the coordinate, the yardstick of "set by the prior"."""

    def value(self, z: FloatArray) -> FloatArray:
        """Parameter value at coordinate `z`."""
        return z

    def coordinate(self, value: FloatArray) -> FloatArray:
        """Coordinate of a parameter value."""
        return value

    def density(self, value: FloatArray) -> FloatArray:
        """Density per unit of the parameter's own scale; zero outside the support."""
        return np.exp(self.log_density(value))


@dataclass(frozen=True)
class Uniform(Prior):
    """Flat between `low` and `high`."""

    low: float
    high: float

    def log_density(self, z: FloatArray) -> FloatArray:
        return np.where((z >= self.low) & (z <= self.high), -np.log(self.high - self.low), -np.inf)

    def quantile(self, u: FloatArray) -> FloatArray:
        return self.low + (self.high - self.low) * u

    def describe(self) -> str:
        return f"uniform from {self.low:g} to {self.high:g}"

    @property
    def width68(self) -> float:
        return UNIFORM_68 * (self.high - self.low)


@dataclass(frozen=True)
class Normal(Prior):
    """Gaussian around `mean` with standard deviation `sd`."""

    mean: float
    sd: float

    def log_density(self, z: FloatArray) -> FloatArray:
        return np.asarray(-0.5 * (((z - self.mean) / self.sd) ** 2 + LOG_2PI) - np.log(self.sd))

    def quantile(self, u: FloatArray) -> FloatArray:
        return self.mean + self.sd * np.asarray(ndtri(u))

    def describe(self) -> str:
        return f"normal around {self.mean:g} with sd {self.sd:g}"

    @property
    def width68(self) -> float:
        return NORMAL_68 * self.sd


class _Logarithmic(Prior):
    """Mixin: the coordinate is the natural logarithm of the parameter."""

    def value(self, z: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):  # far in the tails of a broad prior: infinite, and then impossible
            return np.exp(z)

    def coordinate(self, value: FloatArray) -> FloatArray:
        return np.log(value)

    def density(self, value: FloatArray) -> FloatArray:
        positive = np.where(value > 0, value, 1.0)
        return np.where(value > 0, np.exp(self.log_density(np.log(positive))) / positive, 0.0)


class LogUniform(_Logarithmic, Uniform):
    """Flat in ln(value) between ``exp(low)`` and ``exp(high)``; build with `between`."""

    @classmethod
    def between(cls, low: float, high: float) -> LogUniform:
        """Log-uniform prior of a value from `low` to `high`, both positive."""
        return cls(float(np.log(low)), float(np.log(high)))

    def describe(self) -> str:
        return f"log-uniform from {np.exp(self.low):.4g} to {np.exp(self.high):.4g}"


class LogNormal(_Logarithmic, Normal):
    """Gaussian in ln(value); build with `around`."""

    @classmethod
    def around(cls, median: float, sd: float) -> LogNormal:
        """Log-normal prior with this median and this standard deviation of the logarithm."""
        return cls(float(np.log(median)), sd)

    def describe(self) -> str:
        return f"log-normal around {np.exp(self.mean):.4g} with sd {self.sd:g} of the logarithm"
