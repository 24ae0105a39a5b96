"""The synthetic truths by name, for the command line and the record of a simulated file.

Each is a class in `driftline.simulate`; to offer another, write it there and add a line to `TRUTHS`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from driftline.curves import MIN_DISORDERS, Curves, Labels
from driftline.errors import ConfigurationError, suggestion
from driftline.simulate import (
    DepartureTruth,
    FiniteLengthTruth,
    Gompertz,
    InverseDriftTruth,
    KosterlitzThoulessTruth,
    LinearDriftTruth,
    LogDriftTruth,
    Logistic,
    PowerLawTruth,
    ScalingFunction,
    SizeIndependentTruth,
    SizeRatioTruth,
    SlowTails,
    Truth,
    simulate,
)
from driftline.wording import shown

TRUTHS: dict[str, type[Truth]] = {
    "power-law": PowerLawTruth,
    "kt": KosterlitzThoulessTruth,
    "inverse-drift": InverseDriftTruth,
    "linear-drift": LinearDriftTruth,
    "log-drift": LogDriftTruth,
    "size-ratio": SizeRatioTruth,
    "departure": DepartureTruth,
    "finite-length": FiniteLengthTruth,
    "size-independent": SizeIndependentTruth,
}
FUNCTIONS: dict[str, type[ScalingFunction]] = {"logistic": Logistic, "gompertz": Gompertz, "slow-tails": SlowTails}

#: Parameters that have no meaning at zero or below: exponents, lengths and scales.
POSITIVE = ("nu", "omega", "b", "c", "alpha", "scale")
MOST_POINTS = 10_000
NO_VALUE = "none"
SEVERAL = ("correction",)  # given as numbers joined by commas

Value = float | tuple[float, ...]


def make_truth(name: str, parameters: Mapping[str, str] | None = None, function: str | None = None) -> Truth:
    """A truth with some of its parameters set.

    Parameters
    ----------
    name : str
        One of `TRUTHS`.
    parameters : mapping, optional
        Values as text by the names of the truth's fields and of its scaling function's (`high`, `low`, `scale`).
    function : str, optional
        One of `FUNCTIONS`, which takes over height and scale from the one that the truth has by default.

    Raises
    ------
    ConfigurationError
        If a name is unknown or a value cannot be used.

    Examples
    --------
    >>> make_truth("power-law", {"nu": "1.6", "scale": "3"}).nu
    1.6
    """
    truth: Any = _named(name, TRUTHS, "truth")()
    scaling = truth.scaling
    if function is not None:
        shape = {part.name: getattr(scaling, part.name) for part in fields(scaling)}
        scaling = _named(function, FUNCTIONS, "scaling function")(**shape)
    known = described(truth)
    given = {each: _value(each, text, name, known) for each, text in (parameters or {}).items()}
    inner = {part.name for part in fields(scaling)}
    scaling = replace(scaling, **{each: value for each, value in given.items() if each in inner})
    made: Truth = replace(truth, scaling=scaling, **{each: value for each, value in given.items() if each not in inner})
    return made


@dataclass(frozen=True)
class Synthetic:
    """Curves, the truth behind them, and how they were made."""

    curves: Curves
    truth: Truth
    error: float
    correlation: float
    seed: int

    def facts(self) -> dict[str, str | float]:
        """Truth and recipe by name, for the record beside the numbers."""
        scaling: ScalingFunction = self.truth.scaling  # type: ignore[attr-defined]
        values = {
            name: ",".join(map(repr, value)) or NO_VALUE if isinstance(value, tuple) else value
            for name, value in described(self.truth).items()
        }
        recipe = {name: getattr(self, name) for name in ("error", "correlation", "seed")}
        return {"truth": name_of(self.truth), **values, "function": name_of(scaling), **recipe}


def synthetic(
    truth: Truth,
    sizes: Sequence[float],
    *,
    disorder: tuple[float, float, int] = (1.0, 8.0, 21),
    error: float = 0.003,
    correlation: float = 0.0,
    seed: int = 0,
) -> Synthetic:
    """Curves of a truth on an even grid, all points with the same error.

    Parameters
    ----------
    truth : Truth
        For example from `make_truth`.
    sizes : sequence of float
        System sizes.
    disorder : (low, high, points)
        Ends and number of points of the disorder grid.
    error : float
        Standard error of each mean.
    correlation : float
        Correlation of any two points of one size.
    seed : int
        The same seed gives the same curves.

    Raises
    ------
    ConfigurationError, InputError
        If the grid or a number cannot be used.
    """
    low, high, points = disorder
    if not low < high or not math.isfinite(high - low):
        raise ConfigurationError(f"the disorder must run from a lower to a higher value, not from {low:g} to {high:g}")
    if not MIN_DISORDERS <= points <= MOST_POINTS:
        raise ConfigurationError(f"the disorder grid must have {MIN_DISORDERS} to {MOST_POINTS} points, not {points}")
    if seed < 0:
        raise ConfigurationError(f"the seed must be at least 0, not {seed}")
    shape = truth.scaling  # type: ignore[attr-defined]
    labels = Labels(observable="synthetic observable", ergodic_value=shape.high, localised_value=shape.low)
    grid = np.linspace(low, high, points)
    try:
        with np.errstate(all="ignore"):  # what is not finite is refused below
            curves = simulate(sizes, grid, truth, error, seed, correlation=correlation, labels=labels)
    except OverflowError as reason:
        raise ConfigurationError("the truth is too large to be computed; choose less extreme parameters") from reason
    return Synthetic(curves, truth, error, correlation, seed)


def described(truth: Truth) -> dict[str, Value]:
    """Every parameter of a truth and of its scaling function by name."""
    whole: Any = truth
    own = {part.name: getattr(whole, part.name) for part in fields(whole) if part.name != "scaling"}
    return {**own, **{part.name: getattr(whole.scaling, part.name) for part in fields(whole.scaling)}}


def name_of(part: Truth | ScalingFunction) -> str:
    """The name of a truth or of a scaling function in its registry."""
    registry: dict[str, Any] = TRUTHS if isinstance(part, Truth) else FUNCTIONS
    return next(name for name, kind in registry.items() if type(part) is kind)


def _named(name: str, registry: Mapping[str, type[Any]], what: str) -> type[Any]:
    if name not in registry:
        raise ConfigurationError(f"there is no {what} {shown(name)}; {suggestion(name, registry)}")
    return registry[name]


def _value(name: str, text: str, truth: str, known: Mapping[str, Value]) -> Value:
    if name not in known:
        raise ConfigurationError(f"truth {truth!r} has no parameter {shown(name)}; {suggestion(name, known)}")
    if name in SEVERAL and text == NO_VALUE:
        return ()
    numbers = [_number(name, each) for each in text.split(",")]
    if name in SEVERAL:
        return tuple(numbers)
    if len(numbers) != 1:
        raise ConfigurationError(f"parameter {name}: must be one number, not {shown(text)}")
    if name in POSITIVE and numbers[0] <= 0:
        raise ConfigurationError(f"parameter {name}: must be positive, not {numbers[0]:g}")
    return numbers[0]


def _number(name: str, text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise ConfigurationError(f"parameter {name}: must be a finite number, not {shown(text)}")
    return value
