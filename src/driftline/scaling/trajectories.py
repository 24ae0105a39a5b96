"""How the critical disorder moves with size: W_c(L).

Every moving trajectory is W_c(L) = W_mid + D g(L), where W_mid is the value at the middle size, D is the total shift
from the smallest to the largest measured size, and g rises by one between them.  All share one prior for D, so that
their evidences compare fairly.  Adding a trajectory is one entry in `TRAJECTORIES`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from driftline.curves import Curves, FloatArray
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import Normal, Uniform

Hypothesis = Literal["transition", "drift", "none"]

#: The critical disorder may lie outside the measured range by this part of it; further out the data cannot speak.
MARGIN = 0.25
#: Standard deviation of the total shift D in units of the measured disorder range.
SHIFT_SD = 0.25


class Trajectory(ABC):
    """A form of W_c(L)."""

    name: str
    formula: str
    hypothesis: Hypothesis
    #: the formula in LaTeX, as a format string; {W} becomes the disorder symbol
    tex: str

    @abstractmethod
    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        """Parameters with the priors that suit these curves."""

    @abstractmethod
    def critical(self, size: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        """W_c at each point: shape (batch, points), or (batch, 1) if it does not depend on size.

        `size`, shape (points,), is the size of each point; `sizes`, shape (m,), are the measured sizes in
        increasing order, which define the middle and the total shift.
        """

    def limit(self, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray | None:
        """W_c of the infinite system, shape (batch, 1), where it is finite and no parameter itself; else None."""
        return None


def _location(curves: Curves) -> Uniform:
    """Prior of a disorder: uniform over the measured range widened by a quarter on each side."""
    low, high = curves.disorder_range
    margin = MARGIN * (high - low)
    return Uniform(low - margin, high + margin)


@dataclass(frozen=True)
class Fixed(Trajectory):
    """One critical disorder for all sizes."""

    name = "fixed"
    formula = "W_c(L) = W_c"
    hypothesis = "transition"
    tex = "{W}_c(L) = {W}_c"

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        return (Parameter("W_c", "W_c", _location(curves), "critical disorder"),)

    def critical(self, size: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        return values["W_c"]


@dataclass(frozen=True)
class Drifting(Trajectory):
    """W_c(L) = W_mid + D [h(L) - h(L_mid)] / [h(L_max) - h(L_min)], with L_mid the middle of the measured sizes."""

    name: str
    formula: str
    hypothesis: Hypothesis
    tex: str
    shape: Callable[[FloatArray], FloatArray]
    shape_at_infinity: float | None = None

    def parameters(self, curves: Curves) -> tuple[Parameter, ...]:
        low, high = curves.disorder_range
        shift = Parameter("D", "D", Normal(0.0, SHIFT_SD * (high - low)), "shift of W_c from smallest to largest size")
        middle = Parameter("W_mid", r"W_\mathrm{mid}", _location(curves), "critical disorder of the middle size")
        return (middle, shift)

    def critical(self, size: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        return self._at(self.shape(size), sizes, values)

    def limit(self, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray | None:
        if self.shape_at_infinity is None:
            return None
        return self._at(np.array([self.shape_at_infinity]), sizes, values)

    def _at(self, shape: FloatArray, sizes: FloatArray, values: Mapping[str, FloatArray]) -> FloatArray:
        first, last = self.shape(sizes[[0, -1]])
        middle = self.shape(np.array([(sizes[0] + sizes[-1]) / 2]))[0]
        return np.asarray(values["W_mid"] + values["D"] * (shape - middle) / (last - first))


def _identity(size: FloatArray) -> FloatArray:
    return size


TRAJECTORIES: dict[str, Trajectory] = {
    trajectory.name: trajectory
    for trajectory in (
        Fixed(),
        Drifting("inverse-drift", "W_c(L) = a + b/L", "transition", "{W}_c(L) = a + b/L", np.reciprocal, 0.0),
        Drifting("log-drift", "W_c(L) = a + b ln L", "drift", r"{W}_c(L) = a + b\ln L", np.log),
        Drifting("linear-drift", "W_c(L) = a + b L", "drift", "{W}_c(L) = a + b L", _identity),
    )
}
